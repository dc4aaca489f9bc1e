"""Picture of choices of parts: the ranges of each on a log axis of time, against the wishes."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from livelag.bench.candidates import Candidate
from livelag.bench.wishes import Wishes
from livelag.report.figures import new_figure
from livelag.report.lines import line_style
from livelag.units import format_value

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_BAR = 0.24  # height of a range's bar; a choice has a row of height 1


def parts_figure(wishes: Wishes, candidates: Sequence[Candidate]) -> Figure:
    """A row for each choice, a bar for each of its ranges; behind them what was wished.

    The bars end at the rotations for which the times are wished.
    """
    figure = new_figure(10.5, 1.7 + 0.62 * len(candidates))
    axes = figure.subplots()
    figure.suptitle(
        "time constants of each choice (solid) against what was wished (pale)", fontsize=11
    )
    for index, name in enumerate(wishes.range_names):
        _draw_range(axes, wishes, candidates, index, name)
    for seconds in wishes.times_s:
        axes.axvline(seconds, color="0.35", linewidth=1.0, linestyle=(0, (4, 2)), zorder=0)
    ends = [*wishes.times_s, *(end.got_s for one in candidates for end in one.reached)]
    axes.set_xscale("log")
    axes.set_xlim(min(ends) / 1.4, max(ends) * 1.4)
    axes.set_ylim(len(candidates) - 0.5, -0.5)
    axes.set_yticks(range(len(candidates)), [_label(n, one) for n, one in enumerate(candidates, 1)])
    axes.tick_params(axis="y", length=0)
    axes.xaxis.set_major_formatter(lambda value, place: format_value(value, "s"))
    axes.xaxis.set_minor_formatter("")
    axes.set_xlabel("time constant; dashes: the times wished")
    axes.grid(axis="x", which="major", alpha=0.4)
    axes.grid(axis="x", which="minor", alpha=0.12)
    top = axes.secondary_xaxis("top")
    top.set_xticks(
        wishes.times_s, [format_value(seconds, "s") for seconds in wishes.times_s], fontsize=9
    )
    top.set_xticks([], minor=True)
    handles, labels = axes.get_legend_handles_labels()
    figure.legend(handles, labels, loc="outside lower center", ncols=4, frameon=False, fontsize=9)
    return figure


def _draw_range(
    axes: Axes, wishes: Wishes, candidates: Sequence[Candidate], index: int, name: str
) -> None:
    colour = line_style(index)["color"]
    shift = _BAR * (index - (wishes.ranges - 1) / 2.0)
    low, high = wishes.targets[index]
    for row, one in enumerate(candidates):
        axes.barh(row + shift, high - low, _BAR, left=low, color=colour, alpha=0.22, linewidth=0)
        shortest, longest = (end.got_s for end in one.reached[2 * index : 2 * index + 2])
        axes.plot(
            [shortest, longest], [row + shift, row + shift], "|-", color=colour, linewidth=2.2,
            markersize=8, markeredgewidth=1.6, label=f"range {name!r}" if row == 0 else None,
        )  # fmt: skip


def _label(number: int, one: Candidate) -> str:
    series = " / ".join(format_value(part.resistance_ohms, "Ω") for part in one.series)
    capacitors = ", ".join(format_value(part.capacitance_f, "F") for part in one.capacitors)
    pot = format_value(one.pot.resistance_ohms, "Ω")
    error = f"{100 * one.worst.error_fraction:+.1f} %"
    return (
        f"{number}{'*' if one.pareto else ''}  {series}, pot {pot}\n"
        f"{capacitors} {one.connection}, {error}"
    )
