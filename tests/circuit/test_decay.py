"""Sums of decays: every crossing is found, and the last time outside a limit is the last."""

import math

import numpy as np
import pytest
from hypothesis import assume, example, given, settings
from hypothesis import strategies as st

from livelag.circuit.decay import last_time_outside, zero_crossings


def total(weights, poles, times):
    return np.exp(np.multiply.outer(times, poles)) @ weights


def test_one_decay_leaves_the_limit_at_tau_ln_of_the_ratio():
    tau = 0.3
    time = last_time_outside(np.array([-2.0]), np.array([-1 / tau]), 0.01)
    assert time == pytest.approx(tau * math.log(200), rel=1e-13)


@pytest.mark.parametrize("weights", [[0.005], [0.005, -0.005], [0.0], []])
def test_a_sum_that_never_leaves_the_limit_takes_no_time(weights):
    assert last_time_outside(np.array(weights), -np.arange(1.0, len(weights) + 1), 0.01) == 0.0


def test_crossings_of_a_polynomial_in_e_to_the_minus_t():
    roots = [0.9, 0.6, 0.3, 0.05]  # of e^-t, so that the times are their -ln
    weights = np.poly(roots)
    poles = -np.arange(4.0, -1.0, -1.0)
    found = zero_crossings(weights, poles, 10.0)
    assert found == pytest.approx([-math.log(x) for x in roots], rel=1e-9)
    assert zero_crossings(weights, poles, 1.0) == pytest.approx(found[:2])


def test_a_touch_is_no_crossing():
    weights = np.poly([0.5, 0.5])
    assert len(zero_crossings(weights, np.array([-2.0, -1.0, 0.0]), 10.0)) % 2 == 0


def test_a_sum_that_starts_inside_and_leaves_later():
    # e^-t - e^-2t starts at 0, peaks at 1/4 when t = ln 2, and passes 0.2 twice.
    outside_until = -math.log((1 - math.sqrt(1 - 0.8)) / 2)
    time = last_time_outside(np.array([1.0, -1.0]), np.array([-1.0, -2.0]), 0.2)
    assert time == pytest.approx(outside_until, rel=1e-12)


def test_a_late_undershoot_counts_though_the_sum_was_inside_before():
    weights, poles = np.array([1.0, -0.05]), np.array([-10.0, -0.1])
    time = last_time_outside(weights, poles, 0.01)
    assert time == pytest.approx(10 * math.log(5), rel=1e-9)  # the slow part's own last time


terms = st.lists(
    st.tuples(st.floats(-10.0, 10.0), st.floats(-2.0, 4.0)),
    min_size=1,
    max_size=5,
    unique_by=lambda term: round(term[1], 2),
)


@settings(deadline=None, max_examples=200)
@given(terms, st.floats(-4.0, 0.5))
@example([(1.0, 0.0), (-1.0, 0.01)], -2.0)
@example([(-10.0, -2.0), (10.0, 4.0)], -4.0)
def test_last_time_outside_against_a_dense_scan(rows, exponent):
    weights = np.array([weight for weight, _ in rows])
    poles = np.array([-(10.0**size) for _, size in rows])
    limit = 10.0**exponent
    assume(np.abs(weights).min() > 1e-6)
    last = last_time_outside(weights, poles, limit)

    times = np.concatenate([[0.0], np.geomspace(1e-7, 40 / -poles.max(), 20001)])
    outside = np.abs(total(weights, poles, times)) > limit * (1 + 1e-9)
    assert not np.any(outside & (times > last * (1 + 1e-9) + 1e-12))
    if last > 0.0:
        assert abs(total(weights, poles, np.array([last]))[0]) == pytest.approx(limit, rel=1e-6)
        before = last * (1 - np.geomspace(1e-9, 1e-2, 30))
        assert np.abs(total(weights, poles, before)).max() > limit * (1 - 1e-9)
    else:
        assert not outside[1:].any()


@settings(deadline=None)
@given(terms)
def test_the_sum_changes_sign_at_every_crossing_and_nowhere_else(rows):
    weights = np.array([weight for weight, _ in rows])
    poles = np.array([-(10.0**size) for _, size in rows])
    assume(np.abs(weights).min() > 1e-6)
    end = 1.0
    found = zero_crossings(weights, poles, end)
    assert found == sorted(found)
    assert all(0.0 < t <= end for t in found)
    assert len(found) < len(rows)  # a sum of M decays has at most M - 1 zeros
    times = np.geomspace(1e-7, end, 20001)
    values = total(weights, poles, times)
    clear = np.abs(values) > 1e-12 * np.abs(weights).max() * np.exp(poles.max() * times)
    signs = np.sign(values[clear])
    changes = np.flatnonzero(np.diff(signs))
    for i in changes:
        left, right = times[clear][i], times[clear][i + 1]
        assert any(left <= t <= right for t in found)
