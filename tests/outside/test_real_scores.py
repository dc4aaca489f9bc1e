"""Real melodies, rendered to their last note, which must be in tune.

The scores come with the music21 package: airs that James Aird printed in Glasgow in 1778 and a
chorale by J. S. Bach, music in the public domain. The MIDI files are made here, by music21, and
kept nowhere. The pitch of the last note follows from the score by equal temperament, A4 = 440 Hz
(ISO 16), and is measured in the sound.
"""

import csv
import importlib
import os
import warnings

import numpy as np
import pytest
import soundfile

from livelag.circuit.presets import load_stage
from livelag.circuit.stage import Setting
from livelag.cli.main import run

AIRS = tuple(n for n in range(1, 200, 9) if n not in (118, 127))  # these two have chords
VOICES = ("Soprano", "Alto", "Tenor", "Bass")
ROTATION = 0.05  # 8 ms: even a short last note is long enough
RATE = 22050
LAST_S = 0.1


@pytest.fixture(scope="module")
def corpus():
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # what music21 imports is no concern of ours
        if os.environ.get("CI"):
            return importlib.import_module("music21.corpus")
        return pytest.importorskip("music21.corpus", reason="pip install livelag[test]")


def midi_of(score, path):
    """Write a score as MIDI; returns the number of its last note."""
    score.write("midi", fp=path)
    notes = [note for note in score.flatten().notes if not note.duration.isGrace]
    assert not any(note.isChord for note in notes)
    return notes[-1].pitch.midi


def rendered(song, folder):
    """The sound, and the last row of its pitch curve."""
    out, curve = folder / "x.wav", folder / "x.csv"
    status = run(
        [
            "render", "--midi", str(song), "--rotation", str(ROTATION), "--waveform", "sine",
            "--rate", str(RATE), "--depth", "float", "--out", str(out), "--cv", str(curve),
        ]
    )  # fmt: skip
    assert status == 0
    samples, _ = soundfile.read(out)
    with curve.open(newline="") as file:
        return samples, list(csv.DictReader(file))[-1]


def last_pitch_hz(samples):
    """Mean pitch of the last tenth of a second of steady sound, from its zero crossings."""
    loud = np.abs(samples) > 0.99 * np.abs(samples).max()
    end = np.flatnonzero(loud)[-1]
    steady = samples[end - round(LAST_S * RATE) : end]
    before = np.flatnonzero(np.diff(np.signbit(steady)))
    a, b = steady[before], steady[before + 1]
    crossings = (before + a / (a - b)) / RATE
    return (len(crossings) - 1) / 2 / (crossings[-1] - crossings[0])


def ends_in_tune(score, folder, capsys):
    note = midi_of(score, folder / "song.mid")
    samples, last = rendered(folder / "song.mid", folder)
    assert capsys.readouterr().err == ""
    stage = load_stage("two-range-film")
    settled = stage.settled_volts(stage.note_volts(note), Setting(0, ROTATION))
    assert float(last["key_volts"]) == pytest.approx((note - 36) / 12, abs=1e-9)
    assert float(last["glide_volts"]) == pytest.approx(settled, abs=1e-5)
    # What this stage does to the pitch: its offsets and its load, in closed form.
    error_cents = 1200.0 * (settled - (note - 36) / 12)
    tempered_hz = 440.0 * 2.0 ** ((note - 69) / 12)
    measured_cents = 1200.0 * np.log2(last_pitch_hz(samples) / tempered_hz)
    assert measured_cents == pytest.approx(error_cents, abs=0.5)


@pytest.mark.parametrize("number", AIRS)
def test_an_air_of_1778_ends_in_tune(corpus, tmp_path, capsys, number):
    ends_in_tune(corpus.parse("airdsAirs/book1.abc", number=number), tmp_path, capsys)


@pytest.mark.parametrize("voice", VOICES)
def test_a_voice_of_a_chorale_ends_in_tune(corpus, tmp_path, capsys, voice):
    ends_in_tune(corpus.parse("bach/bwv66.6").parts[voice], tmp_path, capsys)


def test_there_are_twenty_of_them():
    assert len(AIRS) + len(VOICES) >= 20
