"""`livelag arrival`: its answer, its table, its files and what it refuses."""

import csv
import json
import math
from functools import partial

import pytest
from mido import Message

from livelag.notes.midi_file import TimedMessage, write_midi_file

IDEAL = """
title = "lone"
[time]
series = "1k"
pot = {value = "99k", end = "0"}
[[capacitor]]
name = "c"
value = "1u"
kind = "ideal"
[[range]]
name = "all"
connects = ["c"]
"""
TAU = 50.5e-3  # at half a turn


@pytest.fixture
def cli(livelag, tmp_path):
    """Run `livelag arrival` in a folder that holds a lone RC."""
    (tmp_path / "lone.toml").write_text(IDEAL, encoding="utf-8")
    return partial(livelag, "arrival")


@pytest.fixture
def song(tmp_path):
    """Write a MIDI file of (start, end, note) rows and further (time, message) pairs."""

    def make(*rows, extra=(), channel=0):
        messages = [TimedMessage(*pair) for pair in extra]
        for start, end, note in rows:
            on = Message("note_on", note=note, velocity=90, channel=channel)
            messages.append(TimedMessage(start, on))
            messages.append(TimedMessage(end, Message("note_off", note=note, channel=channel)))
        write_midi_file(tmp_path / "song.mid", messages, 48000)
        return "song.mid"

    return make


def test_json_of_a_lone_rc(cli, song):
    status, out, err = cli(
        "lone.toml", "--midi", song((0, 1, 48), (1, 2, 60), (2, 2.1, 48)), "--json"
    )
    answer = json.loads(out)
    assert (status, err) == (0, "")
    assert answer["tolerance_cents"] == 5.0
    assert answer["arrived_fraction"] == pytest.approx(2 / 3)
    assert answer["time_constant_s"] == pytest.approx(TAU)
    first, second, third = answer["notes"]
    assert first["interval_cents"] == 0.0
    assert (second["start_s"], second["end_s"], second["note"]) == (1.0, 2.0, 60)
    assert second["interval_cents"] == pytest.approx(1200.0)
    assert second["arrives"] is True
    assert second["arrival_s"] == pytest.approx(TAU * math.log(240))
    assert third["arrives"] is False
    assert third["residual_cents"] == pytest.approx(1200 * math.exp(-0.1 / TAU), rel=1e-6)


def test_tolerance_rotation_and_range(cli):
    loose = json.loads(cli("--phrase", "run", "--cents", "50", "--json")[1])
    tight = json.loads(cli("--phrase", "run", "--cents", "1", "--json")[1])
    assert loose["tolerance_cents"] == 50
    assert loose["arrived_fraction"] > tight["arrived_fraction"]
    slow = json.loads(cli("--range", "slow", "--rotation", "1", "--json")[1])
    assert (slow["range"], slow["rotation"]) == ("slow", 1.0)
    quick = json.loads(cli("--rotation", "0", "--json")[1])
    assert quick["arrived_fraction"] == 1.0 > slow["arrived_fraction"]


def test_share_seeks_the_longest_setting_of_every_range_or_of_one(cli):
    answer = json.loads(cli("--phrase", "run", "--share", "0.9", "--json")[1])
    assert [row["range_name"] for row in answer["longest"]] == ["fast", "slow"]
    for row in answer["longest"]:
        assert row["arrived_fraction"] >= 0.9
        at = json.loads(
            cli("--phrase", "run", "--range", row["range_name"], "--rotation", row["rotation"],
                "--json")[1]
        )  # fmt: skip
        assert at["arrived_fraction"] == row["arrived_fraction"]
    # Both capacitors glide alike at like time constants.
    assert answer["longest"][0]["time_constant_s"] == pytest.approx(
        answer["longest"][1]["time_constant_s"], rel=0.02
    )
    one = json.loads(cli("--phrase", "run", "--share", "0.9", "--range", "slow", "--json")[1])
    assert [row["range_name"] for row in one["longest"]] == ["slow"]
    assert "longest" not in json.loads(cli("--json")[1])


def test_table_pile_ups_and_share(cli):
    status, out, _ = cli("--phrase", "run", "--rotation", "0.2", "--share", "0.9")
    assert status == 0
    assert "6 of 33 notes arrive (18.2 %)." in out
    assert "Errors pile up from 0.10 to 1.88 s: 17 notes in a row miss" in out
    assert "static" in out
    assert "0.1455" in out
    none = cli("three-range", "--phrase", "staircase", "--range", "drift", "--share", "1")[1]
    assert "none" in none


def test_long_songs_show_the_worst_and_save_all(cli, song, tmp_path):
    rows = [(n / 10, n / 10 + 0.09, 48 + n * 7 % 24) for n in range(60)]
    status, out, _ = cli("--midi", song(*rows), "--csv", "a.csv", "--picture", "a.png")
    assert status == 0
    assert "The 40 of 60 notes that end furthest off" in out
    with (tmp_path / "a.csv").open(encoding="utf-8") as file:
        saved = list(csv.DictReader(file))
    assert len(saved) == 60
    assert list(saved[0])[:4] == ["note", "start_s", "end_s", "interval_cents"]
    assert (tmp_path / "a.png").read_bytes().startswith(b"\x89PNG")


def test_priority_and_legato_only_are_followed(cli, song):
    held = song((0, 3, 48), (1, 2, 60))
    low = json.loads(cli("lone.toml", "--midi", held, "--priority", "low", "--json")[1])
    assert [note["note"] for note in low["notes"]] == [48]
    detached = song((0, 1, 48), (1.5, 1.51, 60))
    glides = json.loads(cli("lone.toml", "--midi", detached, "--json")[1])
    assert not glides["notes"][1]["arrives"]
    status, out, err = cli("lone.toml", "--midi", detached, "--legato-only")
    assert status == 0
    assert "2 of 2 notes arrive" in out
    assert "2 notes go without glide" in err


def test_keep_gliding_overrules_the_music(cli, song):
    off = (0.5, Message("control_change", control=65, value=0))
    turned_off = song((0, 1, 48), (1, 1.01, 60), extra=[off])
    heeded = json.loads(cli("lone.toml", "--midi", turned_off, "--json")[1])
    kept = json.loads(cli("lone.toml", "--midi", turned_off, "--keep-gliding", "--json")[1])
    assert [note["arrives"] for note in heeded["notes"]] == [True, True]
    assert [note["arrives"] for note in kept["notes"]] == [True, False]


def test_notes_about_the_song_go_to_standard_error(cli, song):
    moves = [
        (0.5, Message("control_change", control=5, value=10)),
        (0.6, Message("control_change", control=80, value=127)),
    ]
    err = cli("--midi", song((0, 1, 48), (1, 2, 127), extra=moves))[2]
    assert "turns the pot itself" in err
    assert "moves the range switch itself" in err
    high = cli("battery-9v", "--midi", song((0, 1, 24), (1, 2, 60)))[2]
    assert "1 notes are beyond what the buffers can pass" in high


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["--midi", "none.mid"], "none.mid: does not exist"),
        (["--phrase", "polka"], "unknown phrase 'polka'"),
        (["--rotation", "1.2"], "rotation is 1.2; it must be from 0 to 1"),
        (["--rotation", "nan"], "rotation is nan"),
        (["--range", "sluggish"], "unknown range 'sluggish'"),
        (["--cents", "0"], "arrival tolerance in cents is 0.0"),
        (["--share", "1.5"], "share is 1.5"),
        (["--share", "0"], "share is 0.0"),
        (["--priority", "first"], "unknown priority 'first'"),
        (["--picture", "a.jpeg"], "unknown picture suffix"),
    ],
)
def test_bad_input_is_one_line_and_no_file(refused, arguments, said):
    assert said in refused("arrival", *arguments)


def test_a_share_of_a_song_that_turns_the_pot_is_refused(cli, song):
    turning = song(
        (0, 1, 48), (1, 2, 60), extra=[(0.5, Message("control_change", control=5, value=9))]
    )
    status, _, err = cli("--midi", turning, "--share", "0.5")
    assert status == 1
    assert "moves the pot itself" in err


@pytest.mark.parametrize(
    "arguments",
    [
        ["--channels", "1"],
        ["--tracks", "1"],
        ["--keep-gliding"],
        ["--phrase", "run", "--midi", "x.mid"],
        ["--share"],
    ],
)
def test_options_that_do_not_apply_are_refused(cli, arguments):
    assert cli(*arguments)[0] == 2
