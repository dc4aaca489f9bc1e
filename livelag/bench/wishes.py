"""What a builder wants of a stage: times, how ranges should meet, and what may be used.

| symbol | name here          | meaning                                                 | unit |
|--------|--------------------|---------------------------------------------------------|------|
| t_0    | ``times_s[0]``     | shortest time constant wished                           | s    |
| t_k    | ``times_s[k]``     | where range k hands over to range k + 1                 | s    |
| t_n    | ``times_s[n]``     | longest time constant wished, n the number of ranges    | s    |
| q      | ``overlap_ratio``  | longest time of a range over shortest of the next       | 1    |
| d_k    | ``log_ratios``     | ln of longest over shortest wished of range k           | 1    |
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

from livelag.bench.marks import Marks
from livelag.circuit.parts import require, require_positive
from livelag.errors import UnknownNameError
from livelag.units import format_value

SINGLE, ADDED, EXCHANGED, SERIES_SWITCHED = "single", "added", "exchanged", "series-switched"
CONNECTIONS = (ADDED, EXCHANGED, SERIES_SWITCHED)
ONE_POT_RATIO = (ADDED, EXCHANGED)  # one series resistor: every range has the same ratio
# Parts of 20 % (pot) and 10 % (capacitors) leave no gap between ranges at this ratio, since
# 0.8 x 0.9 / 1.1 x 1.5 is nearly 1.
DEFAULT_OVERLAP = 1.5
DEFAULT_WITHIN = 0.25
MOST_WITHIN = 3.0
MOST_RANGES = 3
RANGE_NAMES = {1: ("all",), 2: ("fast", "slow"), 3: ("fast", "middle", "slow")}
SHORTEST, LONGEST = "shortest", "longest"


@dataclass(frozen=True, slots=True)
class Wishes:
    """Times and the way they may be met.

    Attributes:
        times_s: time constants in seconds, rising: the shortest, each hand-over between
            neighbours, the longest; so one more than there are ranges, 1 to 3.
        overlap_ratio: q; each hand-over is the middle of the overlap, in ratio. 1 or more.
        ends: rotations at which the ends of the ranges are wished, from 0 to 1.
        within: the most that a time may be off, as a fraction: 0.25 is a factor of 1.25. At most
            `MOST_WITHIN`.
        connections: the ways to connect the range switch that may be used, of `CONNECTIONS`.

    Raises:
        InputError: if the times are not positive and rising, or another number is out of range.
        UnknownNameError: if there is no such connection.
    """

    times_s: tuple[float, ...]
    overlap_ratio: float = DEFAULT_OVERLAP
    ends: tuple[float, float] = (0.0, 1.0)
    within: float = DEFAULT_WITHIN
    connections: tuple[str, ...] = CONNECTIONS

    def __post_init__(self) -> None:
        require(
            2 <= len(self.times_s) <= MOST_RANGES + 1,
            f"there are {len(self.times_s)} times; there must be one more than ranges, and 1 to "
            f"{MOST_RANGES} ranges",
        )
        for name, seconds in zip(self.time_names, self.times_s, strict=True):
            require_positive(seconds, name)
        named = list(zip(self.time_names, self.times_s, strict=True))
        for (name, seconds), (next_name, later) in pairwise(named):
            require(
                seconds < later,
                f"{name} is {_time(seconds)} and {next_name} is {_time(later)}; the times must rise"
                " from shortest over handover to longest",
            )
        require(
            math.isfinite(self.overlap_ratio) and self.overlap_ratio >= 1.0,
            f"overlap is {self.overlap_ratio!r}; it must be a ratio of 1 (ranges just meet) or "
            "more",
        )
        for (low, high), (next_low, next_high) in pairwise(self.targets):
            require(
                low < next_low and high < next_high,
                f"overlap is {self.overlap_ratio:g}; with these times a range would swallow its "
                "neighbour: ask for less",
            )
        low_end, high_end = self.ends
        require(
            0.0 <= low_end < high_end <= 1.0,
            f"ends are {low_end!r} and {high_end!r}; they must be rotations that rise, 0 to 1",
        )
        require_positive(self.within, "within")
        require(
            self.within <= MOST_WITHIN,
            f"within is {self.within:g}; {MOST_WITHIN:g}, a factor of {1 + MOST_WITHIN:g}, is the "
            "most that still makes sense",
        )
        require(bool(self.connections), "connections: there are none; name one or more")
        for name in self.connections:
            if name not in CONNECTIONS:
                raise UnknownNameError("connection", name, CONNECTIONS)

    @property
    def ranges(self) -> int:
        """How many ranges."""
        return len(self.times_s) - 1

    @property
    def range_names(self) -> tuple[str, ...]:
        """What the switch says, fastest first."""
        return RANGE_NAMES[self.ranges]

    @property
    def time_names(self) -> tuple[str, ...]:
        """What each of the times is called: shortest, handover, longest."""
        between = len(self.times_s) - 2
        names = [f"handover {n + 1}" if between > 1 else "handover" for n in range(between)]
        return (SHORTEST, *names, LONGEST)

    @property
    def usable_connections(self) -> tuple[str, ...]:
        """The connections to try: one range needs no switch."""
        return (SINGLE,) if self.ranges == 1 else self.connections

    @property
    def targets(self) -> tuple[tuple[float, float], ...]:
        """Shortest and longest time constant wished of each range, in seconds."""
        return _targets(self.times_s, self.overlap_ratio)

    @property
    def log_ratios(self) -> tuple[float, ...]:
        """d_k of each range; with one series resistor and one pot they come out all the same."""
        return _log_ratios(self.times_s, self.overlap_ratio)


def wishes_from(
    shortest_s: float,
    handovers_s: Sequence[float],
    longest_s: float,
    ranges: int | None = None,
    **more: object,
) -> Wishes:
    """Wishes from two times or more.

    Without hand-overs, several ranges share the span in equal ratios.

    Args:
        shortest_s: seconds.
        handovers_s: none, or one fewer than ranges.
        longest_s: seconds.
        ranges: 1 to 3; None takes one more than there are hand-overs.
        more: the other fields of `Wishes`.

    Raises:
        InputError: if times, ranges or another number do not fit together.
        UnknownNameError: if there is no such connection.
    """
    count = len(handovers_s) + 1 if ranges is None else ranges
    require(1 <= count <= MOST_RANGES, f"ranges is {count}; it must be 1 to {MOST_RANGES}")
    between = tuple(handovers_s)
    if between:
        require(
            len(between) == count - 1,
            f"handover: {len(between)} given for {count} range{'s'[: count > 1]}; there must be "
            f"{count - 1}{', or none to share the span in equal ratios' if count > 1 else ''}",
        )
    else:
        # Checked first, or the roots below could fail.
        Wishes((shortest_s, longest_s))
        step = (longest_s / shortest_s) ** (1.0 / count)
        between = tuple(shortest_s * step**k for k in range(1, count))
    return Wishes((shortest_s, *between, longest_s), **more)  # type: ignore[arg-type]


def wishes_of_marks(marks: Marks, ranges: int | None = None, **more: object) -> Wishes:
    """Wishes from marks made by ear; see `wishes_from`.

    Raises:
        InputError: if marks, ranges or another number do not fit together.
        UnknownNameError: if there is no such connection.
    """
    handovers = () if marks.handover_s is None else (marks.handover_s,)
    return wishes_from(marks.shortest_s, handovers, marks.longest_s, ranges, **more)


@dataclass(frozen=True, slots=True)
class Relaxed:
    """One wish moved so that a single series resistor and pot come as near as they can.

    Attributes:
        name: of the wish: ``shortest``, ``handover``, ``longest``.
        wished_s: as it is.
        relaxed_s: what it would have to be, all others kept.
        left_over: the error that remains even so, as a fraction; 0 is an exact fit.
    """

    name: str
    wished_s: float
    relaxed_s: float
    left_over: float


def one_pot_error(wishes: Wishes) -> float:
    """The least worst error of one series resistor and one pot, with any values at all.

    Every range has the ratio (series + pot) / series; the best capacitor centres each range on
    its wish, which leaves half the difference of the ratios' logarithms at either end:
    E = (max d_k - min d_k)/4. Returned as a fraction, e^E - 1.
    """
    return _spread_error(wishes.log_ratios)


def relaxations(wishes: Wishes) -> tuple[Relaxed, ...]:
    """For each time wished, where it would have to be for `one_pot_error` to be least."""
    found = []
    for index, name in enumerate(wishes.time_names):
        tried = []
        for moved_s in _levellers(wishes, index):
            times = (*wishes.times_s[:index], moved_s, *wishes.times_s[index + 1 :])
            if all(a < b for a, b in pairwise(times)):
                error = _spread_error(_log_ratios(times, wishes.overlap_ratio))
                away = abs(math.log(moved_s / wishes.times_s[index]))
                tried.append((round(error, 9), away, moved_s))
        if tried:
            error, _, moved_s = min(tried)
            found.append(Relaxed(name, wishes.times_s[index], moved_s, error))
    return tuple(found)


def _levellers(wishes: Wishes, index: int) -> list[float]:
    """Values of one time at which the ratios of two ranges come out equal.

    The spread of the ratios is convex in the logarithm of the time and straight between these.
    """
    before = wishes.log_ratios
    slopes = [0.0] * wishes.ranges  # of d_k against ln of the time
    if index > 0:
        slopes[index - 1] = 1.0
    if index < wishes.ranges:
        slopes[index] = -1.0
    found = [wishes.times_s[index]]
    for one in range(wishes.ranges):
        for other in range(one):
            slope = slopes[one] - slopes[other]
            if slope:
                step = (before[other] - before[one]) / slope
                found.append(wishes.times_s[index] * math.exp(step))
    return found


def _targets(times_s: Sequence[float], overlap: float) -> tuple[tuple[float, float], ...]:
    half = math.sqrt(overlap)
    last = len(times_s) - 2
    return tuple(
        (low / half if k > 0 else low, high * half if k < last else high)
        for k, (low, high) in enumerate(pairwise(times_s))
    )


def _log_ratios(times_s: Sequence[float], overlap: float) -> tuple[float, ...]:
    return tuple(math.log(high / low) for low, high in _targets(times_s, overlap))


def _spread_error(log_ratios: Sequence[float]) -> float:
    return math.expm1((max(log_ratios) - min(log_ratios)) / 4.0)


def _time(seconds: float) -> str:
    return format_value(seconds, "s", 6)
