"""What a built stage may measure: exact worst cases over tolerances and data-sheet maxima.

The step response h(t) of the network falls at every instant when R, a capacitance or the leakage
grows, because the network is one of positive resistances and capacitances whose voltages only rise
(comparison theorem for cooperative systems, in textbooks of differential equations). What is read
off it is monotone in each part, so its extremes are at corners. Offsets and bias current add

    output = D (k (u + V_in - I_b R) + V_out),   k = 1/(1 + G R)                     (1)

| symbol | name here                  | meaning                                          | unit |
|--------|----------------------------|--------------------------------------------------|------|
| D      | ``GlideStage.divider``     | share of the output that the load leaves         | 1    |
| G      | insulation                 | from none to the poorest the data sheet allows   | S    |
| V_in   | ``offset_limit_v``         | offset of the input buffer, either sign          | V    |
| V_out  | ``offset_limit_v``         | offset of the output buffer, either sign         | V    |
| I_b    | ``bias_limit_a``           | bias current, either sign                        | A    |

Absorption stays at its typical size: data sheets state no limit for it. Swing is left out.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from livelag.bench.builds import Recipe
from livelag.bench.ranges import rise_s
from livelag.circuit.network import Vector
from livelag.circuit.parts import INSULATION_OHMS, Buffer, Capacitor, Resistor
from livelag.circuit.stage import GlideStage, Setting


@dataclass(frozen=True, slots=True)
class Limits:
    """What a measured value should be, and how far a stage within its tolerances may be off.

    Attributes:
        nominal: with every part at its value and typical.
        low: exact least.
        high: exact greatest.
    """

    nominal: float
    low: float
    high: float

    def holds(self, value: float, allowance: float = 0.0) -> bool:
        """Whether a value is within, give or take what the measurement leaves open."""
        return self.low - allowance <= value <= self.high + allowance


@dataclass(frozen=True, slots=True)
class SettingLimits:
    """What one position of range switch and pot may measure.

    Attributes:
        range_name: the range.
        rotation: the pot.
        time_constant_s: R C.
        rise_s: 10-90 % of a step, absorption and leakage in.
        gain: volts out per volt in, held for ever, through buffers, insulation and load.
        offset_v: volts out at 0 V in, were there no limit to the swing.
        shown_time_constant_s: what a single decay fitted to a capture may read: leakage and a
            bleed resistor shorten R C, absorption lengthens it.
    """

    range_name: str
    rotation: float
    time_constant_s: Limits
    rise_s: Limits
    gain: Limits
    offset_v: Limits
    shown_time_constant_s: Limits


def setting_limits(stage: GlideStage, setting: Setting) -> SettingLimits:
    """What a stage may measure at a setting.

    Args:
        stage: as designed.
        setting: where the controls stand, not bypassed.

    Raises:
        InputError: if the stage has too many parts.
    """
    return WorstCase(stage).limits(setting)


class WorstCase:
    """A stage at every corner of its tolerances.

    Attributes:
        stage: as designed.

    Raises:
        InputError: if the stage has too many parts.
    """

    def __init__(self, stage: GlideStage) -> None:
        self.stage = stage
        self._recipe = Recipe(stage)
        self._offsets_v = (_offset_limit(stage.input_buffer), _offset_limit(stage.output_buffer))
        self._bias_a = max(stage.output_buffer.bias_limit_a, abs(stage.output_buffer.bias_a))

    @cached_property
    def corners(self) -> tuple[GlideStage, ...]:
        """Stages of exact parts: R, C, leakage, bleed and load divider each at both ends."""
        return tuple(dict.fromkeys(self._corners()))

    def _corners(self) -> Iterator[GlideStage]:
        is_capacitor = np.array([part.unit == "f" for part in self._recipe.parts])
        for ohms in (-1.0, 1.0):
            for farads in (-1.0, 1.0):
                built = self._recipe.built_stage(
                    np.where(is_capacitor, farads, ohms), self.stage.title, self.stage.about
                )
                for leaky in (False, True):
                    insulated = tuple(
                        _insulated(part, designed, leaky)
                        for part, designed in zip(
                            built.capacitors, self.stage.capacitors, strict=True
                        )
                    )
                    for sign in (-1.0, 1.0):
                        for load in (-1.0, 1.0):
                            yield replace(
                                built,
                                capacitors=insulated,
                                bleed=_at_end(built.bleed, sign),
                                output_series=_at_end(built.output_series, -load),
                                load=_at_end(built.load, load),
                            )

    def limits(self, setting: Setting) -> SettingLimits:
        """What the stage may measure at a setting that is not bypassed."""
        stage = self.stage
        nominal_gain = stage.divider * stage.network(setting).gain
        at_corners = [(corner, corner.network(setting).gain) for corner in self.corners]
        offset = max(self.offset_reach_v(corner, setting, gain) for corner, gain in at_corners)
        return SettingLimits(
            stage.range_names[setting.range_index],
            setting.rotation,
            _limits(
                stage.time_constant_s(setting), (c.time_constant_s(setting) for c in self.corners)
            ),
            _limits(rise_s(stage, setting), (rise_s(c, setting) for c in self._undivided)),
            _limits(nominal_gain, (corner.divider * gain for corner, gain in at_corners)),
            Limits(self._nominal_offset_v(setting), -offset, offset),
            _limits(
                stage.time_constant_s(setting),
                (tau for corner in self._undivided for tau in _shown(corner, setting)),
            ),
        )

    @cached_property
    def _undivided(self) -> tuple[GlideStage, ...]:
        """The corners but for the load, which does not change times."""
        return tuple(
            dict.fromkeys(replace(corner, output_series=None, load=None) for corner in self.corners)
        )

    def offset_reach_v(self, corner: GlideStage, setting: Setting, gain: float) -> float:
        """The most that offsets and bias current can add at a corner, eq. 1, in volts out."""
        before, after = self._offsets_v
        bias_v = self._bias_a * corner.resistance_ohms(setting)
        return corner.divider * (gain * (before + bias_v) + after)

    def _nominal_offset_v(self, setting: Setting) -> float:
        stage = self.stage
        bias_v = stage.output_buffer.bias_a * stage.resistance_ohms(setting)
        bus = stage.network(setting).gain * (stage.input_buffer.offset_v - bias_v)
        return stage.divider * (bus + stage.output_buffer.offset_v)

    def step_volts(
        self, setting: Setting, from_v: float, to_v: float, times_s: Vector
    ) -> tuple[Vector, Vector, Vector]:
        """Volts out after a settled step: as designed, least and greatest, each (times,).

        Args:
            setting: where the controls stand, not bypassed.
            from_v: volts in that the stage has settled on.
            to_v: volts in from time 0 on; both inside the swing.
            times_s: (times,) seconds, 0 or more; infinity is settled.
        """
        return self.band(setting, lambda stage: _step(stage, setting, from_v, to_v, times_s))

    def band(
        self, setting: Setting, volts: Callable[[GlideStage], Vector]
    ) -> tuple[Vector, Vector, Vector]:
        """Volts out as designed, least and greatest over all corners, each (times,).

        Args:
            setting: where the controls stand, not bypassed.
            volts: a stage's volts out without offsets and bias, (times,).
        """
        nominal = volts(self.stage) + self._nominal_offset_v(setting)
        lowest, highest = nominal, nominal
        for corner in self.corners:
            middle = volts(corner)
            reach = self.offset_reach_v(corner, setting, corner.network(setting).gain)
            lowest = np.minimum(lowest, middle - reach)
            highest = np.maximum(highest, middle + reach)
        return nominal, lowest, highest


def _step(
    stage: GlideStage, setting: Setting, from_v: float, to_v: float, times_s: Vector
) -> Vector:
    """Volts out without offsets and bias: D (k from + (to - from) h(t))."""
    network = stage.network(setting)
    weights, poles = network.deviation(np.zeros(stage.wiring.state_count), 1.0)
    response = network.gain + np.exp(np.multiply.outer(times_s, poles)) @ weights
    volts: Vector = stage.divider * (network.gain * from_v + (to_v - from_v) * response)
    return volts


def _shown(corner: GlideStage, setting: Setting) -> tuple[float, float]:
    resistance = corner.resistance_ohms(setting)
    on_bus = corner.connected(setting.range_index)
    leak = sum(part.leakage_siemens for part in on_bus)
    if corner.bleed is not None:
        leak += (len(corner.capacitors) - len(on_bus)) / corner.bleed.resistance_ohms
    soaked = sum(
        part.capacitance_f * (1.0 + sum(branch.fraction for branch in part.branches))
        for part in on_bus
    )
    return corner.time_constant_s(setting) / (1.0 + leak * resistance), resistance * soaked


def _limits(nominal: float, values: Iterable[float]) -> Limits:
    found = [nominal, *values]
    return Limits(nominal, min(found), max(found))


def _offset_limit(buffer: Buffer) -> float:
    return max(buffer.offset_limit_v, abs(buffer.offset_v))


def _at_end(part: Resistor | None, sign: float) -> Resistor | None:
    if part is None:
        return None
    return Resistor(part.resistance_ohms * (1.0 + sign * part.tolerance), 0.0)


def _insulated(part: Capacitor, designed: Capacitor, leaky: bool) -> Capacitor:
    """The part with the poorest insulation that its data sheet allows, or with the best there is.

    A measured insulation stays. The limit belongs to the rated capacitance.
    """
    limit_s = designed.kind_data.leakage_siemens(designed.capacitance_f, worst=True)
    if designed.insulation_ohms is not None or limit_s == 0.0:
        return part
    return replace(part, insulation_ohms=1.0 / limit_s if leaky else INSULATION_OHMS[1])
