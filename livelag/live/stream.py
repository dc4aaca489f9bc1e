"""The sound stream: PortAudio's callback around `Engine.fill`, and noticing when it dies."""

from __future__ import annotations

import atexit
import time
from contextlib import suppress
from types import TracebackType
from typing import Any

import numpy as np

from livelag.errors import DeviceError
from livelag.live.devices import SoundDevice, sound_library
from livelag.live.engine import Engine
from livelag.live.quiet import stderr_silenced

SILENT_TOO_LONG_S = 1.5
MOST_WAIT_S = 0.05


class SoundStream:
    """A running stream that an engine fills; a context manager.

    Attributes:
        block_frames: frames per callback.
        latency_s: what the device says its own latency is.
    """

    def __init__(
        self,
        engine: Engine,
        output: SoundDevice,
        channels: int,
        block_frames: int,
        latency: str | float = "low",
        source: SoundDevice | None = None,
        input_channels: int = 0,
    ) -> None:
        """Open the stream; nothing sounds until it is entered.

        Args:
            engine: what fills it.
            output: the output device.
            channels: how many of its channels to open.
            block_frames: frames per callback.
            latency: ``low``, ``high`` or seconds, as PortAudio takes it.
            source: the input device, for volts from outside.
            input_channels: how many of its channels to open; 0 opens none.

        Raises:
            DeviceError: if the device refuses.
        """
        self._sounddevice = sound_library()
        self._engine = engine
        self._name = output.name
        self._gone = False
        self._frames_seen = -1
        self._seen_at_s = 0.0
        common: dict[str, Any] = {
            "samplerate": engine.rate_hz,
            "blocksize": block_frames,
            "dtype": "float32",
            "latency": latency,
        }
        try:
            with stderr_silenced():
                if source is not None and input_channels:
                    self._stream = self._sounddevice.Stream(
                        device=(source.number, output.number),
                        channels=(input_channels, channels),
                        callback=self._duplex,
                        **common,
                    )
                else:
                    self._stream = self._sounddevice.OutputStream(
                        device=output.number, channels=channels, callback=self._output, **common
                    )
        except (self._sounddevice.PortAudioError, ValueError) as error:
            raise DeviceError(f"{self._name}: cannot be opened: {_one_line(error)}") from error
        latencies = self._stream.latency
        self.block_frames = block_frames
        self.latency_s = float(latencies[1] if isinstance(latencies, tuple) else latencies)

    def __enter__(self) -> SoundStream:
        try:
            with stderr_silenced():
                self._stream.start()
        except self._sounddevice.PortAudioError as error:
            raise DeviceError(f"{self._name}: cannot be started: {_one_line(error)}") from error
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        if self._gone:
            # With its server dead, JACK's side of PortAudio aborts the process when it is closed.
            atexit.unregister(self._sounddevice._exit_handler)
            return
        with stderr_silenced(), suppress(self._sounddevice.PortAudioError):
            self._stream.close(ignore_errors=True)

    def _entered_s(self, when: Any) -> float:
        """When the sound system made the call, on the engine's clock.

        Python may have waited for its interpreter since; the stream's own time tells how long.
        Where the system does not keep that time, it is now.
        """
        now_s = self._engine.now()
        waited_s = self._stream.time - when.currentTime
        usable = when.currentTime > 0.0 and 0.0 <= waited_s < MOST_WAIT_S
        return now_s - waited_s if usable else now_s

    def _output(self, out: Any, frames: int, when: Any, status: Any) -> None:
        self._engine.fill(out, None, bool(status.output_underflow), self._entered_s(when))
        if self._engine.finished:
            raise self._sounddevice.CallbackStop

    def _duplex(self, inputs: Any, out: Any, frames: int, when: Any, status: Any) -> None:
        missed = bool(status.output_underflow or status.input_overflow)
        self._engine.fill(out, np.asarray(inputs), missed, self._entered_s(when))
        if self._engine.finished:
            raise self._sounddevice.CallbackStop

    def check(self) -> None:
        """Notice that the device has gone: its callback is not called any more.

        Raises:
            DeviceError: if nothing has been asked for in a while, though nobody stopped it.
        """
        if self._engine.finished:
            return
        now_s, frames = time.monotonic(), self._engine.meters.frames
        if frames != self._frames_seen:
            self._frames_seen, self._seen_at_s = frames, now_s
        elif now_s - self._seen_at_s > SILENT_TOO_LONG_S or not self._stream.active:
            self._gone = True
            raise DeviceError(
                f"{self._name}: the sound device went away; check its cable or its server and "
                "start again"
            )


def _one_line(error: BaseException) -> str:
    return " ".join(str(error).split())
