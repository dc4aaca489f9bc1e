"""Limits of what a built stage may measure."""

from dataclasses import replace
from itertools import product

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from strategies import stages_with_settings

from livelag.bench.limits import Limits, WorstCase, setting_limits
from livelag.bench.ranges import rise_s
from livelag.bench.spread import spread
from livelag.bench.tuning import Compass, tuning_at
from livelag.circuit.parts import Buffer, Capacitor, Pot, Resistor
from livelag.circuit.presets import load_stage, preset_names
from livelag.circuit.stage import GlideStage, Range, Setting
from livelag.units import cents_to_volts

FILM = load_stage("two-range-film")
PRESETS = [load_stage(name) for name in preset_names()]
TURNS = (0.0, 0.25, 0.5, 0.75, 1.0)


def all_limits(stage):
    worst = WorstCase(stage)
    for index in range(len(stage.ranges)):
        for turn in TURNS:
            yield Setting(index, turn), worst.limits(Setting(index, turn))


def test_limits_hold_what_is_between_them():
    limits = Limits(1.0, 0.8, 1.3)
    assert [limits.holds(x) for x in (0.79, 0.8, 1.0, 1.3, 1.31)] == [
        False, True, True, True, False,
    ]  # fmt: skip
    assert limits.holds(0.79, allowance=0.02)
    assert not limits.holds(float("nan"))


def test_two_parts_by_hand():
    """1 kohm 1 %, 99 kohm pot 20 % half turned, 1 uF 10 %: no errors but the tolerances.

    tau = 50.5 k x 1 u; low 0.9 u (0.99 k + 0.8 x 49.5 k), high 1.1 u (1.01 k + 1.2 x 49.5 k);
    10-90 % of a lone RC is ln 9 tau.
    """
    stage = GlideStage(
        title="by hand",
        capacitors=(Capacitor("only", 1e-6, "ideal", 0.1),),
        ranges=(Range("all", ("only",)),),
        pot=Pot(99e3, tolerance=0.2),
        series=Resistor(1e3, 0.01),
        output_buffer=Buffer("custom", 1e-3, 0.0, 1.0, 1.0, 4e-3, 2e-7),
        output_series=Resistor(1e3, 0.05),
        load=Resistor(99e3, 0.05),
    )
    found = setting_limits(stage, Setting(0, 0.5))
    expected = (50.5e-3, 36.531e-3, 66.451e-3)
    assert astuple(found.time_constant_s) == pytest.approx(expected)
    assert astuple(found.rise_s) == pytest.approx([np.log(9.0) * tau for tau in expected])
    low, high = 94.05 / (94.05 + 1.05), 103.95 / (103.95 + 0.95)
    assert astuple(found.gain) == pytest.approx((0.99, low, high))
    reach = high * (4e-3 + 2e-7 * (1.01e3 + 1.2 * 49.5e3))
    assert astuple(found.offset_v) == pytest.approx((0.99e-3, -reach, reach))


def astuple(limits):
    return limits.nominal, limits.low, limits.high


@pytest.mark.parametrize("stage", PRESETS, ids=preset_names())
def test_ends_of_the_pot_are_the_corners_of_the_spread(stage):
    result = spread(stage, 2, 1)
    for setting, found in all_limits(stage):
        if setting.rotation in (0.0, 1.0):
            row = result.of(found.range_name, "longest" if setting.rotation else "shortest")
            expected = (row.nominal, row.lowest, row.highest)
            assert astuple(found.time_constant_s) == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize("stage", PRESETS, ids=preset_names())
def test_nominal_is_the_stage_as_designed(stage):
    for setting, found in all_limits(stage):
        assert found.rise_s.nominal == rise_s(stage, setting)
        assert found.gain.nominal == pytest.approx(
            stage.settled_volts(3.0, setting) - stage.settled_volts(2.0, setting), rel=1e-12
        )
        at_zero = 2.0 * stage.settled_volts(1.0, setting) - stage.settled_volts(2.0, setting)
        assert found.offset_v.nominal == pytest.approx(at_zero, abs=1e-12)


@pytest.mark.parametrize("stage", PRESETS, ids=preset_names())
def test_scale_and_offset_reach_the_worst_of_the_tuning(stage):
    """The desk's tuning sums sizes: at least as much as any corner, and hardly more."""
    compass = Compass.above_zero_volts(stage)
    for setting, found in all_limits(stage):
        worst = tuning_at(stage, setting, compass).limits
        loss = cents_to_volts(worst.worst_scale_cents_per_octave)
        assert 1.0 - found.gain.low == pytest.approx(loss, rel=2e-3, abs=1e-12)
        most = cents_to_volts(worst.worst_offset_cents)
        # A corner has one load and one leakage, where the tuning takes each cause's worst.
        assert found.offset_v.high == pytest.approx(most, rel=0.15, abs=1e-12)


def some_build(stage, draw):
    """A stage whose parts are anywhere inside their tolerances, each on its own."""

    def within(part):
        return part and Resistor(part.resistance_ohms * (1 + part.tolerance * draw()), 0.0)

    turn = 1 + stage.pot.tolerance * draw()
    pot = replace(
        stage.pot,
        resistance_ohms=stage.pot.resistance_ohms * turn,
        end_ohms=stage.pot.end_ohms * turn,
    )
    capacitors = []
    for part in stage.capacitors:
        farads = part.capacitance_f * (1 + part.tolerance * draw())
        leak = part.kind_data.leakage_siemens(part.capacitance_f, worst=True) * (draw() + 1) / 2
        insulation = part.insulation_ohms or (1.0 / leak if leak > 1e-18 else 1e18)
        capacitors.append(replace(part, capacitance_f=farads, insulation_ohms=insulation))
    return replace(
        stage, pot=pot, series=within(stage.series), capacitors=tuple(capacitors),
        ranges=tuple(replace(row, series=within(row.series)) for row in stage.ranges),
        bleed=within(stage.bleed), output_series=within(stage.output_series),
        load=within(stage.load),
    )  # fmt: skip


def assert_holds(stage, setting, build, found):
    slack = 1e-9
    for limits, value in (
        (found.time_constant_s, build.time_constant_s(setting)),
        (found.rise_s, rise_s(build, setting)),
        (found.gain, build.divider * build.network(setting).gain),
    ):
        assert limits.holds(value, slack * limits.nominal), (limits, value)


@pytest.mark.parametrize("stage", PRESETS, ids=preset_names())
def test_limits_are_the_extremes_of_every_corner_of_every_part(stage):
    """All 2^parts corners, each capacitor, resistor and leakage on its own."""
    setting = Setting(len(stage.ranges) - 1, 0.5)
    found = setting_limits(stage, setting)
    seen = []
    for signs in product((-1.0, 1.0), repeat=4 + 2 * len(stage.capacitors) + bool(stage.bleed)):
        cycle = iter(signs)
        build = some_build(stage, lambda cycle=cycle: next(cycle))
        gain = build.divider * build.network(setting).gain
        seen.append((build.time_constant_s(setting), rise_s(build, setting), gain))
    for limits, values in zip(
        (found.time_constant_s, found.rise_s, found.gain), np.transpose(seen), strict=True
    ):
        least, most = min(limits.nominal, values.min()), max(limits.nominal, values.max())
        assert (limits.low, limits.high) == pytest.approx((least, most), rel=1e-11)


@settings(deadline=None, max_examples=50)
@given(stages_with_settings(), st.randoms(use_true_random=False))
def test_any_build_of_any_stage_is_within(at, random):
    stage, setting = at
    found = setting_limits(stage, setting)
    for _ in range(5):
        build = some_build(stage, lambda: random.uniform(-1.0, 1.0))
        assert_holds(stage, setting, build, found)


@pytest.mark.parametrize("stage", PRESETS, ids=preset_names())
def test_steps_of_any_build_stay_in_the_band(stage):
    rng = np.random.default_rng(4)
    for index in range(len(stage.ranges)):
        setting = Setting(index, 0.5)
        tau = stage.time_constant_s(setting)
        times = np.concatenate([[0.0], np.geomspace(0.01, 2000.0, 60)]) * tau
        for start, end in ((1.0, 3.0), (3.0, 1.0)):
            nominal, low, high = WorstCase(stage).step_volts(setting, start, end, times)
            designed = stage.response(stage.settled_state(start, setting), end, setting, times)
            assert nominal == pytest.approx(designed, abs=1e-12)
            for _ in range(20):
                build = some_build(stage, lambda: rng.uniform(-1.0, 1.0))
                state = build.settled_state(start, setting)
                seen = build.response(state, end, setting, times)
                assert (seen >= low - 1e-9).all()
                assert (seen <= high + 1e-9).all()


def test_a_fitted_decay_may_read_what_leaks_and_soaks():
    stage = load_stage("two-range-bipolar")
    found = setting_limits(stage, Setting(1, 1.0))
    assert found.shown_time_constant_s.low < found.time_constant_s.low
    assert found.shown_time_constant_s.high > found.time_constant_s.high
    ideal = setting_limits(load_stage("ideal"), Setting(1, 1.0))
    assert ideal.shown_time_constant_s == ideal.time_constant_s
