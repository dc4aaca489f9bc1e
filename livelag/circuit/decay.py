"""Sums of decaying exponentials: where they cross zero, and when they are last outside a limit.

f(t) = sum of a_m e^(s_m t). Multiplied by e^(-s t) for one of its s, that term becomes constant
and vanishes under differentiation, and between two zeros of a function lies one of its
derivative's (Rolle). So the zeros of a sum of M terms lie between those of one of M - 1, and
every zero is found: none is missed, as a scan could.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

Vector = NDArray[np.float64]


def zero_crossings(weights: Vector, poles: Vector, end_s: float) -> list[float]:
    """Times in (0, end_s] where the sum of ``weights`` x exp(``poles`` t) changes sign, in order.

    Args:
        weights: (terms,) any sign.
        poles: (terms,) in 1/s, distinct.
        end_s: where to stop looking, in seconds, more than 0.
    """
    keep = weights != 0.0
    weights, poles = weights[keep], poles[keep]
    if len(weights) < 2:
        return []
    order = np.argsort(poles)[::-1]
    weights, poles = weights[order], poles[order]
    shifted = poles - poles[0]
    turning = zero_crossings(weights[1:] * shifted[1:], shifted[1:], end_s)

    def value(t: float) -> float:
        return float(weights @ np.exp(shifted * t))

    edges = [0.0, *turning, end_s]
    found = []
    for left, right in pairwise(edges):
        if value(left) * value(right) < 0.0:
            found.append(_root(value, left, right))
    return found


def last_time_outside(weights: Vector, poles: Vector, limit: float) -> float:
    """Last time at which the size of a sum of decays exceeds a limit; 0 if it never does.

    Args:
        weights: (terms,) any sign.
        poles: (terms,) in 1/s, each below 0.
        limit: more than 0, in the unit of the weights.
    """
    bound = float(np.abs(weights).sum())
    if not bound > limit:
        return 0.0
    # |f(t)| <= bound e^(slowest t), so nothing lies outside after this.
    end_s = math.log(bound / limit) / float(-poles.max()) * 1.0001
    latest = 0.0
    for side in (limit, -limit):
        crossings = zero_crossings(np.append(weights, -side), np.append(poles, 0.0), end_s)
        latest = max([latest, *crossings])
    return latest


def _root(value: Callable[[float], float], left: float, right: float) -> float:
    from scipy.optimize import brentq

    return float(brentq(value, left, right, xtol=1e-15, rtol=1e-14, maxiter=1000))
