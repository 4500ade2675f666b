"""What a sensor sends is read back here with gsw and plain arithmetic alone."""

from __future__ import annotations

import gsw
import numpy as np
import pytest

from ingest.simulator.hatchery import Hatchery
from ingest.simulator.scenario import Scenario, SensorEvent
from ingest.simulator.sensors import SimulatedSensor
from tests.ingest.simulator.conftest import ANCHOR_US, HOUR_US
from tests.ingest.simulator.examples import one_tank

TIMES = ANCHOR_US + np.arange(-120, 120, dtype=np.int64) * 60_000_000


def simulated(site, *events: SensorEvent) -> SimulatedSensor:
    scenario = Scenario(sensor_events=events)
    water = Hatchery(site, scenario=scenario, seed=3, anchor_us=ANCHOR_US, start_us=ANCHOR_US - 24 * HOUR_US)
    return SimulatedSensor(site.sensors[0], number=0, hatchery=water, seed=3)


def sensor_event(kind, *, start_h=0.0, lasts_h=1.0, size=0.1):
    return SensorEvent(kind=kind, sensor="t1-ct", start_h=start_h, lasts_h=lasts_h, size=size)


def is_on(times):
    return (times >= ANCHOR_US) & (times < ANCHOR_US + HOUR_US)


LINES = [
    ("fields: {conductivity: c, temperature: t}", lambda c, t: (c, t)),
    ("fields: {conductivity: c, temperature: t}\n    conductivity_unit: uS/cm", lambda c, t: (c / 1000.0, t)),
    ("fields: {conductivity: c, temperature: t}\n    conductivity_unit: S/m", lambda c, t: (c * 10.0, t)),
    ("fields: {conductivity: c, temperature: t}\n    temperature_unit: degF", lambda c, t: (c, (t - 32.0) / 1.8)),
    ("fields: {conductivity: c, temperature: t}\n    temperature_unit: K", lambda c, t: (c, t - 273.15)),
    (
        "fields: {conductivity: c, temperature: t}\n    reports: compensated\n    compensation: {method: linear,"
        " coefficient_percent_per_K: 2.0, reference_temperature_degC: 20}",
        lambda c, t: (c * (1.0 + 0.02 * (t - 20.0)), t),
    ),
]


@pytest.mark.parametrize(("lines", "undo"), LINES)
def test_read_back_it_is_the_true_water(lines, undo):
    site = one_tank(lines)
    sensor = simulated(site)
    sent = sensor.sent(TIMES)
    true = Hatchery(
        site, scenario=Scenario(), seed=3, anchor_us=ANCHOR_US, start_us=ANCHOR_US - 24 * HOUR_US
    ).tank_water_at(0, TIMES.astype(float))
    conductivity, temperature = undo(sent.readings.conductivity, sent.readings.temperature)
    salinity = gsw.SP_from_C(conductivity, temperature, 0.0)
    assert np.median(abs(salinity - true.salinity)) < 0.1
    assert np.all(abs(salinity - true.salinity) < 0.25)
    assert np.all(abs(temperature - true.temperature_degC) < 0.08)


def test_a_bath_of_plain_salt_conducts_as_plain_salt():
    """0.5 % of NaCl by mass: 8.2 mS/cm at 20 degC (CRC Handbook, electrical conductivity of aqueous solutions, from
    memory), brought from the bath's 25 degC by 2.1 %/K."""
    site = one_tank(water="sodium-chloride", salinity=5.0)
    sent = simulated(site).sent(TIMES)
    at_20 = sent.readings.conductivity / (1.0 + 0.021 * (sent.readings.temperature - 20.0))
    assert np.median(at_20) == pytest.approx(8.2, rel=0.03)


def test_readings_do_not_depend_on_how_the_time_is_cut():
    sensor = simulated(one_tank(), sensor_event("noisy"), sensor_event("thermometer-stuck", start_h=0.5))
    whole = sensor.sent(TIMES).readings
    cut = [sensor.sent(part).readings for part in np.split(TIMES, [7, 100, 101, 190])]
    assert np.array_equal(np.concatenate([part.conductivity for part in cut]), whole.conductivity)
    assert np.array_equal(np.concatenate([part.temperature for part in cut]), whole.temperature)


def test_a_dry_probe_reads_next_to_nothing_and_the_air():
    quiet, dry = simulated(one_tank()).sent(TIMES), simulated(one_tank(), sensor_event("probe-dry")).sent(TIMES)
    on = is_on(TIMES)
    assert np.all(dry.readings.conductivity[on] < 0.03)
    assert np.all(dry.readings.temperature[on] < 23.0)
    assert np.array_equal(dry.readings.conductivity[~on], quiet.readings.conductivity[~on])


def test_fouling_takes_more_and_more_away():
    quiet, fouled = simulated(one_tank()).sent(TIMES), simulated(one_tank(), sensor_event("fouling")).sent(TIMES)
    on = is_on(TIMES)
    ratio = fouled.readings.conductivity[on] / quiet.readings.conductivity[on]
    assert ratio[0] == pytest.approx(1.0)
    assert np.all(np.diff(ratio) < 0.0)
    assert ratio[-1] == pytest.approx(0.9, abs=0.002)


def test_a_stuck_thermometer_says_the_same_all_the_time():
    stuck = simulated(one_tank(), sensor_event("thermometer-stuck")).sent(TIMES).readings.temperature
    on = is_on(TIMES)
    assert np.ptp(stuck[on]) == pytest.approx(0.0, abs=1e-9)
    assert np.ptp(stuck[~on]) > 0.01


def test_a_silent_probe_sends_nothing():
    sent = simulated(one_tank(), sensor_event("silent")).sent(TIMES)
    assert np.array_equal(sent.sent_at_us, TIMES[~is_on(TIMES)])


def test_noise_filler_and_unreadable_payloads():
    on = is_on(TIMES)
    quiet = simulated(one_tank()).sent(TIMES).readings.conductivity
    noisy = simulated(one_tank(), sensor_event("noisy")).sent(TIMES).readings.conductivity
    assert np.std(noisy[on]) > 20 * np.std(quiet[on])
    filled = simulated(one_tank(), sensor_event("filler")).sent(TIMES).readings.temperature
    assert 0.2 < np.mean(filled[on] == -99.9) < 0.6
    assert not np.any(filled[~on] == -99.9)
    assert np.array_equal(simulated(one_tank(), sensor_event("unreadable")).sent(TIMES).is_readable, ~on)


def test_a_wrong_clock_moves_the_stated_time_only():
    sent = simulated(one_tank(), sensor_event("clock-wrong", size=-1.0)).sent(TIMES)
    assert np.array_equal(sent.sent_at_us, TIMES)
    assert np.array_equal(sent.readings.time_us, TIMES - is_on(TIMES) * HOUR_US)


def test_further_channels_oxygen_from_the_water_and_others_between_their_limits():
    """Oxygen at saturation by Garcia and Gordon 1992, as gsw has it (umol/kg; 31.998 g/mol)."""
    lines = """fields: {conductivity: c, temperature: t}
    channels: {oxygen: {field: do, unit: mg/L, low: 4}, ph: {field: ph, low: 7.6, high: 8.4}}"""
    sent = simulated(one_tank(lines)).sent(TIMES)
    reference = gsw.SR_from_SP(31.0)
    saturated = gsw.O2sol_SP_pt(31.0, 25.0) * 31.998e-6 * gsw.rho_t_exact(reference, 25.0, 0.0)
    part = sent.readings.channels["channel/oxygen"] / saturated
    assert np.all((part > 0.82) & (part < 1.02))
    assert np.all((sent.readings.channels["channel/ph"] > 7.6) & (sent.readings.channels["channel/ph"] < 8.4))
    assert np.std(np.diff(part)) > 0.0
