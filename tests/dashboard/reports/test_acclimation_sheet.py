from __future__ import annotations

import re
import zlib
from dataclasses import replace
from datetime import timedelta

from analysis.acclimation.ammonia import PackedWater
from analysis.acclimation.arrival import DispatchSheet
from analysis.acclimation.source import SourceWater
from analysis.acclimation.task import Method, Water
from dashboard.reports.acclimation_sheet import (
    acclimation_sheet_pdf,
    dispatch_sheet_pdf,
    heading_lines,
    plain_text,
    step_cells,
)
from tests.analysis.acclimation.tasks import EIGHT, TAP, plan, task

SHRIMP = "penaeus-vannamei/pl10"


def words_in(pdf: bytes) -> str:
    """Return the text of a PDF whose streams are deflated and whose font is a standard one."""
    streams = re.findall(rb"stream\r?\n(.*?)\r?\nendstream", pdf, re.DOTALL)
    inflated = [zlib.decompress(stream) for stream in streams if stream[:1] == b"x"]
    shown = re.findall(rb"\((.*?)(?<!\\)\) Tj", b"\n".join(inflated), re.DOTALL)
    return " ".join(text.replace(b"\\", b"").decode("latin-1") for text in shown)


def test_the_sheet_shows_every_step_the_limits_and_the_cautions() -> None:
    found = plan(task(SHRIMP, 20.0, 12.0))
    text = words_in(acclimation_sheet_pdf(found, site="Larkfen Shore Hatchery", tank="L3"))
    assert "Larkfen Shore Hatchery - L3" in text
    for step in found.steps:
        assert f"{step.start:%m-%d %H:%M}" in text
        assert f"{step.drain_L:g} L tap" in text
    flat = re.sub(r"\s+", " ", text)
    assert "salinity per hour" in flat
    assert "MCGRAW2002" in flat
    assert "Test this schedule on a few animals first." in flat
    assert "Agreed by (name, date)" in flat


def test_a_long_plan_takes_more_pages_and_keeps_its_heading() -> None:
    found = plan(task("macrobrachium-rosenbergii/postlarva", 12.0, 1.0))
    longer = replace(found, steps=found.steps * 4)
    pdf = acclimation_sheet_pdf(longer)
    assert pdf.count(b"/Type /Page\n") >= 3
    assert words_in(pdf).count("mOsm/kg") >= 2


def test_a_task_without_a_plan_says_why() -> None:
    found = plan(task(SHRIMP, 20.0, 2.0, (SourceWater("pond", 6.0, 28.0),)))
    assert "NO PLAN: no source is fresh enough" in words_in(acclimation_sheet_pdf(found))
    assert any("NO PLAN" in line for line in heading_lines(found))


def test_a_flow_and_an_unknown_stress_are_written() -> None:
    found = plan(task(SHRIMP, 20.0, 16.0, (TAP,), method=Method.FLOW))
    cells = step_cells(replace(found.steps[0], stress=float("nan")))
    assert "L/min" in cells[3]
    assert cells[8] == "?"


def test_the_same_plan_gives_the_same_bytes() -> None:
    found = plan(task(SHRIMP, 20.0, 16.0))
    assert acclimation_sheet_pdf(found) == acclimation_sheet_pdf(found)


def test_characters_beyond_the_font_do_not_stop_the_sheet() -> None:
    assert plain_text("a – b ≤ c 水") == "a - b <= c ?"


def test_the_dispatch_sheet_carries_its_lines() -> None:
    sheet = DispatchSheet(
        animal=SHRIMP,
        number=80_000,
        acclimated_to=Water(12.0, 26.0, 7.9),
        since=EIGHT - timedelta(days=3),
        packed_at=EIGHT,
        packed=PackedWater(6.0, ph=6.9),
        sender="Marta",
    )
    text = words_in(dispatch_sheet_pdf(sheet))
    assert "salinity 12, 26 degC, pH 7.9" in text
    assert "not measured" in text
    assert "Asked beforehand, open" in text
