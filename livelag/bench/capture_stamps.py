"""Time stamps put right: printed with too few digits, repeated, or two rows to a stamp."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from livelag.errors import InputError

Vector = NDArray[np.float64]
Matrix = NDArray[np.float64]


def even_stamps(where: str, times_s: Vector, volts: Matrix) -> tuple[Vector, Matrix, list[str]]:
    """Rising stamps, their volts, and what was done to get there.

    Stamps that differ from an even grid by no more than their last digit are put on the grid;
    rows that share a stamp otherwise are averaged.

    Args:
        where: the file, for messages.
        times_s: (rows,) as written.
        volts: (channels, rows).

    Raises:
        InputError: if time runs backwards, or stands still.
    """
    steps = np.diff(times_s)
    if (steps < 0).any():
        row = int(np.flatnonzero(steps < 0)[0])
        raise InputError(
            f"{where}: time runs backwards after {times_s[row]:.9g} s; expected one capture with "
            "rising time stamps"
        )
    span = float(times_s[-1] - times_s[0])
    if span <= 0.0:
        raise InputError(f"{where}: every time stamp is {times_s[0]:.9g}; expected rising ones")
    digit = float(steps[steps > 0].min())  # no finer than the last digit written
    if float(steps.max()) - digit < 1e-9 * digit and steps.min() > 0:
        return times_s, volts, []
    grid = np.linspace(0.0, span, len(times_s))
    off = times_s - times_s[0] - grid
    grid += float((off.max() + off.min()) / 2)
    if float(np.ptp(off)) <= 1.001 * digit and (steps == 0).any():
        return times_s[0] + grid, volts, ["repeated time stamps are spread evenly"]
    if (steps == 0).any():
        firsts = np.flatnonzero(np.concatenate([[True], steps > 0]))
        counts = np.diff(np.append(firsts, len(times_s)))
        averaged = np.add.reduceat(volts, firsts, axis=1) / counts
        return times_s[firsts], averaged, ["rows that share a time stamp are averaged"]
    return times_s, volts, []
