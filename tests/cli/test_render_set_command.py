"""`livelag render --rotations ... --ranges ...`: a numbered set and its index."""

import csv
import json

import pytest

from livelag.circuit.presets import load_stage
from livelag.circuit.stage import Setting

COMMON = ("render", "--phrase", "run", "--rate", 8000, "--depth", 16)


def test_a_set_holds_every_range_at_every_rotation_and_an_index(livelag, tmp_path):
    answer = livelag(
        *COMMON, "--rotations", "0,0.25,1", "--ranges", "all", "--out", "set", "--json"
    )
    assert (answer.status, answer.err) == (0, "")
    found = json.loads(answer.out)
    assert (found["out"], found["index"]) == ("set", "set/index.csv")
    with (tmp_path / "set/index.csv").open(newline="") as file:
        rows = list(csv.DictReader(file))
    names = [
        "01-fast-0.000.wav", "02-fast-0.250.wav", "03-fast-1.000.wav",
        "04-slow-0.000.wav", "05-slow-0.250.wav", "06-slow-1.000.wav",
    ]  # fmt: skip
    assert [row["file"] for row in rows] == names
    assert [row["out"] for row in found["renders"]] == [f"set/{name}" for name in names]
    assert {path.name for path in (tmp_path / "set").iterdir()} == {*names, "index.csv"}
    assert [path.name for path in tmp_path.iterdir()] == ["set"]
    stage = load_stage("two-range-film")
    for row, render in zip(rows, found["renders"], strict=True):
        setting = Setting(stage.range_index(row["range"]), float(row["rotation"]))
        assert float(row["time_constant_s"]) == pytest.approx(stage.time_constant_s(setting))
        assert float(row["seconds"]) == render["seconds"]
        assert float(row["peak_dbfs"]) == render["peak_dbfs"]


def test_a_rendering_of_a_set_is_the_single_one_to_the_byte(livelag, tmp_path):
    livelag(*COMMON, "--rotations", "0.1,0.9", "--ranges", "slow,fast", "--out", "set")
    for name, place, rotation in (("01-slow-0.100", "slow", 0.1), ("04-fast-0.900", "fast", 0.9)):
        livelag(*COMMON, "--range", place, "--rotation", rotation, "--out", "single.wav")
        single = (tmp_path / "single.wav").read_bytes()
        assert (tmp_path / f"set/{name}.wav").read_bytes() == single


def test_a_set_of_one_and_a_set_into_a_folder_that_is_there(livelag, tmp_path):
    (tmp_path / "set").mkdir()
    (tmp_path / "set/notes.txt").write_text("keep me")
    answer = livelag(*COMMON, "--rotations", "0.3", "--out", "set")
    assert (answer.status, answer.err) == (0, "")
    assert "Written to set: index.csv, sound files: 1" in answer.out
    names = {path.name for path in (tmp_path / "set").iterdir()}
    assert names == {"notes.txt", "01-fast-0.300.wav", "index.csv"}


def test_the_folder_has_a_default(livelag, tmp_path):
    assert livelag(*COMMON, "--ranges", "all").status == 0
    assert {path.name for path in (tmp_path / "livelag-set").iterdir()} == {
        "01-fast-0.500.wav", "02-slow-0.500.wav", "index.csv",
    }  # fmt: skip


def test_remarks_on_a_set_are_said_once(livelag, make_song):
    song = make_song((60, 12, 40))
    answer = livelag(
        "render", "battery-9v", "--midi", song, "--rate", 8000, "--rotations", "0,0", "--out", "s"
    )
    assert answer.status == 0
    assert answer.err.count("the buffers cannot pass") == 1


@pytest.mark.parametrize(
    ("options", "parts"),
    [
        (("--rotations", "0,1.5"), ("rotation", "1.5", "0 to 1")),
        (("--rotations", "0,nan"), ("rotation", "nan", "0 to 1")),
        (("--rotations", "0;1"), ("--rotations", "'0;1'")),
        (("--rotations", ""), ("--rotations", "''")),
        (("--ranges", "fast,slowest"), ("range", "'slowest'", "fast", "slow")),
        (("--rotations", "0,1", "--depth", "12"), ("depth", "'12'", "16, 24, float")),
        (
            ("--rotations", "0,1", "--stereo", "--full-scale-volts", "1"),
            ("--full-scale-volts", "1 V"),
        ),
    ],
)
def test_a_set_that_cannot_be_leaves_nothing(livelag, tmp_path, options, parts):
    answer = livelag(*COMMON, "--out", "set", *options)
    assert answer.status == 1
    assert len(answer.err.splitlines()) == 1
    assert answer.out == ""
    for part in parts:
        assert part in answer.err
    assert not any(tmp_path.iterdir())


def test_a_set_needs_a_place(livelag, tmp_path):
    (tmp_path / "taken").write_text("a file")
    for out, message in (("taken", "is a file"), ("none/set", "'none' does not exist")):
        answer = livelag(*COMMON, "--ranges", "all", "--out", out)
        assert answer.status == 1
        assert len(answer.err.splitlines()) == 1
        assert out in answer.err
        assert message in answer.err
    assert [path.name for path in tmp_path.iterdir()] == ["taken"]
