"""The stage drawn with standard symbols (IEC 60617), along one wire from input to output.

Positions are in the drawing library's units from the input terminal; the range switch is one
contact for each capacitor or resistor that it connects, linked by a dashed line.
"""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

from livelag.bench.sheet_parts import PartLine, PartList, contact_ranges
from livelag.report.sheet_page import INK, LEADING, MM_PER_POINT, PENCIL, Page, width_mm, wrapped

if TYPE_CHECKING:
    from livelag.circuit.stage import GlideStage

UNIT_MM = 5.0
_SIZE = 6.2  # of letters, in points
_LINE = _SIZE * MM_PER_POINT * LEADING / UNIT_MM
_STROKE = 0.9
_BRANCH = 2.3  # between parallel series resistors
_ABOVE, _BELOW = 3.5, 7.2  # what the drawing takes above and below the wire
_AFTER_HOLD = 9.4  # from the end of the capacitors to the right edge
_WIDEST_COLUMN = 5.4


@dataclass(frozen=True)
class _Places:
    """Where things stand along the wire, in units."""

    pull_down: float
    input_buffer: float
    series: tuple[float, float]
    pot: tuple[float, float]
    columns: tuple[float, ...]
    column_width: float
    output_buffer: float


def drawing_height_mm(parts: PartList) -> float:
    """How much of the page the drawing takes."""
    branches = len(parts.series)
    below = max(_BELOW, (branches - 1) * _BRANCH + 1.0)
    return (_ABOVE + below) * UNIT_MM


def draw_stage(page: Page, top: float, stage: GlideStage, parts: PartList) -> float:
    """Draw the stage across the page from ``top`` down; returns where it ends."""
    height = drawing_height_mm(parts)
    width = page.right - page.left
    axes = page.axes_at(page.left, top, width, height)
    axes.set_axis_off()
    drawing = _Drawing(stage, parts, width / UNIT_MM)
    drawing.draw()
    with warnings.catch_warnings():
        # Text is placed here; the library would only warn of what it does not use.
        drawing.symbols.draw(show=False, canvas=axes)
    for words in drawing.labels:
        axes.text(**words, parse_math=False)
    axes.set_aspect("auto")
    axes.set_axis_off()
    axes.set_xlim(0.0, width / UNIT_MM)
    axes.set_ylim(_ABOVE - height / UNIT_MM, _ABOVE)
    return top + height


class _Drawing:
    """Symbols and labels of one stage."""

    def __init__(self, stage: GlideStage, parts: PartList, width: float) -> None:
        import schemdraw
        from schemdraw import elements

        self._el: Any = elements
        self.symbols: Any = schemdraw.Drawing(show=False)
        self.symbols.config(lw=_STROKE, color="black", margin=0)
        self.labels: list[dict[str, Any]] = []
        self._stage, self._parts, self._width = stage, parts, width

    @cached_property
    def _at(self) -> _Places:
        several = len(self._parts.series) > 1
        series = (5.6, 10.6 if several else 8.2)
        pot = (series[1] + 0.6, series[1] + 4.2)
        first, last = pot[1] + 0.5, self._width - _AFTER_HOLD
        count = len(self._parts.capacitors)
        column = min((last - first) / count, _WIDEST_COLUMN)
        columns = tuple(first + column * (number + 0.5) for number in range(count))
        return _Places(1.7, 2.9, series, pot, columns, column, first + column * count + 0.5)

    def draw(self) -> None:
        """Everything, from left to right."""
        at, parts = self._at, self._parts
        self._terminal(0.6, "IN", "probe 1", after=False)
        if parts.pull_down is not None:
            self._to_ground(at.pull_down, parts.pull_down)
        self._wire((0.72, 0.0), (at.input_buffer, 0.0))
        self._buffer(at.input_buffer, parts.input_buffer, self._stage.input_buffer.name)
        self._wire((at.input_buffer + 1.5, 0.0), (at.series[0], 0.0))
        self._series()
        self._wire((at.series[1], 0.0), (at.pot[0], 0.0))
        self._pot()
        self._wire((at.pot[1], 0.0), (at.output_buffer, 0.0))
        self._label(at.pot[1] + 0.1, 0.4, ["hold node"], ha="left", style="italic")
        self._hold()
        self._buffer(at.output_buffer, parts.output_buffer, self._stage.output_buffer.name)
        self._output(at.output_buffer + 1.5)

    # Pieces of symbols

    def _add(self, element: Any) -> Any:
        self.symbols.add(element)
        return element

    def _wire(self, start: tuple[float, float], end: tuple[float, float], ls: str = "-") -> None:
        if start != end:
            self._add(self._el.Line(ls=ls).at(start).to(end))

    def _dot(self, x: float, y: float = 0.0) -> None:
        self._add(self._el.Dot(radius=0.09).at((x, y)))

    def _two_ends(
        self, kind: Any, start: tuple[float, float], end: tuple[float, float], **style: Any
    ) -> Any:
        return self._add(kind(**style).at(start).to(end))

    def _label(
        self, x: float, y: float, lines: Sequence[str], ha: str = "center", **style: Any
    ) -> None:
        """Lines from ``y`` up (or down, with ``down=True``), each centred at ``x``."""
        down = style.pop("down", False)
        for number, words in enumerate(lines if down else reversed(lines)):
            step = (number + 0.5) * _LINE
            self.labels.append(
                {"x": x, "y": y - step if down else y + step, "s": words, "ha": ha, "va": "center",
                 "fontsize": _SIZE, "color": INK, **style}
            )  # fmt: skip

    def _terminal(self, x: float, name: str, probe: str, *, after: bool) -> None:
        self._add(self._el.Dot(open=True, radius=0.12).at((x, 0.0)))
        self._label(x, 0.3, [name], fontweight="bold")
        self._label(x, -0.3, [probe], down=True, color=PENCIL)

    def _to_ground(self, x: float, part: PartLine, ls: str = "-") -> None:
        self._dot(x)
        self._two_ends(self._el.ResistorIEC, (x, 0.0), (x, -2.6), ls=ls)
        self._add(self._el.Ground().at((x, -2.6)))
        lines = [part.reference, part.value_text, part.tolerance_text]
        self._label(x, -3.7, lines, down=True)

    def _buffer(self, x: float, part: PartLine, kind: str) -> None:
        from schemdraw.segments import Segment, SegmentText

        triangle = self._el.Element()
        triangle.segments.append(Segment([(0, 0.8), (0, -0.8), (1.5, 0), (0, 0.8)]))
        triangle.segments.append(SegmentText((0.5, 0.0), "1", fontsize=7.5))
        self._add(triangle.at((x, 0.0)).theta(0))
        words = {"custom": "op-amp", "ideal": "ideal buffer"}.get(kind, kind)
        words = words.replace("cmos", "CMOS").replace("jfet", "JFET")
        lines = [part.reference, *wrapped(words, 3.0 * UNIT_MM, _SIZE, 3)]
        self._label(x + 0.7, 1.0, lines)
        supply = self._stage.supply
        low = f"−{-supply.negative_v:g} V" if supply.negative_v else "0 V"
        self._label(x + 0.7, -1.0, [f"+{supply.positive_v:g} V", low], down=True, color=PENCIL)

    # The stage's own pieces

    def _series(self) -> None:
        (left, right), series = self._at.series, self._parts.series
        if len(series) == 1:
            self._two_ends(self._el.ResistorIEC, (left, 0.0), (right, 0.0))
            part = series[0][0]
            lines = [part.reference, part.value_text, part.tolerance_text]
            self._label((left + right) / 2, 0.5, lines)
            return
        for number, (part, names) in enumerate(series):
            y = -number * _BRANCH
            contact = left + 2.0
            self._two_ends(self._el.Switch, (left, y), (contact, y))
            self._two_ends(self._el.ResistorIEC, (contact, y), (right, y))
            words = f"{part.reference} {part.value_text}"
            self._label((contact + right) / 2, y + 0.42, [words, part.tolerance_text])
            self._label(left + 1.0, y - 0.25, [self._closed_in(names, 2.6)], down=True)
        lowest = -(len(series) - 1) * _BRANCH
        for x in (left, right):
            self._wire((x, 0.0), (x, lowest))
            for number in range(len(series) - 1):
                self._dot(x, -number * _BRANCH)

    def _closed_in(self, names: tuple[str, ...], width: float) -> str:
        """Which positions close a contact: by name where it fits, or by number."""
        if not names:
            return "never"
        words = f"in {', '.join(names)}"
        if width_mm(words, _SIZE) <= width * UNIT_MM:
            return words
        numbers = [str(self._stage.range_names.index(name) + 1) for name in names]
        return f"in {', '.join(numbers)}"

    def _pot(self) -> None:
        (left, right), part = self._at.pot, self._parts.pot
        middle = (left + right) / 2
        self._two_ends(self._el.ResistorIEC, (left, 0.0), (right, 0.0))
        self._add(
            self._el.Arrow(headwidth=0.22, headlength=0.28).at((middle, 1.0)).to((middle, 0.27))
        )
        self._wire((middle, 1.0), (right - 0.4, 1.0))
        self._wire((right - 0.4, 1.0), (right - 0.4, 0.0))
        self._dot(right - 0.4)
        taper = wrapped(self._stage.pot.taper.name, 3.6 * UNIT_MM, _SIZE, 2)
        value = f"{part.value_text} {part.tolerance_text}"
        self._label(middle, 1.15, [f"{part.reference} time", value, *taper])

    def _hold(self) -> None:
        contacts = []
        every = zip(
            self._at.columns, self._stage.capacitors, self._parts.capacitors, self._parts.bleeds,
            strict=True,
        )  # fmt: skip
        for x, capacitor, part, bleed in every:
            self._dot(x)
            names = contact_ranges(self._stage, capacitor)
            if names is None:
                self._wire((x, 0.0), (x, -2.2))
            else:
                self._two_ends(self._el.Switch, (x, 0.0), (x, -2.2))
                contacts.append(x)
                self._label(x - 0.3, -1.85, [self._closed_in(names, 1.9)], ha="right")
            if bleed is not None:
                self._bleed(x, bleed)
            # Plus at the hold node: the first end is the upper one.
            self._two_ends(self._el.Capacitor, (x, -2.2), (x, -3.8), polar=part.polarised)
            self._add(self._el.Ground().at((x, -3.8)))
            self._label(x, -4.75, self._capacitor_words(part), down=True)
        if len(contacts) > 1:
            self._wire((contacts[0] + 0.35, -1.1), (contacts[-1] + 0.35, -1.1), ls=":")

    def _capacitor_words(self, part: PartLine) -> list[str]:
        width = (self._at.column_width - 0.2) * UNIT_MM
        kind = wrapped(part.kind.removesuffix(", polarised"), width, _SIZE, 2)
        if any("…" in line for line in kind):
            kind = []  # the part list has it
        return [f"{part.reference} {part.value_text}", part.tolerance_text, *kind]

    def _bleed(self, x: float, part: PartLine) -> None:
        aside = x + 1.0
        self._dot(x, -2.2)
        self._wire((x, 0.0), (aside, 0.0))
        self._dot(aside)
        self._two_ends(self._el.ResistorIEC, (aside, 0.0), (aside, -2.2))
        self._wire((aside, -2.2), (x, -2.2))
        self._label(aside + 0.35, -0.75, [part.reference, part.value_text], ha="left", down=True)

    def _output(self, x: float) -> None:
        parts = self._parts
        end = x + 3.2
        if parts.output_series is None:
            self._wire((x, 0.0), (end, 0.0))
        else:
            self._two_ends(self._el.ResistorIEC, (x, 0.0), (end, 0.0))
            part = parts.output_series
            self._label(
                (x + end) / 2, 0.5, [part.reference, part.value_text, part.tolerance_text]
            )
        if parts.load is not None:
            self._to_ground(end, parts.load, ls="--")
        self._wire((end, 0.0), (end + 1.6, 0.0))
        self._terminal(end + 1.72, "OUT", "probe 2", after=True)
