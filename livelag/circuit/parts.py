"""Parts a builder can hold: resistor, pot with its taper, capacitor, buffer.

| symbol | name here             | meaning                                       | unit |
|--------|-----------------------|-----------------------------------------------|------|
| theta  | ``rotation``          | turn of the pot, 0 (fastest) to 1 (slowest)   | 1    |
| R      | ``resistance_ohms``   | resistance                                    | ohm  |
| C      | ``capacitance_f``     | capacitance                                   | F    |
| R_k C_k| ``Absorption.time_s`` | time constant of one absorption branch        | s    |
"""

from __future__ import annotations

import math
from bisect import bisect_right
from dataclasses import dataclass, field
from itertools import pairwise

from livelag.circuit.kinds import (
    BUFFER_CLASSES,
    CAPACITOR_KINDS,
    Absorption,
    BufferClass,
    CapacitorKind,
)
from livelag.errors import InputError, UnknownNameError

# Smallest and largest that a part may be; arithmetic beyond would overflow or mean nothing.
OHMS = (1e-3, 1e12)
FARADS = (1e-15, 1.0)
INSULATION_OHMS = (1.0, 1e18)
ABSORPTION_FRACTIONS = (1e-9, 1.0)
ABSORPTION_TIMES_S = (1e-6, 1e6)


def require(condition: bool, message: str) -> None:
    """Refuse a value.

    Raises:
        InputError: with this message, unless the condition holds.
    """
    if not condition:
        raise InputError(message)


def require_positive(value: float, what: str) -> None:
    """Refuse a value that is not a positive finite number.

    Raises:
        InputError: naming what it is and the value.
    """
    require(
        math.isfinite(value) and value > 0, f"{what} is {value!r}; it must be a positive number"
    )


def require_between(value: float, low: float, high: float, what: str) -> None:
    """Refuse a part value that is not positive, or beyond anything that can be soldered.

    Raises:
        InputError: naming what it is and the value.
    """
    require_positive(value, what)
    require(low <= value <= high, f"{what} is {value!r}; it must be from {low!r} to {high!r}")


def require_name(name: str, what: str) -> None:
    """Refuse a name that is blank or would not fit on one line.

    Raises:
        InputError: naming what it is and the name.
    """
    require(
        bool(name.strip()) and name.isprintable(), f"{what} is {name!r}; it must be a line of text"
    )


def require_tolerance(value: float, what: str) -> None:
    """Refuse a tolerance outside 0 (exact) to 0.9; it is a fraction, not per cent.

    Raises:
        InputError: naming what it is and the value.
    """
    require(
        0.0 <= value <= 0.9,
        f"{what} is {value!r}; it must be a fraction from 0 to 0.9 (20 % is 0.2)",
    )


@dataclass(frozen=True, slots=True)
class Resistor:
    """A fixed resistor.

    Attributes:
        resistance_ohms: its value, within `OHMS`.
        tolerance: largest relative deviation, 0 to 0.9.

    Raises:
        InputError: if either is out of range.
    """

    resistance_ohms: float
    tolerance: float = 0.01

    def __post_init__(self) -> None:
        require_between(self.resistance_ohms, *OHMS, "resistance")
        require_tolerance(self.tolerance, "tolerance")


@dataclass(frozen=True, slots=True)
class Taper:
    """How the resistance fraction of a pot follows its rotation: straight lines between points.

    A real logarithmic track is two straight segments, and a measured track is a table, so one
    law serves all. Use `Taper.linear`, `Taper.logarithmic`, `Taper.reverse_logarithmic` or
    `Taper.measured`.

    Attributes:
        name: ``linear``, ``logarithmic``, ``reverse logarithmic`` or ``measured``.
        rotations: rising from 0 to 1.
        fractions: fraction of the resistance at each rotation, from 0 to 1, never falling.

    Raises:
        InputError: if the points are not such a law.
    """

    name: str
    rotations: tuple[float, ...]
    fractions: tuple[float, ...]

    def __post_init__(self) -> None:
        count = len(self.rotations)
        require(
            count >= 2 and count == len(self.fractions),
            f"taper has {count} rotations and {len(self.fractions)} fractions; "
            "it needs as many of each, two or more",
        )
        for what, values in (("rotation", self.rotations), ("fraction", self.fractions)):
            require(
                values[0] == 0.0 and values[-1] == 1.0,
                f"taper {what} runs from {values[0]!r} to {values[-1]!r}; it must run from 0 to 1",
            )
        require(
            all(a < b for a, b in pairwise(self.rotations)),
            f"taper rotation {list(self.rotations)!r} must rise at every step",
        )
        require(
            all(a <= b for a, b in pairwise(self.fractions)),
            f"taper fraction {list(self.fractions)!r} must never fall",
        )

    @classmethod
    def linear(cls) -> Taper:
        """Resistance in proportion to rotation."""
        return cls("linear", (0.0, 1.0), (0.0, 1.0))

    @classmethod
    def logarithmic(cls, middle: float = 0.15) -> Taper:
        """Two straight segments that meet at mid-travel, where the fraction is ``middle``.

        Real parts have 0.10 to 0.20 there (published track measurements).

        Raises:
            InputError: if ``middle`` is not between 0 and 0.5.
        """
        _require_middle(middle)
        return cls("logarithmic", (0.0, 0.5, 1.0), (0.0, middle, 1.0))

    @classmethod
    def reverse_logarithmic(cls, middle: float = 0.15) -> Taper:
        """The logarithmic law turned end for end: ``1 - middle`` at mid-travel.

        Raises:
            InputError: if ``middle`` is not between 0 and 0.5.
        """
        _require_middle(middle)
        return cls("reverse logarithmic", (0.0, 0.5, 1.0), (0.0, 1.0 - middle, 1.0))

    @classmethod
    def measured(cls, rotations: tuple[float, ...], fractions: tuple[float, ...]) -> Taper:
        """A table read off a real part.

        Raises:
            InputError: if the table is not a rising law from (0, 0) to (1, 1).
        """
        return cls("measured", rotations, fractions)

    def fraction(self, rotation: float) -> float:
        """Fraction of the resistance at a rotation from 0 to 1."""
        return _interpolate(rotation, self.rotations, self.fractions)

    def rotation(self, fraction: float) -> float:
        """Rotation at which a fraction of the resistance is first exceeded (0 to 1)."""
        return _interpolate(fraction, self.fractions, self.rotations)


def _require_middle(middle: float) -> None:
    require(
        0.0 < middle < 0.5,
        f"taper middle is {middle!r}; a logarithmic track has between 0 and 0.5 at mid-travel",
    )


def _interpolate(x: float, xs: tuple[float, ...], ys: tuple[float, ...]) -> float:
    index = min(max(bisect_right(xs, x), 1), len(xs) - 1)
    # Steps over flat stretches, where x would divide by zero.
    while index > 1 and xs[index] == xs[index - 1]:
        index -= 1
    x0, x1, y0, y1 = xs[index - 1], xs[index], ys[index - 1], ys[index]
    return y1 if x1 == x0 else y0 + (y1 - y0) * (x - x0) / (x1 - x0)


@dataclass(frozen=True, slots=True)
class Pot:
    """The time potentiometer, wired as a variable resistor.

    Attributes:
        resistance_ohms: whole track, within `OHMS`.
        taper: its law.
        tolerance: largest relative deviation of the track, 0 to 0.9.
        end_ohms: what is left at rotation 0, 0 or more and less than the track.

    Raises:
        InputError: if one is out of range.
    """

    resistance_ohms: float
    taper: Taper = field(default_factory=Taper.linear)
    tolerance: float = 0.2
    end_ohms: float = 0.0

    def __post_init__(self) -> None:
        require_between(self.resistance_ohms, *OHMS, "pot value")
        require_tolerance(self.tolerance, "pot tolerance")
        require(
            0.0 <= self.end_ohms < self.resistance_ohms,
            f"pot end resistance is {self.end_ohms!r}; it must be 0 or more and less than the pot",
        )

    def resistance_at(self, rotation: float) -> float:
        """Resistance in ohms at a rotation from 0 to 1."""
        span = self.resistance_ohms - self.end_ohms
        return self.end_ohms + span * self.taper.fraction(rotation)


@dataclass(frozen=True, slots=True)
class Capacitor:
    """A capacitor of some kind.

    Attributes:
        name: what the range switch calls it, one line.
        capacitance_f: farads, within `FARADS`.
        kind: a row of `CAPACITOR_KINDS`.
        tolerance: largest relative deviation, 0 to 0.9.
        insulation_ohms: measured, within `INSULATION_OHMS`; None takes the kind's typical one.
        absorption: measured absorption branches; None takes the kind's typical ones.

    Raises:
        InputError: if a number is out of range.
        UnknownNameError: if the kind is none of those known.
    """

    name: str
    capacitance_f: float
    kind: str = "ideal"
    tolerance: float = 0.1
    insulation_ohms: float | None = None
    absorption: tuple[Absorption, ...] | None = None

    def __post_init__(self) -> None:
        if self.kind not in CAPACITOR_KINDS:
            raise UnknownNameError("capacitor kind", self.kind, CAPACITOR_KINDS)
        require_name(self.name, "capacitor name")
        require_between(self.capacitance_f, *FARADS, f"capacitor {self.name!r} value")
        require_tolerance(self.tolerance, f"capacitor {self.name!r} tolerance")
        if self.insulation_ohms is not None:
            what = f"capacitor {self.name!r} insulation"
            require_between(self.insulation_ohms, *INSULATION_OHMS, what)
        for branch in self.absorption or ():
            what = f"capacitor {self.name!r} absorption"
            require_between(branch.fraction, *ABSORPTION_FRACTIONS, f"{what} fraction")
            require_between(branch.time_s, *ABSORPTION_TIMES_S, f"{what} time")

    @property
    def kind_data(self) -> CapacitorKind:
        """Typical figures of its kind."""
        return CAPACITOR_KINDS[self.kind]

    @property
    def leakage_siemens(self) -> float:
        """Conductance of the insulation, 0 for an ideal part."""
        if self.insulation_ohms is not None:
            return 1.0 / self.insulation_ohms
        return self.kind_data.leakage_siemens(self.capacitance_f)

    @property
    def branches(self) -> tuple[Absorption, ...]:
        """Absorption branches across the part, none for an ideal one."""
        return self.kind_data.absorption if self.absorption is None else self.absorption


@dataclass(frozen=True, slots=True)
class Buffer:
    """A unity-gain op-amp stage.

    Attributes:
        name: a class of `BUFFER_CLASSES`, or ``custom`` where figures are given.
        offset_v: input offset voltage, either sign.
        bias_a: input bias current flowing into the input, either sign.
        headroom_positive_v: how far short of the positive rail it stops, 0 or more.
        headroom_negative_v: how far short of the negative rail it stops, 0 or more.
        offset_limit_v: the data-sheet maximum of the offset's size.
        bias_limit_a: the data-sheet maximum of the bias current's size.

    Raises:
        InputError: if a headroom or limit is negative, or anything is not finite.
    """

    name: str
    offset_v: float
    bias_a: float
    headroom_positive_v: float
    headroom_negative_v: float
    offset_limit_v: float
    bias_limit_a: float

    def __post_init__(self) -> None:
        for what, value in (("offset", self.offset_v), ("bias", self.bias_a)):
            require(math.isfinite(value), f"buffer {what} is {value!r}; it must be a finite number")
        for what, value in (
            ("headroom to the positive rail", self.headroom_positive_v),
            ("headroom to the negative rail", self.headroom_negative_v),
            ("offset limit", self.offset_limit_v),
            ("bias limit", self.bias_limit_a),
        ):
            require(
                math.isfinite(value) and value >= 0,
                f"buffer {what} is {value!r}; it must be 0 or more",
            )

    @classmethod
    def of_class(cls, name: str) -> Buffer:
        """The typical buffer of a class.

        Raises:
            UnknownNameError: if there is no such class.
        """
        if name not in BUFFER_CLASSES:
            raise UnknownNameError("buffer class", name, BUFFER_CLASSES)
        row: BufferClass = BUFFER_CLASSES[name]
        return cls(
            name=name,
            offset_v=row.offset_v,
            bias_a=row.bias_a,
            headroom_positive_v=row.headroom_positive_v,
            headroom_negative_v=row.headroom_negative_v,
            offset_limit_v=row.offset_limit_v,
            bias_limit_a=row.bias_limit_a,
        )
