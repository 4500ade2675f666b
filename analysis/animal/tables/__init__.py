"""The species tables: packaged data, one file a species, and their checked loading."""

from __future__ import annotations

import json
import math
from collections.abc import Iterable, Mapping
from functools import lru_cache
from importlib import resources
from types import MappingProxyType
from typing import Any

from analysis.animal.stage import AgeGate, Certainty, Figure, Gate, Remark, Stage
from analysis.errors import InvalidInputError

UNITS_BY_SUFFIX = {
    "_ppt_per_h": "ppt/h",
    "_ppt_per_d": "ppt/d",
    "_K_per_h": "K/h",
    "_mOsm_kg": "mOsm/kg",
    "_ppt": "ppt",
    "_degC": "degC",
    "_h": "h",
    "_slope": "1",
    "_alive": "1",
}
"""The unit that the end of a key promises."""

ALLOWED_RANGE = {
    "ppt": (0.0, 400.0),
    "mOsm/kg": (0.0, 4000.0),
    "degC": (-3.0, 60.0),
    "h": (0.01, 20000.0),
    "ppt/h": (0.0, 50.0),
    "ppt/d": (0.0, 100.0),
    "K/h": (0.0, 20.0),
    "1": (-1.0, 1.5),
}
"""What a figure may be, by unit: a guard against a slipped decimal point."""

_SIDES = tuple(
    f"{limit}_{side}_ppt" for limit in ("lethal", "tolerable", "optimal", "direct", "gradual", "incipient", "harmless")
    for side in ("low", "high")
)  # fmt: skip
KNOWN_KEYS = frozenset(
    (
        *_SIDES,
        *(f"{test}_{side}_{end}" for test in ("lethal", "direct", "harmless") for side in ("low", "high")
          for end in ("from_ppt", "h", "degC", "alive")),
        *(f"gradual_{side}_h" for side in ("low", "high")),
        *(f"{limit}_{side}_degC" for limit in ("lethal", "tolerable", "optimal") for side in ("low", "high")),
        "isosmotic_mOsm_kg", "isosmotic_ppt", "internal_mOsm_kg", "regulation_slope",
        "settle_h", "settle_degC", "tau_up_h", "tau_down_h",
        "tried_rate_ppt_per_h", "tried_rate_ppt_per_d", "tried_rate_K_per_h",
    )
)  # fmt: skip
GROUPS = (
    "penaeid", "decapod", "euryhaline-fish", "freshwater-fish", "bivalve", "conformer", "larval-conformer", "live-feed",
)  # fmt: skip


def unit_of(key: str) -> str:
    """Return the unit that the end of *key* promises, an empty text where it promises none."""
    return next((unit for suffix, unit in UNITS_BY_SUFFIX.items() if key.endswith(suffix)), "")


def checked_figure(key: str, raw: object, *, where: str, source_keys: frozenset[str] | None) -> Figure:
    """Return the figure written in *raw*.

    Parameters
    ----------
    key : str
        Name of the figure, for example ``lethal_low_ppt``.
    raw : object
        A mapping with ``value``, ``unit``, ``sources``, ``certainty`` and optionally ``note``, ``replaces``.
    where : str
        File and stage, for the message.
    source_keys : frozenset of str or None
        The sources that exist; None leaves them unchecked (a site's own figures).

    Raises
    ------
    InvalidInputError
        If the key, the unit, the value, the certainty or a source is not one of the table's own.
    """
    place = f"{where}, {key}"
    if key not in KNOWN_KEYS:
        raise InvalidInputError("figure", found=key, allowed=f"one of {', '.join(sorted(KNOWN_KEYS))}", where=where)
    if not isinstance(raw, Mapping):
        raise InvalidInputError(
            "figure", found=raw, allowed="a mapping with value, unit, sources, certainty", where=place
        )
    unit = unit_of(key)
    if raw.get("unit") != unit:
        raise InvalidInputError("unit", found=raw.get("unit"), allowed=unit, where=place)
    value = raw.get("value")
    low, high = ALLOWED_RANGE[unit]
    if isinstance(value, bool) or not isinstance(value, int | float) or not low <= value <= high:
        raise InvalidInputError("value", found=value, allowed=f"a number from {low:g} to {high:g} {unit}", where=place)
    try:
        certainty = Certainty(str(raw.get("certainty")))
    except ValueError as error:
        words = ", ".join(member.value for member in Certainty)
        raise InvalidInputError("certainty", found=raw.get("certainty"), allowed=words, where=place) from error
    sources = _checked_sources(raw.get("sources"), where=place, source_keys=source_keys)
    return Figure(float(value), unit, sources, certainty, str(raw.get("note", "")), str(raw.get("replaces", "")))


def _checked_sources(raw: object, *, where: str, source_keys: frozenset[str] | None) -> tuple[str, ...]:
    if not isinstance(raw, list | tuple) or not raw or not all(isinstance(key, str) for key in raw):
        raise InvalidInputError(
            "sources", found=raw, allowed="a list with at least one key of the sources", where=where
        )
    unknown = [key for key in raw if source_keys is not None and key not in source_keys]
    if unknown:
        raise InvalidInputError("sources", found=unknown, allowed="keys of sources.json", where=where)
    return tuple(raw)


def _checked_text(raw: Mapping[str, Any], key: str, *, where: str) -> str:
    value = raw.get(key)
    if not isinstance(value, str) or not value:
        raise InvalidInputError(key, found=value, allowed="a text", where=where)
    return value


GATE_KINDS = ("age", "size", "smolt window", "moult", "temperature", "chloride")


def _checked_gates(
    rows: Iterable[Mapping[str, Any]], *, where: str, source_keys: frozenset[str] | None
) -> tuple[Gate, ...]:
    gates = []
    for row in rows:
        if row.get("kind") not in GATE_KINDS:
            raise InvalidInputError("kind of gate", found=row.get("kind"), allowed=", ".join(GATE_KINDS), where=where)
        text = _checked_text(row, "text", where=f"{where}, gates")
        sources = _checked_sources(row.get("sources"), where=f"{where}, gates", source_keys=source_keys)
        gates.append(Gate(str(row["kind"]), text, sources, Certainty(row["certainty"])))
    return tuple(gates)


def _checked_age(raw: object, *, where: str) -> AgeGate | None:
    if raw is None:
        return None
    if not isinstance(raw, Mapping) or raw.get("since") not in ("hatch", "metamorphosis"):
        raise InvalidInputError("age", found=raw, allowed="since hatch or metamorphosis, from_d, to_d", where=where)
    to_d = raw.get("to_d")
    return AgeGate(str(raw["since"]), float(raw["from_d"]), math.inf if to_d is None else float(to_d))


def species_from_mapping(raw: Mapping[str, Any], *, file: str, source_keys: frozenset[str] | None) -> list[Stage]:
    """Return the stages of one species file, checked; the stages keep their order, youngest first.

    Raises
    ------
    InvalidInputError
        If a key is missing or a figure is not usable; the message names file, stage and key.
    """
    species_id = _checked_text(raw, "id", where=file)
    stages: list[Stage] = []
    for row in raw.get("stages") or ():
        where = f"{file}, stage {row.get('id')!r}"
        group = row.get("group")
        if group not in GROUPS:
            raise InvalidInputError("group", found=group, allowed=", ".join(GROUPS), where=where)
        figures = {
            key: checked_figure(key, value, where=where, source_keys=source_keys)
            for key, value in (row.get("figures") or {}).items()
        }
        remarks = tuple(
            Remark(
                _checked_text(remark, "text", where=f"{where}, remarks"),
                _checked_sources(remark.get("sources"), where=f"{where}, remarks", source_keys=source_keys),
                Certainty(remark["certainty"]),
            )
            for remark in row.get("remarks") or ()
        )
        stage = Stage(
            id=f"{species_id}/{_checked_text(row, 'id', where=where)}",
            species=_checked_text(raw, "species", where=file),
            common_name=_checked_text(row, "common_name", where=where),
            name=_checked_text(row, "name", where=where),
            group=group,
            regulation=_checked_text(row, "regulation", where=where),
            confidence=_checked_text(row, "confidence", where=where),
            figures=MappingProxyType(figures),
            aliases=tuple(f"{species_id}/{alias}" for alias in row.get("also") or ()),
            age=_checked_age(row.get("age"), where=where),
            remarks=remarks,
            gates=_checked_gates(row.get("gates") or (), where=where, source_keys=source_keys),
            notes=str(row.get("notes", "")),
            younger=tuple(reversed(stages)),
        )
        _check_order(stage, where=where)
        stages.append(stage)
    if not stages:
        raise InvalidInputError("stages", found=raw.get("stages"), allowed="at least one stage", where=file)
    return stages


def _check_order(stage: Stage, *, where: str) -> None:
    for unit in ("ppt", "degC"):
        low, high = stage.value(f"optimal_low_{unit}"), stage.value(f"optimal_high_{unit}")
        if low > high:
            raise InvalidInputError(f"optimal_low_{unit}", found=low, allowed=f"at most {high:g} {unit}", where=where)


@lru_cache(maxsize=1)
def sources() -> Mapping[str, Mapping[str, str]]:
    """Return the table of sources: key -> ``citation`` and ``found`` (where and how it was seen)."""
    text = resources.files(__name__).joinpath("sources.json").read_text(encoding="utf-8")
    table: dict[str, dict[str, str]] = json.loads(text)
    return MappingProxyType(table)


@lru_cache(maxsize=1)
def load() -> dict[str, Stage]:
    """Return every packaged stage by its id ``genus-species/stage``.

    Raises
    ------
    InvalidInputError
        If a file holds a key, unit or source that it must not hold; the message names file and key.
    """
    keys = frozenset(sources())
    stages: dict[str, Stage] = {}
    folder = resources.files(__name__)
    for file in sorted(entry.name for entry in folder.iterdir() if entry.name.endswith(".json")):
        if file == "sources.json":
            continue
        raw = json.loads(folder.joinpath(file).read_text(encoding="utf-8"))
        stages.update((stage.id, stage) for stage in species_from_mapping(raw, file=file, source_keys=keys))
    return stages


def find(animal: str, stages: Mapping[str, Stage] | None = None) -> Stage:
    """Return the stage called *animal*: an id, or one of its other names (``penaeus-vannamei/pl17``).

    Raises
    ------
    InvalidInputError
        If there is none; the message names the nearest ids.
    """
    table = load() if stages is None else stages
    wanted = animal.strip().lower()
    if wanted in table:
        return table[wanted]
    for stage in table.values():
        if wanted in stage.aliases:
            return stage
    raise InvalidInputError("animal", found=animal, allowed=f"for example {', '.join(nearest(wanted, table))}")


def nearest(animal: str, stages: Iterable[str], *, count: int = 4) -> list[str]:
    """Return the ids most like *animal*, the most alike first."""
    from difflib import get_close_matches

    ids = sorted(stages)
    same_species = [stage for stage in ids if stage.split("/", 1)[0] == animal.split("/", 1)[0]]
    alike = get_close_matches(animal, same_species or ids, n=count, cutoff=0.3)
    return alike or (same_species or ids)[:count]
