"""Several captures: ratios of parts with intervals that hold, verdicts, and the stage as built."""

from dataclasses import replace

import numpy as np
import pytest
from bench.capture_maker import Circuit, Generator, Scope, record

from livelag.bench.capture import Capture
from livelag.bench.capture_roles import find_roles
from livelag.bench.fit import Measured, fit_capture
from livelag.bench.fit_parts import (
    ROTATION_U95,
    capacitor_limits,
    fit_parts,
    law_limits,
    series_limits,
)
from livelag.bench.fit_stage import stage_as_built
from livelag.bench.fit_verdict import OPEN, OUTSIDE, WITHIN, judge, verdict
from livelag.bench.limits import Limits
from livelag.circuit.parts import Taper
from livelag.circuit.presets import load_stage, parse_stage, stage_to_toml
from livelag.circuit.stage import Setting
from livelag.errors import InputError

PLAN = load_stage("two-range-film")
POT, SERIES, SMALL, LARGE = 520e3, 1.007e3, 312e-9, 5.02e-6


def law(rotation, middle):
    if rotation < 0.5:
        return 2 * middle * rotation
    return middle + (1 - middle) * (2 * rotation - 1)


def truth(range_index, rotation, middle):
    return (SERIES + POT * law(rotation, middle)) * (SMALL + LARGE * range_index)


def measured(middle, seed, settings):
    """Time constants with errors as their intervals say, and a pot set by hand."""
    rng = np.random.default_rng(seed)
    found = []
    for range_index, rotation in settings:
        by_hand = 0.0 if rotation in (0.0, 1.0) else ROTATION_U95 / 1.96 * rng.standard_normal()
        tau = truth(range_index, rotation + by_hand, middle)
        u95 = 0.008 * tau
        value = tau + u95 / 1.96 * rng.standard_normal()
        found.append((Setting(range_index, rotation), Measured(value, u95)))
    return found


FIVE = ((0, 0.0), (0, 0.5), (0, 1.0), (1, 0.5), (1, 1.0))


@pytest.mark.parametrize("middle", [0.5, 0.13, 0.86])
def test_the_intervals_of_the_ratios_hold(middle):
    truths = (SERIES / POT, middle, (SMALL + LARGE) / SMALL)
    away = []
    for seed in range(100):
        parts = fit_parts(PLAN, measured(middle, seed, FIVE))
        found = (parts.series_ratio, parts.law_middle, parts.capacitor_ratios[1])
        away.append([abs(m.value - t) / m.u95 for m, t in zip(found, truths, strict=True)])
        assert parts.missing == ()
    held = (np.array(away) < 1.0).mean(axis=0)
    assert (held >= 0.89).all(), held  # 100 draws of 95 %: less than one time in 100
    assert np.median(away) > 0.2  # and no wider than need be


@pytest.mark.parametrize(
    ("middle", "name"), [(0.5, "linear"), (0.13, "logarithmic"), (0.86, "reverse logarithmic")]
)
def test_the_law_has_its_name(middle, name):
    parts = fit_parts(PLAN, measured(middle, 3, FIVE))
    assert parts.taper.name == name
    assert parts.taper.fraction(0.5) == pytest.approx(middle, abs=0.02)


@pytest.mark.parametrize(
    ("settings", "told", "missing"),
    [
        (((0, 1.0), (1, 1.0)), (False, False, True), "series resistor stays as planned"),
        (((0, 0.0), (0, 1.0)), (True, False, False), "pot's law stays as planned"),
        (((0, 0.0), (1, 0.0), (1, 1.0)), (True, False, True), "pot's law stays as planned"),
        (((0, 0.0), (0, 0.3), (0, 1.0)), (True, True, False), ""),
    ],
)
def test_what_the_captures_cannot_tell_stays_as_planned_and_is_said(settings, told, missing):
    parts = fit_parts(PLAN, measured(0.5, 1, settings))
    found = (
        parts.series_ratio is not None, parts.law_middle is not None, bool(parts.capacitor_ratios)
    )  # fmt: skip
    assert found == told
    assert missing in " ".join(parts.missing)


def test_one_setting_twice_is_refused():
    with pytest.raises(InputError, match="several captures of one setting tell no more than one"):
        fit_parts(PLAN, measured(0.5, 1, ((0, 0.5), (0, 0.5))))


def test_a_series_resistor_for_each_range_stays_as_planned():
    own = replace(
        PLAN, ranges=(PLAN.ranges[0], replace(PLAN.ranges[1], series=PLAN.series))
    )  # fmt: skip
    parts = fit_parts(own, measured(0.5, 1, FIVE))
    assert parts.series_ratio is None
    assert "series resistors of their own" in parts.missing[0]


def test_limits_of_the_ratios_are_the_worst_corners():
    series = series_limits(PLAN)
    assert series.nominal == pytest.approx(1002 / 470e3)
    assert series.low == pytest.approx(990 / 564e3 + 2 / 470e3)
    assert series.high == pytest.approx(1010 / 376e3 + 2 / 470e3)
    ratio = capacitor_limits(PLAN, 1, 0)
    assert ratio.low == pytest.approx(1 + 4.7 * 0.9 / (0.33 * 1.1))
    assert ratio.high == pytest.approx(1 + 4.7 * 1.1 / (0.33 * 0.9))
    assert law_limits(load_stage("one-range-log")).nominal == 0.13


# Verdicts


def capture(circuit, seed=1, scale=1.0):
    tau = circuit.time_constant_s
    scope = Scope(800, tau / 100, -tau, seed=seed)
    times, before, after = record(circuit, Generator((0.0, 4.0), (tau / 300,)), scope)
    roles = find_roles(Capture("c.csv", times, ("in", "out"), np.array([before, scale * after])))
    return fit_capture("c.csv", roles)


HALF = Setting(0, 0.5)


def said(circuit, setting=HALF, accuracy=0.03, **how):
    lines = verdict(PLAN, setting, capture(circuit, **how), accuracy)
    return {line.key: line for line in lines}


GOOD = Circuit(236e3, 330e-9, divider=0.999)


def test_a_good_stage_is_within():
    assert OUTSIDE not in {line.verdict for line in said(GOOD).values()}


def test_the_other_range_is_recognised():
    suspect = said(GOOD, Setting(1, 0.5))["time_constant_s"].suspect
    assert "as of range 'fast' at this rotation" in suspect


@pytest.mark.parametrize(("capacitance", "word"), [(470e-9, "too large"), (220e-9, "too small")])
def test_a_wrong_capacitor_is_suspected(capacitance, word):
    lines = said(Circuit(236e3, capacitance, divider=0.999))
    assert lines["time_constant_s"].verdict == OUTSIDE
    assert f"capacitor 'small' is {word}" in lines["time_constant_s"].suspect
    assert lines["rise_s"].verdict == OUTSIDE
    assert lines["gain"].verdict in (WITHIN, OPEN)


def test_a_wrong_series_resistor_is_suspected_at_rotation_0():
    lines = said(Circuit(2.2e3, 330e-9), Setting(0, 0.0))
    assert "the series resistor or capacitor" in lines["time_constant_s"].suspect


def test_gain_and_offset_allow_for_the_oscilloscope():
    low = Circuit(236e3, 330e-9, divider=0.98)
    assert said(low)["gain"].verdict == OPEN
    assert said(low, accuracy=0.001)["gain"].verdict == OUTSIDE
    drifted = Circuit(236e3, 330e-9, offset_out_v=0.5)
    assert said(drifted)["offset_v"].verdict == OUTSIDE
    assert "bias current" in said(drifted)["offset_v"].suspect


def test_a_probe_set_otherwise_is_recognised():
    assert "set to x10" in said(GOOD, scale=0.1)["gain"].suspect
    assert "upside down" in said(GOOD, scale=-1.0)["gain"].suspect


def test_judge():
    limits = Limits(1.0, 0.9, 1.1)
    assert [judge(v, 0.05, limits) for v in (0.9, 1.12, 0.84, 1.16)] == [
        WITHIN, OPEN, OUTSIDE, OUTSIDE,
    ]  # fmt: skip


# As built


def test_one_capture_scales_its_capacitors_only():
    circuit = Circuit(500e3, 5e-6)
    fit = capture(circuit)
    built = stage_as_built(PLAN, [(Setting(1, 0.7), fit)], None)
    assert built.time_constant_s(Setting(1, 0.7)) == pytest.approx(fit.time_constant_s.value)
    small, large = (part.capacitance_f for part in built.capacitors)
    assert small / large == pytest.approx(0.33 / 4.7)  # both alike
    assert built.pot == PLAN.pot
    assert built.output_buffer == PLAN.output_buffer
    assert "the whole difference" in built.about
    assert parse_stage(stage_to_toml(built), "x") == built


def test_several_captures_give_the_stage_its_parts():
    found = measured(0.13, 5, FIVE)
    parts = fit_parts(PLAN, found)
    fit = capture(GOOD)
    fits = [(setting, replace(fit, time_constant_s=tau)) for setting, tau in found]
    built = stage_as_built(PLAN, fits, parts)
    for range_index, rotation in FIVE:
        planned = truth(range_index, rotation, 0.13)
        assert built.time_constant_s(Setting(range_index, rotation)) == pytest.approx(
            planned,
            rel=0.05,  # a hand is off by 1 % of the turn, where the track is flat
        )
    assert built.pot.taper.name == "logarithmic"
    assert parse_stage(stage_to_toml(built), "x") == built


def test_gain_and_offset_are_carried_where_they_can_be_told():
    circuit = Circuit(236e3, 330e-9, divider=0.97, offset_out_v=0.05)
    fit = capture(circuit)
    setting = Setting(0, 0.5)
    built = stage_as_built(PLAN, [(setting, fit)], None, volts_accuracy=0.001)
    for volts in (0.0, 3.0):
        expected = fit.gain.value * volts + fit.offset_v.value
        assert built.settled_volts(volts, setting) == pytest.approx(expected, abs=1e-6)
    vague = stage_as_built(PLAN, [(setting, fit)], None, volts_accuracy=0.05)
    assert (vague.load, vague.output_buffer) == (PLAN.load, PLAN.output_buffer)
    assert parse_stage(stage_to_toml(built), "x") == built


def test_a_gain_no_stage_has_is_left_as_planned():
    built = stage_as_built(PLAN, [(Setting(0, 0.5), capture(GOOD, scale=10.0))], None)
    assert built.divider == PLAN.divider
    assert "cannot come from the stage" in built.about


def test_absorption_that_shows_is_built_in():
    circuit = Circuit(200e3, 1e-6, ((0.10, 0.8),))
    scope = Scope(1500, 4e-3, -0.3, (0.005, 0.005), (0.01, 0.01))
    times, *volts = record(circuit, Generator((0.0, 4.0), (1e-3,)), scope)
    fit = fit_capture("c.csv", find_roles(Capture("c.csv", times, ("a", "b"), np.array(volts))))
    built = stage_as_built(PLAN, [(Setting(0, 0.5), fit)], None)
    (branch,) = built.capacitors[0].branches
    assert branch.fraction == pytest.approx(0.10, abs=0.03)
    assert branch.time_s == pytest.approx(0.8, rel=0.2)
    assert built.capacitors[1] == PLAN.capacitors[1]


def test_captures_mixed_up_are_named():
    found = [
        (Setting(0, 1.0), Measured(2.0, 0.01)),
        (Setting(1, 1.0), Measured(0.15, 0.001)),
    ]
    parts = fit_parts(PLAN, found)
    fit = capture(GOOD)
    with pytest.raises(InputError, match="check that each capture is given with its own range"):
        stage_as_built(PLAN, [(setting, fit) for setting, _ in found], parts)


def test_a_measured_taper_stays():
    taper = Taper.measured((0.0, 0.4, 1.0), (0.0, 0.3, 1.0))
    plan = replace(PLAN, pot=replace(PLAN.pot, taper=taper))
    parts = fit_parts(plan, measured(0.5, 1, FIVE))
    assert parts.law_middle is None
    assert parts.taper is taper
