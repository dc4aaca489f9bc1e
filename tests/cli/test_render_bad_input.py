"""Bad input to `livelag render`: status 1, one line that says what is wrong, nothing left."""

import random
import sys
from functools import partial
from pathlib import Path

import pytest
from mido import Message, MetaMessage, MidiFile, MidiTrack

from livelag.circuit.presets import preset_names, presets_folder
from livelag.cli.render_job import _refuse_same_file
from livelag.errors import InputError
from livelag.notes.phrases import PHRASES

IDEAL = (presets_folder() / "ideal.toml").read_text(encoding="utf-8")


@pytest.fixture
def refused(refused):
    """Run a rendering that must fail, and return its one line."""
    return partial(refused, "render")


def test_missing_empty_and_foreign_midi_files(refused, tmp_path):
    assert "no.mid: does not exist" in refused("--midi", "no.mid", "--out", "x.wav")
    assert ": is a folder" in refused("--midi", tmp_path, "--out", "x.wav")
    (tmp_path / "empty.mid").touch()
    assert "empty.mid: is empty" in refused("--midi", "empty.mid", "--out", "x.wav")
    (tmp_path / "text.mid").write_text("not music")
    assert "text.mid: starts with b'not '" in refused("--midi", "text.mid", "--out", "x.wav")


def test_a_midi_file_cut_off_anywhere(refused, make_song, tmp_path):
    whole = make_song().read_bytes()
    for length in range(1, len(whole), 5):
        (tmp_path / "cut.mid").write_bytes(whole[:length])
        message = refused("--midi", "cut.mid", "--out", "x.wav")
        assert message.startswith("livelag: cut.mid: ")


@pytest.mark.parametrize("header", [b"", b"MThd\x00\x00\x00\x06\x00\x00\x00\x01\x01\xe0MTrk"])
def test_random_bytes_for_a_midi_file(refused, tmp_path, header):
    chance = random.Random(5)
    for _ in range(20):
        (tmp_path / "noise.mid").write_bytes(header + chance.randbytes(chance.randint(1, 300)))
        message = refused("--midi", "noise.mid", "--out", "x.wav")
        assert message.startswith("livelag: noise.mid: ")


def test_a_midi_file_without_notes(refused, make_song, tmp_path):
    track = MidiTrack([Message("control_change", control=5, value=3), MetaMessage("end_of_track")])
    MidiFile(type=0, tracks=[track]).save(tmp_path / "still.mid")
    assert "still.mid: holds no notes" in refused("--midi", "still.mid", "--out", "x.wav")
    song = make_song(channel=2)
    message = refused("--midi", song, "--channels", "1,9", "--out", "x.wav")
    assert "no notes on channel 1, 9; there are notes on track 1 channel 3" in message
    assert "channel is 17" in refused("--midi", song, "--channels", "17", "--out", "x.wav")
    assert "--channels is 'one'" in refused("--midi", song, "--channels", "one", "--out", "x.wav")
    assert "track is 2" in refused("--midi", song, "--tracks", "2", "--out", "x.wav")


def test_a_midi_file_of_format_2(refused, make_song, tmp_path):
    data = bytearray(make_song().read_bytes())
    data[9] = 2
    (tmp_path / "patterns.mid").write_bytes(data)
    assert "is format 2" in refused("--midi", "patterns.mid", "--out", "x.wav")


@pytest.mark.parametrize(
    ("old", "new", "parts"),
    [
        ("[time]", "[time]\nseriess = 3", ("time.seriess", "not a known key", "'series'")),
        ("[supply]", "colour = 1\n[supply]", ("colour", "not a known key")),
        ('positive = "12 V"', "positive = true", ("supply.positive", "True")),
        ('positive = "12 V"', 'positive = "twelve"', ("supply.positive", "'twelve'", "volts")),
        ('series = {value = "1k"', 'series = {value = "-1k"', ("time.series", "-1000.0")),
        ('pot = {value = "470k"', "pot = {value = 0", ("time.pot", "0.0", "positive")),
        ('value = "330n"', "value = nan", ("capacitor[1].value", "nan")),
        ('value = "330n"', 'value = "-330n"', ("capacitor[1]", "-3.3e-07")),
        ('value = "330n"', 'value = "330 nH"', ("capacitor[1].value", "'330 nH'", "farad")),
        ('value = "330n"', "value = inf", ("capacitor[1].value", "inf")),
        ('connects = ["small"]', 'connects = ["smal"]', ("range[1].connects", "'smal'", "'small'")),
        ('connects = ["small"]', "connects = []", ("range 'fast'", "connects nothing")),
        ('kind = "ideal"', 'kind = "paper"', ("capacitor[1].kind", "'paper'", "polyester")),
        ('taper = "linear"', 'taper = "B"', ("time.pot.taper", "'B'", "logarithmic")),
        ('buffer = "ideal"', 'buffer = "tube"', ("input.buffer", "'tube'", "jfet-input")),
        ("volts_per_octave = 1.0", "volts_per_octave = 0", ("scale", "volts_per_octave", "0.0")),
        ("zero_volt_note = 36", "zero_volt_note = 128", ("scale", "zero_volt_note", "128")),
        ("tolerance = 0.0", "tolerance = 20", ("tolerance", "20")),
        ('title = "', 'title = 3\n#', ("title", "3")),
        ("[supply]", "[supply", ("not TOML",)),
    ],
)  # fmt: skip
def test_a_preset_with_a_fault_names_file_key_and_value(refused, tmp_path, old, new, parts):
    assert old in IDEAL
    (tmp_path / "stage.toml").write_text(IDEAL.replace(old, new, 1), encoding="utf-8")
    message = refused("stage.toml", "--out", "x.wav")
    assert message.startswith("livelag: stage.toml: ")
    for part in parts:
        assert part in message


@pytest.mark.parametrize(("table", "word"), [("range", "range"), ("capacitor", "capacitor")])
def test_a_preset_without_ranges_or_capacitors(refused, tmp_path, table, word):
    kept = [part for part in IDEAL.split("\n[") if not part.startswith(f"[{table}]]")]
    text = "\n[".join(kept)
    if table == "capacitor":
        text = text.replace('connects = ["small"]', "connects = []")
        text = text.replace('connects = ["small", "large"]', "connects = []")
    (tmp_path / "stage.toml").write_text(text, encoding="utf-8")
    message = refused("stage.toml", "--out", "x.wav")
    assert f"stage.toml: {word}" in message
    assert "none" in message


def test_presets_that_are_no_files(refused, tmp_path):
    assert "gone.toml: cannot be read: No such file" in refused("gone.toml", "--out", "x.wav")
    (tmp_path / "stage.toml").write_bytes(b"\xff\xfe\x00")
    assert "stage.toml: not a text file" in refused("stage.toml", "--out", "x.wav")
    (tmp_path / "folder.toml").mkdir()
    assert "folder.toml: cannot be read" in refused("folder.toml", "--out", "x.wav")


@pytest.mark.parametrize(
    ("arguments", "what", "known"),
    [
        (("two-range-flim",), "unknown preset 'two-range-flim'", preset_names()),
        (("--phrase", "waltz"), "unknown phrase 'waltz'", PHRASES),
        (("--phrase", ""), "unknown phrase ''", PHRASES),
        (("--range", "slowest"), "unknown range 'slowest'", ("fast", "slow")),
        (("--range", ""), "unknown range ''", ("fast", "slow")),
        (("--method", "euler"), "unknown method 'euler'", ("exact", "bilinear")),
        (("--method", "ramp"), "unknown method 'ramp'", ("exact", "bilinear")),
        (("--waveform", "square"), "unknown waveform", ("saw", "pulse", "triangle", "sine")),
        (("--priority", "first"), "unknown priority", ("last", "low", "high")),
        (("--depth", "32"), "unknown depth '32'", ("16", "24", "float")),
        (("--cv", "x.txt"), "x.txt: unknown pitch curve suffix '.txt'", (".csv",)),
        (("--picture", "x.gif"), "x.gif: unknown picture suffix '.gif'", (".png", ".svg", ".pdf")),
    ],
)
def test_an_unknown_name_is_told_with_those_that_exist(refused, arguments, what, known):
    message = refused("--out", "x.wav", *arguments)
    assert what in message
    offered = message.rsplit("known: ", 1)[1].strip()
    assert set(offered.split(", ")) == set(known)


def test_a_slip_is_met_with_a_suggestion(refused):
    assert "did you mean 'two-range-film'?" in refused("two-range-flim", "--out", "x.wav")


@pytest.mark.parametrize("name", ["x.mp3", "x", ".wav", ""])
def test_a_sound_file_needs_a_suffix_that_exists(refused, name):
    assert "unknown sound file suffix" in refused("--out", name)


@pytest.mark.parametrize(
    ("option", "value", "parts"),
    [
        ("--rotation", "1.01", ("rotation is 1.01", "0 to 1")),
        ("--rotation", "-0.1", ("rotation is -0.1", "0 to 1")),
        ("--rotation", "nan", ("rotation is nan", "0 to 1")),
        ("--rate", "7999", ("rate is 7999 Hz", "8000 to 192000 Hz")),
        ("--rate", "192001", ("rate is 192001 Hz", "8000 to 192000 Hz")),
        ("--rate", "-48000", ("rate is -48000 Hz",)),
        ("--level", "0", ("level is 0 dBFS", "-60 to -1 dBFS")),
        ("--level", "nan", ("level is nan",)),
        ("--velocity", "2", ("velocity is 2", "0 to 1")),
    ],
)
def test_a_number_out_of_range(refused, option, value, parts):
    message = refused("--out", "x.wav", f"{option}={value}")
    for part in parts:
        assert part in message


@pytest.mark.parametrize("value", ["0", "-1", "48001", "nan", "inf"])
def test_rows_a_second_out_of_range(refused, value):
    message = refused("--out", "x.wav", "--cv", "x.csv", f"--cv-rate={value}")
    assert f"--cv-rate is {value} Hz; it must be 0.001 to 48000 Hz" in message


@pytest.mark.parametrize("value", ["0", "-5", "101", "nan"])
def test_full_scale_out_of_range(refused, value):
    message = refused("--out", "x.wav", "--stereo", f"--full-scale-volts={value}")
    assert f"--full-scale-volts is {value} V; it must be 0.1 to 100 V" in message


def test_a_full_scale_that_the_glide_outgrows(refused):
    message = refused("--phrase", "octaves", "--out", "x.wav", "--stereo", "--full-scale-volts", 2)
    assert "--full-scale-volts is 2 V; the glide reaches" in message


def test_sound_that_a_file_cannot_hold(refused, make_song):
    assert "FLAC holds 16 or 24 bit" in refused("--out", "x.flac", "--depth", "float")
    day = make_song((60,), ticks=960 * 60 * 60 * 20)
    message = refused("--midi", day, "--rate", 192000, "--out", "x.wav")
    assert "41.5 GB does not fit a WAV file (4 GB); write .flac" in message


@pytest.mark.parametrize("option", ["--out", "--cv", "--picture"])
def test_an_output_whose_folder_is_missing_or_no_folder(refused, tmp_path, option):
    (tmp_path / "taken").write_text("a file")
    suffix = {"--out": "wav", "--cv": "csv", "--picture": "png"}[option]
    (tmp_path / f"folder.{suffix}").mkdir()
    others = () if option == "--out" else ("--out", "x.wav")
    for name, message in (
        (f"none/y.{suffix}", "folder 'none' does not exist"),
        (f"taken/y.{suffix}", "folder 'taken' does not exist"),
        (f"folder.{suffix}", "is a folder"),
        ("n" * 300 + f".{suffix}", "File name too long"),
    ):
        found = refused("--phrase", "run", *others, option, name)
        assert found.startswith(f"livelag: {name}: ")
        assert message in found


@pytest.mark.skipif(sys.platform != "linux", reason="needs a folder that root cannot write to")
@pytest.mark.parametrize("many", [(), ("--rotations", "0,1")])
def test_a_folder_that_not_even_root_can_write_to(refused, many):
    out = "/proc/set" if many else "/proc/x.wav"
    message = refused("--phrase", "run", "--out", out, *many)
    assert message.startswith(f"livelag: {out}: ")
    assert "cannot be written" in message
    assert ".part" not in message


@pytest.mark.parametrize("other", ["x.wav", "sub/../x.wav", "link/x.wav"])
def test_two_outputs_of_one_name(tmp_path, other):
    (tmp_path / "sub").mkdir()
    (tmp_path / "link").symlink_to(tmp_path)
    with pytest.raises(InputError, match=r"x\.wav: is named for two outputs"):
        _refuse_same_file([tmp_path / "x.wav", tmp_path / "y.wav", tmp_path / other])
    _refuse_same_file([tmp_path / "x.wav", tmp_path / "sub" / "x.wav"])


def test_an_older_file_survives_a_render_that_fails(refused, tmp_path):
    Path(tmp_path / "x.wav").write_text("an older file")
    refused("--phrase", "octaves", "--out", "x.wav", "--stereo", "--full-scale-volts", 2)
    assert (tmp_path / "x.wav").read_text() == "an older file"


def test_a_preset_that_warns_still_fails_in_one_line(refused):
    refused("ceramic-budget", "--midi", "no.mid", "--out", "x.wav")
