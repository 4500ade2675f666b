"""Readings, stress and alarms as lines of the InfluxDB line protocol: measurement, tags, fields, time in microseconds."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence

    from ingest.store.block import Occurrence, StressRow
    from ingest.store.readings import ReadingRows

READING_FIELDS = (
    "conductivity_mS_cm",
    "temperature_degC",
    "practical_salinity",
    "absolute_salinity_g_kg",
    "density_kg_m3",
    "osmolality_mOsm_kg",
)
STRESS_FIELDS = (
    "stress",
    "range_strain",
    "change_strain",
    "exposure_strain",
    "thermal_strain",
    "acclimated_mOsm_kg",
    "internal_mOsm_kg",
    "gap_mOsm_kg",
)


def tag(value: str) -> str:
    """Return *value* as a tag: commas, spaces and equals signs escaped, line breaks made spaces."""
    plain = value.replace("\n", " ").replace("\r", " ").rstrip("\\")
    return plain.replace(",", "\\,").replace(" ", "\\ ").replace("=", "\\=")


def text(value: str) -> str:
    """Return *value* as a string field."""
    plain = value.replace("\\", "\\\\").replace('"', '\\"').replace("\n", " ")
    return f'"{plain}"'


def _number(name: str, value: float | None) -> str | None:
    """Return a float field, None where there is no number: the protocol has no word for "not known"."""
    return None if value is None or not math.isfinite(value) else f"{name}={value!r}"


def reading_lines(rows: ReadingRows, *, tags: Sequence[str]) -> list[str]:
    """Return a line for each reading.

    Parameters
    ----------
    rows : ReadingRows
    tags : sequence of str
        For each row its measurement and tags, ready made: ``reading,site=...,sensor=...``.
    """
    columns = [getattr(rows, name).tolist() for name in READING_FIELDS]
    lines = []
    for index, (head, time_us, flags, quality) in enumerate(
        zip(tags, rows.measured_at.tolist(), rows.flags.tolist(), rows.quality.tolist(), strict=True)
    ):
        fields = [f"flags={flags}i", f"quality={quality}i"]
        for name, column in zip(READING_FIELDS, columns, strict=True):
            field = _number(name, column[index])
            if field is not None:
                fields.append(field)
        lines.append(f"{head} {','.join(fields)} {time_us}")
    return lines


def stress_lines(rows: Iterable[StressRow], *, tags: Mapping[int, str]) -> list[str]:
    """Return a line for each row of what animals felt; *tags* by the store's number of the tank."""
    lines = []
    for row in rows:
        fields = [field for name in STRESS_FIELDS if (field := _number(name, getattr(row, name))) is not None]
        if row.band is not None:
            fields.append(f"band={text(row.band)}")
        if fields:
            lines.append(f"stress,{tags[row.tank]},cohort={tag(row.cohort)} {','.join(fields)} {row.measured_at}")
    return lines


def alarm_lines(occurrences: Iterable[Occurrence], *, site: str) -> list[str]:
    """Return a line for each event of an alarm."""
    lines = []
    for occurrence in occurrences:
        event = occurrence.event
        if not event.kind.startswith("alarm."):
            continue
        body: dict[str, Any] = event.body
        fields = [
            f"happening={text(event.kind.removeprefix('alarm.'))}",
            f"priority={text(str(body['priority']))}",
            f"actor={text(event.actor)}",
        ]
        value = _number("value", body.get("value"))
        if value is not None:
            fields.append(value)
        head = f"alarm,site={tag(site)},subject={tag(event.subject)},condition={tag(body['condition'])}"
        lines.append(f"{head} {','.join(fields)} {event.measured_at or event.recorded_at}")
    return lines
