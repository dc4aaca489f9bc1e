"""How long the builder's desk takes.

`python -m pytest -o addopts="" tests/speed/test_bench_speed.py` runs these.
"""

from dataclasses import replace

import pytest

from livelag.bench.arrival import arrivals, longest_setting
from livelag.bench.builds import DISTRIBUTIONS
from livelag.bench.spread import spread
from livelag.bench.timeline import lay_out
from livelag.circuit.presets import load_stage
from livelag.notes.phrases import phrase

STAGE = load_stage("two-range-film")


@pytest.mark.parametrize("distribution", DISTRIBUTIONS)
def test_a_hundred_thousand_builds(benchmark, distribution):
    result = benchmark(spread, STAGE, 100_000, 1, distribution)
    assert result.builds == 100_000
    assert benchmark.stats.stats.median < 0.5


@pytest.fixture(scope="module")
def long_song():
    """Three thousand notes."""
    run = phrase("run")
    repeats = 3000 // run.note_count
    messages = [
        replace(timed, time_s=timed.time_s + n * run.duration_s)
        for n in range(repeats)
        for timed in run.messages
    ]
    return lay_out(STAGE, messages, repeats * run.duration_s)


def test_thousands_of_notes(benchmark, long_song):
    notes = benchmark(arrivals, STAGE, long_song, 0.5)
    assert len(notes) > 2900
    assert benchmark.stats.stats.median < 2.0


def test_longest_setting_for_thousands_of_notes(benchmark, long_song):
    found = benchmark(longest_setting, STAGE, long_song, 0.9)
    assert 0.0 < found.rotation < 1.0
    assert benchmark.stats.stats.median < 4.0
