"""`livelag fit`: its answer, its tables, its files and what it refuses."""

import csv
import json

import numpy as np
import pytest
from bench.capture_maker import Circuit, Generator, Scope, record, write_capture

from livelag.circuit.presets import load_stage
from livelag.circuit.stage import Setting

POT, SERIES, SMALL, LARGE = 505e3, 1.005e3, 318e-9, 4.9e-6


def make(path, range_index=0, rotation=0.5, seed=1, scope=None, **shape):
    """A capture of the puppet theatre's stage; returns its true time constant."""
    capacitance = SMALL + LARGE * range_index
    circuit = Circuit(
        SERIES + POT * rotation, capacitance, ((0.00225, 1.0),), 1e4 / capacitance,
        bias_a=30e-12, offset_in_v=2e-3, offset_out_v=-3e-3, divider=0.999,
    )  # fmt: skip
    tau = circuit.time_constant_s
    scope = {"samples": 700, "interval_s": tau / 80, "start_s": -tau, "seed": seed, **(scope or {})}
    generator = Generator((0.0, 4.0), (tau / 300,), rise_s=1e-6 * tau)
    times, before, after = record(circuit, generator, Scope(**scope))
    write_capture(path, times, before, after, **shape)
    return tau


def test_json_holds_what_is_promised(livelag, tmp_path):
    tau = make(tmp_path / "half.csv")
    status, out, err = livelag("fit", "half.csv", "--range", "fast", "--rotation", 0.5, "--json")
    answer = json.loads(out)
    assert (status, err) == (0, "")
    assert abs(answer["time_constant_s"] - tau) < 1.5 * answer["time_constant_u95_s"]
    assert answer["time_constant_u95_s"] < 0.02 * tau
    assert abs(answer["gain"] - 0.999) < 1.5 * answer["gain_u95"]
    assert abs(answer["offset_v"] + 0.001) < 1.5 * answer["offset_u95_v"]
    assert answer["within_sheet"] is True
    assert answer["delay_u95_s"] > abs(answer["delay_s"])
    assert (answer["input_channel"], answer["output_channel"]) == ("CH1", "CH2")
    assert [line["what"] for line in answer["lines"]] == [
        "time_constant_s", "rise_s", "gain", "offset_v",
    ]  # fmt: skip
    for line in answer["lines"]:
        assert line["low"] <= line["planned"] <= line["high"]


def test_without_a_setting_there_is_no_verdict(livelag, tmp_path):
    make(tmp_path / "half.csv")
    assert json.loads(livelag("fit", "half.csv", "--json")[1])["within_sheet"] is None
    status, out, _ = livelag("fit", "half.csv")
    assert status == 0
    assert "For a verdict say where the controls stood" in out
    assert "verdict " not in out.split("For a verdict")[0]


def test_the_wrong_setting_is_outside(livelag, tmp_path):
    make(tmp_path / "half.csv")
    status, out, _ = livelag("fit", "half.csv", "--range", "slow", "--rotation", 0.9)
    assert status == 0
    assert "Outside the sheet: time constant." in out
    assert "capacitor 'small' + 'large' is too small" in out
    answer = json.loads(livelag("fit", "half.csv@slow:0.9", "--json")[1])
    assert answer["within_sheet"] is False


def test_files(livelag, tmp_path):
    make(tmp_path / "half.csv", preamble=("Comment,a puppet's voice",), units=("s", "V", "V"))
    status, out, _ = livelag(
        "fit", "half.csv", "--range", "fast", "--rotation", 0.5, "--csv", "rows.csv",
        "--picture", "fit.png", "--save", "built.toml",
    )  # fmt: skip
    assert status == 0
    assert (tmp_path / "fit.png").read_bytes().startswith(b"\x89PNG")
    with (tmp_path / "rows.csv").open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == 700
    residual = np.array([float(r["output_v"]) - float(r["fitted_v"]) for r in rows])
    assert np.abs(residual - [float(r["residual_v"]) for r in rows]).max() < 1e-9
    assert residual.std() < 0.03
    built = load_stage(str(tmp_path / "built.toml"))
    measured = json.loads(livelag("fit", "half.csv@fast:0.5", "--json")[1])["time_constant_s"]
    assert built.time_constant_s(Setting(0, 0.5)) == pytest.approx(measured, rel=1e-9)
    assert "as built" in built.title
    command = next(line for line in out.splitlines() if "livelag render built.toml" in line)
    status, out, _ = livelag(*command.split()[1:], "--phrase", "staircase", "--out", "built.wav")
    assert status == 0
    assert "as built" in out


def test_several_captures_give_the_parts(livelag, tmp_path):
    where = ((0, 0.0), (0, 0.5), (0, 1.0), (1, 0.5), (1, 1.0))
    names = []
    for seed, (index, rotation) in enumerate(where):
        shape = {"separator": ";", "decimal": ","} if seed % 2 else {}
        make(tmp_path / f"{seed}.csv", index, rotation, seed, **shape)
        names.append(f"{seed}.csv@{('fast', 'slow')[index]}:{rotation:g}")
    status, out, _ = livelag("fit", *names, "--picture", "all.svg", "--save", "built.toml")
    assert status == 0
    assert "What the captures say together" in out
    assert (tmp_path / "all.svg").is_file()
    ratios = {
        row["key"]: row
        for row in json.loads(livelag("fit", *names, "--json")[1])["parts"]["ratios"]
    }
    truths = {
        "series_ratio": SERIES / POT, "law_middle": 0.5, "capacitor_ratio": 1 + LARGE / SMALL,
    }  # fmt: skip
    for key, true in truths.items():
        assert abs(ratios[key]["value"] - true) < 1.5 * ratios[key]["u95"]
        assert ratios[key]["verdict"] in ("within", "within ±")
    built = load_stage(str(tmp_path / "built.toml"))
    for index, rotation in where:
        true = (SERIES + POT * rotation) * (SMALL + LARGE * index)
        assert built.time_constant_s(Setting(index, rotation)) == pytest.approx(true, rel=0.03)


def test_a_file_with_an_at_in_its_name(livelag, tmp_path):
    make(tmp_path / "a@b.csv")
    assert json.loads(livelag("fit", "a@b.csv", "--json")[1])["capture"] == "a@b.csv"
    answer = json.loads(livelag("fit", "a@b.csv@fast:0.5", "--json")[1])
    assert (answer["range"], answer["rotation"]) == ("fast", 0.5)


def test_sample_interval_stands_in_for_time(livelag, tmp_path):
    tau = make(tmp_path / "c.csv", with_time=False, names=("A", "B"))
    assert livelag("fit", "c.csv")[0] == 1
    answer = json.loads(livelag("fit", "c.csv", "--sample-interval", tau / 80, "--json")[1])
    assert answer["time_constant_s"] == pytest.approx(tau, rel=0.02)


def write(path, *lines, encoding="utf-8"):
    path.write_bytes("\n".join(lines).encode(encoding))


STEP = [f"{0.001 * i:.3f},{0 if i < 9 else 4},{0.1 * i:.2f}" for i in range(40)]
BAD_FILES = {
    "missing": (None, "bad.csv: cannot be read: No such file or directory"),
    "empty": (b"", "bad.csv: is empty; expected a CSV with a time column and two channels"),
    "no CSV": (b"Once upon a time\nthere was a puppet\n", "holds no rows of numbers, it starts"),
    "binary": (bytes(range(256)) * 9, "is not text"),
    "picture": (b"\x89PNG\r\n\x1a\n" + bytes(99), "is a picture, not text"),
    "one channel": ("\n".join(r.rsplit(",", 1)[0] for r in STEP).encode(), "one channel"),
    "all NaN": ("\n".join(f"{i},nan,nan" for i in range(40)).encode(), "only NaN or blanks"),
    "text": ("\n".join([*STEP[:30], "0.03,high,2", *STEP[31:]]).encode(),
             "line 31, column 2 is 'high'; it must be a number"),
    "nothing": ("\n".join(f"{i * 0.01},2.00,1.0{i % 2}" for i in range(99)).encode(),
                "shows no step, only noise"),
    "wrong encoding": ("\n".join(STEP).encode("utf-16")[2:-1], ""),
}  # fmt: skip


@pytest.mark.parametrize("what", BAD_FILES)
def test_a_bad_file_is_one_line(refused, tmp_path, what):
    content, said = BAD_FILES[what]
    if content is not None:
        (tmp_path / "bad.csv").write_bytes(content)
    line = refused("fit", "bad.csv", "--csv", "rows.csv", "--picture", "p.png")
    assert line.startswith("livelag: bad.csv: ")
    assert said in line


@pytest.mark.parametrize(
    ("arguments", "status", "said"),
    [
        (["c.csv", "--range", "quick", "--rotation", "0.5"], 1, "unknown range 'quick'"),
        (["c.csv@quick:0.5"], 1, "unknown range 'quick'"),
        (["c.csv@fast"], 1, "'fast' is not a setting; write it as FILE@RANGE:ROTATION"),
        (["c.csv@fast:half"], 1, "'fast:half' is not a setting"),
        (["c.csv@fast:1.5"], 1, "rotation is 1.5; it must be from 0 to 1"),
        (["c.csv", "--range", "fast"], 2, "--range needs --rotation"),
        (["c.csv", "--rotation", "0.5"], 2, "--rotation needs --range, one of fast, slow"),
        (["c.csv@fast:0.5", "--range", "fast", "--rotation", "1"], 2, "are for captures without"),
        (["c.csv", "c.csv"], 2, "several captures each need their setting"),
        (["c.csv@fast:0", "c.csv"], 2, "several captures each need their setting"),
        (["c.csv", "--save", "b.toml"], 2, "--save needs to know where the controls stood"),
        (["c.csv@fast:0.5", "--save", "b.txt"], 1, "--save is 'b.txt'"),
        (["c.csv@fast:0.5", "--save", "no/b.toml", "--csv", "r.csv"], 1, "no/b.toml"),
        (["c.csv", "--picture", "p.bmp"], 1, "unknown picture suffix '.bmp'"),
        (["c.csv", "--csv", "x.png", "--picture", "x.png"], 1, "name the same file"),
        (["c.csv", "--csv", "c.csv"], 1, "--csv is 'c.csv', which is a capture"),
        (["c.csv", "--in", "CH9"], 1, "unknown channel 'CH9'; did you mean 'CH2'"),
        (["c.csv", "--in", "1", "--out", "CH1"], 1, "input and output are both 'CH1'"),
        (["c.csv", "--in", "CH2"], 1, "does not follow 'CH2' as a glide does"),
        (["c.csv", "--volts-accuracy", "0.01"], 2, "which needs --range and --rotation"),
        (["c.csv", "--volts-accuracy", "3"], 1, "must be a fraction from 0 to 1 (3 % is 0.03)"),
        (["c.csv", "--volts-accuracy", "nan"], 1, "must be a fraction from 0 to 1"),
        (["c.csv", "--sample-interval", "0"], 1, "it must be more than 0"),
        (["c.csv", "--sample-interval", "soon"], 1, "--sample-interval: 'soon' is not a value"),
        (["c.csv", "--preset", "none"], 1, "unknown preset 'none'"),
        (["."], 1, ".: is a folder; name a CSV file"),
        (["c.csv@fast:0.5", "c.csv@fast:0.5"], 1, "several captures of one setting"),
    ],
)
def test_bad_input_is_one_line(livelag, tmp_path, arguments, status, said):
    make(tmp_path / "c.csv")
    found, out, err = livelag("fit", *arguments)
    assert (found, out) == (status, "")
    assert said in err
    if status == 1:
        assert err.count("\n") == 1
    assert [path.name for path in tmp_path.iterdir()] == ["c.csv"]


def test_a_long_capture_has_no_bar_away_from_a_terminal(livelag, tmp_path):
    tau = make(tmp_path / "long.csv", scope={"samples": 100_000, "interval_s": 5e-6})
    status, out, err = livelag("fit", "long.csv", "--json")
    assert (status, err) == (0, "")
    answer = json.loads(out)
    assert answer["time_constant_s"] == pytest.approx(tau, rel=0.005)
    assert answer["averaged"] > 1
