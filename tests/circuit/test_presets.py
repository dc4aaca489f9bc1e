"""Presets: what ships, what survives a round trip, and files that cannot be."""

import errno
import random
from pathlib import Path

import pytest
from hypothesis import given, settings
from preset_texts import FULL, changed
from strategies import stages

from livelag.circuit.parts import Buffer, Taper
from livelag.circuit.presets import (
    DEFAULT_PRESET,
    load_preset_file,
    load_stage,
    parse_stage,
    preset_names,
    save_stage,
    stage_to_toml,
)
from livelag.circuit.stage import Setting
from livelag.errors import FileError, InputError, LivelagError, UnknownNameError

# What ships


def test_eight_presets_or_more_ship_and_the_default_comes_first():
    names = preset_names()
    assert len(names) >= 8
    assert names[0] == DEFAULT_PRESET
    assert len({load_stage(name).title for name in names}) == len(names)


def shipped():
    return [load_stage(name) for name in preset_names()]


@pytest.mark.parametrize(
    ("what", "holds"),
    [
        (
            "two ranges in film",
            lambda s: (
                len(s.ranges) == 2
                and {c.kind for c in s.capacitors} <= {"polyester", "polypropylene"}
            ),
        ),
        (
            "two ranges with a bipolar electrolytic",
            lambda s: (
                len(s.ranges) == 2 and any(c.kind == "bipolar electrolytic" for c in s.capacitors)
            ),
        ),
        (
            "one range with a log pot",
            lambda s: len(s.ranges) == 1 and s.pot.taper.name == "logarithmic",
        ),
        ("three ranges", lambda s: len(s.ranges) == 3),
        (
            "a 9 V battery on rail-to-rail CMOS",
            lambda s: (
                s.supply.positive_v == 9
                and s.supply.negative_v == 0
                and s.output_buffer == s.input_buffer == Buffer.of_class("rail-to-rail cmos")
            ),
        ),
        (
            "a bipolar-input op-amp that drifts off pitch",
            lambda s: (
                abs(s.settled_volts(1.0, Setting(0, 0.0)) - s.settled_volts(1.0, Setting(0, 1.0)))
                > 50 / 1200
            ),
        ),
        (
            "no errors at all",
            lambda s: s.settled_volts(1.0, Setting(0, 1.0)) == pytest.approx(1.0, abs=1e-12),
        ),
        ("a bleed resistor", lambda s: s.bleed is not None),
    ],
)
def test_the_shipped_presets_cover(what, holds):
    assert any(holds(stage) for stage in shipped()), what


@pytest.mark.parametrize("name", preset_names())
def test_a_shipped_preset_reaches_a_musical_span(name):
    stage = load_stage(name)
    assert stage.about
    low, high = stage.swing_notes()
    assert low <= 36
    assert high >= 96
    fastest = stage.time_constant_s(Setting(0, 0.0))
    slowest = stage.time_constant_s(Setting(len(stage.ranges) - 1, 1.0))
    assert fastest < 0.005
    assert 0.2 < slowest < 5.0


@pytest.mark.parametrize("name", preset_names())
def test_load_save_load_is_identity_for_shipped_presets(name, tmp_path):
    stage = load_stage(name)
    path = tmp_path / "again.toml"
    save_stage(stage, path)
    assert load_stage(str(path)) == stage
    first = path.read_bytes()
    save_stage(load_preset_file(path), path)
    assert path.read_bytes() == first
    assert [p.name for p in tmp_path.iterdir()] == ["again.toml"]


@settings(deadline=None)
@given(stages())
def test_load_save_load_is_identity_for_any_stage(stage):
    assert parse_stage(stage_to_toml(stage), "my.toml") == stage


def test_what_is_read_is_what_was_written():
    stage = parse_stage(FULL, "my.toml")
    assert (stage.supply.positive_v, stage.supply.negative_v) == (12.0, -12.0)
    assert stage.input_buffer == Buffer("custom", 3e-3, 65e-12, 1.5, 4.0, 6e-3, 200e-12)
    assert stage.output_buffer == Buffer.of_class("jfet-input")
    assert stage.pull_down is not None
    assert stage.pull_down.resistance_ohms == 1e6
    assert (stage.series.resistance_ohms, stage.series.tolerance) == (1e3, 0.01)
    assert (stage.pot.resistance_ohms, stage.pot.tolerance, stage.pot.end_ohms) == (470e3, 0.2, 2)
    assert stage.pot.taper == Taper.measured((0.0, 0.5, 1.0), (0.0, 0.4, 1.0))
    small, large = stage.capacitors
    assert (small.capacitance_f, small.insulation_ohms) == (330e-9, 30e9)
    assert [(b.fraction, b.time_s) for b in small.branches] == [(0.002, 1.0)]
    assert (large.tolerance, large.absorption) == (0.1, None)
    assert stage.ranges[0].series is not None
    assert stage.ranges[0].series.resistance_ohms == 2200.0
    assert stage.ranges[1].connects == ("small", "large")
    assert stage.bleed is not None
    assert (stage.bleed.resistance_ohms, stage.bleed.tolerance) == (10e6, 0.05)
    assert stage.output_series is not None
    assert stage.load is not None
    assert stage.divider == pytest.approx(100 / 101)


def test_no_absorption_at_all_can_be_said():
    path = ("capacitor", 0, "absorption")
    assert parse_stage(changed(path, []), "my.toml").capacitors[0].branches == ()
    typical = parse_stage(changed(path, None), "my.toml").capacitors[0]
    assert typical.branches == typical.kind_data.absorption != ()


@pytest.mark.parametrize(
    ("taper", "expected"),
    [
        ("linear", Taper.linear()),
        ("logarithmic", Taper.logarithmic(0.15)),
        ("reverse logarithmic", Taper.reverse_logarithmic(0.15)),
        ({"law": "linear"}, Taper.linear()),
        ({"law": "logarithmic"}, Taper.logarithmic(0.15)),
        ({"law": "logarithmic", "middle": 0.1}, Taper.logarithmic(0.1)),
        ({"law": "reverse logarithmic", "middle": 0.2}, Taper.reverse_logarithmic(0.2)),
    ],
)
def test_tapers_by_name_and_by_law(taper, expected):
    text = changed(("time", "pot", "taper"), taper)
    assert parse_stage(text, "my.toml").pot.taper == expected


# Files and folders


def file_refusal(path, error=LivelagError):
    with pytest.raises(error) as caught:
        load_stage(str(path))
    assert "\n" not in str(caught.value)
    assert str(path) in str(caught.value)
    return str(caught.value)


def test_a_file_that_is_not_there(tmp_path):
    assert "No such file" in file_refusal(tmp_path / "gone.toml", FileError)


def test_a_folder(tmp_path):
    assert "Is a directory" in file_refusal(tmp_path, FileError)


def test_an_empty_file(tmp_path):
    path = tmp_path / "empty.toml"
    path.write_bytes(b"")
    assert "missing" in file_refusal(path, InputError)


def test_a_file_that_is_not_utf_8(tmp_path):
    path = tmp_path / "latin.toml"
    path.write_bytes(FULL.replace("everything", "caf\u00e9").encode("latin-1"))
    assert "UTF-8" in file_refusal(path, InputError)


def test_random_bytes(tmp_path):
    path = tmp_path / "noise.toml"
    path.write_bytes(random.Random(5).randbytes(4000))
    file_refusal(path, InputError)


def test_a_byte_order_mark_is_no_obstacle(tmp_path):
    path = tmp_path / "marked.toml"
    path.write_text(FULL, encoding="utf-8-sig")
    assert load_stage(str(path)) == parse_stage(FULL, "")


@pytest.mark.parametrize("name", ["two-range-flim", "x" * 300, "no such", "nul\0"])
def test_an_unknown_preset_says_which_exist(name):
    with pytest.raises(UnknownNameError, match="known: two-range-film, battery-9v"):
        load_stage(name)


def test_a_slip_in_a_preset_name_is_pointed_at():
    with pytest.raises(UnknownNameError, match="did you mean 'two-range-film'"):
        load_stage("two-range-flim")


@pytest.mark.parametrize("where", ["gone/my.toml", "folder", "file.txt/my.toml"])
def test_a_preset_is_not_saved_where_it_cannot_be(where, tmp_path):
    (tmp_path / "folder").mkdir()
    (tmp_path / "file.txt").write_text("kept")
    before = sorted(tmp_path.rglob("*"))
    with pytest.raises(
        FileError, match=r"does not exist; make it first|is a folder; name a file"
    ) as caught:
        save_stage(load_stage("ideal"), tmp_path / where)
    assert str(tmp_path / where) in str(caught.value)
    assert sorted(tmp_path.rglob("*")) == before
    assert (tmp_path / "file.txt").read_text() == "kept"


@pytest.mark.parametrize("failure", [OSError(errno.ENOSPC, "No space left"), KeyboardInterrupt()])
@pytest.mark.parametrize("step", ["write_text", "replace"])
def test_a_save_that_breaks_off_leaves_the_old_preset_whole(step, failure, tmp_path, monkeypatch):
    path = tmp_path / "my.toml"
    save_stage(load_stage("ideal"), path)
    write = Path.write_text

    def break_off(self, *args, **kwargs):
        if step == "write_text":
            write(self, "title = ", encoding="utf-8")
        raise failure

    monkeypatch.setattr(Path, step, break_off)
    expected = FileError if isinstance(failure, OSError) else KeyboardInterrupt
    with pytest.raises(expected):
        save_stage(load_stage("bleed-film"), path)
    monkeypatch.undo()
    assert [p.name for p in tmp_path.iterdir()] == ["my.toml"]
    assert load_stage(str(path)) == load_stage("ideal")
