"""From rows of the store to what the board shows of them."""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

from analysis.alarm.set_point import HALF_WIDTH
from dashboard.browser.beside import beside
from dashboard.browser.installed import Installed, blood_at_rest
from dashboard.browser.sights import (
    NO_DAY,
    AlarmSight,
    Band,
    DayLine,
    SensorSight,
    StressSight,
    TankSight,
)
from ingest.words.alarms import QUANTITY_OF_CODE, AlarmFacts

if TYPE_CHECKING:
    from collections.abc import Mapping

    from dashboard.browser.sights import Beside
    from ingest.chain.uncertainty import ReadingUncertainty
    from ingest.site.sensors import Sensor
    from ingest.site.tanks import Tank
    from ingest.store.alarms import AlarmRow
    from ingest.store.calibrations import HealthRow
    from ingest.store.queries import Latest, LatestChannel, LatestStress

STALE_INTERVALS = 3.0


def _number(value: float | None) -> float:
    return math.nan if value is None else float(value)


@dataclass(frozen=True, slots=True)
class Trust:
    """What is known of the sensors besides their readings, by the sensor's id."""

    uncertainties: Mapping[str, ReadingUncertainty] = field(default_factory=dict)
    channels: Mapping[str, Mapping[str, LatestChannel]] = field(default_factory=dict)
    health: Mapping[str, HealthRow] = field(default_factory=dict)


NO_TRUST = Trust()


def sensor_sight(sensor: Sensor, latest: Latest | None, what: Installed, trust: Trust = NO_TRUST) -> SensorSight:
    """Return a sensor of the site with its newest reading, and how far to believe it."""
    health, uncertainty = trust.health.get(sensor.id), trust.uncertainties.get(sensor.id)
    sight = SensorSight(
        id=sensor.id,
        name=sensor.name or sensor.id,
        tank=sensor.tank,
        source_water=sensor.source_water,
        interval_s=sensor.interval_s,
        stale_after_s=what.stale_after_s.get(sensor.id, max(60.0, STALE_INTERVALS * sensor.interval_s)),
        salinity_uncertainty=_number(None if uncertainty is None else uncertainty.salinity),
        belief=None if health is None else health.belief,
        reasons=() if health is None else tuple(health.body["reasons"]),
    )
    if latest is None:
        return sight
    salinity = latest.practical_salinity
    return replace(
        sight,
        measured_at_us=latest.measured_at,
        received_at_us=latest.received_at,
        conductivity_mS_cm=_number(latest.conductivity_mS_cm),
        temperature_degC=_number(latest.temperature_degC),
        salinity=_number(salinity if salinity is not None else latest.absolute_salinity_g_kg),
        osmolality_mOsm_kg=_number(latest.osmolality_mOsm_kg),
        density_kg_m3=_number(latest.density_kg_m3),
        flags=latest.flags,
        quality=latest.quality,
    )


def alarm_sight(row: AlarmRow, what: Installed) -> AlarmSight:
    """Return an alarm as it stands, with what is known about it."""
    body = row.body
    tank = row.subject.partition("/")[2]
    kind = QUANTITY_OF_CODE.get(row.condition, "")
    band = (what.temperature if kind == "temperature" else what.salinity).get(tank, Band())
    facts = AlarmFacts(
        code=row.condition,
        quantity=kind,
        value=_number(row.value),
        limit=_number(row.limit_value),
        set_point=band.target if kind else math.nan,
        band=band.half_width if kind else math.nan,
        since_us=row.raised_at,
        sensor=str(body.get("sensor", "")),
    )
    return AlarmSight(
        subject=row.subject,
        condition=row.condition,
        state=row.state,
        priority=row.priority,
        occurrence=row.occurrence,
        raised_at_us=row.raised_at,
        updated_at_us=row.updated_at,
        acknowledged_by=str(body.get("acknowledged_by", "")),
        acknowledged_at_us=int(body.get("acknowledged_at_us", 0)) or None,
        facts=facts,
    )


def tank_sights(
    what: Installed,
    *,
    latest: dict[str, Latest],
    alarms: tuple[AlarmSight, ...],
    days: dict[str, DayLine],
    stress: dict[str, LatestStress],
    now_us: int,
    trust: Trust = NO_TRUST,
) -> tuple[TankSight, ...]:
    """Return every tank of the site with all that is known about it."""
    site = what.site
    hall_names = {hall.id: hall.name for hall in site.halls}
    by_subject: dict[str, list[AlarmSight]] = {}
    for alarm in alarms:
        by_subject.setdefault(alarm.subject, []).append(alarm)
    sights = []
    for tank in site.tanks:
        sensors = tuple(sensor_sight(s, latest.get(s.id), what, trust) for s in site.sensors_of_tank(tank.id))
        band = what.salinity[tank.id]
        shown = shown_sensor(sensors, band, now_us)
        felt = stress.get(tank.id)
        animals = what.animals.get(tank.id)
        if animals is not None:
            animals = replace(animals, blood_mOsm_kg=_blood(animals.id, shown, felt))
        sights.append(
            TankSight(
                id=tank.id,
                name=tank.name,
                hall=tank.hall,
                hall_name=hall_names.get(tank.hall, tank.hall),
                volume_L=tank.volume_L,
                water=tank.water,
                salinity_unit="g/kg" if tank.water != "seawater" else "",
                salinity=band,
                temperature=what.temperature[tank.id],
                animals=animals,
                sensors=sensors,
                shown=shown,
                stress=_stress(felt),
                alarms=tuple(by_subject.get(f"tank/{tank.id}", ())),
                day=days.get(shown.id, NO_DAY) if shown is not None else NO_DAY,
                is_unwatched=shown is None or not (shown.is_fresh(now_us) and shown.is_believable),
                beside=_beside(what, tank, shown, trust),
            )
        )
    return tuple(sights)


def shown_sensor(sensors: tuple[SensorSight, ...], band: Band, now_us: int) -> SensorSight | None:
    """Return the sensor whose value stands for the tank: the believable one nearest to a limit, never an average.

    Without a believable fresh one: the one heard last, so that its age can be seen.
    """
    good = [s for s in sensors if s.is_fresh(now_us) and s.is_believable]
    if good:
        middle = band.target if math.isfinite(band.target) else (band.low + band.high) / 2
        half = band.half_width if math.isfinite(band.half_width) else HALF_WIDTH
        return max(good, key=lambda s: abs(s.salinity - middle) / half if math.isfinite(middle) else 0.0)
    heard = [s for s in sensors if s.measured_at_us is not None]
    return max(heard, key=lambda s: s.measured_at_us or 0, default=sensors[0] if sensors else None)


def _blood(animal: str, shown: SensorSight | None, felt: LatestStress | None) -> float | None:
    if felt is not None and felt.internal_mOsm_kg is not None:
        return felt.internal_mOsm_kg
    if shown is None or not animal:
        return None
    return blood_at_rest(animal, shown.osmolality_mOsm_kg)


def _stress(felt: LatestStress | None) -> StressSight | None:
    if felt is None or felt.stress is None:
        return None
    return StressSight(
        measured_at_us=felt.measured_at,
        stress=felt.stress,
        strains={
            "range": _number(felt.range_strain),
            "change": _number(felt.change_strain),
            "exposure": _number(felt.exposure_strain),
            "thermal": _number(felt.thermal_strain),
        },
        driver=felt.driver or "",
        gap_mOsm_kg=_number(felt.gap_mOsm_kg),
    )


def _beside(what: Installed, tank: Tank, shown: SensorSight | None, trust: Trust) -> Beside:
    units: dict[str, str] = {}
    values: dict[str, LatestChannel] = {}
    for sensor in what.site.sensors_of_tank(tank.id):
        units |= {name: channel.unit for name, channel in sensor.channels.items()}
        values |= trust.channels.get(sensor.id, {})
    short_of = what.short_of.get(tank.water, ())
    return beside(shown, water=tank.water, units=units, channels=values, short_of=short_of)
