"""What of a capture is fitted: noise and steps of its channels, clipped tops, averaging, window."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Vector = NDArray[np.float64]
Mask = NDArray[np.bool_]

MOST_SAMPLES = 20_000
MOST_EDGES = 24
FLICKER = 0.15  # share of samples that turn back, above which a channel is noisy
_SAME_EDGE_ROWS = 8  # a slow edge may rest for a few rows
LONG_RUN = 60  # samples alike that a noisy channel does not show by itself


@dataclass(frozen=True)
class Trace:
    """An input and the output it drives, on the same instants.

    Attributes:
        times_s: (rows,) rising.
        input_v: (rows,) before the glide.
        output_v: (rows,) after it.
        usable: (rows,) False where the output is clipped.
        input_noise_v: standard deviation of the noise of one row of the input.
        input_step_v: smallest difference of the converter if it shows as long runs of one value,
            else 0: then it is part of the noise.
        output_step_v: same of the output.
        averaged: how many samples of the capture make a row.
    """

    times_s: Vector
    input_v: Vector
    output_v: Vector
    usable: Mask
    input_noise_v: float
    input_step_v: float
    output_step_v: float
    averaged: int = 1

    @property
    def interval_s(self) -> float:
        """Median time between rows."""
        return float(np.median(np.diff(self.times_s)))


@dataclass(frozen=True)
class Edge:
    """A jump of the input between two rows.

    Attributes:
        time_s: its middle.
        last_row: the row after the jump.
        volts: how far.
    """

    time_s: float
    last_row: int
    volts: float


def noise_v(volts: Vector) -> float:
    """Standard deviation of the noise from second differences, jumps left out.

    White noise of variance s^2 has second differences of variance 6 s^2, and a curve that is
    smooth over three samples has next to none.
    """
    bends = np.diff(volts, 2)
    kept = bends
    for _ in range(8):
        limit = 5.0 * float(np.sqrt(np.mean(kept**2)))
        fewer = kept[np.abs(kept) <= limit]
        if len(fewer) in (len(kept), 0):
            break
        kept = fewer
    return float(np.sqrt(np.mean(kept**2) / 6.0))


def step_v(volts: Vector) -> float:
    """Smallest difference between values of a channel; 0 if that is no converter's step.

    Too many values are none of its steps, and too few, such as the two of a clean square wave, do
    not show them.
    """
    values = np.unique(volts)
    if len(values) < 8 or len(values) > 4096 or len(values) > 0.7 * len(volts):
        return 0.0
    gaps = np.diff(values)
    step = float(gaps[gaps > 1e-6 * np.ptp(values)].min(initial=np.ptp(values)))
    return step if step < 0.05 * np.ptp(values) else 0.0


def flicker(volts: Vector) -> float:
    """Share of samples at which a channel turns back at once: near 2/3 for noise, 0 without."""
    moves = np.diff(volts)
    return float(np.mean(moves[1:] * moves[:-1] < 0.0))


def clipped(volts: Vector, smooth: bool) -> Mask:
    """Samples (rows,) at a ceiling or floor that cut the channel off.

    A noisy channel that lies still at its highest or lowest value is cut off there. One without
    noise, if it is ``smooth``, is cut off if it meets that value without slowing down.
    """
    cut = np.zeros(len(volts), dtype=bool)
    for extreme in (float(volts.max()), float(volts.min())):
        at = volts == extreme
        edges = np.flatnonzero(np.diff(np.concatenate([[False], at, [False]]).astype(np.int8)))
        starts, ends = edges[0::2], edges[1::2]
        longest = int(np.argmax(ends - starts))
        length = int(ends[longest] - starts[longest])
        away = volts[~at]
        if len(away) < 16 or length < 8:
            continue
        turning, step = flicker(away), step_v(volts)
        # On a steep slope noise seldom turns a channel back, but bends it more than steps (0.41).
        noisy = turning > FLICKER or 0.0 < 0.5 * step < noise_v(away)
        still = noisy and length >= LONG_RUN and _blurred(away)
        if still or (smooth and _meets_at_speed(volts, extreme, int(starts[longest]), length)):
            cut |= _closed(at)
    return cut


def _blurred(volts: Vector) -> bool:
    """Whether noise covers so many of a converter's steps that no level looks still.

    Noise of a fraction of a step shows on a level at the border of two, as 0.5 steps, and not at
    all on one in the middle of a step. There a sample bends by two steps at most.
    """
    gaps = np.diff(np.unique(volts))
    step = float(gaps[gaps > 1e-6 * np.ptp(volts)].min(initial=np.ptp(volts)))
    bends = np.abs(np.diff(volts, 2)) / step if step else np.zeros(1)
    several = (bends > 2.5) & (bends < 8.0)  # more is a jump
    return noise_v(volts) > 0.7 * step or float(several.mean()) > 0.01


def _closed(at: Mask) -> Mask:
    """The same samples, with short gaps between and some on either side.

    Near a ceiling the noise decides which samples reach it; to keep the others would be a choice.
    """
    reach = LONG_RUN // 2
    near = np.convolve(at.astype(np.float64), np.ones(2 * reach + 1), mode="same") > 0.5
    closed: Mask = np.asarray(near, dtype=bool)
    return closed


def _meets_at_speed(volts: Vector, extreme: float, start: int, length: int) -> bool:
    """Whether a channel runs into its highest or lowest value without slowing down.

    A decay takes more than twice as long over the last two parts of the way as over the three
    before; a channel that is cut off takes two thirds of it.
    """
    away = np.abs(volts[:start] - extreme)
    step = step_v(volts) or float(np.ptp(volts)) / 250.0
    for parts in (1.0, 4.0, 16.0):
        far = np.flatnonzero(away > 5.0 * parts * step)
        near = np.flatnonzero(away > 2.0 * parts * step)
        if not len(far) or near[-1] - far[-1] < 4:
            continue
        ratio = (start - near[-1]) / (near[-1] - far[-1])
        return bool(ratio < 1.4 and length > 6 * (start - far[-1]))
    return False


def new_trace(times_s: Vector, input_v: Vector, output_v: Vector) -> Trace:
    """A trace of every sample of a capture."""
    steps = []
    for volts in (input_v, output_v):
        step = step_v(volts)
        # Noise of some half a step and more makes the steps part of the noise.
        still = step > 0.0 and noise_v(volts) < 0.5 * step
        steps.append(step if still else 0.0)
    if noise_v(input_v) == 0.0 and not steps[0]:
        steps[0] = steps[1]  # a clean input of a few levels: steps like those of the output
    usable: Mask = ~clipped(output_v, smooth=True)
    return Trace(times_s, input_v, output_v, usable, noise_v(input_v), steps[0], steps[1])


def edges_of(trace: Trace) -> tuple[Edge, ...]:
    """Jumps of the input: moves between rows far above its noise and 5 % of its span."""
    moves = np.diff(trace.input_v)
    limit = max(8.0 * trace.input_noise_v, 0.05 * float(np.ptp(trace.input_v)))
    rows = np.flatnonzero(np.abs(moves) > limit)
    found = []
    signs = np.sign(moves[rows])
    apart = (np.diff(rows) > _SAME_EDGE_ROWS) | (np.diff(signs) != 0)
    for group in np.split(rows, np.flatnonzero(apart) + 1):
        if len(group):
            first, last = int(group[0]), int(group[-1]) + 1
            middle = (trace.times_s[first] + trace.times_s[last]) / 2.0
            jump = float(trace.input_v[last] - trace.input_v[first])
            if jump != 0.0:
                found.append(Edge(float(middle), last, jump))
    return tuple(found)


def average(trace: Trace, count: int) -> Trace:
    """Rows averaged in groups of so many; both channels alike, so that the lag between stays."""
    if count <= 1:
        return trace
    rows = len(trace.times_s) // count
    cut = rows * count

    def mean(values: Vector) -> Vector:
        averaged: Vector = values[:cut].reshape(rows, count).mean(axis=1)
        return averaged

    usable: Mask = np.asarray(trace.usable[:cut].reshape(rows, count).all(axis=1), dtype=bool)
    return Trace(
        mean(trace.times_s),
        mean(trace.input_v),
        mean(trace.output_v),
        usable,
        max(trace.input_noise_v, trace.input_step_v / 12**0.5) / count**0.5,
        trace.input_step_v,
        trace.output_step_v,
        trace.averaged * count,
    )


def part(trace: Trace, first: int, last: int) -> Trace:
    """Rows from ``first`` up to, not including, ``last``."""
    return Trace(
        trace.times_s[first:last],
        trace.input_v[first:last],
        trace.output_v[first:last],
        trace.usable[first:last],
        trace.input_noise_v,
        trace.input_step_v,
        trace.output_step_v,
        trace.averaged,
    )


def thinned(trace: Trace, time_constant_s: float) -> Trace:
    """The trace with as many rows as a fit needs: fewer steps of the input, rows averaged.

    Rows are averaged only as far as a hundredth of the time constant.
    """
    edges = edges_of(trace)
    last = len(trace.times_s)
    if len(edges) > MOST_EDGES:
        last = edges[MOST_EDGES].last_row - 2
    if edges:  # what comes long after the last jump tells nothing
        end = edges[min(len(edges), MOST_EDGES) - 1].time_s + 60.0 * time_constant_s
        last = min(last, int(np.searchsorted(trace.times_s, end)))
        begin = edges[0].time_s - 30.0 * time_constant_s
        first = min(int(np.searchsorted(trace.times_s, begin)), max(last - 16, 0))
        trace = part(trace, first, last)
    else:
        trace = part(trace, 0, last)
    rows = len(trace.times_s)
    if rows <= MOST_SAMPLES:
        return trace
    fine_enough = max(int(time_constant_s / 100.0 / trace.interval_s), 1)
    trace = average(trace, min(fine_enough, -(-rows // MOST_SAMPLES)))
    return part(trace, 0, min(len(trace.times_s), 10 * MOST_SAMPLES))
