"""The bench sheet as one self-contained page for a browser: both pages, and the numbers as text."""

from __future__ import annotations

import base64
from collections.abc import Sequence
from itertools import groupby
from typing import Any

from livelag.bench.sheet import Sheet, SheetRow
from livelag.report.sheet_page import PAPERS_MM
from livelag.report.sheet_words import hertz, seconds, seconds_within, volts_within
from livelag.report.templating import page_templates

_ALTS = (
    "Page 1: drawing of the stage, parts, test signals and cautions.",
    "Page 2: expected readings with limits, and expected traces.",
)


def sheet_html(sheet: Sheet, paper: str, pages: Sequence[bytes]) -> str:
    """The page as text.

    Args:
        sheet: what it says.
        paper: a name of `livelag.report.sheet_page.PAPERS_MM`.
        pages: both pages as SVG.
    """
    width, height = PAPERS_MM[paper]
    return (
        page_templates()
        .get_template("sheet.html")
        .render(
            title=sheet.stage.title,
            about=sheet.stage.about,
            paper=paper,
            width_mm=width,
            height_mm=height,
            pages=[
                {"svg": base64.b64encode(svg).decode("ascii"), "alt": alt}
                for svg, alt in zip(pages, _ALTS, strict=True)
            ],
            cautions=sheet.cautions,
            tables=[_parts(sheet), _signals(sheet), *_expectations(sheet)],
        )
    )


def _parts(sheet: Sheet) -> dict[str, Any]:
    return {
        "caption": "Parts",
        "header": ("Part", "Place", "Value", "Tolerance", "Kind"),
        "rows": [
            (line.reference, line.place, line.value_text, line.tolerance_text, line.kind)
            for line in sheet.parts.lines()
        ],
    }


def _signals(sheet: Sheet) -> dict[str, Any]:
    stairs = sheet.levels.stairs_v
    return {
        "caption": f"Test signals, {stairs[0]:.4g} V to {stairs[-1]:.4g} V, the pot at 1",
        "header": (
            "Range", "Settling square", "Each stair", "Hurried square",
            "Out at hurried, peak to peak",
            *(f"Out after the stair of {v:.4g} V" for v in stairs),
        ),
        "rows": [
            (row.range_name, hertz(row.settle_hz), seconds(row.stair_s), hertz(row.hurried_hz),
             volts_within(row.swing_v), *map(volts_within, row.stairs))
            for row in sheet.signals
        ],
    }  # fmt: skip


def _expectations(sheet: Sheet) -> list[dict[str, Any]]:
    def name(row: SheetRow) -> str:
        return row.limits.range_name

    return [
        {
            "caption": f"Range {range_name}",
            "header": ("Pot", "Square", "Time constant", "Rise 10–90 %",
                       "Volts after one time constant", "Settled volts"),
            "rows": [
                (f"{row.limits.rotation:g}", hertz(row.square_hz),
                 seconds_within(row.limits.time_constant_s), seconds_within(row.limits.rise_s),
                 volts_within(row.after_v), volts_within(row.settled_v))
                for row in rows
            ],
        }
        for range_name, rows in groupby(sheet.rows, name)
    ]  # fmt: skip
