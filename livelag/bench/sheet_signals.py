"""The test signals of a sheet: levels inside the swing, and how fast a generator is to step.

| symbol | name here              | meaning                                         | unit |
|--------|------------------------|-------------------------------------------------|------|
| T      | ``half_period_s``      | how long a level is held                        | s    |
| tau    | ``time_constant_s``    | R C of the build at hand                        | s    |
| n      | `SETTLED`              | T / tau of the slowest build, for a settled step| 1    |

After n time constants a lone RC is e^-n from settled. Held for T only, the output swings between
levels whose distance is the input's times the settled gain times tanh(T / (2 tau)): closed-form
steady state of a first-order lag under a square wave (2)
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from livelag.bench.limits import Limits, SettingLimits, WorstCase
from livelag.bench.tuning_fix import round_down, round_up
from livelag.circuit.network import Vector
from livelag.circuit.parts import require
from livelag.circuit.stage import GlideStage, Setting

SETTLED = 7  # time constants: e^-7 is 0.1 % of a step
HURRIED = 0.5  # time constants of the fastest build: nothing settles
STAIRS = 5
_SPANS = ((1.0, 5.0), (1.0, 4.0), (1.0, 3.0), (1.0, 2.0))


@dataclass(frozen=True, slots=True)
class Levels:
    """The levels of the test signals, in volts at the input.

    Attributes:
        low_v: low level of the square wave, and the lowest stair.
        high_v: high level, and the highest stair.
    """

    low_v: float
    high_v: float

    @property
    def stairs_v(self) -> tuple[float, ...]:
        """`STAIRS` equal steps from low to high."""
        return tuple(float(v) for v in np.linspace(self.low_v, self.high_v, STAIRS))


@dataclass(frozen=True, slots=True)
class RangeSignals:
    """What to set for one range, with the pot at 1.

    Attributes:
        range_name: the range.
        settle_hz: square wave whose every level is held for `SETTLED` time constants or more,
            whatever the build.
        stair_s: how long each stair is held for the same.
        stairs: volts out at the end of each stair.
        hurried_hz: square wave whose levels are held for `HURRIED` time constants or less.
        trough_v: lowest volts out under it, once it has run for a while.
        crest_v: highest volts out.
        swing_v: crest less trough.
    """

    range_name: str
    settle_hz: float
    stair_s: float
    stairs: tuple[Limits, ...]
    hurried_hz: float
    trough_v: Limits
    crest_v: Limits
    swing_v: Limits


def levels(worst: WorstCase) -> Levels:
    """Levels that every build passes unclipped, and that reverse no polarised part.

    Raises:
        InputError: if the rails leave no room for a step.
    """
    low, high = worst.stage.swing_volts()
    reach = max(
        worst.offset_reach_v(corner, Setting(index, 1.0), 1.0) / corner.divider
        for corner in worst.corners
        for index in range(len(worst.stage.ranges))
    )
    low, high = max(low, 0.0) + reach, high - reach
    for span in _SPANS:
        if low <= span[0] and span[1] <= high:
            return Levels(*span)
    require(
        high > low,
        f"the rails leave {low:.3g} V to {high:.3g} V for a test signal; there is no room for one",
    )
    return Levels(round_up(low + 0.1 * (high - low)), round_down(high - 0.1 * (high - low)))


def settle_hz(limits: SettingLimits) -> float:
    """Square wave of two digits whose levels last `SETTLED` time constants of the slowest build."""
    return round_down(1.0 / (2.0 * SETTLED * limits.time_constant_s.high))


def range_signals(worst: WorstCase, range_index: int, at: Levels) -> RangeSignals:
    """What to set for one range, and what it gives.

    Args:
        worst: the stage.
        range_index: which range.
        at: the levels.
    """
    setting = Setting(range_index, 1.0)
    limits = worst.limits(setting)
    hertz = settle_hz(limits)
    stair_s = 1.0 / (2.0 * hertz)
    hurried = round_up(1.0 / (2.0 * HURRIED * limits.time_constant_s.low))
    half_s = 1.0 / (2.0 * hurried)
    ends = np.array([0.0, half_s])
    trough, crest = limits_of(square_band(worst, setting, at, half_s, ends))
    swings = [float(np.ptp(square_volts(c, setting, at, half_s, ends))) for c in worst.corners]
    nominal = crest.nominal - trough.nominal
    return RangeSignals(
        range_name=limits.range_name,
        settle_hz=hertz,
        stair_s=stair_s,
        stairs=_stairs(worst, setting, at, stair_s),
        hurried_hz=hurried,
        trough_v=trough,
        crest_v=crest,
        swing_v=Limits(nominal, min(nominal, *swings), max(nominal, *swings)),
    )


def limits_of(band: tuple[Vector, Vector, Vector]) -> tuple[Limits, ...]:
    """A band of nominal, least and greatest, each (times,), as limits at each time."""
    return tuple(Limits(*row) for row in zip(*(edge.tolist() for edge in band), strict=True))


def _stairs(worst: WorstCase, setting: Setting, at: Levels, stair_s: float) -> tuple[Limits, ...]:
    times = np.arange(1.0, STAIRS + 1.0, dtype=np.float64) * stair_s
    return limits_of(stair_band(worst, setting, at, stair_s, times))


def stair_band(
    worst: WorstCase, setting: Setting, at: Levels, stair_s: float, times_s: Vector
) -> tuple[Vector, Vector, Vector]:
    """Volts out along a staircase that starts settled: as designed, least, greatest.

    Every stair rises, so the sum of its step responses is as monotone as each of them.
    """

    def volts(stage: GlideStage) -> Vector:
        network = stage.network(setting)
        weights, poles = network.deviation(np.zeros(stage.wiring.state_count), 1.0)
        stairs = at.stairs_v
        bus = np.full_like(times_s, network.gain * stairs[0])
        for number in range(1, STAIRS):
            since = np.maximum(times_s - number * stair_s, 0.0)
            step = network.gain + np.exp(np.multiply.outer(since, poles)) @ weights
            bus += (stairs[number] - stairs[number - 1]) * step
        out: Vector = stage.divider * bus
        return out

    return worst.band(setting, volts)


def square_band(
    worst: WorstCase, setting: Setting, at: Levels, half_period_s: float, times_s: Vector
) -> tuple[Vector, Vector, Vector]:
    """Volts out under a square wave that has run for ever: as designed, least, greatest."""
    return worst.band(
        setting, lambda stage: square_volts(stage, setting, at, half_period_s, times_s)
    )


def square_volts(
    stage: GlideStage, setting: Setting, at: Levels, half_period_s: float, times_s: Vector
) -> Vector:
    """Volts out, offsets and bias aside, from a rising edge at 0 on.

    Each mode of weight w and pole s swings symmetrically about its mean:
    w (1 - 2 e^(st) / (1 + e^(sT))) times half the step, eq. 2 mode by mode.

    Args:
        stage: the stage.
        setting: where the controls stand, not bypassed.
        at: the levels.
        half_period_s: T.
        times_s: (times,) seconds, 0 or more.
    """
    network = stage.network(setting)
    n = network.driven_count
    poles = network.poles[:n]
    weights = -network.readout[:n] * network.drive[:n] / poles
    halves, since = np.divmod(times_s, half_period_s)
    # The end of a half period belongs to it, not to the next.
    at_end = (since == 0.0) & (times_s > 0.0)
    halves, since = halves - at_end, np.where(at_end, half_period_s, since)
    sign = np.where(halves % 2 == 0, 1.0, -1.0)
    shape = 1.0 - 2.0 * np.exp(np.multiply.outer(since, poles)) / (
        1.0 + np.exp(poles * half_period_s)
    )
    middle, half_step = (at.high_v + at.low_v) / 2.0, (at.high_v - at.low_v) / 2.0
    volts: Vector = stage.divider * (network.gain * middle + sign * half_step * (shape @ weights))
    return volts
