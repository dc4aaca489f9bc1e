"""The delay-locked clock on simulated callbacks with known truth."""

import math
import random
import time

import numpy as np
import pytest

from livelag.errors import InputError
from livelag.live.clock import DelayLockedClock

RATE = 48000


class Simulation:
    """Callbacks of a sound card whose crystal is off by `ppm`, entered up to `noise_s` off."""

    def __init__(self, block, ppm=0.0, noise_s=0.0005, start_s=1000.0, seed=1):
        self.clock = DelayLockedClock(RATE)
        self.block, self.noise_s, self.start_s = block, noise_s, start_s
        self.true_rate = RATE * (1 + ppm * 1e-6)
        self.random = random.Random(seed)
        self.frames = 0
        self.skipped_s = 0.0

    def due_s(self):
        return self.start_s + self.skipped_s + self.frames / self.true_rate

    def run(self, seconds):
        """Errors in seconds of random stamps mapped during the run."""
        errors = []
        end = self.frames + seconds * RATE
        while self.frames < end:
            due = self.due_s()
            self.clock.update(self.frames, due + self.random.uniform(-1, 1) * self.noise_s)
            ago_s = self.random.random() * self.block / RATE
            truth = self.frames - ago_s * self.true_rate
            errors.append((self.clock.frame_at(due - ago_s) - truth) / RATE)
            self.frames += self.block
        return np.array(errors)


@pytest.mark.parametrize("block", [64, 128, 512])
@pytest.mark.parametrize("ppm", [-200, 0, 200])
def test_half_a_millisecond_of_noise_becomes_less_than_a_tenth(block, ppm):
    simulation = Simulation(block, ppm)
    simulation.run(10)
    errors = simulation.run(20)
    assert np.abs(errors).max() < 0.0001
    assert simulation.clock.relocks == 0
    # the noise does come in: a clock that believed each callback would fail
    assert np.abs(errors).max() > 1e-7


@pytest.mark.parametrize("block", [64, 512])
def test_it_settles_within_a_second(block):
    simulation = Simulation(block, ppm=100)
    simulation.run(1)
    assert np.abs(simulation.run(1)).max() < 0.00025


def test_the_rate_is_learnt():
    simulation = Simulation(128, ppm=200)
    simulation.run(30)
    assert simulation.clock.rate_hz == pytest.approx(RATE * 1.0002, rel=2e-5)


def test_drift_that_changes_is_followed():
    simulation = Simulation(128, ppm=0)
    simulation.run(10)
    simulation.start_s += simulation.frames / simulation.true_rate
    simulation.true_rate = RATE * (1 + 100e-6)
    simulation.start_s -= simulation.frames / simulation.true_rate
    simulation.run(10)
    assert np.abs(simulation.run(10)).max() < 0.0001


@pytest.mark.parametrize("block", [64, 128, 512])
@pytest.mark.parametrize("blocks_lost", [1, 3, 1000])
def test_a_dropout_is_noticed_and_forgotten(block, blocks_lost):
    simulation = Simulation(block, ppm=50, noise_s=0.0002)
    simulation.run(5)
    simulation.skipped_s += blocks_lost * block / RATE
    simulation.run(1)
    assert simulation.clock.relocks == 1
    assert np.abs(simulation.run(2)).max() < 0.0001


@pytest.mark.parametrize("block", [64, 128, 512])
def test_a_dropout_leaves_the_rate_that_was_learnt(block):
    simulation = Simulation(block, ppm=50)
    simulation.run(20)
    simulation.skipped_s += 4 * block / RATE
    rates = []
    for _ in range(20):
        simulation.run(0.05)
        rates.append(simulation.clock.rate_hz)
    assert simulation.clock.relocks == 1
    assert np.abs(np.array(rates) / simulation.true_rate - 1).max() < 3e-4


@pytest.mark.parametrize("block", [64, 128])
@pytest.mark.parametrize("part", [-0.7, -0.4, 0.3, 0.5, 0.9])
def test_a_shift_by_a_part_of_a_block_is_forgotten_within_half_a_second(block, part):
    """A sound system that begins its time anew after a stall does so anywhere in a block."""
    simulation = Simulation(block, ppm=50, noise_s=0.0001)
    simulation.run(20)
    simulation.skipped_s += part * block / RATE
    simulation.run(0.5)
    assert np.abs(simulation.run(2)).max() < 0.00005
    assert simulation.clock.relocks == 1


def test_a_single_late_callback_moves_nothing():
    simulation = Simulation(128, noise_s=0.0)
    simulation.run(5)
    before = simulation.clock.frame_at(2000.0)
    simulation.clock.update(simulation.frames, simulation.due_s() + 0.02)
    assert simulation.clock.frame_at(2000.0) == pytest.approx(before, abs=0.5)
    assert simulation.clock.relocks == 0


def test_blocks_may_differ_in_length():
    clock, frames, worst = DelayLockedClock(RATE), 0, 0.0
    lengths = random.Random(3)
    for count in range(4000):
        clock.update(frames, 5.0 + frames / RATE)
        if count > 10:
            worst = max(worst, abs(clock.frame_at(5.0 + frames / RATE - 0.001) - (frames - 48)))
        frames += lengths.choice([64, 100, 441])
    assert worst < 0.01


def test_a_stamp_maps_to_the_frame_that_was_at_the_head():
    clock = DelayLockedClock(48000)
    for n in range(2000):
        clock.update(n * 128, 7.0 + n * 128 / 48000)
    assert clock.frame_at(7.0 + 1.5) == pytest.approx(72000, abs=1e-3)
    assert clock.frame_at(7.0 + 1.5 + 1 / 48000) == pytest.approx(72001, abs=1e-3)


def test_nothing_can_be_mapped_before_the_first_callback():
    with pytest.raises(RuntimeError, match="callback"):
        DelayLockedClock(48000).frame_at(1.0)


@pytest.mark.parametrize("bad", [0, -1, math.nan, math.inf])
def test_rates_and_bandwidths_are_positive(bad):
    with pytest.raises(InputError, match="rate"):
        DelayLockedClock(bad)
    with pytest.raises(InputError, match="bandwidth"):
        DelayLockedClock(48000, bad)


def test_a_call_takes_less_than_five_microseconds():
    clock = DelayLockedClock(RATE)
    best = math.inf
    for _ in range(20):
        start = time.perf_counter()
        for n in range(1000):
            clock.update(n * 64, n * 64 / RATE)
            clock.frame_at(n * 64 / RATE)
        best = min(best, (time.perf_counter() - start) / 1000)
    assert best < 10e-6  # both calls together; the best of twenty, as others use the machine too
