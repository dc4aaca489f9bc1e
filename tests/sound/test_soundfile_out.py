"""Sound files: whole samples, honest dither, and a refusal before anything is written."""

import struct

import numpy as np
import pytest
import soundfile

from livelag.errors import InputError, UnknownNameError
from livelag.sound.soundfile_out import SoundFileOut, check_format

RATE = 8000


def written(path, samples, depth, cuts=()):
    """Write samples in blocks cut at the given frames; returns them as read back."""
    with SoundFileOut(path, RATE, samples.shape[1], depth) as out:
        for block in np.split(samples, cuts):
            out.write(block)
    return soundfile.read(path, always_2d=True)[0]


def noise(frames, channels=1, seed=3):
    return np.random.default_rng(seed).uniform(-0.9, 0.9, (frames, channels))


@pytest.mark.parametrize("suffix", ["wav", "flac"])
@pytest.mark.parametrize(("depth", "bits"), [("16", 16), ("24", 24)])
@pytest.mark.parametrize("channels", [1, 2])
def test_integers_are_within_rounding_and_dither(tmp_path, suffix, depth, bits, channels):
    samples = noise(5000, channels)
    found = written(tmp_path / f"x.{suffix}", samples, depth)
    assert found.shape == samples.shape
    assert np.abs(found - samples).max() <= 1.5 * 2.0 ** (1 - bits)


def test_floats_keep_what_is_over_full_scale(tmp_path):
    samples = np.array([[1.5], [-2.0], [0.1]])
    found = written(tmp_path / "x.wav", samples, "float")
    np.testing.assert_array_equal(found, samples.astype(np.float32))


@pytest.mark.parametrize("depth", ["16", "24"])
def test_integers_clip_at_full_scale(tmp_path, depth):
    found = written(tmp_path / "x.wav", np.array([[1.5], [-1.5], [1.0], [-1.1]]), depth)
    step = 2.0 ** (1 - int(depth))
    np.testing.assert_array_equal(found[:, 0], [1 - step, -1, found[2, 0], -1])
    assert 1 - 3 * step <= found[2, 0] <= 1 - step


@pytest.mark.parametrize("part", [0.0, 0.3, 0.5])
def test_dither_makes_mean_and_power_of_the_error_independent_of_the_signal(tmp_path, part):
    # Triangular dither of two steps: mean error 0, power 1/12 + 2/12 of a step squared
    # (Lipshitz, Wannamaker and Vanderkooy 1992, from memory).
    count = 200_000
    found = written(tmp_path / "x.wav", np.full((count, 1), (100 + part) / 2**15), "16")
    error = found[:, 0] * 2**15 - (100 + part)
    assert abs(error.mean()) < 5 * 0.5 / count**0.5
    assert np.mean(error**2) == pytest.approx(0.25, rel=0.02)
    # And one error says nothing about the next.
    assert abs(np.mean(error[1:] * error[:-1])) < 5 * 0.25 / count**0.5


@pytest.mark.parametrize("depth", ["16", "24", "float"])
def test_the_blocks_do_not_matter(tmp_path, depth):
    samples = noise(1000, 2)
    written(tmp_path / "a.wav", samples, depth)
    written(tmp_path / "b.wav", samples, depth, cuts=[1, 2, 400, 999])
    assert (tmp_path / "a.wav").read_bytes() == (tmp_path / "b.wav").read_bytes()


def test_a_float_wav_holds_no_time_of_day(tmp_path):
    written(tmp_path / "x.wav", noise(100), "float")
    data = (tmp_path / "x.wav").read_bytes()
    at = data.index(b"PEAK")
    size, version, stamp = struct.unpack_from("<III", data, at + 4)
    assert (size, version, stamp) == (16, 1, 0)


def test_blanking_the_time_leaves_sound_that_spells_the_chunk_alone(tmp_path):
    word = np.frombuffer(b"PEAK" * 8, np.float32).astype(np.float64)
    found = written(tmp_path / "x.wav", np.tile(word, 20)[:, np.newaxis], "float")
    np.testing.assert_array_equal(found[:, 0], np.tile(word, 20))


def test_an_error_leaves_the_file_closed(tmp_path):
    out = SoundFileOut(tmp_path / "x.wav", RATE, 1, "16")
    with pytest.raises(RuntimeError, match="mid-way"), out:  # noqa: PT012
        out.write(noise(10))
        raise RuntimeError("mid-way")
    with pytest.raises(RuntimeError):
        out.write(noise(10))


def test_a_missing_folder_is_an_os_error_that_names_the_file(tmp_path):
    path = tmp_path / "none" / "x.wav"
    with pytest.raises(FileNotFoundError) as caught:
        SoundFileOut(path, RATE, 1, "16")
    assert caught.value.filename == str(path)
    assert caught.value.strerror == "No such file or directory"


def test_formats_are_refused_before_anything_is_written(tmp_path):
    def check(name, depth="24", channels=1, rate=48000, frames=10):
        check_format(tmp_path / name, depth, channels, rate, frames)

    check("x.wav")
    check("x.WAV", "float")
    check("x.flac", "16", 2)
    with pytest.raises(UnknownNameError, match=r"unknown sound file suffix '.ogg'; .*\.flac"):
        check("x.ogg")
    with pytest.raises(UnknownNameError, match="unknown depth '8'; known: 16, 24, float"):
        check("x.wav", "8")
    with pytest.raises(InputError, match="FLAC holds 16 or 24 bit"):
        check("x.flac", "float")
    # RIFF sizes have 32 bits: 4 GiB, less room for the header.
    check("x.wav", "16", 2, frames=2**30 - 1024)
    with pytest.raises(InputError, match=r"4.3 GB does not fit a WAV file"):
        check("x.wav", "16", 2, frames=2**30)
    check("x.flac", "16", 2, frames=2**30)
    assert not any(tmp_path.iterdir())
