"""Whether a built stage is within what its sheet allows, line by line, and what to suspect."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from livelag.bench.fit import CaptureFit, Measured
from livelag.bench.limits import Limits, setting_limits
from livelag.circuit.stage import GlideStage, Setting

VOLTS_ACCURACY = 0.03  # of an oscilloscope's channel, common practice, no source

WITHIN, OUTSIDE, OPEN = "within", "outside", "within ±"


@dataclass(frozen=True, slots=True)
class Line:
    """One line of a verdict.

    Attributes:
        what: what was measured.
        key: its name with its unit, as in `SettingLimits`.
        unit: symbol of its unit, or none.
        measured: value and interval of the fit.
        allowance: half-width that the interval and the oscilloscope leave open together.
        limits: what a stage within its tolerances may measure.
        verdict: `WITHIN`, `OUTSIDE`, or `OPEN`: within only with the allowance.
        suspect: what to look at; empty unless outside.
    """

    what: str
    key: str
    unit: str
    measured: Measured
    allowance: float
    limits: Limits
    verdict: str
    suspect: str


def judge(value: float, allowance: float, limits: Limits) -> str:
    """Within the limits, within them only with the allowance, or outside."""
    if limits.holds(value):
        return WITHIN
    return OPEN if limits.holds(value, allowance) else OUTSIDE


def verdict(
    stage: GlideStage, setting: Setting, fit: CaptureFit, volts_accuracy: float = VOLTS_ACCURACY
) -> tuple[Line, ...]:
    """Hold a fit against the limits of the sheet.

    Args:
        stage: as designed.
        setting: where its controls stood at the capture.
        fit: of the capture.
        volts_accuracy: relative accuracy of the oscilloscope's channels, 0 or more.

    Raises:
        InputError: if the stage has too many parts.
    """
    limits = setting_limits(stage, setting)
    reach = float(max(np.abs(fit.trace.output_v).max(), np.abs(fit.trace.input_v).max()))
    rows = (
        ("time constant", "time_constant_s", "s", fit.time_constant_s, 0.0,
         limits.shown_time_constant_s),
        ("10-90 % rise", "rise_s", "s", fit.rise_s, 0.0, limits.rise_s),
        ("gain", "gain", "", fit.gain, volts_accuracy * abs(fit.gain.value), limits.gain),
        ("offset", "offset_v", "V", fit.offset_v, volts_accuracy * reach, limits.offset_v),
    )  # fmt: skip
    lines = []
    for what, key, unit, measured, scope, allowed in rows:
        allowance = math.hypot(measured.u95, scope)
        said = judge(measured.value, allowance, allowed)
        suspect = _suspect(key, stage, setting, measured, allowed) if said == OUTSIDE else ""
        lines.append(Line(what, key, unit, measured, allowance, allowed, said, suspect))
    return tuple(lines)


def _other_range(stage: GlideStage, setting: Setting, time_constant_s: float) -> str:
    """Name of another range that the time constant would be right for; empty if there is none."""
    for index, name in enumerate(stage.range_names):
        if index != setting.range_index:
            limits = setting_limits(stage, Setting(index, setting.rotation))
            if limits.shown_time_constant_s.holds(time_constant_s):
                return name
    return ""


def _suspect(
    key: str, stage: GlideStage, setting: Setting, measured: Measured, limits: Limits
) -> str:
    high = measured.value > limits.high
    if key == "rise_s":
        return ""  # the time constant's line says it
    if key == "time_constant_s":
        elsewhere = _other_range(stage, setting, measured.value)
        if elsewhere:
            return f"as of range {elsewhere!r} at this rotation; check how the range switch stood"
        position = stage.ranges[setting.range_index]
        parts = " + ".join(repr(name) for name in position.connects)
        series = (position.series or stage.series).resistance_ohms
        # Whichever resistance is most of what is in the path.
        resistor = (
            "pot" if stage.pot.resistance_at(setting.rotation) > series else "series resistor"
        )
        return (
            f"{measured.value / limits.nominal:.3g} times the plan: the {resistor} or capacitor "
            f"{parts} is too {'large' if high else 'small'}, or the pot stands elsewhere; capture "
            "another range at the same rotation: if that is off alike, it is not the capacitor"
        )
    if key == "offset_v":
        return "a buffer's offset, its bias current through the pot, or the probes' zero"
    if measured.value < 0.0:
        return "the output is upside down: a channel is set to invert, or a buffer inverts"
    for factor in (10.0, 0.1):
        if abs(measured.value / limits.nominal / factor - 1.0) < 0.1:
            return (
                f"{factor:g} times the plan: one probe or channel is set to x10 and the other not"
            )
    if high:
        return "a follower has no gain above 1: compare both probes on the same point"
    return "the load, the output resistor or a leaking capacitor; compare both probes on one point"
