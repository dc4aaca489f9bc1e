"""The space that a search for parts covers, as arrays, and the list of the best found so far."""

from __future__ import annotations

import bisect
import math
from collections import Counter
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from livelag.bench.candidates import (
    LOG_ERROR_PER_POINT,
    TUNING_CENTS_PER_POINT,
    Candidate,
    Scoring,
    evenest_taper,
    make_candidate,
)
from livelag.bench.stock import Pool
from livelag.bench.wishes import ADDED, SERIES_SWITCHED, Wishes

Floats = NDArray[np.float64]

# Bounds come from arrays and scores from single numbers; rounding must not part them.
SLACK = 1e-9


class Space:
    """Resistors, pots and capacitors in rising order, with what the bounds need of them.

    Attributes:
        ohms: (resistors,) values.
        pot_low: (pots,) ohms at the rotation where the shortest times are wished.
        pot_high: (pots,) ohms where the longest are.
        pot_end: (pots,) ohms at rotation 0.
        pot_track: (pots,) ohms at rotation 1.
        farads: (capacitors,) values.
        leaks: (capacitors,) siemens.
        limit: the most that |ln(time / time wished)| may be.
    """

    def __init__(self, pool: Pool, wishes: Wishes, scoring: Scoring, limit: float) -> None:
        self.pool, self.wishes, self.scoring, self.limit = pool, wishes, scoring, limit
        self.resistors = sorted(pool.resistors, key=lambda lot: lot.part.resistance_ohms)
        self.pots = sorted(pool.pots, key=lambda lot: lot.part.resistance_ohms)
        self.capacitors = sorted(pool.capacitors, key=lambda lot: lot.part.capacitance_f)
        self.ohms = np.array([lot.part.resistance_ohms for lot in self.resistors])
        low, high = wishes.ends
        self.pot_low = np.array([lot.part.resistance_at(low) for lot in self.pots])
        self.pot_high = np.array([lot.part.resistance_at(high) for lot in self.pots])
        self.pot_end = np.array([lot.part.end_ohms for lot in self.pots])
        self.pot_track = np.array([lot.part.resistance_ohms for lot in self.pots])
        self.farads = np.array([lot.part.capacitance_f for lot in self.capacitors])
        self.leaks = np.array([lot.part.leakage_siemens for lot in self.capacitors])
        self.log_targets = np.log(np.array(wishes.targets))

    def centres(self, k: int, low_ohms: Floats, high_ohms: Floats) -> tuple[Floats, Floats]:
        """m, the ln C that suits range k best, and h, what remains even then.

        Of a range with ln R from x to y, wished from a to b, the errors with a capacitor are
        x + ln C - a and y + ln C - b: with m their middle and h half their difference the larger
        is |ln C - m| + h in size, and half the sum of their squares is (ln C - m)^2 + h^2.
        """
        of_low = self.log_targets[k, 0] - np.log(low_ohms)
        of_high = self.log_targets[k, 1] - np.log(high_ohms)
        return (of_low + of_high) / 2.0, np.abs(of_low - of_high) / 2.0

    def error_points(self, squares: Floats) -> Floats:
        """Points for E, from the sum over ranges of (ln C - m)^2 + h^2."""
        points: Floats = np.sqrt(squares / self.wishes.ranges) / LOG_ERROR_PER_POINT
        return points

    def least_tuning_points(self, connection: str, track_ohms: Floats) -> Floats:
        """Points for T, at R of the slowest range, that no choice of capacitors can save."""
        # T is monotonic in G at a given R, so its least is at the least or the greatest leak.
        most = float(self.leaks.max()) * (self.wishes.ranges if connection == ADDED else 1)
        ends = [
            self.scoring.tuning_cents(track_ohms, np.full_like(track_ohms, leak))
            for leak in (float(self.leaks.min()), most)
        ]
        points: Floats = np.minimum(*ends) / TUNING_CENTS_PER_POINT
        return points

    def enough(self, resistors: tuple[int, ...], capacitors: tuple[int, ...]) -> bool:
        """Whether there are as many of each lot as are used."""
        return all(
            count <= lots[index].quantity
            for lots, used in ((self.resistors, resistors), (self.capacitors, capacitors))
            for index, count in Counter(used).items()
        )

    def candidate(
        self, connection: str, resistors: tuple[int, ...], pot: int, capacitors: tuple[int, ...]
    ) -> Candidate:
        """The candidate made of these lots."""
        parts = tuple(self.resistors[index].part for index in resistors)
        chosen = self.pots[pot].part
        found = make_candidate(
            connection, parts, chosen,
            tuple(self.capacitors[index].part for index in capacitors),
            self.wishes, self.scoring,
        )  # fmt: skip
        if self.pool.tapers:
            taper = evenest_taper(self.pool.tapers, *found.ranges_s[-1])
            found = replace(found, pot=replace(chosen, taper=taper))
        return found

    def combinations(self, connection: str) -> int:
        """How many choices there are, quantities aside."""
        ranges = self.wishes.ranges
        resistors, capacitors = len(self.resistors), len(self.capacitors)
        if connection == SERIES_SWITCHED:
            resistors = int(resistors**ranges) - resistors
        return resistors * len(self.pots) * int(capacitors**ranges)


class Best:
    """The best so many candidates of those seen."""

    def __init__(self, count: int) -> None:
        self.count = count
        self.candidates: list[Candidate] = []

    @property
    def threshold(self) -> float:
        """Whatever scores more is not among the best."""
        full = len(self.candidates) == self.count
        return self.candidates[-1].score if full else math.inf

    def add(self, candidate: Candidate) -> None:
        """Keep it if it is good enough."""
        bisect.insort(self.candidates, candidate, key=lambda one: one.order)
        del self.candidates[self.count :]
