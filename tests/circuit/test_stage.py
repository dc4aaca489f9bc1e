"""The stage: volts along the way, responses, arrival, swing and what it warns about."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from strategies import key_volts, stages, stages_with_settings, states

from livelag.circuit.kinds import CAPACITOR_KINDS
from livelag.circuit.parts import Buffer, Capacitor, Pot, Resistor
from livelag.circuit.presets import load_stage
from livelag.circuit.stage import GlideStage, Range, Scale, Setting, Supply
from livelag.errors import InputError, UnknownNameError

quick = settings(deadline=None, max_examples=40)


def lone(kind="ideal", **fields):
    """1 uF behind 1 kohm + 99 kohm: a time constant of 1 to 100 ms."""
    parts = {
        "title": "lone",
        "capacitors": (Capacitor("c", 1e-6, kind),),
        "ranges": (Range("all", ("c",)),),
        "pot": Pot(99e3),
        "series": Resistor(1e3),
    }
    return GlideStage(**{**parts, **fields})


def buffer(**figures):
    return replace(Buffer.of_class("ideal"), name="custom", **figures)


# Held keys, for any legal stage


@quick
@given(stages_with_settings(bypass=True), st.data())
def test_a_settled_stage_stays_where_it_is(case, data):
    stage, setting = case
    key = data.draw(key_volts(stage))
    state = stage.settled_state(key, setting)
    times = np.array([0.0, 1e-6, 1e-3, 1.0, 1e3])
    volts = stage.response(state, key, setting, times)
    np.testing.assert_allclose(volts, stage.settled_volts(key, setting), rtol=0, atol=1e-8)
    assert stage.arrival_s(state, key, setting) == 0.0


@quick
@given(stages_with_settings(bypass=True), st.data())
def test_the_way_to_a_held_key_is_monotone_and_never_overshoots(case, data):
    stage, setting = case
    start, target = data.draw(key_volts(stage)), data.draw(key_volts(stage))
    times = np.concatenate([[0.0], np.geomspace(1e-7, 1e5, 400)])
    volts = stage.response(stage.settled_state(start, setting), target, setting, times)
    assert np.all(np.isfinite(volts))
    end = stage.settled_volts(target, setting)
    begin = stage.settled_volts(start, setting)
    direction = np.sign(end - begin)
    assert np.all(direction * np.diff(volts) >= -1e-9)
    assert np.all(direction * (end - volts) >= -1e-9)


@quick
@given(stages_with_settings(), st.data())
def test_after_arrival_the_bus_stays_within_the_tolerance(case, data):
    stage, setting = case
    state = stage.wiring.share_charge(np.array(data.draw(states(stage))), setting.range_index)
    key = data.draw(key_volts(stage))
    cents = data.draw(st.floats(0.5, 100.0))
    arrival = stage.arrival_s(state, key, setting, cents)
    network = stage.network(setting)
    source = stage.source_volts(key, setting)
    times = arrival * np.concatenate([[1.0], 1.0 + np.geomspace(1e-9, 1e3, 300)])
    bus = network.bus_volts_after(state, source, times)
    off = np.abs(bus - network.gain * source) * stage.divider
    tolerance = cents * stage.scale.volts_per_octave / 1200
    assert off.max() <= tolerance * (1 + 1e-6)
    if arrival > 0.0:
        assert off[0] == pytest.approx(tolerance, rel=1e-6)


@quick
@given(stages_with_settings(bypass=True), st.data())
def test_state_after_agrees_with_response(case, data):
    stage, setting = case
    state = np.array(data.draw(states(stage)))
    key = data.draw(key_volts(stage))
    later = stage.state_after(state, key, setting, 0.02)
    one = stage.response(state, key, setting, np.array([0.07]))
    two = stage.response(later, key, setting, np.array([0.05]))
    np.testing.assert_allclose(one, two, rtol=0, atol=1e-8)


# Values


def test_arrival_of_a_lone_rc_is_tau_ln_of_the_ratio():
    stage = lone()
    setting = Setting(0, 1.0)
    for cents in (100, 1200, 2400):
        state = stage.settled_state(0.0, setting)
        arrival = stage.arrival_s(state, cents / 1200, setting, 5.0)
        assert arrival == pytest.approx(0.1 * math.log(cents / 5), rel=1e-12)
    assert stage.octave_arrival_s(setting) == pytest.approx(0.1 * math.log(240), rel=1e-12)


def test_a_range_may_bring_its_own_series_resistor():
    stage = lone(
        ranges=(Range("shared", ("c",)), Range("own", ("c",), Resistor(10e3))),
    )
    assert stage.resistance_ohms(Setting(0, 0.0)) == 1e3
    assert stage.resistance_ohms(Setting(1, 0.0)) == 10e3
    assert stage.time_constant_s(Setting(1, 1.0)) == pytest.approx(109e-3)
    assert stage.resistance_ohms(Setting(1, 1.0, bypassed=True)) == 0.0


def test_bypass_shorts_out_the_bias_current_too():
    stage = lone(output_buffer=buffer(bias_a=1e-7))
    assert stage.settled_volts(2.0, Setting(0, 1.0)) == pytest.approx(2.0 - 0.01)
    assert stage.settled_volts(2.0, Setting(0, 1.0, bypassed=True)) == 2.0


def test_offsets_and_load_in_the_settled_volts():
    stage = lone(
        input_buffer=buffer(offset_v=3e-3),
        output_buffer=buffer(offset_v=-1e-3),
        output_series=Resistor(1e3),
        load=Resistor(99e3),
    )
    assert stage.divider == pytest.approx(0.99)
    assert stage.settled_volts(1.0, Setting()) == pytest.approx(0.99 * 1.002, rel=1e-12)


@pytest.mark.parametrize("missing", ["output_series", "load"])
def test_no_load_or_no_series_resistor_divides_nothing(missing):
    parts = {"output_series": Resistor(1e3), "load": Resistor(1e5)}
    del parts[missing]
    assert lone(**parts).divider == 1.0


def test_a_single_supply_swing_in_notes():
    stage = lone(
        supply=Supply(9.0, 0.0),
        scale=Scale(1.0, 36),
        input_buffer=buffer(headroom_positive_v=1.5, headroom_negative_v=0.5),
        output_buffer=buffer(headroom_positive_v=2.0, headroom_negative_v=0.25),
    )
    assert stage.swing_volts() == (0.5, 7.0)
    low, high = stage.swing_notes()
    assert low == pytest.approx(36 + 6)
    assert high == pytest.approx(36 + 84)


def test_notes_below_the_battery_clip_and_those_above_do_not():
    stage = load_stage("battery-9v")
    low, high = stage.swing_notes()
    assert 35.9 < low < 36.0  # C2 just passes, thanks to the offsets
    assert high > 127
    below = stage.settled_volts(stage.note_volts(24), Setting())
    further = stage.settled_volts(stage.note_volts(12), Setting())
    assert below == further
    assert stage.settled_volts(stage.note_volts(48), Setting()) > below + 0.9


def test_key_volts_beyond_the_swing_clip_at_both_buffers():
    stage = lone(
        input_buffer=buffer(headroom_positive_v=2.0, headroom_negative_v=3.0),
        output_buffer=buffer(headroom_positive_v=4.0, headroom_negative_v=1.0),
    )
    assert stage.settled_volts(20.0, Setting()) == pytest.approx(8.0)
    assert stage.settled_volts(-20.0, Setting()) == pytest.approx(-9.0)
    assert stage.source_volts(20.0, Setting()) == pytest.approx(10.0)
    np.testing.assert_allclose(stage.output_volts(np.array([-20.0, 0.0, 20.0])), [-11.0, 0.0, 8.0])


@quick
@given(stages(), st.floats(0.0, 1.0))
def test_what_is_within_the_swing_passes_both_buffers_unclipped(stage, share):
    low, high = stage.swing_volts()
    key = low + share * (high - low)
    bypassed = Setting(0, 0.5, bypassed=True)
    expected = stage.divider * (key + stage.input_buffer.offset_v + stage.output_buffer.offset_v)
    assert stage.settled_volts(key, bypassed) == pytest.approx(expected, abs=1e-9)
    for beyond in (low - 0.5, high + 0.5):
        passed = stage.divider * (
            beyond + stage.input_buffer.offset_v + stage.output_buffer.offset_v
        )
        assert abs(stage.settled_volts(beyond, bypassed) - passed) > 0.4 * stage.divider


def test_settled_parked_capacitors_rest_at_the_bus():
    stage = load_stage("three-range")
    setting = Setting(0, 0.5)
    state = stage.settled_state(2.0, setting)
    bus = stage.network(setting).gain * stage.source_volts(2.0, setting)
    np.testing.assert_allclose(state, bus, rtol=1e-6)


# Warnings


@pytest.mark.parametrize("kind", sorted(CAPACITOR_KINDS))
@pytest.mark.parametrize("negative", [-12.0, 0.0])
def test_warnings_name_the_capacitor_and_its_trouble(kind, negative):
    warned = " ".join(lone(kind, supply=Supply(12.0, negative)).warnings())
    polarised = kind in ("electrolytic", "tantalum")
    assert ("polarised" in warned) == (polarised and negative < 0)
    assert ("loses capacitance" in warned) == (kind == "x7r")
    if warned:
        assert "capacitor 'c'" in warned


# Refusals


@pytest.mark.parametrize("rotation", [-1e-9, 1.0000001, math.nan, math.inf, -math.inf])
def test_a_rotation_beyond_the_stops_is_refused(rotation):
    with pytest.raises(InputError, match=r"rotation is .*; it must be from 0 to 1"):
        Setting(0, rotation)


def test_a_negative_range_index_is_refused():
    with pytest.raises(InputError, match="range index"):
        Setting(-1)


@pytest.mark.parametrize(
    ("fields", "message"),
    [
        ({"capacitors": ()}, "the stage has none"),
        ({"ranges": ()}, "the stage has none"),
        ({"ranges": (Range("all", ()),)}, "range 'all' connects nothing"),
        ({"ranges": (Range("all", ("c", "c")),)}, "which has a name twice"),
        ({"ranges": (Range("all", ("c",)), Range("all", ("c",)))}, "range.name"),
        ({"capacitors": (Capacitor("c", 1e-6), Capacitor("c", 2e-6))}, "capacitor.name"),
        ({"input_buffer": buffer(headroom_positive_v=30.0)}, "input.buffer"),
        ({"output_buffer": buffer(headroom_negative_v=24.0)}, "output.buffer"),
    ],
)
def test_a_stage_that_cannot_be_built_is_refused(fields, message):
    with pytest.raises(InputError, match=message):
        lone(**fields)


def test_a_range_with_an_unknown_capacitor_is_named():
    with pytest.raises(UnknownNameError, match="range 'all' connects: unknown capacitor 'd'"):
        lone(ranges=(Range("all", ("d",)),))


def test_an_unknown_range_says_which_exist():
    with pytest.raises(UnknownNameError, match=r"did you mean 'slow'\? known: fast, slow"):
        load_stage("two-range-film").range_index("slo")
    assert load_stage("two-range-film").range_index("slow") == 1


@pytest.mark.parametrize("cents", [0.0, -1.0, math.nan, math.inf])
def test_an_arrival_tolerance_is_positive(cents):
    with pytest.raises(InputError, match="tolerance in cents"):
        lone().arrival_s(np.zeros(1), 1.0, Setting(), cents)


@pytest.mark.parametrize(
    "make",
    [
        lambda: Supply(0.0, -12.0),
        lambda: Supply(-12.0, 12.0),
        lambda: Supply(12.0, 1.0),
        lambda: Supply(math.nan, 0.0),
        lambda: Supply(12.0, -math.inf),
        lambda: Scale(0.0),
        lambda: Scale(math.nan),
        lambda: Scale(1.0, 128),
        lambda: Scale(1.0, -1),
        lambda: Scale(1.0, math.nan),
    ],
)
def test_supply_and_scale_refuse_what_cannot_be(make):
    with pytest.raises(InputError, match="it must be"):
        make()
