"""Search over stages in which every range has a series resistor and a capacitor of its own.

With a pot given, ranges are chosen alone and joined in batches, the most promising first: a
choice for one range whose own part of the score is beyond the best found can be in no better
stage, nor can a beginning of a stage whose score is.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from livelag.bench.candidates import TUNING_CENTS_PER_POINT
from livelag.bench.parts_space import SLACK, Best, Floats, Space
from livelag.bench.wishes import SERIES_SWITCHED

Indices = NDArray[np.int64]

_BATCH = 50_000  # stages joined at a time


@dataclass(frozen=True)
class _Choices:
    """Choices of (resistor, capacitor) for one range with one pot, best bound first."""

    resistor: Indices
    capacitor: Indices
    squares: Floats
    bound: Floats

    def within(self, threshold: float) -> _Choices:
        count = int(np.searchsorted(self.bound, threshold + SLACK, "right"))
        return _Choices(
            self.resistor[:count], self.capacitor[:count], self.squares[:count], self.bound[:count]
        )


@dataclass(frozen=True)
class _Joined:
    """Stages or beginnings of stages: (stages, ranges) indices, slowest range first."""

    resistors: Indices
    capacitors: Indices
    squares: Floats

    def keep(self, which: NDArray[np.bool_] | slice) -> _Joined:
        return _Joined(self.resistors[which], self.capacitors[which], self.squares[which])


def search_switched(space: Space, count: int) -> Best:
    """The best candidates of the connection ``series-switched``."""
    best = Best(count)
    bounds = [_pot_bound(space, pot) for pot in range(len(space.pots))]
    for pot in np.argsort(bounds, kind="stable").tolist():
        if not np.isfinite(bounds[pot]) or bounds[pot] > best.threshold + SLACK:
            break
        slowest, *rest = _choices(space, pot, best.threshold)
        begun = _Joined(slowest.resistor[:, None], slowest.capacitor[:, None], slowest.squares)
        for stages in _stages(space, pot, begun, rest, best):
            _add(space, pot, stages, best)
    return best


def _pot_bound(space: Space, pot: int) -> float:
    """The least that a stage with this pot can score; infinite if no range comes near enough."""
    return max(float(bounds.min()) for _, bounds in _bounds(space, pot))


def _add(space: Space, pot: int, stages: _Joined, best: Best) -> None:
    """Add the best of a batch of whole stages."""
    scores = _scores(space, pot, stages)
    if len(scores) > best.count:
        stages = stages.keep(scores <= np.partition(scores, best.count - 1)[best.count - 1] + SLACK)
    for resistors, capacitors in zip(
        stages.resistors.tolist(), stages.capacitors.tolist(), strict=True
    ):
        candidate = space.candidate(
            SERIES_SWITCHED, tuple(resistors[::-1]), pot, tuple(capacitors[::-1])
        )
        if candidate.worst_log <= space.limit:
            best.add(candidate)


def _choices(space: Space, pot: int, threshold: float) -> list[_Choices]:
    """Choices for each range that can score the threshold or less, slowest range first."""
    found = []
    for squares, bounds in _bounds(space, pot):
        resistor, capacitor = np.nonzero((bounds <= threshold + SLACK) & np.isfinite(bounds))
        order = np.argsort(bounds[resistor, capacitor], kind="stable")
        resistor, capacitor = resistor[order], capacitor[order]
        found.append(
            _Choices(resistor, capacitor, squares[resistor, capacitor], bounds[resistor, capacitor])
        )
    return found


def _bounds(space: Space, pot: int) -> Iterator[tuple[Floats, Floats]]:
    """(resistors, capacitors) sum of squares and least score of a stage that has it, slowest first.

    The score is infinite where an error is more than the limit.
    """
    ranges = space.wishes.ranges
    track = space.ohms[:, None] + space.pot_track[pot]
    tuning = space.scoring.tuning_cents(track, space.leaks[None, :]) / TUNING_CENTS_PER_POINT
    drive = space.scoring.drive_points(space.ohms + space.pot_end[pot])[:, None]
    fixed = drive + space.scoring.part_points(2 * ranges + 1)
    slowest, near = _squares(space, pot, ranges - 1)
    own = space.error_points(slowest) + tuning
    least = _Least(space.error_points(slowest[near]), tuning[near]) if near.any() else None
    for k in reversed(range(ranges)):
        squares, allowed = (slowest, near) if k == ranges - 1 else _squares(space, pot, k)
        bounds = np.full_like(squares, np.inf)
        if least is not None:
            points = space.error_points(squares[allowed])
            points = own[allowed] if k == ranges - 1 else least.points(points)
            bounds[allowed] = points + np.broadcast_to(fixed, squares.shape)[allowed]
        yield squares, bounds


class _Least:
    """The least points that E and T can cost together, over all choices for the slowest range."""

    def __init__(self, error_points: Floats, tuning_points: Floats) -> None:
        order = np.argsort(error_points)
        self._errors = error_points[order]
        both = self._errors + tuning_points[order]
        # E is no less than what either range alone makes it.
        self._up_to = np.concatenate([[np.inf], np.minimum.accumulate(tuning_points[order])])
        self._beyond = np.concatenate([np.minimum.accumulate(both[::-1])[::-1], [np.inf]])

    def points(self, error_points: Floats) -> Floats:
        """Least points where another range alone makes E cost so much."""
        place = np.searchsorted(self._errors, error_points, "right")
        least: Floats = np.minimum(error_points + self._up_to[place], self._beyond[place])
        return least


def _squares(space: Space, pot: int, k: int) -> tuple[Floats, NDArray[np.bool_]]:
    """(resistors, capacitors) sums of squares of range k, and whether it is near enough."""
    centres, halves = space.centres(
        k, space.ohms + space.pot_low[pot], space.ohms + space.pot_high[pot]
    )
    away = np.abs(np.log(space.farads) - centres[:, None])
    squares: Floats = away**2 + halves[:, None] ** 2
    return squares, away + halves[:, None] <= space.limit + SLACK


def _stages(
    space: Space, pot: int, begun: _Joined, rest: list[_Choices], best: Best
) -> Iterator[_Joined]:
    """Whole stages that can be among the best as far as these are known, batch by batch."""
    if not rest:
        yield begun
        return
    start = 0
    while start < len(begun.squares):
        faster = rest[0].within(best.threshold)
        step = max(1, _BATCH // max(1, len(faster.squares)))
        part = begun.keep(slice(start, start + step))
        part = part.keep(_scores(space, pot, part) <= best.threshold + SLACK)
        start += step
        joined = _extend(space, part, faster)
        joined = joined.keep(_scores(space, pot, joined) <= best.threshold + SLACK)
        if len(rest) == 1:  # all resistors alike need no switch
            joined = joined.keep((joined.resistors != joined.resistors[:, :1]).any(axis=1))
        if len(joined.squares):
            yield from _stages(space, pot, joined, rest[1:], best)


def _extend(space: Space, begun: _Joined, faster: _Choices) -> _Joined:
    """Each beginning with each choice of the next range, as far as there are parts."""
    count, more = len(begun.squares), len(faster.squares)
    joined = _Joined(
        _product(begun.resistors, faster.resistor),
        _product(begun.capacitors, faster.capacitor),
        np.repeat(begun.squares, more) + np.tile(faster.squares, count),
    )
    joined = joined.keep(_enough(joined.resistors, [lot.quantity for lot in space.resistors]))
    return joined.keep(_enough(joined.capacitors, [lot.quantity for lot in space.capacitors]))


def _product(begun: Indices, faster: Indices) -> Indices:
    rows = np.repeat(begun, len(faster), axis=0)
    return np.column_stack([rows, np.tile(faster, len(begun))])


def _scores(space: Space, pot: int, joined: _Joined) -> Floats:
    """Scores, or for beginnings of stages the least that they can come to."""
    scoring = space.scoring
    slowest = space.ohms[joined.resistors[:, 0]] + space.pot_track[pot]
    tuning = scoring.tuning_cents(slowest, space.leaks[joined.capacitors[:, 0]])
    least = space.ohms[joined.resistors].min(axis=1) + space.pot_end[pot]
    scores: Floats = (
        space.error_points(joined.squares)
        + tuning / TUNING_CENTS_PER_POINT
        + scoring.drive_points(least)
        + scoring.part_points(2 * space.wishes.ranges + 1)
    )
    return scores


def _enough(used: Indices, quantities: list[float]) -> NDArray[np.bool_]:
    """Whether no lot is used more often than there are parts in it."""
    have = np.array(quantities)[used]
    times = (used[:, :, None] == used[:, None, :]).sum(axis=2)
    enough: NDArray[np.bool_] = (times <= have).all(axis=1)
    return enough
