"""The two pages of the bench sheet: the stage and what to set, then what to expect."""

from __future__ import annotations

from typing import TYPE_CHECKING

from livelag.bench.sheet import Sheet
from livelag.report.sheet_drawing import draw_stage
from livelag.report.sheet_page import MARGIN_MM, PENCIL, Page, fitted
from livelag.report.sheet_tables import draw_expectations, draw_parts, draw_signals
from livelag.report.sheet_traces import draw_traces, panel_rows

if TYPE_CHECKING:
    from matplotlib.figure import Figure

_LEAST_ROW_MM, _MOST_ROW_MM = 3.3, 5.2  # of parts and signals
_LEAST_READ_MM, _MOST_READ_MM = 3.7, 6.4  # of the rows to write in
_PANEL_MM = 40.0  # what a row of traces should have at least, if the tables leave it


def sheet_pages(sheet: Sheet, paper: str) -> tuple[Figure, Figure]:
    """Draw both pages.

    Args:
        sheet: what they say.
        paper: a name of `livelag.report.sheet_page.PAPERS_MM`.
    """
    tight = Page(paper, dry=True)
    end, rows = _draw_first(tight, sheet, _LEAST_ROW_MM)
    row_mm = min(_LEAST_ROW_MM + (tight.bottom - end) / rows, _MOST_ROW_MM)
    first = Page(paper)
    end, _ = _draw_first(first, sheet, row_mm)
    first.notes(end)
    return first.finished(), _expectation_page(sheet, paper).finished()


def _draw_first(page: Page, sheet: Sheet, row_mm: float) -> tuple[float, int]:
    """The stage and what to set, in rows of a height; returns where it ends and how many rows."""
    stage = sheet.stage
    span = page.right - page.left
    top = page.paragraph(
        page.left, MARGIN_MM, span, stage.title, 14.0, most_lines=2, fontweight="bold"
    )
    if stage.about:
        top = page.paragraph(page.left, top + 0.6, span, stage.about, 7.5, 2, color=PENCIL)
    top = _who_and_when(page, top + 2.0)
    top = draw_stage(page, top + 1.0, stage, sheet.parts)
    top = page.paragraph(page.left, top, span, _caption(sheet), 6.6, 3, color=PENCIL)
    top, parts = draw_parts(page, page.heading(top + 1.5, "Parts"), sheet, row_mm)
    top, signals = draw_signals(page, page.heading(top + 2.0, "Test signals"), sheet, row_mm)
    top = page.heading(top + 2.0, "Caution")
    for sentence in sheet.cautions:
        page.text(page.left + 0.4, top + 1.6, "⚠", 7.0)
        top = page.paragraph(page.left + 4.0, top, span - 4.0, sentence, 7.0)
    _foot(page, sheet, 1)
    return top, parts + signals


def _expectation_page(sheet: Sheet, paper: str) -> Page:
    page = Page(paper)
    span = page.right - page.left
    top = page.heading(MARGIN_MM, fitted(f"What to expect: {sheet.stage.title}", span, 8.5, True))
    words = (
        "Nominal, and in brackets the least and most that a good build may read: every part at "
        "the end of its tolerance, offsets, bias current and leakage up to their data-sheet "
        "limits. Square: this frequency settles at this setting. Time constant: R times C; read it "
        "as the time to 63.2 % of the step, which leakage shortens and absorption or a bleed "
        "lengthens. Volts after 1 τ: one nominal time constant after the rising edge; settled "
        "volts: at the end of the high level."
    )
    top = page.paragraph(page.left, top, span, words, 6.6) + 1.0
    rows = len(sheet.rows) + 2 * len(sheet.signals)
    room = page.bottom - top - 10.0 - panel_rows(sheet) * _PANEL_MM
    row_mm = min(max(room / rows, _LEAST_READ_MM), _MOST_READ_MM)
    top = draw_expectations(page, top, sheet, row_mm)
    words = (
        "Solid: as designed. Hatched: where a good build may be. Dashes: volts in. Dotted: one "
        "time constant."
    )
    top = page.paragraph(page.left, page.heading(top + 1.0, "Expected traces"), span, words, 6.6)
    page.notes(draw_traces(page, top + 0.8, sheet))
    _foot(page, sheet, 2)
    return page


def _who_and_when(page: Page, top: float) -> float:
    blanks = (("Unit", 36.0), ("Built by", 46.0), ("Date", 32.0), ("Oscilloscope, probe", 0.0))
    x = page.left
    for words, width in blanks:
        page.text(x, top + 2.0, words, 7.5)
        end = x + width if width else page.right
        page.line(x + 3.0 + 1.25 * len(words), top + 3.6, end - 3.0 * bool(width), top + 3.6)
        x = end
    return top + 4.5


def _caption(sheet: Sheet) -> str:
    ranges = "; ".join(
        f"{number} {row.name} connects "
        + " and ".join(
            part.reference
            for part, capacitor in zip(sheet.parts.capacitors, sheet.stage.capacitors, strict=True)
            if capacitor.name in row.connects
        )
        for number, row in enumerate(sheet.stage.ranges, start=1)
    )
    switch = f"Range switch: {ranges}. Contacts are drawn open. "
    if len(sheet.stage.ranges) == 1:
        switch = "One range, no range switch. "
    load = "The dashed resistor is the next input. " if sheet.parts.load else ""
    return f"{switch}{load}Decoupling capacitors are not drawn."


def _foot(page: Page, sheet: Sheet, number: int) -> None:
    y = page.height_mm - 0.55 * MARGIN_MM
    words = fitted(f"Bench sheet: {sheet.stage.title}", page.right - page.left - 30.0, 6.2)
    page.text(page.left, y, words, 6.2, color=PENCIL)
    page.text(page.right, y, f"page {number} of 2", 6.2, ha="right", color=PENCIL)
