"""Rendered sound files against general libraries, published byte layouts, and an ear for pitch.

The time constant is measured from the sound alone. Half cycles lie between zero crossings, each
interpolated straight between two samples; one over twice their length is the mean pitch of a half
cycle, taken to stand at its middle. Least squares on the logarithm of that pitch,

    log2 f(t) = a + b e^(-(t - t0)/tau),

gives a, b and tau; t0 is where the second note begins, so that it only scales b. The law is the
textbook step response of an RC behind a volt-per-octave oscillator.
"""

import io
import os
import shutil
import struct
import subprocess
import wave

import numpy as np
import pytest
import scipy.io.wavfile
import soundfile
from mido import Message, MidiFile, MidiTrack
from scipy.optimize import curve_fit
from scipy.signal import hilbert

from livelag.cli.main import run
from livelag.sound.soundfile_out import SoundFileOut

TAUS_S = (0.005, 0.012, 0.04, 0.15, 0.6, 2.0)
HOLD_S = 0.25

STAGE = """
title = "one RC"
[time]
series = "1k"
pot = {{value = {pot_ohms!r}, taper = "linear"}}
[[capacitor]]
name = "only"
value = "1u"
kind = "ideal"
[[range]]
name = "one"
connects = ["only"]
"""


def leap(path, low, high, seconds):
    """A legato leap from one note to another, which lasts so many seconds; 1 ms a tick."""
    track = MidiTrack(
        [
            Message("note_on", note=low, velocity=100),
            Message("note_on", note=high, velocity=100, time=round(1000 * HOLD_S)),
            Message("note_off", note=low),
            Message("note_off", note=high, time=round(1000 * seconds)),
        ]
    )
    MidiFile(type=0, ticks_per_beat=500, tracks=[track]).save(path)


def render(*arguments):
    assert run(["render", *map(str, arguments)]) == 0


def rendered_leap(folder, tau_s, method):
    """The sound of a leap of an octave from 622 to 1245 Hz behind one time constant."""
    stage, song, out = folder / "stage.toml", folder / "leap.mid", folder / "leap.wav"
    stage.write_text(STAGE.format(pot_ohms=tau_s / 1e-6 - 1e3))
    leap(song, 75, 87, 5 * tau_s)
    render(
        stage, "--midi", song, "--rotation", 1, "--method", method, "--waveform", "sine",
        "--depth", "float", "--out", out,
    )  # fmt: skip
    return soundfile.read(out)


def half_cycles(samples, rate):
    """Middles in seconds and pitches in hertz of the half cycles between zero crossings."""
    samples = samples + 0.0  # no negative zeros: their signs are no crossings
    before = np.flatnonzero(np.diff(np.signbit(samples)))
    a, b = samples[before], samples[before + 1]
    crossings = (before + a / (a - b)) / rate
    return (crossings[1:] + crossings[:-1]) / 2, 0.5 / np.diff(crossings)


def fitted_tau(times_s, pitch_hz, guess_s):
    def law(t, a, b, tau):
        return a + b * np.exp(-(t - HOLD_S) / tau)

    start = (np.log2(pitch_hz[-1]), np.log2(pitch_hz[0] / pitch_hz[-1]), guess_s)
    (a, b, tau), _ = curve_fit(law, times_s, np.log2(pitch_hz), start)
    return a, b, tau


@pytest.mark.parametrize("method", ["exact", "bilinear"])
@pytest.mark.parametrize("tau_s", TAUS_S)
def test_the_time_constant_can_be_heard(tmp_path, tau_s, method):
    samples, rate = rendered_leap(tmp_path, tau_s, method)
    times, pitch = half_cycles(samples, rate)
    # From the first half cycle that lies behind the leap until before the level closes.
    inside = (times > HOLD_S + 0.001) & (times < HOLD_S + 5 * tau_s - 0.001)
    # A guess far off the truth: the sound has to tell.
    a, b, tau = fitted_tau(times[inside], pitch[inside], guess_s=3 * tau_s)
    assert tau == pytest.approx(tau_s, rel=0.005)
    assert b == pytest.approx(-1.0, abs=0.005)  # an octave
    assert 2.0**a == pytest.approx(440.0 * 2.0 ** ((87 - 69) / 12), rel=1e-4)  # ISO 16


@pytest.mark.parametrize("tau_s", [0.04, 0.6])
def test_the_analytic_signal_hears_the_same(tmp_path, tau_s):
    samples, rate = rendered_leap(tmp_path, tau_s, "exact")
    phase = np.unwrap(np.angle(hilbert(samples)))
    times = (np.arange(len(samples) - 1) + 0.5) / rate
    pitch = np.diff(phase) * rate / (2 * np.pi)
    inside = (times > HOLD_S + 0.005) & (times < HOLD_S + 5 * tau_s - 0.02)
    _, _, tau = fitted_tau(times[inside], pitch[inside], guess_s=3 * tau_s)
    assert tau == pytest.approx(tau_s, rel=0.005)


# --- files ------------------------------------------------------------------------------------

LAYOUTS = [("16", False), ("24", False), ("float", False), ("16", True), ("24", True)]


@pytest.fixture(scope="module")
def files(tmp_path_factory):
    """One file of each layout, by depth and whether it is stereo; an odd number of frames."""
    folder = tmp_path_factory.mktemp("wav")
    leap(folder / "leap.mid", 48, 60, 0.374)
    made = {}
    for depth, stereo in LAYOUTS:
        path = folder / f"{depth}-{stereo}.wav"
        render(
            "--midi", folder / "leap.mid", "--rate", 44100, "--depth", depth, "--out", path,
            *(["--stereo"] if stereo else []),
        )  # fmt: skip
        made[depth, stereo] = path
    return made


def integers(path, depth):
    """Samples by soundfile as whole numbers of the file's own depth, (frames, channels)."""
    samples = soundfile.read(path, dtype="int32", always_2d=True)[0]
    return samples >> (32 - int(depth))


@pytest.mark.parametrize("layout", [x for x in LAYOUTS if x[0] != "float"])
def test_the_standard_library_reads_the_same_samples(files, layout):
    # Python's own `wave`, of which older versions know format tag 1 only.
    path, (depth, stereo) = files[layout], layout
    with wave.open(str(path)) as file:
        assert file.getframerate() == 44100
        assert file.getnchannels() == 1 + stereo
        width = file.getsampwidth()
        data = file.readframes(file.getnframes())
    assert width == int(depth) // 8
    padded = np.zeros((len(data) // width, 4), np.uint8)
    padded[:, 4 - width :] = np.frombuffer(data, np.uint8).reshape(-1, width)
    found = padded.view("<i4").reshape(-1, 1 + stereo) >> (32 - int(depth))
    np.testing.assert_array_equal(found, integers(path, depth))
    assert np.abs(found).max() > 1000


@pytest.mark.parametrize("layout", LAYOUTS)
@pytest.mark.filterwarnings("ignore:Chunk .non-data. not understood")
def test_scipy_reads_the_same_samples(files, layout):
    path, (depth, _) = files[layout], layout
    rate, found = scipy.io.wavfile.read(path)
    assert rate == 44100
    found = found.reshape(len(found), -1)
    if depth == "float":
        np.testing.assert_array_equal(
            found, soundfile.read(path, dtype="float32", always_2d=True)[0]
        )
        return
    # scipy gives 24 bits as the upper ones of 32.
    np.testing.assert_array_equal(found >> (8 if depth == "24" else 0), integers(path, depth))


@pytest.mark.skipif(
    shutil.which("sox") is None and not os.environ.get("CI"), reason="sox is not installed"
)
@pytest.mark.parametrize("layout", LAYOUTS)
def test_sox_reads_the_same_samples(files, layout):
    path, (depth, _) = files[layout], layout
    kind = (
        ["-e", "floating-point", "-b", "32"] if depth == "float" else ["-e", "signed", "-b", depth]
    )
    made = subprocess.run(
        ["sox", "-D", "-V1", str(path), "-t", "wav", *kind, "-"],
        capture_output=True, check=True, timeout=60,
    )  # fmt: skip
    assert made.stderr == b""
    found = soundfile.read(io.BytesIO(made.stdout), dtype="float64", always_2d=True)[0]
    # sox holds a sample of a float file to 24 bits.
    np.testing.assert_allclose(
        found,
        soundfile.read(path, dtype="float64", always_2d=True)[0],
        rtol=0,
        atol=2.0**-24 if depth == "float" else 0,
    )


def chunks(data):
    """Chunk names with where their contents lie and how long they are."""
    at, found = 12, {}
    while at < len(data):
        name, size = data[at : at + 4], struct.unpack_from("<I", data, at + 4)[0]
        found[name] = (at + 8, size)
        at += 8 + size + size % 2  # a chunk of odd length is padded; the pad is not counted
    assert at == len(data)
    return found


@pytest.mark.parametrize("layout", LAYOUTS)
def test_the_file_is_laid_out_as_riff_wave(files, layout):
    # RIFF: the size counts all that follows it; format tags 1 is integers, 3 is floats and
    # 0xFFFE says that the sub-format tells (read in renderings of the registered formats).
    path, (depth, stereo) = files[layout], layout
    data = path.read_bytes()
    assert (data[:4], data[8:12]) == (b"RIFF", b"WAVE")
    assert struct.unpack_from("<I", data, 4)[0] == len(data) - 8
    found = chunks(data)
    at, _ = found[b"fmt "]
    tag, channels, rate, per_second, align, bits = struct.unpack_from("<HHIIHH", data, at)
    if tag == 0xFFFE:
        tag = struct.unpack_from("<H", data, at + 24)[0]
    assert tag == (3 if depth == "float" else 1)
    width = {"16": 2, "24": 3, "float": 4}[depth]
    assert (channels, rate, bits) == (1 + stereo, 44100, 8 * width)
    assert (align, per_second) == (width * channels, 44100 * width * channels)
    assert found[b"data"][1] == soundfile.info(path).frames * align


@pytest.mark.parametrize(
    ("depth", "lowest", "highest", "half"),
    [("16", "00 80", "ff 7f", 0x4000), ("24", "00 00 80", "ff ff 7f", 0x400000)],
)
def test_samples_are_little_endian_twos_complement(tmp_path, depth, lowest, highest, half):
    # As libsndfile 1.2.2 writes -1, 1 and over, and 0.5 (computed). Dither moves 0.5 by a step.
    with SoundFileOut(tmp_path / "x.wav", 8000, 1, depth) as out:
        out.write(np.array([[-1.1], [1.1], [0.5], [0.0]]))
    data = (tmp_path / "x.wav").read_bytes()
    at, size = chunks(data)[b"data"]
    width = int(depth) // 8
    assert size == 4 * width
    samples = [data[at + i : at + i + width] for i in range(0, size, width)]
    assert samples[0] == bytes.fromhex(lowest)
    assert samples[1] == bytes.fromhex(highest)
    assert abs(int.from_bytes(samples[2], "little") - half) <= 1


def test_an_odd_data_chunk_is_padded(files):
    # 24 bit mono with an odd number of frames has an odd number of bytes.
    path = files["24", False]
    data = path.read_bytes()
    at, size = chunks(data)[b"data"]
    assert size % 2 == 1
    assert len(data) == at + size + 1


@pytest.mark.parametrize("depth", ["16", "24"])
def test_flac_holds_the_samples_of_the_wav(files, tmp_path, depth):
    path = files[depth, True]
    out = tmp_path / "x.flac"
    render(
        "--midi", path.parent / "leap.mid", "--rate", 44100, "--depth", depth, "--stereo",
        "--out", out,
    )  # fmt: skip
    np.testing.assert_array_equal(integers(out, depth), integers(path, depth))
