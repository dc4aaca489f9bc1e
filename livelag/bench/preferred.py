"""Preferred numbers for resistors and capacitors: the E series of IEC 60063."""

from __future__ import annotations

import math

from livelag.errors import InputError, UnknownNameError

# Mantissas within one decade, as integers: two digits for E3 to E24, three for E96.
# IEC 60063 prints E24 as a table, since eight of its values leave the geometric series; every
# second value of a series makes the next coarser one.
_E24 = (
    10, 11, 12, 13, 15, 16, 18, 20, 22, 24, 27, 30,
    33, 36, 39, 43, 47, 51, 56, 62, 68, 75, 82, 91,
)  # fmt: skip
# E96 follows the geometric series throughout: 100 x 10^(k/96), rounded (IEC 60063).
_E96 = tuple(round(100.0 * 10.0 ** (k / 96.0)) for k in range(96))

E_SERIES: dict[str, tuple[int, ...]] = {
    "E3": _E24[::8],
    "E6": _E24[::4],
    "E12": _E24[::2],
    "E24": _E24,
    "E96": _E96,
}


def preferred_values(series: str, lowest: float, highest: float) -> tuple[float, ...]:
    """Every value of a series from lowest to highest, both included, rising.

    Each is the float nearest to its decimal, so that 4.7 k is 4700.0 and 4.7 u is 4.7e-6.

    Args:
        series: ``E3``, ``E6``, ``E12``, ``E24`` or ``E96``.
        lowest: more than 0, in any unit.
        highest: at least the lowest.

    Raises:
        UnknownNameError: if there is no such series.
        InputError: if the limits are not positive and rising.
    """
    if series not in E_SERIES:
        raise UnknownNameError("series", series, E_SERIES)
    if not 0.0 < lowest <= highest < math.inf:
        raise InputError(f"limits are {lowest!r} to {highest!r}; they must be positive and rise")
    mantissas = E_SERIES[series]
    digits = len(str(mantissas[0])) - 1
    decades = range(math.floor(math.log10(lowest)) - 1, math.ceil(math.log10(highest)) + 1)
    values = (float(f"{m}e{decade - digits}") for decade in decades for m in mantissas)
    return tuple(value for value in values if lowest <= value <= highest)
