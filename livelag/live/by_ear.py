"""A stage whose pot is freed from its parts: any time from 0.5 ms to 10 s, to be judged by ear."""

from __future__ import annotations

from dataclasses import replace

from livelag.circuit.parts import Buffer, Capacitor, Pot, Resistor, Taper
from livelag.circuit.stage import GlideStage, Range

SHORTEST_S, LONGEST_S = 0.5e-3, 10.0
_CAPACITANCE_F = 1e-6
_POINTS = 1025  # straight lines between them leave the logarithm by less than 0.003 %


def free_stage(stage: GlideStage) -> GlideStage:
    """The same supply and scale with one range in which equal turns are equal ratios of time.

    Its buffers have the stage's headroom and no errors, since the errors belong to parts that
    have not been chosen yet.
    """
    lowest, highest = SHORTEST_S / _CAPACITANCE_F, LONGEST_S / _CAPACITANCE_F
    series = lowest / 2
    end, track = lowest - series, highest - series
    rotations = tuple(i / (_POINTS - 1) for i in range(_POINTS))
    resistances = [lowest * (highest / lowest) ** rotation for rotation in rotations]
    fractions = [(r - series - end) / (track - end) for r in resistances]
    fractions[0], fractions[-1] = 0.0, 1.0
    return GlideStage(
        title=f"{stage.title}, its pot freed",
        about=stage.about,
        supply=stage.supply,
        scale=stage.scale,
        capacitors=(Capacitor("free", _CAPACITANCE_F, "ideal", 0.0),),
        ranges=(Range("free", ("free",)),),
        pot=Pot(track, Taper.measured(rotations, tuple(fractions)), 0.0, end),
        series=Resistor(series, 0.0),
        input_buffer=_without_errors(stage.input_buffer),
        output_buffer=_without_errors(stage.output_buffer),
    )


def _without_errors(buffer: Buffer) -> Buffer:
    return replace(
        buffer, name="custom", offset_v=0.0, bias_a=0.0, offset_limit_v=0.0, bias_limit_a=0.0
    )
