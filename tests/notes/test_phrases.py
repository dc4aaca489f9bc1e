from __future__ import annotations

from itertools import pairwise

import pytest

from livelag.errors import UnknownNameError
from livelag.notes.phrases import DEFAULT_PHRASE, PHRASES, phrase
from livelag.notes.player import Player, PlayerSettings


def notes_of(made) -> list[int]:
    return [t.message.note for t in made.messages if t.message.type == "note_on"]


@pytest.mark.parametrize("name", PHRASES)
class TestEvery:
    def test_notes_are_playable(self, name):
        made = phrase(name)
        assert made.name == name
        assert made.about
        assert all(36 <= note <= 84 for note in notes_of(made))
        assert all(timed.message.channel == 0 for timed in made.messages)
        assert made.note_count == len(notes_of(made)) == len(made.messages) // 2

    def test_times_rise_and_end_before_the_duration(self, name):
        made = phrase(name)
        moments = [timed.time_s for timed in made.messages]
        assert moments == sorted(moments)
        assert moments[0] == 0.0
        assert moments[-1] < made.duration_s < 20.0

    def test_every_note_sounds_in_turn_and_ends(self, name):
        player = Player()
        sounded = []
        for timed in phrase(name).messages:
            moment = player.handle(timed.message)
            if moment is not None and timed.message.type == "note_on":
                sounded.append(moment.note)
        assert sounded == notes_of(phrase(name))
        assert not player.now.gate


def test_the_default_comes_first_and_an_unknown_name_says_which_exist():
    assert next(iter(PHRASES)) == DEFAULT_PHRASE
    with pytest.raises(UnknownNameError, match="did you mean 'staircase'"):
        phrase("stairs-case")


def test_staircase_rises_by_equal_short_steps():
    made = phrase("staircase")
    notes = notes_of(made)
    assert {after - before for before, after in pairwise(notes)} == {3}
    starts = [t.time_s for t in made.messages if t.message.type == "note_on"]
    steps = [after - before for before, after in pairwise(starts)]
    assert steps == pytest.approx([0.125] * len(steps))


def test_octaves_leap_by_whole_octaves():
    notes = notes_of(phrase("octaves"))
    leaps = {abs(after - before) for before, after in pairwise(notes)}
    assert 12 in leaps
    assert all(leap and leap % 12 == 0 for leap in leaps)


def test_scale_moves_by_steps():
    notes = notes_of(phrase("scale"))
    assert {abs(b - a) for a, b in pairwise(notes)} == {1, 2}


def test_run_is_faster_and_bass_slower_than_the_rest():
    pace = {name: made.note_count / made.duration_s for name, made in PHRASES.items()}
    assert sorted(pace, key=pace.__getitem__)[0] == "bass"
    assert pace["run"] > 6.0
    assert max(notes_of(phrase("bass"))) <= 52


def test_the_procession_has_legato_and_detached_notes():
    player = Player(PlayerSettings(glide="legato only"))
    bypassed = []
    for timed in phrase("procession").messages:
        moment = player.handle(timed.message)
        if moment is not None and timed.message.type == "note_on":
            bypassed.append(moment.bypassed)
    assert 8 <= sum(bypassed) <= len(bypassed) - 8
