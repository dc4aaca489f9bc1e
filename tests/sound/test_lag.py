"""The lag against the closed form, against itself in other blocks, and while its controls move."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from livelag.circuit.presets import load_stage, preset_names
from livelag.circuit.stage import Setting
from livelag.errors import UnknownNameError
from livelag.sound.lag import METHODS, Lag

RATE = 48000
ALL_RANGES = [
    (name, index) for name in preset_names() for index in range(len(load_stage(name).ranges))
]


def split(samples, cuts):
    return np.split(samples, sorted(set(cuts)))


@pytest.mark.parametrize(("preset", "index"), ALL_RANGES)
def test_a_held_key_hits_the_continuous_response_at_every_sample(preset, index):
    stage, setting = load_stage(preset), Setting(index, 0.37)
    lag = Lag(stage, RATE, "exact", setting, key_volts=1.0)
    start = stage.settled_state(1.0, setting)
    glide = lag.process(np.full(RATE, 2.5))
    paper = stage.response(start, 2.5, setting, np.arange(RATE) / RATE)
    assert np.abs(glide - paper).max() < 1e-11
    assert abs(glide[-1] - glide[0]) > 0.1


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize(("preset", "index"), ALL_RANGES)
def test_it_rests_on_the_key_it_is_reset_to(preset, index, method):
    stage, setting = load_stage(preset), Setting(index, 0.6)
    lag = Lag(stage, RATE, method, setting, key_volts=1.75)
    glide = lag.process(np.full(2000, 1.75))
    assert np.ptp(glide) < 1e-12
    assert glide[0] == pytest.approx(stage.settled_volts(1.75, setting), abs=1e-12)


@pytest.mark.parametrize("method", METHODS)
def test_all_methods_settle_at_the_same_volts(method):
    stage, setting = load_stage("two-range-film"), Setting(0, 0.2)
    lag = Lag(stage, RATE, method, setting)
    end = lag.process(np.full(20 * RATE, 3.0))[-1]
    assert end == pytest.approx(stage.settled_volts(3.0, setting), abs=1e-9)


moves = st.lists(
    st.tuples(
        st.integers(0, 400),
        st.integers(0, 2),
        st.floats(0, 1),
        st.booleans(),
        st.floats(-2, 5),
    ),
    max_size=6,
)


@settings(max_examples=40, deadline=None)
@given(
    preset=st.sampled_from(["two-range-film", "three-range", "bleed-film", "ideal"]),
    method=st.sampled_from(METHODS),
    cuts=st.lists(st.integers(0, 400), max_size=12),
    moves=moves,
)
def test_blocks_never_matter(preset, method, cuts, moves):
    stage = load_stage(preset)

    def run(extra_cuts, held):
        lag = Lag(stage, RATE, method)
        keys = np.zeros(400)
        for frame, *_, volts in sorted(moves):
            keys[frame:] = volts
        at = {}
        for frame, position, rotation, bypassed, _ in sorted(moves):
            at[frame] = Setting(position % len(stage.ranges), rotation, bypassed)
        edges = sorted({0, 400, *extra_cuts, *at})
        parts = []
        for left, right in pairwise(edges):
            if left in at:
                lag.move(at[left])
            if not held:
                parts.append(lag.process(keys[left:right]))
                continue
            bounds = [left, *(np.flatnonzero(np.diff(keys[left:right])) + left + 1), right]
            parts += [lag.hold(keys[a], b - a) for a, b in pairwise(bounds)]
        return np.concatenate(parts)

    assert np.array_equal(run([], False), run(cuts, False))
    assert np.array_equal(run([], True), run(cuts, True))
    # Two ways to the same samples: the recursion, and the closed form for a held key.
    assert np.abs(run([], True) - run(cuts, False)).max() < 1e-11


def test_flipping_the_range_shares_the_charge():
    stage = load_stage("ideal")
    lag = Lag(stage, RATE, "exact", Setting(1, 0.0), key_volts=0.0)
    lag.move(Setting(0, 0.0))  # the large one parks at 0 V
    lag.process(np.full(RATE, 2.0))  # the small one settles at 2 V
    lag.move(Setting(1, 0.0))
    jump = lag.process(np.full(1, 2.0))[0]
    assert jump == pytest.approx(2.0 * 330e-9 / (330e-9 + 4.7e-6), abs=1e-12)


def test_a_moving_pot_never_makes_a_step():
    stage = load_stage("two-range-film")
    lag = Lag(stage, RATE, "exact", Setting(0, 1.0))
    before = lag.process(np.full(1000, 1.0))
    lag.move(Setting(0, 0.0))
    after = lag.process(np.full(10, 1.0))
    # Bias current through the pot aside, the volts go on from where they were.
    assert after[0] - before[-1] == pytest.approx(before[-1] - before[-2], rel=0.05)


def test_bypass_gives_the_key_at_once_and_keeps_the_capacitor_there():
    stage = load_stage("ideal")
    lag = Lag(stage, RATE, "exact", Setting(0, 1.0))
    lag.move(Setting(0, 1.0, bypassed=True))
    assert np.array_equal(lag.process(np.full(5, 1.5)), np.full(5, 1.5))
    lag.move(Setting(0, 1.0))
    assert lag.process(np.full(3, 0.0))[0] == pytest.approx(1.5, abs=1e-12)


def test_a_jump_starts_the_glide_from_another_key():
    stage = load_stage("two-range-film")
    lag = Lag(stage, RATE, "exact", Setting(0, 0.5), key_volts=1.0)
    lag.jump(3.0)
    glide = lag.process(np.full(10, 1.0))
    assert glide[0] == pytest.approx(stage.settled_volts(3.0, Setting(0, 0.5)), abs=1e-9)
    assert glide[-1] < glide[0]


def test_parked_capacitors_leak_while_nobody_looks():
    stage = load_stage("two-range-bipolar")
    lag = Lag(stage, RATE, "exact", Setting(1, 0.0), key_volts=2.0)
    lag.move(Setting(0, 0.0))
    lag.process(np.full(10 * RATE, 2.0))
    # 330 s for the bare insulation; absorption branches hold the charge up a little.
    large = lag.state_v[1]
    assert 2.0 * np.exp(-10 / 330) * 0.999 < large < 1.999


@pytest.mark.parametrize("method", METHODS)
def test_a_ramp_is_followed_late_by_slope_times_tau(method):
    stage, setting = load_stage("ideal"), Setting(0, 0.5)
    tau, slope = stage.time_constant_s(setting), 0.5
    lag = Lag(stage, RATE, method, setting)
    times = np.arange(4 * RATE) / RATE
    late = (slope * times - lag.process(slope * times))[-1]
    # A held source lags half a step more, T/(1 - e^(-T/tau)); the method's, not the stage's.
    held = -1 / RATE / np.expm1(-1 / RATE / tau)
    assert late == pytest.approx(slope * (held if method == "exact" else tau), rel=1e-9)


def test_an_unknown_method_is_named_with_those_that_exist():
    with pytest.raises(UnknownNameError, match=r"'backward'; .*exact, bilinear, ramp"):
        Lag(load_stage("ideal"), RATE, "backward")
