"""Phrases: melodies that ship with the tool, each made to show one thing about a glide."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from mido import Message

from livelag.errors import UnknownNameError
from livelag.notes.midi_file import TimedMessage

DEFAULT_PHRASE = "procession"

# A row is (beats to the next note, MIDI note, part of those beats that the key is down).
# A part over 1 runs into the next note, legato; under 1 it ends before, detached.
Row = tuple[float, int, float]
LEGATO, TENUTO, DETACHED, SHORT = 1.1, 0.9, 0.6, 0.4
TAIL_BEATS = 1.0


@dataclass(frozen=True, slots=True)
class Phrase:
    """A melody for one voice.

    Attributes:
        name: what to ask for it by.
        about: what it is good for.
        messages: notes on the first channel, in order of time.
        duration_s: seconds, with a beat of silence after the last note.
    """

    name: str
    about: str
    messages: tuple[TimedMessage, ...]
    duration_s: float

    @property
    def note_count(self) -> int:
        """How many notes begin."""
        return sum(timed.message.type == "note_on" for timed in self.messages)


def phrase(name: str) -> Phrase:
    """A phrase by its name.

    Raises:
        UnknownNameError: if there is no such phrase.
    """
    if name not in PHRASES:
        raise UnknownNameError("phrase", name, PHRASES)
    return PHRASES[name]


def _compose(name: str, about: str, beats_per_minute: float, rows: Iterable[Row]) -> Phrase:
    beat_s = 60.0 / beats_per_minute
    messages = []
    beat = 0.0
    for beats, note, part in rows:
        stop = beat + beats * part
        on = Message("note_on", note=note, velocity=100)
        messages.append(TimedMessage(beat * beat_s, on))
        messages.append(TimedMessage(stop * beat_s, Message("note_off", note=note)))
        beat += beats
    messages.sort(key=lambda timed: timed.time_s)
    return Phrase(name, about, tuple(messages), (beat + TAIL_BEATS) * beat_s)


# D minor, a walk with a stumble in the third bar and a hop to the upper octave in the fifth.
_PROCESSION: tuple[Row, ...] = (
    (1, 62, DETACHED), (1, 57, DETACHED), (0.5, 62, LEGATO), (0.5, 64, LEGATO), (1, 65, TENUTO),
    (1, 64, DETACHED), (1, 60, DETACHED), (2, 57, TENUTO),
    (0.5, 65, LEGATO), (0.5, 67, LEGATO), (1, 69, TENUTO), (0.5, 65, SHORT), (1.5, 62, TENUTO),
    (1.5, 64, LEGATO), (0.5, 62, LEGATO), (2, 61, TENUTO),
    (1, 62, DETACHED), (1, 74, DETACHED), (0.5, 72, LEGATO), (0.5, 69, LEGATO), (1, 65, TENUTO),
    (1, 67, LEGATO), (1, 70, LEGATO), (2, 69, TENUTO),
    (0.5, 67, LEGATO), (0.5, 65, LEGATO), (0.5, 64, LEGATO), (0.5, 61, TENUTO),
    (1, 57, DETACHED), (1, 64, DETACHED),
    (3, 62, TENUTO),
)  # fmt: skip

_BASS: tuple[Row, ...] = (
    (2, 40, LEGATO), (1, 47, TENUTO), (1, 43, DETACHED),
    (2, 45, LEGATO), (2, 38, TENUTO),
    (1.5, 40, DETACHED), (0.5, 52, SHORT), (2, 36, LEGATO),
    (1, 42, LEGATO), (1, 47, LEGATO), (2, 40, TENUTO),
)  # fmt: skip

_OCTAVES = (36, 48, 60, 72, 84, 72, 60, 48, 36, 60, 36, 84)
_SCALE = (48, 50, 52, 53, 55, 57, 59, 60, 62, 64, 65, 67, 69, 71, 72)
_RUN = (60, 62, 63, 67, 65, 63, 62, 65, 63, 67, 68, 72, 70, 68, 67, 70)

PHRASES: dict[str, Phrase] = {
    made.name: made
    for made in (
        _compose(
            "procession",
            "a walking tune for a puppet theatre, legato and detached",
            108.0,
            _PROCESSION,
        ),
        _compose(
            "staircase",
            "equal steps of a quarter octave, short and rising: does the glide keep up?",
            480.0,
            [(1, note, TENUTO) for note in range(36, 85, 3)],
        ),
        _compose(
            "octaves",
            "octave leaps and wider, legato up and detached down: how long does a leap take?",
            90.0,
            [(1.5, note, LEGATO if number < 4 else TENUTO) for number, note in enumerate(_OCTAVES)],
        ),
        _compose(
            "scale",
            "stepwise up legato and down detached: does a step arrive in tune?",
            120.0,
            [(0.5, note, LEGATO) for note in _SCALE]
            + [(0.5, note, DETACHED) for note in _SCALE[-2::-1]],
        ),
        _compose("bass", "a slow bass line with long notes: does the pitch settle?", 66.0, _BASS),
        _compose(
            "run",
            "a fast run in even notes: when does the glide smear it?",
            144.0,
            [
                (0.25, note + shift, LEGATO if shift else TENUTO)
                for shift in (0, 12)
                for note in _RUN
            ]
            + [(2, 72, TENUTO)],
        ),
    )
}
