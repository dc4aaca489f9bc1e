"""Picture of a spread: how both ends of every range scatter, on one log axis of time."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from livelag.bench.spread import Spread, SpreadResult
from livelag.circuit.stage import GlideStage
from livelag.report.figures import new_figure
from livelag.report.lines import line_style
from livelag.units import format_value

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_ENDS = ("shortest", "longest")


def spread_figure(stage: GlideStage, result: SpreadResult) -> Figure:
    """A row for each range: builds over time constant, quantiles, nominal, exact extremes."""
    names = stage.range_names
    figure = new_figure(10.0, 1.6 + 1.5 * len(names))
    rows = figure.subplots(len(names), 1, sharex=True, squeeze=False)[:, 0]
    gaps = "" if result.gap_fraction is None else f"; {100 * result.gap_fraction:.3g} % with a gap"
    figure.suptitle(
        f"{stage.title}\n{result.builds:,} builds{gaps}; bar: 95 % of them, "
        "whiskers: least and most, dashes: as designed",
        fontsize=11,
        parse_math=False,
    )
    for axes, name in zip(rows, names, strict=True):
        for number, what in enumerate(_ENDS):
            _draw_end(axes, result.of(name, what), number)
        axes.set_xscale("log")
        axes.set_ylim(-0.18, 1.15)
        axes.set_yticks([])
        axes.set_ylabel(repr(name), rotation=0, ha="right", va="center", parse_math=False)
        axes.grid(axis="x", which="major", alpha=0.4)
        axes.grid(axis="x", which="minor", alpha=0.12)
    rows[-1].xaxis.set_major_formatter(lambda value, place: format_value(value, "s"))
    rows[-1].xaxis.set_minor_formatter("")
    rows[-1].set_xlabel("time constant at both ends of the pot")
    handles, labels = rows[0].get_legend_handles_labels()
    if handles:
        figure.legend(
            handles, labels, loc="outside lower center", ncols=5, frameon=False, fontsize=9
        )
    return figure


def _draw_end(axes: Axes, row: Spread, number: int) -> None:
    colour = line_style(number)["color"]
    edges = np.geomspace(row.lowest, row.highest, len(row.counts) + 1)
    if row.highest > row.lowest * (1.0 + 1e-9):
        height = _smooth(row.counts / row.counts.max())
        axes.fill_between(
            edges[:-1], 0.0, height / height.max(), step="post", color=colour, alpha=0.35,
            label=f"{row.what}: share of the builds",
        )  # fmt: skip
    low, middle, high = row.quantiles
    axes.plot([row.lowest, row.highest], [-0.08, -0.08], "|-", color=colour, linewidth=1.0, ms=9)
    axes.plot([low, high], [-0.08, -0.08], color=colour, linewidth=4.0, solid_capstyle="butt")
    axes.plot([middle], [-0.08], "o", color="white", markeredgecolor=colour, ms=6, zorder=3)
    axes.axvline(row.nominal, color="0.2", linewidth=1.0, linestyle=(0, (4, 2)), zorder=0)


def _smooth(shares: np.ndarray) -> np.ndarray:
    """The mean of each bin with three on either side: few builds make ragged bins."""
    return np.convolve(shares, np.full(7, 1.0 / 7.0), mode="same")
