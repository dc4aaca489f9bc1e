"""Takes: sound and performance of a live passage, recorded so that rendering gives it again.

A take begins in silence: it waits until no note sounds, then puts the patch at rest on the last
key, with the controls as they stand, and from that frame on keeps every message that the patch
plays. The same messages open its MIDI file, so a renderer starts from the same rest and gives
the same samples. The rest is written as a note of no length, which nobody hears.

The callback's side, `TakeFeed`, copies blocks into slots it owns and never waits; a thread,
`TakeRecorder`, empties them into a float WAV. If the thread falls behind, blocks are lost and
counted, and silence of the same length stands in for them.
"""

from __future__ import annotations

import threading
from contextlib import suppress
from pathlib import Path

import numpy as np
from mido import Message
from numpy.typing import NDArray

from livelag.errors import FileError, InputError
from livelag.files import cannot_write
from livelag.live.controllers import (
    hold_message,
    portamento_message,
    pot_messages,
    range_message,
)
from livelag.notes.midi_file import TimedMessage, tempo_for, write_midi_file
from livelag.sound.patch import Event, Patch
from livelag.sound.soundfile_out import SoundFileOut

SLOTS = 1024  # 1.4 s at 64 frames a block
RESERVED_BYTES = 1 << 20  # kept free for the performance, so that a full disk cannot lose it
_IDLE_S = 0.02

Samples = NDArray[np.float64]


def opening_messages(patch: Patch, last_note: int | None) -> list[Message]:
    """Messages that bring a renderer to where a patch stands: its controls, then its rest."""
    player, setting = patch.player, patch.setting
    messages = [portamento_message(player.portamento), hold_message(player.hold)]
    messages += _bend_messages(player.bend_range_semitones, player.bend_steps)
    messages += pot_messages(setting.rotation)
    messages.append(range_message(setting.range_index, len(patch.stage.ranges)))
    note = rest_note(patch, last_note)
    messages.append(Message("note_on", note=note, velocity=1))
    messages.append(Message("note_off", note=note, velocity=0))
    return messages


def rest_note(patch: Patch, last_note: int | None) -> int:
    """The key to rest on: the last one played, or the one nearest to 0 V."""
    return round(patch.stage.scale.zero_volt_note) if last_note is None else last_note


def _bend_messages(range_semitones: float, steps: int) -> list[Message]:
    semitones, cents = divmod(round(range_semitones * 100), 100)
    values = ((101, 0), (100, 0), (6, semitones), (38, cents), (101, 127), (100, 127))
    controls = [Message("control_change", control=c, value=v) for c, v in values]
    return [*controls, Message("pitchwheel", pitch=steps)]


class TakeFeed:
    """The callback's side of a take. Everything it needs is made before it is handed over.

    Attributes:
        state: ``armed`` until silence, ``on``, then ``done``.
        lost_frames: frames that the recorder was too late for.
        events: (frame, message) played since the take began; frames count from there.
        frames: how long the take is, once it is stopped.
    """

    def __init__(self, patch: Patch) -> None:
        self.state = "armed"
        self.lost_frames = 0
        self.events: list[tuple[int, Message]] = []
        self.frames = 0
        self.last_note: int | None = None
        self.other_changes: list[str] = []
        self._latency = patch.latency_frames
        self._slots: list[NDArray[np.float32] | None] = [None] * SLOTS
        self._gaps = [0] * SLOTS
        self._written = 0  # by the callback
        self._read = 0  # by the recorder
        self._gap = 0
        self._passed = 0
        self._stopping = False
        self._left = 0

    def stop(self) -> None:
        """End the take at the next block; from any thread."""
        self._stopping = True

    def begin_block(
        self, patch: Patch, events: list[tuple[int, Event]], frames: int
    ) -> list[tuple[int, Event]]:
        """Look at a block's events before they are played, and add the opening to the first."""
        if self.state == "armed":
            if self._stopping:
                self.state = "done"
                return events
            if not patch.silent or any(_begins_note(e) for _, e in events):
                return events
            events = self._open(patch, events)
        if self.state == "on" and self._left == 0:
            if self._stopping:
                self.frames = self._passed
                self._left = self._latency  # the last frames' sound is still to come
            else:
                for frame, event in events:
                    if isinstance(event, Message):
                        self.events.append((self._passed + frame, event))
                    else:
                        self.other_changes.append(event.name)
                self._passed += frames
        return events

    def _open(self, patch: Patch, events: list[tuple[int, Event]]) -> list[tuple[int, Event]]:
        opening = opening_messages(patch, patch.player.last_note)
        controls = [m for m in opening if m.type not in ("note_on", "note_off")]
        note = rest_note(patch, patch.player.last_note)
        patch.begin(patch.stage.note_volts(note), controls)
        self.state = "on"
        self._skip = self._latency
        return [*((0, message) for message in opening), *events]

    def end_block(self, audio: Samples) -> None:
        """Hand a block's sound to the recorder."""
        if self.state != "on":
            return
        block = audio[self._skip :].astype(np.float32)
        self._skip = max(0, self._skip - len(audio))
        if self._left:
            block = block[: self._left]
            self._left -= len(block)
            if self._left == 0:
                self._push(block)
                self.state = "done"
                return
        self._push(block)

    def _push(self, block: NDArray[np.float32]) -> None:
        if self._written - self._read >= SLOTS:
            self.lost_frames += len(block)
            self._gap += len(block)
            return
        place = self._written % SLOTS
        self._slots[place] = block
        self._gaps[place] = self._gap
        self._gap = 0
        self._written += 1

    def pull(self) -> tuple[int, NDArray[np.float32]] | None:
        """The recorder's side: how many frames were lost, and the block after them."""
        if self._read == self._written:
            return None
        place = self._read % SLOTS
        block = self._slots[place]
        gap = self._gaps[place]
        self._slots[place] = None
        self._read += 1
        assert block is not None
        return gap, block


def _begins_note(event: Event) -> bool:
    return isinstance(event, Message) and event.type == "note_on" and event.velocity > 0


class TakeRecorder:
    """Writes one take: a float WAV as it goes on, and the performance as MIDI at its end.

    Whatever ends it, a full disk included, what has been played until then is kept and valid.

    Attributes:
        feed: the callback's side, to be put into the engine.
        path: the WAV; the performance lies beside it with the suffix ``.mid``.
        problem: what ended it early, or None.
        seconds: how much sound has been written.
    """

    def __init__(self, patch: Patch, path: Path, rate_hz: int) -> None:
        """Open the files.

        Raises:
            FileError: if they cannot be made.
            InputError: if a MIDI file cannot count this rate's frames exactly.
        """
        tempo_for(rate_hz)
        self.feed = TakeFeed(patch)
        self.path = path
        self.problem: str | None = None
        self._rate_hz = rate_hz
        self._frames = 0
        self._part = path.with_name(f".{path.stem}.part.wav")
        self._reserve = path.with_name(f".{path.stem}.part.mid")
        try:
            path.parent.mkdir(parents=True, exist_ok=True)
            self._reserve.write_bytes(bytes(RESERVED_BYTES))
            self._file = SoundFileOut(self._part, rate_hz, 1, "float")
        except OSError as error:
            with suppress(OSError):
                self._reserve.unlink()
            raise cannot_write(path, error) from error
        self._thread = threading.Thread(target=self._run, name="take recorder", daemon=True)
        self._thread.start()

    @property
    def seconds(self) -> float:
        """How much sound has been written, in seconds."""
        return self._frames / self._rate_hz

    @property
    def running(self) -> bool:
        """Whether it is still waiting for sound or writing."""
        return self._thread.is_alive()

    def _run(self) -> None:
        idle = threading.Event()
        while True:
            finished = self.feed.state == "done"  # asked first: nothing comes after it
            try:
                self._empty()
            except OSError as error:
                self.problem = f"{self.path}: {error.strerror or error}; the take ends here"
                self.feed.stop()
                return
            if finished:
                return
            idle.wait(_IDLE_S)

    def _empty(self) -> None:
        while (pulled := self.feed.pull()) is not None:
            gap, block = pulled
            if gap:
                self._file.write(np.zeros((gap, 1)))
            self._file.write(block[:, np.newaxis].astype(np.float64))
            self._frames += gap + len(block)

    def close(self, *, stream_runs: bool = True) -> bool:
        """Stop, finish both files and give them their names; return whether there is a take.

        Args:
            stream_runs: whether the callback is still being called; if not, the take ends with
                what it has handed over.

        Raises:
            FileError: if the files cannot be finished.
        """
        self.feed.stop()
        if stream_runs:
            self._thread.join(timeout=2.0)
        if self._thread.is_alive():
            self.feed.state = "done"
            self._thread.join(timeout=2.0)
        began = self._frames > 0
        try:
            self._file.close()
            self._reserve.unlink(missing_ok=True)
            if not began:
                self._part.unlink(missing_ok=True)
                return False
            self._part.replace(self.path)
            self._write_performance()
        except OSError as error:
            if isinstance(error, FileError):
                raise
            raise cannot_write(self.path, error) from error
        return True

    def _write_performance(self) -> None:
        rate = self._rate_hz
        messages = [
            TimedMessage(frame / rate, message)
            for frame, message in self.feed.events
            if frame <= self._frames
        ]
        write_midi_file(
            self.path.with_suffix(".mid"), messages, rate, duration_s=self._frames / rate
        )


def next_take_path(folder: Path) -> Path:
    """The first of take-001.wav, take-002.wav and so on that does not exist.

    Raises:
        InputError: if there are 999 already.
    """
    for number in range(1, 1000):
        path = folder / f"take-{number:03d}.wav"
        if not path.exists() and not path.with_suffix(".mid").exists():
            return path
    raise InputError(f"{folder}: holds 999 takes; name another folder with --takes")
