"""The lag driven by straight lines, against `scipy.integrate.solve_ivp` and in its limits."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from livelag.bench.fit_response import lag_at, lag_at_samples, one_lag, with_absorption


def solved(times, drive, tau, asked):
    def slope(t, y):
        return (np.interp(t, times, drive) - y) / tau

    return solve_ivp(
        slope, (times[0], times[-1] + 1e-9), [drive[0]], "DOP853", np.minimum(asked, times[-1]),
        rtol=1e-11, atol=1e-13, max_step=float(np.diff(times).min()),
    ).y[0]  # fmt: skip


@pytest.mark.parametrize("tau", [0.02, 0.3, 5.0])
def test_uneven_samples_are_exact(tau):
    rng = np.random.default_rng(4)
    times = np.cumsum(rng.uniform(0.01, 0.1, 60))
    drive = rng.uniform(-3, 3, 60)
    assert np.abs(lag_at_samples(times, drive, tau) - solved(times, drive, tau, times)).max() < 1e-9
    late = lag_at(times, drive, tau, 0.037)
    asked = np.maximum(times - 0.037, times[0])
    assert np.abs(late - solved(times, drive, tau, asked)).max() < 1e-9


@given(
    st.floats(1e-3, 1e3), st.floats(-5, 5), st.lists(st.floats(1e-4, 2e4), min_size=20, max_size=40)
)
@settings(deadline=None, max_examples=40)
def test_what_rests_stays_and_nothing_overflows(tau, level, steps):
    times = np.cumsum(steps)
    rested = lag_at_samples(times, np.full(len(times), level), tau)
    np.testing.assert_allclose(rested, level, atol=1e-300)  # volts too small for floats are none
    jumped = np.where(np.arange(len(times)) < 10, 0.0, level)
    answer = lag_at_samples(times, jumped, tau)
    assert np.isfinite(answer).all()
    assert np.abs(answer).max() <= abs(level) * (1 + 1e-7)  # ages of 1e7 time constants are rounded


def test_blocks_do_not_show():
    times = np.linspace(0.0, 1000.0, 20_001)
    drive = np.sin(times)
    settled = (np.sin(times) - 0.5 * np.cos(times)) / (1 + 0.25)  # tau 0.5
    assert np.abs(lag_at_samples(times, drive, 0.5) - settled)[200:].max() < 5e-4


def test_absorption_has_the_poles_of_its_network():
    R, C, fraction, time_s = 100e3, 2.2e-6, 0.08, 0.9
    Ck = fraction * C
    Rk = time_s / Ck
    A = np.array([[-(1 / R + 1 / Rk) / C, 1 / (Rk * C)], [1 / (Rk * Ck), -1 / (Rk * Ck)]])
    poles = np.sort(-1 / np.linalg.eigvals(A))
    decays = with_absorption(R * C, fraction, time_s)
    np.testing.assert_allclose(decays.times_s, poles, rtol=1e-12)
    initial_slope = sum(a / t for a, t in zip(decays.weights, decays.times_s, strict=True))
    assert initial_slope == pytest.approx(1 / (R * C))
    assert sum(decays.weights) == pytest.approx(1.0)


def test_rise():
    assert one_lag(2.0).rise_s() == pytest.approx(2.0 * math.log(9))
    assert with_absorption(2.0, 1e-9, 5.0).rise_s() == pytest.approx(2.0 * math.log(9), rel=1e-6)
    assert with_absorption(2.0, 0.1, 5.0).rise_s() > 2.0 * math.log(9)
