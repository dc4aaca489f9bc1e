"""Search over stages whose ranges share one series resistor: capacitors added or exchanged.

Pairs of resistor and pot are visited by a lower bound of their score, so that the search ends,
proven, at the first pair whose bound is beyond the best found. Within a pair only capacitors
inside the window that the bound leaves are tried.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np

from livelag.bench.candidates import LOG_ERROR_PER_POINT, TUNING_CENTS_PER_POINT
from livelag.bench.parts_space import SLACK, Best, Floats, Space
from livelag.bench.wishes import ADDED

_MOST_SUMS = 2_000_000  # beyond, the bound goes without the nearest sum of capacitors


def search_shared(space: Space, connection: str, count: int) -> Best:
    """The best candidates of one connection, ``added``, ``exchanged`` or ``single``."""
    best = Best(count)
    low = space.ohms[:, None] + space.pot_low
    high = space.ohms[:, None] + space.pot_high
    centres, halves = _stack(space, low, high)
    errors = halves[0]
    for k in range(space.wishes.ranges):
        near = _distance(centres[k], _log_capacitances(space, connection, k))
        errors = np.maximum(errors, halves[k] + near)
    fixed = _fixed_points(space, connection)
    bounds = errors / LOG_ERROR_PER_POINT + fixed
    bounds[errors > space.limit + SLACK] = np.inf
    for flat in np.argsort(bounds, axis=None, kind="stable"):
        row, pot = (int(index) for index in np.unravel_index(flat, bounds.shape))
        bound = bounds[row, pot]
        if not np.isfinite(bound) or bound > best.threshold + SLACK:
            break

        def room(fixed_here: float = float(fixed[row, pot])) -> float:
            points = best.threshold - fixed_here
            return min(points * LOG_ERROR_PER_POINT, space.limit) + SLACK

        where = _Where(connection, centres[:, row, pot], halves[:, row, pot], room)
        for chosen in _walk(space, where, ()):
            candidate = space.candidate(connection, (row,), pot, chosen)
            if candidate.error_log <= space.limit:
                best.add(candidate)
    return best


def _stack(space: Space, low: Floats, high: Floats) -> tuple[Floats, Floats]:
    pairs = [space.centres(k, low, high) for k in range(space.wishes.ranges)]
    return np.stack([pair[0] for pair in pairs]), np.stack([pair[1] for pair in pairs])


def _fixed_points(space: Space, connection: str) -> Floats:
    """(resistors, pots) points that no choice of capacitors can save."""
    scoring, ranges = space.scoring, space.wishes.ranges
    track = space.ohms[:, None] + space.pot_track
    # T is monotonic in G at a given R, so its least is at the least or the greatest leak.
    most = space.leaks.max() * (ranges if connection == ADDED else 1)
    tuning = np.minimum(
        scoring.tuning_cents(track, space.leaks.min()), scoring.tuning_cents(track, most)
    )
    drive = scoring.drive_points(space.ohms[:, None] + space.pot_end)
    points: Floats = tuning / TUNING_CENTS_PER_POINT + drive + scoring.part_points(1 + 1 + ranges)
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
class _Where:
    """One pair of resistor and pot: (ranges,) centres and halves, and the error still allowed."""

    connection: str
    centres: Floats
    halves: Floats
    room: Callable[[], float]


def _walk(space: Space, where: _Where, chosen: tuple[int, ...]) -> Iterator[tuple[int, ...]]:
    """Every choice of capacitors whose ranges all come within the error allowed, nearest first."""
    k = len(chosen)
    if k == space.wishes.ranges:
        yield chosen
        return
    there = float(space.farads[list(chosen)].sum()) if where.connection == ADDED else 0.0
    errors = np.abs(np.log(there + space.farads) - where.centres[k]) + where.halves[k]
    for index in np.argsort(errors, kind="stable").tolist():
        if errors[index] > where.room():
            return
        more = (*chosen, index)
        if space.enough((), more):
            yield from _walk(space, where, more)
