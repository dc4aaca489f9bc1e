"""What to change so that the cause that detunes a stage most is worth no more than a goal."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

from livelag.bench.tuning import CAUSES, SCALE_CAUSES, Compass, Tuning, leakage_siemens
from livelag.circuit.kinds import BUFFER_CLASSES, CAPACITOR_KINDS
from livelag.circuit.parts import INSULATION_OHMS, OHMS, Buffer, Capacitor, require_positive
from livelag.circuit.stage import GlideStage, Setting
from livelag.units import CENTS_PER_OCTAVE, cents_to_volts, format_value

GOAL_CENTS = 2.0
_SLACK = 1e-6  # so that a round value stays itself in spite of rounding


@dataclass(frozen=True, slots=True)
class Fix:
    """A change that brings one cause down to the goal at the position where it is worth most.

    Attributes:
        cause: which cause.
        worth_cents: what it is worth there now.
        range_name: the range where it is.
        rotation: the pot where it is.
        sentence: the part, the value it needs, and the value it has.
        stage: the stage with this change made.
    """

    cause: str
    worth_cents: float
    range_name: str
    rotation: float
    sentence: str
    stage: GlideStage


def dominating(tunings: Sequence[Tuning]) -> Tuning:
    """The position at which a single cause is worth most."""
    return max(tunings, key=lambda row: row.worth_cents[row.dominant])


def advise(
    stage: GlideStage, tunings: Sequence[Tuning], compass: Compass, goal_cents: float = GOAL_CENTS
) -> Fix | None:
    """What to change about the cause that dominates; None if it is within the goal.

    Args:
        stage: the stage.
        tunings: its errors, at one position or more.
        compass: the notes that are to be in tune.
        goal_cents: what the cause may be worth, more than 0.

    Raises:
        InputError: if the goal is not a positive number.
    """
    require_positive(goal_cents, "goal in cents")
    at = dominating(tunings)
    cause, worth = at.dominant, at.worth_cents[at.dominant]
    if worth <= goal_cents:
        return None
    setting = Setting(stage.range_index(at.range_name), at.rotation)
    share = goal_cents / worth
    if cause in SCALE_CAUSES:
        # What the cause may take from each volt: worth = 1200 x octaves x share taken.
        share = goal_cents / (CENTS_PER_OCTAVE * compass.octaves(stage))
    sentence, changed = _REMEDIES[cause](stage, setting, share, at)
    return Fix(cause, worth, at.range_name, at.rotation, sentence, changed)


Remedy = Callable[[GlideStage, Setting, float, Tuning], tuple[str, GlideStage]]


def _input_offset(
    stage: GlideStage, setting: Setting, share: float, at: Tuning
) -> tuple[str, GlideStage]:
    buffer, sentence = _less_offset(stage.input_buffer, share)
    return f"input buffer: {sentence}", replace(stage, input_buffer=buffer)


def _output_offset(
    stage: GlideStage, setting: Setting, share: float, at: Tuning
) -> tuple[str, GlideStage]:
    buffer, sentence = _less_offset(stage.output_buffer, share)
    return f"output buffer: {sentence}", replace(stage, output_buffer=buffer)


def _less_offset(buffer: Buffer, share: float) -> tuple[Buffer, str]:
    most = round_down(abs(buffer.offset_v) * share)
    sentence = (
        f"an offset of at most {format_value(most, 'V')} (now "
        f"{format_value(abs(buffer.offset_v), 'V')}), picked or trimmed"
    )
    return _custom(buffer, offset_v=math.copysign(most, buffer.offset_v)), sentence


def _bias_current(
    stage: GlideStage, setting: Setting, share: float, at: Tuning
) -> tuple[str, GlideStage]:
    buffer = stage.output_buffer
    most = round_down(abs(buffer.bias_a) * share)
    classes = [n for n, row in BUFFER_CLASSES.items() if n != "ideal" and row.bias_a <= most]
    such = f", such as the {classes[0]} class" if classes else ""
    sentence = (
        f"output buffer: a bias current of at most {format_value(most, 'A')} (now "
        f"{format_value(abs(buffer.bias_a), 'A')}){such}"
    )
    changed = _custom(buffer, bias_a=math.copysign(most, buffer.bias_a))
    return sentence, replace(stage, output_buffer=changed)


def _custom(buffer: Buffer, **figures: float) -> Buffer:
    return replace(buffer, name="custom", **figures)


def _insulation(
    stage: GlideStage, setting: Setting, share: float, at: Tuning
) -> tuple[str, GlideStage]:
    """D x/(1 + x) = share, with x = G R: solved for G, and put on the parts that leak."""
    part = share / stage.divider
    allowed_s = part / (1.0 - part) / stage.resistance_ohms(setting)
    connects = stage.ranges[setting.range_index].connects
    leaking = [c for c in stage.capacitors if c.name in connects or stage.bleed is not None]
    worst = max(leaking, key=lambda capacitor: capacitor.leakage_siemens)
    tight = _with_insulation(stage, [worst], INSULATION_OHMS[1])
    rest_s = leakage_siemens(tight, setting.range_index)
    if rest_s < 0.9 * allowed_s:
        chosen, least = [worst], round_up(1.0 / (allowed_s - rest_s))
    else:
        chosen, least = leaking, round_up(len(leaking) / allowed_s)
    least = min(least, INSULATION_OHMS[1])
    names = " and ".join(repr(capacitor.name) for capacitor in chosen)
    now = min(1.0 / c.leakage_siemens for c in chosen if c.leakage_siemens > 0.0)
    each = "" if len(chosen) == 1 else " each"
    sentence = (
        f"capacitor {names}: an insulation of at least {format_value(least, 'Ω')}{each} (now "
        f"{format_value(now, 'Ω')}){_such_as(chosen, least)}"
    )
    return sentence, _with_insulation(stage, chosen, least)


def _such_as(capacitors: Sequence[Capacitor], least_ohms: float) -> str:
    """Names a kind that is made in these sizes and insulates as well as this."""
    for name, kind in CAPACITOR_KINDS.items():
        fits = all(
            kind.smallest_f <= c.capacitance_f <= kind.largest_f
            and kind.leakage_siemens(c.capacitance_f) <= 1.0 / least_ohms
            for c in capacitors
        )
        if name != "ideal" and not kind.polarised and fits:
            return f", such as {name}"
    return ""


def _with_insulation(
    stage: GlideStage, chosen: Sequence[Capacitor], insulation_ohms: float
) -> GlideStage:
    return replace(
        stage,
        capacitors=tuple(
            replace(c, insulation_ohms=insulation_ohms) if c in chosen else c
            for c in stage.capacitors
        ),
    )


def _output_divider(
    stage: GlideStage, setting: Setting, share: float, at: Tuning
) -> tuple[str, GlideStage]:
    """1 - D = share, solved for the resistor before the load."""
    assert stage.load is not None
    assert stage.output_series is not None
    load = stage.load.resistance_ohms
    most = max(OHMS[0], round_down(load * share / (1.0 - share)))
    sentence = (
        f"output resistor: at most {format_value(most, 'Ω')} into this load of "
        f"{format_value(load, 'Ω')} (now {format_value(stage.output_series.resistance_ohms, 'Ω')})"
    )
    changed = replace(stage.output_series, resistance_ohms=most)
    return sentence, replace(stage, output_series=changed)


def _swing(stage: GlideStage, setting: Setting, share: float, at: Tuning) -> tuple[str, GlideStage]:
    """A rail moved out by what the note lacks, rounded out to a tenth of a volt."""
    lacking = cents_to_volts(at.worth_cents["swing"], stage.scale.volts_per_octave) / stage.divider
    # Through leakage the bus moves less than the input does.
    lacking /= stage.network(setting).gain
    if at.causes["swing"] < 0.0:
        rail = math.ceil(10.0 * (stage.supply.positive_v + lacking) - _SLACK) / 10.0
        sentence = f"positive rail: at least {rail:g} V (now {stage.supply.positive_v:g} V)"
        return sentence, replace(stage, supply=replace(stage.supply, positive_v=rail))
    rail = math.floor(10.0 * (stage.supply.negative_v - lacking) + _SLACK) / 10.0
    sentence = f"negative rail: {rail:g} V or below (now {stage.supply.negative_v:g} V)"
    return sentence, replace(stage, supply=replace(stage.supply, negative_v=rail))


_REMEDIES: dict[str, Remedy] = {
    "input_offset": _input_offset,
    "output_offset": _output_offset,
    "bias_current": _bias_current,
    "insulation": _insulation,
    "output_divider": _output_divider,
    "swing": _swing,
}
assert tuple(_REMEDIES) == CAUSES


def round_down(value: float) -> float:
    """To two significant digits, towards 0."""
    unit = 10.0 ** (math.floor(math.log10(value)) - 1)
    return float(f"{math.floor(value / unit + _SLACK) * unit:.2g}")


def round_up(value: float) -> float:
    """To two significant digits, away from 0."""
    unit = 10.0 ** (math.floor(math.log10(value)) - 1)
    return float(f"{math.ceil(value / unit - _SLACK) * unit:.2g}")
