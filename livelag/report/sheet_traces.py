"""Expected traces with their tolerance bands, in ink and hatching alone."""

from __future__ import annotations

from itertools import chain
from typing import TYPE_CHECKING

from livelag.bench.sheet import Sheet, Trace
from livelag.report.sheet_page import INK, PENCIL, RULE, Page, fitted, width_mm
from livelag.report.sheet_words import hertz, seconds

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_SIZE, _TICK_SIZE = 6.0, 5.4
_TURNS = {0.5: "1/2", 1.0: "1"}
_LEFT, _BELOW, _TITLE = 7.0, 5.4, 3.6  # room around the axes of a panel, in mm
_GAP = 2.0
_TWO_ABREAST = 4  # from so many ranges on two ranges share a row
_TALLEST = 56.0  # panels, in mm


def panel_rows(sheet: Sheet) -> int:
    """How many rows of panels there are."""
    ranges = len(sheet.signals)
    return ranges if ranges < _TWO_ABREAST else -(-ranges // 2)


def draw_traces(page: Page, top: float, sheet: Sheet) -> float:
    """Panels down to the foot of the page: for each range an edge, a staircase, a fast square.

    With many ranges the staircase, whose steps look like the edge, makes way. Returns where
    they end.
    """
    kept = [
        [trace for trace in sheet.traces if trace.range_name == row.range_name]
        for row in sheet.signals
    ]
    rows = kept
    if len(kept) >= _TWO_ABREAST:
        short = [[edge, hurried] for edge, _, hurried in kept]
        rows = [list(chain(*short[n : n + 2])) for n in range(0, len(short), 2)]
    height = min((page.bottom - top) / len(rows), _TALLEST)
    width = (page.right - page.left + _GAP) / len(rows[0])
    for down, row in enumerate(rows):
        for across, trace in enumerate(row):
            left = page.left + across * width
            _panel(page, left, top + down * height, width - _GAP, height, trace, sheet)
    return top + len(rows) * height


def _panel(
    page: Page, left: float, top: float, width: float, height: float, trace: Trace, sheet: Sheet
) -> None:
    title = fitted(_title(trace, sheet), width - 1.0, _SIZE + 0.4, bold=True)
    page.text(left + 0.5, top + 1.8, title, _SIZE + 0.4, fontweight="bold")
    axes_mm = width - _LEFT - 2.0
    axes = page.axes_at(left + _LEFT, top + _TITLE, axes_mm, height - _TITLE - _BELOW)
    _draw(axes, trace)
    _marks(axes, trace, sheet, axes_mm)


def _title(trace: Trace, sheet: Sheet) -> str:
    number = [row.range_name for row in sheet.signals].index(trace.range_name)
    signals = sheet.signals[number]
    what = {
        "edge": "rising edge",
        "staircase": f"stairs of {seconds(signals.stair_s)}",
        "hurried": f"square {hertz(signals.hurried_hz)}",
    }[trace.signal]
    return f"Range {number + 1}, pot {_TURNS[trace.rotation]}: {what}"


def _draw(axes: Axes, trace: Trace) -> None:
    axes.fill_between(
        trace.times_s, trace.low_v, trace.high_v, facecolor="0.93", edgecolor=RULE,
        linewidth=0.4, hatch="//////",
    )  # fmt: skip
    axes.plot(trace.times_s, trace.key_volts, color=PENCIL, linewidth=0.7, linestyle=(0, (4, 2)))
    axes.plot(trace.times_s, trace.nominal_v, color=INK, linewidth=1.1)
    axes.set_xlim(float(trace.times_s[0]), float(trace.times_s[-1]))


def _marks(axes: Axes, trace: Trace, sheet: Sheet, axes_mm: float) -> None:
    at = sheet.levels
    margin = 0.12 * (at.high_v - at.low_v)
    low = min(float(trace.low_v.min()), at.low_v) - margin
    high = max(float(trace.high_v.max()), at.high_v) + margin
    axes.set_ylim(low, high)
    volts = [f"{v:.3g}" for v in at.stairs_v]
    axes.set_yticks(at.stairs_v, [*volts[:-1], f"{volts[-1]} V"])
    span = float(trace.times_s[-1])
    ticks = [span * part for part in (0.0, 0.25, 0.5, 0.75, 1.0)]
    if trace.signal == "edge":
        tau = span / 6.0
        ticks = [tau * count for count in (0.0, 1.0, 2.0, 3.0, 4.0, 5.0)]
        axes.axvline(tau, color=PENCIL, linewidth=0.5, linestyle=(0, (1, 1.5)))
    if trace.signal == "staircase":
        ticks = [span * count / len(at.stairs_v) for count in range(len(at.stairs_v) + 1)]
    axes.set_xticks(ticks, _without_collisions(ticks, trace, axes_mm))
    if _at_end(ticks[-1], trace):  # it would stick out of the panel
        axes.get_xticklabels()[-1].set_horizontalalignment("right")
    axes.tick_params(labelsize=_TICK_SIZE, length=1.6, width=0.4, pad=1.2, direction="out")
    axes.grid(color="0.8", linewidth=0.3)
    axes.set_axisbelow(True)
    for spine in axes.spines.values():
        spine.set_linewidth(0.5)
        spine.set_color(PENCIL)


def _without_collisions(ticks: list[float], trace: Trace, axes_mm: float) -> list[str]:
    """Labels of the ticks, or of every second one if they would touch one another."""
    labels = [seconds(tick) for tick in ticks]
    if _touching(ticks, labels, trace, axes_mm):
        # One time constant keeps its label.
        kept = 1 if trace.signal == "edge" else 0
        labels = [
            words if number % 2 == kept or number == 0 else ""
            for number, words in enumerate(labels)
        ]
    return labels


def _touching(ticks: list[float], labels: list[str], trace: Trace, axes_mm: float) -> bool:
    start, end = float(trace.times_s[0]), float(trace.times_s[-1])
    taken = -_LEFT
    for tick, words in zip(ticks, labels, strict=True):
        wide = width_mm(words, _TICK_SIZE)
        left = (tick - start) / (end - start) * axes_mm - wide / (1 if _at_end(tick, trace) else 2)
        if left < taken + 0.8:
            return True
        taken = left + wide
    return False


def _at_end(tick: float, trace: Trace) -> bool:
    return tick > float(trace.times_s[-1]) * (1.0 - 1e-9)
