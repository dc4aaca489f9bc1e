"""`livelag spread`: its answer, its tables, its files and what it refuses."""

import csv
import json
from functools import partial

import numpy as np
import pytest

from livelag.circuit.presets import load_stage
from livelag.circuit.stage import Setting


@pytest.fixture
def cli(livelag):
    """Run `livelag spread` in an empty folder."""
    return partial(livelag, "spread")


def test_json_holds_what_is_promised(cli):
    status, out, _ = cli("--builds", 5000, "--seed", 7, "--json")
    answer = json.loads(out)
    assert status == 0
    assert (answer["builds"], answer["seed"], answer["distribution"]) == (5000, 7, "uniform")
    assert answer["gap_fraction"] == 0.0
    assert [row["name"] for row in answer["ranges"]] == ["fast", "slow"]
    for row in answer["ranges"]:
        for end in ("shortest_s", "longest_s"):
            found = row[end]
            assert (
                found["lowest"] < found["p2_5"] < found["p50"] < found["p97_5"] < found["highest"]
            )
            assert sum(found["variance_shares"].values()) == pytest.approx(1.0, abs=0.1)
            assert sum(found["variance_shares_linear"].values()) == pytest.approx(1.0)
    assert {part["name"] for part in answer["parts"]} == {
        "pot", "series resistor", "capacitor 'small'", "capacitor 'large'",
    }  # fmt: skip
    assert json.loads(cli("--builds", 5000, "--seed", 7, "--json")[1]) == answer
    assert json.loads(cli("--builds", 5000, "--seed", 8, "--json")[1]) != answer


def test_one_range_has_no_gap_to_speak_of(cli):
    assert json.loads(cli("one-range-log", "--builds", 10, "--json")[1])["gap_fraction"] is None


def test_a_normal_distribution_is_narrower(cli):
    uniform, normal = (
        json.loads(cli("--builds", 20000, "--distribution", name, "--json")[1])["ranges"][1]
        for name in ("uniform", "normal")
    )
    width = [row["longest_s"]["p97_5"] - row["longest_s"]["p2_5"] for row in (uniform, normal)]
    assert width[1] < 0.9 * width[0]
    assert uniform["longest_s"]["highest"] == normal["longest_s"]["highest"]


def test_tables_say_who_is_to_blame(cli):
    status, out, _ = cli("ceramic-budget", "--builds", 2000)
    assert status == 0
    assert "2,000 builds, seed 1" in out
    assert "% of the builds have a gap between ranges." in out
    blamed = next(line for line in out.splitlines() if line.strip().startswith("capacitor 'large'"))
    shares = [float(word) for word in blamed.replace("%", "").split()[2:]]
    assert shares[0] == pytest.approx(0, abs=1)
    assert shares[2] > 85


def test_a_build_becomes_a_preset_that_loads(cli, tmp_path):
    extremes = json.loads(cli("--builds", 3000, "--json")[1])["ranges"][1]["longest_s"]
    worst = extremes["highest_build"]
    status, out, _ = cli(
        "--builds", 3000, "--build", worst, "--save", "worst.toml", "--csv", "b.csv"
    )
    assert status == 0
    assert f"build {worst} in worst.toml" in out
    built = load_stage(str(tmp_path / "worst.toml"))
    assert f"build {worst}" in built.title
    with (tmp_path / "b.csv").open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == 3000
    longest = np.array([float(row["slow longest s"]) for row in rows])
    assert longest.argmax() + 1 == worst
    assert built.time_constant_s(Setting(1, 1.0)) == pytest.approx(longest.max(), rel=1e-11)
    assert built.pot.resistance_ohms == pytest.approx(float(rows[worst - 1]["pot ohms"]), rel=1e-11)


def test_picture(cli, tmp_path):
    assert cli("three-range", "--builds", 500, "--picture", "s.svg")[0] == 0
    assert "<svg" in (tmp_path / "s.svg").read_text(encoding="utf-8")


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["--builds", 0], "builds is 0; it must be 1 to 100,000,000"),
        (["--builds", 1000000000], "builds is 1000000000; it must be 1 to 100,000,000"),
        (["--seed", -1], "seed is -1"),
        (["--distribution", "gauss"], "unknown distribution 'gauss'"),
        (
            ["--builds", 10, "--build", 11, "--save", "x.toml"],
            "build is 11; there are builds 1 to 10",
        ),
        (["--build", 1, "--save", "x.txt"], "--save is 'x.txt'"),
        (["--build", 1, "--save", "none/x.toml", "--csv", "x.csv"], "none/x.toml"),
        (["--builds", 2000000, "--csv", "x.csv"], "too long a file"),
        (["--build", 1, "--save", "x.toml", "--csv", "x.toml"], "name the same file"),
    ],
)
def test_bad_input_is_one_line_and_no_file(refused, arguments, said):
    assert said in refused("spread", *arguments)


@pytest.mark.parametrize("arguments", [["--build", 3], ["--save", "x.toml"], ["--builds", "1.5"]])
def test_options_that_do_not_apply_are_refused(cli, arguments):
    status, _, err = cli(*arguments)
    assert status == 2
    assert err
