"""What stands above the numbers of a capture: names and units of columns, sample interval."""

from __future__ import annotations

import re
from dataclasses import dataclass

from livelag.bench.capture_text import Layout, number_in

_PREFIX = {"": 1.0, "p": 1e-12, "n": 1e-9, "u": 1e-6, "µ": 1e-6, "μ": 1e-6, "m": 1e-3, "k": 1e3,
           "K": 1e3, "M": 1e6, "G": 1e9}  # fmt: skip
_SECONDS = r"(?P<prefix>[pnuµμm]?)(?:s|sec|secs|second|seconds)"
_VOLTS = r"(?P<prefix>[uµμmk]?)(?:V|volt|volts|Volt|Volts|VOLT)"
_INTERVAL = re.compile(
    r"sampl\w*[ _-]*(interval|period|time)|time[ _-]*(interval|step|increment|per[ _-]*sample)"
    r"|x[ _-]*inc\w*|^(increment|interval|dt|delta[ _-]*t|delta)$|horizontal[ _-]*interval",
    re.IGNORECASE,
)
_RATE = re.compile(r"sampl\w*[ _-]*(rate|freq\w*)", re.IGNORECASE)
_TIME_NAME = re.compile(r"(x[ _-]*axis|time|t|x|zeit|temps|tiempo|tempo|sec\w*)$", re.IGNORECASE)


@dataclass(frozen=True)
class Column:
    """A column of numbers.

    Attributes:
        cell: which cell of a row it is, from 0.
        name: what the file calls it, or ``column N`` counted from 1.
        scale: seconds or volts per unit of the file.
        is_time: whether its name or its unit says that it holds time.
    """

    cell: int
    name: str
    scale: float
    is_time: bool


def columns_of(layout: Layout) -> tuple[Column, ...]:
    """Names and units of the columns of numbers."""
    names, units = _name_and_unit_rows(layout)
    found: list[Column] = []
    for cell in layout.columns:
        name = names[cell] if cell < len(names) else ""
        unit = units[cell] if cell < len(units) else ""
        label, inside = _split_unit(name)
        is_time, scale = _scale(unit or inside)
        named_time = bool(_TIME_NAME.fullmatch(label)) and not (unit or inside) and not found
        found.append(
            Column(cell, label or name or f"column {cell + 1}", scale, is_time or named_time)
        )
    return tuple(found)


def sample_interval_s(layout: Layout) -> float | None:
    """The sample interval that the preamble states, in seconds; None if it states none."""
    for row in layout.preamble:
        cells = [cell for cell in row if cell]
        if len(cells) == 1:  # "key: value" or "key = value" in one cell, perhaps after a mark
            cells = [part.strip() for part in re.split(r"[:=]", cells[0].lstrip("#% "), maxsplit=1)]
        for key, values in ((cells[i], cells[i + 1 :]) for i in range(len(cells) - 1)):
            label, unit = _split_unit(key.strip(" :#="))
            for pattern, inverse in ((_INTERVAL, False), (_RATE, True)):
                if pattern.search(label):
                    value = _quantity(values, unit, layout.decimal_comma, inverse)
                    if value is not None and value > 0.0:
                        return 1.0 / value if inverse else value
    return None


def _name_and_unit_rows(layout: Layout) -> tuple[tuple[str, ...], tuple[str, ...]]:
    units: tuple[str, ...] = ()
    left = min(layout.columns)
    for row in reversed(layout.preamble):
        cells = [row[cell] if cell < len(row) else "" for cell in layout.columns]
        if len(row) <= left or not any(cells):
            continue
        numbers = [number_in(cell, layout.decimal_comma) for cell in cells]
        filled = [cell for cell in cells if cell]
        if any(number is not None for number in numbers) or len(filled) < min(2, len(cells)):
            continue
        if sum(_INTERVAL.search(cell) is not None for cell in filled[:1]):
            continue
        if not units and all(_is_unit(cell) for cell in filled):
            units = row
            continue
        return row, units
    return (), units


def _is_unit(text: str) -> bool:
    bare = text.strip("()[] ")
    return re.fullmatch(f"(?:{_SECONDS})|(?:{_VOLTS.replace('prefix', 'p2')})", bare) is not None


def _split_unit(name: str) -> tuple[str, str]:
    """``Time (ms)`` into its label and its unit; no unit if there is none at its end."""
    found = re.fullmatch(r"(.*?)\s*[(\[/]\s*([^()\[\]/]*?)\s*[)\]]?", name.strip())
    if found and _is_unit(found[2]):
        return found[1].strip(), found[2]
    return name.strip(), ""


def _scale(unit: str) -> tuple[bool, float]:
    bare = unit.strip("()[] ")
    for pattern, is_time in ((_SECONDS, True), (_VOLTS, False)):
        found = re.fullmatch(pattern, bare)
        if found:
            return is_time, _PREFIX[found["prefix"]]
    return False, 1.0


def _quantity(values: list[str], unit: str, decimal_comma: bool, inverse: bool) -> float | None:
    """The first number among cells, times the prefix written after it or in the key."""
    kind = r"(?:S/s|Sa/s|sps|Hz|samples/s)?" if inverse else r"(?:s|sec|seconds?)?"
    for place, cell in enumerate(values):
        text = cell.replace(",", ".") if decimal_comma else cell
        found = re.fullmatch(
            rf"([+-]?[\d.]+(?:[eE][+-]?\d+)?)\s*([pnuµμmkKMG]?)\s*{kind}", text.strip()
        )
        if not found:
            continue
        try:
            value = float(found[1])
        except ValueError:
            continue
        scale = _PREFIX[found[2]]
        following = values[place + 1] if place + 1 < len(values) else ""
        for written in (unit, following):
            if not found[2] and not inverse and _is_unit(written):
                scale = _scale(written)[1]
        return value * scale
    return None
