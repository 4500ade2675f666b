from __future__ import annotations

import itertools
import json

import gsw
import numpy as np
import pytest

from ingest.payloads.decoder import Decoder
from ingest.payloads.reason import PayloadError
from ingest.simulator.feed import Feed, simulate
from ingest.simulator.scenario import Scenario
from ingest.site.loading import load_text
from tests.ingest.simulator.conftest import ANCHOR_US, HOUR_US
from tests.ingest.simulator.examples import one_tank

START_US = ANCHOR_US - 6 * HOUR_US


def history(site, scenario, **changes):
    arguments = {"start_us": START_US, "end_us": ANCHOR_US, "step_s": 120, "seed": 1, "scenario": scenario} | changes
    return list(simulate(site, **arguments))


def test_every_sensor_sends_at_its_step_and_all_in_the_order_of_time(demo_site):
    messages = history(demo_site, Scenario())
    times = [sent_at_us for sent_at_us, _, _ in messages]
    assert times == sorted(times)
    assert times[0] >= START_US
    assert times[-1] < ANCHOR_US
    for sensor in demo_site.sensors:
        own = [sent_at_us for sent_at_us, topic, _ in messages if topic == sensor.topic]
        assert len(own) == 180, sensor.id
        assert set(np.diff(own)) == {120_000_000}


def test_without_a_step_each_sensor_keeps_its_own_interval():
    messages = history(one_tank(), Scenario(), step_s=None)
    assert len(messages) == 360


def test_the_same_seed_gives_the_same_bytes(demo_site, demo_scenario):
    assert history(demo_site, demo_scenario) == history(demo_site, demo_scenario)
    assert history(demo_site, demo_scenario) != history(demo_site, demo_scenario, seed=2)


def test_pieces_put_together_are_the_whole(demo_site, demo_scenario):
    whole = history(demo_site, demo_scenario)
    feed = Feed(demo_site, START_US, 1, demo_scenario, ANCHOR_US)
    cuts = [START_US, START_US + 1, START_US + HOUR_US, START_US + 5 * HOUR_US + 777_777, ANCHOR_US]
    pieces = [list(feed.between(start, end, step_s=120)) for start, end in itertools.pairwise(cuts)]
    assert list(itertools.chain(*pieces)) == whole


def test_forgetting_does_not_change_what_comes(demo_site, demo_scenario):
    def two_hours(*, is_forgetful):
        feed = Feed(demo_site, START_US, 1, demo_scenario, ANCHOR_US)
        for number in range(6):
            start = ANCHOR_US + 2 * HOUR_US + number * HOUR_US // 3
            yield from feed.between(start, start + HOUR_US // 3, step_s=60)
            if is_forgetful:
                feed.forget_before(start)

    assert list(two_hours(is_forgetful=True)) == list(two_hours(is_forgetful=False))


def test_the_intake_understands_every_payload_of_the_demo(demo_site):
    """Read back with gsw and plain arithmetic, the first reading of each tank is at its set point."""
    decoder = Decoder(demo_site)
    for sent_at_us, topic, payload in history(demo_site, Scenario(), end_us=START_US + HOUR_US // 30):
        decoded = decoder.decode(topic, payload, received_at_us=sent_at_us)
        (reading,) = decoded.readings
        sensor = demo_site.sensors[reading.sensor]
        assert sensor.topic == topic
        assert abs(reading.measured_at_us - sent_at_us) < 1000
        tank = demo_site.tank(sensor.tank) if sensor.tank else None
        if tank is None or tank.water != "seawater" or tank.set_point is None or tank.set_point.salinity is None:
            continue
        scale = {"mS/cm": 1.0, "uS/cm": 1e-3, "S/m": 10.0}[sensor.conductivity_unit]
        temperature = {
            "degC": reading.temperature,
            "degF": (reading.temperature - 32) / 1.8,
            "K": reading.temperature - 273.15,
        }[sensor.temperature_unit]
        conductivity = reading.conductivity * scale
        if sensor.compensation:
            conductivity *= 1 + sensor.compensation.coefficient_percent_per_K / 100 * (temperature - 25)
        salinity = gsw.SP_from_C(conductivity, temperature, 0.0)
        assert salinity == pytest.approx(tank.set_point.salinity, abs=0.5), sensor.id


def test_the_demo_begins_with_one_urgent_one_soon_and_the_rest_quiet(demo_site, demo_scenario):
    """At the end of the history the fresh water has just begun; ten minutes later the tank is far out of its band."""
    feed = Feed(demo_site, ANCHOR_US - 14 * 24 * HOUR_US, 1, demo_scenario, ANCHOR_US)
    out = {}
    for minutes in (0, 10):
        moment = np.array([ANCHOR_US + minutes * 60e6])
        for number, tank in enumerate(demo_site.tanks):
            water = feed._hatchery.tank_water_at(number, moment)
            point = tank.set_point
            low, high = point.tidal_band or (point.salinity - point.band, point.salinity + point.band)
            is_salinity_out = not low <= water.salinity[0] <= high
            is_temperature_out = point.temperature_degC is not None and (
                abs(water.temperature_degC[0] - point.temperature_degC) > point.temperature_band_K
            )
            if is_salinity_out or is_temperature_out:
                out.setdefault(minutes, set()).add(tank.id)
    assert out == {0: {"l1"}, 10: {"l1", "l3"}}


def test_some_payloads_of_the_demo_are_unreadable_on_purpose(demo_site, demo_scenario):
    decoder, refused = Decoder(demo_site), 0
    around = {"start_us": ANCHOR_US - 102 * HOUR_US, "end_us": ANCHOR_US - 100 * HOUR_US, "anchor_us": ANCHOR_US}
    for sent_at_us, topic, payload in history(demo_site, demo_scenario, step_s=60, **around):
        try:
            decoder.decode(topic, payload, received_at_us=sent_at_us)
        except PayloadError:
            refused += 1
    assert 0 < refused < 20


def test_a_site_with_no_tank_but_a_probe_in_its_intake():
    site = load_text(
        """
site: {id: sandbank, name: Sandbank, time_zone: Europe/Lisbon}
source_waters: [{id: intake, name: Intake}, {id: well, name: Well, salinity: 38, temperature_degC: 19}]
sensors:
  - {id: i-ct, source_water: intake, topic: s/i, interval_s: 60, fields: {conductivity: c, temperature: t, time: at}}
  - {id: w-ct, source_water: well, topic: s/w, interval_s: 60, fields: {conductivity: c, temperature: t, time: at}}
"""
    )
    messages = history(site, Scenario())
    well = json.loads(next(payload for _, topic, payload in messages if topic == "s/w"))
    assert gsw.SP_from_C(well["c"], well["t"], 0.0) == pytest.approx(38.0, abs=0.2)
    assert len(messages) == 360
