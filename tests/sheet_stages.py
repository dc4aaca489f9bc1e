"""Stages that are hard to fit on a page."""

from dataclasses import replace

from livelag.circuit.parts import Buffer, Capacitor, Pot, Resistor, Taper
from livelag.circuit.presets import load_stage
from livelag.circuit.stage import Range, Supply

FILM = load_stage("two-range-film")

# Long names, a series resistor for each range, four capacitors, one of them polarised.
WORDY = replace(
    FILM,
    title="An exceedingly long title that was written in one go without a thought for paper, for "
    "labels or for anybody who has to read it at a bench with a hot iron in the other hand",
    about="It goes on and on. " * 30,
    supply=Supply(12.0, 0.0),
    input_buffer=Buffer.of_class("rail-to-rail cmos"),
    output_buffer=Buffer.of_class("rail-to-rail cmos"),
    pot=Pot(470e3, Taper.reverse_logarithmic(), 0.2, 12.0),
    capacitors=(
        Capacitor("the very small one by the left edge of the board", 10e-9, "polypropylene", 0.05),
        Capacitor("m", 470e-9, "x7r", 0.2),
        Capacitor("big", 15e-6, "bipolar electrolytic", 0.2),
        Capacitor("the tall one that is polarised", 220e-6, "electrolytic", 0.2),
    ),
    ranges=(
        Range("ornaments and grace notes of the first act",
              ("the very small one by the left edge of the board", "m"), Resistor(1e3)),
        Range("the slow slide of the old queen", ("m", "big"), Resistor(4.7e3, 0.05)),
        Range("$glacial_{x}$", ("the tall one that is polarised",), Resistor(2.2e3, 0.02)),
    ),
    bleed=Resistor(10e6, 0.05),
    output_series=Resistor(1e3),
    load=Resistor(100e3, 0.2),
)  # fmt: skip

# As many capacitors and ranges as a sheet holds, every one with all that hangs on it.
CROWDED = replace(
    WORDY,
    supply=Supply(12.0, -12.0),
    capacitors=tuple(
        Capacitor(f"capacitor number {n}", 1.5 * 10.0 ** (n - 8),
                  "bipolar electrolytic" if n > 3 else "polypropylene", 0.2)
        for n in range(5)
    ),
    ranges=tuple(
        Range(f"range number {n} of five", (f"capacitor number {n}",), Resistor(1e3 * (n + 1)))
        for n in range(5)
    ),
)  # fmt: skip

# Four ranges over three capacitors, one of which no range ever connects.
SPARE = replace(
    FILM,
    title="Four positions",
    capacitors=(*FILM.capacitors, Capacitor("spare", 1e-6, "c0g", 0.05)),
    ranges=(
        Range("a", ("small",)), Range("b", ("small", "large")),
        Range("c", ("large",), Resistor(10e3)), Range("d", ("small",), Resistor(22e3)),
    ),
    pull_down=None,
    load=None,
)  # fmt: skip
