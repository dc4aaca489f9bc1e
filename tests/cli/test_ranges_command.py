"""`livelag ranges`: its answer, its table, its files and what it refuses."""

import csv
import json
from functools import partial

import pytest

from livelag.circuit.presets import load_stage, preset_names


@pytest.fixture
def cli(livelag):
    """Run `livelag ranges` in an empty folder."""
    return partial(livelag, "ranges")


@pytest.mark.parametrize("preset", preset_names())
def test_json_holds_what_is_promised(cli, preset):
    status, out, _ = cli(preset, "--json")
    answer = json.loads(out)
    stage = load_stage(preset)
    assert status == 0
    assert answer["preset"] == preset
    assert [row["name"] for row in answer["ranges"]] == list(stage.range_names)
    for row in answer["ranges"]:
        assert 0 < row["shortest_s"] < row["longest_s"]
        assert row["shortest_s"] < row["octave_arrival_shortest_s"]
        assert row["longest_s"] < row["octave_arrival_longest_s"]
        assert row["rise_shortest_s"] == pytest.approx(2.2 * row["shortest_s"], rel=0.2)
    ratios = [row["overlap_ratio"] for row in answer["neighbours"]]
    assert answer["overlap_ratio"] == (min(ratios) if ratios else None)
    assert len(ratios) == len(stage.ranges) - 1


def test_overlap_of_the_default_preset(cli):
    # 471 kohm x 330 nF over 1.002 kohm x 5.03 uF, by hand.
    answer = json.loads(cli("--json")[1])
    assert answer["overlap_ratio"] == pytest.approx(471e3 * 0.33 / (1.002e3 * 5.03), rel=1e-9)


def test_table_says_overlap_gap_and_travel(cli):
    status, out, err = cli("ceramic-budget")
    assert status == 0
    assert "Between 'fast' and 'slow' there is a gap: times across a factor of 1.4" in out
    assert "measured (fitted)" in out
    assert "always" in out
    assert "x7r" in err
    assert "overlap by a factor of 30.8" in cli()[1]
    assert "overlap" not in cli("one-range-log")[1]


def test_csv_and_picture(cli, tmp_path):
    status, out, _ = cli("three-range", "--csv", "r.csv", "--picture", "r.svg")
    assert status == 0
    assert "csv in r.csv" in out
    with (tmp_path / "r.csv").open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == 3 * 101
    assert list(rows[0]) == ["range", "rotation", "time_constant_s", "rise_s", "octave_arrival_s"]
    answer = json.loads(cli("three-range", "--json")[1])
    assert float(rows[0]["time_constant_s"]) == pytest.approx(answer["ranges"][0]["shortest_s"])
    assert float(rows[-1]["octave_arrival_s"]) == pytest.approx(
        answer["ranges"][2]["octave_arrival_longest_s"]
    )
    picture = (tmp_path / "r.svg").read_text(encoding="utf-8")
    assert "<svg" in picture
    assert len(list(tmp_path.iterdir())) == 2


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["nowhere"], "unknown preset 'nowhere'"),
        (["--picture", "r.gif"], "r.gif: unknown picture suffix '.gif'"),
        (["--csv", "none/r.csv"], "none/r.csv: folder 'none' does not exist"),
        (["--csv", "x.png", "--picture", "x.png"], "--csv and --picture name the same file"),
    ],
)
def test_bad_input_is_one_line_and_no_file(refused, arguments, said):
    assert said in refused("ranges", *arguments)


def test_a_wrong_command_line(cli):
    assert cli("--tapers")[0] == 2
