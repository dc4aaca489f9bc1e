"""Speed of the sound: ratios to a NumPy floor in the same run, printed, not asserted.

Run alone on a quiet machine; DEVELOPERS.md names the command.
"""

import subprocess
import sys
import time

import numpy as np
import pytest
from mido import Message

from livelag.circuit.presets import load_stage
from livelag.sound.patch import Patch

RATE = 48000
BLOCK = 4096


def best_s(call, repeats=400):
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        call()
        times.append(time.perf_counter() - start)
    return min(times), float(np.median(times))


def playing(waveform, range_index, block):
    patch = Patch(load_stage("two-range-film"), waveform=waveform, range=float(range_index))
    patch.prepare(RATE, block)
    patch.process(
        min(block, 64), [(0, Message("note_on", note=60)), (1, Message("note_on", note=57))]
    )
    return patch


def numpy_floor():
    volts = np.linspace(0.0, 3.0, BLOCK)
    return lambda: np.floor(np.cumsum(np.exp2(volts))) * 0.5


@pytest.mark.parametrize("waveform", ["saw", "pulse", "triangle", "sine"])
@pytest.mark.parametrize("range_index", [0, 1])
def test_patch_against_a_numpy_floor(benchmark, waveform, range_index):
    patch = playing(waveform, range_index, BLOCK)
    floor, _ = best_s(numpy_floor())
    ours, _ = best_s(lambda: patch.process(BLOCK))
    benchmark(patch.process, BLOCK)
    realtime = BLOCK / RATE / ours
    print(
        f"\n{waveform}, range {range_index}: {ours * 1e6:.0f} us a block of {BLOCK}, "
        f"floor {floor * 1e6:.0f} us, ratio {ours / floor:.2f} (at most 5), "
        f"{realtime:.0f} x real time"
    )


@pytest.mark.parametrize("waveform", ["saw", "pulse", "triangle", "sine"])
@pytest.mark.parametrize("block", [64, 128])
def test_small_blocks_at_the_99_9th_percentile(benchmark, waveform, block):
    patch = playing(waveform, 1, block)
    patch.foresee(place / 127 for place in range(128))  # as an audition does
    notes = [45, 57, 64, 76]
    times = np.empty(20000)

    def run():
        for number in range(len(times)):
            events = []
            if number % 50 == 0:
                note = notes[number // 50 % 4]
                events = [
                    (7, Message("note_on", note=note)),
                    (20, Message("control_change", control=5, value=number % 128)),
                ]
            start = time.perf_counter()
            patch.process(block, events)
            times[number] = time.perf_counter() - start

    benchmark.pedantic(run, rounds=1, iterations=1)
    worst = np.percentile(times, 99.9)
    share = worst / (block / RATE)
    print(
        f"\n{waveform}: block of {block}: median {np.median(times) * 1e6:.0f} us, "
        f"99.9th percentile {worst * 1e6:.0f} us = {100 * share:.1f} % of the block "
        "(at most 15 % at 64)"
    )


ONE_HOUR = """
import re, sys
from pathlib import Path
from mido import Message
from livelag.notes.midi_file import TimedMessage, write_midi_file
from livelag.cli.main import run
folder = Path(sys.argv[1])
seconds = int(sys.argv[2])
song = []
for second in range(seconds):
    note = 40 + second * 7 % 30
    song.append(TimedMessage(second, Message("note_on", note=note)))
    song.append(TimedMessage(second + 0.6, Message("note_off", note=note)))
write_midi_file(folder / "hour.mid", song, 48000)
files = {"--midi": "hour.mid", "--out": "hour.wav", "--cv": "hour.csv", "--picture": "hour.png"}
named = [word for option, name in files.items() for word in (option, str(folder / name))]
assert run(["render", *named, "--cv-rate", "100", "--json"]) == 0
# Not getrusage, whose peak takes in the process that started this one.
peak_kb = re.search(r"VmHWM:\\s+(\\d+)", Path("/proc/self/status").read_text())[1]
print(int(peak_kb) / 1024, file=sys.stderr)
"""


def test_memory_of_a_one_hour_render_is_flat(benchmark, tmp_path):
    peaks = {}

    def run():
        for seconds in (60, 900, 3600):
            done = subprocess.run(
                [sys.executable, "-c", ONE_HOUR, str(tmp_path), str(seconds)],
                capture_output=True, text=True, check=True,
            )  # fmt: skip
            peaks[seconds] = float(done.stderr.split()[-1])

    start = time.perf_counter()
    benchmark.pedantic(run, rounds=1, iterations=1)
    print(
        f"\npeak memory: {', '.join(f'{s} s: {mb:.0f} MB' for s, mb in peaks.items())} "
        f"(at most 250 MB); all three took {time.perf_counter() - start:.0f} s"
    )


def test_help_against_importing_numpy(benchmark):
    def timed(*command):
        start = time.perf_counter()
        subprocess.run([sys.executable, *command], capture_output=True, check=True)
        return time.perf_counter() - start

    ours = min(timed("-m", "livelag", "--help") for _ in range(10))
    numpys = min(timed("-c", "import numpy") for _ in range(10))
    benchmark.pedantic(timed, ("-m", "livelag", "--help"), rounds=3, iterations=1)
    print(
        f"\nlivelag --help {ours * 1e3:.0f} ms, import numpy {numpys * 1e3:.0f} ms, "
        f"ratio {ours / numpys:.2f} (at most 3)"
    )
