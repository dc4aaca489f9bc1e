"""`livelag parts`: its answer, its tables, the files it writes and what it refuses."""

import csv
import json
from functools import partial

import numpy as np
import pytest
from rich.console import Console

from livelag.bench.marks import Marks
from livelag.circuit.presets import load_stage
from livelag.circuit.stage import Setting

TIMES = ("--shortest", "2ms", "--handover", "70ms", "--longest", "2.4s")
DRAWER = """part,value,kind,quantity
resistor,1k,,5
resistor,2k2,,5
pot,100k,,1
pot,220k,,1
capacitor,1u,polyester,1
capacitor,10u,bipolar electrolytic,2
capacitor,22u,electrolytic,2
"""


@pytest.fixture
def parts(livelag):
    """Run `livelag parts` in an empty folder."""
    return partial(livelag, "parts")


@pytest.fixture
def answer(parts):
    """Run it with `--json` and return the object."""

    def call(*arguments):
        ended = parts(*arguments, "--json")
        assert ended.status == 0, ended.err
        return json.loads(ended.out)

    return call


def test_json_holds_what_is_promised(answer):
    found = answer(*TIMES)
    assert found["wishes"]["times_s"] == [0.002, 0.07, 2.4]
    assert found["combinations"] > 4e8
    assert len(found["candidates"]) == 8
    for one in found["candidates"]:
        ohms, pot, farads = one["series_ohms"], one["pot_ohms"], one["capacitors_f"]
        for k, row in enumerate(one["ranges"]):
            series = row["series_ohms"]
            assert series == ohms or (one["topology"] == "series-switched" and k > 0)
            total = sum(farads[: k + 1]) if one["topology"] == "added" else farads[k]
            assert row["shortest_s"] == pytest.approx(series * total)
            assert row["longest_s"] == pytest.approx((series + pot) * total)
        errors = [abs(row["got_s"] / row["wished_s"] - 1) for row in one["errors"]]
        assert one["worst_error_fraction"] == pytest.approx(max(errors))
        assert -1.0 < one["tuning_cents_per_octave"] < 0.0
    scores = [one["score"] for one in found["candidates"]]
    assert scores == sorted(scores)
    assert found["candidates"][0]["pareto"]
    fits = {row["topology"]: row["fits_exactly"] for row in found["topologies"]}
    assert fits == {"added": False, "exchanged": False, "series-switched": True}


def test_tolerances_of_the_choice(answer):
    found = answer(*TIMES, "--choice", "2")
    chosen = found["candidates"][found["choice"] - 1]
    spread = found["spread"]
    assert [row["name"] for row in spread["ranges"]] == ["fast", "slow"]
    for row, times in zip(spread["ranges"], chosen["ranges"], strict=True):
        for end in ("shortest_s", "longest_s"):
            assert 0.5 * times[end] < row[end]["p2_5"] < times[end] < row[end]["p97_5"]
    assert spread["gap_fraction"] < 0.01


def test_overlap_keeps_builds_from_gaps(answer):
    assert answer(*TIMES, "--overlap", "1")["spread"]["gap_fraction"] > 0.2


def test_from_marks_to_a_preset(parts, answer, livelag, tmp_path):
    Marks(0.003, 0.08, 2.0).save(tmp_path / "marks.toml")
    found = answer("--marks", "marks.toml", "--choice", "2", "--save", "ours.toml")
    assert found["saved"] == "ours.toml"
    stage, chosen = load_stage(str(tmp_path / "ours.toml")), found["candidates"][1]
    assert stage.title == "3 ms to 2 s, two ranges"
    assert [c.capacitance_f for c in stage.capacitors] == chosen["capacitors_f"]
    assert all(c.tolerance > 0 for c in stage.capacitors)
    assert (stage.series.tolerance, stage.pot.tolerance) == (0.01, 0.2)
    assert stage.pot.taper.name == chosen["pot_taper"] == "logarithmic"
    for index, row in enumerate(chosen["ranges"]):
        assert stage.time_constant_s(Setting(index, 1.0)) == pytest.approx(row["longest_s"])
    said = parts("--marks", "marks.toml", "--save", "ours.toml").out
    assert "livelag audition ours.toml\n" in said
    command = "livelag render ours.toml --phrase procession"
    assert f"{command}\n" in said
    assert livelag(*command.split()[1:], "--out", "demo.wav").status == 0


def test_a_saved_name_with_a_space_is_quoted_in_the_next_command(parts):
    assert "livelag render 'our own.toml' --phrase" in parts(*TIMES, "--save", "our own.toml").out


def test_tables_explain_themselves(parts):
    ended = parts(*TIMES[:3], "30ms", *TIMES[4:], "--show", "2")
    assert ended.status == 0
    assert "Wished: 2 ms to 2.4 s, handing over at 30 ms with an overlap" in ended.out
    assert "series-switched" in ended.out
    assert "none near enough" in ended.out
    assert "fits exactly" in ended.out
    assert "every range the same ratio of longest to shortest; wished are 18.4 and 98." in ended.out
    handover = next(line for line in ended.out.splitlines() if line.startswith(" handover"))
    assert handover.split() == ["handover", "30", "ms", "69.3", "ms", "none"]
    assert "builds have a gap" in ended.out
    assert max(len(line.rstrip()) for line in ended.out.splitlines()) <= 120


def test_tables_fit_a_narrow_terminal(parts, monkeypatch):
    monkeypatch.setattr("livelag.cli.parts_tables.console", lambda: Console(width=80, markup=False))
    ended = parts("--shortest", "2ms", "--handover", "30ms,300ms", "--longest", "2.4s")
    lines = [line.rstrip() for line in ended.out.splitlines()]
    assert max(map(len, lines)) <= 80
    assert "…" not in ended.out
    header = next(line.split() for line in lines if line.startswith(" choice"))
    assert header[-3:] == ["shortest", "longest", "error"]


def test_one_range_and_three(answer, parts):
    one = answer("--shortest", "2ms", "--longest", "1s")
    assert [c["topology"] for c in one["candidates"]] == ["single"] * 8
    assert one["spread"]["gap_fraction"] is None
    assert "connection " not in parts("--shortest", "2ms", "--longest", "1s").out.split("Choice")[1]
    shared = answer("--shortest", "1ms", "--longest", "8s", "--ranges", "3", "--overlap", "1")
    assert shared["wishes"]["times_s"] == pytest.approx([1e-3, 2e-2, 0.4, 8.0])
    assert shared["topologies"][0]["fits_exactly"]
    three = answer("--shortest", "1ms", "--handover", "20ms,500ms", "--longest", "8s")
    assert all(len(c["capacitors_f"]) == 3 for c in three["candidates"])


def test_a_drawer_is_all_that_is_used(answer, parts, tmp_path):
    (tmp_path / "d.csv").write_text(DRAWER, encoding="utf-8")
    times = ("--shortest", "2.2ms", "--handover", "73ms", "--longest", "2.44s", "--overlap", "9")
    found = answer(*times, "--drawer", "d.csv", "--within", "1")
    best = found["candidates"][0]
    assert (best["series_ohms"], best["pot_ohms"]) == (2200.0, 220e3)
    assert best["capacitors_f"] == [1e-6, 1e-5]
    # Resistors, pots, pairs of capacitors; of the pairs of resistors, those that differ.
    assert found["combinations"] == 2 * 2 * 4 + 2 * 2 * 4 + (4 - 2) * 2 * 4
    kinds = {kind for one in found["candidates"] for kind in one["capacitor_kinds"]}
    assert kinds == {"polyester", "bipolar electrolytic"}
    err = parts(*times, "--drawer", "d.csv").err
    assert "polarised capacitors left out: 1" in err
    battery = parts(*times, "--drawer", "d.csv", "--preset", "battery-9v", "--within", "3")
    assert "left out" not in battery.err


def test_polarised_parts_come_with_a_caution(parts):
    words = ("--shortest", "50ms", "--longest", "100s", "--kinds", "electrolytic")
    ended = parts(*words, "--preset", "battery-9v")
    assert "Polarised: C1. Plus to the pot, minus to ground: reversed it can fail." in ended.out
    refused = parts(*words)
    assert refused.status == 1
    assert "'electrolytic' is polarised and the control voltage can go negative" in refused.err


def test_series_kinds_and_connections_narrow_the_search(answer):
    words = (*TIMES, "--resistors", "E12", "--capacitors", "E3", "--kinds", "x7r,polyester")
    found = answer(*words, "--connect", "added,exchanged", "--taper", "linear", "--within", "0.5")
    for one in found["candidates"]:
        assert one["topology"] in ("added", "exchanged")
        assert one["pot_taper"] == "linear"
        assert set(one["capacitor_kinds"]) <= {"x7r", "polyester"}
        for farads in one["capacitors_f"]:
            assert f"{farads:.1e}"[:3] in ("1.0", "2.2", "4.7")


def test_ends_of_the_rotation(answer):
    found = answer(*TIMES, "--ends", "0.05,0.95", "--taper", "logarithmic")
    best = found["candidates"][0]
    # What is wished at rotation 0.05 lies inside what the pot's stops give.
    assert best["ranges"][0]["shortest_s"] < best["errors"][0]["got_s"]
    assert best["errors"][1]["got_s"] < best["ranges"][0]["longest_s"]


def test_csv_and_picture(parts, tmp_path):
    ended = parts(*TIMES, "--csv", "p.csv", "--picture", "p.svg", "--show", "3")
    assert ended.status == 0
    assert "picture in p.svg" in ended.out
    with (tmp_path / "p.csv").open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert [(row["choice"], row["range"]) for row in rows] == [
        (str(n), name) for n in (1, 2, 3) for name in ("fast", "slow")
    ]
    assert float(rows[1]["wished_longest_s"]) == 2.4
    assert "<svg" in (tmp_path / "p.svg").read_text(encoding="utf-8")
    assert sorted(path.name for path in tmp_path.iterdir()) == ["p.csv", "p.svg"]


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (("--shortest", "3s", "--longest", "1s"), "shortest is 3 s and longest is 1 s; the times"),
        (("--shortest", "0", "--longest", "1s"), "shortest is 0.0; it must be a positive number"),
        (("--shortest=-1ms", "--longest", "1s"), "shortest is -0.001; it must be a positive"),
        (("--shortest", "nan", "--longest", "1s"), "--shortest: 'nan' is not a value in seconds"),
        (("--shortest", "1ms", "--longest", "inf"), "--longest: 'inf' is not a value in seconds"),
        ((*TIMES[:3], "3s", *TIMES[4:]), "handover is 3 s and longest is 2.4 s; the times must"),
        ((*TIMES, "--ranges", "3"), "handover: 1 given for 3 ranges; there must be 2, or none"),
        ((*TIMES, "--ranges", "1"), "handover: 1 given for 1 range; there must be 0"),
        ((*TIMES, "--ranges", "4"), "ranges is 4; it must be 1 to 3"),
        ((*TIMES, "--ranges", "0"), "ranges is 0; it must be 1 to 3"),
        ((*TIMES, "--overlap", "0.5"), "overlap is 0.5; it must be a ratio of 1"),
        ((*TIMES, "--overlap", "1e9"), "a range would swallow its neighbour"),
        ((*TIMES, "--within", "-1"), "within is -1.0; it must be a positive number"),
        ((*TIMES, "--ends", "0.9,0.1", "--taper", "linear"), "ends are 0.9 and 0.1; they must"),
        ((*TIMES, "--ends", "0.9", "--taper", "linear"), "--ends is '0.9'; it must be two"),
        ((*TIMES, "--resistors", "E7"), "unknown resistor series 'E7'; known: E12, E24, E96"),
        ((*TIMES, "--capacitors", "E24"), "unknown capacitor series 'E24'; did you mean 'E12'?"),
        ((*TIMES, "--kinds", "paper"), "--kinds: unknown capacitor kind 'paper'"),
        ((*TIMES, "--taper", "A"), "unknown taper 'A'"),
        ((*TIMES, "--connect", "stacked"), "unknown connection 'stacked'; known: added"),
        ((*TIMES, "--show", "0"), "--show is 0; it must be 1 to 100"),
        ((*TIMES, "--choice", "9"), "--choice is 9; there are choices 1 to 8"),
        ((*TIMES, "--choice", "0"), "--choice is 0; there are choices 1 to 8"),
        ((*TIMES, "--save", "ours.txt"), "--save is 'ours.txt'; a preset is a .toml file"),
        ((*TIMES, "--save", "no/o.toml"), "no/o.toml: folder 'no' does not exist"),
        ((*TIMES, "--preset", "nowhere"), "unknown preset 'nowhere'"),
        ((*TIMES, "--picture", "p.gif"), "unknown picture suffix '.gif'"),
        ((*TIMES, "--within", "0.001"), "no candidate within 0.1 % of the wishes: the nearest"),
        (("--marks", "none.toml"), "none.toml: cannot be read"),
        ((*TIMES, "--drawer", "none.csv"), "none.csv: cannot be read"),
        ((*TIMES, "--kinds", "c0g"), "no candidate within 25 % of the wishes: the nearest"),
    ],
)
def test_bad_input_is_one_line_and_no_file(refused, arguments, said):
    assert said in refused("parts", *arguments)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("version = 2\nshortest = 1\nlongest = 2\n", "m.toml: version is 2; this livelag reads"),
        ('version = 1\nshortest = "2"\nlongest = 1\n', "m.toml: shortest is 2 s and longest is 1"),
    ],
)
def test_marks_that_cannot_be_used(parts, tmp_path, text, said):
    (tmp_path / "m.toml").write_text(text, encoding="utf-8")
    ended = parts("--marks", "m.toml")
    assert (ended.status, ended.out) == (1, "")
    assert said in ended.err


@pytest.mark.parametrize("text", ["", "part,value\n", "part,value,kind\nresistor,1k,\npot,1M,\n"])
def test_an_empty_drawer(parts, tmp_path, text):
    (tmp_path / "d.csv").write_text(text, encoding="utf-8")
    ended = parts(*TIMES, "--drawer", "d.csv")
    assert (ended.status, ended.out) == (1, "")
    assert ended.err.startswith("livelag: d.csv: ")


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        ((), "give --shortest and --longest"),
        (("--shortest", "1ms"), "give --shortest and --longest"),
        (("--handover", "1ms"), "give --shortest and --longest"),
        ((*TIMES, "--marks", "m.toml"), "--marks brings the times; leave out --shortest"),
        ((*TIMES, "--drawer", "d.csv", "--resistors", "E12"), "does not apply to --drawer"),
        ((*TIMES, "--drawer", "d.csv", "--capacitors", "E12"), "does not apply to --drawer"),
        ((*TIMES, "--ends", "0.1,0.9"), "--ends needs --taper"),
        (("--shortest", "1ms", "--longest", "1s", "--overlap", "2"), "does not apply to one range"),
        (("--shortest", "1ms", "--longest", "1s", "--connect", "added"), "does not apply to one"),
        ((*TIMES, "--soon"), "there is no option --soon"),
    ],
)
def test_a_wrong_command_line(parts, arguments, said):
    ended = parts(*arguments)
    assert ended.status == 2
    assert said in ended.err


def test_builds_are_looked_at_where_the_times_are_wished(parts, answer):
    words = ("--shortest", "10ms", "--longest", "50ms", "--taper", "linear", "--ends", "0.1,0.6")
    found = answer(*words)
    best, row = found["candidates"][0], found["spread"]["ranges"][0]
    # Uniform tolerances of 1 % (series) and 20 % (pot), and the capacitor's.
    chance = np.random.default_rng(11).uniform(-1.0, 1.0, (200_000, 3))
    farads = best["capacitors_f"][0] * (1.0 + 0.05 * chance[:, 0])
    assert best["capacitor_kinds"] == ["polypropylene"]
    for end, turn in (("shortest_s", 0.1), ("longest_s", 0.6)):
        ohms = best["series_ohms"] * (1.0 + 0.01 * chance[:, 1])
        ohms += turn * best["pot_ohms"] * (1.0 + 0.2 * chance[:, 2])
        expected = np.quantile(ohms * farads, [0.025, 0.5, 0.975])
        assert [row[end][key] for key in ("p2_5", "p50", "p97_5")] == pytest.approx(
            expected, rel=5e-3
        )
    assert "the table below, are at the rotations wished" in " ".join(parts(*words).out.split())
    assert "rotations wished" not in parts(*words[:4]).out
