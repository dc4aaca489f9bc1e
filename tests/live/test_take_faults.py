"""What can go wrong with a take: a full disk, a slow disk, a callback that stops."""

import subprocess
import threading

import numpy as np
import pytest
import soundfile
from mido import Message
from test_engine import RATE, Bench

from livelag.circuit.presets import load_stage
from livelag.errors import FileError
from livelag.live.take import SLOTS, TakeRecorder
from livelag.notes.midi_file import read_midi_file
from livelag.sound.patch import Patch


@pytest.fixture
def small_disk(tmp_path):
    """A disk of 2 MB: the reserve for the performance, and five seconds of sound."""
    folder = tmp_path / "disk"
    folder.mkdir()
    made = subprocess.run(
        ["mount", "-t", "tmpfs", "-o", "size=2m", "tmpfs", str(folder)], capture_output=True
    )
    if made.returncode:
        pytest.skip("no right to mount a small disk")
    yield folder
    subprocess.run(["umount", "-l", str(folder)], check=True)


def playing(bench, seconds):
    for number in range(round(seconds * 4)):
        bench.engine.post(Message("note_on", note=48 + number % 24))
        bench.run(60)
        bench.engine.post(Message("note_off", note=48 + number % 24))
        bench.run(33)


def test_a_full_disk_leaves_a_take_that_is_whole(small_disk):
    bench = Bench(Patch(load_stage("ideal")))
    recorder = TakeRecorder(bench.engine.patch, small_disk / "take-001.wav", RATE)
    bench.engine.take_feed = recorder.feed
    for _ in range(40):
        playing(bench, 0.5)
        threading.Event().wait(0.05)  # let the recorder keep up
        if recorder.problem:
            break
    assert "No space left" in recorder.problem
    assert recorder.close()
    sound, rate = soundfile.read(small_disk / "take-001.wav")
    assert rate == RATE
    assert 2 * RATE < len(sound) < 7 * RATE
    assert np.abs(sound).max() > 0.1
    song = read_midi_file(small_disk / "take-001.mid")
    assert song.note_count > 8
    assert song.duration_s == pytest.approx(len(sound) / RATE, abs=0.1)
    assert bench.engine.error is None
    assert sorted(p.name for p in small_disk.iterdir()) == ["take-001.mid", "take-001.wav"]


def test_a_disk_without_room_for_a_take_is_told_at_once(small_disk):
    (small_disk / "other").write_bytes(bytes(1_500_000))
    with pytest.raises(FileError, match=r"take-001\.wav: cannot be written: No space left"):
        TakeRecorder(Patch(load_stage("ideal")), small_disk / "take-001.wav", RATE)
    assert [p.name for p in small_disk.iterdir()] == ["other"]


def test_blocks_that_the_recorder_is_too_late_for_are_counted_and_silent(tmp_path):
    """The recorder is held up while more blocks come than there are slots."""
    bench = Bench(Patch(load_stage("ideal")))
    recorder = TakeRecorder(bench.engine.patch, tmp_path / "take-001.wav", RATE)
    bench.engine.take_feed = recorder.feed
    write, gate = recorder._file.write, threading.Event()

    def held_up(samples):
        gate.wait(20)
        write(samples)

    recorder._file.write = held_up
    bench.engine.post(Message("note_on", note=60))
    bench.run(SLOTS + 200)
    lost = recorder.feed.lost_frames
    assert lost > 0
    gate.set()
    threading.Event().wait(0.3)
    bench.run(50)
    recorder.feed.stop()
    bench.run(3)
    assert recorder.close()
    sound, _ = soundfile.read(tmp_path / "take-001.wav")
    assert len(sound) == (SLOTS + 200 + 50) * 128
    assert np.count_nonzero(sound == 0.0) >= lost


def test_a_callback_that_stops_leaves_what_it_has_handed_over(tmp_path):
    bench = Bench(Patch(load_stage("ideal")))
    recorder = TakeRecorder(bench.engine.patch, tmp_path / "take-001.wav", RATE)
    bench.engine.take_feed = recorder.feed
    playing(bench, 2.0)
    assert recorder.close(stream_runs=False)
    sound, _ = soundfile.read(tmp_path / "take-001.wav")
    assert len(sound) > 1.5 * RATE
    assert read_midi_file(tmp_path / "take-001.mid").note_count >= 7
