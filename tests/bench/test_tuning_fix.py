"""Advice on tuning: the change it names does what it says."""

from dataclasses import replace

import pytest

from livelag.bench.tuning import CAUSES, Compass, tuning_along_pot
from livelag.bench.tuning_fix import advise, dominating, round_down, round_up
from livelag.circuit.parts import Buffer, Capacitor, Resistor
from livelag.circuit.presets import load_stage
from livelag.circuit.stage import Range, Supply
from livelag.errors import InputError

IDEAL = load_stage("ideal")
COMPASS = Compass(36, 96)
TURNS = (0.0, 0.5, 1.0)


def buffer(**figures):
    return replace(Buffer.of_class("ideal"), name="custom", **figures)


def leaking(*insulations_ohms, together=True, bleed=None):
    names = [f"c{n}" for n in range(len(insulations_ohms))]
    capacitors = tuple(
        Capacitor(n, 1e-6, "polyester", 0.1, ohms)
        for n, ohms in zip(names, insulations_ohms, strict=True)
    )
    connects = tuple(names) if together else (names[0],)
    return replace(IDEAL, capacitors=capacitors, ranges=(Range("all", connects),), bleed=bleed)


CASES = {
    "input_offset": replace(IDEAL, input_buffer=buffer(offset_v=-0.012)),
    "output_offset": replace(IDEAL, output_buffer=buffer(offset_v=0.012)),
    "bias_current": load_stage("bipolar-drift"),
    "bias_current outwards": replace(IDEAL, output_buffer=buffer(bias_a=-80e-9)),
    "insulation": load_stage("two-range-bipolar"),
    "insulation of one of two": leaking(50e6, 1e12),
    "insulation of two alike": leaking(50e6, 60e6),
    "insulation behind the bleed": leaking(1e12, 20e6, together=False, bleed=Resistor(1e6)),
    "output_divider": load_stage("two-range-film"),
    "swing": replace(IDEAL, supply=Supply(4.2, -12.0)),
    "swing below": replace(IDEAL, supply=Supply(12.0, -0.0), input_buffer=buffer(
        headroom_negative_v=1.234)),
    "swing of a leaking stage": replace(leaking(1e7), supply=Supply(3.0, -12.0)),
}  # fmt: skip


@pytest.mark.parametrize("goal", [2.0, 0.5])
@pytest.mark.parametrize("case", CASES)
def test_the_change_brings_the_cause_within_the_goal(case, goal):
    stage = CASES[case]
    before = tuning_along_pot(stage, TURNS, COMPASS)
    fix = advise(stage, before, COMPASS, goal)
    assert fix.cause == case.split()[0]
    assert fix.worth_cents == dominating(before).worth_cents[fix.cause] > goal
    at = (fix.range_name, fix.rotation)
    after = {
        (row.range_name, row.rotation): row for row in tuning_along_pot(fix.stage, TURNS, COMPASS)
    }[at]
    worth = after.worth_cents[fix.cause]
    assert worth <= goal * (1 + 1e-6)
    if fix.cause != "swing":  # a rail moves by tenths of a volt; the rest is not overdone
        assert worth > 0.8 * goal
    other = {cause: after.causes[cause] for cause in CAUSES if cause != fix.cause}
    for cause, error in other.items():
        was = dominating(before).causes[cause]
        assert abs(error) <= abs(was) * 1.05 + 1e-6 or fix.cause in ("swing", "insulation")


def test_sentences_name_the_part_the_value_and_what_it_is_now():
    def sentence(case):
        stage = CASES[case]
        return advise(stage, tuning_along_pot(stage, TURNS, COMPASS), COMPASS).sentence

    assert sentence("bias_current") == (
        "output buffer: a bias current of at most 1.6 nA (now 80 nA), such as the jfet-input class"
    )
    assert sentence("output_divider") == (
        "output resistor: at most 33 Ω into this load of 100 kΩ (now 100 Ω)"
    )
    assert sentence("swing") == "positive rail: at least 5 V (now 4.2 V)"
    assert "capacitor 'bipolar'" in sentence("insulation")
    assert "'c0' and 'c1'" in sentence("insulation of two alike")
    assert "'c0':" in sentence("insulation of one of two")
    assert "input buffer: an offset of at most 1.6 mV (now 12 mV)" in sentence("input_offset")


def test_a_kind_that_would_do_is_named_if_there_is_one():
    stage = replace(
        load_stage("two-range-film"),
        capacitors=(Capacitor("small", 330e-9, "x7r"), Capacitor("large", 4.7e-6, "x7r")),
        output_series=None,
    )
    fix = advise(stage, tuning_along_pot(stage, (1.0,), COMPASS), COMPASS)
    assert fix.cause == "insulation"
    # The very kind it names is as good as it says.
    assert fix.sentence.endswith("such as polypropylene")
    better = replace(
        stage,
        capacitors=tuple(replace(c, kind="polypropylene") for c in stage.capacitors),
    )
    row = tuning_along_pot(better, (1.0,), COMPASS)[-1]
    assert row.worth_cents["insulation"] <= 2.0


def test_nothing_to_change_within_the_goal():
    stage = load_stage("two-range-film")
    rows = tuning_along_pot(stage, TURNS, COMPASS)
    assert advise(stage, rows, COMPASS, 6.0) is None
    assert advise(IDEAL, tuning_along_pot(IDEAL, TURNS, COMPASS), COMPASS, 1e-3) is None


@pytest.mark.parametrize("goal", [0.0, -1.0, float("nan")])
def test_a_goal_that_is_none_is_refused(goal):
    with pytest.raises(InputError, match="goal"):
        advise(IDEAL, tuning_along_pot(IDEAL, TURNS, COMPASS), COMPASS, goal)


@pytest.mark.parametrize(
    ("value", "down", "up"),
    [(33.9, 33.0, 34.0), (33.0, 33.0, 33.0), (0.001234, 0.0012, 0.0013), (9.96e9, 9.9e9, 1e10)],
)
def test_two_significant_digits(value, down, up):
    assert round_down(value) == pytest.approx(down, rel=1e-12)
    assert round_up(value) == pytest.approx(up, rel=1e-12)
