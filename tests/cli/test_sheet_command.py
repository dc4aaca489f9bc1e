"""`livelag sheet`: its answer, its tables, its files and what it refuses."""

import csv
import json

import pytest
from sheet_stages import CROWDED, SPARE

from livelag.circuit.presets import preset_names, stage_to_toml


@pytest.mark.parametrize("preset", preset_names())
def test_json_of_every_preset(livelag, preset):
    answer = livelag("sheet", preset, "--json")
    assert answer.status == 0
    found = json.loads(answer.out)
    assert found["preset"] == preset
    ranges = [row["range"] for row in found["signals"]]
    assert [(row["range"], row["rotation"]) for row in found["positions"]] == [
        (name, turn) for name in ranges for turn in (0.0, 0.25, 0.5, 0.75, 1.0)
    ]
    for row in found["positions"]:
        for name in ("time_constant_s", "rise_s", "after_one_time_constant_v", "settled_v"):
            assert row[name]["low"] <= row[name]["nominal"] <= row[name]["high"]
    assert found["cautions"]
    assert found["parts"]


def test_json_agrees_with_ranges_and_spread(livelag):
    sheet = json.loads(livelag("sheet", "--json").out)
    ranges = json.loads(livelag("ranges", "--json").out)
    spread = json.loads(livelag("spread", "--builds", 10, "--json").out)
    for number in (0, 1):
        row = sheet["positions"][5 * number + 4]
        tau = row["time_constant_s"]
        assert tau["nominal"] == ranges["ranges"][number]["longest_s"]
        assert row["rise_s"]["nominal"] == ranges["ranges"][number]["rise_longest_s"]
        longest = spread["ranges"][number]["longest_s"]
        assert tau["low"] == pytest.approx(longest["lowest"], rel=1e-12)
        assert tau["high"] == pytest.approx(longest["highest"], rel=1e-12)


def test_tables_say_what_to_set_and_what_to_read(livelag):
    answer = livelag("sheet")
    assert answer.status == 0
    assert "2.37 (1.70–3.13) s" in answer.out
    assert "22 mHz" in answer.out
    assert "To print it: --out sheet.pdf" in answer.out
    assert max(map(len, answer.out.splitlines())) <= 120


@pytest.mark.parametrize(
    ("out", "files"),
    [
        ("s.html", ["s.html"]),
        ("s.svg", ["s-1.svg", "s-2.svg"]),
        ("s.png", ["s-1.png", "s-2.png"]),
    ],
)
def test_files_are_told_and_there(livelag, tmp_path, out, files):
    told = json.loads(livelag("sheet", "one-range-log", "--out", out, "--json").out)
    assert (told["out"], told["paper"]) == (files, "a4")
    assert sorted(path.name for path in tmp_path.iterdir()) == files


def test_csv_has_a_row_for_every_position(livelag, tmp_path):
    answer = livelag("sheet", "three-range", "--csv", "s.csv")
    assert "csv in s.csv" in answer.out
    with (tmp_path / "s.csv").open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == 15
    told = json.loads(livelag("sheet", "three-range", "--json").out)["positions"]
    for row, position in zip(rows, told, strict=True):
        assert row["range"] == position["range"]
        for key, end in (("rise_s", "nominal"), ("rise_low_s", "low"), ("rise_high_s", "high")):
            assert float(row[key]) == pytest.approx(position["rise_s"][end], rel=1e-11)
        assert float(row["gain_low"]) == pytest.approx(position["gain"]["low"], rel=1e-11)


def test_a_preset_of_ones_own_on_a_paper_of_choice(livelag, tmp_path):
    (tmp_path / "mine.toml").write_text(stage_to_toml(SPARE), encoding="utf-8")
    answer = livelag("sheet", "mine.toml", "--out", "mine.pdf", "--paper", "Letter")
    assert answer.status == 0
    assert "sheet in mine.pdf" in answer.out
    assert b"/MediaBox [ 0 0 612 792 ]" in (tmp_path / "mine.pdf").read_bytes()


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["--out", "s.txt"], "s.txt: unknown sheet suffix '.txt'; known: .pdf, .png, .svg, .html"),
        (["--out", "s"], "s: unknown sheet suffix ''"),
        (["--out", ".pdf"], ".pdf: unknown sheet suffix ''"),
        (["--out", "none/s.pdf"], "folder 'none' does not exist"),
        (["--out", "s.pdf", "--csv", "none/s.csv"], "folder 'none' does not exist"),
        (["--out", "s.pdf", "--paper", "a5"], "--paper: unknown paper 'a5'; "),
        (["--out", "s.pdf", "--csv", "./s.pdf"], "--csv and --out name the same file"),
        (["--out", "s.png", "--csv", "s-2.png"], "--csv and --out name the same file"),
        (["nonesuch"], "nonesuch"),
    ],
)
def test_bad_input_is_one_line_and_no_file(refused, arguments, said):
    assert said in refused("sheet", *arguments)


def test_a_paper_without_a_sheet_is_refused(livelag):
    answer = livelag("sheet", "--paper", "a4")
    assert answer.status == 2
    assert "--paper goes with --out" in answer.err


def test_too_many_ranges_are_refused_with_a_reason(livelag, tmp_path):
    text = stage_to_toml(CROWDED)
    text += '\n[[range]]\nname = "sixth"\nconnects = ["capacitor number 1"]\n'
    (tmp_path / "six.toml").write_text(text, encoding="utf-8")
    answer = livelag("sheet", "six.toml", "--out", "six.pdf")
    assert answer.status == 1
    assert "the stage has 6 ranges; two pages hold 5 at most" in answer.err
    assert not (tmp_path / "six.pdf").exists()
