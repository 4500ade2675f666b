"""The packaged species tables and their checked loading."""

from __future__ import annotations

import copy
import json
import math
import re
from importlib import resources

import pytest

from analysis.animal import tables
from analysis.animal.fallback_rules import RULES, osmolality_from_ppt
from analysis.animal.fallbacks import resolved
from analysis.animal.overrides import with_overrides, with_species
from analysis.animal.stage import Certainty, Supports
from analysis.errors import InvalidInputError

STAGES = tables.load()


def raw_species(name: str) -> dict:
    return json.loads(resources.files(tables).joinpath(f"{name}.json").read_text(encoding="utf-8"))


def test_every_stage_of_the_facts_is_there():
    assert len(STAGES) == 134
    assert len({stage.id.split("/")[0] for stage in STAGES.values()}) == 65
    assert all(re.fullmatch(r"[a-z]+(-[a-z]+)+/[a-z0-9]+(-[a-z0-9]+)*", key) for key in STAGES)


def test_no_figure_without_a_source_reaches_the_screen_unmarked():
    known = set(tables.sources())
    for stage in STAGES.values():
        for key, figure in stage.figures.items():
            assert figure.sources, (stage.id, key)
            assert set(figure.sources) <= known, (stage.id, key)
            assert figure.mark.startswith(figure.certainty.value)
        for key, figure in resolved(stage).figures.items():
            assert figure.sources or (figure.certainty is Certainty.ASSUMED and figure.note), (stage.id, key)
            assert figure.certainty.value in figure.mark


def test_an_assumed_limit_names_a_rule_of_the_table_of_fallbacks():
    limits = re.compile(r"(optimal|tolerable|level)_(low|high)$")
    for stage in STAGES.values():
        for key, figure in resolved(stage).figures.items():
            if limits.match(key) and figure.certainty is Certainty.ASSUMED:
                assert figure.note.split(":")[0] in RULES, (stage.id, key, figure.note)


@pytest.mark.parametrize(
    ("animal", "key", "value", "certainty"),
    [
        ("penaeus-vannamei/pl1", "lethal_low_ppt", 16.8, Certainty.LOOKED_UP),  # SAMOCHA1998
        ("penaeus-vannamei/pl7", "lethal_low_ppt", 3.0, Certainty.LOOKED_UP),  # SAMOCHA1998
        ("penaeus-vannamei/juvenile", "lethal_low_ppt", 2.4, Certainty.LOOKED_UP),  # PONTINHA, superseded 0 from memory
        ("macrobrachium-rosenbergii/juvenile", "gradual_high_ppt", 31.6, Certainty.LOOKED_UP),  # KAU1988
        ("rachycentron-canadum/juvenile", "optimal_low_ppt", 30.0, Certainty.LOOKED_UP),  # DENSON2003
        ("ostrea-edulis/larva", "optimal_high_degC", 27.5, Certainty.LOOKED_UP),  # DAVISCALABRESE1969
    ],
)
def test_published_figures_arrive(animal, key, value, certainty):
    figure = tables.find(animal).figures[key]
    assert (figure.value, figure.certainty) == (value, certainty)


def test_a_superseded_figure_is_kept_in_words():
    assert tables.find("penaeus-vannamei/juvenile").figures["lethal_low_ppt"].replaces == "0 (memory, SRAC2601)"


def test_a_stage_of_which_nothing_is_known_supports_nothing():
    stage = STAGES["lates-calcarifer/egg"]
    assert not stage.supports & Supports.RANGE
    assert math.isnan(resolved(stage).value("isosmotic"))


def test_the_nearest_names_are_offered():
    with pytest.raises(InvalidInputError, match="penaeus-vannamei/pl10"):
        tables.find("penaeus-vannamei/pl99")


@pytest.mark.parametrize(
    ("key", "change", "words"),
    [
        ("lethal_low_ppt", {"unit": "psu"}, "unit"),
        ("lethal_low_ppt", {"value": "low"}, "value"),
        ("lethal_low_ppt", {"value": 9999}, "value"),
        ("lethal_low_ppt", {"value": True}, "value"),
        ("lethal_low_ppt", {"sources": []}, "sources"),
        ("lethal_low_ppt", {"sources": ["NOBODY"]}, "sources"),
        ("lethal_low_ppt", {"certainty": "sure"}, "certainty"),
        ("lethal_lowest_ppt", {"value": 1}, "lethal_lowest_ppt"),
    ],
)
def test_a_bad_figure_is_refused_with_file_stage_and_key(key, change, words):
    raw = copy.deepcopy(raw_species("penaeus-vannamei"))
    stage = next(stage for stage in raw["stages"] if stage["id"] == "pl7")
    stage["figures"][key] = {**stage["figures"]["lethal_low_ppt"], **change}
    with pytest.raises(InvalidInputError) as refused:
        tables.species_from_mapping(raw, file="penaeus-vannamei.json", source_keys=frozenset(tables.sources()))
    assert "penaeus-vannamei.json, stage 'pl7'" in str(refused.value)
    assert words in str(refused.value)


def test_a_site_overrides_a_figure_with_author_and_reason():
    own = {
        "animal": "penaeus-vannamei/pl12",
        "figure": "tolerable_low_ppt",
        "value": 8,
        "author": "M. Duarte",
        "reason": "losses in June",
    }
    changed = with_overrides(STAGES, [own])
    figure = changed["penaeus-vannamei/pl12"].figures["tolerable_low_ppt"]
    assert (figure.value, figure.certainty, figure.sources, figure.note) == (
        8.0,
        Certainty.SITE,
        ("M. Duarte",),
        "losses in June",
    )
    assert figure.replaces.startswith("5 (looked up")
    assert resolved(changed["penaeus-vannamei/pl12"]).value("tolerable_low") > resolved(
        STAGES["penaeus-vannamei/pl12"]
    ).value("tolerable_low")
    assert STAGES["penaeus-vannamei/pl12"].value("tolerable_low_ppt") == 5


@pytest.mark.parametrize("missing", ["author", "reason", "figure", "animal"])
def test_an_override_without_author_or_reason_is_refused(missing):
    own = {"animal": "penaeus-vannamei/pl12", "figure": "tolerable_low_ppt", "value": 8, "author": "A", "reason": "B"}
    with pytest.raises(InvalidInputError, match=missing):
        with_overrides(STAGES, [{**own, missing: " "}])


def test_an_override_can_say_not_known():
    own = {"animal": "perna-perna/adult", "figure": "lethal_high_ppt", "value": None, "author": "A", "reason": "B"}
    assert math.isnan(with_overrides(STAGES, [own])["perna-perna/adult"].value("lethal_high_ppt"))


def test_a_site_adds_a_species():
    raw = raw_species("perna-perna") | {"id": "perna-local"}
    assert "perna-local/adult" in with_species(STAGES, [raw])


@pytest.mark.parametrize("name", sorted(STAGES))
def test_the_limits_of_a_stage_lie_in_order(name):
    ready = resolved(STAGES[name])
    for keys in (
        ("level_low", "tolerable_low", "optimal_low", "optimal_high", "tolerable_high", "level_high"),
        (
            "lethal_low_degC",
            "tolerable_low_degC",
            "optimal_low_degC",
            "optimal_high_degC",
            "tolerable_high_degC",
            "lethal_high_degC",
        ),
    ):
        known = [value for value in (ready.value(key) for key in keys) if not math.isnan(value)]
        assert known == sorted(known)


def test_a_lethal_test_of_hours_says_little_of_days():
    # ALEVIN_SW: alevins live about 6 h in full sea water; that is no leave to keep them at half of it
    ready = resolved(STAGES["salmo-salar/alevin"])
    assert ready.value("tolerable_high") < osmolality_from_ppt(11.0)
    assert ready.figures["tolerable_high"].note.startswith("tolerable at a quarter")


def test_salinity_becomes_osmolality_through_the_seawater_relation_and_goes_on_beyond_it():
    # SP 35: 1033.74 mOsm/kg, freezing-point basis (TEOS-10)
    assert osmolality_from_ppt(35.0) == pytest.approx(1033.74, abs=0.01)
    assert osmolality_from_ppt(126.0) > osmolality_from_ppt(100.0) > osmolality_from_ppt(80.0)
    assert osmolality_from_ppt(-math.inf) == -math.inf
    assert math.isnan(osmolality_from_ppt(math.nan))


def test_the_gates_of_a_stage_are_kept_with_their_source():
    gates = STAGES["salmo-salar/smolt"].gates
    assert {gate.kind for gate in gates} == {"smolt window", "temperature"}
    assert all(set(gate.sources) <= set(tables.sources()) for stage in STAGES.values() for gate in stage.gates)


def test_an_unknown_gate_is_refused():
    raw = copy.deepcopy(raw_species("salmo-salar"))
    next(stage for stage in raw["stages"] if stage["id"] == "smolt")["gates"][0]["kind"] = "mood"
    with pytest.raises(InvalidInputError, match="kind of gate"):
        tables.species_from_mapping(raw, file="salmo-salar.json", source_keys=None)
