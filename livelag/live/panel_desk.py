"""The rows about sound, MIDI, takes, comparing and the machine, stacked or as a column."""

from __future__ import annotations

from livelag.live.panel_bars import level_meter, load_meter, mark_times
from livelag.live.panel_rows import LABEL_CELLS, ROOMY, labelled
from livelag.live.panel_text import (
    LABEL,
    RUNNING,
    UNKNOWN,
    VALUE,
    Line,
    alert,
    decibels,
    field,
    fixed,
    seconds,
    shorten,
    tidy,
)
from livelag.live.snapshot import Snapshot
from livelag.sound.level import CEILING_DBFS

_BUSY = 0.7


def desk_rows(snapshot: Snapshot, width: int) -> list[Line]:
    """Everything about sound, MIDI, takes and the machine, one row each."""
    rows = [
        level_row(snapshot, width),
        midi_row(snapshot, width),
        take_row(snapshot, width),
        compare_row(snapshot, width),
    ]
    if snapshot.by_ear:
        rows.append(marks_row(snapshot, width))
    if snapshot.cv_out or snapshot.cv_in:
        rows.append(cv_row(snapshot, width))
    return [*rows, load_row(snapshot, width)]


def level_row(snapshot: Snapshot, width: int) -> Line:
    """The output level as a meter, in numbers, and the waveform."""
    set_to = Line().add(f"{fixed(snapshot.level_dbfs, 0)} dB", VALUE).add(" set", LABEL)
    peak = field("peak", decibels(snapshot.peak_dbfs).rjust(8))
    ceiling = Line().add("┃", VALUE).add(f" {fixed(CEILING_DBFS, 0)} ceiling", LABEL)
    wave = Line().name(snapshot.waveform or UNKNOWN, 10)
    if width < ROOMY:
        meter = level_meter(snapshot.peak_dbfs, 15)
        return labelled("level", [meter, set_to, peak, wave], width, 2)
    meter = level_meter(snapshot.peak_dbfs, min(40, width - 53))
    return labelled("level", [meter, set_to, peak, ceiling, wave], width, 2)


def midi_row(snapshot: Snapshot, width: int) -> Line:
    """A lamp for messages, and the inputs that are open."""
    lamp = Line().add("◉ busy" if snapshot.midi_active else "○ idle", VALUE)
    names = ", ".join(tidy(name) for name in snapshot.midi_ports[:20]) or "no input open"
    ports = Line().add(shorten(names, width - LABEL_CELLS - lamp.width - 3))
    return labelled("MIDI", [lamp, ports], width)


def take_row(snapshot: Snapshot, width: int) -> Line:
    """Whether a take is running, and what it has come to."""
    if snapshot.recording == "off":
        return labelled("take", [Line().add("□ off", VALUE)], width)
    if snapshot.recording == "armed":
        state = Line().add("▣ armed", VALUE)
        items = [state, Line().name(snapshot.take_name, width - LABEL_CELLS - state.width - 3)]
    else:
        items = [
            Line().add(" ■ REC ", RUNNING),
            Line().add(f"{fixed(snapshot.take_s, 1)} s", VALUE),
            Line().name(snapshot.take_name, max(8, width - 50)),
        ]
    if snapshot.take_drops:
        items.insert(0, alert(f"{fixed(snapshot.take_drops, 0)} lost"))
    return labelled("take", items, width)


def compare_row(snapshot: Snapshot, width: int) -> Line:
    """The two stored settings."""
    each = max(4, (width - LABEL_CELLS - 9) // 2)
    items = [
        Line().add(f"{letter} ", LABEL).name(text or UNKNOWN, each)
        for letter, text in (("A", snapshot.slot_a), ("B", snapshot.slot_b))
    ]
    return labelled("stored", items, width)


def marks_row(snapshot: Snapshot, width: int) -> Line:
    """What the player has judged by ear."""
    words = ("fastest ", "hand-over ", "slowest ") if width >= ROOMY else ("", "", "")
    items = [
        Line().add(f"{letter} ", VALUE).add(word, LABEL).add(_time_or_open(time_s), VALUE)
        for (letter, time_s), word in zip(mark_times(snapshot), words, strict=True)
    ]
    return labelled("marks", items, width)


def _time_or_open(time_s: float | None) -> str:
    return UNKNOWN if time_s is None else seconds(time_s)


def cv_row(snapshot: Snapshot, width: int) -> Line:
    """Control voltages that leave and enter the machine."""
    given = [(w, t) for w, t in (("out", snapshot.cv_out), ("in", snapshot.cv_in)) if t]
    each = max(4, (width - LABEL_CELLS) // max(1, len(given)) - 7)
    return labelled("CV", [Line().add(f"{w} ", LABEL).name(t, each) for w, t in given], width)


def load_row(snapshot: Snapshot, width: int) -> Line:
    """How hard the machine works, what it missed, and how late the sound is."""
    return labelled("load", [*_load(snapshot), *_timing(snapshot)], width, 2)


def _load(snapshot: Snapshot) -> list[Line]:
    load = f"{fixed(snapshot.load * 100, 0)} %"
    busy = snapshot.load >= _BUSY
    missed = fixed(snapshot.dropouts, 0)
    word = "dropout" if snapshot.dropouts == 1 else "dropouts"
    return [
        load_meter(snapshot.load, 12),
        alert(load) if busy else Line().add(load.rjust(4), VALUE),
        alert(f"{missed} {word}")
        if snapshot.dropouts
        else Line().add(missed, VALUE).add(f" {word}", LABEL),
    ]


def _timing(snapshot: Snapshot) -> list[Line]:
    return [
        Line().add(seconds(snapshot.latency_s), VALUE).add(" latency", LABEL),
        Line().add(
            f"{fixed(snapshot.block_frames, 0)} frames at {fixed(snapshot.rate_hz / 1000, 1)} kHz",
            LABEL,
        ),
    ]


def desk_column(snapshot: Snapshot, width: int) -> list[Line]:
    """The same as `desk_rows` in a column beside the strip, with room for more lines."""
    ports = [tidy(name) for name in snapshot.midi_ports[:6]] or ["no input open"]
    lamp = "◉ busy" if snapshot.midi_active else "○ idle"
    indent = Line().to(LABEL_CELLS)
    lines = [
        labelled("level", [level_meter(snapshot.peak_dbfs, width - LABEL_CELLS)], width),
        labelled(
            "",
            [
                Line().add(f"{fixed(snapshot.level_dbfs, 0)} dB", VALUE).add(" set", LABEL),
                field("peak", decibels(snapshot.peak_dbfs)),
            ],
            width,
        ),
        labelled(
            "",
            [
                Line().add("┃", VALUE).add(f" {fixed(CEILING_DBFS, 0)} ceiling", LABEL),
                Line().name(snapshot.waveform or UNKNOWN, 10),
            ],
            width,
        ),
        Line(),
        labelled("MIDI", [Line().add(lamp, VALUE)], width),
        *(Line().join(indent).add(shorten(name, width - LABEL_CELLS)) for name in ports),
        Line(),
        take_row(snapshot, width),
        Line(),
        *(
            labelled(
                "stored" if letter == "A" else "",
                [Line().add(f"{letter} ", LABEL).name(text or UNKNOWN, width - LABEL_CELLS - 2)],
                width,
            )
            for letter, text in (("A", snapshot.slot_a), ("B", snapshot.slot_b))
        ),
        Line(),
    ]
    if snapshot.by_ear:
        lines += [*_marks_column(snapshot, width), Line()]
    for word, text in (("CV out", snapshot.cv_out), ("CV in", snapshot.cv_in)):
        if text:
            lines.append(labelled(word, [Line().name(text, width - LABEL_CELLS)], width))
    return [
        *lines,
        labelled("load", _load(snapshot), width, 2),
        labelled("", _timing(snapshot), width, 2),
    ]


def _marks_column(snapshot: Snapshot, width: int) -> list[Line]:
    words = ("fastest useful", "hand-over", "slowest useful")
    return [
        labelled(
            "marks" if letter == "f" else "",
            [Line().add(f"{letter} ", VALUE).add(word.ljust(16), LABEL).add(_time_or_open(time_s))],
            width,
        )
        for (letter, time_s), word in zip(mark_times(snapshot), words, strict=True)
    ]
