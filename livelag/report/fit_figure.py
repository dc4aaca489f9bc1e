"""Picture of fits: what was captured, the curve fitted through it, and what is left over."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from livelag.bench.fit import CaptureFit
from livelag.report.figures import ERROR_COLOUR, GLIDE_COLOUR, KEY_COLOUR, new_figure
from livelag.units import format_value

if TYPE_CHECKING:
    from matplotlib.figure import Figure

_MOST_POINTS = 4000
_MOST_ACROSS = 3


def fit_figure(title: str, fits: Sequence[tuple[str, CaptureFit]]) -> Figure:
    """A pair of panels for each capture: data and fit above, residual below.

    Args:
        title: first line of the heading, none if empty.
        fits: where the controls stood, in words, and the fit; one or more.
    """
    across = min(len(fits), _MOST_ACROSS)
    down = -(-len(fits) // across)
    figure = new_figure(9.0 if across == 1 else 5.4 * across, 6.2 if down == 1 else 4.6 * down)
    if title:
        figure.suptitle(title, fontsize=11, parse_math=False)
    cells = figure.subfigures(down, across, squeeze=False)
    for number, (where, fit) in enumerate(fits):
        _draw(cells[number // across, number % across], where, fit)
    return figure


def _draw(cell: Any, where: str, fit: CaptureFit) -> None:
    upper, lower = cell.subplots(2, 1, sharex=True, height_ratios=[2.4, 1])
    unit, scale = _time_unit(float(np.ptp(fit.trace.times_s)))
    rows = np.arange(0, len(fit.trace.times_s), -(-len(fit.trace.times_s) // _MOST_POINTS))
    use = fit.trace.usable[rows]
    t = fit.trace.times_s[rows] * scale
    upper.plot(
        t, fit.trace.input_v[rows], color=KEY_COLOUR, linewidth=1.0, linestyle=(0, (4, 2)),
        label=f"in: {fit.input_name}",
    )  # fmt: skip
    upper.plot(
        t[use], fit.trace.output_v[rows][use], ".", color=GLIDE_COLOUR, markersize=3.0, alpha=0.5,
        label=f"out: {fit.output_name}",
    )  # fmt: skip
    if not use.all():
        upper.plot(
            t[~use], fit.trace.output_v[rows][~use], ".", color="0.6", markersize=2.0,
            label="clipped, left out",
        )  # fmt: skip
    upper.plot(t, fit.fitted_v[rows], color=ERROR_COLOUR, linewidth=1.6, label="fit")
    tau, u95 = fit.time_constant_s.value, fit.time_constant_s.u95
    heading = f"{Path(fit.name).name}{f' ({where})' if where else ''}: time constant "
    heading += f"{format_value(tau, 's', 4)} ± {format_value(u95, 's', 2)}"
    upper.set_title(heading, fontsize=10, parse_math=False)
    upper.set_ylabel("volts")
    names = upper.legend(frameon=False, fontsize=8, loc="best")
    for name in names.get_texts():
        name.set_parse_math(False)  # a $ is a $
    upper.grid(alpha=0.3)
    lower.axhline(0.0, color=ERROR_COLOUR, linewidth=1.2)
    left = fit.residual_v[rows][use] * 1e3
    lower.plot(t[use], left, ".", color=GLIDE_COLOUR, markersize=2.5, alpha=0.6)
    reach = 1.15 * float(np.abs(left).max(initial=1e-6))
    lower.set_ylim(-reach, reach)
    lower.set_ylabel("out - fit, mV")
    lower.set_xlabel(f"time, {unit}")
    lower.grid(alpha=0.3)
    lower.set_xlim(float(t[0]), float(t[-1]))


def _time_unit(span_s: float) -> tuple[str, float]:
    for unit, scale in (("s", 1.0), ("ms", 1e3), ("µs", 1e6)):
        if span_s * scale >= 2.0:
            return unit, scale
    return "ns", 1e9
