"""Standard MIDI Files: a song read with its messages in seconds, a take written to the frame."""

from __future__ import annotations

import heapq
import math
import os
from bisect import bisect_right
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

from mido import Message, MetaMessage, MidiFile, MidiTrack

from livelag.errors import FileError, InputError, MidiFileError
from livelag.files import WholeFiles
from livelag.notes.track_reader import Track, Tracks, read_tracks

LONGEST_SONG_S = 24 * 3600.0
_LARGEST_FILE_BYTES = 8 * 2**20  # some two million messages
_DEFAULT_TEMPO_US = 500_000  # Standard MIDI Files 1.0: 120 quarters a minute
_LARGEST_DIVISION = 0x7FFF  # 15 bits
_LARGEST_DELTA = 0x0FFF_FFFF  # four bytes of seven bits


@dataclass(frozen=True, slots=True)
class TimedMessage:
    """A message and when it comes.

    Attributes:
        time_s: seconds from the start.
        message: a mido message; its own ``time`` means nothing here.
    """

    time_s: float
    message: Message


@dataclass(frozen=True, slots=True)
class Song:
    """The channel messages of a file, in order of time.

    Attributes:
        title: name of its first track, or else of the file.
        messages: the chosen channel messages; meta events and sysex are left out.
        duration_s: seconds to the end of the last chosen track.
        note_count: how many notes begin.
        warnings: what is wrong with the file though it can be played, one line each.
    """

    title: str
    messages: tuple[TimedMessage, ...]
    duration_s: float
    note_count: int
    warnings: tuple[str, ...] = ()


def read_midi_file(
    path: str | os.PathLike[str],
    channels: set[int] | None = None,
    tracks: set[int] | None = None,
) -> Song:
    """Read a Standard MIDI File of format 0 or 1.

    Args:
        path: the file.
        channels: channels to keep, 1 to 16; None keeps every one.
        tracks: tracks to keep, 1 for the first; None keeps every one. The tempo is taken from
            all of them.

    Raises:
        FileError: if the file cannot be read.
        MidiFileError: if it is damaged, no such file, longer than a day, or has no note to play.
        InputError: if a channel does not exist.
    """
    for channel in sorted(channels or ()):
        if not 1 <= channel <= 16:
            raise InputError(f"channel is {channel}; it must be 1 to 16")
    where = os.fspath(path)
    content = read_tracks(_read_bytes(where), where)
    count = len(content.tracks)
    for number in sorted(tracks or ()):
        if not 1 <= number <= count:
            raise MidiFileError(f"{where}: track is {number}; the file has tracks 1 to {count}")
    chosen = [track for n, track in enumerate(content.tracks, 1) if tracks is None or n in tracks]
    clock = _Clock(content)
    duration_s = clock.seconds(max((track.end_tick for track in chosen), default=0))
    if duration_s > LONGEST_SONG_S:
        raise MidiFileError(
            f"{where}: lasts {duration_s / 3600.0:.4g} hours; at most"
            f" {LONGEST_SONG_S / 3600.0:g} can be played"
        )
    messages = tuple(
        TimedMessage(clock.seconds(tick), message)
        # Stable: at one tick an earlier track comes first, and a track keeps its own order.
        for tick, message in heapq.merge(*(track.events for track in chosen), key=lambda e: e[0])
        if channels is None or message.channel + 1 in channels
    )
    note_count = sum(_begins_note(timed.message) for timed in messages)
    if note_count == 0:
        raise MidiFileError(f"{where}: {_no_notes(content.tracks, channels, tracks)}")
    title = (content.tracks[0].name if content.tracks else "") or Path(where).name
    return Song(title, messages, duration_s, note_count, content.warnings)


def _read_bytes(where: str) -> bytes:
    try:
        with Path(where).open("rb") as file:
            data = file.read(_LARGEST_FILE_BYTES + 1)
    except FileNotFoundError as error:
        raise FileError(f"{where}: does not exist; name a Standard MIDI File") from error
    except IsADirectoryError as error:
        raise FileError(f"{where}: is a folder; name a Standard MIDI File in it") from error
    except (OSError, ValueError) as error:  # ValueError: a name that no system accepts
        reason = getattr(error, "strerror", None) or error
        raise FileError(f"{where!r}: cannot be read: {reason}") from error
    if len(data) > _LARGEST_FILE_BYTES:
        raise MidiFileError(
            f"{where}: is over {_LARGEST_FILE_BYTES // 2**20} MiB; one voice needs less"
        )
    return data


def _begins_note(message: Message) -> bool:
    return bool(message.type == "note_on" and message.velocity > 0)


def _no_notes(tracks: tuple[Track, ...], channels: set[int] | None, chosen: set[int] | None) -> str:
    """What to say about a file, or a choice from it, without a single note."""
    with_notes = sorted(
        {
            (number, message.channel + 1)
            for number, track in enumerate(tracks, 1)
            for _, message in track.events
            if _begins_note(message)
        }
    )
    if not with_notes:
        return "holds no notes; choose a file that does"
    asked = [
        f"{word} {', '.join(str(number) for number in sorted(numbers)) or 'none'}"
        for word, numbers in (("track", chosen), ("channel", channels))
        if numbers is not None
    ]
    places = "; ".join(f"track {number} channel {channel}" for number, channel in with_notes)
    return f"no notes on {' '.join(asked)}; there are notes on {places}"


class _Clock:
    """Ticks to seconds along the tempo map, in whole numbers up to the last division."""

    def __init__(self, content: Tracks) -> None:
        self._per_second = content.ticks_per_second
        self._units_per_second = content.ticks_per_quarter * 1_000_000
        tempos = sorted(
            (change for track in content.tracks for change in track.tempos),
            key=lambda change: change[0],
        )
        self._starts, self._tempos, self._passed = [0], [_DEFAULT_TEMPO_US], [0]
        for tick, tempo in tempos:
            passed = self._passed[-1] + (tick - self._starts[-1]) * self._tempos[-1]
            self._starts.append(tick)
            self._tempos.append(tempo)
            self._passed.append(passed)

    def seconds(self, tick: int) -> float:
        if self._per_second is not None:  # time code: the tempo has no say
            return tick * self._per_second.denominator / self._per_second.numerator
        at = bisect_right(self._starts, tick) - 1
        passed = self._passed[at] + (tick - self._starts[at]) * self._tempos[at]
        return passed / self._units_per_second


def write_midi_file(
    path: str | os.PathLike[str],
    messages: Iterable[TimedMessage],
    ticks_per_second: int,
    duration_s: float = 0.0,
) -> None:
    """Write channel messages as a Standard MIDI File of format 0.

    One tick is exactly one frame at ``ticks_per_second``, so a take comes back to the frame.
    The file appears whole or not at all.

    Args:
        path: the file; it is replaced if it exists.
        messages: in any order; each lands on the nearest tick.
        ticks_per_second: the audio rate in Hz.
        duration_s: where the track ends, if that is after the last message.

    Raises:
        FileError: if the file cannot be written.
        InputError: if no tempo makes this rate exact, a time is negative or not finite, or a
            message is not a channel message.
    """
    tempo_us, ticks_per_quarter = tempo_for(ticks_per_second)
    track = MidiTrack([MetaMessage("set_tempo", tempo=tempo_us)])
    now = 0
    ordered = sorted(messages, key=lambda timed: timed.time_s)
    for timed in ordered:
        if not hasattr(timed.message, "channel"):
            raise InputError(f"{path}: {timed.message} is not a channel message; leave it out")
        tick = _tick(timed.time_s, ticks_per_second)
        track.append(timed.message.copy(time=_pass_time(track, tick - now)))
        now = tick
    end = max(now, _tick(duration_s, ticks_per_second))
    track.append(MetaMessage("end_of_track", time=_pass_time(track, end - now)))
    with WholeFiles() as files:
        temporary = files.temporary(Path(path))
        MidiFile(type=0, ticks_per_beat=ticks_per_quarter, tracks=[track]).save(temporary)


def tempo_for(ticks_per_second: int) -> tuple[int, int]:
    """Tempo in microseconds a quarter and ticks a quarter that make a tick rate exact.

    Raises:
        InputError: if none does within the 15 bits that a division has.
    """
    rate = ticks_per_second
    if isinstance(rate, bool) or not isinstance(rate, int) or rate < 1:
        raise InputError(f"ticks_per_second is {rate!r}; it must be a whole number above 0")
    # ticks a quarter = rate x tempo / 10^6 is whole at every multiple of this tempo:
    unit_us = 1_000_000 // math.gcd(rate, 1_000_000)
    longest = min(_DEFAULT_TEMPO_US, _LARGEST_DIVISION * 1_000_000 // rate) // unit_us * unit_us
    halves = (_DEFAULT_TEMPO_US >> n for n in range(4))
    for tempo_us in (*halves, longest, unit_us):
        if tempo_us and tempo_us % unit_us == 0:
            division = rate * tempo_us // 1_000_000
            if 1 <= division <= _LARGEST_DIVISION:
                return tempo_us, division
    raise InputError(
        f"no tempo makes {rate} ticks a second exact in a MIDI file; use a rate such as 48000"
    )


def _tick(time_s: float, ticks_per_second: int) -> int:
    if not 0.0 <= time_s <= LONGEST_SONG_S:
        raise InputError(f"time is {time_s} s; it must be 0 to {LONGEST_SONG_S:g} s")
    return round(time_s * ticks_per_second)


def _pass_time(track: MidiTrack, ticks: int) -> int:
    """Fill a silence too long for one delta time with empty texts; returns the rest."""
    while ticks > _LARGEST_DELTA:
        track.append(MetaMessage("text", text="", time=_LARGEST_DELTA))
        ticks -= _LARGEST_DELTA
    return ticks
