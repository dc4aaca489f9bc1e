"""One choice of parts: the times it gives, what it costs, and the stage it makes.

| symbol | name here         | meaning                                                   | unit |
|--------|-------------------|-----------------------------------------------------------|------|
| E      | ``rms_log``       | root mean square of ln(time / time wished) over all ends  | 1    |
| T      | ``tuning_cents``  | scale and offset error at the slowest setting             | cent |
| n      | ``part_count``    | series resistors, pot and capacitors                      | 1    |
| I      | ``drive_a``       | peak current of the driving buffer at the fastest setting | A    |
| R      | ``resistance``    | series resistor and whole pot                             | ohm  |
| G      | ``leak``          | insulation of the capacitors of the slowest range         | S    |
| k_D    | ``divider``       | share of the output that the load leaves                  | 1    |

    T = (1200 k_D G R + 1200 k_D |I_b| R / (volts per octave)) / (1 + G R)                (1)
    I = (a leap of five octaves, or the whole swing if that is less) / (least R at rotation 0)  (2)
    score = E / ln 1.05 + T / 1 cent + (n - least n) + max(0, I / 5 mA - 1)               (3)

I_b is the data-sheet limit, since it doubles with every 10 degrees; insulation is typical.
So a point is 5 % of time, a cent of tuning, one part more, or 5 mA beyond the first 5. Less is
better. 5 mA is 10 V across 2 kohm, the load that general-purpose op-amps are specified into
(common practice, no source).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from livelag.bench.tuning import COMPASS_NOTES
from livelag.bench.wishes import ADDED, SERIES_SWITCHED, Wishes
from livelag.circuit.parts import Capacitor, Pot, Resistor, Taper
from livelag.circuit.stage import GlideStage, Range
from livelag.units import CENTS_PER_OCTAVE, NOTES_PER_OCTAVE, format_value

Number = TypeVar("Number", float, NDArray[np.float64])

LOG_ERROR_PER_POINT = math.log(1.05)
TUNING_CENTS_PER_POINT = 1.0
COMFORTABLE_DRIVE_A = 5e-3


@dataclass(frozen=True, slots=True)
class Scoring:
    """The stage around the parts, as far as it matters to the score.

    Attributes:
        volts_per_octave: of the scale.
        divider: k_D.
        bias_a: size of I_b, at its data-sheet limit, that flows through R.
        leap_v: the leap that the driving buffer has to make.
        least_parts: part count of the plainest connection.
    """

    volts_per_octave: float
    divider: float
    bias_a: float
    leap_v: float
    least_parts: int

    @classmethod
    def around(cls, stage: GlideStage, ranges: int) -> Scoring:
        """Taken from a stage: its scale, buffers, supply and output."""
        per_octave = stage.scale.volts_per_octave
        low, high = stage.swing_volts()
        return cls(
            per_octave,
            stage.divider,
            max(abs(stage.output_buffer.bias_a), stage.output_buffer.bias_limit_a),
            min(COMPASS_NOTES / NOTES_PER_OCTAVE * per_octave, high - low),
            ranges + 2,
        )

    def insulation_cents_per_octave(self, resistance: Number, leak: Number) -> Number:
        """Size of the scale error that insulation makes: the first half of equation 1."""
        drop = leak * resistance
        return CENTS_PER_OCTAVE * self.divider * drop / (1.0 + drop)

    def bias_cents(self, resistance: Number, leak: Number) -> Number:
        """Size of the offset that bias current makes: the second half of equation 1."""
        volts = self.divider * self.bias_a * resistance / (1.0 + leak * resistance)
        return volts * (CENTS_PER_OCTAVE / self.volts_per_octave)

    def tuning_cents(self, resistance: Number, leak: Number) -> Number:
        """T, equation 1."""
        return self.insulation_cents_per_octave(resistance, leak) + self.bias_cents(
            resistance, leak
        )

    def drive_points(self, least_ohms: Number) -> Number:
        """Points for equation 2 beyond what is comfortable."""
        excess = self.leap_v / (least_ohms * COMFORTABLE_DRIVE_A) - 1.0
        points: Number = np.maximum(excess, 0.0)
        return points

    def part_points(self, part_count: int) -> float:
        """Points for parts beyond the least."""
        return float(part_count - self.least_parts)


@dataclass(frozen=True, slots=True)
class Reached:
    """One end of one range: what was wished and what the parts give.

    Attributes:
        range_name: the range.
        end: ``shortest`` or ``longest``.
        wished_s: time constant wished, seconds.
        got_s: time constant at the rotation wished, seconds.
    """

    range_name: str
    end: str
    wished_s: float
    got_s: float

    @property
    def error_fraction(self) -> float:
        """Got / wished - 1."""
        return self.got_s / self.wished_s - 1.0

    @property
    def error_log(self) -> float:
        """|ln(got / wished)|."""
        return abs(math.log(self.got_s / self.wished_s))


@dataclass(frozen=True, slots=True)
class Candidate:
    """Parts for a stage, and what comes of them.

    Attributes:
        connection: how the switch connects them, of `livelag.bench.wishes.CONNECTIONS`, or
            ``single``.
        series: the series resistor; with ``series-switched`` one for each range.
        pot: the time pot.
        capacitors: one for each range: with ``added`` a range connects its own and those before.
        reached: both ends of every range.
        ranges_s: time constants at both stops of the pot, range by range.
        insulation_cents_per_octave: scale error at the slowest setting, 0 or below: flat.
        bias_cents: size of the offset that bias current at its limit makes there.
        drive_a: I.
        score: equation 3; less is better.
        pareto: whether no other choice is better in one of E, T, n and I without being worse
            in another.
    """

    connection: str
    series: tuple[Resistor, ...]
    pot: Pot
    capacitors: tuple[Capacitor, ...]
    reached: tuple[Reached, ...]
    ranges_s: tuple[tuple[float, float], ...]
    insulation_cents_per_octave: float
    bias_cents: float
    drive_a: float
    score: float
    pareto: bool = False

    @property
    def rms_log(self) -> float:
        """E."""
        return _rms(self.reached)

    @property
    def worst_log(self) -> float:
        """|ln(time / time wished)| of the wish that is missed most."""
        return max(row.error_log for row in self.reached)

    @property
    def worst(self) -> Reached:
        """The wish that is missed most."""
        return max(self.reached, key=lambda row: row.error_log)

    @property
    def worst_error_fraction(self) -> float:
        """The most that a time is off what was wished, as a fraction of it."""
        return max(abs(row.error_fraction) for row in self.reached)

    @property
    def part_count(self) -> int:
        """N."""
        return len(self.series) + 1 + len(self.capacitors)

    @property
    def criteria(self) -> tuple[float, float, int, float]:
        """E, T, n and I, each better when less."""
        tuning = self.bias_cents - self.insulation_cents_per_octave
        return self.rms_log, tuning, self.part_count, self.drive_a

    @property
    def order(self) -> tuple[float, ...]:
        """Sorts the better first; whatever is better in every criterion sorts before."""
        values = (*(part.resistance_ohms for part in self.series), self.pot.resistance_ohms)
        farads = (part.capacitance_f for part in self.capacitors)
        return (self.score, *self.criteria, *values, *farads)


def make_candidate(
    connection: str,
    series: tuple[Resistor, ...],
    pot: Pot,
    capacitors: tuple[Capacitor, ...],
    wishes: Wishes,
    scoring: Scoring,
) -> Candidate:
    """Work out what a choice of parts gives."""
    each_series = [part.resistance_ohms for part in series]
    each_series *= wishes.ranges // len(series)
    farads = [part.capacitance_f for part in capacitors]
    if connection == ADDED:
        farads = [sum(farads[: k + 1]) for k in range(len(farads))]
    low, high = (pot.resistance_at(rotation) for rotation in wishes.ends)
    reached = []
    for name, ohms, capacitance, (shortest, longest) in zip(
        wishes.range_names, each_series, farads, wishes.targets, strict=True
    ):
        reached.append(Reached(name, "shortest", shortest, (ohms + low) * capacitance))
        reached.append(Reached(name, "longest", longest, (ohms + high) * capacitance))
    slowest = capacitors if connection == ADDED else capacitors[-1:]
    leak = sum(part.leakage_siemens for part in slowest)
    resistance = each_series[-1] + pot.resistance_ohms
    least = min(each_series) + pot.end_ohms
    score = (
        _rms(reached) / LOG_ERROR_PER_POINT
        + scoring.tuning_cents(resistance, leak) / TUNING_CENTS_PER_POINT
        + scoring.part_points(len(series) + 1 + len(capacitors))
        + float(scoring.drive_points(least))
    )  # (3)
    return Candidate(
        connection,
        series,
        pot,
        capacitors,
        tuple(reached),
        tuple(
            ((ohms + pot.end_ohms) * capacitance, (ohms + pot.resistance_ohms) * capacitance)
            for ohms, capacitance in zip(each_series, farads, strict=True)
        ),
        -scoring.insulation_cents_per_octave(resistance, leak),
        scoring.bias_cents(resistance, leak),
        scoring.leap_v / least,  # (2)
        score,
    )


def _rms(reached: Sequence[Reached]) -> float:
    return math.sqrt(sum(row.error_log**2 for row in reached) / len(reached))


def mark_pareto(candidates: list[Candidate]) -> list[Candidate]:
    """Mark those that no other of the list is better than in one criterion and worse in none.

    The score never falls as a criterion grows, so in a list of the best by `Candidate.order`
    whatever could outdo a member is in the list too: the marks hold for all choices there are.
    """
    return [
        replace(one, pareto=not any(_outdoes(other, one) for other in candidates))
        for one in candidates
    ]


def _outdoes(one: Candidate, other: Candidate) -> bool:
    pairs = list(zip(one.criteria, other.criteria, strict=True))
    return all(a <= b for a, b in pairs) and any(a < b for a, b in pairs)


def evenest_taper(tapers: tuple[Taper, ...], shortest_s: float, longest_s: float) -> Taper:
    """The taper whose mid-travel is nearest to the middle of a range, in ratio."""

    def away(taper: Taper) -> float:
        middle = shortest_s + (longest_s - shortest_s) * taper.fraction(0.5)
        return abs(math.log(middle / math.sqrt(shortest_s * longest_s)))

    return min(tapers, key=away)


def candidate_stage(candidate: Candidate, wishes: Wishes, base: GlideStage) -> GlideStage:
    """The stage that a candidate makes in the surroundings of another.

    Supply, scale, buffers, pull-down and output are those of ``base``; its bleed resistor goes
    with its switch.
    """
    names = [f"C{number}" for number in range(1, len(candidate.capacitors) + 1)]
    ranges = []
    for k, name in enumerate(wishes.range_names):
        connects = names[: k + 1] if candidate.connection == ADDED else names[k : k + 1]
        own = candidate.series[k] if candidate.connection == SERIES_SWITCHED and k > 0 else None
        ranges.append(Range(name, tuple(connects), own))
    shortest, longest = (format_value(wishes.times_s[end], "s") for end in (0, -1))
    count = ("one range", "two ranges", "three ranges")[wishes.ranges - 1]
    return replace(
        base,
        title=f"{shortest} to {longest}, {count}",
        about=f"Parts for time constants of {shortest} to {longest}; {connection_words(candidate)}",
        capacitors=tuple(
            replace(part, name=name) for part, name in zip(candidate.capacitors, names, strict=True)
        ),
        ranges=tuple(ranges),
        pot=candidate.pot,
        series=candidate.series[0],
        bleed=None,
    )


_WORDS = {
    "single": "no range switch.",
    "added": "each slower range adds a capacitor in parallel.",
    "exchanged": "each range connects one capacitor alone.",
    "series-switched": "each range connects one capacitor alone, through a resistor of its own.",
}


def connection_words(candidate: Candidate) -> str:
    """How the range switch connects the parts, in words."""
    return _WORDS[candidate.connection]
