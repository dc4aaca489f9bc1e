"""Live: dropouts and load with the panel on, and memory, printed. Run alone on a quiet machine."""

import json
import subprocess
import sys
import time
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parents[1] / "live"))
from jack_server import Server, why_not
from tmux_terminal import Terminal, why_no_tmux

SECONDS = 120


@pytest.mark.parametrize("block", [64, 128])
def test_two_minutes_with_the_panel(benchmark, tmp_path, block):
    if reason := why_not() or why_no_tmux():
        pytest.skip(reason)
    server = Server(block, 48000, tmp_path)
    screen = Terminal(
        tmp_path, 100, 30, JACK_DEFAULT_SERVER=server.name, JACK_NO_START_SERVER="1",
        JACK_NO_AUDIO_RESERVATION="1",
    )  # fmt: skip
    screen.prepare(100, 30)
    loads = []

    def run():
        screen.enter(
            f"cd {tmp_path}; clear; {sys.executable} -m livelag audition --phrase procession "
            f"--no-midi-in --block {block} --seconds {SECONDS}; echo status $?"
        )
        end = time.monotonic() + SECONDS + 30
        while "status 0" not in screen.text() and time.monotonic() < end:
            for line in screen.lines():
                if line.startswith(" load"):
                    loads.append(line.split("%")[0].split()[-1])
            time.sleep(5)

    try:
        benchmark.pedantic(run, rounds=1, iterations=1)
        ending = screen.text()
    finally:
        screen.stop()
        server.stop()
    said = [line for line in ending.splitlines() if "dropouts" in line]
    print(
        f"\nblock {block}, panel on, {SECONDS} s, real-time server {server.realtime}: "
        f"{said[0] if said else '0 dropouts'} (goal 0); callback load, per cent: {loads}"
    )


MINUTES = """
import json, re
from pathlib import Path
import numpy as np
from mido import Message
from livelag.circuit.presets import load_stage
from livelag.live.engine import Engine
from livelag.live.loop import Loop
from livelag.notes.phrases import phrase
from livelag.sound.patch import Patch

frames = 0
engine = Engine(Patch(load_stage("two-range-film")), 48000, now=lambda: frames / 48000)
tune = phrase("procession")
loop = Loop(tune.messages, tune.duration_s, 0, 48000)
out = np.zeros((128, 2), np.float32)
peaks = {}
for minute in range(1, 11):
    for block in range(60 * 48000 // 128):
        if block % 25 == 0:
            loop.feed(engine)
        if block % 10 == 0:
            engine.post(Message("control_change", control=5, value=block // 10 % 128))
        engine.fill(out)
        frames += 128
    # Not getrusage, whose peak takes in the process that started this one.
    status = Path("/proc/self/status").read_text()
    peaks[minute] = int(re.search(r"VmHWM:\\s+(\\d+)", status)[1]) / 1024
assert engine.error is None
print(json.dumps(peaks))
"""


def test_memory_over_ten_simulated_minutes(benchmark):
    found = {}

    def run():
        done = subprocess.run(
            [sys.executable, "-c", MINUTES], capture_output=True, text=True, check=True
        )
        found.update(json.loads(done.stdout))

    benchmark.pedantic(run, rounds=1, iterations=1)
    print(f"\npeak memory by minute, MB: { {k: round(v) for k, v in found.items()} }")
