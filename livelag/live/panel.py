"""The panel: one snapshot of an audition as lines that fill a screen exactly."""

from __future__ import annotations

from livelag.live.controls import help_items, help_rows
from livelag.live.panel_desk import compare_row, desk_column, desk_rows
from livelag.live.panel_rows import (
    LABEL_CELLS,
    message_row,
    note_row,
    pot_row,
    ranges_of,
    strip_head,
    time_row,
    title_row,
)
from livelag.live.panel_strip import strip_lines
from livelag.live.panel_text import LABEL, VALUE, Line, Screen, alert, fixed, row, seconds, shorten
from livelag.live.snapshot import Snapshot

LEAST_WIDTH, LEAST_HEIGHT = 60, 20
_SIDE_BY_SIDE_FROM = 116
_COLUMN_CELLS = 44
_MARGIN = 1


def render_panel(snapshot: Snapshot, width: int, height: int, help_shown: bool = False) -> Screen:
    """Draw a snapshot on a screen of this size.

    Below 60 x 20 only the essentials are shown, under a line that asks for more room.

    Args:
        snapshot: what to show.
        width: columns, 1 or more.
        height: lines, 1 or more.
        help_shown: whether the help page takes the place of everything but the title.

    Returns:
        ``height`` lines of ``width`` cells each.
    """
    room = width - 2 * _MARGIN
    if help_shown:
        lines = _help_page(snapshot, room, height)
    elif width < LEAST_WIDTH or height < LEAST_HEIGHT:
        lines = _essentials(snapshot, width, height)
        return _screen(lines, width, height, 0)
    elif width >= _SIDE_BY_SIDE_FROM:
        lines = _side_by_side(snapshot, room, height)
    else:
        lines = _stacked(snapshot, room, height)
    return _screen(lines, width, height, _MARGIN)


def _screen(lines: list[Line], width: int, height: int, margin: int) -> Screen:
    """Exactly so many lines; the last one given stays the last one shown."""
    body, last = lines[:-1][: height - 1], lines[-1]
    body += [Line() for _ in range(height - 1 - len(body))]
    return Screen(tuple(Line().add(" " * margin).join(line).cells(width) for line in [*body, last]))


def _stacked(snapshot: Snapshot, room: int, height: int) -> list[Line]:
    top = _top(snapshot, room)
    bottom = [*desk_rows(snapshot, room), message_row(snapshot, room), _help_line(snapshot, room)]
    return [
        *top,
        strip_head(snapshot, room),
        *strip_lines(snapshot, room, height - len(top) - len(bottom) - 1),
        *bottom,
    ]


def _side_by_side(snapshot: Snapshot, room: int, height: int) -> list[Line]:
    top = _top(snapshot, room)
    bottom = [message_row(snapshot, room), _help_line(snapshot, room)]
    rows = height - len(top) - len(bottom)
    left_cells = room - _COLUMN_CELLS - 3
    left = [
        strip_head(snapshot, left_cells),
        *strip_lines(snapshot, left_cells, rows - 1),
    ]
    right = desk_column(snapshot, _COLUMN_CELLS)[:rows]
    right += [Line() for _ in range(rows - len(right))]
    middle = [
        Line().join(a).to(left_cells + 1).add("│ ", LABEL).join(b)
        for a, b in zip(left, right, strict=True)
    ]
    return [*top, *middle, *bottom]


def _top(snapshot: Snapshot, room: int) -> list[Line]:
    return [
        title_row(snapshot, room),
        Line().add("─" * room, LABEL),
        pot_row(snapshot, room),
        time_row(snapshot, room),
        note_row(snapshot, room),
    ]


def _help_line(snapshot: Snapshot, room: int) -> Line:
    line = Line()
    for shown, label in help_items(room, snapshot.by_ear):
        line.add("  " if line.width else "").add(shown, VALUE).add(f" {label}", LABEL)
    return line


def _help_page(snapshot: Snapshot, room: int, height: int) -> list[Line]:
    """Every control, one line each, and how to leave."""
    lines = [
        Line().add("Keys ", VALUE).add("for the hand that does not hold the iron", LABEL),
        Line().add("─" * max(0, room), LABEL),
    ]
    entries = list(help_rows(snapshot.by_ear))
    lines = lines if height >= len(entries) + 3 else lines[:1]
    for entry in entries:
        line = Line().add(entry.shown, VALUE).to(LABEL_CELLS)
        lines.append(line.add(shorten(entry.sentence, room - LABEL_CELLS)))
    return [*lines, _help_line(snapshot, room)]


def _essentials(snapshot: Snapshot, width: int, height: int) -> list[Line]:
    """What is left on a screen too small for the panel."""
    asked = f"make room: {LEAST_WIDTH}x{LEAST_HEIGHT}, not {width}x{height}"
    lines = [
        Line().add(shorten(asked, width), VALUE),
        row(
            [Line().add(seconds(snapshot.time_constant_s), VALUE), ranges_of(snapshot, width)],
            width,
        ),
    ]
    if snapshot.dropouts:
        lines.append(alert(f"{fixed(snapshot.dropouts, 0)} dropouts"))
    lines += [
        note_row(snapshot, width),
        pot_row(snapshot, width),
        compare_row(snapshot, width),
        message_row(snapshot, width),
    ]
    return [*lines, _help_line(snapshot, width)]
