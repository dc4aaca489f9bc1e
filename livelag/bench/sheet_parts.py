"""The parts of a stage as a builder ticks them off: reference, place, value, tolerance, kind.

References are R for resistors and pots, C for capacitors, U for op-amps (common practice, no
source), numbered along the signal.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from livelag.circuit.parts import Buffer, Capacitor, Pot, Resistor
from livelag.circuit.stage import GlideStage, Range
from livelag.units import format_value


@dataclass(frozen=True, slots=True)
class PartLine:
    """One part of a stage.

    Attributes:
        reference: such as ``R2``.
        place: where it sits, in words.
        value: its nominal value in ohms or farads; None for a buffer.
        unit: ``Ω``, ``F``, or empty for a buffer.
        tolerance: largest relative deviation; None for a buffer.
        kind: taper, dielectric, or class and maxima, in words.
        polarised: whether it must never be reversed.
    """

    reference: str
    place: str
    value: float | None
    unit: str
    tolerance: float | None
    kind: str
    polarised: bool = False

    @property
    def value_text(self) -> str:
        """The value as people write it, such as ``4.7 µF``."""
        if self.value is None:
            return ""
        return format_value(self.value, self.unit).replace("u", "µ")

    @property
    def tolerance_text(self) -> str:
        """The tolerance as people write it, such as ``± 10 %``."""
        if self.tolerance is None:
            return ""
        return "exact" if self.tolerance == 0.0 else f"± {100.0 * self.tolerance:.3g} %"


@dataclass(frozen=True, slots=True)
class PartList:
    """Every part of a stage in its place; None where there is none.

    Attributes:
        pull_down: from the input to 0 V.
        input_buffer: before the glide.
        series: one for each resistor before the pot, with the ranges that use it.
        pot: the time pot.
        capacitors: in the stage's order.
        bleeds: for each capacitor, the resistor across its contact.
        output_buffer: after the glide.
        output_series: after the output buffer.
        load: what the next input loads the output with.
    """

    pull_down: PartLine | None
    input_buffer: PartLine
    series: tuple[tuple[PartLine, tuple[str, ...]], ...]
    pot: PartLine
    capacitors: tuple[PartLine, ...]
    bleeds: tuple[PartLine | None, ...]
    output_buffer: PartLine
    output_series: PartLine | None
    load: PartLine | None

    def lines(self) -> tuple[PartLine, ...]:
        """All parts, resistors first, then capacitors and op-amps."""
        resistors = (self.pull_down, *(line for line, _ in self.series), self.pot, *self.bleeds,
                     self.output_series, self.load)  # fmt: skip
        every = (*resistors, *self.capacitors, self.input_buffer, self.output_buffer)
        return tuple(line for line in every if line is not None)


def part_list(stage: GlideStage) -> PartList:
    """Every part of a stage in its place, with its reference."""
    numbers = (f"R{number}" for number in range(1, 1000))

    def fixed(place: str, part: Resistor | None) -> PartLine | None:
        if part is None:
            return None
        return PartLine(next(numbers), place, part.resistance_ohms, "Ω", part.tolerance, "fixed")

    pull_down = fixed("input to 0 V", stage.pull_down)
    series = []
    for place, resistor, names in _series(stage):
        line = fixed(place, resistor)
        assert line is not None
        series.append((line, names))
    pot = _pot(next(numbers), stage.pot)
    bleeds = tuple(
        fixed(f"across the contact of {part.name!r}", stage.bleed)
        if contact_ranges(stage, part) is not None
        else None
        for part in stage.capacitors
    )
    return PartList(
        pull_down,
        _buffer("U1", "input buffer", stage.input_buffer),
        tuple(series),
        pot,
        tuple(_capacitor(f"C{n}", part) for n, part in enumerate(stage.capacitors, start=1)),
        bleeds,
        _buffer("U2", "output buffer", stage.output_buffer),
        fixed("after the output buffer", stage.output_series),
        fixed("next input, to 0 V", stage.load),
    )


def contact_ranges(stage: GlideStage, capacitor: Capacitor) -> tuple[str, ...] | None:
    """Names of the ranges whose contact connects a capacitor; None if it needs no contact."""
    names = tuple(row.name for row in stage.ranges if capacitor.name in row.connects)
    return None if len(names) == len(stage.ranges) else names


def _series(stage: GlideStage) -> Iterator[tuple[str, Resistor, tuple[str, ...]]]:
    def named(ranges: list[Range]) -> tuple[str, ...]:
        return tuple(row.name for row in ranges)

    sharing = [row for row in stage.ranges if row.series is None]
    if sharing:
        own = len(sharing) < len(stage.ranges)
        place = f"series in {', '.join(map(repr, named(sharing)))}" if own else "series"
        yield place, stage.series, named(sharing)
    for row in stage.ranges:
        if row.series is not None:
            yield f"series in {row.name!r}", row.series, (row.name,)


def _pot(reference: str, pot: Pot) -> PartLine:
    end = f", ends at {format_value(pot.end_ohms, 'Ω')}" if pot.end_ohms else ""
    kind = f"{pot.taper.name}{end}"
    return PartLine(reference, "time pot", pot.resistance_ohms, "Ω", pot.tolerance, kind)


def _capacitor(reference: str, part: Capacitor) -> PartLine:
    polarised = part.kind_data.polarised
    name = part.kind.upper() if part.kind in ("c0g", "x7r") else part.kind
    kind = f"{name}, polarised" if polarised else name
    return PartLine(
        reference, f"capacitor {part.name!r}", part.capacitance_f, "F", part.tolerance, kind,
        polarised,
    )  # fmt: skip


def class_words(buffer: Buffer) -> str:
    """The class of a buffer as people write it."""
    words = {"custom": "op-amp", "ideal": "ideal buffer"}.get(buffer.name, buffer.name)
    return words.replace("cmos", "CMOS").replace("jfet", "JFET")


def _buffer(reference: str, place: str, buffer: Buffer) -> PartLine:
    if buffer.name == "ideal":
        return PartLine(reference, place, None, "", None, "ideal")
    name = class_words(buffer)
    most = f"offset ≤ {format_value(buffer.offset_limit_v, 'V')}"
    bias = f"bias ≤ {format_value(buffer.bias_limit_a, 'A')}"
    return PartLine(reference, place, None, "", None, f"{name}: {most}, {bias}")
