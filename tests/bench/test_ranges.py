"""Times of ranges, how neighbours meet, and where the pot's travel goes."""

import math
from dataclasses import replace

import numpy as np
import pytest

from livelag.bench.ranges import (
    AUDIBLE_S,
    all_range_times,
    all_travel,
    audible_from,
    neighbours,
    rise_s,
    tapers_beside,
    travel_shares,
    with_taper,
)
from livelag.circuit.parts import Capacitor, Pot, Resistor, Taper
from livelag.circuit.presets import load_stage, preset_names
from livelag.circuit.stage import GlideStage, Range, Setting


def lone(capacitance_f=1e-6, pot=None, **fields):
    """An ideal capacitor behind 1 kohm + 99 kohm."""
    parts = {
        "title": "lone",
        "capacitors": (Capacitor("c", capacitance_f),),
        "ranges": (Range("all", ("c",)),),
        "pot": pot or Pot(99e3),
        "series": Resistor(1e3),
    }
    return GlideStage(**{**parts, **fields})


def many_ranges(*sizes_f):
    """One capacitor to a range, ratio 100 from end to end."""
    names = [f"c{n}" for n in range(len(sizes_f))]
    return lone(
        capacitors=tuple(Capacitor(n, c) for n, c in zip(names, sizes_f, strict=True)),
        ranges=tuple(Range(n, (n,)) for n in names),
    )


@pytest.mark.parametrize("rotation", [0.0, 0.3, 1.0])
def test_rise_of_a_lone_rc(rotation):
    stage = lone()
    tau = stage.time_constant_s(Setting(0, rotation))
    assert rise_s(stage, Setting(0, rotation)) == pytest.approx(math.log(9) * tau, rel=1e-9)


def test_absorption_makes_the_rise_longer():
    plain = lone()
    soaked = replace(plain, capacitors=(Capacitor("c", 1e-6, "bipolar electrolytic"),))
    assert rise_s(soaked, Setting(0, 1.0)) > 1.04 * rise_s(plain, Setting(0, 1.0))


def test_the_rise_is_where_the_response_passes_ten_and_ninety_per_cent():
    stage = load_stage("two-range-bipolar")
    setting = Setting(1, 0.4)
    network = stage.network(setting)
    times = np.linspace(0.0, 10.0, 200_001)
    response = network.bus_volts_after(np.zeros(stage.wiring.state_count), 1.0, times)
    low, high = np.interp([0.1, 0.9], response / network.gain, times)
    assert rise_s(stage, setting) == pytest.approx(high - low, abs=1e-4)


def test_ends_are_those_of_the_stage():
    stage = load_stage("three-range")
    for index, row in enumerate(all_range_times(stage)):
        assert row.name == stage.range_names[index]
        assert row.capacitance_f == stage.capacitance_f(index)
        assert row.fastest.time_constant_s == stage.time_constant_s(Setting(index, 0.0))
        assert row.slowest.octave_arrival_s == stage.octave_arrival_s(Setting(index, 1.0))


def test_neighbours_overlap_or_leave_a_gap():
    (join,) = neighbours(many_ranges(1e-6, 10e-6))
    assert (join.faster, join.slower) == ("c0", "c1")
    assert join.overlap_ratio == pytest.approx(10.0)
    (join,) = neighbours(many_ranges(1e-6, 200e-6))
    assert join.overlap_ratio == pytest.approx(0.5)
    assert neighbours(lone()) == ()


def test_neighbours_go_by_time_not_by_switch_order():
    assert [row.slower for row in neighbours(many_ranges(10e-6, 1e-6, 100e-6))] == ["c0", "c2"]


def test_a_wide_range_reaches_past_a_narrow_one_inside_it():
    stage = lone(
        capacitors=(Capacitor("a", 1e-6), Capacitor("b", 2e-6), Capacitor("c", 50e-6)),
        ranges=(
            Range("wide", ("a",)),
            Range("late", ("c",)),
            # Starts after the wide one and ends before it.
            Range("narrow", ("a",), Resistor(1.01e3)),
        ),
    )
    narrow_pot = replace(stage, ranges=(*stage.ranges[:2], Range("narrow", ("b",), Resistor(2e3))))
    joins = neighbours(narrow_pot)
    assert [row.slower for row in joins] == ["narrow", "late"]
    assert joins[0].faster == "wide"
    assert joins[1].faster == "narrow"  # 101 kohm x 2 uF reaches further than 100 kohm x 1 uF
    assert neighbours(stage)[1].faster == "narrow"
    shorter = replace(stage, ranges=(Range("wide", ("a",)), Range("late", ("c",))))
    assert neighbours(shorter)[0].overlap_ratio == pytest.approx(2.0)


def test_audible_from_where_an_octave_takes_ten_milliseconds():
    stage = lone(0.1e-6)  # 0.1 to 10 ms
    rotation = audible_from(stage, 0)
    # An octave of a lone RC is within 5 cents after ln(1200/5) time constants.
    tau = AUDIBLE_S / math.log(240.0)
    assert stage.time_constant_s(Setting(0, rotation)) == pytest.approx(tau, rel=1e-6)


def test_audible_always_or_never():
    assert audible_from(lone(100e-6), 0) == 0.0
    assert audible_from(lone(1e-9), 0) is None


@pytest.mark.parametrize("preset", preset_names())
def test_travel_adds_up_to_the_whole_turn(preset):
    stage = load_stage(preset)
    rows = all_travel(stage)
    assert len(rows) == len(stage.ranges) * len(tapers_beside(stage))
    for row in rows:
        assert sum(row.shares.values()) == pytest.approx(1.0)
        assert all(share >= 0.0 for share in row.shares.values())
    assert sum(row.fitted for row in rows) == len(stage.ranges)


@pytest.mark.parametrize("preset", preset_names())
def test_travel_is_what_counting_rotations_gives(preset):
    stage = load_stage(preset)
    turns = (np.arange(4000) + 0.5) / 4000
    for taper in tapers_beside(stage):
        fitted = with_taper(stage, taper)
        for index in range(len(stage.ranges)):
            taus = [fitted.time_constant_s(Setting(index, float(turn))) for turn in turns]
            decades = np.floor(np.log10(taus)).astype(int)
            for decade, share in travel_shares(fitted, index).items():
                assert share == pytest.approx(np.mean(decades == decade), abs=6e-4)


def test_other_tapers_stand_beside_the_fitted_one():
    names = [taper.name for taper in tapers_beside(lone(pot=Pot(1e5, Taper.logarithmic(0.1))))]
    assert names == ["logarithmic", "linear", "reverse logarithmic"]
    assert len(tapers_beside(load_stage("ceramic-budget"))) == 4
