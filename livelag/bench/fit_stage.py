"""The stage as built: the plan with what captures found put in, to hear beside the plan."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from livelag.bench.fit import CaptureFit
from livelag.bench.fit_parts import PartsFit
from livelag.bench.fit_verdict import VOLTS_ACCURACY
from livelag.circuit.kinds import Absorption
from livelag.circuit.parts import Buffer, Capacitor, Resistor
from livelag.circuit.stage import GlideStage, Setting
from livelag.errors import InputError
from livelag.units import format_value

Vector = NDArray[np.float64]

_LOAD_OHMS = 100e3


def stage_as_built(
    stage: GlideStage,
    fits: list[tuple[Setting, CaptureFit]],
    parts: PartsFit | None,
    volts_accuracy: float = VOLTS_ACCURACY,
) -> GlideStage:
    """The planned stage with its parts changed to what was measured.

    A capture cannot tell resistance from capacitance, so the pot keeps its planned value and the
    capacitors of the ranges captured carry the difference. The series resistor and the pot's law
    change where several captures tell them. Gain and offset change only where they differ from the
    plan by more than the interval and the oscilloscope leave open.

    Args:
        stage: as designed.
        fits: settings and fits, one or more.
        parts: from `fit_parts` for several; None for one.
        volts_accuracy: relative accuracy of the oscilloscope's channels, 0 or more.

    Raises:
        InputError: if no capacitors could give what was measured.
    """
    said = []
    if parts is None:
        ((setting, fit),) = fits
        position = repr(stage.range_names[setting.range_index])
        tau = format_value(fit.time_constant_s.value, "s", 4)
        said.append(
            f"Time constant {tau} in range {position} at rotation {setting.rotation:g}; its "
            "capacitors carry the whole difference to the plan, as one capture cannot tell "
            "resistance from capacitance."
        )
        targets = {setting.range_index: fit.time_constant_s.value / stage.resistance_ohms(setting)}
        built = stage
    else:
        said.append(
            "The pot's track keeps its planned value and the capacitors carry the difference, as "
            "captures tell only their product."
        )
        pot = stage.pot.resistance_ohms
        targets = {i: whole.value / pot for i, whole in parts.whole_pot_s.items()}
        built = replace(stage, pot=replace(stage.pot, taper=parts.taper, tolerance=0.0))
        if parts.series_ratio is not None:
            ohms = max(parts.series_ratio.value * pot - stage.pot.end_ohms, 1e-3)
            built = replace(built, series=Resistor(ohms, 0.0))
    built = replace(built, capacitors=_capacitors(built, targets, fits))
    setting, fit = min(fits, key=lambda pair: pair[1].gain.u95)
    built = _with_gain(built, setting, fit, volts_accuracy, said)
    setting, fit = min(fits, key=lambda pair: pair[1].offset_v.u95)
    built = _with_offset(built, setting, fit, volts_accuracy, said)
    names = ", ".join(fit.name for _, fit in fits)
    about = f"As built, from {names}. {' '.join(said)}"
    return replace(built, title=f"{stage.title}, as built", about=about)


def _capacitors(
    stage: GlideStage, targets: dict[int, float], fits: list[tuple[Setting, CaptureFit]]
) -> tuple[Capacitor, ...]:
    """Capacitors whose sums are the capacitances found, changed as little as can be."""
    nominal = np.array([part.capacitance_f for part in stage.capacitors])
    connected = np.array(stage.wiring.connected, dtype=np.float64)
    rows = connected[list(targets)]
    wanted = np.array(list(targets.values()))
    # Least sum of C d^2 over relative changes d: parts that share one range change alike.
    root = np.sqrt(nominal)
    change = np.linalg.pinv(rows * root) @ (wanted - rows @ nominal) * root
    values = nominal + change
    if not (values > 0.0).all():
        name = stage.capacitors[int(np.argmin(values))].name
        raise InputError(
            f"the captures would make capacitor {name!r} {values.min():.3g} F; check that each "
            "capture is given with its own range and rotation"
        )
    soak = _absorption(fits)
    built = []
    for part, value, hits in zip(stage.capacitors, values.tolist(), rows.sum(axis=0), strict=True):
        if hits:
            branches = part.absorption if soak is None else (soak,)
            part = replace(part, capacitance_f=value, tolerance=0.0, absorption=branches)
        built.append(part)
    return tuple(built)


def _absorption(fits: list[tuple[Setting, CaptureFit]]) -> Absorption | None:
    """The branch that shows most clearly; None if none does."""
    shown = [
        (share.u95, Absorption(share.value, time.value))
        for share, time in ((fit.absorption_share, fit.absorption_time_s) for _, fit in fits)
        if share is not None and time is not None
    ]
    return min(shown, key=lambda pair: pair[0])[1] if shown else None


def _with_gain(
    stage: GlideStage, setting: Setting, fit: CaptureFit, accuracy: float, said: list[str]
) -> GlideStage:
    share = stage.network(setting).gain
    planned, found = stage.divider * share, fit.gain.value
    if abs(found - planned) <= fit.gain.u95 + accuracy * abs(found):
        said.append("Gain is as planned, as far as the oscilloscope can tell.")
        return stage
    divider = found / share
    if not 0.0 < divider < 1.0:
        said.append(f"Gain {found:.4g} cannot come from the stage and is left as planned.")
        return stage
    load = stage.load or Resistor(_LOAD_OHMS, 0.0)
    series = load.resistance_ohms * (1.0 - divider) / divider
    said.append(f"The output resistor stands for the gain of {found:.4g}.")
    return replace(
        stage, output_series=Resistor(series, 0.0), load=Resistor(load.resistance_ohms, 0.0)
    )


def _with_offset(
    stage: GlideStage, setting: Setting, fit: CaptureFit, accuracy: float, said: list[str]
) -> GlideStage:
    before, after = stage.input_buffer, stage.output_buffer
    pulled = before.offset_v - after.bias_a * stage.resistance_ohms(setting)
    gain = stage.divider * stage.network(setting).gain
    planned = gain * pulled + stage.divider * after.offset_v
    found = fit.offset_v.value
    reach = float(np.abs(fit.trace.output_v).max())
    if abs(found - planned) <= fit.offset_v.u95 + accuracy * reach:
        said.append("Offset is as planned, as far as the oscilloscope can tell.")
        return stage
    offset = after.offset_v + (found - planned) / stage.divider
    said.append(f"The second buffer's offset stands for the {found:.4g} V found.")
    limit = max(after.offset_limit_v, abs(offset))
    buffer: Buffer = replace(after, name="custom", offset_v=offset, offset_limit_v=limit)
    return replace(stage, output_buffer=buffer)
