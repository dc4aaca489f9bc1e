"""Which channel is before the glide and which after: the one after is the other, low-passed.

Each ordered pair is fitted with one lag over a ladder of time constants. The wrong way round an
edge would have to follow from a slow curve, which no lag can do.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import permutations

import numpy as np
from numpy.typing import NDArray

from livelag.bench.capture import Capture
from livelag.bench.fit_response import lag_at_samples
from livelag.bench.fit_window import Trace, average, edges_of, new_trace, noise_v, part
from livelag.errors import InputError, UnknownNameError

Vector = NDArray[np.float64]
SMALLEST_V = 1e-9  # no oscilloscope shows less
_ROUGH_ROWS = 4000
# The right way round leaves much less than the wrong way, or so clearly less that it is no chance:
# twice the logarithm of the likelihood ratio under white noise.
_MUCH, _NO_CHANCE = 2.0, 30.0


@dataclass(frozen=True)
class Roles:
    """Channels with their roles, and a first idea of the time constant.

    Attributes:
        input_name: channel before the glide.
        output_name: channel after it.
        trace: every sample of both.
        rough_s: time constant of the best rung of the ladder.
    """

    input_name: str
    output_name: str
    trace: Trace
    rough_s: float


def find_roles(
    capture: Capture, input_channel: str | None = None, output_channel: str | None = None
) -> Roles:
    """Find the input and the output of a capture, or take those told.

    Args:
        capture: two channels or more.
        input_channel: name or number (from 1) of the channel before the glide; None finds it.
        output_channel: same of the channel after it.

    Raises:
        UnknownNameError: if there is no such channel.
        InputError: if both are the same, nothing moves, or the channels do not tell which is which.
    """
    told = [
        None if asked is None else _channel(capture, asked)
        for asked in (input_channel, output_channel)
    ]
    if told[0] is not None and told[0] == told[1]:
        raise InputError(
            f"{capture.name}: input and output are both {capture.channel_names[told[0]]!r}; "
            "they must be two channels"
        )
    moving = [i for i in range(len(capture.volts)) if _moves(capture.volts[i])]
    _check_moving(capture, moving, told)
    pairs = [
        (a, b) for a, b in permutations(moving, 2)
        if told[0] in (None, a) and told[1] in (None, b)
    ]  # fmt: skip
    tried = sorted((*_rough(capture, a, b), a, b) for a, b in pairs)
    left, rough_s, a, b = tried[0]
    trace = new_trace(capture.times_s, capture.volts[a], capture.volts[b])
    swapped = next((row[0] for row in tried if row[2:] == (b, a)), None)
    ratio = max(tried[1][0], 1e-30) / max(left, 1e-30) if len(tried) > 1 else math.inf
    rows = min(len(trace.times_s), _ROUGH_ROWS)
    if None in told and ratio < _MUCH and rows * math.log(ratio) < _NO_CHANCE:
        reason = "move alike" if swapped == tried[1][0] else "fit one another equally well"
        one, other = tried[0][2:], tried[1][2:]
        names = sorted({repr(capture.channel_names[i]) for i in (*one, *other)})
        raise InputError(
            f"{capture.name}: channels {', '.join(names)} {reason}, so it cannot be told which is "
            "before the glide; give --in and --out, and capture at least 20 samples in a time "
            "constant with a step of the input in view"
        )
    return Roles(capture.channel_names[a], capture.channel_names[b], trace, rough_s)


def _channel(capture: Capture, asked: str) -> int:
    if asked in capture.channel_names:
        return capture.channel_names.index(asked)
    if asked.isdecimal() and 1 <= int(asked) <= len(capture.channel_names):
        return int(asked) - 1
    raise UnknownNameError("channel", asked, capture.channel_names, where=capture.name)


def _moves(volts: Vector) -> bool:
    span = float(np.ptp(volts))
    # The reach of noise alone over n samples grows as sqrt(2 ln n).
    reach = 2.0 * noise_v(volts) * (2.0 * np.log(len(volts))) ** 0.5
    middle = float(np.ptp(np.quantile(volts, (0.02, 0.98))))
    return span > max(1.6 * reach, SMALLEST_V) and middle > 0.0


def _check_moving(capture: Capture, moving: list[int], told: list[int | None]) -> None:
    names = capture.channel_names
    if not moving:
        spans = ", ".join(
            f"{name!r} by {np.ptp(v):.3g} V" for name, v in zip(names, capture.volts, strict=True)
        )
        raise InputError(
            f"{capture.name}: shows no step, only noise ({spans}); expected a step of the input: "
            "trigger on its edge and show it whole, at least 3 time constants after it"
        )
    still = [i for i in told if i is not None and i not in moving]
    if still or len(moving) < 2:
        which = still[0] if still else next(i for i in range(len(names)) if i not in moving)
        raise InputError(
            f"{capture.name}: channel {names[which]!r} shows no step, it moves by "
            f"{np.ptp(capture.volts[which]):.3g} V; expected the input's step in one channel and "
            "the glide in the other"
        )


def _rough(capture: Capture, a: int, b: int) -> tuple[float, float]:
    """Share of the output's variance that the best lag leaves, and its time constant."""
    whole = new_trace(capture.times_s, capture.volts[a], capture.volts[b])
    first, last = 0, len(whole.times_s)
    while True:
        seen = part(whole, first, last)
        seen = average(seen, -(-(last - first) // _ROUGH_ROWS))
        left, rough_s = _best_rung(seen)
        if seen.averaged == 1 or rough_s > 10.0 * seen.interval_s:
            return left, rough_s
        # The lag hides within a few averaged rows: look closer at the first edge.
        edges = edges_of(seen)
        if not edges:
            return left, rough_s
        at = int(np.searchsorted(whole.times_s, edges[0].time_s))
        reach = max((last - first) // 16, 256)
        first, last = max(at - reach // 4, 0), min(at + reach, len(whole.times_s))


def _best_rung(trace: Trace) -> tuple[float, float]:
    t, u, v = trace.times_s, trace.input_v, trace.output_v
    span = float(t[-1] - t[0])
    rungs = np.geomspace(trace.interval_s / 2.0, 4.0 * span, 24)
    total = float(np.sum((v - v.mean()) ** 2)) or 1.0
    left = []
    for tau in rungs.tolist():
        columns = [lag_at_samples(t, u, tau), np.ones_like(t), np.exp(-(t - t[0]) / tau)]
        basis, _ = np.linalg.qr(np.column_stack(columns))
        left.append(float(np.sum((v - basis @ (basis.T @ v)) ** 2)) / total)
    best = int(np.argmin(left))
    return left[best], float(rungs[best])
