"""The stream's troubles that no server can be made to have, on a stand-in for PortAudio."""

from types import SimpleNamespace

import numpy as np
import pytest
from test_engine import RATE

from livelag.circuit.presets import load_stage
from livelag.errors import DeviceError
from livelag.live import stream as module
from livelag.live.engine import Engine, Routing
from livelag.live.stream import SoundStream
from livelag.live.volts import VoltsIn
from livelag.sound.patch import Patch


class PortAudio:
    """What `sounddevice` offers, as far as a stream asks for it."""

    class PortAudioError(Exception):
        pass

    class CallbackStop(Exception):  # noqa: N818 - PortAudio's own name
        pass

    def __init__(self, refuses="", fails_to_start=""):
        self.refuses, self.fails_to_start = refuses, fails_to_start
        self.opened = []

    def OutputStream(self, **asked):  # noqa: N802
        return self._open(asked, 0.004)

    def Stream(self, **asked):  # noqa: N802
        return self._open(asked, (0.003, 0.004))

    def _open(self, asked, latency):
        if self.refuses:
            raise self.PortAudioError(self.refuses)
        made = SimpleNamespace(
            asked=asked, latency=latency, active=True, time=10.0, closed=False, start=self._start,
        )  # fmt: skip
        made.close = lambda ignore_errors: setattr(made, "closed", True)
        self.opened.append(made)
        return made

    def _start(self):
        if self.fails_to_start:
            raise self.PortAudioError(self.fails_to_start)

    def _exit_handler(self):
        pass


DEVICE = SimpleNamespace(number=3, name="interface", label="interface, api", outputs=4, inputs=4)
FLAGS = SimpleNamespace(output_underflow=False, input_overflow=False)
UNDERFLOW = SimpleNamespace(output_underflow=True, input_overflow=False)


@pytest.fixture
def use(monkeypatch):
    def install(audio):
        monkeypatch.setattr(module, "sound_library", lambda: audio)
        return audio

    return install


def engine(**more):
    return Engine(Patch(load_stage("ideal")), RATE, **more)


def test_a_device_that_refuses_is_one_line(use):
    use(PortAudio(refuses="Invalid sample rate\n[PaErrorCode -9997]"))
    with pytest.raises(
        DeviceError, match=r"^interface: cannot be opened: Invalid sample rate \[Pa"
    ):
        SoundStream(engine(), DEVICE, 2, 128)


def test_a_device_that_does_not_start_is_one_line(use):
    use(PortAudio(fails_to_start="Device unavailable"))
    with (
        pytest.raises(DeviceError, match="interface: cannot be started: Device unavailable"),
        SoundStream(engine(), DEVICE, 2, 128),
    ):
        pass


def test_dropouts_are_counted_and_the_end_is_asked_for(use):
    audio = use(PortAudio())
    running = engine()
    with SoundStream(running, DEVICE, 2, 128) as stream:
        callback = audio.opened[0].asked["callback"]
        out = np.zeros((128, 2), np.float32)
        when = SimpleNamespace(currentTime=0.0)
        for flags in (FLAGS, UNDERFLOW, UNDERFLOW, FLAGS):
            callback(out, 128, when, flags)
        assert running.meters.dropouts == 2
        assert stream.latency_s == 0.004
        running.stop()

        def play_on():
            for _ in range(100):
                callback(out, 128, when, FLAGS)

        with pytest.raises(audio.CallbackStop):
            play_on()
    assert audio.opened[0].closed


def test_the_wait_for_the_interpreter_is_taken_out_of_the_clock(use):
    """The call was made 3 ms before Python came to it; the stream's own time says so."""
    audio = use(PortAudio())
    now = [50.0]
    running = engine(now=lambda: now[0])
    SoundStream(running, DEVICE, 2, 128)
    callback = audio.opened[0].asked["callback"]
    audio.opened[0].time = 10.0
    callback(np.zeros((128, 2), np.float32), 128, SimpleNamespace(currentTime=9.997), FLAGS)
    assert running.clock.frame_at(49.997) == pytest.approx(0.0, abs=1e-6)
    # Nonsense from the system is not believed.
    other = engine(now=lambda: now[0])
    SoundStream(other, DEVICE, 2, 128)
    callback = audio.opened[1].asked["callback"]
    callback(np.zeros((128, 2), np.float32), 128, SimpleNamespace(currentTime=0.0), FLAGS)
    assert other.clock.frame_at(50.0) == pytest.approx(0.0, abs=1e-6)


def test_a_stream_that_falls_silent_is_noticed(use, monkeypatch):
    audio = use(PortAudio())
    running = engine()
    seconds = [0.0]
    monkeypatch.setattr(module.time, "monotonic", lambda: seconds[0])
    with SoundStream(running, DEVICE, 2, 128) as stream:
        callback = audio.opened[0].asked["callback"]
        when = SimpleNamespace(currentTime=0.0)
        callback(np.zeros((128, 2), np.float32), 128, when, FLAGS)
        stream.check()
        seconds[0] = 1.0
        stream.check()
        seconds[0] = 2.0
        with pytest.raises(DeviceError, match="interface: the sound device went away"):
            stream.check()
    assert not audio.opened[0].closed  # closing a dead one can take the process down


def test_volts_from_outside_open_both_sides(use):
    audio = use(PortAudio())
    running = Engine(
        Patch(load_stage("ideal"), "ramp", rotation=0.0), RATE,
        routing=Routing((0,), volts_in=VoltsIn(1, 5.0)),
    )  # fmt: skip
    SoundStream(running, DEVICE, 1, 128, "high", DEVICE, 2)
    asked = audio.opened[0].asked
    assert asked["device"] == (3, 3)
    assert asked["channels"] == (2, 1)
    inputs = np.zeros((128, 2), np.float32)
    inputs[:, 1] = 0.4
    when = SimpleNamespace(currentTime=0.0)
    for _ in range(200):
        asked["callback"](inputs, np.zeros((128, 1), np.float32), 128, when, FLAGS)
    assert running.meters.glide_volts == pytest.approx(2.0, abs=1e-5)
