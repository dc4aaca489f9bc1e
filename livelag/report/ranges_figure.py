"""Picture of the ranges: time constant against rotation, on a log axis."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from livelag.bench.ranges import AUDIBLE_S, all_range_times, tapers_beside, with_taper
from livelag.circuit.stage import GlideStage, Setting
from livelag.report.figures import new_figure
from livelag.report.lines import line_style
from livelag.units import format_value

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure


def ranges_figure(stage: GlideStage) -> Figure:
    """Time constant against rotation: every range, a panel for each taper, the fitted one first."""
    tapers = tapers_beside(stage)
    figure = new_figure(3.4 * len(tapers), 5.4)
    panels = figure.subplots(1, len(tapers), sharey=True, squeeze=False)[0]
    figure.suptitle(
        f"{stage.title}\ntime constant against rotation; a dot where an octave first takes"
        f" {format_value(AUDIBLE_S, 's')} to arrive",
        fontsize=11,
        parse_math=False,
    )
    for axes, taper in zip(panels, tapers, strict=True):
        fitted = taper is stage.pot.taper
        _draw_taper(axes, with_taper(stage, taper))
        axes.set_title(f"{taper.name} (fitted)" if fitted else taper.name, fontsize=10)
    panels[0].set_ylabel("time constant")
    panels[0].yaxis.set_major_formatter(lambda value, place: format_value(value, "s"))
    panels[0].yaxis.set_minor_formatter("")
    handles, labels = panels[0].get_legend_handles_labels()
    names = figure.legend(handles, labels, loc="outside lower center", ncols=6, frameon=False)
    for name in names.get_texts():
        name.set_parse_math(False)  # a $ is a $
    return figure


def _draw_taper(axes: Axes, stage: GlideStage) -> None:
    corners = np.array(stage.pot.taper.rotations)
    turns = np.unique(np.concatenate([np.linspace(0.0, 1.0, 401), corners]))
    for index, times in enumerate(all_range_times(stage)):
        taus = [stage.time_constant_s(Setting(index, float(turn))) for turn in turns]
        axes.semilogy(turns, taus, linewidth=1.8, label=repr(times.name), **line_style(index))
        if times.audible_from is not None:
            heard = Setting(index, times.audible_from)
            axes.plot(
                [times.audible_from], [stage.time_constant_s(heard)],
                "o", color=line_style(index)["color"], clip_on=False, zorder=3,
            )  # fmt: skip
    axes.set_xlim(0.0, 1.0)
    axes.set_xticks([0.0, 0.25, 0.5, 0.75, 1.0], ["0", "0.25", "0.5", "0.75", "1"])
    axes.set_xlabel("rotation")
    axes.grid(which="major", alpha=0.4)
    axes.grid(which="minor", alpha=0.12)
