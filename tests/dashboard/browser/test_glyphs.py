"""The small pictures, read back from their SVG."""

from __future__ import annotations

import math
import re
from xml.etree import ElementTree

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dashboard.browser import glyphs
from dashboard.browser.glyphs import Balance


def parsed(svg: str) -> ElementTree.Element:
    return ElementTree.fromstring(svg)


def mark_x(svg: str, kind: str) -> float:
    node = parsed(svg).find(f".//path[@class='{kind}']")
    assert node is not None
    return float(re.match(r"translate\(([-\d.]+)", node.attrib["transform"]).group(1))


@pytest.mark.parametrize(("priority", "seams"), [("urgent", 2), ("soon", 1), ("note", 0)])
def test_a_pennant_tells_its_priority_without_colour(priority, seams):
    svg = glyphs.pennant(priority, letter="X", word=f"{priority} word")
    root = parsed(svg)
    assert len([p for p in root.findall("path") if p.attrib.get("stroke") == "var(--sheet)"]) == seams
    assert root.find("text").text == "X"
    assert root.attrib["aria-label"] == f"{priority} word"


def test_the_longer_the_pennant_the_more_pressing():
    widths = [float(parsed(glyphs.pennant(p, letter="", word="")).attrib["width"]) for p in ("urgent", "soon", "note")]
    assert widths == sorted(widths, reverse=True)


def test_words_from_outside_are_escaped():
    svg = glyphs.osmotic_balance(Balance(water=500), label='<script>"&')
    assert "<script" not in svg
    assert parsed(svg).attrib["aria-label"] == '<script>"&'


@pytest.mark.parametrize(
    ("water", "blood", "direction"),
    [(802, 690, "out"), (158, 320, "in"), (700, 703, "level"), (700, None, "unknown"), (None, 300, "no_water")],
)
def test_the_direction_is_that_of_osmosis(water, blood, direction):
    """Water moves to the side of the higher osmolality (definition of osmosis)."""
    assert Balance(water=water, blood=blood).direction == direction


def arrow_tip_x(svg: str) -> float | None:
    head = [p for p in parsed(svg).iter("path") if p.attrib.get("fill") == "none" and p.attrib["d"].count("L") == 2]
    return float(re.search(r"L([-\d.]+) ", head[0].attrib["d"]).group(1)) if head else None


def test_the_arrow_points_to_the_stronger_side():
    strong_water = glyphs.osmotic_balance(Balance(water=1000, blood=350), label="")
    weak_water = glyphs.osmotic_balance(Balance(water=100, blood=350), label="")
    assert abs(arrow_tip_x(strong_water) - mark_x(strong_water, "water")) < abs(
        arrow_tip_x(strong_water) - mark_x(strong_water, "blood")
    )
    assert abs(arrow_tip_x(weak_water) - mark_x(weak_water, "blood")) < abs(
        arrow_tip_x(weak_water) - mark_x(weak_water, "water")
    )


def test_no_drop_and_no_arrow_where_the_blood_value_is_not_known():
    svg = glyphs.osmotic_balance(Balance(water=500), label="")
    assert 'class="blood"' not in svg
    assert 'class="flow"' not in svg


@settings(derandomize=True, max_examples=60)
@given(
    st.floats(min_value=0, max_value=4000),
    st.floats(min_value=0, max_value=4000),
    st.sampled_from([glyphs.osmotic_balance, glyphs.osmotic_balance_line]),
)
def test_marks_stay_on_the_axis_and_in_the_order_of_their_values(water, blood, draw):
    svg = draw(Balance(water=water, blood=blood, tolerated=(100.0, math.nan), optimal=(300.0, 5000.0)), label="")
    width = float(parsed(svg).attrib["viewBox"].split()[2])
    x_water, x_blood = mark_x(svg, "water"), mark_x(svg, "blood")
    assert 0 <= x_water <= width
    assert 0 <= x_blood <= width
    assert (x_water - x_blood) * (water - blood) >= 0 or abs(x_water - x_blood) < 0.11
    assert all(float(r.attrib["width"]) >= 0 for r in parsed(svg).iter("rect"))


def test_the_large_balance_never_writes_one_value_over_the_other():
    svg = glyphs.osmotic_balance_large(
        Balance(water=802, blood=790),
        label="",
        water_word="water 802",
        blood_word="body fluid 790",
        unit_word="mOsm/kg",
    )
    heights = {t.text: float(t.attrib["y"]) for t in parsed(svg).iter("text")}
    assert abs(heights["water 802"] - heights["body fluid 790"]) >= 14


def test_a_day_line_breaks_at_silence_and_at_unknown_values():
    times = np.arange(0, 86_400, 900.0)
    values = np.full(len(times), 31.0)
    values[40] = math.nan
    keep = (times < 20_000) | (times > 30_000)
    svg = glyphs.day_line(times[keep], values[keep], from_s=0, to_s=86_400, label="")
    strokes = [p for p in parsed(svg).iter("path") if p.attrib.get("fill") == "none"]
    assert len(strokes) == 3


def test_noise_is_not_drawn_as_a_storm():
    times = np.arange(0, 86_400, 900.0)
    values = 31 + 0.01 * np.sin(np.arange(len(times)))
    svg = glyphs.day_line(times, values, from_s=0, to_s=86_400, label="", least_span=2.0, height=46)
    d = next(p for p in parsed(svg).iter("path") if p.attrib.get("fill") == "none").attrib["d"]
    rises = [abs(float(pair.split()[1])) for pair in re.findall(r"-?[\d.]+ -?[\d.]+", d.split("l")[1])]
    assert max(rises) < 2


def test_a_day_without_a_value_is_an_empty_band_not_an_error():
    svg = glyphs.day_line([], [], from_s=0, to_s=86_400, label="", band=(29, 33))
    assert parsed(svg).find("rect") is not None
    assert parsed(svg).find("path") is None


def test_the_rule_of_the_day_shows_where_we_are_and_what_was_raised():
    html = glyphs.day_rule(0.5, [(0.25, "urgent"), (0.3, "soon")], label="The day")
    assert "calc(50.00% - 6px)" in html
    assert html.count('stroke="var(--urgent)"') == 1
    assert html.count('stroke="var(--soon)"') == 1
