"""Colours: computed contrast, after WCAG 2.2."""

from __future__ import annotations

import re

import pytest

from dashboard.browser.theme import GROUNDS, SETS, TEXT_ON_GROUND, contrast, sheet_css, streamlit_config


def test_contrast_is_that_of_the_standard():
    """Pairs computed for ISO 3864 colours in the project's facts on display: #F9A800 on white 1.98, #005387 on white 8.12."""
    assert contrast("#000000", "#FFFFFF") == pytest.approx(21)
    assert contrast("#F9A800", "#FFFFFF") == pytest.approx(1.98, abs=0.01)
    assert contrast("#FFFFFF", "#005387") == pytest.approx(8.12, abs=0.01)


@pytest.mark.parametrize("name", SETS)
@pytest.mark.parametrize("ground", GROUNDS)
@pytest.mark.parametrize("colour", TEXT_ON_GROUND)
def test_words_can_be_read_on_every_ground(name, ground, colour):
    """WCAG 2.2, 1.4.3 (AA): text 4.5:1."""
    assert contrast(SETS[name][colour], SETS[name][ground]) >= 4.5


@pytest.mark.parametrize("name", SETS)
@pytest.mark.parametrize("ground", ["tol", "opt", "wash", "sheet", "paper"])
@pytest.mark.parametrize("colour", ["water", "blood"])
def test_drawn_marks_stand_out_from_their_bands(name, ground, colour):
    """WCAG 2.2, 1.4.11 (AA): graphics 3:1."""
    assert contrast(SETS[name][colour], SETS[name][ground]) >= 3


@pytest.mark.parametrize("name", SETS)
def test_letters_on_pennants_and_words_on_buttons_can_be_read(name):
    colours = SETS[name]
    for flag in ("urgent", "soon", "note"):
        assert contrast(colours["sheet"], colours[flag]) >= 4.5
    assert contrast(colours["paper"], colours["ink"]) >= 7


def test_every_colour_that_is_used_is_defined():
    css = sheet_css()
    used = set(re.findall(r"var\(--([a-z0-9]+)\)", css))
    assert used <= set(SETS["day"]) | {"serif", "sans"}
    assert all(set(colours) == set(SETS["day"]) for colours in SETS.values())


def test_nothing_blinks_faster_than_twice_a_second():
    """WCAG 2.2, 2.3.1 allows three flashes a second; the project allows two."""
    for seconds in re.findall(r"animation:[a-z]+ ([\d.]+)s", sheet_css()):
        assert float(seconds) >= 0.5
    assert "prefers-reduced-motion" in sheet_css()


def test_streamlit_wears_both_sets():
    options = streamlit_config()
    assert options["theme.light.backgroundColor"] == SETS["day"]["paper"]
    assert options["theme.dark.backgroundColor"] == SETS["dusk"]["paper"]
