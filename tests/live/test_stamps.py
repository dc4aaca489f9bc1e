"""Stamps from a library's deltas: never late in the future, close to the truth, never misled."""

import math
import random

import pytest

from livelag.live.stamps import Stamper


def play(stamper, arrivals, lags, skew=0.0, start=0.0):
    """Stamps of messages that arrived at `arrivals` and were fetched `lags` later."""
    before = arrivals[0]
    stamps = []
    for arrival, lag in zip(arrivals, lags, strict=True):
        delta = (arrival - before) * (1 + skew)
        stamps.append(stamper.stamp(delta, start + arrival + lag))
        before = arrival
    return [stamp - start for stamp in stamps]


@pytest.mark.parametrize("skew", [0.0, 1e-6, -1e-6])
def test_polling_leaves_no_jitter(skew):
    chance = random.Random(1)
    arrivals, now = [], 10.0
    for _ in range(400):
        now += chance.uniform(0.05, 0.5)
        arrivals.append(now)
    lags = [chance.uniform(0.00002, 0.0011) for _ in arrivals]
    stamps = play(Stamper(2e-6), arrivals, lags, skew)
    errors = [stamp - arrival for stamp, arrival in zip(stamps, arrivals, strict=True)][40:]
    assert max(errors) - min(errors) < 0.0001
    assert max(lags[40:]) - min(lags[40:]) > 0.0009


def test_a_stamp_is_never_after_now():
    chance = random.Random(2)
    stamper, now = Stamper(200e-6), 0.0
    for _ in range(2000):
        now += chance.choice([0.0, 0.001, 3.0])
        delta = chance.choice([0.0, -1.0, math.nan, math.inf, 0.001, 3.0, 1e9])
        assert stamper.stamp(delta, now) <= now


def test_a_clock_that_stands_still_is_not_believed():
    stamper = Stamper(2e-6)
    for n in range(50):
        stamp = stamper.stamp(0.0, 1.0 + 0.3 * n)
        assert stamp == 1.0 + 0.3 * n


def test_a_clock_that_is_off_is_doubted_after_a_while():
    stamper = Stamper(2e-6)
    stamper.stamp(0.0, 1.0)
    worst = []
    for n in range(1, 400):  # says 99 ms for every 100 ms
        worst.append(1.0 + 0.1 * n - stamper.stamp(0.099, 1.0 + 0.1 * n))
    assert max(worst) < 0.015


def test_one_wild_delta_is_got_over():
    stamper = Stamper(2e-6)
    stamper.stamp(0.0, 1.0)
    assert stamper.stamp(0.1, 1.1) == pytest.approx(1.1)
    stamper.stamp(5.0, 1.2)  # 4.9 s too many
    now = 1.2
    for _ in range(10):
        now += 0.1
        last = stamper.stamp(0.1, now)
    assert last == pytest.approx(now, abs=1e-4)
