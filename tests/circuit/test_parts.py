"""Parts: tapers and their inverse, end resistance, and the values that are refused."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from strategies import pots, tapers

from livelag.circuit.kinds import BUFFER_CLASSES, CAPACITOR_KINDS, Absorption
from livelag.circuit.parts import Buffer, Capacitor, Pot, Resistor, Taper
from livelag.errors import InputError, UnknownNameError

DEAD_ENDS = Taper.measured((0.0, 0.1, 0.5, 0.9, 1.0), (0.0, 0.0, 0.4, 1.0, 1.0))


def test_a_logarithmic_pot_has_its_middle_at_mid_travel():
    for middle in (0.10, 0.13, 0.20):
        assert Taper.logarithmic(middle).fraction(0.5) == pytest.approx(middle, rel=1e-15)
        assert Taper.reverse_logarithmic(middle).fraction(0.5) == pytest.approx(1 - middle)


def test_a_logarithmic_pot_is_two_straight_segments():
    taper = Taper.logarithmic(0.15)
    assert taper.fraction(0.25) == pytest.approx(0.075)
    assert taper.fraction(0.75) == pytest.approx(0.575)


@given(st.floats(0.01, 0.49), st.floats(0.0, 1.0))
def test_reverse_logarithmic_is_logarithmic_end_for_end(middle, rotation):
    forward = Taper.logarithmic(middle).fraction(1.0 - rotation)
    assert Taper.reverse_logarithmic(middle).fraction(rotation) == pytest.approx(1.0 - forward)


def test_a_measured_table_with_flat_ends_is_flat_there():
    assert [DEAD_ENDS.fraction(x) for x in (0.0, 0.05, 0.1)] == [0.0, 0.0, 0.0]
    assert [DEAD_ENDS.fraction(x) for x in (0.9, 0.95, 1.0)] == [1.0, 1.0, 1.0]
    assert DEAD_ENDS.fraction(0.3) == pytest.approx(0.2)


def test_the_inverse_of_a_flat_stretch_is_where_the_pot_begins_to_act():
    assert DEAD_ENDS.rotation(0.0) == pytest.approx(0.1)  # where 0 is first exceeded
    assert DEAD_ENDS.rotation(1.0) == pytest.approx(0.9)  # where 1 is first reached
    step = Taper.measured((0.0, 0.4, 0.6, 1.0), (0.0, 0.5, 0.5, 1.0))
    assert step.rotation(0.5) == pytest.approx(0.6)


@given(tapers(), st.floats(0.0, 1.0))
def test_rotation_inverts_fraction(taper, fraction):
    rotation = taper.rotation(fraction)
    assert -1e-12 <= rotation <= 1.0 + 1e-12
    assert taper.fraction(rotation) == pytest.approx(fraction, abs=1e-12)


@given(pots(), st.floats(0.0, 1.0), st.floats(0.0, 1.0))
def test_more_turn_is_never_less_resistance(pot, one, other):
    low, high = sorted((one, other))
    assert pot.resistance_at(low) <= pot.resistance_at(high) * (1 + 1e-12)


@given(pots())
def test_a_pot_runs_from_its_end_resistance_to_its_whole_track(pot):
    assert pot.resistance_at(0.0) == pytest.approx(pot.end_ohms, rel=1e-12)
    assert pot.resistance_at(1.0) == pytest.approx(pot.resistance_ohms, rel=1e-12)


@pytest.mark.parametrize("value", [-1.0, 0.0, -0.0, math.nan, math.inf, -math.inf, 1e-320, 1e300])
@pytest.mark.parametrize(
    "make",
    [
        Resistor,
        Pot,
        lambda value: Capacitor("c", value),
        lambda value: Capacitor("c", 1e-6, insulation_ohms=value),
        lambda value: Capacitor("c", 1e-6, absorption=(Absorption(value, 1.0),)),
        lambda value: Capacitor("c", 1e-6, absorption=(Absorption(0.01, value),)),
    ],
)
def test_part_values_that_cannot_be_are_refused(make, value):
    with pytest.raises(InputError, match=r" is .*; it must be "):
        make(value)


@pytest.mark.parametrize("tolerance", [-0.01, 0.91, 20.0, math.nan, math.inf])
def test_a_tolerance_is_a_fraction(tolerance):
    for make in (
        lambda: Resistor(1e3, tolerance),
        lambda: Pot(1e5, tolerance=tolerance),
        lambda: Capacitor("c", 1e-6, tolerance=tolerance),
    ):
        with pytest.raises(InputError, match=r"20 % is 0\.2"):
            make()


@pytest.mark.parametrize("end", [-1.0, 1e5, 2e5, math.nan])
def test_end_resistance_is_less_than_the_pot(end):
    with pytest.raises(InputError, match="pot end resistance"):
        Pot(1e5, end_ohms=end)


@pytest.mark.parametrize(
    ("rotations", "fractions"),
    [
        ((0.0,), (0.0,)),
        ((), ()),
        ((0.0, 1.0), (0.0, 0.5, 1.0)),
        ((0.1, 1.0), (0.0, 1.0)),
        ((0.0, 0.9), (0.0, 1.0)),
        ((0.0, 1.0), (0.1, 1.0)),
        ((0.0, 1.0), (0.0, 0.9)),
        ((0.0, 0.5, 0.5, 1.0), (0.0, 0.2, 0.4, 1.0)),
        ((0.0, 0.6, 0.5, 1.0), (0.0, 0.2, 0.4, 1.0)),
        ((0.0, 0.5, 1.0), (0.0, math.nan, 1.0)),
        ((0.0, math.nan, 1.0), (0.0, 0.5, 1.0)),
        ((0.0, 0.3, 0.6, 1.0), (0.0, 0.5, 0.4, 1.0)),
        ((0.0, 0.5, 1.0), (0.0, 1.5, 1.0)),
    ],
)
def test_a_taper_table_that_is_no_law_is_refused(rotations, fractions):
    with pytest.raises(InputError, match="taper"):
        Taper.measured(rotations, fractions)


@pytest.mark.parametrize("middle", [0.0, 0.5, 0.8, -0.1, math.nan])
def test_a_logarithmic_middle_is_below_half(middle):
    for make in (Taper.logarithmic, Taper.reverse_logarithmic):
        with pytest.raises(InputError, match="taper middle"):
            make(middle)


def test_an_unknown_kind_or_class_says_which_exist():
    with pytest.raises(UnknownNameError, match="did you mean 'polyester'"):
        Capacitor("c", 1e-6, kind="poliester")
    with pytest.raises(UnknownNameError, match="did you mean 'jfet-input'"):
        Buffer.of_class("jfet-inputs")


@pytest.mark.parametrize("name", ["", "  ", "two\nlines"])
def test_a_capacitor_name_is_a_line(name):
    with pytest.raises(InputError, match="capacitor name"):
        Capacitor(name, 1e-6)


@pytest.mark.parametrize("place", range(6))
@pytest.mark.parametrize("value", [math.nan, math.inf])
def test_buffer_figures_are_finite(place, value):
    figures = [0.0] * 6
    figures[place] = value
    with pytest.raises(InputError, match="buffer"):
        Buffer("custom", *figures)


@pytest.mark.parametrize("place", [2, 3, 4, 5])
def test_headrooms_and_limits_are_not_negative(place):
    figures = [0.0] * 6
    figures[place] = -1e-3
    with pytest.raises(InputError, match="0 or more"):
        Buffer("custom", *figures)


def test_measured_figures_stand_in_for_the_typical_ones():
    typical = Capacitor("c", 1e-6, "polyester")
    measured = Capacitor("c", 1e-6, "polyester", insulation_ohms=1e9, absorption=())
    assert typical.branches == CAPACITOR_KINDS["polyester"].absorption
    assert measured.branches == ()
    assert measured.leakage_siemens == pytest.approx(1e-9)
    ideal = Capacitor("c", 1e-6)
    assert (ideal.leakage_siemens, ideal.branches) == (0.0, ())


@pytest.mark.parametrize("kind", sorted(CAPACITOR_KINDS))
def test_the_worst_leak_is_not_less_than_the_typical_one(kind):
    row = CAPACITOR_KINDS[kind]
    assert row.leakage_siemens(1e-6, worst=True) >= row.leakage_siemens(1e-6)
    assert row.source


@pytest.mark.parametrize("name", sorted(BUFFER_CLASSES))
def test_a_class_is_typically_within_its_own_limits(name):
    buffer = Buffer.of_class(name)
    assert abs(buffer.offset_v) <= buffer.offset_limit_v
    assert abs(buffer.bias_a) <= buffer.bias_limit_a
