"""The audition as plain lines, one for each change: for screen readers and logs."""

from __future__ import annotations

import math
import time
from collections.abc import Callable, Iterator
from typing import TextIO

from livelag.live.controls import help_rows
from livelag.live.panel_text import fixed, seconds, tidy
from livelag.live.snapshot import Snapshot
from livelag.units import note_name

#: A pot that turns gives a line no more often than this; where it comes to rest is always said.
LEAST_INTERVAL_S = 0.25


class PlainPrinter:
    """Prints what has changed since it was last said; no control codes, words instead of signs."""

    def __init__(self, stream: TextIO, clock: Callable[[], float] = time.monotonic) -> None:
        """Print to a stream.

        Args:
            stream: where the lines go; flushed after each.
            clock: seconds that only go forward.
        """
        self._stream = stream
        self._clock = clock
        self._said: dict[str, str] = {}
        self._said_at: dict[str, float] = {}
        self._latest: Snapshot | None = None

    def show(self, snapshot: Snapshot) -> None:
        """Say what has changed; what changes faster than it can be read waits for a later call."""
        self._latest = snapshot
        self._say(self._clock())

    def say_help(self, by_ear: bool) -> None:
        """Say every control, a line each."""
        for row in help_rows(by_ear):
            self._print(f"{row.shown}: {row.sentence}")

    def close(self) -> None:
        """Say what still waits."""
        self._say(math.inf)

    def _say(self, now: float) -> None:
        if self._latest is None:
            return
        for topic, text in _topics(self._latest):
            due = now - self._said_at.get(topic, -math.inf) >= LEAST_INTERVAL_S
            if due and text != self._said.get(topic, ""):
                self._said[topic], self._said_at[topic] = text, now
                if text:
                    self._print(text)

    def _print(self, text: str) -> None:
        encoding = self._stream.encoding or "utf-8"
        self._stream.write(text.encode(encoding, "replace").decode(encoding) + "\n")
        self._stream.flush()


def _topics(snapshot: Snapshot) -> Iterator[tuple[str, str]]:
    """Everything worth a line, in the order it is said; an empty text is not said."""
    names, index = snapshot.range_names, snapshot.range_index
    yield "stage", f"stage {tidy(snapshot.stage_title)}"
    if 0 <= index < len(names):
        yield "range", f"range {tidy(names[index])}, {index + 1} of {len(names)}"
    yield "pot", _pot(snapshot)
    yield "glide", "glide on" if snapshot.glide_on else "glide off"
    yield "note", _note(snapshot)
    yield "sound", f"{tidy(snapshot.waveform)} at {fixed(snapshot.level_dbfs, 0)} dB"
    yield "octave", f"typed octave {snapshot.octave:+d}" if snapshot.octave else "typed octave 0"
    ports = ", ".join(tidy(name) for name in snapshot.midi_ports)
    yield "midi", f"MIDI inputs {ports}" if ports else "no MIDI input"
    yield "take", _take(snapshot)
    for letter, text in (("A", snapshot.slot_a), ("B", snapshot.slot_b)):
        yield letter, f"stored {letter}: {tidy(text)}" if text else ""
    for word, time_s in (
        ("fastest useful", snapshot.shortest_s),
        ("hand-over", snapshot.handover_s),
        ("slowest useful", snapshot.longest_s),
    ):
        yield word, f"mark {word} {seconds(time_s)}" if time_s is not None else ""
    yield "drops", f"take lost {snapshot.take_drops} frames" if snapshot.take_drops else ""
    yield "dropouts", f"dropouts {snapshot.dropouts}" if snapshot.dropouts else ""
    yield "message", tidy(snapshot.message)


def _pot(snapshot: Snapshot) -> str:
    text = f"pot {fixed(snapshot.rotation, 3)}, time constant {seconds(snapshot.time_constant_s)}"
    if not snapshot.by_ear:
        text += f", {fixed(snapshot.resistance_ohms / 1000, 2)} kilohms"
    return f"{text}, octave in tune after {seconds(snapshot.octave_arrival_s)}"


def _note(snapshot: Snapshot) -> str:
    if snapshot.note is None:
        return ""
    return f"note {note_name(snapshot.note)}{'' if snapshot.gate else ' released'}"


def _take(snapshot: Snapshot) -> str:
    name = tidy(snapshot.take_name)
    return {
        "off": "no take running",
        "armed": f"take armed {name}".rstrip(),
        "on": f"take running {name}".rstrip(),
    }[snapshot.recording]
