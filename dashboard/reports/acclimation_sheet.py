"""The acclimation sheet for the wall, and the arrival and dispatch sheet, as PDF."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Final

from fpdf import FPDF
from fpdf.enums import XPos, YPos

from analysis.acclimation.arrival import sheet_cautions, sheet_lines

if TYPE_CHECKING:
    from collections.abc import Sequence
    from datetime import datetime

    from analysis.acclimation.arrival import DispatchSheet
    from analysis.acclimation.plan import Plan, PlannedStep

FONT: Final = "Helvetica"
COLUMNS: Final = (
    ("", 7), ("start", 27), ("drain L", 16), ("add", 68), ("salinity", 17), ("between", 23), ("degC", 13),
    ("mOsm/kg", 18), ("stress", 14), ("done by", 38), ("measured", 34),
)  # fmt: skip
"""Heading and width in millimetres; the last two are for the pencil."""
INK: Final = (20, 40, 60)
PALE: Final = (230, 236, 240)
BAND: Final = (205, 222, 232)
CHART_HEIGHT_MM: Final = 52.0
CHART_LEFT_MM: Final = 24.0


class _Sheet(FPDF):
    """A landscape page with the page number at its foot."""

    def __init__(self, *, title: str, made_at: datetime) -> None:
        super().__init__(orientation="L", unit="mm", format="A4")
        self.set_title(title)
        self.set_creation_date(made_at)
        self.set_auto_page_break(auto=True, margin=14)
        self.set_text_color(*INK)
        self.set_draw_color(*INK)
        self.add_page()
        self.write_line(title, size=15, style="B")

    def footer(self) -> None:
        """Write the page number."""
        self.set_y(-10)
        self.set_font(FONT, size=8)
        self.cell(0, 5, f"page {self.page_no()}", align="R")

    def write_line(self, text: str, *, size: float = 9.0, style: str = "") -> None:
        """Write a paragraph over the whole width."""
        self.set_font(FONT, style=style, size=size)
        self.multi_cell(0, size * 0.5, plain_text(text), new_x=XPos.LMARGIN, new_y=YPos.NEXT)

    def write_list(self, title: str, lines: Sequence[str]) -> None:
        """Write a heading and one line each."""
        if not lines:
            return
        self.ln(2)
        self.write_line(title, size=10.5, style="B")
        for line in lines:
            self.write_line(f"- {line}")


def plain_text(text: str) -> str:
    """Return *text* in the characters of the sheet's font."""
    swapped = text.replace("–", "-").replace("—", "-").replace("−", "-").replace("≥", ">=").replace("≤", "<=")
    return swapped.encode("latin-1", errors="replace").decode("latin-1")


def acclimation_sheet_pdf(plan: Plan, *, site: str = "", tank: str = "", made_at: datetime | None = None) -> bytes:
    """Return the plan as a PDF for the wall.

    Parameters
    ----------
    plan : Plan
        Feasible or not; one that is not says why.
    site, tank : str
        Names for the heading.
    made_at : datetime, optional
        Aware; default: when the plan begins.
    """
    where = " - ".join(part for part in (site, tank) if part)
    sheet = _Sheet(title=f"Acclimation sheet{': ' + where if where else ''}", made_at=made_at or plan.task.begins_at)
    for line in heading_lines(plan):
        sheet.write_line(line)
    if plan.steps:
        sheet.ln(1)
        _table(sheet, plan)
        _chart(sheet, plan)
    sheet.write_list("A named person agrees before the start", plan.needs_yes)
    sheet.write_list(
        "Limits", [limit_line(limit.name, limit.value, limit.source, limit.certainty) for limit in plan.limits]
    )
    sheet.write_list("What the choices cost", plan.costs)
    sheet.write_list("Cautions", plan.cautions)
    sheet.ln(4)
    sheet.write_line("Agreed by (name, date): ______________________    Started by: ______________________", size=10)
    return bytes(sheet.output())


def limit_line(name: str, value: str, source: str, certainty: str) -> str:
    """Return one limit as a line."""
    return f"{name}: {value} [{source}; {certainty}]"


def heading_lines(plan: Plan) -> list[str]:
    """Return what stands above the table."""
    task = plan.task
    lines = [
        f"{task.animal}: salinity {task.start.salinity:g} to {task.target.salinity:g}, {task.vessel.volume_L:g} L "
        f"{task.vessel.word}, by {task.method.value}; used to {task.home_salinity:g}",
    ]
    if not plan.is_feasible:
        return [*lines, f"NO PLAN: {plan.reason}"]
    ends = plan.ends_at
    lines.append(
        f"From {task.begins_at:%Y-%m-%d %H:%M} to {ends:%Y-%m-%d %H:%M} ({plan.total_hours:.1f} h), {len(plan.steps)} steps"
    )
    used = [f"{litres:g} L {name}" for name, litres in plan.water_used_L.items() if litres]
    used += [f"{kilograms:g} kg {name}" for name, kilograms in plan.salt_used_kg.items() if kilograms]
    lines.append(f"Needed in all: {', '.join(used) or 'nothing'}; drained {plan.drained_L:g} L")
    lines.append(survival_line(plan))
    if plan.standing is not None and not math.isnan(plan.standing.range_strain):
        lines.append(
            f"The destination itself: strain {plan.standing.range_strain:.2f} (0.5 is the tolerable limit), stress "
            f"{plan.standing.stress_after_h:.0f} after {plan.standing.hours:g} h there"
        )
    return lines


def survival_line(plan: Plan) -> str:
    """Return the survival estimate in words, or that it is not known."""
    if plan.survival is None:
        return "Expected survival: not known (no times to death are published for this stage and direction)"
    found = plan.survival
    return (
        f"Expected survival above control, two days after: {100 * found.alive:.0f} % ({100 * found.low:.0f} to "
        f"{100 * found.high:.0f} %; {found.certainty.value}: {', '.join(found.sources)})"
    )


def _table(sheet: _Sheet, plan: Plan) -> None:
    _table_heading(sheet)
    for step in plan.steps:
        if sheet.will_page_break(6.0):
            sheet.add_page()
            _table_heading(sheet)
        sheet.set_font(FONT, size=8.5)
        for (_, width), text in zip(COLUMNS, step_cells(step), strict=True):
            sheet.cell(width, 6, plain_text(text), border=1)
        sheet.ln()


def _table_heading(sheet: _Sheet) -> None:
    sheet.set_font(FONT, style="B", size=8.5)
    sheet.set_fill_color(*PALE)
    for heading, width in COLUMNS:
        sheet.cell(width, 6, heading, border=1, fill=True)
    sheet.ln()


def step_cells(step: PlannedStep) -> tuple[str, ...]:
    """Return the cells of one row of the table."""
    added = [f"{litres:g} L {name}" for name, litres in step.add.items()]
    added += [f"{kilograms:g} kg {name} in {step.dissolve_L:g} L" for name, kilograms in step.salt.items()]
    if not math.isnan(step.flow_L_min):
        added.append(f"{step.flow_L_min:.2g} L/min, {step.duration_min:.0f} min")
    return (
        str(step.number),
        f"{step.start:%m-%d %H:%M}",
        f"{step.drain_L:g}",
        "; ".join(added),
        f"{step.salinity:.1f}",
        f"{step.salinity_low:.1f}-{step.salinity_high:.1f}",
        f"{step.temperature_degC:.1f}",
        f"{step.osmolality_mOsm_kg:.0f}",
        "?" if math.isnan(step.stress) else f"{step.stress:.0f}",
        "",
        "",
    )


def _chart(sheet: _Sheet, plan: Plan) -> None:
    """Draw salinity over time, as planned, with what the allowed errors can make of it."""
    if sheet.will_page_break(CHART_HEIGHT_MM + 16.0):
        sheet.add_page()
    left, top = CHART_LEFT_MM, sheet.get_y() + 8.0
    width = sheet.epw - 20.0
    highest = 1.1 * max(plan.task.start.salinity, *(step.salinity_high for step in plan.steps), 1.0)
    lasting = max(60.0 * plan.total_hours if plan.is_feasible else plan.steps[-1].minute, 1.0)

    def place(minute: float, salinity: float) -> tuple[float, float]:
        return left + width * minute / lasting, top + CHART_HEIGHT_MM * (1.0 - salinity / highest)

    sheet.set_font(FONT, size=8)
    sheet.text(left, top - 2.0, "salinity, as planned; pale: with the allowed errors of volume and sources")
    _chart_frame(sheet, place, highest=highest, lasting=lasting)
    minute, salinity, low, high = 0.0, plan.task.start.salinity, plan.task.start.salinity, plan.task.start.salinity
    for step in plan.steps:
        _chart_piece(sheet, place, (minute, step.minute), low, high)
        sheet.line(*place(minute, salinity), *place(step.minute, salinity))
        sheet.line(*place(step.minute, salinity), *place(min(step.minute + step.duration_min, lasting), step.salinity))
        minute = min(step.minute + step.duration_min, lasting)
        salinity, low, high = step.salinity, step.salinity_low, step.salinity_high
    sheet.set_y(top + CHART_HEIGHT_MM + 8.0)


def _chart_frame(sheet: _Sheet, place: _Place, *, highest: float, lasting: float) -> None:
    sheet.line(*place(0.0, 0.0), *place(lasting, 0.0))
    sheet.line(*place(0.0, 0.0), *place(0.0, highest))
    for part in range(5):
        level, minute = highest * part / 4.0, lasting * part / 4.0
        x, y = place(0.0, level)
        sheet.text(x - 9.0, y + 1.0, f"{level:.1f}")
        x, y = place(minute, 0.0)
        sheet.text(x - 3.0, y + 4.0, f"{minute / 60.0:.1f} h")


def _chart_piece(sheet: _Sheet, place: _Place, minutes: tuple[float, float], low: float, high: float) -> None:
    x, y = place(minutes[0], high)
    right, bottom = place(minutes[1], low)
    if right > x and bottom > y:
        sheet.set_fill_color(*BAND)
        sheet.rect(x, y, right - x, bottom - y, style="F")


def dispatch_sheet_pdf(dispatch: DispatchSheet, *, made_at: datetime | None = None) -> bytes:
    """Return the arrival and dispatch sheet as PDF."""
    sheet = _Sheet(title="Arrival and dispatch sheet", made_at=made_at or dispatch.packed_at)
    for heading, text in sheet_lines(dispatch):
        sheet.set_font(FONT, style="B", size=10)
        sheet.cell(55, 7, plain_text(heading))
        sheet.set_font(FONT, size=10)
        sheet.multi_cell(0, 7, plain_text(text), new_x=XPos.LMARGIN, new_y=YPos.NEXT)
    sheet.write_list("Cautions", sheet_cautions())
    return bytes(sheet.output())


if TYPE_CHECKING:
    from collections.abc import Callable

    _Place = Callable[[float, float], tuple[float, float]]

__all__ = ["acclimation_sheet_pdf", "dispatch_sheet_pdf", "heading_lines", "step_cells", "survival_line"]
