"""How far the newest readings can be off: from a sensor's stated accuracy to salinity and osmolality on the screen."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from analysis.water.uncertainty import AccuracyArrays, SensorAccuracy, uncertainty_of_readings

if TYPE_CHECKING:
    from collections.abc import Mapping

    from analysis.water.properties import WaterKind
    from ingest.site.models import Site
    from ingest.site.sensors import Sensor
    from ingest.store.queries import Latest


class ReadingUncertainty(NamedTuple):
    """Plus or minus, in the coverage of the accuracy that the data sheet states; None where the reading has no value.

    Attributes
    ----------
    salinity : float or None
        In the scale of the reading: practical salinity, or g/kg in water that has none.
    osmolality_mOsm_kg : float or None
        With the part of the water model. [mOsm/kg water]
    salinity_from_conductivity, salinity_from_temperature : float or None
        The two shares of `salinity`.
    is_assumed : bool
        Whether the site file leaves a part of the accuracy open, so that 0.5 % of the reading or 0.1 K were taken (common practice).
    """

    salinity: float | None
    osmolality_mOsm_kg: float | None
    salinity_from_conductivity: float | None
    salinity_from_temperature: float | None
    is_assumed: bool


ASSUMED = SensorAccuracy()
"""Where the data sheet says nothing: 0.5 % of the reading and 0.1 K (common practice)."""


def accuracy_of(sensor: Sensor) -> tuple[SensorAccuracy, bool]:
    """Return the accuracy of a sensor, and whether a part of it is assumed because the site file does not state it."""
    own = sensor.accuracy
    has_conductivity = bool(own.conductivity_percent or own.conductivity_mS_cm)
    has_temperature = bool(own.temperature_K)
    accuracy = SensorAccuracy(
        conductivity_percent=own.conductivity_percent if has_conductivity else ASSUMED.conductivity_percent,
        conductivity_mS_cm=own.conductivity_mS_cm if has_conductivity else ASSUMED.conductivity_mS_cm,
        temperature_K=own.temperature_K if has_temperature else ASSUMED.temperature_K,
    )
    return accuracy, not (has_conductivity and has_temperature)


def latest_uncertainties(
    site: Site, kinds: Mapping[str, WaterKind], latest: Mapping[str, Latest]
) -> dict[str, ReadingUncertainty]:
    """Return the uncertainty of the newest reading of every sensor of the site that has one, by the sensor's id.

    Parameters
    ----------
    site : Site
    kinds : mapping of str to WaterKind
        The site's kinds of water (`ingest.water_kinds.kinds_of`).
    latest : mapping of str to Latest
        `ingest.store.queries.Queries.latest()`.

    Returns
    -------
    dict of str to ReadingUncertainty
    """
    by_kind: dict[str, list[Sensor]] = {}
    for sensor in site.sensors:
        if sensor.id in latest:
            by_kind.setdefault(site.water_of(sensor), []).append(sensor)
    found: dict[str, ReadingUncertainty] = {}
    for kind, sensors in by_kind.items():
        found |= _of_kind(kinds[kind], sensors, latest)
    return found


def _of_kind(kind: WaterKind, sensors: list[Sensor], latest: Mapping[str, Latest]) -> dict[str, ReadingUncertainty]:
    newest = [latest[sensor.id] for sensor in sensors]
    accuracies = [accuracy_of(sensor) for sensor in sensors]
    found = uncertainty_of_readings(
        np.array([row.conductivity_mS_cm for row in newest], dtype=np.float64),
        temperature_degC=np.array([row.temperature_degC for row in newest], dtype=np.float64),
        accuracy=AccuracyArrays.of([accuracy for accuracy, _ in accuracies]),
        kind=kind,
    )
    return {
        sensor.id: ReadingUncertainty(
            salinity=_number(found.salinity[index]),
            osmolality_mOsm_kg=_number(found.osmolality_mOsm_kg[index]),
            salinity_from_conductivity=_number(found.salinity_from_conductivity[index]),
            salinity_from_temperature=_number(found.salinity_from_temperature[index]),
            is_assumed=accuracies[index][1],
        )
        for index, sensor in enumerate(sensors)
    }


def _number(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None
