"""What the tests of commands share: a command line run in this process, and songs to give it."""

from typing import NamedTuple

import pytest
from mido import Message, MetaMessage, MidiFile, MidiTrack

from livelag.cli.main import run


class Answer(NamedTuple):
    """How a command line ended."""

    status: int
    out: str
    err: str


@pytest.fixture
def livelag(capsys, monkeypatch, tmp_path):
    """Run a command line in an empty folder."""
    monkeypatch.chdir(tmp_path)

    def call(*arguments):
        capsys.readouterr()
        try:
            status = run([str(a) for a in arguments])
        except SystemExit as end:
            status = end.code
        shown = capsys.readouterr()
        return Answer(status, shown.out, shown.err)

    return call


@pytest.fixture
def refused(livelag, tmp_path):
    """Run a command line that must fail and leave every file alone, and return its one line."""

    def call(*arguments):
        before = {path: path.stat().st_mtime_ns for path in tmp_path.rglob("*")}
        answer = livelag(*arguments)
        assert answer.status == 1, answer.err
        assert answer.out == ""
        assert answer.err.endswith("\n")
        assert len(answer.err.splitlines()) == 1, answer.err
        assert answer.err.startswith("livelag: ")
        assert {path: path.stat().st_mtime_ns for path in tmp_path.rglob("*")} == before
        return answer.err

    return call


@pytest.fixture
def make_song(tmp_path):
    """Write a MIDI file of notes a quarter of a second long, and return its path."""

    def make(notes=(60, 67, 72), ticks=240, name="", file="song.mid", channel=0):
        track = MidiTrack([MetaMessage("track_name", name=name)] if name else [])
        for note in notes:
            track.append(Message("note_on", note=note, velocity=100, channel=channel))
            track.append(Message("note_off", note=note, time=ticks, channel=channel))
        path = tmp_path / file
        MidiFile(type=0, ticks_per_beat=480, tracks=[track]).save(path)
        return path

    return make
