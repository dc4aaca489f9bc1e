"""The pitch curve: a row at every moment asked for, whatever the blocks."""

import csv
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from livelag.circuit.stage import Scale
from livelag.errors import UnknownNameError
from livelag.report.curve import CurveCsv, CurveForPicture, _Sampler, check_curve

SCALE = Scale(1.0, 36.0)


def picked_in_blocks(rate, per_second, blocks):
    sampler, start, found = _Sampler(rate, per_second), 0, []
    for count in blocks:
        places = sampler.pick(count)
        assert all(0 <= place < count for place in places)
        found += [start + int(place) for place in places]
        start += count
    return found


@given(
    st.sampled_from([8000, 44100, 48000, 192000]),
    st.one_of(st.floats(0.001, 8000), st.sampled_from([1000.0, 8000.0, 1.0])),
    st.lists(st.integers(1, 5000), min_size=1, max_size=12),
)
@settings(max_examples=200, deadline=None)
def test_rows_are_the_frames_nearest_to_their_moments(rate, per_second, blocks):
    found = picked_in_blocks(rate, per_second, blocks)
    total = sum(blocks)
    assert found == picked_in_blocks(rate, per_second, [total])
    moments = np.arange(len(found) + 1) * rate / per_second
    assert found[0] == 0
    assert np.abs(np.array(found) - moments[:-1]).max() <= 0.5
    assert moments[-1] >= total - 0.5  # the next row would be after the end
    assert len(set(found)) == len(found)


def test_the_csv_holds_what_it_was_given(tmp_path):
    count = 8000
    key = np.repeat([0.0, 1.0], count // 2)
    glide = np.linspace(-0.25, 2.0, count)
    with CurveCsv(tmp_path / "x.csv", 8000, 1000.0, SCALE) as curve:
        for part in np.split(np.arange(count), [1, 17, 4000]):
            curve.write(np.zeros(len(part)), key[part], glide[part])
    data = (tmp_path / "x.csv").read_bytes()
    assert data.startswith(b"time_s,key_volts,glide_volts,pitch_hz\n0.000000000,")
    assert b"\r" not in data
    with (tmp_path / "x.csv").open(newline="") as file:
        rows = np.array([list(map(float, row.values())) for row in csv.DictReader(file)])
    np.testing.assert_allclose(rows[:, 0], np.arange(1000) / 1000, atol=1e-12)
    np.testing.assert_array_equal(rows[:, 1], key[::8])
    np.testing.assert_allclose(rows[:, 2], glide[::8], rtol=1e-11)
    # 0 V is note 36, 65.40639 Hz; a volt is an octave (ISO 16).
    np.testing.assert_allclose(rows[:, 3], 65.40639132515 * 2.0 ** glide[::8], rtol=1e-8)


def test_another_scale_means_another_pitch(tmp_path):
    with CurveCsv(tmp_path / "x.csv", 8000, 1.0, Scale(1.2, 69.0)) as curve:
        curve.write(np.zeros(1), np.array([1.2]), np.array([-1.2]))
    assert (tmp_path / "x.csv").read_text().splitlines()[1] == "0.000000000,1.2,-1.2,220"


needs_dev_full = pytest.mark.skipif(not Path("/dev/full").exists(), reason="needs /dev/full")


@needs_dev_full
def test_a_full_disk_is_an_os_error_that_names_the_file(tmp_path):
    path = tmp_path / "full.csv"
    path.symlink_to("/dev/full")
    big = np.zeros(100_000)
    with (
        pytest.raises(OSError, match="No space left") as caught,
        CurveCsv(path, 8000, 8000.0, SCALE) as curve,
    ):
        curve.write(big, big, big)
    assert caught.value.filename == str(path)


@needs_dev_full
def test_a_small_rest_that_does_not_fit_is_noticed_at_the_end(tmp_path):
    path = tmp_path / "full.csv"
    path.symlink_to("/dev/full")
    with (
        pytest.raises(OSError, match="No space left") as caught,
        CurveCsv(path, 8000, 8000.0, SCALE),
    ):
        pass
    assert caught.value.filename == str(path)


@pytest.mark.parametrize("seconds", [0.01, 1.0, 600.0])
def test_a_picture_keeps_no_more_points_than_it_can_show(seconds):
    rate = 8000
    frames = round(seconds * rate)
    curve = CurveForPicture(rate, frames)
    for start in range(0, frames, 4096):
        block = np.arange(start, min(start + 4096, frames), dtype=float)
        curve.write(np.zeros(len(block)), block, -block)
    times, key, glide = curve.curve
    assert min(frames, 20_000) <= len(times) <= CurveForPicture.POINTS + 1
    np.testing.assert_array_equal(key, -glide)
    np.testing.assert_allclose(times * rate, key, atol=1e-6)
    assert times[-1] >= seconds * (1 - 1e-4) - 2 / rate


def test_only_csv_is_a_curve(tmp_path):
    check_curve(tmp_path / "x.csv")
    check_curve(tmp_path / "x.CSV")
    with pytest.raises(UnknownNameError, match=r"x\.tsv: unknown pitch curve suffix '\.tsv'"):
        check_curve(tmp_path / "x.tsv")
