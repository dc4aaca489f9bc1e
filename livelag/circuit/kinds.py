"""Typical figures of generic part classes, each with where it comes from.

"data sheets" means figures read in makers' published tables for the class; "from memory" and
"common practice" mean what they say. Typical values at 25 degrees C.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Absorption:
    """One branch of dielectric absorption: a resistor and a capacitor in series across the part.

    Attributes:
        fraction: branch capacitance over the part's capacitance, more than 0.
        time_s: time constant of the branch, R_k C_k, in seconds, more than 0.
    """

    fraction: float
    time_s: float


@dataclass(frozen=True, slots=True)
class CapacitorKind:
    """A dielectric.

    Attributes:
        insulation_s: insulation resistance times capacitance (ohm farad = s); None if ideal.
        insulation_limit_s: the worst a data sheet allows, same unit.
        insulation_cap_ohms: the insulation resistance is never more than this.
        absorption: branches across the part.
        tolerance: usual relative tolerance.
        polarised: whether it must never see a reversed voltage.
        smallest_f: smallest value usually made, in farads.
        largest_f: largest value usually made, in farads.
        source: where the figures come from.
    """

    insulation_s: float | None
    insulation_limit_s: float | None
    insulation_cap_ohms: float | None
    absorption: tuple[Absorption, ...]
    tolerance: float
    polarised: bool
    smallest_f: float
    largest_f: float
    source: str

    def leakage_siemens(self, capacitance_f: float, *, worst: bool = False) -> float:
        """Conductance of the insulation of a part of so many farads; 0 for an ideal part.

        With ``worst``, the most a data sheet allows rather than the typical figure.
        """
        product_s = self.insulation_limit_s if worst else self.insulation_s
        if product_s is None:
            return 0.0
        resistance = product_s / capacitance_f
        if self.insulation_cap_ohms is not None:
            resistance = min(resistance, self.insulation_cap_ohms)
        return 1.0 / resistance


# The size of each absorption is published; its time constants are not. A film part is given one
# branch of a second, which is where a slow glide would show it; electrolytics two, decades apart.
CAPACITOR_KINDS: dict[str, CapacitorKind] = {
    "ideal": CapacitorKind(
        None, None, None, (), 0.0, False, 0.0, float("inf"), "no leakage, no absorption"
    ),
    "c0g": CapacitorKind(
        1e4, 1e3, None, (Absorption(0.0045, 1.0),), 0.05, False, 1e-12, 100e-9,
        "insulation 10,000 Mohm uF and absorption 0.3-0.6 %: data sheets; limit a tenth of it, "
        "branch time, size range: common practice",
    ),
    "polypropylene": CapacitorKind(
        1e5, 3e4, None, (Absorption(0.00075, 1.0),), 0.05, False, 100e-12, 10e-6,
        "insulation 100,000 Mohm uF and absorption 0.05-0.10 %: data sheets; limit, branch time, "
        "size range: common practice",
    ),
    "polyester": CapacitorKind(
        1e4, 3e3, None, (Absorption(0.00225, 1.0),), 0.1, False, 1e-9, 10e-6,
        "insulation 10,000 Mohm uF and absorption 0.20-0.25 %: data sheets; limit, branch time, "
        "size range: common practice",
    ),
    "x7r": CapacitorKind(
        1e3, 500.0, 100e9, (Absorption(0.0225, 1.0),), 0.1, False, 100e-12, 22e-6,
        "insulation 1000 Mohm uF or 100 Gohm, the lesser, and absorption 2.0-2.5 % (0.6-1.0 % in "
        "another source): data sheets; limit, branch time, size range: common practice",
    ),
    "bipolar electrolytic": CapacitorKind(
        330.0, 33.0, None, (Absorption(0.06, 0.3), Absorption(0.04, 5.0)), 0.2, False,
        470e-9, 1e-3,
        "limit from I = 0.03 C V and absorption about 10 %: from memory; typical leakage a tenth "
        "of the limit, branch times, size range: common practice",
    ),
    "electrolytic": CapacitorKind(
        1000.0, 100.0, None, (Absorption(0.07, 0.3), Absorption(0.05, 5.0)), 0.2, True,
        100e-9, 1e-2,
        "limit from I = 0.01 C V: data sheets; absorption 10-15 %: from memory; typical leakage a "
        "tenth of the limit, branch times, size range: common practice",
    ),
    "tantalum": CapacitorKind(
        1000.0, 100.0, None, (Absorption(0.02, 0.3), Absorption(0.015, 5.0)), 0.1, True,
        100e-9, 470e-6,
        "limit from I = 0.01 C V, absorption a few per cent: from memory; the rest common practice",
    ),
}  # fmt: skip


@dataclass(frozen=True, slots=True)
class BufferClass:
    """Typical figures of an op-amp class used as a follower.

    The headroom is where the output follows no more, whether its input or its output stage is
    the first to give up.
    """

    offset_v: float
    offset_limit_v: float
    bias_a: float
    bias_limit_a: float
    headroom_positive_v: float
    headroom_negative_v: float
    source: str


BUFFER_CLASSES: dict[str, BufferClass] = {
    "ideal": BufferClass(0.0, 0.0, 0.0, 0.0, 0.0, 0.0, "no errors; stops at the rails"),
    "jfet-input": BufferClass(
        3e-3, 10e-3, 30e-12, 400e-12, 1.5, 4.0,
        "offset 3 mV, at most 6 to 15; bias 30 pA, at most 200 to 400; inputs reach to about 4 V "
        "above the negative rail, below which older types jump high: data sheets",
    ),
    "bipolar-input": BufferClass(
        1e-3, 5e-3, 80e-9, 500e-9, 1.5, 1.5,
        "offset 1 mV, at most 5; bias 80 nA, at most 500: data sheets; headroom: common practice",
    ),
    "rail-to-rail cmos": BufferClass(
        2e-3, 5e-3, 1e-12, 100e-12, 0.0, 0.0,
        "offset a few mV and bias 1 pA: from memory; swings to the rails",
    ),
}  # fmt: skip
