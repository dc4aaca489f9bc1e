"""What can go wrong at the bench with this very stage, in sentences short enough to be read.

All of it is common practice, no source; the numbers are the stage's own.
"""

from __future__ import annotations

from collections.abc import Iterator

from livelag.bench.sheet_parts import PartList
from livelag.circuit.stage import GlideStage, Setting
from livelag.units import format_value

PROBES_OHMS = (10e6, 1e6)


def cautions(stage: GlideStage, parts: PartList) -> tuple[str, ...]:
    """What to mind when soldering, powering and probing this stage.

    Args:
        stage: the stage.
        parts: its parts, for their references.
    """
    return (
        _supply(stage),
        *_polarity(stage, parts),
        *_bias(stage, parts),
        _probe_ground(),
        _probing(stage),
        _generator(stage),
        _people(),
    )


def _supply(stage: GlideStage) -> str:
    return (
        f"Solder with the supply off and unplugged. Check {_rails(stage)} at the empty op-amp "
        "socket or pads first, with the current limited."
    )


def _rails(stage: GlideStage) -> str:
    high, low = stage.supply.positive_v, stage.supply.negative_v
    return f"+{high:g} V and −{-low:g} V" if low < 0.0 else f"+{high:g} V and 0 V"


def _polarity(stage: GlideStage, parts: PartList) -> Iterator[str]:
    polarised = [line for line in parts.capacitors if line.polarised]
    if polarised:
        names = " and ".join(line.reference for line in polarised)
        verb, which = ("is", "it") if len(polarised) == 1 else ("are", "they")
        sentence = (
            f"{names} {verb} polarised: plus to the hold node, minus to 0 V; reversed {which} can "
            "burst. Never take the input below 0 V"
        )
        if stage.supply.negative_v < 0.0:
            yield f"{sentence}: these rails allow it, so fit film or bipolar parts instead."
        else:
            yield f"{sentence}."
    either = [
        line.reference
        for line, part in zip(parts.capacitors, stage.capacitors, strict=True)
        if "bipolar" in part.kind
    ]
    if either:
        names = " and ".join(either)
        yield f"{names} must be a bipolar type: a polarised one of the same size can burst here."
    if not polarised and not either:
        yield "No capacitor here is polarised; decoupling capacitors at the op-amps may be."


def _bias(stage: GlideStage, parts: PartList) -> Iterator[str]:
    found = [
        line.reference
        for line, part in zip(parts.capacitors, stage.capacitors, strict=True)
        if part.kind == "x7r"
    ]
    if found:
        yield (
            f"X7R loses capacitance under bias and heat, which these limits leave out: times with "
            f"{' or '.join(found)} may read short."
        )


def _probe_ground() -> str:
    return (
        "The clip of a probe is joined to the oscilloscope's protective earth: clip it to the 0 V "
        "of the stage and to nothing else."
    )


def _probing(stage: GlideStage) -> str:
    """The share of the volts that a probe of R_p takes behind R: R / (R + R_p)."""
    most = max(stage.resistance_ohms(Setting(index, 1.0)) for index in range(len(stage.ranges)))
    shares = " and ".join(
        f"one of {format_value(ohms, 'Ω')} {100.0 * most / (most + ohms):.2g} %"
        for ohms in PROBES_OHMS
    )
    return (
        "Probe input and output, never the hold node: with the pot at 1 a probe there takes away "
        f"up to this much of the volts: {shares}."
    )


def _generator(stage: GlideStage) -> str:
    return (
        f"Generator: set for a high-impedance load and never beyond {_rails(stage)}; on after the "
        "supply, off before it."
    )


def _people() -> str:
    return (
        "Fresh air and eye protection while soldering. Local codes come first; anything near the "
        "mains is for qualified people."
    )
