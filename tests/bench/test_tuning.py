"""Tuning error by cause, against the stage's own settled volts."""

import math
from dataclasses import replace

import pytest

from livelag.bench.tuning import (
    CAUSES,
    OFFSET_CAUSES,
    SCALE_CAUSES,
    Compass,
    leakage_siemens,
    tuning_along_pot,
    tuning_at,
)
from livelag.circuit.parts import Buffer, Capacitor, Resistor
from livelag.circuit.presets import load_stage, preset_names
from livelag.circuit.stage import Scale, Setting, Supply
from livelag.errors import InputError
from livelag.units import volts_to_cents

FILM = load_stage("two-range-film")


def error_cents(stage, note, setting):
    """What a held note is off, straight from the network."""
    key = stage.note_volts(note)
    return volts_to_cents(stage.settled_volts(key, setting) - key, stage.scale.volts_per_octave)


@pytest.mark.parametrize("preset", preset_names())
@pytest.mark.parametrize("rotation", [0.0, 0.4, 1.0])
def test_causes_add_up_to_what_the_stage_does(preset, rotation):
    stage = load_stage(preset)
    compass = Compass.above_zero_volts(stage)
    for index in range(len(stage.ranges)):
        setting = Setting(index, rotation)
        row = tuning_at(stage, setting, compass)
        assert set(row.causes) == set(CAUSES)
        low, high = (error_cents(stage, note, setting) for note in (48, 72))
        # Two octaves apart, one octave above 0 V.
        assert row.scale_cents_per_octave == pytest.approx((high - low) / 2, abs=1e-6)
        assert row.offset_cents == pytest.approx(low - (high - low) / 2, abs=1e-6)
        assert row.causes["swing"] == 0.0


def test_an_ideal_stage_is_in_tune():
    row = tuning_at(load_stage("ideal"), Setting(0, 1.0), Compass(36, 96))
    assert all(abs(error) < 1e-9 for error in row.causes.values())


def test_signs():
    row = tuning_at(load_stage("bipolar-drift"), Setting(0, 1.0), Compass(36, 96))
    assert row.causes["input_offset"] > 0.0
    assert row.causes["bias_current"] < 0.0  # drawn from the bus through R
    assert row.causes["insulation"] < 0.0
    assert row.causes["output_divider"] < 0.0


def test_cents_go_by_the_volts_per_octave():
    double = replace(FILM, scale=Scale(2.0, 36))
    one, two = (tuning_at(s, Setting(1, 1.0), Compass(36, 96)) for s in (FILM, double))
    assert two.offset_cents == pytest.approx(one.offset_cents / 2)
    assert two.scale_cents_per_octave == pytest.approx(one.scale_cents_per_octave)


def test_leakage_through_a_bleed_resistor_is_what_the_network_settles_with():
    stage = load_stage("bleed-film")
    leaky = replace(
        stage, capacitors=tuple(replace(c, insulation_ohms=20e6) for c in stage.capacitors)
    )
    for index in (0, 1):
        setting = Setting(index, 1.0)
        drop = leakage_siemens(leaky, index) * leaky.resistance_ohms(setting)
        assert 1.0 / (1.0 + drop) == pytest.approx(leaky.network(setting).gain, rel=1e-9)


def test_swing_counts_what_is_cut_off_the_end_of_the_compass():
    low_supply = replace(FILM, supply=Supply(5.0, -12.0))  # 3.5 V is the highest output
    setting = Setting(0, 0.0)
    row = tuning_at(low_supply, setting, Compass(36, 84))
    uncut = tuning_at(FILM, setting, Compass(36, 84))
    full = error_cents(low_supply, 84, setting)
    straight = uncut.offset_cents + 4 * uncut.scale_cents_per_octave
    assert row.causes["swing"] == pytest.approx(full - straight, abs=1e-6)
    assert row.causes["swing"] < -500.0
    assert row.dominant == "swing"
    below = tuning_at(replace(FILM, supply=Supply(12.0, -3.0)), setting, Compass(36, 48))
    assert below.causes["swing"] > 0.0  # 0 V is not reached: sharp


def test_worth_counts_scale_causes_over_the_compass():
    row = tuning_at(FILM, Setting(0, 0.0), Compass(36, 96))
    assert row.worth_cents["output_divider"] == pytest.approx(-5 * row.causes["output_divider"])
    assert row.worth_cents["input_offset"] == pytest.approx(row.causes["input_offset"])
    assert row.dominant == "output_divider"
    near = tuning_at(FILM, Setting(0, 0.0), Compass(36, 48))
    assert near.dominant in OFFSET_CAUSES


def test_limits_are_the_data_sheets_maxima():
    limits = tuning_at(load_stage("bipolar-drift"), Setting(0, 1.0), Compass(36, 96)).limits
    # 500 nA through 1.05 x 1 kohm and 1.2 x 1 Mohm, 1 % resistors before the load.
    divider = 99e3 / (99e3 + 1010)
    bias = 1200 * divider * 500e-9 * (1.05e3 + 1.2e6)
    assert limits.causes["bias_current"] == pytest.approx(bias, rel=1e-3)  # the leak takes 0.04 %
    assert limits.causes["input_offset"] == pytest.approx(1200 * divider * 5e-3, rel=1e-3)
    assert limits.causes["output_divider"] == pytest.approx(1200 * (1 - divider))


@pytest.mark.parametrize("preset", preset_names())
def test_worst_case_is_the_sum_and_never_less_than_the_root_or_the_typical(preset):
    stage = load_stage(preset)
    for row in tuning_along_pot(stage, (0.0, 0.5, 1.0), Compass.above_zero_volts(stage)):
        limits = row.limits
        sizes = [limits.causes[cause] for cause in OFFSET_CAUSES]
        assert limits.worst_offset_cents == pytest.approx(sum(sizes))
        assert limits.rss_offset_cents == pytest.approx(math.sqrt(sum(s * s for s in sizes)))
        sizes = [limits.causes[cause] for cause in SCALE_CAUSES]
        assert limits.worst_scale_cents_per_octave == pytest.approx(sum(sizes))
        assert limits.rss_scale_cents_per_octave <= limits.worst_scale_cents_per_octave
        assert abs(row.offset_cents) <= limits.worst_offset_cents + 1e-12
        assert abs(row.scale_cents_per_octave) <= limits.worst_scale_cents_per_octave + 1e-12


def test_a_measured_insulation_has_no_worse_limit():
    measured = replace(
        FILM, capacitors=tuple(Capacitor(c.name, c.capacitance_f, c.kind, 0.0, 1e9)
                               for c in FILM.capacitors)
    )  # fmt: skip
    assert leakage_siemens(measured, 1, worst=True) == leakage_siemens(measured, 1) == 2e-9
    assert leakage_siemens(FILM, 1, worst=True) > leakage_siemens(FILM, 1)


def test_part_values_at_the_edge_have_limits_too():
    edge = replace(FILM, load=Resistor(1e12, 0.9), series=Resistor(1e12, 0.9))
    assert tuning_at(edge, Setting(0, 1.0), Compass(36, 96)).limits.worst_offset_cents > 0.0


def test_along_the_pot_goes_range_by_range():
    rows = tuning_along_pot(FILM, (0.0, 1.0), Compass(36, 96))
    assert [(row.range_name, row.rotation) for row in rows] == [
        ("fast", 0.0), ("fast", 1.0), ("slow", 0.0), ("slow", 1.0),
    ]  # fmt: skip


def test_compass_is_five_octaves_up_from_zero_volts():
    assert Compass.above_zero_volts(FILM) == Compass(36, 96)
    assert Compass.above_zero_volts(replace(FILM, scale=Scale(1.0, 100))) == Compass(100, 127)
    assert Compass.above_zero_volts(replace(FILM, scale=Scale(1.0, 127))) == Compass(126, 127)
    assert Compass(24, 60).octaves(FILM) == 2.0
    assert Compass(24, 36).octaves(FILM) == 1.0


@pytest.mark.parametrize(("low", "high"), [(60, 60), (61, 60), (-1, 60), (0, 128)])
def test_a_compass_that_is_none_is_refused(low, high):
    with pytest.raises(InputError, match="notes are"):
        Compass(low, high)


def test_a_custom_buffer_counts_by_its_own_figures():
    buffer = replace(Buffer.of_class("ideal"), name="custom", offset_v=-2e-3, offset_limit_v=4e-3)
    row = tuning_at(
        replace(load_stage("ideal"), input_buffer=buffer), Setting(0, 0.5), Compass(36, 96)
    )
    assert row.offset_cents == pytest.approx(-2.4)
    assert row.limits.worst_offset_cents == pytest.approx(4.8)
