"""Every conversion, once: part values to numbers and back, volts to cents to hertz to notes.

| symbol | name here          | meaning                                  | unit |
|--------|--------------------|------------------------------------------|------|
| f      | ``pitch_hz``       | pitch                                    | Hz   |
| n      | ``note``           | MIDI note number, fractions allowed      | 1    |
| v      | ``volts``          | control voltage                          | V    |
"""

from __future__ import annotations

import math
import re
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from livelag.errors import InputError

CENTS_PER_OCTAVE = 1200.0
NOTES_PER_OCTAVE = 12.0
A4_HZ = 440.0  # ISO 16
A4_NOTE = 69  # MIDI 1.0

Number = TypeVar("Number", float, NDArray[np.float64])

# IEC 60062: the letter stands where the decimal point would. R and F mean a multiplier of one.
_RKM = re.compile(
    r"(?P<sign>-?)(?P<whole>\d*)(?P<letter>[RrFpnuµμmkKMG])(?P<fraction>\d*)(?P<unit>[ΩΩFHVsA]?)",
    re.ASCII,
)
_RKM_EXPONENT = {
    "R": 0, "r": 0, "F": 0,
    "p": -12, "n": -9, "u": -6, "µ": -6, "μ": -6, "m": -3,
    "k": 3, "K": 3, "M": 6, "G": 9,
}  # fmt: skip
_UNIT_WORDS = {
    "ohm": ("Ω", "Ω", "ohm", "ohms", "R"),
    "farad": ("F",),
    "volt": ("V",),
    "ampere": ("A",),
    "second": ("s",),
    "": (),
}
_SUCH_AS = {"second": "2ms or 2.4s", "volt": "12 V or 500m", "ampere": "80n or 65p"}
_PLAIN = re.compile(
    r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?\s*[pnuµμmkKMG]?\s*(Ω|Ω|ohms?|R|F|V|A|s)?",
    re.ASCII,
)


def parse_value(value: object, unit: str = "", where: str = "value") -> float:
    """Read a part value in RKM code (IEC 60062) or engineering notation.

    ``4k7``, ``4.7k``, ``4700``, ``2M2``, ``470n``, ``1u``, ``1µ``, ``0R47`` and ``12 V`` all read.
    A value that leaves anything unread is refused: a tolerance letter, a decimal comma, a
    second multiplier.

    Args:
        value: text, or a number already in SI units.
        unit: the unit allowed after the number: ``ohm``, ``farad``, ``volt``, ``ampere``,
            ``second`` or none.
        where: the file and field, for the message.

    Returns:
        The value in SI units, finite.

    Raises:
        InputError: if the text is not a finite value in this unit.
    """
    if isinstance(value, bool) or not isinstance(value, (str, int, float)):
        raise InputError(f"{where}: {value!r} is not a value; write one such as 4k7 or 470n")
    try:
        number = float(value) if not isinstance(value, str) else _parse_text(value, unit, where)
    except OverflowError:  # a whole number of more than 308 digits
        number = math.inf
    if not math.isfinite(number):
        raise InputError(f"{where}: {value!r} is not a finite number")
    return number


def _parse_text(text: str, unit: str, where: str) -> float:
    stripped = text.strip()
    allowed = _UNIT_WORDS[unit]
    rkm = _RKM.fullmatch(stripped)
    if rkm and (rkm["whole"] or rkm["fraction"]) and _rkm_fits(rkm, unit, allowed):
        digits = f"{rkm['sign']}{rkm['whole'] or '0'}.{rkm['fraction'] or '0'}"
        return float(f"{digits}e{_RKM_EXPONENT[rkm['letter']]}")
    plain = _PLAIN.fullmatch(stripped)
    if plain and (plain[3] is None or plain[3] in allowed):
        from quantiphy import Quantity

        quantity = Quantity(stripped.removesuffix(plain[3] or "").strip())
        if not quantity.units:
            return float(quantity)
    hint = "; write a point, not a comma" if "," in stripped else ""
    such_as = _SUCH_AS.get(unit, "4k7, 4.7k or 470n")
    raise InputError(
        f"{where}: {text!r} is not a value{f' in {unit}s' if unit else ''}; "
        f"write one such as {such_as}{hint}"
    )


def _rkm_fits(rkm: re.Match[str], unit: str, allowed: tuple[str, ...]) -> bool:
    if rkm["unit"] and rkm["unit"] not in allowed:
        return False
    meaning = {"R": "ohm", "r": "ohm", "F": "farad"}.get(rkm["letter"])
    return meaning is None or meaning == unit


def format_value(number: float, unit: str = "", digits: int = 3) -> str:
    """Write a number in engineering notation, such as ``4.7 kΩ`` or ``330 nF``.

    Args:
        number: the value in SI units; infinity reads ``none`` (an open circuit, no limit).
        unit: a unit symbol to end with, such as ``Ω``, ``F``, ``s``, ``V``.
        digits: significant digits.
    """
    from quantiphy import Quantity

    if math.isinf(number):
        return "none"
    rendered = Quantity(number, unit).render(prec=digits - 1, strip_zeros=True)
    return re.sub(r"(?<=[\d ])u", "µ", rendered)


def note_to_hz(note: Number) -> Number:
    """Equal-tempered pitch of a MIDI note: f = 440 x 2^((n - 69)/12) (ISO 16, A4 = 440 Hz)."""
    hertz: Number = A4_HZ * 2.0 ** ((note - A4_NOTE) / NOTES_PER_OCTAVE)
    return hertz


def volts_to_cents(volts: Number, volts_per_octave: float = 1.0) -> Number:
    """Cents that a control voltage is worth on a scale of so many volts per octave."""
    return volts * (CENTS_PER_OCTAVE / volts_per_octave)


def cents_to_volts(cents: Number, volts_per_octave: float = 1.0) -> Number:
    """Control voltage that an interval in cents is worth."""
    return cents * (volts_per_octave / CENTS_PER_OCTAVE)


def note_to_volts(note: Number, zero_volt_note: float, volts_per_octave: float = 1.0) -> Number:
    """Control voltage of a note on a stage where ``zero_volt_note`` sits at 0 V."""
    return (note - zero_volt_note) * (volts_per_octave / NOTES_PER_OCTAVE)


def volts_to_note(volts: Number, zero_volt_note: float, volts_per_octave: float = 1.0) -> Number:
    """Note number, with its fraction, of a control voltage."""
    return zero_volt_note + volts * (NOTES_PER_OCTAVE / volts_per_octave)


def volts_to_hz(volts: Number, zero_volt_note: float, volts_per_octave: float = 1.0) -> Number:
    """Pitch of a volt-per-octave oscillator: f = f0 2^(v / (volts per octave))."""
    hertz: Number = note_to_hz(zero_volt_note) * 2.0 ** (volts / volts_per_octave)
    return hertz


def dbfs_to_amplitude(level_dbfs: float) -> float:
    """Peak amplitude of a level in decibels below full scale (full scale = 1)."""
    return float(10.0 ** (level_dbfs / 20.0))


def amplitude_to_dbfs(amplitude: float) -> float:
    """Level in decibels relative to full scale; silence is minus infinity."""
    return 20.0 * math.log10(amplitude) if amplitude > 0 else -math.inf


_NOTE_NAMES = ("C", "C#", "D", "D#", "E", "F", "F#", "G", "G#", "A", "A#", "B")


def note_name(note: int) -> str:
    """Name of a MIDI note with middle C (60) as C4, such as ``A4`` for 69."""
    return f"{_NOTE_NAMES[note % 12]}{note // 12 - 1}"
