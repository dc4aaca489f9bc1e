"""What the stage does to the tuning of a held note, by cause.

Held for ever, the output is k u + offset, unless a buffer runs out of swing:

    output = D ((u + V_in - I_b R)/(1 + G R) + V_out),   k = D/(1 + G R)              (1)

| symbol | name here                 | meaning                                             | unit |
|--------|---------------------------|-----------------------------------------------------|------|
| D      | ``stage.divider``         | share of the output that the load leaves            | 1    |
| G      | ``leakage_siemens``       | insulation of whatever hangs on the bus             | S    |
| V_in   | ``input_buffer.offset_v`` | offset of the buffer before the glide               | V    |
| V_out  | ``output_buffer.offset_v``| offset of the buffer after it                       | V    |
| I_b    | ``output_buffer.bias_a``  | bias current from the bus through R                 | A    |
| k      |                           | scale: 1200 (k - 1) cents per octave                | 1    |
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from livelag.circuit.parts import require
from livelag.circuit.stage import GlideStage, Setting
from livelag.units import CENTS_PER_OCTAVE, NOTES_PER_OCTAVE, volts_to_cents

OFFSET_CAUSES = ("input_offset", "output_offset", "bias_current")
SCALE_CAUSES = ("insulation", "output_divider")
CAUSES = (*OFFSET_CAUSES, *SCALE_CAUSES, "swing")
UNITS = {cause: "cents_per_octave" if cause in SCALE_CAUSES else "cents" for cause in CAUSES}
COMPASS_NOTES = 60  # the five octaves of a common keyboard
HIGHEST_NOTE = 127
_ROUNDING_CENTS = 1e-6  # what the modes of a network leave between two ways to one voltage


@dataclass(frozen=True, slots=True)
class Compass:
    """The notes that are to be in tune.

    Attributes:
        lowest: MIDI note, 0 to 127.
        highest: MIDI note, above the lowest, at most 127.

    Raises:
        InputError: if they are not in this order and range.
    """

    lowest: int
    highest: int

    def __post_init__(self) -> None:
        require(
            0 <= self.lowest < self.highest <= HIGHEST_NOTE,
            f"notes are {self.lowest} to {self.highest}; they must rise, from 0 to {HIGHEST_NOTE}",
        )

    @classmethod
    def above_zero_volts(cls, stage: GlideStage) -> Compass:
        """Five octaves up from 0 V, or as many as there are notes."""
        lowest = min(math.ceil(stage.scale.zero_volt_note), HIGHEST_NOTE - 1)
        return cls(lowest, min(lowest + COMPASS_NOTES, HIGHEST_NOTE))

    def octaves(self, stage: GlideStage) -> float:
        """How far it reaches from 0 V, where a scale error counts from, in octaves."""
        zero = stage.scale.zero_volt_note
        return max(abs(self.lowest - zero), abs(self.highest - zero)) / NOTES_PER_OCTAVE


@dataclass(frozen=True, slots=True)
class Limits:
    """How large the errors can be with parts as bad as their data sheets allow.

    Offsets, bias current and insulation are at their limits, resistors and pot at the end of
    their tolerance that hurts.

    Attributes:
        causes: cause -> size, in the units of `UNITS`.
    """

    causes: dict[str, float]

    @property
    def worst_offset_cents(self) -> float:
        """Sum of the offset causes."""
        return sum(self.causes[cause] for cause in OFFSET_CAUSES)

    @property
    def rss_offset_cents(self) -> float:
        """Root of the sum of the squares of the offset causes."""
        return math.hypot(*(self.causes[cause] for cause in OFFSET_CAUSES))

    @property
    def worst_scale_cents_per_octave(self) -> float:
        """Sum of the scale causes."""
        return sum(self.causes[cause] for cause in SCALE_CAUSES)

    @property
    def rss_scale_cents_per_octave(self) -> float:
        """Root of the sum of the squares of the scale causes."""
        return math.hypot(*(self.causes[cause] for cause in SCALE_CAUSES))


@dataclass(frozen=True, slots=True)
class Tuning:
    """Tuning error at one position of range switch and pot.

    Attributes:
        range_name: the range.
        rotation: the pot.
        causes: cause -> error in the units of `UNITS`, below 0 is flat. The offset causes add up
            to the offset, the scale causes to the scale error; ``swing`` is what the buffers cut
            off the note of the compass that they cut most.
        worth_cents: cause -> the most it is worth anywhere in the compass, in cents.
        limits: the same over data-sheet maxima.
    """

    range_name: str
    rotation: float
    causes: dict[str, float]
    worth_cents: dict[str, float]
    limits: Limits

    @property
    def offset_cents(self) -> float:
        """Error of a note at 0 V."""
        return sum(self.causes[cause] for cause in OFFSET_CAUSES)

    @property
    def scale_cents_per_octave(self) -> float:
        """Further error with every octave above 0 V."""
        return sum(self.causes[cause] for cause in SCALE_CAUSES)

    @property
    def dominant(self) -> str:
        """The cause that is worth most."""
        return max(self.worth_cents, key=lambda cause: self.worth_cents[cause])


def tuning_at(stage: GlideStage, setting: Setting, compass: Compass) -> Tuning:
    """Tuning error at a setting.

    Args:
        stage: the stage.
        setting: where the controls stand.
        compass: the notes that are to be in tune.
    """
    typical = _typical(stage, setting)
    swing = {"swing": _swing_cents(stage, setting, typical, compass)}
    causes = typical.causes() | swing
    reach = compass.octaves(stage)
    return Tuning(
        stage.range_names[setting.range_index],
        setting.rotation,
        causes,
        {
            cause: abs(error) * (reach if cause in SCALE_CAUSES else 1.0)
            for cause, error in causes.items()
        },
        Limits({k: abs(v) for k, v in (_worst(stage, setting).causes() | swing).items()}),
    )


def tuning_along_pot(
    stage: GlideStage, rotations: Sequence[float], compass: Compass
) -> tuple[Tuning, ...]:
    """Tuning error at several rotations of every range, range by range."""
    return tuple(
        tuning_at(stage, Setting(index, rotation), compass)
        for index in range(len(stage.ranges))
        for rotation in rotations
    )


def leakage_siemens(stage: GlideStage, range_index: int, *, worst: bool = False) -> float:
    """G: conductance from the bus to ground in a range.

    A parked capacitor leaks through the bleed resistor, if there is one. With ``worst``, every
    insulation is the poorest that its kind's data sheets allow, unless it was measured.
    """
    connects = stage.ranges[range_index].connects
    total = 0.0
    for capacitor in stage.capacitors:
        leak = capacitor.leakage_siemens
        if worst and capacitor.insulation_ohms is None:
            leak = capacitor.kind_data.leakage_siemens(capacitor.capacitance_f, worst=True)
        if capacitor.name in connects:
            total += leak
        elif stage.bleed is not None:
            total += leak / (1.0 + leak * stage.bleed.resistance_ohms)
    return total


@dataclass(frozen=True, slots=True)
class _Figures:
    """What equation 1 needs."""

    volts_per_octave: float
    input_offset_v: float
    output_offset_v: float
    bias_a: float
    resistance_ohms: float
    leakage_s: float
    divider: float

    def output_volts(self, key_volts: float) -> float:
        """Equation 1: the output for a key held for ever, were there no limit to the swing."""
        source = key_volts + self.input_offset_v - self.bias_a * self.resistance_ohms
        held = source / (1.0 + self.leakage_s * self.resistance_ohms)
        return self.divider * (held + self.output_offset_v)

    def causes(self) -> dict[str, float]:
        """Every cause but swing, split so that those of each kind add up exactly."""
        drop = self.leakage_s * self.resistance_ohms
        held = 1.0 / (1.0 + drop)

        def cents(volts: float) -> float:
            return volts_to_cents(volts, self.volts_per_octave)

        return {
            "input_offset": cents(self.divider * held * self.input_offset_v),
            "output_offset": cents(self.divider * self.output_offset_v),
            "bias_current": cents(-self.divider * held * self.bias_a * self.resistance_ohms),
            # held - 1, written so that a small leak keeps its digits.
            "insulation": -CENTS_PER_OCTAVE * self.divider * held * drop,
            "output_divider": CENTS_PER_OCTAVE * (self.divider - 1.0),
        }


def _typical(stage: GlideStage, setting: Setting) -> _Figures:
    return _Figures(
        stage.scale.volts_per_octave,
        stage.input_buffer.offset_v,
        stage.output_buffer.offset_v,
        stage.output_buffer.bias_a,
        stage.resistance_ohms(setting),
        leakage_siemens(stage, setting.range_index),
        stage.divider,
    )


def _worst(stage: GlideStage, setting: Setting) -> _Figures:
    """Every part as bad as its data sheet allows."""
    series = stage.ranges[setting.range_index].series or stage.series
    pot = stage.pot
    track = pot.resistance_ohms * (1.0 + pot.tolerance)
    turned = pot.end_ohms + (track - pot.end_ohms) * pot.taper.fraction(setting.rotation)
    divider = 1.0
    if stage.load is not None and stage.output_series is not None:
        load = stage.load.resistance_ohms * (1.0 - stage.load.tolerance)
        before = stage.output_series.resistance_ohms * (1.0 + stage.output_series.tolerance)
        divider = load / (load + before)
    return _Figures(
        stage.scale.volts_per_octave,
        stage.input_buffer.offset_limit_v,
        stage.output_buffer.offset_limit_v,
        stage.output_buffer.bias_limit_a,
        series.resistance_ohms * (1.0 + series.tolerance) + turned,
        leakage_siemens(stage, setting.range_index, worst=True),
        divider,
    )


def _swing_cents(stage: GlideStage, setting: Setting, figures: _Figures, compass: Compass) -> float:
    """What clipping does to the end of the compass that it hurts most."""
    errors = []
    for note in (compass.lowest, compass.highest):
        key = stage.note_volts(float(note))
        cut = stage.settled_volts(key, setting) - figures.output_volts(key)
        errors.append(volts_to_cents(cut, figures.volts_per_octave))
    worst = max(errors, key=abs)
    return worst if abs(worst) > _ROUNDING_CENTS else 0.0
