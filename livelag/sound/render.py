"""Offline rendering: a patch run over timed messages in blocks, into sinks, in constant memory."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from mido import Message
from numpy.typing import NDArray

from livelag.errors import InputError
from livelag.notes.midi_file import TimedMessage
from livelag.sound.patch import Patch, PatchCounts

LOWEST_RATE_HZ = 8_000
HIGHEST_RATE_HZ = 192_000
BLOCK_FRAMES = 4096
TAIL_S = 0.25
LONGEST_S = 24 * 3600.0

Samples = NDArray[np.float64]


class Sink(Protocol):
    """Whatever takes a rendering block by block."""

    def write(self, audio: Samples, key_volts: Samples, glide_volts: Samples) -> None:
        """Take the next (frames,) of each, in step with one another."""


@dataclass(frozen=True, slots=True)
class Rendered:
    """What a rendering came to.

    Attributes:
        frames: frames written.
        rate_hz: frames per second.
        peak: greatest absolute sample.
        counts: what the patch met.
    """

    frames: int
    rate_hz: int
    peak: float
    counts: PatchCounts

    @property
    def seconds(self) -> float:
        """Length in seconds."""
        return self.frames / self.rate_hz


def check_rate(rate_hz: int) -> None:
    """Refuse a sample rate outside 8 to 192 kHz.

    Raises:
        InputError: naming the rate and the bounds.
    """
    if not LOWEST_RATE_HZ <= rate_hz <= HIGHEST_RATE_HZ:
        raise InputError(
            f"rate is {rate_hz} Hz; it must be {LOWEST_RATE_HZ} to {HIGHEST_RATE_HZ} Hz"
        )


def frames_for(duration_s: float, rate_hz: int) -> int:
    """Frames of a performance of so many seconds, with the tail that lets the last note end.

    Raises:
        InputError: if it is longer than a day.
    """
    if duration_s > LONGEST_S:
        raise InputError(f"performance lasts {duration_s:.0f} s; the longest is {LONGEST_S:.0f} s")
    return round((duration_s + TAIL_S) * rate_hz)


def opening(
    patch: Patch, messages: Sequence[TimedMessage], rate_hz: int
) -> tuple[float, list[Message]]:
    """How a piece begins: key volts of its first note, and the controls set before it at time 0.

    The stage is taken to rest on the first note, with its controls as the piece wants them.
    """
    controls: list[Message] = []
    for timed in messages:
        message = timed.message
        if message.type == "note_on" and message.velocity > 0:
            return patch.stage.note_volts(message.note), controls
        if round(timed.time_s * rate_hz) == 0 and message.type in ("control_change", "pitchwheel"):
            controls.append(message)
    return 0.0, controls


def render(
    patch: Patch,
    messages: Sequence[TimedMessage],
    frames: int,
    rate_hz: int,
    sinks: Sequence[Sink],
    progress: Callable[[int], None] = lambda frames: None,
) -> Rendered:
    """Run a patch over messages from rest on the first note, and give sinks sound and volts.

    The patch's latency is taken out: audio and volts reach the sinks in step.

    Args:
        patch: unprepared or used; it is prepared and reset here.
        messages: in order of time.
        frames: how many to render, more than 0.
        rate_hz: frames per second, 8000 to 192000.
        sinks: what takes the blocks.
        progress: called with the frames done after each block.

    Raises:
        InputError: if the rate is out of bounds.
    """
    check_rate(rate_hz)
    patch.prepare(rate_hz, BLOCK_FRAMES)
    patch.begin(*opening(patch, messages, rate_hz))
    late = patch.latency_frames
    keys, glides = np.empty(0), np.empty(0)  # volts that wait for their audio
    done, position, peak = 0, 0, 0.0
    at = [round(timed.time_s * rate_hz) for timed in messages]
    next_message = 0
    while done < frames:
        count = min(BLOCK_FRAMES, frames + late - position)
        events: list[tuple[int, Message]] = []
        while next_message < len(at) and at[next_message] < position + count:
            events.append((at[next_message] - position, messages[next_message].message))
            next_message += 1
        audio, key, glide = patch.process(count, events)
        skip = max(0, late - position)
        position += count
        keys, glides = np.concatenate((keys, key)), np.concatenate((glides, glide))
        audio = audio[skip:]
        ready = len(audio)
        if ready:
            for sink in sinks:
                sink.write(audio, keys[:ready], glides[:ready])
            peak = max(peak, float(np.abs(audio).max()))
        keys, glides = keys[ready:], glides[ready:]
        done += ready
        progress(done)
    return Rendered(frames, rate_hz, peak, patch.counts)
