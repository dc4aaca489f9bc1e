"""Lines of an exact width, and how values read on the panel.

Shape carries every meaning; colour only repeats it. Two colours are used besides the terminal's
own, cyan and yellow, which stay apart for every common form of colour blindness.
"""

from __future__ import annotations

import math
import unicodedata
from collections.abc import Iterable
from dataclasses import dataclass

from rich.cells import cell_len, set_cell_size
from rich.console import Console, ConsoleOptions, RenderResult
from rich.segment import Segment
from rich.style import Style

from livelag.circuit.stage import ARRIVAL_TOLERANCE_CENTS
from livelag.units import format_value

LABEL = Style(dim=True)
PLAIN = Style()
VALUE = Style(bold=True)
ACCENT = Style(color="cyan", bold=True)
ALERT = Style(color="yellow", bold=True, reverse=True)
RUNNING = Style(bold=True, reverse=True)

UNKNOWN = "–"
_LONGEST_TEXT = 400
#: Characters whose width terminals disagree on: flags, skin tones, variation selectors.
_UNSTEADY = ((0x1F1E6, 0x1F1FF), (0x1F3FB, 0x1F3FF), (0xFE00, 0xFE0F), (0xE0100, 0xE01EF))


def tidy(text: str) -> str:
    """A name without anything that could move the cursor or that terminals draw unlike widths."""
    text = text[:_LONGEST_TEXT]
    if text.isascii() and text.isprintable():
        return text
    return "".join(_tidy_character(c) for c in unicodedata.normalize("NFC", text))


def _tidy_character(character: str) -> str:
    category = unicodedata.category(character)
    if category == "Cf":
        return ""
    if category[0] == "Z":
        return " "
    code = ord(character)
    if category[0] == "C" or any(low <= code <= high for low, high in _UNSTEADY):
        return "·"
    return character


class Line:
    """Text with styles that knows how many cells it takes."""

    def __init__(self) -> None:
        self.segments: list[Segment] = []
        self.width = 0

    def add(self, text: str, style: Style = PLAIN) -> Line:
        """Append text as it stands."""
        if text:
            self.segments.append(Segment(text, style))
            self.width += cell_len(text)
        return self

    def name(self, text: str, most: int, style: Style = VALUE) -> Line:
        """Append a name from outside in at most so many cells."""
        return self.add(shorten(tidy(text), most), style)

    def join(self, other: Line) -> Line:
        """Append another line."""
        self.segments += other.segments
        self.width += other.width
        return self

    def to(self, column: int) -> Line:
        """Fill with blanks up to a column."""
        return self.add(" " * (column - self.width))

    def cells(self, width: int) -> list[Segment]:
        """Exactly ``width`` cells of it: cropped or filled."""
        if self.width == width:
            return self.segments
        return Segment.adjust_line_length(self.segments, width, PLAIN)


@dataclass(frozen=True, slots=True)
class Screen:
    """A rich renderable of lines that all have the same width.

    Attributes:
        lines: the segments of each line.
    """

    lines: tuple[list[Segment], ...]

    def __rich_console__(self, console: Console, options: ConsoleOptions) -> RenderResult:
        """Yield the lines with breaks between them."""
        for number, line in enumerate(self.lines):
            if number:
                yield Segment.line()
            yield from line


def shorten(text: str, most: int) -> str:
    """Text of at most ``most`` cells, with an ellipsis where it was cut."""
    if cell_len(text) <= most:
        return text
    return set_cell_size(text, most - 1).rstrip() + "…" if most > 0 else ""


def row(items: Iterable[Line], width: int, gap: int = 3) -> Line:
    """Items side by side; those at the end that do not fit are left out."""
    line = Line()
    for item in items:
        if line.width and line.width + gap + item.width > width:
            break
        line.add(" " * gap if line.width else "").join(item)
    return line


def field(label: str, value: str, style: Style = VALUE) -> Line:
    """A value behind its label."""
    return Line().add(f"{label} ", LABEL).add(value, style)


def alert(text: str) -> Line:
    """Something that must be seen, by shape as well."""
    return Line().add(f" ! {text} ", ALERT)


def fixed(number: float, decimals: int, signed: bool = False) -> str:
    """A number with so many decimals, or few digits where that would be endless."""
    if math.isnan(number):
        return UNKNOWN
    if math.isinf(number):
        return "∞" if number > 0 else "-∞"
    kind = f".{decimals}f" if abs(number) < 1e6 else ".3g"
    return f"{number + 0.0:{'+' if signed else ''}{kind}}"


def seconds(time_s: float) -> str:
    """A time in seconds or milliseconds, three digits."""
    if not math.isfinite(time_s):
        return fixed(time_s, 0)
    if abs(time_s) >= 0.9995:
        return f"{time_s:#.3g} s".replace(". s", " s")
    return f"{time_s * 1000:#.3g} ms".replace(". ms", " ms")


def ohms(resistance_ohms: float) -> str:
    """A resistance in engineering notation."""
    return format_value(resistance_ohms, "Ω") if math.isfinite(resistance_ohms) else UNKNOWN


def decibels(level_dbfs: float) -> str:
    """A level; silence by its name."""
    return "silent" if level_dbfs == -math.inf else f"{fixed(level_dbfs, 1)} dB"


def cents_left(cents: float) -> Line:
    """How far the pitch has still to go, with an arrow that points its way."""
    if math.isnan(cents):
        return field("cents to go", UNKNOWN)
    if abs(cents) <= ARRIVAL_TOLERANCE_CENTS:
        return Line().add("● in tune ", VALUE).add(f"{fixed(cents, 1, signed=True)} cents", LABEL)
    arrow = "▲" if cents > 0 else "▼"
    return Line().add(f"{arrow} {fixed(cents, 0, signed=True)} cents", ACCENT).add(" to go", LABEL)
