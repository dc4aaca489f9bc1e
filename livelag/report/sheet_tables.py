"""The tables of the bench sheet: parts, test signals, and what to expect with room to write."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import groupby

from livelag.bench.sheet import ROTATIONS, Sheet
from livelag.bench.sheet_parts import PartLine
from livelag.bench.sheet_signals import HURRIED, SETTLED
from livelag.report.sheet_page import INK, RULE, Page, fitted
from livelag.report.sheet_words import hertz, seconds, seconds_within, volts_within

_DROP_MM = 0.15  # letters without descenders look low in the middle otherwise


@dataclass(frozen=True)
class Column:
    """A column of a table.

    Attributes:
        title: its heading.
        width_mm: its width.
        blank: whether it is for writing in.
        ruled: whether upright rules bound it.
    """

    title: str
    width_mm: float
    blank: bool = False
    ruled: bool = False


def draw_table(
    page: Page, top: float, columns: Sequence[Column], rows: Sequence[Sequence[str]],
    row_mm: float, size: float = 6.6, groups: Sequence[int] = (),
) -> float:  # fmt: skip
    """A ruled table across the page; returns where it ends.

    Args:
        page: where.
        top: its top edge.
        columns: from left to right.
        rows: one text for each column that is not blank.
        row_mm: height of a row.
        size: of the letters, in points.
        groups: numbers of the rows that a heavier rule goes above.
    """
    edges = [page.left]
    for column in columns:
        edges.append(edges[-1] + column.width_mm)
    bottom = top + row_mm * (len(rows) + 1)
    page.shade(edges[0], top, edges[-1] - edges[0], row_mm)
    for column, left in zip(columns, edges, strict=False):
        words = fitted(column.title, column.width_mm - 1.4, size, bold=True)
        page.text(left + 0.8, top + row_mm / 2 + _DROP_MM, words, size, fontweight="bold")
        if column.blank or column.ruled:
            page.line(left, top, left, bottom, 0.4)
            page.line(left + column.width_mm, top, left + column.width_mm, bottom, 0.4)
    for number, cells in enumerate(rows):
        y = top + (number + 1.5) * row_mm + _DROP_MM
        rule = top + (number + 1) * row_mm
        page.line(edges[0], rule, edges[-1], rule,
                  *((0.9, INK) if number in groups else (0.3, RULE)))  # fmt: skip
        given = iter(cells)
        for column, left in zip(columns, edges, strict=False):
            if not column.blank:
                words = fitted(next(given), column.width_mm - 1.2, size)
                page.text(left + 0.8, y, words, size)
    page.line(edges[0], bottom, edges[-1], bottom, 0.9, INK)
    return bottom


def draw_parts(page: Page, top: float, sheet: Sheet, row_mm: float) -> tuple[float, int]:
    """The part list with room to write; returns where it ends and how many rows it has."""
    span = page.right - page.left
    columns = (
        Column("Part", 15.0), Column("Place", 46.0), Column("Value", 18.0),
        Column("Tolerance", 18.0), Column("Kind", span - 121.0), Column("Measured", 24.0, True),
    )  # fmt: skip
    rows = [
        (_references(lines), _place(lines), lines[0].value_text or "—",
         lines[0].tolerance_text or "—", lines[0].kind)
        for lines in _alike(sheet.parts.lines())
    ]  # fmt: skip
    return draw_table(page, top, columns, rows, row_mm), len(rows) + 1


def _alike(lines: Sequence[PartLine]) -> list[list[PartLine]]:
    """Bleed resistors on one line, for they are all the same; everything else on its own."""

    def key(line: PartLine) -> str:
        return "bleed" if line.place.startswith("across") else line.reference

    return [list(group) for _, group in groupby(lines, key)]


def _references(lines: Sequence[PartLine]) -> str:
    first, last = lines[0].reference, lines[-1].reference
    return first if len(lines) == 1 else f"{first} to {last}"


def _place(lines: Sequence[PartLine]) -> str:
    return lines[0].place if len(lines) == 1 else "across each contact"


def draw_signals(page: Page, top: float, sheet: Sheet, row_mm: float) -> tuple[float, int]:
    """What to set on the generator; returns where it ends and how many rows it has."""
    at = sheet.levels
    stairs = ", ".join(f"{v:.4g}" for v in at.stairs_v)
    lines = (
        f"Square wave {at.low_v:.4g} V to {at.high_v:.4g} V: {at.high_v - at.low_v:.4g} V peak to "
        f"peak, offset {(at.high_v + at.low_v) / 2:.4g} V. Staircase {stairs} V, then down to "
        f"{at.low_v:.4g} V.",
        f"Settling, the pot at 1: each level lasts {SETTLED} time constants of the slowest build "
        "or more, so a step comes to within 0.1 % (absorption and bleed creep on). Hurried, the "
        f"pot at 1: a level lasts {HURRIED:g} time constant of the fastest build or less; it "
        "cannot settle.",
    )
    for words in lines:
        top = page.paragraph(page.left, top, page.right - page.left, words, 7.0)
    span = page.right - page.left
    columns = (
        Column("Range", span - 142.0), Column("Settling square", 27.0), Column("Each stair", 20.0),
        Column("Hurried square", 25.0), Column("Out at hurried, peak to peak", 44.0),
        Column("Measured", 26.0, True),
    )  # fmt: skip
    rows = [
        (
            f"{number} {row.range_name}", hertz(row.settle_hz), seconds(row.stair_s),
            hertz(row.hurried_hz), volts_within(row.swing_v),
        )
        for number, row in enumerate(sheet.signals, start=1)
    ]  # fmt: skip
    top = draw_table(page, top + 1.2, columns, rows, row_mm)
    return _draw_stairs(page, top, sheet, row_mm), 3 * len(rows) + 2


def _draw_stairs(page: Page, top: float, sheet: Sheet, row_mm: float) -> float:
    """Volts out at the end of each stair, the pot at 1, and a row under each to write in."""
    span = page.right - page.left
    first = span - len(sheet.levels.stairs_v) * 28.5
    stairs = [Column(f"Stair {v:.4g} V", 28.5, ruled=True) for v in sheet.levels.stairs_v]
    rows = []
    for number, row in enumerate(sheet.signals, start=1):
        rows.append([f"{number} {row.range_name}", *map(volts_within, row.stairs)])
        rows.append(["read", *("" for _ in row.stairs)])
    columns = (Column("Range, pot at 1", first), *stairs)
    return draw_table(page, top + 1.6, columns, rows, row_mm)


def draw_expectations(page: Page, top: float, sheet: Sheet, row_mm: float) -> float:
    """For every range and rotation what to expect, with limits, and room to write."""
    span = page.right - page.left
    pot, slow, volts, times = 8.0, 14.0, 29.0, 27.0
    blank = (span - pot - slow - 2.0 * volts - 2.0 * times) / 4.0
    columns = (
        Column("Pot", pot), Column("Square", slow),
        Column("Time constant", times), Column("Read", blank, True),
        Column("Rise 10–90 %", times), Column("Read", blank, True),
        Column("Volts after 1 τ", volts), Column("Read", blank, True),
        Column("Settled volts", volts), Column("Read", blank, True),
    )  # fmt: skip
    rows = [
        (
            f"{row.limits.rotation:g}".replace("0.25", "1/4").replace("0.5", "1/2")
            .replace("0.75", "3/4"),
            hertz(row.square_hz), seconds_within(row.limits.time_constant_s),
            seconds_within(row.limits.rise_s), volts_within(row.after_v),
            volts_within(row.settled_v),
        )
        for row in sheet.rows
    ]  # fmt: skip
    steps = len(ROTATIONS)
    for start in range(0, len(rows), steps):
        name = f"Range {start // steps + 1}  {sheet.signals[start // steps].range_name}"
        title = fitted(name, span - 4.0, 7.2, bold=True)
        page.text(page.left + 0.8, top + row_mm / 2, title, 7.2, fontweight="bold")
        top = draw_table(page, top + row_mm, columns, rows[start : start + steps], row_mm, size=6.2)
        top += 0.8
    return top
