"""Preferred values over decades; the digits are checked in tests/outside/test_parts_outside.py."""

import math
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from livelag.bench.preferred import E_SERIES, preferred_values
from livelag.errors import InputError, UnknownNameError


def test_both_limits_are_included_and_floats_are_the_nearest():
    assert preferred_values("E6", 4700.0, 22e3) == (4700.0, 6800.0, 10e3, 15e3, 22e3)
    assert preferred_values("E3", 1e-6, 10e-6) == (1e-6, 2.2e-6, 4.7e-6, 10e-6)
    assert preferred_values("E96", 1.02e3, 1.03e3) == (1020.0,)


@given(st.sampled_from(sorted(E_SERIES)), st.floats(-13, 7), st.floats(0, 6))
def test_values_rise_by_about_the_step_of_the_series(series, low, span):
    lowest, highest = 10.0**low, 10.0 ** (low + span)
    values = preferred_values(series, lowest, highest)
    count = len(E_SERIES[series])
    assert all(lowest <= value <= highest for value in values)
    assert abs(len(values) - span * count) <= 2.0
    for one, other in pairwise(values):
        # E24 strays furthest from its step, by under 5 %.
        assert math.log10(other / one) * count == pytest.approx(1.0, abs=0.6)


def test_unknown_series_and_limits():
    with pytest.raises(UnknownNameError, match="E7"):
        preferred_values("E7", 1.0, 10.0)
    for limits in ((0.0, 1.0), (2.0, 1.0), (math.nan, 1.0), (1.0, math.inf)):
        with pytest.raises(InputError):
            preferred_values("E6", *limits)
