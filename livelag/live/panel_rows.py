"""The rows about the stage and the note: a label in the first column, values behind it."""

from __future__ import annotations

from collections.abc import Sequence

from livelag.live.panel_bars import pot_bar
from livelag.live.panel_text import (
    ACCENT,
    LABEL,
    UNKNOWN,
    VALUE,
    Line,
    cents_left,
    field,
    fixed,
    ohms,
    row,
    seconds,
    tidy,
)
from livelag.live.snapshot import BY_EAR_LONGEST_S, BY_EAR_SHORTEST_S, Snapshot
from livelag.units import note_name

LABEL_CELLS = 7
#: From so many cells on, labels are written out.
ROOMY = 70


def labelled(label: str, items: Sequence[Line], width: int, gap: int = 3) -> Line:
    """A label in the first column and as many items behind it as fit."""
    return Line().add(label.ljust(LABEL_CELLS), LABEL).join(row(items, width - LABEL_CELLS, gap))


def title_row(snapshot: Snapshot, width: int) -> Line:
    """The stage, and every range with the one in use in brackets."""
    ranges = ranges_of(snapshot, width * 2 // 3)
    line = Line().name(snapshot.stage_title, width - ranges.width - 2)
    return line.to(width - ranges.width).join(ranges)


def ranges_of(snapshot: Snapshot, width: int) -> Line:
    """Every range by name; if there are too many, the one in use and its number."""
    names = [tidy(name) for name in snapshot.range_names]
    index = snapshot.range_index
    each = max(4, (width - 6) // max(1, len(names)) - 4)
    line = Line().add("range ", LABEL)
    for number, name in enumerate(names):
        if number == index:
            line.add("▐", ACCENT).name(name, each, ACCENT).add("▌", ACCENT)
        else:
            line.add(" ").name(name, each, LABEL).add(" ")
    if line.width <= width:
        return line
    current = names[index] if 0 <= index < len(names) else UNKNOWN
    line = Line().add("range ", LABEL).add("▐", ACCENT).name(current, 12, ACCENT)
    return line.add("▌", ACCENT).add(f" {index + 1} of {len(names)}", LABEL)


def pot_row(snapshot: Snapshot, width: int) -> Line:
    """The pot as a bar, between its ends, with its rotation and whether the glide is on."""
    low, high = "0", "1"
    if snapshot.by_ear:
        low, high = seconds(BY_EAR_SHORTEST_S), seconds(BY_EAR_LONGEST_S)
    start = Line().add("pot".ljust(LABEL_CELLS), LABEL).add(f"{low} ", LABEL)
    end = Line().add(f" {high}  ", LABEL).add(fixed(snapshot.rotation, 3), VALUE).add("   ")
    end.add("glide ", LABEL).add("● on " if snapshot.glide_on else "○ off", VALUE)
    room = width - start.width - end.width
    if room < 5:
        return start.join(end)
    return start.join(pot_bar(snapshot, room)).join(end)


def time_row(snapshot: Snapshot, width: int) -> Line:
    """What the pot's place comes to."""
    tau, octave = seconds(snapshot.time_constant_s), seconds(snapshot.octave_arrival_s)
    constant, after = (
        (" time constant", "octave in tune after") if width >= ROOMY else (" constant", "octave in")
    )
    parts = (
        Line().add("parts to follow", LABEL)
        if snapshot.by_ear
        else field("R", ohms(snapshot.resistance_ohms))
    )
    items = [Line().add(tau, ACCENT).add(constant, LABEL), field(after, octave), parts]
    return labelled("time", items, width, 3 if width >= ROOMY else 2)


def note_row(snapshot: Snapshot, width: int) -> Line:
    """The note, what sounds now, and how far that still is from it."""
    name = note_name(snapshot.note) if snapshot.note is not None else UNKNOWN
    note = Line().add(name.ljust(3), VALUE).add(" held" if snapshot.gate else " released", LABEL)
    pitch = field("now", f"{fixed(snapshot.pitch_hz, 2)} Hz")
    moved = fixed(snapshot.octave, 0, signed=True) if snapshot.octave else "0"
    octave = field("typed octave", moved)
    return labelled("note", [note, pitch, cents_left(snapshot.cents_to_go), octave], width)


def strip_head(snapshot: Snapshot, width: int) -> Line:
    """Names of the two traces, each behind a sample of its line, and their volts now."""
    glide = Line().add("⣀⠤⠒⠉ ", ACCENT).add("glide ", LABEL)
    key = Line().add("⠂⠐ ⠂ ").add("key ", LABEL)
    return labelled(
        "volts",
        [
            glide.add(f"{fixed(snapshot.glide_volts, 3)} V".rjust(8), VALUE),
            key.add(f"{fixed(snapshot.key_volts, 3)} V".rjust(8), VALUE),
        ],
        width,
    )


def message_row(snapshot: Snapshot, width: int) -> Line:
    """The last thing said to the player."""
    return Line().add("› ", LABEL).name(snapshot.message, width - 2)
