"""The site file: what is accepted, and how every kind of mistake is told."""

from __future__ import annotations

from datetime import date
from typing import TYPE_CHECKING

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analysis.animal import tables
from analysis.animal.overrides import with_overrides
from ingest.site import Problem, SiteFileError, load, load_text
from tests.ingest.site.examples import FULL, SMALL

if TYPE_CHECKING:
    from pathlib import Path

TANK = "  - {id: t1, name: Tank 1, volume_L: 800, set_point: {salinity: 30}}"


def problems_of(text: str, **options: list[str]) -> list[Problem]:
    with pytest.raises(SiteFileError) as caught:
        load_text(text, "lark.yaml", **options)
    return caught.value.problems


def changed(old: str, new: str, text: str = SMALL) -> str:
    assert old in text
    return text.replace(old, new)


def the_problem(text: str, **options: list[str]) -> Problem:
    problems = problems_of(text, **options)
    assert len(problems) == 1, problems
    return problems[0]


def test_a_small_file_is_filled_up_with_defaults() -> None:
    site = load_text(SMALL)
    sensor = site.sensor("t1-ct")
    assert site.id == "larkfen"
    assert site.client_id == "euryhale-larkfen"
    assert site.zone.key == "Europe/Lisbon"
    assert site.halls[0].id == site.tank("t1").hall == "main"
    assert site.identity.horizon.past_h == 8760
    assert (sensor.conductivity_unit, sensor.temperature_unit, sensor.reports) == ("mS/cm", "degC", "raw")
    assert sensor.topics() == {"larkfen/t1": ""}
    assert site.intake.largest_payload_bytes == 65_536


def test_a_full_file_says_what_it_says() -> None:
    site = load_text(FULL)
    sensor = site.sensor("l3-ct")
    assert site.client_id == "larkfen-worker"
    assert site.broker.protocol == "5"
    assert sensor.since == date(2026, 1, 1)
    assert sensor.span.conductivity_mS_cm == (0, 80)
    assert sensor.channels["oxygen"].field == "do.mg"
    assert site.sensor("intake-ct").topics() == {
        "larkfen/intake/ec": "conductivity",
        "larkfen/intake/temp": "temperature",
    }
    assert site.water_of(site.sensor("p1-ct")) == "borehole"
    assert site.water_of(site.sensor("intake-ct")) == "seawater"
    assert [one.id for one in site.sensors_of_tank("p1")] == ["p1-ct", "p1-low"]
    assert site.sensor_index["intake-ct"] == 1
    assert site.species[0].figures == {"tolerable_low_ppt": 6}


def test_a_site_cannot_be_changed() -> None:
    site = load_text(SMALL)
    with pytest.raises(ValueError, match="frozen"):
        site.tanks[0].volume_L = 3  # type: ignore[misc]


def test_all_problems_come_at_once_and_in_the_order_of_lines() -> None:
    text = changed("t1, name: Tank 1, volume_L: 800", "T 1, nam: Tank 1, volume_L: 800 L").replace("Lisbon}", "Lisbin}")
    problems = problems_of(text.replace("temp}", "temp, presure: p}"))
    assert [(one.line, one.key) for one in problems] == [
        (1, "site.time_zone"),
        (3, "tanks[1] (T 1).id"),
        (3, "tanks[1] (T 1).nam"),
        (3, "tanks[1] (T 1).name"),
        (3, "tanks[1] (T 1).volume_L"),
        (6, "sensors[1] (t1-ct).tank"),
        (8, "sensors[1] (t1-ct).fields.presure"),
    ]
    assert [one.nearest for one in problems] == ["Europe/Lisbon", "t-1", "name", "", "800", "T 1", "pressure"]


@pytest.mark.parametrize(
    ("old", "new", "line", "key", "allowed", "nearest"),
    [
        ("volume_L: 800", 'volume_L: "800"', 3, "tanks[1] (t1).volume_L", "number above 0", "800"),
        ("volume_L: 800", "volume_L: true", 3, "tanks[1] (t1).volume_L", "number above 0", ""),
        ("volume_L: 800", "volume_L: 010", 3, "tanks[1] (t1).volume_L", "number above 0", "10"),
        ("volume_L: 800", "volume_L: -3", 3, "tanks[1] (t1).volume_L", "number above 0", ""),
        ("volume_L: 800", "volume_L: .inf", 3, "tanks[1] (t1).volume_L", "number above 0", ""),
        ("volume_L: 800", "volume_L: null", 3, "tanks[1] (t1).volume_L", "number above 0", ""),
        ("volume_L: 800", "volume_L: '800,5'", 3, "tanks[1] (t1).volume_L", "number above 0", "800.5"),
        ("volume_L: 800", "volume_L: 800,5", 3, "tanks[1] (t1).5", "decimal point", ""),
        ("name: Tank 1", "name: 12", 3, "tanks[1] (t1).name", "text of 1 to 200", "'12' (in quotes)"),
        ("t1-ct", "T1 CT", 5, "sensors[1] (T1 CT).id", "lower-case letters", "t1-ct"),
        ("tank: t1", "tank: t7", 6, "sensors[1] (t1-ct).tank", "the id of a tank: t1", ""),
        ("tank: t1", "source_water: well", 6, "sensors[1] (t1-ct).source_water", "none yet", ""),
        ("    tank: t1\n", "", 5, "sensors[1] (t1-ct)", "tank or source_water", ""),
        ("    topic: larkfen/t1\n", "", 5, "sensors[1] (t1-ct).topic", "must be there", ""),
        ("larkfen/t1", "larkfen/+", 7, "sensors[1] (t1-ct).topic", "no wildcard", ""),
        ("larkfen/t1", "'larkfen/#'", 7, "sensors[1] (t1-ct).topic", "no wildcard", ""),
        ("larkfen/t1", "$SYS/x", 7, "sensors[1] (t1-ct).topic", "begin with $", ""),
        ("larkfen/t1", "euryhale/larkfen/t1", 7, "sensors[1] (t1-ct).topic", "the tool itself speaks", ""),
        ("larkfen/t1", "/larkfen/t1", 7, "sensors[1] (t1-ct).topic", "single slashes", ""),
        ("temp}", "temp}\n    conductivity_unit: us/cm", 9, "sensors[1] (t1-ct).conductivity_unit", "uS/cm", "uS/cm"),
        ("temp}", "temp}\n    temperature_unit: C", 9, "sensors[1] (t1-ct).temperature_unit", "degC", "degC"),
        ("temp}", "temp}\n    reports: compensated", 5, "sensors[1] (t1-ct).compensation", "1.91", ""),
        ("temp}", "temp}\n    since: 01.02.2026", 9, "sensors[1] (t1-ct).since", "2026-01-31", ""),
        ("temp}", "temp, time: ec}", 8, "sensors[1] (t1-ct).fields.time", "read once", ""),
        ("temp}", "a..b}", 8, "sensors[1] (t1-ct).fields.temperature", "single dots", ""),
        ("{conductivity: ec, temperature: temp}", "{time: t}", 8, "sensors[1] (t1-ct).fields", "at least one", ""),
        ("salinity: 30", "salinity: 30, band: 0", 3, "tanks[1] (t1).set_point.band", "above 0", ""),
        ("salinity: 30", "salinity: 3, band: 4", 3, "tanks[1] (t1).set_point.band", "no wider", ""),
        ("salinity: 30", "band: 4", 3, "tanks[1] (t1).set_point.band", "only beside a salinity", ""),
        ("salinity: 30", "tidal_band: [9, 8]", 3, "tanks[1] (t1).set_point.tidal_band", "low below high", ""),
        ("salinity: 30", "salinity: 3, tidal_band: [1, 8]", 3, "tanks[1] (t1).set_point.tidal_band", "not both", ""),
        ("salinity: 30", "tidal_band: [8,5, 9]", 3, "tanks[1] (t1).set_point.tidal_band", "decimal points", ""),
        ("salinity: 30}", "salinity: 30}, water: salt", 3, "tanks[1] (t1).water", "seawater, sodium-chloride", ""),
        ("salinity: 30}", "salinity: 30}, hall: north", 3, "tanks[1] (t1).hall", "the id of a hall: main", ""),
        ("Europe/Lisbon", "lisbon", 1, "site.time_zone", "IANA", "Europe/Lisbon"),
        ("Europe/Lisbon", "GMT+1h", 1, "site.time_zone", "IANA", "GMT+0"),
    ],
)
def test_a_single_mistake_is_told_with_line_key_and_what_is_allowed(
    old: str, new: str, line: int, key: str, allowed: str, nearest: str
) -> None:
    problem = the_problem(changed(old, new))
    assert (problem.file, problem.line, problem.key) == ("lark.yaml", line, key)
    assert allowed in problem.allowed
    assert problem.nearest == nearest


@pytest.mark.parametrize(
    ("text", "line", "allowed"),
    [
        (changed("    tank: t1", "\ttank: t1"), 6, "spaces only"),
        (changed("name: Larkfen", "name: Lark: fen"), 1, "in quotes"),
        (changed("    tank: t1", "    tank: t1: x"), 6, "in quotes"),
        (changed("tank: t1", "tank: @t1"), 6, "in quotes"),
        (changed("tank: t1", "tank: *t1"), 6, "in quotes"),
        (changed("tank: t1", "tank: 't1"), 6, "quote"),
        (changed("temp}", "temp"), 8, "closed"),
        (changed("tank: t1", "tank: t\x01"), 6, "printable"),
        (SMALL + "---\n" + SMALL, 9, "one document"),
        (changed("tank: t1", "tank: !x t1"), 6, "no !"),
        (changed("tank: t1", "tank: !!python/name:os.system t1"), 6, "no !"),
        ("a: " + "[" * 5000, 1, "levels"),
        ("a: " + "[" * 50 + "]" * 50, 1, "levels"),
        ("", 1, "sections of a site"),
        ("- a\n", 1, "sections of a site"),
        ("x" * 5_000_001, 1, "at most"),
    ],
)
def test_a_text_that_is_no_yaml_is_told_with_its_line(text: str, line: int, allowed: str) -> None:
    problems = problems_of(text)
    assert line in {problem.line for problem in problems}
    assert any(allowed in problem.allowed for problem in problems), problems


def test_every_line_with_a_tab_is_named() -> None:
    text = changed("    tank: t1\n    topic", "\ttank: t1\n\ttopic")
    assert [(one.line, one.found) for one in problems_of(text)] == [
        (6, "a tab before the first word"),
        (7, "a tab before the first word"),
    ]


def test_a_key_given_twice_is_a_problem_though_yaml_readers_take_the_last() -> None:
    problem = the_problem(changed("    tank: t1\n", "    tank: t1\n    tank: t2\n"))
    assert (problem.line, problem.key, problem.allowed) == (
        7,
        "sensors[1] (t1-ct).tank",
        "once (first in line 6)",
    )


def test_references_cannot_blow_the_file_up() -> None:
    problem = the_problem(changed("name: Tank 1", "name: &n Tank 1").replace("temperature: temp", "temperature: *n"))
    assert "no & and *" in problem.allowed


def test_ids_are_used_once() -> None:
    problems = problems_of(changed(TANK, TANK + "\n" + TANK))
    assert [(one.line, one.key, one.allowed) for one in problems] == [
        (4, "tanks[2] (t1).id", "an id used once (first in line 3)")
    ]


def test_two_sensors_cannot_share_a_topic() -> None:
    second = "  - {id: t1-b, tank: t1, topic: larkfen/t1, fields: {temperature: t}}\n"
    problem = the_problem(SMALL + second)
    assert (problem.line, problem.key) == (9, "sensors[2] (t1-b).topic")
    assert "line 7, sensors[1] (t1-ct).topic" in problem.allowed


def test_a_plain_number_topic_cannot_be_the_topic_of_another_sensor() -> None:
    second = "  - {id: t1-b, tank: t1, topic: larkfen, payload: number, fields: {temperature: t1}}\n"
    problem = the_problem(SMALL + second)
    assert problem.key == "sensors[2] (t1-b).fields.temperature"


def test_senml_sensors_share_a_topic_as_long_as_their_names_differ() -> None:
    assert len(load_text(FULL).sensors) == 4
    problem = the_problem(changed("conductivity: p2-ec", "conductivity: p1-ec", FULL))
    assert "SenML names that no other sensor has" in problem.allowed


def test_a_json_sensor_cannot_join_a_senml_topic() -> None:
    second = "  - {id: x, tank: p1, topic: larkfen/gateway, fields: {temperature: t}}\n"
    assert "a topic of its own" in the_problem(changed("species:\n", second + "species:\n", FULL)).allowed


def test_a_stocked_tank_needs_a_set_point() -> None:
    stock = "first_stock: {id: t1-a, animal: penaeus-monodon/pl15, number: 10, used_to_salinity: 30, since: 2026-02-01}"
    without = changed("set_point: {salinity: 30}", stock)
    assert "no alarm of its own" in the_problem(without).allowed
    tidal = changed("set_point: {salinity: 30}", "set_point: {tidal_band: [8, 30]}, " + stock)
    assert load_text(tidal).tanks[0].first_stock is not None


def test_an_animal_that_the_species_tables_do_not_hold_is_told() -> None:
    problem = the_problem(
        changed("animal: penaeus-vannamei/pl10, number", "animal: penaeus-vanamei/pl10, number", FULL)
    )
    assert (problem.key, problem.nearest) == ("tanks[1] (l3).first_stock.animal", "penaeus-vannamei/pl10")
    own = [problem.key for problem in problems_of(FULL, known_animals=["salmo-salar/smolt"])]
    assert own == ["tanks[1] (l3).first_stock.animal", "species[1] (penaeus-vannamei/pl10).animal"]


def test_a_figure_that_the_species_tables_do_not_hold_is_told() -> None:
    problem = the_problem(changed("tolerable_low_ppt", "tolerable_low", FULL))
    assert (problem.key, problem.nearest) == (
        "species[1] (penaeus-vannamei/pl10).figures.tolerable_low",
        "tolerable_low_ppt",
    )


def test_figures_come_out_as_the_species_tables_take_them() -> None:
    stages = with_overrides(tables.load(), load_text(FULL).species[0].entries())
    figure = stages["penaeus-vannamei/pl10"].figures["tolerable_low_ppt"]
    assert (figure.value, figure.sources) == (6, ("M. Lark",))


def test_an_analysis_whose_charges_do_not_balance_is_told() -> None:
    problem = the_problem(changed("Cl: 2600", "Cl: 260", FULL))
    assert (problem.line, problem.key) == (28, "analyses[1] (borehole).ions")
    assert "charge balance" in problem.allowed
    assert abs(load_text(FULL).analyses[0].ion_analysis().charge_error_percent) < 5


@pytest.mark.parametrize(
    ("old", "new", "key"),
    [
        ("method: linear", "method: natural-water", "sensors[1] (l3-ct).compensation.coefficient_percent_per_K"),
        ("coefficient_percent_per_K: 1.91, ", "", "sensors[1] (l3-ct).compensation.coefficient_percent_per_K"),
        ("reports: compensated", "reports: raw", "sensors[1] (l3-ct).compensation"),
        ("low: 4.5, high: null", "low: 4.5, high: 4", "sensors[1] (l3-ct).channels.oxygen.high"),
        ("oxygen: {", "pressure: {", "sensors[1] (l3-ct).channels.pressure"),
        ("conductivity_mS_cm: [0, 80]", "conductivity_mS_cm: [80, 0]", "sensors[1] (l3-ct).span.conductivity_mS_cm"),
        ("{conductivity: p1-ec", "{conductivity: p1 ec", "sensors[3] (p1-ct).fields.conductivity"),
        ("{Na: 1500", "{Ni: 1500", "analyses[1] (borehole).ions.Ni"),
        ("{Na: 1500", "{Na: -1", "analyses[1] (borehole).ions.Na"),
        ("tank: p1, topic: larkfen/gateway, payload: senml-cbor, fields: {conductivity: p1-ec, ",
         "tank: p1, topic: larkfen/gateway, payload: senml-cbor, fields: {time: q, conductivity: p1-ec, ",
         "sensors[3] (p1-ct).fields.time"),
    ],
)  # fmt: skip
def test_what_contradicts_itself_is_told(old: str, new: str, key: str) -> None:
    assert the_problem(changed(old, new, FULL)).key == key


def test_built_in_waters_cannot_be_redefined() -> None:
    problems = problems_of(FULL.replace("borehole", "seawater"))
    assert [one.key for one in problems] == ["analyses[1] (seawater).id"]


def test_files_that_cannot_be_read_are_problems_too(tmp_path: Path) -> None:
    with pytest.raises(SiteFileError, match="file that can be read"):
        load(tmp_path / "absent.yaml")
    (tmp_path / "latin.yaml").write_bytes(b"site:\n  name: Hatchery \xe9\n")
    with pytest.raises(SiteFileError, match=r"latin.yaml, line 2: .*0xe9.*UTF-8"):
        load(tmp_path / "latin.yaml")


def test_a_file_with_a_byte_order_mark_is_read(tmp_path: Path) -> None:
    path = tmp_path / "lark.yaml"
    path.write_bytes(b"\xef\xbb\xbf" + SMALL.encode())
    site = load(path)
    assert site.store.folder(path) == (tmp_path / "run" / "store").resolve()


def outcome(text: str) -> list[Problem]:
    """Return the problems of a text, none if it is accepted; any other exception fails the test."""
    try:
        load_text(text)
    except SiteFileError as error:
        return error.problems or pytest.fail("an error without a problem")
    return []


@settings(max_examples=150, deadline=None, derandomize=True)
@given(
    place=st.integers(0, len(SMALL) - 1),
    length=st.integers(0, 12),
    inserted=st.one_of(
        st.text(max_size=8),
        st.sampled_from(["&a ", "*a", "!!set ", "? ", "<<: ", "[", "{", "null", "1e999", "9" * 5000, "-", "\n", "\t"]),
    ),
)
def test_no_text_brings_out_anything_but_the_declared_error(place: int, length: int, inserted: str) -> None:
    text = SMALL[:place] + inserted + SMALL[place + length :]
    for problem in outcome(text):
        assert 1 <= problem.line <= text.count("\n") + 2
        assert problem.found
        assert problem.allowed
