"""`livelag render --page`: what is written, what is refused, and that it is all or nothing."""

import errno
import json
import sys
from pathlib import Path

import mido
import pytest
import soundfile

from livelag.circuit.presets import presets_folder
from livelag.cli import render_page
from livelag.report.listening_page import page_files

COMMON = ("render", "--phrase", "run", "--rate", 8000)
ONE = (*COMMON, "--range", "fast", "--rotation", 0.5)


def names(folder):
    return {path.name for path in folder.iterdir()}


def test_a_page_holds_every_range_at_both_ends_and_half_way(livelag, tmp_path):
    answer = livelag(*COMMON, "--page", "send", "--json")
    assert (answer.status, answer.err) == (0, "")
    found = json.loads(answer.out)
    sounds = [
        "01-fast-0.000.flac", "02-fast-0.500.flac", "03-fast-1.000.flac",
        "04-slow-0.000.flac", "05-slow-0.500.flac", "06-slow-1.000.flac",
    ]  # fmt: skip
    assert names(tmp_path / "send") == {*sounds, "index.html"}
    assert found["page"] == "send/index.html"
    assert [row["out"] for row in found["renders"]] == [f"send/{name}" for name in sounds]
    assert [row["number"] for row in found["renders"]] == [1, 2, 3, 4, 5, 6]
    assert found["bytes"] == sum(path.stat().st_size for path in (tmp_path / "send").iterdir())
    assert page_files((tmp_path / "send/index.html").read_text(encoding="utf-8")) == set(sounds)
    for row in found["renders"]:
        info = soundfile.info(row["out"])
        assert (info.format, info.subtype, info.channels) == ("FLAC", "PCM_16", 1)
        assert info.frames == row["frames"]
    assert names(tmp_path) == {"send"}


def test_the_sounds_are_those_that_render_gives(livelag, tmp_path):
    livelag(*COMMON, "--ranges", "slow", "--rotations", "0.3", "--page", "send")
    livelag(*COMMON, "--range", "slow", "--rotation", 0.3, "--depth", 16, "--out", "x.flac")
    assert (tmp_path / "send/01-slow-0.300.flac").read_bytes() == Path("x.flac").read_bytes()


def test_what_people_are_told(livelag):
    answer = livelag(*ONE, "--page", "send")
    assert (answer.status, answer.err) == (0, "")
    assert "01-fast-0.500.flac" in answer.out
    assert "send/index.html plays these beside their pitch curves" in answer.out


def test_the_page_tells_the_setting_that_the_command_tells(livelag, tmp_path):
    livelag(*ONE, "--page", "send")
    ranges = json.loads(livelag("ranges", "--json").out)["ranges"]
    assert ranges[0]["name"] == "fast"
    livelag(*COMMON, "--range", "fast", "--rotation", 1, "--page", "end")
    text = (tmp_path / "end/index.html").read_text(encoding="utf-8")
    for key in ("longest_s", "octave_arrival_longest_s"):
        assert f"<dd>{ranges[0][key] * 1000:.3g}\u00a0ms</dd>" in text


def test_a_page_made_again_replaces_the_older_one_and_no_more(livelag, tmp_path):
    livelag(*COMMON, "--range", "slow", "--rotation", 0, "--page", "send")
    (tmp_path / "send/.thumbnail").write_text("of a desktop")
    assert livelag(*ONE, "--page", "send").status == 0
    assert names(tmp_path / "send") == {"01-fast-0.500.flac", "index.html", ".thumbnail"}
    assert "slow, rotation" not in (tmp_path / "send/index.html").read_text(encoding="utf-8")


@pytest.mark.parametrize("folder", ["send", "send/", "./send", "."])
def test_an_empty_folder_is_filled(livelag, tmp_path, folder):
    (tmp_path / "send").mkdir()
    if folder == ".":
        (tmp_path / "send").rmdir()
    assert livelag(*ONE, "--page", folder).status == 0
    place = tmp_path if folder == "." else tmp_path / "send"
    assert names(place) == {"01-fast-0.500.flac", "index.html"}


@pytest.mark.parametrize(
    ("file", "text"),
    [
        ("notes.txt", "mine"), ("index.html", "<title>my own site</title>"),
        ("01-fast-0.500.flac", "my own"), ("index.html/", ""),
    ],
)  # fmt: skip
def test_a_folder_of_other_things_is_left_alone(livelag, tmp_path, file, text):
    (tmp_path / "send").mkdir()
    if file.endswith("/"):
        (tmp_path / "send" / file).mkdir()
    else:
        (tmp_path / "send" / file).write_text(text)
    answer = livelag(*ONE, "--page", "send")
    assert answer.status == 1
    assert answer.err == (
        f"livelag: send: holds {file.rstrip('/')!r}, which is no part of a listening page; "
        "name a new or an empty folder\n"
    )
    assert names(tmp_path / "send") == {file.rstrip("/")}


def test_an_older_page_with_a_stranger_beside_it_is_left_alone(livelag, tmp_path):
    livelag(*ONE, "--page", "send")
    (tmp_path / "send/song.mp3").write_text("mine")
    before = {path: path.read_bytes() for path in (tmp_path / "send").iterdir()}
    answer = livelag(*ONE, "--waveform", "sine", "--page", "send")
    assert answer.status == 1
    assert "'song.mp3'" in answer.err
    assert {path: path.read_bytes() for path in (tmp_path / "send").iterdir()} == before


@pytest.mark.parametrize("moment", ["html", "moving"])
@pytest.mark.parametrize("kind", ["disk", "interrupt"])
def test_all_or_nothing(livelag, tmp_path, monkeypatch, moment, kind):
    livelag(*COMMON, "--ranges", "fast", "--rotations", "0.2", "--page", "send")
    before = {path: path.read_bytes() for path in (tmp_path / "send").iterdir()}
    failure = OSError(errno.ENOSPC, "No space left on device")
    if kind == "interrupt":
        failure = KeyboardInterrupt()
    if moment == "html":

        def fail(page):
            raise failure

        monkeypatch.setattr(render_page, "page_html", fail)
    else:
        replace = Path.replace

        left = [failure]

        def fail(self, target):
            if Path(target).name == "index.html" and ".part" in str(self.parent) and left:
                raise left.pop()
            return replace(self, target)

        monkeypatch.setattr(Path, "replace", fail)
    answer = livelag(*ONE, "--page", "send")
    assert answer.out == ""
    assert len(answer.err.splitlines()) == 1
    if kind == "disk":
        assert answer.status == 1
        assert answer.err == "livelag: send: cannot be written: No space left on device\n"
    else:
        assert answer.status == 130
    assert {path: path.read_bytes() for path in (tmp_path / "send").iterdir()} == before
    assert names(tmp_path) == {"send"}


@pytest.mark.parametrize(
    ("options", "parts"),
    [
        (("--out", "x.wav"), ("--out and --page exclude", "names the folder")),
        (("--cv", "x.csv"), ("--cv and --page exclude", "draws its curves")),
        (("--picture", "x.png"), ("--picture and --page exclude", "draws its curves")),
        (("--stereo",), ("--stereo", "DC")),
        (("--bypass",), ("--bypass", "the same")),
        (("--depth", "float"), ("--depth float", "FLAC: 16 or 24")),
        (("--rotation", "0", "--rotations", "0,1"), ("--rotation and --rotations",)),
    ],
)
def test_options_that_do_not_go_with_a_page(livelag, tmp_path, options, parts):
    answer = livelag(*COMMON, "--page", "send", *options)
    assert answer.status == 2
    for part in parts:
        assert part in answer.err
    assert not any(tmp_path.iterdir())


@pytest.mark.parametrize(
    ("options", "parts"),
    [
        (("--rotations", "0,1.5"), ("rotation", "1.5", "0 to 1")),
        (("--rotations", "0;1"), ("--rotations", "'0;1'")),
        (("--ranges", "slowest"), ("range", "'slowest'", "fast", "slow")),
        (("--depth", "12"), ("depth", "'12'")),
        (("--rate", "10"), ("rate", "10 Hz")),
        (("--page", "none/send"), ("none/send", "'none' does not exist")),
        (("--page", ""), ("--page", "a folder")),
        (("--page", "x" * 300), ("x" * 300, "name too long")),
    ],
)
def test_a_page_that_cannot_be_leaves_nothing(livelag, tmp_path, options, parts):
    answer = livelag(*COMMON, "--page", "send", *options)
    assert answer.status == 1
    assert len(answer.err.splitlines()) == 1
    assert answer.out == ""
    for part in parts:
        assert part.lower() in answer.err.lower()
    assert not any(tmp_path.iterdir())


def test_a_file_is_no_folder(livelag, tmp_path):
    (tmp_path / "taken").write_text("a file")
    answer = livelag(*ONE, "--page", "taken")
    assert (answer.status, answer.out) == (1, "")
    assert answer.err == "livelag: taken: is a file; name a folder\n"


def test_names_of_any_kind_make_safe_files_and_a_whole_page(livelag, tmp_path):
    name = '../é<b>&"' + "x" * 300
    shipped = presets_folder() / "two-range-film.toml"
    text = shipped.read_text(encoding="utf-8").replace("Two ranges, film", "<i>Two & a half</i>")
    (tmp_path / "odd.toml").write_text(text.replace('"fast"', f"'{name}'"), encoding="utf-8")
    arguments = ("odd.toml", *COMMON[1:], "--range", name, "--rotation", 0.5, "--page", "send")
    assert livelag("render", *arguments).err == ""
    assert names(tmp_path / "send") == {f"01------b---{'x' * 31}-0.500.flac", "index.html"}
    page = (tmp_path / "send/index.html").read_text(encoding="utf-8")
    assert "&lt;i&gt;Two &amp; a half&lt;/i&gt;" in page
    assert "../é&lt;b&gt;&amp;&#34;xxx" in page
    assert "<b>" not in page
    assert "<i>" not in page


def test_music_that_moves_the_controls_is_told(livelag, tmp_path):
    for control, told in ((5, True), (37, True), (80, True), (65, True), (7, False)):
        track = mido.MidiTrack()
        track.append(mido.Message("control_change", control=control, value=90))
        for note in (60, 67):
            track.append(mido.Message("note_on", note=note, velocity=100))
            track.append(mido.Message("note_off", note=note, time=240))
        mido.MidiFile(type=0, ticks_per_beat=480, tracks=[track]).save(tmp_path / "s.mid")
        livelag("render", "--midi", "s.mid", "--rate", 8000, "--range", "fast", "--rotation", 0.5,
                "--page", "send")  # fmt: skip
        text = (tmp_path / "send/index.html").read_text(encoding="utf-8")
        assert ("The tune itself moves" in text) == told, control


def test_templates_are_read_for_a_page_only(livelag, monkeypatch):
    monkeypatch.setitem(sys.modules, "jinja2", None)
    assert livelag(*ONE, "--out", "x.wav").status == 0
    with pytest.raises(ImportError):
        livelag(*ONE, "--page", "send")
