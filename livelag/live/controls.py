"""The controls that are typed: one table of keys, what they do, and what the help says of them.

Every control is a single key, no chords: the other hand holds the soldering iron.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import NamedTuple

from rich.cells import cell_len


@dataclass(frozen=True, slots=True)
class Row:
    """Keys that belong together and share a line of the help page.

    Attributes:
        actions: each key with the action it starts.
        shown: the keys as the help shows them.
        label: one or two words for the help line; empty to stay off it.
        sentence: what they do, for the help page.
        urgency: which rows the help line keeps when it is short of room, smallest first.
        by_ear: whether they only work when the ranges are judged by ear.
    """

    actions: dict[str, str]
    shown: str
    label: str
    sentence: str
    urgency: int = 0
    by_ear: bool = False


class Control(NamedTuple):
    """What one key does.

    Attributes:
        action: name of the action.
        label: short label, as on the help line.
        sentence: what it does.
    """

    action: str
    label: str
    sentence: str


_DIGITS = {digit: f"degree_{number}" for number, digit in enumerate("1234567890", start=1)}

ROWS: tuple[Row, ...] = (
    Row(
        {
            "left": "pot_down_small",
            "right": "pot_up_small",
            ",": "pot_down_small",
            ".": "pot_up_small",
        },
        "← →",
        "pot",
        "Turn the pot a little, by 1/127 (also , and .)",
        1,
    ),
    Row(
        {
            "down": "pot_down_large",
            "up": "pot_up_large",
            "<": "pot_down_large",
            ">": "pot_up_large",
        },
        "↓ ↑",
        "far",
        "Turn the pot far, by 1/10 (also < and >)",
        4,
    ),
    Row({"r": "next_range"}, "r", "range", "Flip the range switch to its next position", 2),
    Row({"g": "glide_toggle"}, "g", "glide", "Glide on or off", 3),
    Row(_DIGITS, "1..0", "play", "Play a major scale; a note holds until the next", 5),
    Row({"space": "rest"}, "space", "rest", "Let go of the typed note", 8),
    Row({"d": "octave_down", "u": "octave_up"}, "d u", "octave", "Typed notes an octave down, up"),
    Row(
        {"f": "mark_shortest", "h": "mark_handover", "s": "mark_longest"},
        "f h s",
        "mark",
        "Mark fastest, hand-over and slowest useful time",
        6,
        by_ear=True,
    ),
    Row(
        {"a": "store_a", "b": "store_b"},
        "a b",
        "store",
        "Store the range and rotation of now as A or as B",
        11,
    ),
    Row({"tab": "swap"}, "Tab", "swap", "Swap between A and B", 12),
    Row({"t": "take"}, "t", "take", "Start a take, and stop it", 7),
    Row({"w": "next_waveform"}, "w", "wave", "Next waveform", 13),
    Row(
        {"-": "level_down", "_": "level_down", "+": "level_up", "=": "level_up"},
        "- +",
        "level",
        "Level down or up by 1 dB",
        9,
    ),
    Row({"p": "panic"}, "p", "panic", "Panic: end every note now", 10),
    Row({"?": "help"}, "?", "help", "Show or leave this page", -2),
    Row({"q": "quit"}, "q", "quit", "Fade out and leave", -1),
)

CONTROLS: dict[str, Control] = {
    key: Control(action, row.label, row.sentence)
    for row in ROWS
    for key, action in row.actions.items()
}

_GAP = "  "


def action_of(key: str) -> str | None:
    """Name of the action a key starts, or None; a capital letter counts as the small one."""
    control = CONTROLS.get(key) or CONTROLS.get(key.lower())
    return control.action if control else None


def help_rows(by_ear: bool) -> Iterator[Row]:
    """Rows of the table that do something, in its order."""
    return (row for row in ROWS if by_ear or not row.by_ear)


def help_items(width: int, by_ear: bool = False) -> list[tuple[str, str]]:
    """Keys and labels for one line of help, as many as fit, the most urgent kept.

    Args:
        width: cells the line may take.
        by_ear: whether the keys that mark are at work.
    """
    wanted = [row for row in help_rows(by_ear) if row.label and row.urgency != 0]
    kept: set[str] = set()
    room = width
    for row in sorted(wanted, key=lambda row: row.urgency):
        need = cell_len(f"{row.shown} {row.label}") + (len(_GAP) if kept else 0)
        if need > room:
            continue
        room -= need
        kept.add(row.shown)
    return [(row.shown, row.label) for row in wanted if row.shown in kept]


def help_line(width: int, by_ear: bool = False) -> str:
    """`help_items` as plain text of at most ``width`` cells."""
    return _GAP.join(f"{shown} {label}" for shown, label in help_items(width, by_ear))
