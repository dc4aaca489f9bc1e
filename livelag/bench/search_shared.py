"""Search over stages whose ranges share one series resistor: capacitors added or exchanged.

Pairs of resistor and pot are visited by a lower bound of their score, so that the search ends,
proven, at the first pair whose bound is beyond the best found. Within a pair only capacitors
inside the window that the bound leaves are tried.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from livelag.bench.candidates import TUNING_CENTS_PER_POINT
from livelag.bench.parts_space import SLACK, Best, Floats, Space
from livelag.bench.wishes import ADDED

_MOST_SUMS = 2_000_000  # beyond, the bound goes without the nearest sum of capacitors


def search_shared(space: Space, connection: str, count: int) -> Best:
    """The best candidates of one connection, ``added``, ``exchanged`` or ``single``."""
    best = Best(count)
    low = space.ohms[:, None] + space.pot_low
    high = space.ohms[:, None] + space.pot_high
    centres, halves = _stack(space, low, high)
    squares, worst = np.zeros_like(low), np.zeros_like(low)
    for k in range(space.wishes.ranges):
        near = _distance(centres[k], _log_capacitances(space, connection, k))
        squares += near**2 + halves[k] ** 2
        worst = np.maximum(worst, near + halves[k])
    track = space.ohms[:, None] + space.pot_track
    fixed = _plain_points(space) + space.least_tuning_points(connection, track)
    bounds = space.error_points(squares) + fixed
    bounds[worst > space.limit + SLACK] = np.inf
    for flat in np.argsort(bounds, axis=None, kind="stable"):
        row, pot = (int(index) for index in np.unravel_index(flat, bounds.shape))
        bound = bounds[row, pot]
        if not np.isfinite(bound) or bound > best.threshold + SLACK:
            break

        pair = _Pair(
            connection, centres[:, row, pot], halves[:, row, pot], float(fixed[row, pot]),
            float(track[row, pot]), best,
        )  # fmt: skip
        for chosen in _walk(space, pair, (), float((pair.halves**2).sum())):
            candidate = space.candidate(connection, (row,), pot, chosen)
            if candidate.worst_log <= space.limit:
                best.add(candidate)
    return best


def _stack(space: Space, low: Floats, high: Floats) -> tuple[Floats, Floats]:
    pairs = [space.centres(k, low, high) for k in range(space.wishes.ranges)]
    return np.stack([pair[0] for pair in pairs]), np.stack([pair[1] for pair in pairs])


def _plain_points(space: Space) -> Floats:
    """(resistors, pots) points for drive and parts."""
    drive = space.scoring.drive_points(space.ohms[:, None] + space.pot_end)
    points: Floats = drive + space.scoring.part_points(1 + 1 + space.wishes.ranges)
    return points


def _log_capacitances(space: Space, connection: str, k: int) -> Floats | None:
    """Ln of every capacitance that range k can have, rising; None if they are too many."""
    if connection != ADDED:
        return _log(space.farads)
    if len(space.farads) ** (k + 1) > _MOST_SUMS:
        return None
    sums: Floats = space.farads
    for _ in range(k):
        sums = np.unique(sums[:, None] + space.farads)
    return _log(sums)


def _log(values: Floats) -> Floats:
    logs: Floats = np.log(values)
    return logs


def _distance(points: Floats, values: Floats | None) -> Floats:
    """From each point to the nearest of the rising values; 0 if they are not known."""
    if values is None:
        return np.zeros_like(points)
    right = np.searchsorted(values, points)
    above = values[np.minimum(right, len(values) - 1)]
    below = values[np.maximum(right - 1, 0)]
    nearest: Floats = np.minimum(np.abs(above - points), np.abs(below - points))
    return nearest


@dataclass(frozen=True, slots=True)
class _Pair:
    """A pair of resistor and pot.

    Attributes:
        connection: how the switch connects.
        centres: (ranges,) ln C that suit best.
        halves: (ranges,) errors that remain with these.
        fixed: points that no choice of capacitors can save.
        track: R in ohms.
        best: what was found so far.
    """

    connection: str
    centres: Floats
    halves: Floats
    fixed: float
    track: float
    best: Best


def _walk(
    space: Space, pair: _Pair, chosen: tuple[int, ...], squares: float
) -> Iterator[tuple[int, ...]]:
    """Every choice of capacitors that can be among the best, the most promising first.

    ``squares`` is the least sum of squares that a stage with those chosen can have.
    """
    k, ranges = len(chosen), space.wishes.ranges
    before = list(chosen) if pair.connection == ADDED else []
    away = np.abs(np.log(float(space.farads[before].sum()) + space.farads) - pair.centres[k])
    sums = squares + away**2
    scores = space.error_points(sums) + pair.fixed
    if k == ranges - 1:
        leaks = float(space.leaks[before].sum()) + space.leaks
        scores += _tuning_points(space, pair.track, leaks) - _least_tuning(space, pair)
    near = np.flatnonzero(
        (away + pair.halves[k] <= space.limit + SLACK) & (scores <= pair.best.threshold + SLACK)
    )
    for index in near[np.argsort(scores[near], kind="stable")].tolist():
        if scores[index] > pair.best.threshold + SLACK:  # it may have fallen since
            return
        more = (*chosen, index)
        if not space.enough((), more):
            continue
        if k == ranges - 1:
            yield more
        else:
            yield from _walk(space, pair, more, float(sums[index]))


def _tuning_points(space: Space, track: float, leaks: Floats) -> Floats:
    return space.scoring.tuning_cents(np.full_like(leaks, track), leaks) / TUNING_CENTS_PER_POINT


def _least_tuning(space: Space, pair: _Pair) -> float:
    return float(space.least_tuning_points(pair.connection, np.array([pair.track]))[0])
