"""The engine under a clock of its own: the sound of an audition without a sound card."""

import numpy as np
import pytest
import soundfile
from mido import Message

from livelag.circuit.presets import load_stage
from livelag.live.arrivals import Arrival
from livelag.live.controllers import ControllerMap, pot_messages, range_message
from livelag.live.engine import Engine, Routing
from livelag.live.take import TakeRecorder
from livelag.live.volts import VoltsIn, VoltsOut
from livelag.notes.midi_file import TimedMessage, read_midi_file
from livelag.sound.parameters import Change
from livelag.sound.patch import Patch
from livelag.sound.render import opening, render

RATE = 48000
BLOCK = 128


def on(note, velocity=100):
    return Message("note_on", note=note, velocity=velocity)


def off(note):
    return Message("note_off", note=note)


class Wire:
    """Arrivals put in by hand; one is there once the time on its stamp has come."""

    def __init__(self, now):
        self.now = now
        self.waiting = []

    def take(self):
        taken = [a for a in self.waiting if a.stamp_s <= self.now()]
        self.waiting = self.waiting[len(taken) :]
        return taken


class Bench:
    """An engine whose time is the frames it has made, with callbacks that come late at random."""

    def __init__(self, patch, late_s=0.0, block=BLOCK, **engine):
        self.wire = Wire(lambda: self.time_s)
        self.block = block
        self.channels = 4
        self.noise = np.random.default_rng(3)
        self.late_s = late_s
        self.time_s = 100.0
        self.engine = Engine(patch, RATE, arrivals=self.wire, now=lambda: self.time_s, **engine)
        self.blocks = []

    def run(self, blocks, inputs=None):
        for _ in range(blocks):
            began = 100.0 + self.engine.meters.frames / RATE
            self.time_s = began + self.noise.uniform(0, self.late_s)
            out = np.full((self.block, self.channels), np.nan, np.float32)
            self.engine.fill(out, inputs)
            self.blocks.append(out)
        return self

    def send(self, message, frame):
        self.wire.waiting.append(Arrival(100.0 + frame / RATE, message, "keys"))

    @property
    def out(self):
        return np.concatenate(self.blocks)


class Volts:
    """A sink that keeps what it gets."""

    def __init__(self):
        self.parts = []

    def write(self, audio, key_volts, glide_volts):
        self.parts.append((audio.copy(), key_volts.copy(), glide_volts.copy()))

    def column(self, n):
        return np.concatenate([part[n] for part in self.parts])


def rendered(stage, messages, frames, **parameters):
    sink = Volts()
    patch = Patch(stage, **parameters)
    render(patch, messages, frames, RATE, [sink])
    return sink


@pytest.mark.parametrize("block", [64, 128, 512])
def test_live_and_rendered_sound_are_the_same_bytes(block):
    """The same messages at the same frames through the engine and through the renderer."""
    stage = load_stage("two-range-film")
    score = [(0, on(60)), (3000, on(67)), (5001, off(60)), (7777, on(48))]
    score += [(9000, m) for m in pot_messages(0.25)] + [(12345, range_message(1, 2))]
    score += [(15000, off(48)), (15001, off(67)), (16000, on(72)), (20000, off(72))]
    messages = [TimedMessage(frame / RATE, message) for frame, message in score]
    frames = 24576
    patch = Patch(stage)
    bench = Bench(patch, block=block)
    key, controls = opening(patch, messages, RATE)
    patch.begin(key, controls)
    bench.engine._fade = 1.0  # the fade-in at the start of a stream is the stream's own
    for frame, message in score:
        bench.engine.post_at(frame, message)
    bench.run(frames // block)
    offline = rendered(stage, messages, frames)
    late = patch.latency_frames
    live = bench.out[late:, 0]
    assert np.array_equal(live, offline.column(0)[: len(live)].astype(np.float32))
    assert np.abs(live).max() > 0.1


@pytest.mark.parametrize("block", [64, 128, 512])
def test_messages_play_at_a_constant_delay_of_one_block(block):
    """Callbacks up to 0.2 ms late: onsets stay within 0.1 ms of one block after their stamps."""
    bench = Bench(Patch(load_stage("ideal"), bypass=1.0), late_s=2e-4, block=block)
    bench.run(4 * RATE // block)
    start = bench.engine.meters.frames
    frames = start + np.cumsum(bench.noise.integers(300, 900, 200))
    for number, frame in enumerate(frames):
        bench.send(on(40 + number % 12), int(frame))
    played = []
    handle = bench.engine.patch.process

    def watched(count, events, outside):
        at = bench.engine.meters.frames
        played.extend(at + f for f, e in events if getattr(e, "type", "") == "note_on")
        return handle(count, events, outside)

    bench.engine.patch.process = watched
    bench.run((int(frames[-1]) - start) // block + 10)
    delays_s = (np.array(played) - frames - block) / RATE
    assert np.ptp(delays_s) < 1e-4  # by block starts alone it would be a whole block
    assert abs(np.median(delays_s)) < 2e-4


def test_it_fades_in_and_out_and_ends():
    bench = Bench(Patch(load_stage("ideal"), level=-6.0))
    bench.engine.post(on(60))
    bench.run(RATE // BLOCK)
    early, full = bench.out[:2400, 0], bench.out[RATE // 2 :, 0]
    assert np.abs(early).max() < 0.3 * np.abs(full).max()
    bench.engine.stop()
    bench.run(40)
    assert bench.engine.finished
    assert not bench.blocks[-1].any()
    steps = np.abs(np.diff(bench.out[RATE:, 0]))
    assert steps[-600:].max() < 1e-6 or np.abs(bench.out[-600:]).max() == 0.0


def test_what_goes_wrong_in_the_callback_is_kept_and_ends_in_silence():
    bench = Bench(Patch(load_stage("ideal"), level=-6.0))
    bench.engine.post(on(60))
    bench.run(100)
    bench.engine.post(Change("rotation", 7.0))
    bench.run(3)
    assert "rotation is 7" in str(bench.engine.error)
    assert bench.engine.finished
    assert np.isfinite(bench.out).all()
    assert not bench.blocks[-1].any()


def test_panic_ends_everything():
    bench = Bench(Patch(load_stage("ideal")))
    bench.engine.post(Message("control_change", control=64, value=127))
    bench.engine.post(on(60))
    bench.engine.post_at(10 * RATE, on(64))
    bench.run(50)
    assert not bench.engine.patch.silent
    bench.engine.panic()
    bench.run(30)
    assert bench.engine.patch.silent
    assert len(bench.engine._schedule) == 0


def test_a_flood_neither_blocks_nor_loses_a_note_off():
    """Ten thousand pot moves a second between notes; every note-off still comes through."""
    bench = Bench(Patch(load_stage("two-range-film")))
    bench.run(10)
    for number in range(200):
        at = bench.engine.meters.frames - BLOCK
        bench.send(on(40 + number % 40), at)
        for k in range(27):
            bench.send(Message("control_change", control=5, value=(number + k) % 128), at + k * 4)
        bench.send(off(40 + number % 40), at + 120)
        bench.run(1)
    bench.run(10)
    assert bench.engine.patch.counts.notes == 200
    assert bench.engine.patch.player.keys_down == ()
    assert bench.engine.error is None


def test_other_knobs_can_turn_the_pot_and_flip_the_range():
    bench = Bench(Patch(load_stage("two-range-film")), controllers=ControllerMap(pot=74, range=20))
    bench.run(4)
    bench.send(Message("control_change", control=74, value=127), 512)
    bench.send(Message("control_change", control=20, value=127), 512)
    bench.send(Message("control_change", control=5, value=0), 512)
    bench.run(4)
    assert bench.engine.patch.setting.rotation == 1.0
    assert bench.engine.patch.setting.range_index == 1


def test_glide_volts_leave_through_their_own_channel():
    stage = load_stage("ideal")
    routing = Routing((0, 1), volts_out=VoltsOut(3, 5.0))
    bench = Bench(Patch(stage, rotation=0.0), routing=routing)
    bench.engine.post(on(60))
    bench.run(RATE // BLOCK)
    out = bench.out
    assert out[0, 3] == 0.0
    assert out[-1, 3] * 5.0 == pytest.approx(2.0, abs=1e-5)
    assert np.array_equal(out[:, 0], out[:, 1])
    assert not out[:, 2].any()


def test_outside_volts_are_glided():
    stage = load_stage("ideal")
    routing = Routing((0,), volts_in=VoltsIn(1, 10.0))
    bench = Bench(Patch(stage, "ramp", rotation=0.0), routing=routing)
    inputs = np.zeros((BLOCK, 2), np.float32)
    inputs[:, 1] = 0.3
    bench.run(RATE // BLOCK, inputs)
    assert bench.engine.meters.glide_volts == pytest.approx(3.0, abs=1e-5)


def test_a_take_renders_again_to_the_same_samples(tmp_path):
    stage = load_stage("bipolar-drift")
    bench = Bench(Patch(stage, rotation=0.31, waveform="pulse"))
    engine = bench.engine
    engine._fade = 1.0
    engine.post(on(55))
    bench.run(100)
    recorder = TakeRecorder(engine.patch, tmp_path / "take-001.wav", RATE)
    engine.take_feed = recorder.feed
    bench.run(20)
    assert recorder.feed.state == "armed"  # a note is sounding
    engine.post(off(55))
    bench.run(20)
    assert recorder.feed.state == "on"
    for number, note in enumerate((60, 62, 55, 67)):
        engine.post(on(note))
        bench.run(40 + 7 * number)
        for message in pot_messages(0.1 + 0.2 * number):
            engine.post(message)
        engine.post(off(note))
        bench.run(25)
    recorder.feed.stop()
    bench.run(5)
    assert recorder.close()
    sound, rate = soundfile.read(tmp_path / "take-001.wav", dtype="float32", always_2d=True)
    assert rate == RATE
    song = read_midi_file(tmp_path / "take-001.mid")
    again = rendered(stage, song.messages, len(sound), waveform="pulse")
    assert np.array_equal(sound[:, 0], again.column(0).astype(np.float32))
    assert np.abs(sound).max() > 0.1
    assert sorted(p.name for p in tmp_path.iterdir()) == ["take-001.mid", "take-001.wav"]


def test_a_take_that_never_began_leaves_nothing(tmp_path):
    bench = Bench(Patch(load_stage("ideal")))
    bench.engine.post(on(60))
    bench.run(20)
    recorder = TakeRecorder(bench.engine.patch, tmp_path / "take-001.wav", RATE)
    bench.engine.take_feed = recorder.feed
    bench.run(5)
    recorder.feed.stop()
    bench.run(2)
    assert not recorder.close()
    assert list(tmp_path.iterdir()) == []
