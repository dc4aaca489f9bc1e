"""The bytes of a Standard MIDI File, taken apart into tracks of messages at their ticks.

mido makes the messages and writes files, but its file reader is not used: it loses the time
before a meta event of a type it does not know, reads a division in frames a second as negative
ticks, and refuses a playable file for an odd key signature or an unknown kind of chunk.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction

from mido import Message

from livelag.errors import MidiFileError

# Data bytes after the status byte, by its upper half (MIDI 1.0).
_DATA_BYTES = {0x80: 2, 0x90: 2, 0xA0: 2, 0xB0: 2, 0xC0: 1, 0xD0: 1, 0xE0: 2}
# Frames a second of a time-code division; 29 stands for 30 drop-frame (Standard MIDI Files 1.0).
_FRAMES_PER_SECOND = {
    24: Fraction(24),
    25: Fraction(25),
    29: Fraction(30_000, 1001),
    30: Fraction(30),
}
_META, _SYSEX, _ESCAPE = 0xFF, 0xF0, 0xF7
_TRACK_NAME, _END_OF_TRACK, _SET_TEMPO = 0x03, 0x2F, 0x51


@dataclass(slots=True)
class Track:
    """One track, filled while it is read.

    Attributes:
        events: (tick from the start, channel message), in the order of the file.
        tempos: (tick from the start, microseconds a quarter).
        name: the track's name, empty if it has none.
        end_tick: tick of its end, or of the last event if the end is missing.
        ended: whether it ends with an end-of-track event, as it should.
    """

    events: list[tuple[int, Message]] = field(default_factory=list)
    tempos: list[tuple[int, int]] = field(default_factory=list)
    name: str = ""
    end_tick: int = 0
    ended: bool = False


@dataclass(frozen=True, slots=True)
class Tracks:
    """A whole file in ticks.

    Attributes:
        ticks_per_quarter: division in ticks a quarter; 0 if it is in ticks a second.
        ticks_per_second: division in ticks a second; None if it is in ticks a quarter.
        tracks: in the order of the file.
        warnings: what is wrong with the file though it can be played.
    """

    ticks_per_quarter: int
    ticks_per_second: Fraction | None
    tracks: tuple[Track, ...]
    warnings: tuple[str, ...]


def read_tracks(data: bytes, where: str) -> Tracks:
    """Take a Standard MIDI File of format 0 or 1 apart.

    Args:
        data: the whole file.
        where: what to call the file in messages.

    Raises:
        MidiFileError: if it is no such file, or damaged; the message names the byte.
    """
    if not data:
        raise MidiFileError(f"{where}: is empty; a Standard MIDI File starts with MThd")
    if data[:4] != b"MThd":
        raise MidiFileError(
            f"{where}: starts with {data[:4]!r}, not with b'MThd' as a Standard MIDI File does"
        )
    length = int.from_bytes(data[4:8], "big")
    if len(data) < 14 or len(data) < 8 + length:
        raise MidiFileError(f"{where}: is cut off inside its header, at byte {len(data)}")
    if length < 6:
        raise MidiFileError(f"{where}: its header holds {length} bytes; at least 6 are needed")
    kind, promised, division = (int.from_bytes(data[at : at + 2], "big") for at in (8, 10, 12))
    if kind == 2:
        raise MidiFileError(
            f"{where}: is format 2 (separate patterns); save it as format 0 or 1 to play it"
        )
    if kind > 2:
        raise MidiFileError(f"{where}: is format {kind}; formats 0 and 1 can be played")
    per_quarter, per_second = _read_division(division, where)
    chunks, warnings = _find_chunks(data, 8 + length, promised, where)
    tracks = tuple(
        _TrackReader(data, start, stop, f"{where}: track {number}").read()
        for number, (start, stop) in enumerate(chunks, 1)
    )
    for number, track in enumerate(tracks, 1):
        if not track.ended:
            warnings.append(f"track {number} has no end-of-track event; played to its last event")
    return Tracks(per_quarter, per_second, tracks, tuple(warnings))


def _read_division(division: int, where: str) -> tuple[int, Fraction | None]:
    if division == 0:
        raise MidiFileError(f"{where}: its division is 0 ticks a quarter; it must be 1 or more")
    if not division & 0x8000:
        return division, None
    frames, ticks = 256 - (division >> 8), division & 0xFF
    if frames not in _FRAMES_PER_SECOND:
        raise MidiFileError(
            f"{where}: its division is {frames} frames a second; 24, 25, 29 and 30 exist"
        )
    if ticks == 0:
        raise MidiFileError(f"{where}: its division is 0 ticks a frame; it must be 1 or more")
    return 0, _FRAMES_PER_SECOND[frames] * ticks


def _find_chunks(
    data: bytes, at: int, promised: int, where: str
) -> tuple[list[tuple[int, int]], list[str]]:
    """Where each track's events start and stop; chunks of other kinds are passed over."""
    found: list[tuple[int, int]] = []
    while at < len(data):
        start, kind = at + 8, data[at : at + 4]
        stop = start + int.from_bytes(data[at + 4 : start], "big")
        if start > len(data) or stop > len(data):
            if len(found) >= promised:
                return found, [f"{len(data) - at} bytes after the last track were passed over"]
            raise MidiFileError(
                f"{where}: is cut off at byte {len(data)}, in track {len(found) + 1} of {promised};"
                f" its chunk ends at byte {stop}"
            )
        if kind == b"MTrk":
            found.append((start, stop))
        at = stop
    if len(found) < promised:
        raise MidiFileError(
            f"{where}: is cut off at byte {len(data)}: its header promises {promised} tracks,"
            f" {len(found)} are there"
        )
    if len(found) > promised:
        return found, [f"the header promises {promised} tracks; all {len(found)} are played"]
    return found, []


class _TrackReader:
    """Reads the events of one track from front to back."""

    def __init__(self, data: bytes, start: int, stop: int, where: str) -> None:
        self._data = data
        self._at = start
        self._stop = stop
        self._where = where

    def read(self) -> Track:
        track = Track()
        tick = 0
        running = 0
        while self._at < self._stop and not track.ended:
            tick += self._number()
            status = self._byte()
            if status == _META:
                self._meta(track, tick)
            elif status in (_SYSEX, _ESCAPE):
                self._take(self._number())
            elif status > 0xEF:
                raise self._fault(f"status byte 0x{status:02X} has no place in a file")
            else:
                # By the standard a meta or sysex event ends running status; some writers
                # go on after it all the same, and what they mean is plain.
                if status < 0x80:
                    self._at -= 1
                    if not running:
                        raise self._fault(f"data byte 0x{status:02X} comes before any status")
                else:
                    running = status
                track.events.append((tick, self._channel_message(running)))
            track.end_tick = tick
        return track

    def _channel_message(self, status: int) -> Message:
        data = self._take(_DATA_BYTES[status & 0xF0])
        if max(data) > 127:
            raise self._fault(f"data byte 0x{max(data):02X} is over 127")
        return Message.from_bytes((status, *data))

    def _meta(self, track: Track, tick: int) -> None:
        kind = self._byte()
        data = self._take(self._number())
        if kind == _END_OF_TRACK:
            track.ended = True
        elif kind == _TRACK_NAME and not track.name:
            text = data.decode("latin-1")
            track.name = " ".join("".join(c if c.isprintable() else " " for c in text).split())
        elif kind == _SET_TEMPO:
            tempo = int.from_bytes(data, "big")
            if len(data) != 3 or tempo == 0:
                raise self._fault(
                    f"tempo {data.hex(' ') or 'without a value'!r} is not three bytes above 0"
                )
            track.tempos.append((tick, tempo))

    def _byte(self) -> int:
        return self._take(1)[0]

    def _take(self, count: int) -> bytes:
        start, self._at = self._at, self._at + count
        if self._at > self._stop:
            self._at = self._stop
            raise self._fault("the track ends in the middle of an event")
        return self._data[start : self._at]

    def _number(self) -> int:
        """A variable-length quantity: seven bits a byte, at most four bytes."""
        value = 0
        for _ in range(4):
            byte = self._byte()
            value = value << 7 | byte & 0x7F
            if byte < 0x80:
                return value
        raise self._fault("a variable-length number runs over four bytes")

    def _fault(self, what: str) -> MidiFileError:
        return MidiFileError(f"{self._where}, byte {self._at}: {what}")
