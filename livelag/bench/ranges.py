"""The times of each range, how neighbours meet, and how the pot's travel is spent.

| symbol | name here           | meaning                                              | unit |
|--------|---------------------|------------------------------------------------------|------|
| theta  | ``rotation``        | turn of the pot, 0 (fastest) to 1 (slowest)          | 1    |
| tau    | ``time_constant_s`` | R C, absorption aside                                | s    |
| t_r    | ``rise_s``          | from 10 to 90 % of a step, absorption and leakage in | s    |
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np

from livelag.circuit.decay import last_time_outside
from livelag.circuit.parts import Taper
from livelag.circuit.stage import GlideStage, Setting

# The smallest shift in time that is heard between short tones (under 240 ms):
# Friberg and Sundberg 1992.
AUDIBLE_S = 0.010


@dataclass(frozen=True, slots=True)
class PotPosition:
    """What a glide does at one position of the pot.

    Attributes:
        rotation: turn of the pot, 0 to 1.
        time_constant_s: R C in seconds.
        rise_s: 10-90 % rise of the true response in seconds.
        octave_arrival_s: until a rising octave is within 5 cents for good, in seconds.
    """

    rotation: float
    time_constant_s: float
    rise_s: float
    octave_arrival_s: float


@dataclass(frozen=True, slots=True)
class RangeTimes:
    """One range at both ends of the pot.

    Attributes:
        name: what the switch says.
        capacitance_f: connected capacitance in farads.
        fastest: at rotation 0.
        slowest: at rotation 1.
        audible_from: rotation at which the glide first becomes audible: an octave takes
            `AUDIBLE_S` to arrive. 0 if it always is, None if it never is.
    """

    name: str
    capacitance_f: float
    fastest: PotPosition
    slowest: PotPosition
    audible_from: float | None


@dataclass(frozen=True, slots=True)
class Neighbours:
    """How a range joins those that are faster.

    Attributes:
        faster: the range that reaches furthest among those that start faster.
        slower: the range that starts next.
        overlap_ratio: longest time constant of the faster over shortest of the slower; under 1
            the times between are missing.
    """

    faster: str
    slower: str
    overlap_ratio: float


@dataclass(frozen=True, slots=True)
class Travel:
    """How one taper spends the pot's travel in one range.

    Attributes:
        range_name: the range.
        taper: name of the taper.
        fitted: whether it is the stage's own.
        audible_from: as in `RangeTimes`, with this taper.
        shares: decade of the time constant -> share of the travel; decade k is from 10^k to
            10^(k+1) seconds. They sum to 1.
    """

    range_name: str
    taper: str
    fitted: bool
    audible_from: float | None
    shares: dict[int, float]


def pot_position(stage: GlideStage, setting: Setting) -> PotPosition:
    """Time constant, rise and octave arrival at a setting."""
    return PotPosition(
        setting.rotation,
        stage.time_constant_s(setting),
        rise_s(stage, setting),
        stage.octave_arrival_s(setting),
    )


def rise_s(stage: GlideStage, setting: Setting) -> float:
    """Time from 10 to 90 % of a step, of the true response; 2.1972 tau for a lone RC.

    The response never turns back, so it passes each level once.
    """
    network = stage.network(setting)
    weights, poles = network.deviation(np.zeros(stage.wiring.state_count), 1.0)
    step = abs(network.gain)
    return last_time_outside(weights, poles, 0.1 * step) - last_time_outside(
        weights, poles, 0.9 * step
    )


def all_range_times(stage: GlideStage) -> tuple[RangeTimes, ...]:
    """Every range in switch order."""
    return tuple(
        RangeTimes(
            name,
            stage.capacitance_f(index),
            pot_position(stage, Setting(index, 0.0)),
            pot_position(stage, Setting(index, 1.0)),
            audible_from(stage, index),
        )
        for index, name in enumerate(stage.range_names)
    )


def audible_from(stage: GlideStage, range_index: int) -> float | None:
    """Rotation at which an octave first takes `AUDIBLE_S` to arrive.

    0 if it always takes longer, None if it never does.
    """

    def excess(rotation: float) -> float:
        return stage.octave_arrival_s(Setting(range_index, rotation)) - AUDIBLE_S

    if excess(0.0) >= 0.0:
        return 0.0
    if excess(1.0) < 0.0:
        return None
    from scipy.optimize import brentq

    return float(brentq(excess, 0.0, 1.0, xtol=1e-9))


def neighbours(stage: GlideStage) -> tuple[Neighbours, ...]:
    """How each range but the fastest joins those before it, fastest first."""
    ends = [
        (
            name,
            stage.time_constant_s(Setting(index, 0.0)),
            stage.time_constant_s(Setting(index, 1.0)),
        )
        for index, name in enumerate(stage.range_names)
    ]
    ordered = sorted(ends, key=lambda row: row[1])
    found = []
    reach = ordered[0]
    for before, (slower, shortest, _) in pairwise(ordered):
        # A wide range may reach past the start of several that follow it.
        reach = max(reach, before, key=lambda row: row[2])
        found.append(Neighbours(reach[0], slower, reach[2] / shortest))
    return tuple(found)


def tapers_beside(stage: GlideStage) -> tuple[Taper, ...]:
    """The fitted taper, then the usual ones of other names."""
    fitted = stage.pot.taper
    usual = (Taper.linear(), Taper.logarithmic(), Taper.reverse_logarithmic())
    return (fitted, *(taper for taper in usual if taper.name != fitted.name))


def with_taper(stage: GlideStage, taper: Taper) -> GlideStage:
    """The same stage with another taper in its pot."""
    return replace(stage, pot=replace(stage.pot, taper=taper))


def all_travel(stage: GlideStage) -> tuple[Travel, ...]:
    """How the fitted taper and the usual ones spend the travel in every range."""
    fitted = stage.pot.taper
    return tuple(
        Travel(
            name,
            taper.name,
            taper is fitted,
            audible_from(with_taper(stage, taper), index),
            travel_shares(with_taper(stage, taper), index),
        )
        for index, name in enumerate(stage.range_names)
        for taper in tapers_beside(stage)
    )


def travel_shares(stage: GlideStage, range_index: int) -> dict[int, float]:
    """Decade of the time constant -> share of the pot's travel spent in it."""
    shortest = stage.time_constant_s(Setting(range_index, 0.0))
    longest = stage.time_constant_s(Setting(range_index, 1.0))
    first, last = math.floor(math.log10(shortest)), math.floor(math.log10(longest))
    edges = [_rotation_at(stage, range_index, 10.0**k) for k in range(first + 1, last + 1)]
    turns = [0.0, *edges, 1.0]
    return {
        first + number: slower - faster for number, (faster, slower) in enumerate(pairwise(turns))
    }


def _rotation_at(stage: GlideStage, range_index: int, time_constant_s: float) -> float:
    """Rotation at which a range passes a time constant, 0 or 1 beyond its ends."""
    series = (stage.ranges[range_index].series or stage.series).resistance_ohms
    wanted = time_constant_s / stage.capacitance_f(range_index) - series
    pot = stage.pot
    fraction = (wanted - pot.end_ohms) / (pot.resistance_ohms - pot.end_ohms)
    return pot.taper.rotation(fraction) if 0.0 < fraction < 1.0 else float(fraction >= 1.0)
