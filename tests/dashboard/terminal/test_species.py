"""`euryhale species`."""

from __future__ import annotations

import json

from analysis.animal import tables
from dashboard.terminal.command import main


def test_the_list_names_every_stage(capsys):
    assert main(["species", "--json"]) == 0
    listed = json.loads(capsys.readouterr().out)
    assert {row["id"] for row in listed} == set(tables.load())
    assert {"id", "also", "species", "common_name", "stage", "confidence", "supports"} == set(listed[0])


def test_the_list_for_people_says_what_is_not_known(capsys):
    assert main(["species"]) == 0
    text = capsys.readouterr().out
    assert "penaeus-vannamei/pl10" in text
    assert "lates-calcarifer/egg" in text
    assert "not known" in text


def test_one_species_lists_its_stages(capsys):
    assert main(["species", "perna-perna", "--json"]) == 0
    assert [row["id"] for row in json.loads(capsys.readouterr().out)] == ["perna-perna/adult"]


def test_one_stage_explains_every_figure_and_its_source(capsys):
    assert main(["species", "Penaeus-vannamei/PL17"]) == 0
    text = capsys.readouterr().out
    stage = tables.find("penaeus-vannamei/pl15-pl20")
    for key, figure in stage.figures.items():
        (line,) = [line for line in text.splitlines() if line.startswith(f"  {key} = ")]
        assert figure.mark in line
    for source in {source for figure in stage.figures.values() for source in figure.sources}:
        assert f"  {source}: " in text


def test_an_assumed_number_says_why(capsys):
    assert main(["species", "penaeus-vannamei/pl5"]) == 0
    line = next(line for line in capsys.readouterr().out.splitlines() if line.startswith("  tolerable, fresh side"))
    assert "assumed" in line
    assert "a quarter of the way" in line


def test_one_stage_as_json(capsys):
    assert main(["species", "macrobrachium-rosenbergii/juvenile", "--json"]) == 0
    page = json.loads(capsys.readouterr().out)
    assert page["figures"]["gradual_high_ppt"] == {
        "value": 31.6, "unit": "ppt", "certainty": "looked up", "sources": ["KAU1988"], "note": "120 h LC50 (72 h: 33.3)", "replaces": "",
    }  # fmt: skip
    assert page["used"]["tolerable_high"]["unit"] == "mOsm/kg"
    assert page["used"]["level_low"]["value"] is None
    assert set(page["sources"]) == {source for figure in page["figures"].values() for source in figure["sources"]}


def test_an_unknown_animal_is_a_usage_error_with_near_names(capsys):
    assert main(["species", "penaeus-vanamei/pl10"]) == 2
    assert "penaeus-vannamei/pl10" in capsys.readouterr().err
    assert main(["species", "perna"]) == 2
    assert "perna-perna" in capsys.readouterr().err
