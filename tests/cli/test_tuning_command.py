"""`livelag tuning`: its answer, its tables, its files and what it refuses."""

import csv
import json
from functools import partial

import pytest

from livelag.circuit.presets import preset_names

CAUSES = ["input_offset", "output_offset", "bias_current", "insulation", "output_divider", "swing"]


@pytest.fixture
def cli(livelag):
    """Run `livelag tuning` in an empty folder."""
    return partial(livelag, "tuning")


@pytest.mark.parametrize("preset", preset_names())
def test_json_holds_what_is_promised(cli, preset):
    status, out, _ = cli(preset, "--json")
    answer = json.loads(out)
    assert status == 0
    assert {row["rotation"] for row in answer["positions"]} == {0, 0.25, 0.5, 0.75, 1}
    for row in answer["positions"]:
        assert list(row["causes"]) == CAUSES
        assert row["offset_cents"] == pytest.approx(
            sum(row["causes"][c] for c in CAUSES[:3]), abs=1e-12
        )
        assert row["scale_cents_per_octave"] == pytest.approx(
            sum(row["causes"][c] for c in CAUSES[3:5]), abs=1e-12
        )
        assert row["dominating"] in CAUSES
    worst = max(
        (abs(row["causes"][c]) * (5 if c in CAUSES[3:5] else 1), c)
        for row in answer["positions"]
        for c in CAUSES
    )
    assert answer["dominating"]["worth_cents"] == pytest.approx(worst[0])
    assert answer["cause_units"]["insulation"] == "cents_per_octave"


def test_drift_of_a_bipolar_input_by_hand(cli):
    answer = json.loads(cli("bipolar-drift", "--json")[1])
    last = answer["positions"][-1]
    # 1200 x 80 nA x 1.001 Mohm, less what the 1 kohm into 100 kohm takes.
    assert last["causes"]["bias_current"] == pytest.approx(-96.096 * 100 / 101, rel=1e-3)
    assert answer["dominating"]["cause"] == "bias_current"
    assert "at most 1.6 nA" in answer["advice"]


def test_table_names_the_dominating_cause_and_the_cure(cli):
    status, out, _ = cli("bipolar-drift")
    assert status == 0
    assert "Most comes from the bias current through the pot: up to 95.1 cents" in out
    assert "output buffer: a bias current of at most 1.6 nA (now 80 nA)" in out
    assert "jfet-input" in out
    # A looser goal lets more through.
    assert "at most 16 nA" in cli("bipolar-drift", "--cents", "20")[1]
    assert "nothing needs changing" in cli("ideal")[1]


def test_compass_and_positions(cli):
    answer = json.loads(cli("--notes", "36-48", "--positions", "3", "--json")[1])
    assert (answer["lowest_note"], answer["highest_note"]) == (36, 48)
    assert [row["rotation"] for row in answer["positions"]] == [0, 0.5, 1, 0, 0.5, 1]
    cut = json.loads(cli("--notes", "36-127", "--json")[1])["positions"][0]["causes"]["swing"]
    wide = json.loads(cli("battery-9v", "--notes", "24-60", "--json")[1])
    assert cut == 0.0  # 7.6 V is within a 12 V supply
    assert wide["dominating"]["cause"] == "swing"
    assert wide["advice"].startswith("negative rail: -1 V or below")


def test_csv_and_picture(cli, tmp_path):
    status, out, _ = cli("two-range-bipolar", "--csv", "t.csv", "--picture", "t.pdf", "--json")
    answer = json.loads(out)
    assert status == 0
    assert (answer["csv"], answer["picture"]) == ("t.csv", "t.pdf")
    with (tmp_path / "t.csv").open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == 2 * 101
    last = answer["positions"][-1]
    assert float(rows[-1]["insulation_cents_per_octave"]) == pytest.approx(
        last["causes"]["insulation"]
    )
    assert float(rows[-1]["worst_offset_cents"]) == pytest.approx(
        last["limits"]["worst_offset_cents"]
    )
    assert (tmp_path / "t.pdf").read_bytes().startswith(b"%PDF")


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["--notes", "60"], "--notes is '60'; write two MIDI notes such as 36-96"),
        (["--notes", "60-48"], "notes are 60 to 48"),
        (["--notes", "60-200"], "notes are 60 to 200"),
        (["--positions", "1"], "--positions is 1; it must be 2 to 1001"),
        (["--positions", "1000000000"], "--positions is 1000000000"),
        (["--cents", "-1"], "goal in cents is -1.0"),
        (["nowhere"], "unknown preset"),
    ],
)
def test_bad_input_is_one_line_and_no_file(refused, arguments, said):
    assert said in refused("tuning", *arguments)


def test_a_wrong_command_line(cli):
    assert cli("--rotation", "0.5")[0] == 2
    assert cli("--positions", "many")[0] == 2
