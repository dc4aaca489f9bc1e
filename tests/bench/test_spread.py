"""Builds and what they come to."""

from dataclasses import replace

import numpy as np
import pytest

from livelag.bench import builds as builds_module
from livelag.bench import spread as spread_module
from livelag.bench.builds import DISTRIBUTIONS, Recipe, corners, draw, draw_one
from livelag.bench.spread import build_stage, spread
from livelag.circuit.parts import Capacitor, Pot, Resistor
from livelag.circuit.presets import load_stage, parse_stage, preset_names, stage_to_toml
from livelag.circuit.stage import GlideStage, Range, Setting
from livelag.errors import InputError, UnknownNameError

FILM = load_stage("two-range-film")
SWITCHED = replace(
    FILM, ranges=(Range("fast", ("small",)), Range("slow", ("large",), Resistor(2e3, 0.05)))
)


def ends(stage, index):
    return [stage.time_constant_s(Setting(index, turn)) for turn in (0.0, 1.0)]


@pytest.mark.parametrize("preset", preset_names())
def test_nominal_is_the_stage_as_designed(preset):
    stage = load_stage(preset)
    result = spread(stage, 10, 1)
    for index, name in enumerate(stage.range_names):
        found = [result.of(name, what).nominal for what in ("shortest", "longest")]
        assert found == pytest.approx(ends(stage, index), rel=1e-12)


@pytest.mark.parametrize("stage", [FILM, SWITCHED, load_stage("three-range")])
@pytest.mark.parametrize("distribution", DISTRIBUTIONS)
def test_times_are_those_of_the_build_as_a_stage(stage, distribution):
    recipe = Recipe(stage)
    deviates = next(draw(50, len(recipe.parts), 3, distribution))
    shortest, longest = recipe.times(deviates)
    for build in (1, 17, 50):
        built = build_stage(stage, build, 50, 3, distribution)
        for index in range(len(stage.ranges)):
            found = [shortest[build - 1, index], longest[build - 1, index]]
            assert found == pytest.approx(ends(built, index), rel=1e-12)


@pytest.mark.parametrize("stage", [FILM, SWITCHED])
def test_a_build_is_within_tolerance_exact_and_a_preset(stage):
    built = build_stage(stage, 5, 100, 9, "uniform")
    assert built != stage
    for part, nominal in zip(built.capacitors, stage.capacitors, strict=True):
        assert abs(part.capacitance_f / nominal.capacitance_f - 1) <= nominal.tolerance
        assert part.tolerance == 0.0
    assert abs(built.pot.resistance_ohms / stage.pot.resistance_ohms - 1) <= stage.pot.tolerance
    assert built.pot.end_ohms / built.pot.resistance_ohms == pytest.approx(
        stage.pot.end_ohms / stage.pot.resistance_ohms
    )
    assert parse_stage(stage_to_toml(built), "test") == built
    again = spread(built, 10, 1)
    assert all(row.lowest == pytest.approx(row.highest, rel=1e-12) for row in again.spreads)
    assert all(row.blame == {} for row in again.spreads)


def test_the_same_seed_draws_the_same_builds_whatever_their_number():
    few, many = spread(FILM, 100, 4), spread(FILM, 100, 4)
    assert few.of("fast", "longest").quantiles == many.of("fast", "longest").quantiles
    assert (
        spread(FILM, 100, 5).of("fast", "longest").quantiles != few.of("fast", "longest").quantiles
    )
    first = next(draw(100, 4, 4, "uniform"))
    longer = next(draw(1000, 4, 4, "uniform"))
    np.testing.assert_array_equal(first, longer[:100])


def test_a_build_far_down_the_draw_is_drawn_alone(monkeypatch):
    monkeypatch.setattr(builds_module, "CHUNK_BUILDS", 64)
    every = np.concatenate(list(draw(1000, 3, 2, "normal")))
    assert every.shape == (1000, 3)
    for build in (1, 64, 65, 1000):
        np.testing.assert_array_equal(draw_one(build, 3, 2, "normal"), every[build - 1])
    assert len(np.unique(every)) == every.size  # no chunk repeats another


def test_distributions_are_cut_at_the_tolerance():
    uniform, normal = (
        np.concatenate(list(draw(200_000, 1, 1, name)))[:, 0] for name in DISTRIBUTIONS
    )
    for deviates in (uniform, normal):
        assert np.abs(deviates).max() <= 1.0
        assert abs(deviates.mean()) < 0.005
    assert uniform.std() == pytest.approx(1 / np.sqrt(3), rel=0.01)
    # A normal distribution with its cuts at two sigma, computed: 0.8796 sigma.
    assert normal.std() == pytest.approx(0.8796 / 2, rel=0.01)


def test_corners_are_every_combination():
    found = corners(3)
    assert found.shape == (8, 3)
    assert len(np.unique(found, axis=0)) == 8
    assert set(found.ravel()) == {-1.0, 1.0}


def test_exact_extremes_by_hand():
    row = spread(FILM, 100, 1).of("slow", "longest")
    assert row.highest == pytest.approx((1.01e3 + 1.2 * 470e3) * 1.1 * 5.03e-6, rel=1e-12)
    assert row.lowest == pytest.approx((0.99e3 + 0.8 * 470e3) * 0.9 * 5.03e-6, rel=1e-12)
    row = spread(FILM, 100, 1).of("fast", "shortest")
    assert row.highest == pytest.approx((1.01e3 + 1.2 * 2) * 1.1 * 330e-9, rel=1e-12)


@pytest.mark.parametrize("stage", [FILM, SWITCHED, load_stage("three-range")])
def test_no_build_is_beyond_the_extremes_and_the_named_builds_come_nearest(stage):
    result = spread(stage, 5000, 8)
    for row in result.spreads:
        assert row.lowest <= row.quantiles[0] <= row.quantiles[1] <= row.quantiles[2] <= row.highest
        assert row.counts.sum() == 5000
    recipe = Recipe(stage)
    shortest, longest = recipe.times(next(draw(5000, len(recipe.parts), 8, "uniform")))
    for what, times in (("shortest", shortest), ("longest", longest)):
        for index, name in enumerate(stage.range_names):
            row = result.of(name, what)
            assert row.lowest <= times[:, index].min()
            assert row.highest >= times[:, index].max()
            assert row.lowest_build == times[:, index].argmin() + 1
            assert row.highest_build == times[:, index].argmax() + 1


def test_quantiles_are_those_of_the_builds():
    recipe = Recipe(FILM)
    shortest, _ = recipe.times(next(draw(2000, len(recipe.parts), 6, "uniform")))
    row = spread(FILM, 2000, 6).of("slow", "shortest")
    assert row.quantiles == pytest.approx(np.quantile(shortest[:, 1], [0.025, 0.5, 0.975]))


def test_binned_quantiles_agree_with_exact_ones(monkeypatch):
    exact = spread(FILM, 40_000, 2)
    monkeypatch.setattr(spread_module, "MOST_KEPT", 0)
    binned = spread(FILM, 40_000, 2)
    for one, other in zip(exact.spreads, binned.spreads, strict=True):
        assert other.quantiles == pytest.approx(one.quantiles, rel=1e-4)
    one, other = exact.of("fast", "longest"), binned.of("fast", "longest")
    assert one.quantiles != other.quantiles  # so bins were used


def gappy(ratio):
    """Two ranges a nominal factor apart at the seam, capacitors of 20 %."""
    return GlideStage(
        title="seam",
        capacitors=(
            Capacitor("a", 1e-6, tolerance=0.2),
            Capacitor("b", ratio * 10e-6, tolerance=0.2),
        ),
        ranges=(Range("a", ("a",)), Range("b", ("b",))),
        pot=Pot(9e3, tolerance=0.0),
        series=Resistor(1e3, 0.0),
    )


def test_gaps_are_counted_over_builds():
    assert spread(gappy(0.5), 2000, 1).gap_fraction == 0.0
    assert spread(gappy(2.0), 2000, 1).gap_fraction == 1.0
    # At the seam itself the smaller of two like parts is as often the one as the other.
    assert spread(gappy(1.0), 40_000, 1).gap_fraction == pytest.approx(0.5, abs=0.01)
    assert spread(load_stage("one-range-log"), 100, 1).gap_fraction is None


def test_a_range_within_another_makes_no_gap():
    stage = replace(
        gappy(0.5),
        ranges=(Range("wide", ("a",)), Range("inside", ("a",), Resistor(5e3, 0.0))),
        pot=Pot(9e3, tolerance=0.0),
    )
    assert spread(stage, 1000, 1).gap_fraction == 0.0


def test_overlap_of_neighbours_has_its_own_spread():
    row = spread(gappy(1.0), 5000, 1).of("a to b", "overlap")
    assert row.nominal == pytest.approx(1.0)
    assert row.lowest == pytest.approx(0.8 / 1.2)
    assert row.highest == pytest.approx(1.2 / 0.8)
    # The pot is in both ends of a shared ratio, and the series resistor cancels some of it.
    shared = spread(FILM, 1000, 1).of("fast to slow", "overlap")
    low = (1.01e3 + 0.8 * 470e3) / (1.01e3 + 0.8 * 2) * 0.9 * 0.33 / (0.9 * 0.33 + 1.1 * 4.7)
    assert shared.lowest == pytest.approx(low, rel=1e-12)


def test_progress_reaches_the_number_of_builds():
    seen = []
    spread(FILM, 70_000, 1, progress=seen.append)
    assert seen[-1] == 70_000
    assert seen == sorted(seen)


def test_memory_does_not_grow_with_the_number_of_builds():
    import tracemalloc

    def peak(builds):
        tracemalloc.start()
        spread(FILM, builds, 1)
        found = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
        return found

    assert peak(3_000_000) < 1.05 * peak(1_100_000)


@pytest.mark.parametrize("builds", [0, -1, 100_000_001, 10**12])
def test_a_number_of_builds_out_of_range_is_refused(builds):
    with pytest.raises(InputError, match="builds is"):
        spread(FILM, builds, 1)


def test_other_bad_draws_are_refused():
    with pytest.raises(InputError, match="seed"):
        spread(FILM, 10, -1)
    with pytest.raises(UnknownNameError, match="uniform, normal"):
        spread(FILM, 10, 1, "gauss")
    for build in (0, 11):
        with pytest.raises(InputError, match="there are builds 1 to 10"):
            build_stage(FILM, build, 10, 1, "uniform")
    names = [f"c{n}" for n in range(15)]
    many = replace(
        FILM,
        capacitors=tuple(Capacitor(name, 1e-6) for name in names),
        ranges=(Range("all", tuple(names)),),
    )
    with pytest.raises(InputError, match="17 parts"):
        spread(many, 10, 1)
