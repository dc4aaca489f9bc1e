"""The network: poles, gain, charge, and states that compose, for any legal stage."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from strategies import decades, key_volts, stages, stages_with_settings, states

from livelag.circuit.parts import Capacitor, Pot, Resistor
from livelag.circuit.presets import load_stage
from livelag.circuit.stage import GlideStage, Range, Setting

quick = settings(deadline=None, max_examples=40)


def capacitances(stage):
    """Farads of every state: the capacitors, then their branches."""
    own = [c.capacitance_f for c in stage.capacitors]
    return np.array(own + [b.fraction * c.capacitance_f for c in stage.capacitors
                           for b in c.branches])  # fmt: skip


@quick
@given(stages_with_settings(bypass=True))
def test_poles_are_real_and_none_grows(case):
    stage, setting = case
    network = stage.network(setting)
    assert np.isrealobj(network.poles)
    assert np.all(np.isfinite(network.poles))
    assert np.all(network.poles <= 0.0)
    assert np.all(network.poles[: network.driven_count] < 0.0)


@quick
@given(stages_with_settings())
def test_gain_is_that_of_the_resistive_divider(case):
    stage, setting = case
    leak = 0.0
    for capacitor in stage.capacitors:
        own = capacitor.leakage_siemens
        if capacitor.name in stage.ranges[setting.range_index].connects:
            leak += own
        elif stage.bleed is not None and own > 0.0:
            leak += 1.0 / (stage.bleed.resistance_ohms + 1.0 / own)
    expected = 1.0 / (1.0 + leak * stage.resistance_ohms(setting))
    assert stage.network(setting).gain == pytest.approx(expected, rel=1e-10)


@quick
@given(stages_with_settings(bypass=True), st.data())
def test_holding_twice_is_holding_for_the_sum(case, data):
    stage, setting = case
    network = stage.network(setting)
    start = np.array(data.draw(states(stage)))
    source = data.draw(st.floats(-10.0, 10.0))
    first, second = data.draw(decades(-5, 2)), data.draw(decades(-5, 2))
    twice = network.state_after(network.state_after(start, source, first), source, second)
    once = network.state_after(start, source, first + second)
    np.testing.assert_allclose(twice, once, rtol=0, atol=1e-8)


@quick
@given(stages_with_settings(bypass=True), st.data())
def test_no_time_at_all_changes_no_voltage(case, data):
    stage, setting = case
    source = data.draw(st.floats(-10.0, 10.0))
    start = stage.wiring.share_charge(np.array(data.draw(states(stage))), setting.range_index)
    if setting.bypassed:
        start = stage.wiring.jump(start, setting.range_index, source)
    after = stage.network(setting).state_after(start, source, 0.0)
    np.testing.assert_allclose(after, start, rtol=0, atol=1e-8)


@quick
@given(stages_with_settings(bypass=True), st.data())
def test_no_voltage_leaves_the_span_of_source_ground_and_start(case, data):
    stage, setting = case
    source = data.draw(st.floats(-10.0, 10.0))
    start = stage.wiring.share_charge(np.array(data.draw(states(stage))), setting.range_index)
    if setting.bypassed:
        start = stage.wiring.jump(start, setting.range_index, source)
    after = stage.network(setting).state_after(start, source, data.draw(decades(-6, 4)))
    assert np.all(np.isfinite(after))
    assert after.max() <= max(0.0, source, start.max()) + 1e-8
    assert after.min() >= min(0.0, source, start.min()) - 1e-8


@quick
@given(stages(), st.data())
def test_the_switch_conserves_charge_and_evens_out_the_bus(stage, data):
    index = data.draw(st.integers(0, len(stage.ranges) - 1))
    before = np.array(data.draw(states(stage)))
    after = stage.wiring.share_charge(before, index)
    farads = capacitances(stage)
    assert farads @ after == pytest.approx(farads @ before, rel=1e-12, abs=1e-12 * farads.sum())
    on_bus = [c.name in stage.ranges[index].connects for c in stage.capacitors]
    volts = after[: len(on_bus)][on_bus]
    assert np.ptp(volts) <= 1e-12
    untouched = [i for i in range(len(before)) if i >= len(on_bus) or not on_bus[i]]
    np.testing.assert_array_equal(after[untouched], before[untouched])


def test_two_capacitors_share_charge_by_their_sizes():
    stage = load_stage("two-range-film")
    small, large = (c.capacitance_f for c in stage.capacitors)
    after = stage.wiring.share_charge(np.array([3.0, -1.0, 0.5, 0.25]), 1)
    shared = (3.0 * small - 1.0 * large) / (small + large)
    np.testing.assert_allclose(after, [shared, shared, 0.5, 0.25], rtol=1e-14)


def two_ideal(bleed=None, insulation=None):
    """1 uF on the bus and 2 uF parked, behind 1 kohm + 99 kohm."""
    return GlideStage(
        title="two",
        capacitors=(
            Capacitor("a", 1e-6),
            Capacitor("b", 2e-6, insulation_ohms=insulation),
        ),
        ranges=(Range("a", ("a",)), Range("both", ("a", "b"))),
        pot=Pot(99e3),
        series=Resistor(1e3),
        bleed=bleed,
    )


def test_a_floating_capacitor_keeps_its_charge():
    network = two_ideal().network(Setting(0, 1.0))
    assert network.state_after(np.array([0.0, 3.0]), 5.0, 1e6)[1] == pytest.approx(3.0, rel=1e-13)


def test_a_floating_capacitor_loses_charge_by_its_own_leakage_only():
    network = two_ideal(insulation=1e9).network(Setting(0, 1.0))
    after = network.state_after(np.array([0.0, 3.0]), 5.0, 2000.0)  # one of its time constants
    assert after[1] == pytest.approx(3.0 / np.e, rel=1e-12)
    assert after[0] == pytest.approx(5.0, rel=1e-12)


def test_a_bled_capacitor_follows_the_bus_through_the_bleed():
    network = two_ideal(bleed=Resistor(1e6)).network(Setting(0, 1.0))
    after = network.state_after(np.array([0.0, 0.0]), 5.0, 1e3)
    np.testing.assert_allclose(after, [5.0, 5.0], rtol=1e-12)
    # One pole pair of a two-node ladder: the sum and product of the poles, by hand.
    a = 1 / (100e3 * 1e-6) + 1 / (1e6 * 1e-6)
    b = 1 / (1e6 * 2e-6)
    assert -network.poles.sum() == pytest.approx(a + b, rel=1e-12)
    assert network.poles.prod() == pytest.approx(b / (100e3 * 1e-6), rel=1e-12)


@quick
@given(stages_with_settings(), st.data())
def test_bypass_has_gain_one_and_reads_the_source(case, data):
    stage, setting = case
    bypassed = Setting(setting.range_index, setting.rotation, bypassed=True)
    network = stage.network(bypassed)
    assert network.gain == 1.0
    start = np.array(data.draw(states(stage)))
    source = data.draw(st.floats(-10.0, 10.0))
    times = np.array([0.0, 1e-6, 1e-3, 1.0, 100.0])
    np.testing.assert_allclose(
        network.bus_volts_after(start, source, times), source, rtol=0, atol=1e-12
    )
    after = network.state_after(start, source, 1e-3)
    for i, capacitor in enumerate(stage.capacitors):
        if capacitor.name in stage.ranges[setting.range_index].connects:
            assert after[i] == source


@quick
@given(stages_with_settings(), st.data())
def test_deviation_is_what_is_left_to_go(case, data):
    stage, setting = case
    network = stage.network(setting)
    start = np.array(data.draw(states(stage)))
    source = data.draw(key_volts(stage))
    times = np.geomspace(1e-5, 10.0, 20)
    weights, poles = network.deviation(start, source)
    left = np.exp(np.multiply.outer(times, poles)) @ weights
    bus = network.bus_volts_after(start, source, times)
    np.testing.assert_allclose(network.gain * source + left, bus, rtol=0, atol=1e-8)


@pytest.mark.parametrize("kind", ["ideal", "polyester", "tantalum"])
@pytest.mark.parametrize("farads", [1e-9, 1e-3, 1.0])
def test_parts_many_decades_apart_stay_finite(kind, farads):
    stage = GlideStage(
        title="extremes",
        capacitors=(Capacitor("a", 1e-15), Capacitor("b", farads, kind)),
        ranges=(Range("a", ("a",)),),
        pot=Pot(1e-3),
        series=Resistor(1e-3),
        bleed=Resistor(1e12),
    )
    fastest = Setting(0, 0.0)
    network = stage.network(fastest)
    assert np.all(network.poles < 0.0)  # driven through the bleed, so none stands still
    assert network.gain == pytest.approx(1.0, rel=1e-6)
    start = np.linspace(-1.0, 1.0, stage.wiring.state_count)
    assert np.all(np.isfinite(network.state_after(start, 2.0, 1.0)))
    assert 0.0 <= stage.arrival_s(start, 1.0, fastest) < np.inf


def test_behind_a_bypass_absorption_and_bled_capacitors_still_take_their_time():
    stage = load_stage("bleed-film")  # small on the bus, large parked behind 10 Mohm
    network = stage.network(Setting(0, 0.5, bypassed=True))
    small, large = stage.capacitors
    after = network.state_after(np.zeros(4), 2.0, 3.0)
    assert after[0] == 2.0
    own = small.branches[0].time_s
    assert after[2] == pytest.approx(2.0 * (1 - np.exp(-3.0 / own)), rel=1e-12)
    bleed_s = stage.bleed.resistance_ohms * large.capacitance_f
    # Its own absorption, a fraction of a per cent, slows the parked capacitor that little.
    assert after[1] == pytest.approx(2.0 * (1 - np.exp(-3.0 / bleed_s)), rel=3e-3)


def test_a_bus_slower_than_its_neighbours_by_all_of_rounding_still_moves():
    stage = GlideStage(
        title="a short for a bleed",
        capacitors=(Capacitor("a", 0.1), Capacitor("b", 1e-13), Capacitor("c", 1e-2)),
        ranges=(Range("a", ("a",)),),
        pot=Pot(1e11),
        series=Resistor(3e11),
        bleed=Resistor(2e-3),
    )
    network = stage.network(Setting(0, 0.0))
    assert np.all(network.poles < 0.0)
    assert np.isfinite(network.gain)
    assert np.all(np.isfinite(network.state_after(np.array([1.0, 0.0, -1.0]), 2.0, 1.0)))
