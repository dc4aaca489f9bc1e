"""A pitch curve as lines of a drawing: read back, they are the curve again."""

from itertools import pairwise

import numpy as np
import pytest

from livelag.circuit.stage import Scale
from livelag.report import curve_drawing
from livelag.report.curve_drawing import draw_curve

SCALE = Scale(1.0, 36.0)
SECONDS = 2.0
TIMES = np.arange(24_000) / 12_000
TAU_S = 0.05
OFFSET_V = 0.01  # where it settles is 12 cents above the key


def glide_of(key):
    """A lone RC behind key volts that step, exact between frames."""
    out = np.empty_like(key)
    out[0] = key[0] + OFFSET_V
    keep = np.exp(-(TIMES[1] - TIMES[0]) / TAU_S)
    for n in range(1, len(key)):
        target = key[n - 1] + OFFSET_V
        out[n] = target + (out[n - 1] - target) * keep
    return out


KEY = np.select([TIMES < 0.5, TIMES < 1.5, TIMES < 1.6], [1.0, 2.0, 1.5], 2.25)
GLIDE = glide_of(KEY)


@pytest.fixture(scope="module")
def drawing():
    return draw_curve(TIMES, KEY, GLIDE, SECONDS, SCALE, lambda volts: volts + OFFSET_V)


def read_back(drawing, points):
    """Seconds and volts of a line, through the labels of the ticks."""
    xy = np.array([pair.split(",") for pair in points.split(" ")], dtype=float)
    places = [t.place for t in drawing.times], [t.place for t in drawing.volts]
    labels = [float(t.label) for t in drawing.times], [float(t.label) for t in drawing.volts]
    seconds, volts = (np.polyfit(p, v, 1) for p, v in zip(places, labels, strict=True))
    return np.polyval(seconds, xy[:, 0]), np.polyval(volts, xy[:, 1])


def test_the_glide_read_back_is_the_glide(drawing):
    seconds, volts = read_back(drawing, drawing.glide_points)
    assert 50 < len(seconds) < 500
    assert (seconds[0], seconds[-1]) == pytest.approx((0.0, TIMES[-1]), abs=1e-3)
    error = np.interp(TIMES, seconds, volts) - GLIDE
    # A third of a unit where the field is 190 units and 1.4 V high; steep parts shift sideways.
    assert np.abs(error).max() < 0.01
    assert np.ptp(volts) > 1.2


def test_the_key_read_back_has_its_corners(drawing):
    seconds, volts = read_back(drawing, drawing.key_points)
    corners = [(t, v) for t, v in zip(seconds, volts, strict=True)]
    kept = [c for c, following in pairwise([*corners, None]) if c != following]
    times, levels = (0, 0.5, 0.5, 1.5, 1.5, 1.6, 1.6, 2), (1, 1, 2, 2, 1.5, 1.5, 2.25, 2.25)
    assert np.array(kept) == pytest.approx(np.column_stack((times, levels)), abs=2e-3)


def test_everything_stays_in_the_field(drawing):
    for points in (drawing.key_points, drawing.glide_points):
        xy = np.array([pair.split(",") for pair in points.split(" ")], dtype=float)
        assert xy[:, 0].min() >= curve_drawing.LEFT
        assert xy[:, 0].max() <= curve_drawing.RIGHT
        assert xy[:, 1].min() >= curve_drawing.TOP
        assert xy[:, 1].max() <= curve_drawing.BOTTOM


def test_notes_stand_at_their_volts(drawing):
    at = {tick.label: tick.place for tick in drawing.notes}
    volts = {float(tick.label): tick.place for tick in drawing.volts}
    assert at["C4"] == pytest.approx(volts[2.0])  # 0 V is note 36, C2, at 1 V an octave
    assert at["C3"] == pytest.approx(volts[1.0])


def test_the_steps_in_words(drawing):
    notes = [(step.start_s, step.note, step.key_volts) for step in drawing.steps]
    assert notes == [
        (0.0, "C3", 1.0), (0.5, "C4", 2.0), (1.5, "F#3", 1.5), (1.6, "D#4", 2.25),
    ]  # fmt: skip
    first, octave, short, last = drawing.steps
    assert first.arrival_s == 0.0
    # A lone RC: tau ln(|interval in cents| / N).
    assert octave.arrival_s == pytest.approx(TAU_S * np.log(1200 / 5), abs=2e-4)
    assert last.arrival_s is not None
    assert short.arrival_s is None
    assert short.to_go_cents == pytest.approx(600 * np.exp(-0.1 / TAU_S), rel=2e-3)
    assert drawing.late_count == 1
    assert drawing.step_count == 4


def test_a_bent_note_is_named_with_its_cents():
    key = np.full_like(TIMES, 1.0 + 0.2 / 12)
    drawing = draw_curve(TIMES, key, key, SECONDS, SCALE, lambda volts: volts)
    assert [step.note for step in drawing.steps] == ["C3 +20 cents"]


def test_a_long_and_restless_curve_stays_small():
    rng = np.random.default_rng(3)
    key = np.repeat(rng.integers(-5, 60, 6000) / 12, 4)
    drawing = draw_curve(TIMES, key, glide_of(key), SECONDS, SCALE, lambda volts: volts)
    assert len(drawing.steps) == curve_drawing.LISTED_STEPS
    assert drawing.step_count > 5000
    assert len(drawing.key_points) + len(drawing.glide_points) < 400_000
