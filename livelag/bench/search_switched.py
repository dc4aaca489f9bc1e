"""Search over stages in which every range has a series resistor and a capacitor of its own.

With a pot given, ranges are chosen alone and joined: a choice for one range whose own part of
the score is beyond the best found can be in no better stage. How good the best is at least,
is found first from a few good choices of each range.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from livelag.bench.candidates import LOG_ERROR_PER_POINT, TUNING_CENTS_PER_POINT
from livelag.bench.parts_space import SLACK, Best, Floats, Space
from livelag.bench.wishes import SERIES_SWITCHED

Indices = NDArray[np.int64]

_FIRST_FEW = 4
_MOST_JOINED = 2_000_000


@dataclass(frozen=True)
class _Choices:
    """Choices of (resistor, capacitor) for one range with one pot, best bound first."""

    resistor: Indices
    capacitor: Indices
    error: Floats
    bound: Floats

    def first(self, count: int) -> _Choices:
        return self.at(slice(0, count))

    def within(self, threshold: float) -> _Choices:
        return self.first(int(np.searchsorted(self.bound, threshold + SLACK, "right")))

    def at(self, where: slice) -> _Choices:
        return _Choices(
            self.resistor[where], self.capacitor[where], self.error[where], self.bound[where]
        )


@dataclass(frozen=True)
class _Joined:
    """Stages or beginnings of stages: (stages, ranges) indices, slowest range first."""

    resistors: Indices
    capacitors: Indices
    error: Floats

    def keep(self, which: NDArray[np.bool_]) -> _Joined:
        return _Joined(self.resistors[which], self.capacitors[which], self.error[which])


def search_switched(space: Space, count: int) -> Best:
    """The best candidates of the connection ``series-switched``."""
    best = Best(count)
    per_pot = [_choices(space, pot) for pot in range(len(space.pots))]
    threshold = _first_threshold(space, per_pot, count)
    pots = [pot for pot, choices in enumerate(per_pot) if all(len(c.bound) for c in choices)]
    pots.sort(key=lambda pot: max(c.bound[0] for c in per_pot[pot]))
    for pot in pots:
        threshold = min(threshold, best.threshold)
        choices = [one.within(threshold) for one in per_pot[pot]]
        for joined in _join(space, pot, choices, threshold):
            for resistors, capacitors in zip(
                joined.resistors.tolist(), joined.capacitors.tolist(), strict=True
            ):
                candidate = space.candidate(
                    SERIES_SWITCHED, tuple(resistors[::-1]), pot, tuple(capacitors[::-1])
                )
                if candidate.error_log <= space.limit:
                    best.add(candidate)
    return best


def _choices(space: Space, pot: int) -> list[_Choices]:
    """Choices for each range, slowest first, with the least score of any stage they are in."""
    ranges = space.wishes.ranges
    errors = [_errors(space, pot, k) for k in range(ranges)]
    track = space.ohms[:, None] + space.pot_track[pot]
    tuning = space.scoring.tuning_cents(track, space.leaks[None, :]) / TUNING_CENTS_PER_POINT
    allowed = errors[-1] <= space.limit + SLACK
    least_tuning = float(tuning[allowed].min()) if allowed.any() else 0.0
    drive = space.scoring.drive_points(space.ohms + space.pot_end[pot])[:, None]
    parts = space.scoring.part_points(2 * ranges + 1)
    found = []
    for k in reversed(range(ranges)):
        own = tuning if k == ranges - 1 else least_tuning
        bound = errors[k] / LOG_ERROR_PER_POINT + drive + parts + own
        resistor, capacitor = np.nonzero(errors[k] <= space.limit + SLACK)
        order = np.argsort(bound[resistor, capacitor], kind="stable")
        resistor, capacitor = resistor[order], capacitor[order]
        found.append(
            _Choices(
                resistor, capacitor, errors[k][resistor, capacitor], bound[resistor, capacitor]
            )
        )
    return found


def _errors(space: Space, pot: int, k: int) -> Floats:
    """(resistors, capacitors) error of range k."""
    centres, halves = space.centres(
        k, space.ohms + space.pot_low[pot], space.ohms + space.pot_high[pot]
    )
    errors: Floats = np.abs(np.log(space.farads) - centres[:, None]) + halves[:, None]
    return errors


def _first_threshold(space: Space, per_pot: list[list[_Choices]], count: int) -> float:
    """A score that so many stages reach: from the first few choices of each range."""
    few, ranges = _FIRST_FEW, space.wishes.ranges
    most = max((len(one.bound) for choices in per_pot for one in choices), default=0)
    while few**ranges * len(per_pot) <= _MOST_JOINED:
        scores = [
            _scores(space, pot, joined)
            for pot, choices in enumerate(per_pot)
            for joined in _join(space, pot, [one.first(few) for one in choices], np.inf)
        ]
        found = np.sort(np.concatenate(scores)) if scores else np.empty(0)
        if len(found) >= count:
            return float(found[count - 1])
        if few >= most:
            break
        few *= 2
    return float("inf")


def _join(space: Space, pot: int, choices: list[_Choices], threshold: float) -> list[_Joined]:
    """Every stage of these choices that can score the threshold or less, in batches."""
    slowest = choices[0]
    batches = [_Joined(slowest.resistor[:, None], slowest.capacitor[:, None], slowest.error)]
    for nth, faster in enumerate(choices[1:], start=2):
        whole = nth == len(choices)
        step = max(1, _MOST_JOINED // max(1, len(faster.bound)))
        batches = [
            kept
            for batch in batches
            for start in range(0, len(batch.error), step)
            if len(
                (kept := _extend(space, pot, batch, slice(start, start + step), faster, threshold,
                                 whole)).error
            )
        ]  # fmt: skip
    return batches


def _extend(
    space: Space, pot: int, begun: _Joined, part: slice, faster: _Choices, threshold: float,
    whole: bool,
) -> _Joined:  # fmt: skip
    count, more = len(begun.error[part]), len(faster.error)
    joined = _Joined(
        _product(begun.resistors[part], faster.resistor),
        _product(begun.capacitors[part], faster.capacitor),
        np.maximum(np.repeat(begun.error[part], more), np.tile(faster.error, count)),
    )
    joined = joined.keep(_scores(space, pot, joined) <= threshold + SLACK)
    joined = joined.keep(_enough(joined.resistors, [lot.quantity for lot in space.resistors]))
    joined = joined.keep(_enough(joined.capacitors, [lot.quantity for lot in space.capacitors]))
    if whole:  # all resistors alike need no switch
        joined = joined.keep((joined.resistors != joined.resistors[:, :1]).any(axis=1))
    return joined


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
        joined.error / LOG_ERROR_PER_POINT
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
