"""How long the oscillator takes, against a floor of plain NumPy on the same block.

`python -m pytest -o addopts="" tests/speed/test_oscillator_speed.py -s` prints the ratios.
"""

from time import perf_counter

import numpy as np
import pytest

from livelag.sound.edges import EdgeTables
from livelag.sound.oscillator import WAVEFORMS, Oscillator

RATE_HZ = 48000.0


def prepared(waveform, frames):
    oscillator = Oscillator(waveform)
    oscillator.prepare(RATE_HZ, frames)
    return oscillator


def numpy_floor(octaves):
    """What any oscillator on a volt-per-octave curve must do at the least."""
    cycles = np.cumsum(np.exp2(octaves))
    cycles -= np.floor(cycles)
    cycles *= 2.0
    return cycles


def seconds(function, argument):
    start = perf_counter()
    function(argument)
    return perf_counter() - start


@pytest.mark.parametrize("pitch_hz", [110.0, 440.0, 880.0])
@pytest.mark.parametrize("waveform", WAVEFORMS)
def test_long_block_against_the_floor(benchmark, waveform, pitch_hz):
    process = prepared(waveform, 4096).process
    pitch, octaves = np.full(4096, pitch_hz), np.linspace(0.0, 3.0, 4096)
    # Turn by turn, so that a busy machine slows both alike.
    pairs = np.array([(seconds(process, pitch), seconds(numpy_floor, octaves)) for _ in range(500)])
    ours, floor = np.median(pairs, axis=0) * 1e6
    benchmark(process, pitch)
    benchmark.extra_info["ratio"] = ours / floor
    print(
        f"\n{waveform:9}{pitch_hz:5.0f} Hz, 4096 frames: {ours:6.1f} us,"
        f" floor {floor:5.1f} us, ratio {ours / floor:.2f}"
    )


@pytest.mark.parametrize("waveform", WAVEFORMS)
def test_short_block(benchmark, waveform):
    process = prepared(waveform, 64).process
    pitch = np.full(64, 440.0)
    times = np.array([seconds(process, pitch) for _ in range(5000)]) * 1e6
    benchmark(process, pitch)
    print(
        f"\n{waveform:9} 64 frames: mean {times.mean():.1f} us,"
        f" 99.9th percentile {np.percentile(times, 99.9):.1f} us"
    )


def test_building_the_tables(benchmark):
    benchmark(EdgeTables)
