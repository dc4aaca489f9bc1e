"""Calibrating a channel: two readings in, volts per full scale out, kept by device and channel."""

import numpy as np
import pytest

from livelag.errors import InputError
from livelag.live.calibration import (
    Calibration,
    SteadyVolts,
    from_readings,
    load_calibration,
    measure,
    save_calibration,
)
from livelag.live.volts import VoltsIn, VoltsOut


def test_readings_become_full_scale_and_zero():
    assert from_readings(0.01, 5.01) == Calibration(10.0, 0.01)


@pytest.mark.parametrize(
    ("zero", "test", "words"),
    [
        (0.0, 0.001, "AC-coupled"),
        (0.0, -5.0, "leads"),
        (0.0, 900.0, "full scale"),
        (0.0, float("nan"), "nan V"),
    ],
)
def test_readings_that_make_no_sense_are_refused(zero, test, words):
    with pytest.raises(InputError, match=words):
        from_readings(zero, test)


def test_what_is_saved_is_found_again_by_device_and_channel(tmp_path):
    file = tmp_path / "deep" / "calibration.toml"
    save_calibration("box, api", 3, Calibration(9.7, 0.002), file)
    save_calibration("box, api", 4, Calibration(9.8, -0.001), file)
    assert load_calibration("box, api", 3, file) == Calibration(9.7, 0.002)
    assert load_calibration("box, api", 4, file) == Calibration(9.8, -0.001)
    assert load_calibration("box, api", 5, file) is None


@pytest.mark.parametrize("text", ["[", "a = 1", '["box, channel 1"]\nfull_scale_v = "x"'])
def test_a_damaged_file_is_named(tmp_path, text):
    file = tmp_path / "calibration.toml"
    file.write_text(text)
    with pytest.raises(InputError, match=r"calibration\.toml"):
        load_calibration("box", 1, file)


def test_a_calibrated_output_gives_the_volts_it_is_asked_for():
    """An interface of 9.7 V and 20 mV of offset, simulated from its own two readings."""

    def interface(digital):
        return 9.7 * digital + 0.02

    found = from_readings(interface(0.0), interface(0.5))
    out = np.zeros((3, 1), np.float32)
    volts = VoltsOut(0, found.full_scale_v, found.zero_v)
    volts.write(out, np.array([0.0, 1.0, 3.25]), None)
    assert interface(out[:, 0].astype(float)) == pytest.approx([0.0, 1.0, 3.25], abs=1e-5)


def test_volts_beyond_full_scale_are_clamped_and_counted():
    out = np.zeros((3, 1), np.float32)
    volts = VoltsOut(0, 5.0)
    volts.write(out, np.array([-6.0, 0.0, 7.0]), None)
    assert out[:, 0].tolist() == [-1.0, 0.0, 1.0]
    assert volts.clamped_frames == 2


@pytest.mark.parametrize("full_scale", [0.0, -5.0, 1000.0, float("nan")])
def test_a_full_scale_out_of_bounds_is_refused(full_scale):
    with pytest.raises(InputError, match="full scale"):
        VoltsOut(0, full_scale)
    with pytest.raises(InputError, match="full scale"):
        VoltsIn(0, full_scale)


def test_measuring_ramps_asks_twice_and_returns_to_zero():
    steady = SteadyVolts(1, 48000)
    asked, levels = [], []

    def settle(seconds):
        out = np.zeros((round(seconds * 48000), 2), np.float32)
        steady.fill(out)
        levels.append(float(out[-1, 1]))
        assert np.abs(np.diff(out[:, 1])).max() < 1e-4
        assert not out[:, 0].any()

    def ask(words):
        asked.append(words)
        return f"{10 * levels[-1] + 0.005:.4f} V\n"

    assert measure(steady, ask, settle) == Calibration(pytest.approx(10.0), pytest.approx(0.005))
    assert len(asked) == 2
    assert levels[-1] == 0.0


def test_an_answer_that_is_no_number_leaves_the_output_at_zero():
    steady = SteadyVolts(0, 48000)
    with pytest.raises(InputError, match="'five'"):
        measure(
            steady, lambda words: "five\n", lambda s: steady.fill(np.zeros((48000, 1), np.float32))
        )
    assert steady.target == 0.0
