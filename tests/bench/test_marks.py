"""Marks files: what is written reads back, and what cannot be used is told in one line."""

import math
import tomllib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from livelag.bench.marks import Marks
from livelag.errors import FileError, InputError

times = st.floats(-6.0, 4.0).map(lambda exponent: 10.0**exponent)


@given(st.lists(times, min_size=2, max_size=3, unique=True).map(sorted))
def test_what_is_saved_reads_back(tmp_path_factory, marked):
    path = tmp_path_factory.mktemp("marks") / "marks.toml"
    marks = Marks(marked[0], marked[1] if len(marked) == 3 else None, marked[-1])
    marks.save(path)
    again = Marks.load(path)
    assert list(again.by_name()) == list(marks.by_name())
    for name, seconds in marks.by_name().items():
        assert again.by_name()[name] == pytest.approx(seconds, rel=1e-5)


def test_the_file_is_for_people(tmp_path):
    Marks(0.0125, None, 2.4).save(tmp_path / "m.toml")
    content = tomllib.loads((tmp_path / "m.toml").read_text(encoding="utf-8"))
    assert content == {"version": 1, "shortest": "12.5 ms", "longest": "2.4 s"}


def test_times_that_six_digits_would_level_stay_apart(tmp_path):
    close = Marks(0.1, math.nextafter(0.1, 1.0), 0.2)
    close.save(tmp_path / "m.toml")
    assert Marks.load(tmp_path / "m.toml") == close


GOOD = 'version = 1\nshortest = "2.5 ms"\nhandover = "80m"\nlongest = 2.4\n'


def test_any_notation_reads(tmp_path):
    path = tmp_path / "m.toml"
    path.write_text(GOOD, encoding="utf-8")
    assert Marks.load(path) == Marks(0.0025, 0.08, 2.4)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        (GOOD.replace("= 1", "= 2"), "version is 2; this livelag reads version 1"),
        (GOOD.replace("version = 1\n", ""), "version is missing"),
        (GOOD.replace("longest", "slowest"), "longest is missing"),
        (GOOD + "note = 60\n", "note is not a known key; known: version, shortest, handover"),
        (GOOD.replace('"80m"', '"1m"'), "shortest is 2.5 ms and handover is 1 ms; the times must"),
        (GOOD.replace("2.4", "0.08"), "handover is 80 ms and longest is 80 ms; the times must"),
        (GOOD.replace("2.4", "nan"), "longest: nan is not a finite number"),
        (GOOD.replace('"2.5 ms"', "0"), "shortest is 0.0; it must be a positive number"),
        (GOOD.replace('"2.5 ms"', '"-1 ms"'), "shortest is -0.001; it must be a positive number"),
        (GOOD.replace('"2.5 ms"', '"2.5 mV"'), "shortest: '2.5 mV' is not a value in seconds"),
        ("shortest", "not a marks file in TOML"),
        ("a = " + "[" * 5000, "nested too deeply"),
    ],
)
def test_what_cannot_be_used_is_one_line(tmp_path, text, said):
    path = tmp_path / "m.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(InputError) as caught:
        Marks.load(path)
    assert said in str(caught.value)
    assert str(caught.value).startswith(f"{path}: ")
    assert "\n" not in str(caught.value)


def test_files_that_are_not_there_or_not_text(tmp_path):
    with pytest.raises(FileError, match="cannot be read"):
        Marks.load(tmp_path / "none.toml")
    (tmp_path / "bytes.toml").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(InputError, match="not a marks file"):
        Marks.load(tmp_path / "bytes.toml")
    with pytest.raises(FileError, match="does not exist"):
        Marks(1.0, None, 2.0).save(tmp_path / "no" / "m.toml")


@pytest.mark.parametrize("wrong", [(2.0, None, 1.0), (1.0, 3.0, 2.0), (math.nan, None, 1.0)])
def test_marks_out_of_order_cannot_be_made(wrong):
    with pytest.raises(InputError):
        Marks(*wrong)
