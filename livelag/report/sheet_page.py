"""One printed page in millimetres from its top left corner, in black and greys only."""

from __future__ import annotations

import re
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from functools import cache
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

MM_PER_INCH = 25.4
MM_PER_POINT = MM_PER_INCH / 72.0
PAPERS_MM = {"a4": (210.0, 297.0), "letter": (215.9, 279.4)}  # ISO 216; ANSI/ASME Y14.1
MARGIN_MM = 12.0
INK, PENCIL, RULE, SHADE = "0.0", "0.35", "0.6", "0.9"
_NOTE_MM = 7.5  # between ruled lines
_MOST_NOTES = 8
_ROUNDING = 1.02  # glyphs that are fitted to pixels run a little wider
LEADING = 1.28  # line distance over letter size


class Page:
    """A figure the size of a sheet of paper.

    Attributes:
        figure: to save.
        width_mm: of the paper.
        height_mm: of the paper.
        dry: whether nothing is drawn, to learn where things would end.
    """

    def __init__(self, paper: str, *, dry: bool = False) -> None:
        from matplotlib.figure import Figure

        self.dry = dry
        self.width_mm, self.height_mm = PAPERS_MM[paper]
        self.figure: Figure = Figure(
            figsize=(self.width_mm / MM_PER_INCH, self.height_mm / MM_PER_INCH), facecolor="white"
        )
        self._rules: list[tuple[list[tuple[float, float]], float, str]] = []
        self._paper = self.axes_at(0.0, 0.0, self.width_mm, self.height_mm)
        self._paper.set_axis_off()
        self._paper.set_xlim(0.0, self.width_mm)
        self._paper.set_ylim(self.height_mm, 0.0)

    def finished(self) -> Figure:
        """The figure, with its rules drawn at one go: there are hundreds."""
        from matplotlib.collections import LineCollection

        lines, weights, colours = zip(*self._rules, strict=True)
        self._paper.add_collection(
            LineCollection(list(lines), linewidths=weights, colors=colours, capstyle="butt"),
            autolim=False,
        )
        return self.figure

    @property
    def left(self) -> float:
        """Left edge of what is printed."""
        return MARGIN_MM

    @property
    def right(self) -> float:
        """Right edge of what is printed."""
        return self.width_mm - MARGIN_MM

    @property
    def bottom(self) -> float:
        """Bottom edge of what is printed."""
        return self.height_mm - MARGIN_MM

    def axes_at(self, left: float, top: float, width: float, height: float) -> Axes:
        """Axes that fill a rectangle of the page."""
        return self.figure.add_axes(
            (
                left / self.width_mm,
                1.0 - (top + height) / self.height_mm,
                width / self.width_mm,
                height / self.height_mm,
            )
        )

    def text(self, x: float, y: float, words: str, size: float = 7.0, **style: Any) -> None:
        """One line of text whose middle is at ``y``, in points; styles as matplotlib has them."""
        style = {"va": "center", "ha": "left", "color": INK, **style}
        if not self.dry:
            at = x / self.width_mm, 1.0 - y / self.height_mm
            self.figure.text(*at, words, fontsize=size, parse_math=False, **style)

    def paragraph(
        self, x: float, top: float, width: float, words: str, size: float = 7.0,
        most_lines: int = 100, **style: Any,
    ) -> float:  # fmt: skip
        """Text broken into lines from ``top`` down; returns where it ends."""
        step = size * MM_PER_POINT * LEADING
        lines = wrapped(words, width, size, most_lines, bold=style.get("fontweight") == "bold")
        for number, line in enumerate(lines):
            self.text(x, top + (number + 0.5) * step, line, size, **style)
        return top + len(lines) * step

    def line(
        self, x0: float, y0: float, x1: float, y1: float, weight: float = 0.5, colour: str = RULE
    ) -> None:
        """A straight rule, its weight in points."""
        self._rules.append(([(x0, y0), (x1, y1)], weight, colour))

    def shade(self, left: float, top: float, width: float, height: float) -> None:
        """A light grey rectangle behind text."""
        if self.dry:
            return
        from matplotlib.patches import Rectangle

        box = Rectangle((left, top), width, height, facecolor=SHADE, edgecolor="none", zorder=0)
        self._paper.add_patch(box)

    def notes(self, top: float) -> None:
        """Ruled lines from ``top`` towards the foot, if there is room for two or more."""
        first = top + _NOTE_MM
        if first + _NOTE_MM > self.bottom:
            return
        self.text(self.left, first - 1.6, "Notes", 7.0, color=PENCIL)
        lines = min(int((self.bottom - top) / _NOTE_MM), _MOST_NOTES)
        for number in range(lines):
            left = self.left if number else self.left + 9.0
            y = first + number * _NOTE_MM
            self.line(left, y, self.right, y, 0.4)

    def heading(self, top: float, words: str) -> float:
        """A heading with a rule under it; returns where what follows may begin."""
        self.text(self.left, top + 2.2, words, 8.5, fontweight="bold")
        self.line(self.left, top + 4.6, self.right, top + 4.6, 0.9, INK)
        return top + 5.8


@contextmanager
def without_glyph_warnings() -> Iterator[None]:
    """Lets a title hold signs that no font at hand has; they show as boxes."""
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph .* missing from", UserWarning)
        yield


@cache
def width_mm(words: str, size: float, bold: bool = False) -> float:
    """How wide a line of text is printed."""
    from matplotlib.font_manager import FontProperties
    from matplotlib.textpath import text_to_path

    font = FontProperties(size=size, weight="bold" if bold else "normal")
    with without_glyph_warnings():
        found, _, _ = text_to_path.get_text_width_height_descent(words, font, ismath=False)
    return float(found) * MM_PER_POINT * _ROUNDING


def fitted(words: str, width: float, size: float, bold: bool = False) -> str:
    """The text itself, or as much of its beginning as fits with an ellipsis."""
    words = " ".join(re.split(r"[^\S\u00a0]+", words.strip()))
    if width_mm(words, size, bold) <= width:
        return words
    fits, fits_not = 0, len(words)
    while fits_not - fits > 1:
        middle = (fits + fits_not) // 2
        if width_mm(f"{words[:middle].rstrip()}…", size, bold) <= width:
            fits = middle
        else:
            fits_not = middle
    return f"{words[:fits].rstrip()}…"


def wrapped(
    words: str, width: float, size: float, most_lines: int = 100, bold: bool = False
) -> list[str]:
    """Text in lines no wider than a width; the last one ends in an ellipsis if some is left out."""
    lines: list[str] = []
    # A number stays with its unit: such spaces are made unbreakable.
    joined = re.sub(r"(?<=\d) (?=[A-Za-zµΩ%])", "\u00a0", " ".join(words.split()))
    left = joined.split(" ") if joined else []
    while left:
        if len(lines) == most_lines - 1:
            lines.append(fitted(" ".join(left), width, size, bold))
            break
        taken = 1
        while taken < len(left) and width_mm(" ".join(left[: taken + 1]), size, bold) <= width:
            taken += 1
        # A word wider than the line is cut, for there is nowhere to break it.
        lines.append(fitted(" ".join(left[:taken]), width, size, bold))
        left = left[taken:]
    return lines
