"""Fits against captures of an independent simulation, and against scipy.optimize.curve_fit.

The captures are made by `bench.capture_maker` without livelag: the full circuit with absorption,
leakage, bias current, offsets and load, recorded by an oscilloscope with noise, 8-bit steps, a
trigger that is off and instants that jitter.
"""

from concurrent.futures import ProcessPoolExecutor
from multiprocessing import get_context

import numpy as np
import pytest
from bench.capture_maker import Circuit, Generator, Scope, record
from scipy.optimize import curve_fit

from livelag.bench.capture import Capture
from livelag.bench.capture_roles import find_roles
from livelag.bench.fit import fit_capture
from livelag.circuit.kinds import Absorption

CAPTURES = 500


def fitted(circuit, generator, scope, expected=(), swapped=False):
    times, before, after = record(circuit, generator, scope)
    volts = np.array([after, before] if swapped else [before, after])
    roles = find_roles(Capture("c.csv", times, ("one", "two"), volts))
    assert roles.input_name == ("two" if swapped else "one")
    return fit_capture("c.csv", roles, expected)


def distances(number):
    """How far a fit is from the truth, in half-widths of its interval: tau, gain, offset, delay."""
    rng = np.random.default_rng([2, number])
    fraction = rng.uniform(0.0020, 0.0025)  # polyester
    capacitance = 10 ** rng.uniform(-7.0, -5.3)
    circuit = Circuit(
        rng.uniform(50e3, 470e3), capacitance, ((fraction, 1.0),), 1e4 / capacitance,
        bias_a=30e-12, offset_in_v=rng.uniform(-5e-3, 5e-3), offset_out_v=rng.uniform(-5e-3, 5e-3),
        divider=rng.uniform(0.99, 1.0),
    )  # fmt: skip
    tau = circuit.time_constant_s
    interval = tau / rng.uniform(15, 100)
    samples = int(rng.integers(300, 600))
    edges, levels = [rng.uniform(0, interval)], [0.0, rng.uniform(2, 6)]
    if rng.random() < 0.4:  # down again
        edges.append(edges[0] + rng.uniform(0.4, 0.6) * samples * interval)
        levels.append(0.3)
    noise = 0.04 * rng.uniform(0.5, 1.5, 2)
    scope = Scope(
        samples, interval, -rng.uniform(0.05, 0.2) * samples * interval, tuple(noise), (0.04, 0.04),
        jitter_s=interval * rng.choice([0.0, 0.1, 0.3]), trigger_s=rng.uniform(-3, 3) * interval,
        seed=10_000 + number,
    )  # fmt: skip
    generator = Generator(tuple(levels), tuple(edges), rise_s=tau * 10 ** rng.uniform(-6, -2))
    fit = fitted(circuit, generator, scope, (Absorption(0.00225, 1.0),), swapped=number % 2 == 0)
    truths = (circuit.time_constant_s, circuit.gain, circuit.offset_v, 0.0)
    found = (fit.time_constant_s, fit.gain, fit.offset_v, fit.delay_s)
    return [(m.value - truth) / m.u95 for m, truth in zip(found, truths, strict=True)]


def test_the_95_percent_interval_holds_the_truth_in_93_to_97_percent_of_500_captures(monkeypatch):
    monkeypatch.setenv("OPENBLAS_NUM_THREADS", "1")  # small matrices: threads only get in the way
    with ProcessPoolExecutor(2, get_context("spawn")) as pool:
        away = np.abs(list(pool.map(distances, range(CAPTURES), chunksize=25)))
    held = (away < 1.0).mean(axis=0)
    assert away.shape == (CAPTURES, 4)
    for share in held[:3]:  # time constant, gain, offset
        assert 0.93 <= share <= 0.97, held
    # Where an edge was between two samples is uniform, whose bounds a normal interval oversteps.
    assert held[3] >= 0.93, held


def step_model(t, tau, rest, height, start, earlier):
    """A step, on what an earlier one may have left."""
    left = earlier * np.exp(-(t - t[0]) / tau)
    return rest + height * -np.expm1(-np.clip(t - start, 0.0, None) / tau) + left


@pytest.mark.parametrize("seed", range(4))
def test_agrees_with_curve_fit_where_the_plain_step_model_applies(seed):
    # A clean edge half-way between two samples is as good as a step.
    circuit = Circuit(220e3, 470e-9, offset_out_v=2e-3)
    tau, interval = circuit.time_constant_s, 1e-3
    generator = Generator((0.0, 5.0), (0.0,), rise_s=1e-9)
    scope = Scope(1400, interval, -0.5 - interval / 2, (1e-6, 0.02), (0.0, 0.0), seed=seed)
    times, _, after = record(circuit, generator, scope)
    fit = fitted(circuit, generator, scope)
    plain, spread = curve_fit(step_model, times, after, p0=(0.05, 0.0, 4.0, 1e-4, 0.0))
    half = 1.96 * np.sqrt(np.diag(spread))
    assert abs(fit.time_constant_s.value - plain[0]) < 0.15 * half[0]
    assert abs(fit.gain.value * 5.0 - plain[2]) < 0.15 * half[2]
    assert abs(fit.offset_v.value - plain[1]) < 0.15 * half[1]
    assert abs(fit.delay_s.value - plain[3]) < 0.15 * interval
    assert fit.time_constant_s.u95 / half[0] == pytest.approx(1.0, abs=0.1)
    assert fit.gain.u95 * 5.0 / half[2] == pytest.approx(1.0, abs=0.1)
    assert fit.time_constant_s.value == pytest.approx(tau, rel=0.01)
    assert abs(fit.delay_s.value) < 0.5 * interval


@pytest.mark.parametrize("soaking_time", [3.0, 5.0])
def test_absorption_shows_with_its_own_values(soaking_time):
    away, shares = [], []
    for seed in range(12):
        circuit = Circuit(200e3, 1e-6, ((0.10, 0.2 * soaking_time),))
        scope = Scope(1500, 4e-3, -0.3, (0.005, 0.005), (0.01, 0.01), seed=seed)
        fit = fitted(circuit, Generator((0.0, 4.0), (1e-3,)), scope)
        assert fit.absorption_share is not None
        away.append((fit.time_constant_s.value - 0.2) / fit.time_constant_s.u95)
        shares.append((fit.absorption_share.value - 0.10) / fit.absorption_share.u95)
        assert fit.absorption_time_s.value == pytest.approx(0.2 * soaking_time, rel=0.25)
    assert (np.abs(away) < 1.0).sum() >= 10
    assert (np.abs(shares) < 1.0).sum() >= 10


def test_no_absorption_is_seen_where_there_is_none():
    for seed in range(30):
        scope = Scope(800, 4e-3, -0.3, (0.02, 0.02), (0.04, 0.04), seed=seed)
        fit = fitted(Circuit(200e3, 1e-6), Generator((0.0, 4.0), (1e-3,)), scope)
        assert fit.absorption_share is None
