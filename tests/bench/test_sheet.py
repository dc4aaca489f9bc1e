"""The bench sheet in numbers."""

import math
from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from hypothesis import given, settings
from sheet_stages import CROWDED, FILM, SPARE, WORDY
from strategies import stages

from livelag.bench.limits import WorstCase
from livelag.bench.sheet import MOST_CAPACITORS, MOST_RANGES, ROTATIONS, bench_sheet
from livelag.bench.sheet_signals import HURRIED, SETTLED, levels, square_volts
from livelag.circuit.parts import Capacitor, Pot, Resistor
from livelag.circuit.presets import load_stage, preset_names
from livelag.circuit.stage import GlideStage, Range, Setting, Supply
from livelag.errors import InputError

STAGES = {name: load_stage(name) for name in preset_names()}
STAGES |= {"wordy": WORDY, "crowded": CROWDED, "spare": SPARE}
sheet_of = cache(bench_sheet)  # the same stages are looked at by several tests
every_stage = pytest.mark.parametrize("stage", STAGES.values(), ids=STAGES)


def in_order(limits):
    return limits.low <= limits.nominal <= limits.high


@every_stage
def test_a_row_for_every_range_and_rotation(stage):
    sheet = sheet_of(stage)
    found = [(row.limits.range_name, row.limits.rotation) for row in sheet.rows]
    assert found == [(name, turn) for name in stage.range_names for turn in ROTATIONS]
    assert [row.range_name for row in sheet.signals] == list(stage.range_names)


@every_stage
def test_levels_pass_every_build_unclipped(stage):
    """No corner comes nearer to a rail than its buffers follow; eq. 1 of the limits by hand."""
    worst = WorstCase(stage)
    at = levels(worst)
    for corner in worst.corners:
        for index in range(len(stage.ranges)):
            drop = stage.output_buffer.bias_limit_a * corner.resistance_ohms(Setting(index, 1.0))
            offsets = stage.input_buffer.offset_limit_v + stage.output_buffer.offset_limit_v
            for volts in (at.low_v - drop - offsets, at.high_v + drop + offsets):
                for buffer in (stage.input_buffer, stage.output_buffer):
                    low = stage.supply.negative_v + buffer.headroom_negative_v
                    high = stage.supply.positive_v - buffer.headroom_positive_v
                    assert low <= volts <= high
    assert at.low_v > 0.0  # a polarised capacitor is never reversed


@every_stage
def test_slow_signals_settle_and_fast_ones_cannot(stage):
    sheet = sheet_of(stage)
    for row in sheet.rows:
        half_s = 0.5 / row.square_hz
        assert SETTLED <= half_s / row.limits.time_constant_s.high <= 1.11 * SETTLED
    for row, full in zip(sheet.signals, sheet.rows[4::5], strict=True):
        tau = full.limits.time_constant_s
        assert row.settle_hz == full.square_hz
        assert row.stair_s >= SETTLED * tau.high
        assert 0.5 / row.hurried_hz <= HURRIED * tau.low


def test_a_lone_rc_by_hand():
    """10 kohm and 1 uF, no errors: every number of the sheet from its formula.

    After 1 tau 1 - 1/e of the step of 4 V (1 V to 5 V), and under a fast square wave a swing of
    4 tanh(T / (2 tau)) about the mean of 3 V (first-order lag in steady state).
    """
    stage = GlideStage(
        title="by hand",
        capacitors=(Capacitor("only", 1e-6, "ideal", 0.0),),
        ranges=(Range("all", ("only",)),),
        pot=Pot(9e3, tolerance=0.0),
        series=Resistor(1e3, 0.0),
    )
    sheet = bench_sheet(stage)
    full, (signals,) = sheet.rows[4], sheet.signals
    assert full.limits.time_constant_s.nominal == pytest.approx(10e-3)
    assert full.limits.rise_s.nominal == pytest.approx(10e-3 * math.log(9.0))
    assert full.after_v.nominal == pytest.approx(5.0 - 4.0 / math.e)
    assert full.square_hz == 7.1  # 1 / (14 x 10 ms), to two digits, rounded down
    assert full.settled_v.nominal == pytest.approx(5.0 - 4.0 * math.exp(-0.5 / 7.1 / 10e-3))
    assert signals.hurried_hz == pytest.approx(100.0)  # levels of 5 ms
    assert signals.swing_v.nominal == pytest.approx(4.0 * math.tanh(0.25))
    assert signals.crest_v.nominal == pytest.approx(3.0 + 2.0 * math.tanh(0.25))
    assert signals.trough_v.nominal == pytest.approx(3.0 - 2.0 * math.tanh(0.25))


@every_stage
def test_every_expectation_is_within_its_limits(stage):
    sheet = sheet_of(stage)
    for row in sheet.rows:
        assert in_order(row.after_v)
        assert in_order(row.settled_v)
        assert row.after_v.nominal < row.settled_v.nominal
    for row in sheet.signals:
        assert all(map(in_order, (*row.stairs, row.trough_v, row.crest_v, row.swing_v)))
        assert row.swing_v.high < sheet.levels.high_v - sheet.levels.low_v
        rising = [found.nominal for found in row.stairs]
        assert rising == sorted(rising)


@every_stage
def test_traces_lie_in_their_bands_and_join_up(stage):
    for trace in sheet_of(stage).traces:
        assert (trace.low_v <= trace.nominal_v + 1e-12).all()
        assert (trace.nominal_v <= trace.high_v + 1e-12).all()
        assert np.abs(np.diff(trace.nominal_v)).max() < 0.3  # a lag does not jump
        assert (np.diff(trace.times_s) > 0.0).all()


@pytest.mark.parametrize("name", ["two-range-film", "bipolar-drift", "two-range-bipolar"])
def test_fast_traces_of_any_build_stay_in_the_band(name):
    """Between crest and trough a band from corners may miss some, but not by what is seen."""
    stage = STAGES[name]
    sheet = bench_sheet(stage)
    rng = np.random.default_rng(8)
    for trace in (t for t in sheet.traces if t.signal == "hurried"):
        index = stage.range_index(trace.range_name)
        hertz = sheet.signals[index].hurried_hz
        for _ in range(20):
            ohms, farads = rng.uniform(-1.0, 1.0, 2)
            build = replace(
                stage,
                pot=replace(
                    stage.pot,
                    resistance_ohms=stage.pot.resistance_ohms * (1 + stage.pot.tolerance * ohms),
                ),
                capacitors=tuple(
                    replace(c, capacitance_f=c.capacitance_f * (1 + c.tolerance * farads))
                    for c in stage.capacitors
                ),
            )
            volts = square_volts(
                build, Setting(index, 1.0), sheet.levels, 0.5 / hertz, trace.times_s
            )
            assert (volts >= trace.low_v - 0.005).all()
            assert (volts <= trace.high_v + 0.005).all()


def test_every_part_has_a_reference_of_its_own():
    for stage in STAGES.values():
        lines = sheet_of(stage).parts.lines()
        references = [line.reference for line in lines]
        assert len(set(references)) == len(references)
        fixed = [stage.pull_down, stage.output_series, stage.load]
        contacts = sum(
            any(c.name not in row.connects for row in stage.ranges) for c in stage.capacitors
        )
        count = sum(part is not None for part in fixed) + len(stage.capacitors) + 3
        count += len({row.series for row in stage.ranges})
        assert len(lines) == count + (contacts if stage.bleed else 0)


def test_parts_say_what_to_buy():
    parts = sheet_of(STAGES["two-range-film"]).parts
    small = parts.capacitors[0]
    assert (small.value_text, small.tolerance_text, small.kind) == ("330 nF", "± 10 %", "polyester")
    assert parts.pot.value_text == "470 kΩ"
    assert parts.capacitors[1].value_text == "4.7 µF"
    assert "offset ≤ 10 mV" in parts.input_buffer.kind
    series = sheet_of(SPARE).parts.series
    assert [names for _, names in series] == [("a", "b"), ("c",), ("d",)]


@pytest.mark.parametrize(
    ("stage", "said"),
    [
        (FILM, "+12 V and −12 V"),
        (STAGES["battery-9v"], "+9 V and 0 V"),
        (FILM, "No capacitor here is polarised"),
        (WORDY, "C4 is polarised: plus to the hold node"),
        (WORDY, "C3 must be a bipolar type"),
        (replace(WORDY, supply=Supply(12.0, -12.0)), "these rails allow it"),
        (STAGES["ceramic-budget"], "X7R loses capacitance"),
        (FILM, "protective earth"),
        # 471 kohm and 10 Mohm, or 1 Mohm: 471/10471 and 471/1471.
        (FILM, "one of 10 MΩ 4.5 % and one of 1 MΩ 32 %"),
        (FILM, "Local codes"),
    ],
)
def test_cautions_are_those_of_the_stage(stage, said):
    assert said in " ".join(sheet_of(stage).cautions)


def test_what_two_pages_cannot_hold_is_refused():
    caps = tuple(Capacitor(f"c{n}", 1e-6) for n in range(MOST_CAPACITORS + 1))
    with pytest.raises(InputError, match="has 6 capacitors; two pages hold 5 at most"):
        bench_sheet(replace(FILM, capacitors=caps, ranges=(Range("x", ("c0",)),)))
    ranges = tuple(Range(f"r{n}", ("small",)) for n in range(MOST_RANGES + 1))
    with pytest.raises(InputError, match="has 6 ranges; two pages hold 5 at most"):
        bench_sheet(replace(FILM, ranges=ranges))


def test_rails_without_room_are_refused_and_narrow_ones_are_used():
    cmos = STAGES["battery-9v"]
    at = bench_sheet(replace(cmos, supply=Supply(1.8, 0.0))).levels
    assert 0.0 < at.low_v < at.high_v < 1.8
    drift = replace(STAGES["bipolar-drift"], supply=Supply(2.5, -12.0))
    with pytest.raises(InputError, match="no room"):
        bench_sheet(drift)


@settings(deadline=None, max_examples=10)
@given(stages())
def test_any_stage_has_a_sheet_or_a_reason(stage):
    try:
        levels(WorstCase(stage))
    except InputError:
        with pytest.raises(InputError, match="no room"):
            bench_sheet(stage)
        return
    sheet = bench_sheet(stage)
    for row in sheet.rows:
        assert in_order(row.after_v)
        assert in_order(row.settled_v)
        assert row.square_hz > 0.0
