"""Picture of the tuning error along the pot, by cause, for every range."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

import numpy as np

from livelag.bench.tuning import (
    OFFSET_CAUSES,
    SCALE_CAUSES,
    Compass,
    Tuning,
    tuning_along_pot,
)
from livelag.circuit.stage import GlideStage
from livelag.report.figures import new_figure
from livelag.report.lines import line_style

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_NAMES = {
    "input_offset": "input offset",
    "output_offset": "output offset",
    "bias_current": "bias current",
    "insulation": "insulation",
    "output_divider": "output divider",
    "swing": "swing",
}


def tuning_figure(stage: GlideStage, compass: Compass, points: int = 101) -> Figure:
    """Offset above and scale error below against rotation, a column for each range.

    Args:
        stage: the stage.
        compass: the notes that are to be in tune.
        points: rotations in each line.
    """
    turns = np.linspace(0.0, 1.0, points)
    columns = len(stage.ranges)
    figure = new_figure(max(7.0, 3.2 * columns), 6.4)
    grid = figure.subplots(2, columns, sharex=True, sharey="row", squeeze=False)
    figure.suptitle(
        f"{stage.title}\ntuning error of a held note; grey: worst case over data-sheet maxima",
        fontsize=11,
        parse_math=False,
    )
    for column, name in enumerate(stage.range_names):
        rows = [
            row
            for row in tuning_along_pot(stage, turns.tolist(), compass)
            if row.range_name == name
        ]
        offset, scale = grid[0, column], grid[1, column]
        _draw(offset, turns, rows, OFFSET_CAUSES, _offset, _offset_limit)
        _draw(scale, turns, rows, SCALE_CAUSES, _scale, _scale_limit)
        offset.set_title(f"range {name!r}", fontsize=10, parse_math=False)
        scale.set_xlabel("rotation")
    for axes, label, knee in (
        (grid[0, 0], "offset, cents", 10.0),
        (grid[1, 0], "scale, cents per octave", 1.0),
    ):
        axes.set_ylabel(label)
        _stretch_middle(axes, knee)
    for axes in grid[:, -1]:
        axes.legend(loc="upper left", bbox_to_anchor=(1.0, 1.0), frameon=False, fontsize=9)
    return figure


def _offset(row: Tuning) -> float:
    return row.offset_cents


def _offset_limit(row: Tuning) -> float:
    return row.limits.worst_offset_cents


def _scale(row: Tuning) -> float:
    return row.scale_cents_per_octave


def _scale_limit(row: Tuning) -> float:
    return row.limits.worst_scale_cents_per_octave


def _draw(
    axes: Axes,
    turns: np.ndarray,
    rows: Sequence[Tuning],
    causes: Sequence[str],
    total: Callable[[Tuning], float],
    limit: Callable[[Tuning], float],
) -> None:
    reach = np.array([limit(row) for row in rows])
    # A scale error only ever loses volts; an offset may have either sign.
    upper = reach if causes == OFFSET_CAUSES else np.zeros_like(reach)
    axes.fill_between(turns, -reach, upper, color="0.9")
    # The sum goes under its causes, wide and pale: where one cause is all, both are seen.
    axes.plot(turns, [total(row) for row in rows], linewidth=6.0, alpha=0.3, label="sum", color="0")
    for number, cause in enumerate(causes):
        errors = [row.causes[cause] for row in rows]
        axes.plot(turns, errors, linewidth=1.6, label=_NAMES[cause], **line_style(number))
    axes.set_xlim(0.0, 1.0)
    axes.set_xticks([0.0, 0.25, 0.5, 0.75, 1.0], ["0", "0.25", "0.5", "0.75", "1"])
    axes.grid(alpha=0.3)


def _stretch_middle(axes: Axes, knee: float) -> None:
    """Straight within the knee, logarithmic beyond, so that limits do not hide the typical."""
    low, high = axes.get_ylim()
    axes.set_yscale("symlog", linthresh=knee, linscale=1.5)
    sizes = [knee * 10.0**power for power in range(6)]
    ticks = [-0.5 * knee, 0.0, 0.5 * knee, *sizes, *(-size for size in sizes)]
    shown = sorted(tick for tick in ticks if low <= tick <= high)
    axes.set_yticks(shown, [f"{tick:g}" for tick in shown])
    axes.minorticks_off()
