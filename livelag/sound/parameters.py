"""The parameter table of a patch: one row per control, for messages, commands and panel alike."""

from __future__ import annotations

import math
from dataclasses import dataclass

from livelag.errors import InputError, UnknownNameError
from livelag.sound.oscillator import WAVEFORMS

Value = float | str


@dataclass(frozen=True, slots=True)
class Parameter:
    """One control of a patch.

    Attributes:
        name: what commands and the panel call it.
        unit: unit of its numbers, empty for names and plain fractions.
        default: where it starts.
        low: least number, for numbers.
        high: greatest number, for numbers.
        choices: the names that exist, for names.
        about: what it does.
    """

    name: str
    unit: str
    default: Value
    low: float = -math.inf
    high: float = math.inf
    choices: tuple[str, ...] = ()
    about: str = ""

    def check(self, value: object) -> Value:
        """Return a value if this control can take it.

        Raises:
            UnknownNameError: if it takes names and this is none of them.
            InputError: if it takes numbers and this is none in its range.
        """
        if self.choices:
            if value not in self.choices:
                raise UnknownNameError(self.name, value, self.choices)
            return str(value)
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            raise InputError(f"{self.name} is {value!r}; it must be a number")
        if not self.low <= value <= self.high:
            unit = f" {self.unit}" if self.unit else ""
            raise InputError(
                f"{self.name} is {value:g}{unit}; it must be {self.low:g} to {self.high:g}{unit}"
            )
        return float(value)


PARAMETERS: dict[str, Parameter] = {
    row.name: row
    for row in (
        Parameter("rotation", "", 0.5, 0.0, 1.0, about="turn of the time pot, 1 is slowest"),
        Parameter("range", "", 0.0, 0.0, 127.0, about="position of the range switch, from 0"),
        Parameter("bypass", "", 0.0, 0.0, 1.0, about="1 shorts the resistor and the pot"),
        Parameter("waveform", "", "saw", choices=tuple(WAVEFORMS), about="of the test oscillator"),
        Parameter("pulse_width", "", 0.5, 0.02, 0.98, about="share of the cycle that is high"),
        Parameter("level", "dBFS", -18.0, -60.0, -1.0, about="peak of the waveform"),
        Parameter("velocity", "", 0.0, 0.0, 1.0, about="how far velocity sets the level"),
    )
}


def parameter(name: str) -> Parameter:
    """A row of the table.

    Raises:
        UnknownNameError: if there is no such parameter.
    """
    if name not in PARAMETERS:
        raise UnknownNameError("parameter", name, PARAMETERS)
    return PARAMETERS[name]


@dataclass(frozen=True, slots=True)
class Change:
    """A control moved by hand: sent to a patch among the messages, at a frame of its own."""

    name: str
    value: Value
