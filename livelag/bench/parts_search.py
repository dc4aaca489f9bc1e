"""The search for parts: every choice of a pool considered, the best proven best.

Whatever is left out unseen is left out by a bound that it cannot beat, so the result is that of
trying every combination.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

from livelag.bench.candidates import Candidate, Reached, Scoring, mark_pareto
from livelag.bench.parts_space import Space
from livelag.bench.search_shared import search_shared
from livelag.bench.search_switched import search_switched
from livelag.bench.stock import Pool
from livelag.bench.wishes import (
    LONGEST,
    MOST_WITHIN,
    ONE_POT_RATIO,
    SERIES_SWITCHED,
    SHORTEST,
    Wishes,
    one_pot_error,
    relaxations,
)
from livelag.circuit.parts import require
from livelag.circuit.stage import GlideStage
from livelag.errors import InputError
from livelag.units import format_value

MOST_CANDIDATES = 100
DEFAULT_CANDIDATES = 8
_MOST_OFFERED = 1.0 + MOST_WITHIN - 0.01  # a larger factor could not be asked for
_WIDENING = (1.0, 2.0, 4.0, 8.0, 16.0, 64.0)  # ln of the factor looked in for the nearest


@dataclass(frozen=True, slots=True)
class PartsResult:
    """What a search came to.

    Attributes:
        candidates: the best of all, best first, one or more.
        best_of: connection -> its best candidate, None if it has none near enough.
        combinations: how many choices there are in the pool.
    """

    candidates: tuple[Candidate, ...]
    best_of: dict[str, Candidate | None]
    combinations: int


def find_parts(
    wishes: Wishes, pool: Pool, around: GlideStage, count: int = DEFAULT_CANDIDATES
) -> PartsResult:
    """Search a pool for the stages that suit the wishes best.

    Args:
        wishes: times, and how they may be met.
        pool: what there is to build with.
        around: the stage whose supply, scale, buffers and output are kept.
        count: how many candidates, 1 to `MOST_CANDIDATES`.

    Raises:
        InputError: if the count is out of range, the pool has too few parts, or nothing comes
            near enough; the message says which wish to relax, and by how much.
    """
    require(
        1 <= count <= MOST_CANDIDATES,
        f"candidates: {count} asked for; it must be 1 to {MOST_CANDIDATES}",
    )
    _check_enough(wishes, pool)
    scoring = Scoring.around(around, wishes.ranges)
    space = Space(pool, wishes, scoring, math.log1p(wishes.within))
    lists = {name: _search(space, name, count) for name in wishes.usable_connections}
    merged = sorted((one for found in lists.values() for one in found), key=lambda one: one.order)
    if not merged:
        raise InputError(_no_candidate(wishes, pool, around))
    return PartsResult(
        tuple(mark_pareto(merged[:count])),
        {name: found[0] if found else None for name, found in lists.items()},
        sum(space.combinations(name) for name in lists),
    )


def _search(space: Space, connection: str, count: int) -> list[Candidate]:
    if connection == SERIES_SWITCHED:
        return search_switched(space, count).candidates
    return search_shared(space, connection, count).candidates


def _check_enough(wishes: Wishes, pool: Pool) -> None:
    where = f"{pool.where}: " if pool.where else ""
    for what, lots in (
        ("resistor", pool.resistors),
        ("pot", pool.pots),
        ("capacitor", pool.capacitors),
    ):
        have = sum(lot.quantity for lot in lots)
        need = wishes.ranges if what == "capacitor" else 1
        require(
            have >= need,
            f"{where}there {'is' if have == 1 else 'are'} {have:g} {what}{'s' * (have != 1)} to "
            f"build with; {wishes.ranges} range{'s' * (wishes.ranges > 1)} need {need}",
        )


def _no_candidate(wishes: Wishes, pool: Pool, around: GlideStage) -> str:
    """Which wish to relax, and by how much."""
    allowed = f"within {100 * wishes.within:g} % of the wishes"
    nearest = _nearest(wishes, pool, around)
    if nearest is None:
        return f"no candidate {allowed}, nor anywhere near; see whether the parts suit these times"
    worst = nearest.worst
    factor = math.exp(nearest.worst_log)
    ways = [_one_pot_ways(wishes)] if _one_pot_is_to_blame(wishes) else []
    if not ways:
        ways.append(f"relax {_missed(wishes, nearest)}")
    if wishes.ranges > 1 and SERIES_SWITCHED not in wishes.connections:
        ways.append(f"allow the connection {SERIES_SWITCHED}")
    if factor <= _MOST_OFFERED:
        ways.append(f"allow errors of a factor of {_rounded_up(factor)}")
    return (
        f"no candidate {allowed}: the nearest reaches {format_value(worst.got_s, 's')} where "
        f"{format_value(worst.wished_s, 's')} is wished; {', or '.join(ways)}"
    )


def _missed(wishes: Wishes, nearest: Candidate) -> str:
    """Every wish that would have to move for the nearest to be near enough, the worst first."""
    limit = math.log1p(wishes.within)
    missed = sorted(nearest.reached, key=lambda row: row.error_log, reverse=True)
    return ", and ".join(
        f"{_wish_of(wishes, row)} from {format_value(row.wished_s, 's')} to "
        f"{format_value(row.got_s, 's')}, a factor of {math.exp(row.error_log):.3g}"
        for row in missed
        if row.error_log > limit
    )


def _one_pot_is_to_blame(wishes: Wishes) -> bool:
    """Whether not even parts of any value at all would come near enough."""
    one_pot = all(name in ONE_POT_RATIO for name in wishes.usable_connections)
    return one_pot and one_pot_error(wishes) > wishes.within


def _one_pot_ways(wishes: Wishes) -> str:
    moves = [
        f"{row.name} from {format_value(row.wished_s, 's')} to {format_value(row.relaxed_s, 's')}"
        for row in relaxations(wishes)
        if row.left_over <= wishes.within
    ]
    return f"one pot gives every range the same ratio: move {' or '.join(moves)}"


def _rounded_up(factor: float) -> str:
    """Three digits, never less than the factor, and the option that allows it."""
    within = math.ceil((factor - 1.0) * 100.0 + 1e-6) / 100.0
    return f"{1.0 + within:.2f} (--within {within:.2f})"


def _nearest(wishes: Wishes, pool: Pool, around: GlideStage) -> Candidate | None:
    """The candidate with the least E, however large that is."""
    only_error = replace(
        Scoring.around(around, wishes.ranges), divider=0.0, leap_v=0.0,
        least_parts=2 * wishes.ranges + 1,
    )  # fmt: skip
    for limit in _WIDENING:
        space = Space(pool, wishes, only_error, limit)
        found = [one for name in wishes.usable_connections for one in _search(space, name, 1)]
        if found:
            return min(found, key=lambda one: one.rms_log)
    return None


def _wish_of(wishes: Wishes, worst: Reached) -> str:
    """The wish that one end of a range comes from."""
    names = wishes.range_names
    if worst.end == SHORTEST and worst.range_name == names[0]:
        return "shortest"
    if worst.end == LONGEST and worst.range_name == names[-1]:
        return "longest"
    return f"the {worst.end} time of {worst.range_name!r} (handover and overlap)"
