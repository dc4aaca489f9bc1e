"""The response of a glide stage to a measured input: exact for straight lines between samples.

Over a sample of h seconds, in which the drive runs from u0 to u1 in a straight line, a lag with
time constant tau moves by

    y1 = e y0 + ((1 - e)/a - e) u0 + (1 - (1 - e)/a) u1,   a = h/tau, e = exp(-a)     (1)

One absorption branch, a share f of the capacitance behind a time t_k, makes two decays of it:

    p^2 - p (1/RC + (1 + f)/t_k) + 1/(RC t_k) = 0,   A_1 + A_2 = 1,  A_1 p_1 + A_2 p_2 = 1/RC  (2)

Source: (1) the first-order lag driven by a ramp, textbook control theory; (2) from the equations
of `livelag.circuit.network` for one branch without leakage.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Vector = NDArray[np.float64]

_LONGEST_BLOCK = 300.0  # time constants; the exponential of it is far from overflow


@dataclass(frozen=True)
class Decays:
    """A response as a weighted sum of lags with gain 1.

    Attributes:
        times_s: time constant of each lag, the shortest first.
        weights: share of each, together 1.
    """

    times_s: tuple[float, ...]
    weights: tuple[float, ...]

    def rise_s(self) -> float:
        """10-90 % rise of a step."""
        if len(self.times_s) == 1:
            return math.log(9.0) * self.times_s[0]
        from scipy.optimize import brentq

        def left_of(level: float) -> float:
            def missing(t: float) -> float:
                pairs = zip(self.weights, self.times_s, strict=True)
                return sum(a * math.exp(-t / tau) for a, tau in pairs) - level

            return float(brentq(missing, 0.0, 5.0 * max(self.times_s), xtol=1e-15, rtol=1e-13))

        return left_of(0.1) - left_of(0.9)


def one_lag(time_constant_s: float) -> Decays:
    """A lone RC."""
    return Decays((time_constant_s,), (1.0,))


def with_absorption(time_constant_s: float, fraction: float, time_s: float) -> Decays:
    """An RC whose capacitor has one absorption branch, eq. 2.

    Args:
        time_constant_s: R C in seconds, more than 0.
        fraction: capacitance of the branch over C, more than 0.
        time_s: time constant of the branch in seconds, more than 0.
    """
    total = 1.0 / time_constant_s + (1.0 + fraction) / time_s
    product = 1.0 / (time_constant_s * time_s)
    fast = (total + math.sqrt(max(total * total - 4.0 * product, 0.0))) / 2.0
    slow = product / fast
    share = (1.0 / time_constant_s - slow) / (fast - slow) if fast > slow else 1.0
    return Decays((1.0 / fast, 1.0 / slow), (share, 1.0 - share))


def lag_at_samples(times_s: Vector, drive_v: Vector, time_constant_s: float) -> Vector:
    """Response (rows,) at the samples of the drive, at rest on its first value before, eq. 1."""
    a = np.diff(times_s) / time_constant_s
    e = np.exp(-a)
    mean = -np.expm1(-a) / a
    moved = np.empty_like(drive_v)
    moved[0] = drive_v[0]
    moved[1:] = (mean - e) * drive_v[:-1] + (1.0 - mean) * drive_v[1:]
    # y_j = e_j y_(j-1) + moved_j, solved block by block as a sum scaled by the decay so far.
    age = (times_s - times_s[0]) / time_constant_s
    answer = np.empty_like(drive_v)
    start, before = 0, 0.0
    while start < len(times_s):
        origin = age[start - 1] if start else age[0]
        end = max(int(np.searchsorted(age, origin + _LONGEST_BLOCK, side="right")), start + 1)
        grown = np.exp(np.minimum(age[start:end] - origin, 2.0 * _LONGEST_BLOCK))
        answer[start:end] = (before + np.cumsum(moved[start:end] * grown)) / grown
        start, before = end, float(answer[end - 1])
    return answer


def lag_at(times_s: Vector, drive_v: Vector, time_constant_s: float, delay_s: float) -> Vector:
    """Response (rows,) at the same instants to the drive as it was a delay ago."""
    at_samples = lag_at_samples(times_s, drive_v, time_constant_s)
    if delay_s == 0.0:
        return at_samples
    asked = times_s - delay_s
    place = np.clip(np.searchsorted(times_s, asked, side="right") - 1, 0, len(times_s) - 2)
    # Beyond the last sample, which a negative delay asks for, the last straight line goes on.
    after = np.maximum(asked - times_s[place], 0.0)
    slope = np.diff(drive_v) / np.diff(times_s)
    gone = -np.expm1(-after / time_constant_s)
    ramp = slope[place] * (after - time_constant_s * gone)
    response: Vector = at_samples[place] * (1.0 - gone) + drive_v[place] * gone + ramp
    return response
