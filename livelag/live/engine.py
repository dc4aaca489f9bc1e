"""The audio side of an audition: messages in, one block of sound out, for ever.

`Engine.fill` is the audio callback's body. Its contract: it runs on the sound card's thread and
must be done long before the block has played. It takes no lock that waits, opens no file, prints
nothing, and keeps nothing that grows. Whatever goes wrong in it is kept in `error`, fades the
sound out and ends the stream.

Time: messages carry the monotonic second they arrived at. A delay-locked clock maps that to the
frame that was at the stream's head then, and one block is added, so every message is played at a
constant delay and none comes too late to be placed.
"""

from __future__ import annotations

import time
from collections import deque
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any, Protocol

import numpy as np
from mido import Message
from numpy.typing import NDArray

from livelag.live.clock import DelayLockedClock
from livelag.live.controllers import ControllerMap
from livelag.live.schedule import Schedule
from livelag.live.strip import Strip
from livelag.live.take import TakeFeed
from livelag.live.volts import VoltsIn, VoltsOut
from livelag.sound.patch import Event, Patch

MAX_FRAMES = 8192
FADE_IN_S = 0.3
FADE_OUT_S = 0.05
LOAD_SMOOTHING = 0.05

Samples = NDArray[np.float64]


class Arrivals(Protocol):
    """Where messages from MIDI inputs come from."""

    def take(self) -> Sequence[Any]:
        """Messages that have arrived, each with ``stamp_s`` and ``message``."""


class _NoArrivals:
    def take(self) -> Sequence[Any]:
        return ()


@dataclass(frozen=True, slots=True)
class Routing:
    """Which channels carry what.

    Attributes:
        sound: output channels, from 0, that carry the sound.
        volts_out: a DC-coupled output for the glide volts, or None.
        volts_in: a DC-coupled input whose volts glide instead of the keys, or None.
    """

    sound: tuple[int, ...] = (0,)
    volts_out: VoltsOut | None = None
    volts_in: VoltsIn | None = None


@dataclass(slots=True)
class Meters:
    """What the callback tells the panel; written by the callback only.

    Attributes:
        frames: frames handed over since the start.
        key_volts: before the glide, at the end of the last block.
        glide_volts: after it.
        peak: greatest sample since the panel last asked.
        load: share of the block's time that the callback took, smoothed.
        worst_load: the most it ever took.
        dropouts: blocks that the sound system says it missed.
        received: messages from MIDI inputs.
    """

    frames: int = 0
    key_volts: float = 0.0
    glide_volts: float = 0.0
    peak: float = 0.0
    load: float = 0.0
    worst_load: float = 0.0
    dropouts: int = 0
    received: int = 0


@dataclass
class Engine:
    """A patch played live.

    Attributes:
        patch: what sounds; touched by the callback only, once the stream runs.
        rate_hz: frames per second of the stream.
        arrivals: MIDI inputs.
        controllers: which controllers turn the pot and move the range switch.
        routing: which channels carry what.
        now: monotonic seconds, the clock that stamps the arrivals.
        meters: what the callback tells.
        take_feed: the take being recorded, if any.
        error: what went wrong in the callback, or None.
        finished: whether the stream has faded out and should end.
    """

    patch: Patch
    rate_hz: float
    arrivals: Arrivals = field(default_factory=_NoArrivals)
    controllers: ControllerMap = field(default_factory=ControllerMap)
    routing: Routing = field(default_factory=Routing)
    now: Callable[[], float] = time.perf_counter
    meters: Meters = field(default_factory=Meters)
    take_feed: TakeFeed | None = None
    error: BaseException | None = None
    finished: bool = False

    def __post_init__(self) -> None:
        self.patch.prepare(self.rate_hz, MAX_FRAMES)
        self.clock = DelayLockedClock(self.rate_hz)
        self.strip = Strip(self.rate_hz)
        self._schedule = Schedule(self.rate_hz)
        self._typed: deque[tuple[float | int, Event]] = deque()
        self._fade = 0.0
        self._fade_step = 1.0 / (FADE_IN_S * self.rate_hz)
        self._last_sample = 0.0
        self._panicked = False

    # From other threads

    def post(self, event: Event) -> None:
        """Play an event now; from any thread."""
        self._typed.append((self.now(), event))

    def post_at(self, frame: int, event: Event) -> None:
        """Play an event at a frame of the stream; from any thread."""
        self._typed.append((frame, event))

    def panic(self) -> None:
        """Forget everything scheduled and end every note; from any thread."""
        self._panicked = True

    def stop(self) -> None:
        """Fade out and finish; from any thread."""
        self._fade_step = -1.0 / (FADE_OUT_S * self.rate_hz)

    # The callback

    def fill(
        self,
        out: NDArray[np.float32],
        inputs: NDArray[np.float32] | None = None,
        dropped: bool = False,
        entered_s: float | None = None,
    ) -> None:
        """Fill one block; see the module's text for the contract.

        Args:
            out: (frames, channels) to be written, all of it.
            inputs: (frames, channels) from the input side, if the stream has one.
            dropped: whether the sound system says it missed a block before this one.
            entered_s: when the sound system made the call, if that is known better than now.
        """
        began = self.now()
        self.meters.dropouts += dropped
        try:
            if self.error is None:
                self._fill(out, inputs, began if entered_s is None else entered_s)
        except Exception as error:
            self.error = error
        if self.error is not None:
            self._fade_error(out)
        block_s = len(out) / self.rate_hz
        load = (self.now() - began) / block_s
        self.meters.load += LOAD_SMOOTHING * (load - self.meters.load)
        self.meters.worst_load = max(self.meters.worst_load, load)

    def _fill(
        self, out: NDArray[np.float32], inputs: NDArray[np.float32] | None, entered_s: float
    ) -> None:
        frames, meters = len(out), self.meters
        self.clock.update(meters.frames, entered_s)
        self._collect(frames)
        events = self._schedule.take(meters.frames, meters.frames + frames)
        if self._panicked:
            self._panicked = False
            self._schedule.clear()
            events = [(0, m) for m in PANIC]
        if self.take_feed is not None:
            events = self.take_feed.begin_block(self.patch, events, frames)
        volts_in = self.routing.volts_in
        outside = volts_in.read(inputs) if volts_in is not None and inputs is not None else None
        audio, key, glide = self.patch.process(frames, events, outside)
        if self.take_feed is not None:
            self.take_feed.end_block(audio)
        self._write(out, audio, glide)
        self.strip.write(meters.frames, key, glide)
        meters.frames += frames
        meters.key_volts, meters.glide_volts = float(key[-1]), float(glide[-1])

    def _collect(self, frames: int) -> None:
        """Move what has arrived into the schedule: a constant block after its stamp."""
        for arrival in self.arrivals.take():
            self.meters.received += 1
            message = self.controllers.translate(arrival.message)
            if message is not None:
                frame = round(self.clock.frame_at(arrival.stamp_s)) + frames
                self._schedule.add(frame, message)
        while self._typed:
            at, event = self._typed.popleft()
            frame = at if isinstance(at, int) else round(self.clock.frame_at(at)) + frames
            self._schedule.add(frame, event)

    def _write(self, out: NDArray[np.float32], audio: Samples, glide: Samples) -> None:
        frames = len(out)
        fade = self._fade
        if self._fade_step and (fade < 1.0 or self._fade_step < 0.0):
            ramp = np.clip(fade + self._fade_step * np.arange(1, frames + 1), 0.0, 1.0)
            self._fade = float(ramp[-1])
            audio = audio * ramp
            self.finished = self._fade_step < 0.0 and self._fade == 0.0
        else:
            ramp = None
        out[:] = 0.0
        for channel in self.routing.sound:
            out[:, channel] = audio
        if self.routing.volts_out is not None:
            self.routing.volts_out.write(out, glide, ramp)
        self._last_sample = float(audio[-1])
        self.meters.peak = max(self.meters.peak, self.patch.peak * max(fade, self._fade))

    def _fade_error(self, out: NDArray[np.float32]) -> None:
        """Lead the last sample down to silence in one block, then finish."""
        out[:] = 0.0
        for channel in self.routing.sound:
            out[:, channel] = self._last_sample * np.linspace(1.0, 0.0, len(out))
        self._last_sample = 0.0
        self.finished = True


PANIC = (
    Message("control_change", control=64, value=0),
    Message("control_change", control=120, value=0),
    Message("control_change", control=123, value=0),
    Message("pitchwheel", pitch=0),
)
