"""A song as stretches and notes."""

import pytest
from mido import Message

from livelag.bench.timeline import lay_out
from livelag.circuit.presets import load_stage
from livelag.errors import InputError
from livelag.notes.midi_file import TimedMessage
from livelag.notes.player import PlayerSettings

STAGE = load_stage("two-range-film")  # 0 V at note 36, a volt an octave


def on(time_s, note, velocity=100):
    return TimedMessage(time_s, Message("note_on", note=note, velocity=velocity))


def off(time_s, note):
    return TimedMessage(time_s, Message("note_off", note=note))


def control(time_s, number, value):
    return TimedMessage(time_s, Message("control_change", control=number, value=value))


def notes(*messages, end_s=4.0, **settings):
    timeline = lay_out(STAGE, messages, end_s, settings=PlayerSettings(**settings))
    return [(row.note, row.start_s, row.end_s) for row in timeline.notes]


def test_detached_notes_end_when_released():
    assert notes(on(0, 60), off(1, 60), on(2, 64), off(3, 64)) == [(60, 0, 1), (64, 2, 3)]


def test_legato_notes_end_when_the_next_takes_over():
    assert notes(on(0, 60), on(1, 64), off(1.5, 60), off(2, 64)) == [(60, 0, 1), (64, 1, 2)]


def test_a_released_key_falls_back_to_the_one_still_held():
    played = notes(on(0, 60), on(1, 64), off(2, 64), off(3, 60))
    assert played == [(60, 0, 1), (64, 1, 2), (60, 2, 3)]


def test_priority_decides_which_key_sounds():
    chord = (on(0, 60), on(1, 64), off(2, 64), off(3, 60))
    assert notes(*chord, priority="low") == [(60, 0, 3)]


def test_a_key_still_down_ends_with_the_song():
    assert notes(on(1, 60), end_s=2.5) == [(60, 1, 2.5)]


def test_notes_that_last_no_time_are_none():
    played = lay_out(
        STAGE, (on(0, 48), off(1, 48), on(1, 60), on(1, 64), off(2, 64), off(2, 60)), 3
    )
    assert [row.note for row in played.notes] == [48, 64]
    # The interval counts from what sounded, not from the key of the chord that did not.
    assert played.notes[1].interval_volts == pytest.approx(16 / 12)


def test_the_pedal_holds_a_note():
    assert notes(control(0, 64, 127), on(0, 60), off(1, 60), control(2, 64, 0)) == [(60, 0, 2)]


def test_intervals_start_at_nothing_and_follow_the_keys():
    played = lay_out(STAGE, (on(0, 60), off(1, 60), on(1, 72), off(2, 72), on(3, 65)), 4).notes
    assert [row.interval_volts for row in played] == pytest.approx([0.0, 1.0, -7 / 12])


def test_a_bend_within_a_note_is_a_stretch_of_its_own():
    bend = TimedMessage(1.0, Message("pitchwheel", pitch=4096))  # half of two semitones up
    timeline = lay_out(STAGE, (on(0, 60), bend, off(2, 60)), 2.0)
    assert len(timeline.notes) == 1
    sounding = [s for s in timeline.stretches if s.note == 0]
    assert [s.key_volts for s in sounding] == pytest.approx([2.0, 2.0 + 1 / 12])
    assert [s.duration_s for s in sounding] == [1.0, 1.0]


def test_stretches_leave_no_hole():
    messages = (on(0.5, 60), on(1, 64), off(1.5, 60), off(2, 64), control(2.5, 5, 90))
    stretches = lay_out(STAGE, messages, 4.0).stretches
    ends = [s.start_s + s.duration_s for s in stretches]
    assert [s.start_s for s in stretches[1:]] == pytest.approx(ends[:-1])
    assert ends[-1] == 4.0


def test_controllers_turn_pot_and_switch():
    timeline = lay_out(STAGE, (on(0, 60), control(1, 5, 127), control(2, 80, 127)), 3.0)
    assert timeline.turns_pot
    assert timeline.switches_range
    assert timeline.stretches[-1].rotation == 1.0
    assert timeline.stretches[-1].range_index == 1
    still = lay_out(STAGE, (on(0, 60),), 3.0, range_index=1)
    assert not still.turns_pot
    assert not still.switches_range
    assert {s.range_index for s in still.stretches} == {1}


def test_portamento_control_and_switch():
    timeline = lay_out(STAGE, (on(0, 60), off(1, 60), control(1, 84, 48), on(2, 72)), 3.0)
    assert [s.jump_volts for s in timeline.stretches if s.jump_volts is not None] == [1.0]
    off_again = lay_out(STAGE, (on(0, 60), control(1, 65, 0), on(2, 72)), 3.0)
    assert [s.bypassed for s in off_again.stretches if s.duration_s > 0] == [False, True, True]


def test_the_stage_rests_on_the_first_note_with_the_opening_controls_in_place():
    messages = (control(0, 5, 127), control(0, 80, 127), on(1, 60), off(2, 60))
    timeline = lay_out(STAGE, messages, 3.0)
    assert timeline.first_key_volts == 2.0
    rest = timeline.stretches[timeline.opening]
    assert (rest.start_s, rest.duration_s) == (0.0, 1.0)
    assert (rest.key_volts, rest.rotation, rest.range_index) == (2.0, 1.0, 1)


@pytest.mark.parametrize(
    "messages", [(), (control(0, 5, 1),), (on(0, 60, velocity=0),), (on(1, 60), off(1, 60))]
)
def test_a_song_without_a_note_is_refused(messages):
    with pytest.raises(InputError, match="note"):
        lay_out(STAGE, messages, 2.0)
