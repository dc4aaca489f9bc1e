"""Limits as people read them: nominal, then low to high in brackets, in one unit.

Limits are rounded outwards: what is printed never refuses what the exact limits hold.
"""

from __future__ import annotations

import math

from livelag.bench.limits import Limits
from livelag.units import format_value

_PREFIXES = {-12: "p", -9: "n", -6: "µ", -3: "m", 0: "", 3: "k", 6: "M", 9: "G"}
_VOLT_DECIMALS = 3
_EXACT = 1e-12  # relative; between limits as close as this there is only rounding
_SLACK = 1e-9  # of the last digit, so that a round value stays itself


def seconds_within(limits: Limits) -> str:
    """A time to three digits with its limits, such as ``155 (112–205) ms``."""
    exponent = min(max(3 * math.floor(math.log10(limits.nominal) / 3), -12), 9)
    scale = 10.0**exponent
    whole_digits = math.floor(math.log10(limits.nominal / scale)) + 1
    shown = Limits(limits.nominal / scale, limits.low / scale, limits.high / scale)
    return _within(shown, max(3 - whole_digits, 0), f"{_PREFIXES[exponent]}s")


def volts_within(limits: Limits) -> str:
    """Volts to the millivolt with their limits, such as ``3.531 (3.349–3.715) V``."""
    return _within(limits, _VOLT_DECIMALS, "V")


def hertz(value: float) -> str:
    """A frequency of two digits, such as ``22 mHz``."""
    return format_value(value, "Hz", digits=2).replace("u", "µ")


def seconds(value: float) -> str:
    """A time of three digits, such as ``1.47 s``."""
    return "0" if value == 0.0 else format_value(value, "s").replace("u", "µ")


def _within(limits: Limits, decimals: int, unit: str) -> str:
    step = 10.0**decimals
    low = math.floor(limits.low * step + _SLACK) / step
    high = math.ceil(limits.high * step - _SLACK) / step
    nominal = f"{limits.nominal:.{decimals}f}"
    if limits.high - limits.low <= _EXACT * abs(limits.nominal):
        return f"{nominal} {unit}"
    to = "–" if low >= 0.0 else " to "
    return f"{nominal} ({low:.{decimals}f}{to}{high:.{decimals}f}) {unit}"
