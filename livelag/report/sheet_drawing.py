"""The stage drawn with standard symbols (IEC 60617), along one wire from input to output.

Positions are in the drawing library's units from the input terminal; the range switch is one
contact for each capacitor or resistor that it connects, linked by a dashed line.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from livelag.bench.sheet_parts import PartLine, PartList, class_words, contact_ranges
from livelag.report.sheet_page import INK, LEADING, MM_PER_POINT, PENCIL, Page, width_mm, wrapped

if TYPE_CHECKING:
    from livelag.circuit.parts import Buffer
    from livelag.circuit.stage import GlideStage

_UNITS_MM = (5.0, 6.0)  # one unit is printed no smaller and no larger
_SIZE = 6.2  # of letters, in points
_STROKE = 0.9
_BRANCH = 2.3  # between parallel series resistors
_ABOVE, _BELOW, _BELOW_CROWDED = 3.5, 6.9, 7.6  # what the drawing takes above and below the wire
_AFTER_HOLD = 9.0  # from the end of the capacitors to the right edge
_WIDEST_COLUMN = 5.4
_IN, _PULL_DOWN, _INPUT_BUFFER, _SERIES = 0.9, 2.3, 3.4, 5.9


@dataclass(frozen=True)
class _Places:
    """Where things stand along the wire, in units of so many millimetres."""

    unit_mm: float
    series: tuple[float, float]
    pot: tuple[float, float]
    columns: tuple[float, ...]
    column_width: float
    output_buffer: float
    width: float


def _places(parts: PartList, width_mm: float) -> _Places:
    """Shares the width out: first to larger symbols, then to the columns of the capacitors."""
    series = (_SERIES, _SERIES + (5.0 if len(parts.series) > 1 else 2.4))
    pot = (series[1] + 0.5, series[1] + 4.1)
    first, count = pot[1] + 0.4, len(parts.capacitors)
    smallest, largest = _UNITS_MM
    natural = first + count * _WIDEST_COLUMN + _AFTER_HOLD
    unit = min(max(width_mm / natural, smallest), largest)
    column = (width_mm / unit - first - _AFTER_HOLD) / count
    columns = tuple(first + column * (number + 0.5) for number in range(count))
    end = first + column * count
    return _Places(unit, series, pot, columns, column, end + 0.4, width_mm / unit)


def _depth(parts: PartList, at: _Places) -> float:
    """How far the drawing reaches below the wire, in units."""
    below = _BELOW_CROWDED if _crowded(parts, at) else _BELOW
    return max(below, (len(parts.series) - 1) * _BRANCH + 1.2)


def _crowded(parts: PartList, at: _Places) -> bool:
    """Whether what is beside a contact must be said elsewhere."""
    return at.column_width < (4.4 if any(parts.bleeds) else 3.2)


def draw_stage(page: Page, top: float, stage: GlideStage, parts: PartList) -> float:
    """Draw the stage across the page from ``top`` down; returns where it ends."""
    width = page.right - page.left
    at = _places(parts, width)
    height = (_ABOVE + _depth(parts, at)) * at.unit_mm
    if page.dry:
        return top + height
    axes = page.axes_at(page.left, top, width, height)
    drawing = _Drawing(stage, parts, at)
    drawing.draw()
    drawing.symbols.draw(show=False, canvas=axes)
    for words in drawing.labels:
        axes.text(**words, parse_math=False)
    axes.set_axis_off()
    axes.set_xlim(0.0, at.width)
    axes.set_ylim(-_depth(parts, at), _ABOVE)
    return top + height


class _Drawing:
    """Symbols and labels of one stage."""

    def __init__(self, stage: GlideStage, parts: PartList, at: _Places) -> None:
        import schemdraw
        from schemdraw import elements

        self._el: Any = elements
        self.symbols: Any = schemdraw.Drawing(show=False)
        self.symbols.config(lw=_STROKE, color="black", margin=0)
        self.labels: list[dict[str, Any]] = []
        self._stage, self._parts, self._at = stage, parts, at
        self._is_crowded = _crowded(parts, at)
        self._line = _SIZE * MM_PER_POINT * LEADING / at.unit_mm

    def draw(self) -> None:
        """Everything, from left to right."""
        at, parts = self._at, self._parts
        self._terminal(_IN, "IN", "probe 1")
        if parts.pull_down is not None:
            self._to_ground(_PULL_DOWN, parts.pull_down)
        self._wire((_IN + 0.12, 0.0), (_INPUT_BUFFER, 0.0))
        self._buffer(_INPUT_BUFFER, parts.input_buffer, self._stage.input_buffer)
        self._wire((_INPUT_BUFFER + 1.5, 0.0), (at.series[0], 0.0))
        self._series()
        self._wire((at.series[1], 0.0), (at.pot[0], 0.0))
        self._pot()
        self._wire((at.pot[1], 0.0), (at.output_buffer, 0.0))
        self._label(at.pot[1] + 0.1, 0.4, ["hold node"], ha="left", style="italic")
        self._hold()
        self._buffer(at.output_buffer, parts.output_buffer, self._stage.output_buffer)
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
            step = (number + 0.5) * self._line
            self.labels.append(
                {"x": x, "y": y - step if down else y + step, "s": words, "ha": ha, "va": "center",
                 "fontsize": _SIZE, "color": INK, **style}
            )  # fmt: skip

    def _terminal(self, x: float, name: str, probe: str) -> None:
        self._add(self._el.Dot(open=True, radius=0.12).at((x, 0.0)))
        self._label(x, 0.3, [name], fontweight="bold")
        self._label(x, -0.3, [probe], down=True, color=PENCIL)

    def _to_ground(self, x: float, part: PartLine, ls: str = "-") -> None:
        self._dot(x)
        self._two_ends(self._el.ResistorIEC, (x, 0.0), (x, -2.6), ls=ls)
        self._add(self._el.Ground().at((x, -2.6)))
        lines = [part.reference, part.value_text, part.tolerance_text]
        self._label(x, -3.7, lines, down=True)

    def _buffer(self, x: float, part: PartLine, buffer: Buffer) -> None:
        from schemdraw.segments import Segment, SegmentText

        triangle = self._el.Element()
        triangle.segments.append(Segment([(0, 0.8), (0, -0.8), (1.5, 0), (0, 0.8)]))
        triangle.segments.append(SegmentText((0.5, 0.0), "1", fontsize=7.5))
        self._add(triangle.at((x, 0.0)).theta(0))
        lines = [part.reference, *wrapped(class_words(buffer), 3.0 * self._at.unit_mm, _SIZE, 3)]
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
        if width_mm(words, _SIZE) <= width * self._at.unit_mm:
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
        taper = wrapped(self._stage.pot.taper.name, 3.6 * self._at.unit_mm, _SIZE, 2)
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
                if not self._is_crowded:
                    self._label(x - 0.42, -2.0, [self._closed_in(names, 1.9)], ha="right")
            if bleed is not None:
                self._bleed(x, bleed)
            self._two_ends(self._el.Capacitor, (x, -2.2), (x, -3.8))
            if part.polarised:  # plus at the hold node
                self._label(x - 0.55, -2.75, ["+"])
            self._add(self._el.Ground().at((x, -3.8)))
            self._label(x, -4.75, self._capacitor_words(part, names), down=True)
        if len(contacts) > 1:
            self._wire((contacts[0] + 0.35, -1.1), (contacts[-1] + 0.35, -1.1), ls="--")

    def _capacitor_words(self, part: PartLine, names: tuple[str, ...] | None) -> list[str]:
        width = (self._at.column_width - 0.2) * self._at.unit_mm
        kind = wrapped(part.kind.removesuffix(", polarised"), width, _SIZE, 2)
        if any("…" in line for line in kind):
            kind = []  # the part list has it
        words = [f"{part.reference} {part.value_text}", part.tolerance_text]
        if self._is_crowded and names is not None:
            words.append(self._closed_in(names, self._at.column_width - 0.2))
        return [*words, *kind]

    def _bleed(self, x: float, part: PartLine) -> None:
        aside = x + 1.0
        self._dot(x, -2.2)
        self._wire((x, 0.0), (aside, 0.0))
        self._dot(aside)
        # Filled, so that the dashed line passes behind it.
        self._add(self._el.ResistorIEC(fill="white", zorder=4).at((aside, 0.0)).to((aside, -2.2)))
        self._wire((aside, -2.2), (x, -2.2))
        if self._is_crowded:
            self._label(aside + 0.1, -2.3, [part.reference], ha="left", down=True)
        else:
            words = [part.reference, part.value_text]
            self._label(aside + 0.4, -1.2, words, ha="left", down=True)

    def _output(self, x: float) -> None:
        parts = self._parts
        end = x + 3.2
        if parts.output_series is None:
            self._wire((x, 0.0), (end, 0.0))
        else:
            self._two_ends(self._el.ResistorIEC, (x, 0.0), (end, 0.0))
            part = parts.output_series
            self._label((x + end) / 2, 0.5, [part.reference, part.value_text, part.tolerance_text])
        if parts.load is not None:
            self._to_ground(end, parts.load, ls="--")
        self._wire((end, 0.0), (end + 1.6, 0.0))
        self._terminal(end + 1.72, "OUT", "probe 2")
