"""Arrival of notes, against a lone RC by hand and against the sound's own discrete stage."""

import math
from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from mido import Message

from livelag.bench.arrival import arrivals, arrived_fraction, longest_setting, pile_ups
from livelag.bench.timeline import lay_out
from livelag.circuit.parts import Buffer, Capacitor, Pot, Resistor
from livelag.circuit.presets import load_stage, preset_names
from livelag.circuit.stage import GlideStage, Range, Setting
from livelag.errors import InputError
from livelag.notes.midi_file import TimedMessage
from livelag.notes.phrases import PHRASES, phrase
from livelag.notes.player import PlayerSettings
from livelag.sound.patch import Patch
from livelag.sound.render import render
from livelag.units import volts_to_cents

LONE = GlideStage(
    title="lone",
    capacitors=(Capacitor("c", 1e-6),),
    ranges=(Range("all", ("c",)),),
    pot=Pot(99e3),
    series=Resistor(1e3),
)
TAU = 50.5e-3  # at half a turn


def tune(*rows):
    """Messages of (start, end, note) rows."""
    messages = []
    for start, end, note in rows:
        messages.append(TimedMessage(start, Message("note_on", note=note, velocity=100)))
        messages.append(TimedMessage(end, Message("note_off", note=note)))
    return sorted(messages, key=lambda timed: timed.time_s)


def fares(*rows, rotation=0.5, cents=5.0, stage=LONE):
    timeline = lay_out(stage, tune(*rows), rows[-1][1])
    return arrivals(stage, timeline, rotation, cents)


def test_a_settled_octave_takes_tau_ln_of_interval_over_tolerance():
    first, second = fares((0.0, 1.0, 48), (1.0, 2.0, 60))
    assert (first.interval_cents, first.arrives, first.arrival_s) == (0.0, True, 0.0)
    assert second.interval_cents == pytest.approx(1200.0)
    assert second.arrives
    assert second.arrival_s == pytest.approx(TAU * math.log(1200 / 5), rel=1e-9)
    assert second.residual_cents == pytest.approx(-1200 * math.exp(-1.0 / TAU), rel=1e-6)


def test_a_note_too_short_does_not_arrive_and_says_what_it_would_need():
    _, note = fares((0.0, 1.0, 60), (1.0, 1.1, 48))
    assert not note.arrives
    assert note.residual_cents == pytest.approx(1200 * math.exp(-0.1 / TAU))
    assert note.arrival_s == pytest.approx(TAU * math.log(1200 / 5))


def test_a_note_continues_from_what_the_last_one_left():
    _, second, third = fares((0.0, 1.0, 48), (1.0, 1.1, 60), (1.1, 1.2, 72))
    left = -1200 * math.exp(-0.1 / TAU)
    assert third.carried_cents == pytest.approx(left)
    assert third.carried_cents == second.residual_cents
    assert third.residual_cents == pytest.approx((left - 1200) * math.exp(-0.1 / TAU))


def test_the_glide_goes_on_in_the_rest_between_notes():
    _, second, third = fares((0.0, 1.0, 48), (1.0, 1.1, 60), (1.3, 1.4, 60))
    assert third.interval_cents == 0.0
    assert third.carried_cents == pytest.approx(second.residual_cents * math.exp(-0.2 / TAU))


def test_arrival_is_against_where_the_stage_settles_not_against_the_key():
    buffers = replace(Buffer.of_class("ideal"), name="custom", offset_v=0.05, bias_a=1e-6)
    stage = replace(LONE, output_buffer=buffers, output_series=Resistor(1e3), load=Resistor(10e3))
    _, note = fares((0.0, 1.0, 48), (1.0, 3.0, 60), stage=stage)
    assert abs(note.residual_cents) < 1e-9
    assert note.arrives
    # 1200 cents at the key are 1200 x 10/11 at the load.
    assert note.arrival_s == pytest.approx(TAU * math.log(1200 * 10 / 11 / 5))


def test_arrival_counts_again_after_a_bend():
    bend = TimedMessage(1.5, Message("pitchwheel", pitch=8191))
    messages = [*tune((0.0, 1.0, 48), (1.0, 2.0, 60)), bend]
    messages.sort(key=lambda timed: timed.time_s)
    _, note = arrivals(LONE, lay_out(LONE, messages, 2.0), 0.5)
    semitones = 200 * 8191 / 8192
    assert note.arrival_s == pytest.approx(0.5 + TAU * math.log(semitones / 5), rel=1e-4)
    small = [*messages[:-2], TimedMessage(1.5, Message("pitchwheel", pitch=100)), messages[-1]]
    _, note = arrivals(LONE, lay_out(LONE, small, 2.0), 0.5)
    assert note.arrival_s == pytest.approx(TAU * math.log(1200 / 5))  # 2.4 cents are no matter


def test_a_bypassed_note_arrives_at_once():
    off = TimedMessage(0.5, Message("control_change", control=65, value=0))
    messages = sorted([*tune((0.0, 1.0, 48), (1.0, 1.01, 60)), off], key=lambda t: t.time_s)
    _, note = arrivals(LONE, lay_out(LONE, messages, 2.0), 0.5)
    assert (note.arrives, note.arrival_s, note.residual_cents) == (True, 0.0, 0.0)


@pytest.mark.parametrize("preset", preset_names())
def test_a_note_arrives_if_its_arrival_is_before_its_end(preset):
    # Some notes here end in tune and would leave again if held, drawn by a dielectric's memory.
    stage = load_stage(preset)
    for song in PHRASES.values():
        for index in range(len(stage.ranges)):
            timeline = lay_out(stage, song.messages, song.duration_s, index)
            for note in arrivals(stage, timeline, 0.3):
                assert note.arrives == (note.arrival_s <= note.end_s - note.start_s)


def controlled_song():
    """A run in which bend, pot, range switch, portamento control and its switch all move."""
    extra = [
        (0.0, Message("control_change", control=80, value=127)),
        (0.30, Message("pitchwheel", pitch=3000)),
        (0.55, Message("control_change", control=5, value=20)),
        (0.90, Message("control_change", control=80, value=0)),
        (1.20, Message("control_change", control=65, value=0)),
        (1.45, Message("control_change", control=65, value=127)),
        (1.65, Message("control_change", control=84, value=40)),
        (2.00, Message("control_change", control=80, value=64)),
        (2.30, Message("pitchwheel", pitch=0)),
    ]
    return sorted(
        [*phrase("run").messages, *(TimedMessage(*row) for row in extra)], key=lambda t: t.time_s
    )


class _Curve:
    """Keeps the glide volts of a rendering."""

    def __init__(self):
        self.glide = []

    def write(self, audio, key_volts, glide_volts):
        self.glide.append(glide_volts.copy())


@pytest.mark.parametrize("legato_only", [False, True])
@pytest.mark.parametrize("preset", ["two-range-film", "three-range", "bleed-film", "ideal"])
def test_notes_end_where_the_sound_leaves_them(preset, legato_only):
    stage = load_stage(preset)
    rate = 48000
    # On whole frames the discrete stage is exact, so both must agree to rounding.
    messages = [replace(t, time_s=round(t.time_s * rate) / rate) for t in controlled_song()]
    settings = PlayerSettings(glide="legato only" if legato_only else "always")
    timeline = lay_out(stage, messages, 5.0, 0, settings)
    fared = arrivals(stage, timeline, 0.4)
    curve = _Curve()
    patch = Patch(stage, "exact", settings, rotation=0.4)
    render(patch, messages, 5 * rate, rate, [curve])
    glide = np.concatenate(curve.glide)
    for number, note in enumerate(fared):
        last = [s for s in timeline.stretches if s.note == number and s.duration_s > 0][-1]
        turn = 0.4 if last.rotation is None else last.rotation
        at = Setting(last.range_index, turn, last.bypassed)
        end = round(note.end_s * rate)
        # At its end the next key is there already: a parabola through the three frames before.
        third, second, first = glide[end - 3 : end]
        reached = 3.0 * first - 3.0 * second + third
        off = volts_to_cents(reached - stage.settled_volts(last.key_volts, at))
        assert note.residual_cents == pytest.approx(off, abs=1e-4)


def test_errors_pile_up_where_notes_in_a_row_miss():
    fared = fares(
        (0.0, 1.0, 48), (1.0, 1.05, 60), (1.05, 1.1, 48), (1.1, 1.15, 60), (1.15, 2.5, 48),
        (2.5, 2.55, 60), (2.55, 4.0, 60),
    )  # fmt: skip
    assert [note.arrives for note in fared] == [True, False, False, False, True, False, True]
    (row,) = pile_ups(fared)
    assert (row.first, row.notes, row.start_s, row.end_s) == (1, 3, 1.0, 1.15)
    assert row.worst_cents == max((n.residual_cents for n in fared[1:4]), key=abs)
    assert arrived_fraction(fared) == pytest.approx(3 / 7)


# The longest setting


def leap():
    return lay_out(LONE, tune((0.0, 1.0, 48), (1.0, 1.2, 60)), 1.2)


def test_longest_setting_of_a_leap_is_where_it_just_arrives():
    found = longest_setting(LONE, leap(), 1.0)
    assert found.time_constant_s == pytest.approx(0.2 / math.log(240.0), rel=1e-6)
    assert found.arrived_fraction == 1.0
    assert not found.holds_again


def test_past_the_longest_setting_the_share_no_longer_arrives():
    stage = load_stage("two-range-film")
    song = phrase("run")
    timeline = lay_out(stage, song.messages, song.duration_s)
    for share in (0.3, 0.6, 0.9):
        found = longest_setting(stage, timeline, share)
        at = arrived_fraction(arrivals(stage, timeline, found.rotation))
        past = arrived_fraction(arrivals(stage, timeline, found.rotation + 1e-7))
        assert at >= share > past
        assert at == found.arrived_fraction


def test_half_the_notes_hold_at_any_setting_here():
    found = longest_setting(LONE, leap(), 0.5)
    assert found.rotation == 1.0
    assert found.time_constant_s == pytest.approx(0.1)


def test_no_setting_will_do():
    slow = replace(LONE, series=Resistor(1e6))
    timeline = lay_out(slow, tune((0.0, 1.0, 48), (1.0, 1.2, 60)), 1.2)
    found = longest_setting(slow, timeline, 1.0)
    assert (found.rotation, found.time_constant_s) == (None, None)
    assert found.arrived_fraction == 0.5


def test_a_glide_that_hardly_leaves_a_note_is_in_tune_when_it_comes_back():
    wide = replace(LONE, pot=Pot(1e9))
    # Ten notes on one key, with a short visit to another: only the visit and its return can miss.
    times = [0.0, 1.0, *(1.01 + n / 10 for n in range(9))]
    rows = [(a, b, 60 if a == 1.0 else 48) for a, b in pairwise(times)]
    timeline = lay_out(wide, tune(*rows), times[-1])
    found = longest_setting(wide, timeline, 0.9)
    assert found.holds_again
    assert 0.0 < found.rotation < 1.0
    very_slow = arrived_fraction(arrivals(wide, timeline, 1.0))
    assert very_slow >= 0.9 > arrived_fraction(arrivals(wide, timeline, found.rotation * 1.01))


@pytest.mark.parametrize("share", [0.0, -0.1, 1.01, math.nan])
def test_a_share_out_of_range_is_refused(share):
    with pytest.raises(InputError, match="share"):
        longest_setting(LONE, leap(), share)


@pytest.mark.parametrize("cents", [0.0, -1.0, math.nan, math.inf])
def test_a_tolerance_that_is_none_is_refused(cents):
    with pytest.raises(InputError, match="tolerance"):
        arrivals(LONE, leap(), 0.5, cents)
    with pytest.raises(InputError, match="tolerance"):
        longest_setting(LONE, leap(), 0.5, cents)


@pytest.mark.parametrize(("control", "what"), [(5, "pot"), (80, "range switch")])
def test_a_song_that_moves_the_controls_has_no_longest_setting(control, what):
    stage = load_stage("two-range-film")
    move = TimedMessage(0.5, Message("control_change", control=control, value=100))
    messages = sorted([*tune((0.0, 1.0, 48), (1.0, 1.2, 60)), move], key=lambda t: t.time_s)
    with pytest.raises(InputError, match=what):
        longest_setting(stage, lay_out(stage, messages, 1.2), 0.5)
