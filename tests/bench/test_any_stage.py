"""The builder's desk with whatever can be soldered: every answer is a number that makes sense."""

import math

from hypothesis import given, settings
from strategies import stages

from livelag.bench.arrival import arrivals, longest_setting
from livelag.bench.ranges import all_range_times, all_travel, neighbours
from livelag.bench.spread import spread
from livelag.bench.timeline import lay_out
from livelag.bench.tuning import Compass, tuning_along_pot
from livelag.bench.tuning_fix import advise
from livelag.notes.phrases import phrase

quick = settings(deadline=None, max_examples=60)


@quick
@given(stages())
def test_ranges(stage):
    for row in all_range_times(stage):
        for end in (row.fastest, row.slowest):
            assert 0.0 < end.time_constant_s < math.inf
            assert 0.0 < end.rise_s < math.inf
            assert 0.0 <= end.octave_arrival_s < math.inf
        assert row.audible_from is None or 0.0 <= row.audible_from <= 1.0
    assert len(neighbours(stage)) == len(stage.ranges) - 1
    for row in all_travel(stage):
        assert math.isclose(sum(row.shares.values()), 1.0)


@quick
@given(stages())
def test_tuning_and_its_cure(stage):
    compass = Compass.above_zero_volts(stage)
    rows = tuning_along_pot(stage, (0.0, 0.5, 1.0), compass)
    assert all(math.isfinite(error) for row in rows for error in row.causes.values())
    fix = advise(stage, rows, compass)
    if fix is None:
        assert max(max(row.worth_cents.values()) for row in rows) <= 2.0
        return
    after = tuning_along_pot(fix.stage, (fix.rotation,), compass)
    worth = next(row for row in after if row.range_name == fix.range_name).worth_cents[fix.cause]
    assert worth <= 2.0 * (1 + 1e-6)


@quick
@given(stages())
def test_spread(stage):
    for row in spread(stage, 20, 1).spreads:
        assert 0.0 < row.lowest <= row.nominal * (1 + 1e-12)
        assert row.lowest <= row.quantiles[0] * (1 + 1e-12)
        assert row.quantiles[2] <= row.highest * (1 + 1e-12) < math.inf


@settings(deadline=None, max_examples=20)
@given(stages())
def test_arrival(stage):
    song = phrase("bass")
    timeline = lay_out(stage, song.messages, song.duration_s)
    for note in arrivals(stage, timeline, 0.5):
        assert math.isfinite(note.residual_cents)
        assert note.arrives == (note.arrival_s <= note.end_s - note.start_s + 1e-9)
    found = longest_setting(stage, timeline, 0.5)
    assert found.rotation is None or found.arrived_fraction >= 0.5
