"""The chart, read back from its SVG."""

from __future__ import annotations

import re
from dataclasses import replace
from xml.etree import ElementTree

import numpy as np
import pytest

from dashboard.browser.charts import AlarmMark, Chart, Limit, Line, Panel, multi_panel_chart

DAY = 86_400.0


def a_line(n: int = 1440, **changes) -> Line:
    times = np.arange(n) * DAY / n
    return replace(Line(times, 31 + 0.2 * np.sin(times / 5000), longest_silence_s=300), **changes)


def a_chart(panel: Panel, **changes) -> Chart:
    return replace(Chart(0.0, DAY, (panel,)), **changes)


def drawn(chart: Chart, width: int = 960) -> ElementTree.Element:
    return ElementTree.fromstring(multi_panel_chart(chart, width=width))


def points(node: ElementTree.Element) -> np.ndarray:
    return np.array([[float(v) for v in pair.split(",")] for pair in node.attrib["points"].split()])


def value_of(panel: ElementTree.Element, y: float) -> float:
    low, high, top, bottom = (float(panel.attrib[f"data-{k}"]) for k in ("low", "high", "top", "bottom"))
    return high - (y - top) / (bottom - top) * (high - low)


def test_values_read_off_the_drawing_are_those_that_went_in():
    line = a_line()
    root = drawn(a_chart(Panel("Salinity", "salinity", line)))
    panel = root.find(".//g[@class='panel-plot']")
    curve = points(panel.find(".//polyline[@class='line']"))
    left, right = float(root.attrib["data-left"]), float(root.attrib["data-right"])
    times = (curve[:, 0] - left) / (right - left) * DAY
    expected = np.interp(times, line.times_s, line.values)
    found = np.array([value_of(panel, y) for y in curve[:, 1]])
    assert np.abs(found - expected).max() < 0.02


def test_a_gap_is_a_gap():
    line = a_line()
    keep = (line.times_s < 30_000) | (line.times_s > 40_000)
    gappy = Line(line.times_s[keep], line.values[keep], 300)
    root = drawn(a_chart(Panel("Salinity", "salinity", gappy)))
    assert len(root.findall(".//polyline[@class='line']")) == 2


def test_thinning_out_opens_no_gap_and_keeps_the_spike():
    times = np.arange(525_600) * 60.0
    values = np.full(len(times), 31.0)
    values[123_456] = 3.0
    chart = Chart(0.0, float(times[-1]), (Panel("Salinity", "salinity", Line(times, values, 180)),))
    root = drawn(chart)
    lines = root.findall(".//polyline[@class='line']")
    assert len(lines) == 1
    panel = root.find(".//g[@class='panel-plot']")
    assert abs(value_of(panel, points(lines[0])[:, 1].max()) - 3.0) < 0.3
    assert len(points(lines[0])) < 2500


def test_extremes_of_buckets_show_as_a_wash():
    line = a_line(96)
    high = line.values + 0.3
    high[50] = 40.0
    root = drawn(
        a_chart(Panel("Salinity", "salinity", replace(line, low=line.values - 0.3, high=high, longest_silence_s=2000)))
    )
    panel = root.find(".//g[@class='panel-plot']")
    envelope = points(panel.find(".//polygon[@class='envelope']"))
    assert abs(value_of(panel, envelope[:, 1].min()) - 40.0) < 0.1


def test_band_limit_source_and_last_value_are_written_and_escaped():
    panel = Panel(
        "Salinity <b>",
        "salinity",
        a_line(),
        band=(29, 33),
        band_text="set point 31 ± 2",
        limits=(Limit(28.5, "tolerated from 28.5 (source & source)", "tolerated from 28.5"),),
        last_text="31.2",
        last_note="strained",
    )
    svg = multi_panel_chart(a_chart(panel))
    texts = [t.text or "" for t in ElementTree.fromstring(svg).iter("text")]
    assert {"set point 31 ± 2", "tolerated from 28.5 (source & source)", "31.2", "strained"} <= set(texts)
    assert "Salinity <b>" in texts
    assert 'stroke-dasharray="1.5 4"' in svg
    narrow = [t.text or "" for t in drawn(a_chart(panel), width=330).iter("text")]
    assert "tolerated from 28.5" in narrow


def test_a_far_limit_does_not_squeeze_the_water_but_is_named():
    panel = Panel("Salinity", "salinity", a_line(), limits=(Limit(4.0, "tolerated from 4 (source)"),))
    root = drawn(a_chart(panel))
    assert float(root.find(".//g[@class='panel-plot']").attrib["data-low"]) > 25
    assert any("↓ tolerated from 4 (source)" in (t.text or "") for t in root.iter("text"))


def test_alarms_cross_all_panels_with_their_pennant():
    chart = Chart(
        0.0, DAY, (Panel("Salinity", "salinity", a_line()), Panel("Stress", "stress", a_line(), fixed=(0, 100)))
    )
    chart = replace(chart, alarms=(AlarmMark(43_200, "urgent", "U", "urgent"), AlarmMark(-5, "soon", "S", "soon")))
    root = drawn(chart)
    lines = [p for p in root.findall("path") if p.attrib.get("stroke") == "var(--urgent)"]
    assert len(lines) == 1
    bottom = float(re.search(r"V([\d.]+)", lines[0].attrib["d"]).group(1))
    assert bottom == pytest.approx(float(root.attrib["data-bottom"]), abs=1)
    assert not [p for p in root.iter("path") if p.attrib.get("stroke") == "var(--soon)"]


def test_a_projection_is_dashed_and_inside_the_axis():
    panel = Panel("Salinity", "salinity", a_line(), projection=(np.array([80_000.0, DAY]), np.array([31.0, 30.2])))
    root = drawn(a_chart(panel, now_s=80_000.0))
    node = root.find(".//polyline[@class='projection']")
    assert node.attrib["stroke-dasharray"]
    assert float(root.find(".//g[@class='panel-plot']").attrib["data-low"]) < 30.2


def test_a_steep_projection_does_not_flatten_what_was_measured():
    panel = Panel("Salinity", "salinity", a_line(), projection=(np.array([80_000.0, DAY]), np.array([31.0, 2.0])))
    assert float(drawn(a_chart(panel)).find(".//g[@class='panel-plot']").attrib["data-low"]) > 28


@pytest.mark.parametrize("values", [[], [np.nan, np.nan], [31.0]])
def test_nothing_one_point_and_only_unknown_values_are_drawn_without_an_error(values):
    line = Line(np.arange(len(values), dtype=float), np.array(values, dtype=float), 300)
    root = drawn(a_chart(Panel("Salinity", "salinity", line)))
    assert root.find(".//g[@class='panel-plot']") is not None
    assert "nan" not in ElementTree.tostring(root, encoding="unicode").replace("financ", "")


def test_a_chart_without_panels_is_nothing():
    assert multi_panel_chart(Chart(0, 1, ())) == ""
