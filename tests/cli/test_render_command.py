"""`livelag render`: every output it can be asked for, and the answer it gives."""

import csv
import json

import numpy as np
import pytest
import soundfile
from mido import Message

from livelag.circuit.presets import load_stage, preset_names
from livelag.circuit.stage import Setting
from livelag.notes.midi_file import TimedMessage, write_midi_file
from livelag.notes.phrases import PHRASES

CONTRACT = {
    "out", "seconds", "frames", "rate_hz", "channels", "time_constant_s", "notes", "peak_dbfs",
    "method",
}  # fmt: skip


def curve_of(path):
    with path.open(newline="") as file:
        header, *rows = csv.reader(file)
    return header, np.array(rows, dtype=float)


def test_the_answer_holds_the_keys_that_others_read(livelag, make_song, tmp_path):
    answer = livelag(
        "render", "ideal", "--midi", make_song((60, 67, 72)), "--range", "slow", "--rotation", 1,
        "--method", "bilinear", "--rate", 22050, "--out", "x.wav", "--json",
    )  # fmt: skip
    assert (answer.status, answer.err) == (0, "")
    found = json.loads(answer.out)
    assert found.keys() >= CONTRACT
    info = soundfile.info(tmp_path / "x.wav")
    assert found["out"] == "x.wav"
    assert found["frames"] == info.frames == round((0.75 + 0.25) * 22050)
    assert found["seconds"] == pytest.approx(info.frames / 22050, rel=1e-12)
    assert (found["rate_hz"], found["channels"], found["notes"]) == (22050, 1, 3)
    assert found["method"] == "bilinear"
    assert found["time_constant_s"] == pytest.approx((1e3 + 470e3) * (330e-9 + 4.7e-6), rel=1e-12)
    samples, _ = soundfile.read(tmp_path / "x.wav")
    assert found["peak_dbfs"] == pytest.approx(20 * np.log10(np.abs(samples).max()), abs=1e-3)


def test_without_options_the_demo_lands_beside_the_user(livelag, tmp_path):
    answer = livelag("render")
    assert (answer.status, answer.err) == (0, "")
    assert [path.name for path in tmp_path.iterdir()] == ["two-range-film-procession.wav"]
    for word in ("Two ranges, film capacitors", "'procession'", "77.9 ms", "exact"):
        assert word in answer.out


@pytest.mark.parametrize(
    ("depth", "suffix", "subtype"),
    [
        ("16", "wav", "PCM_16"), ("24", "wav", "PCM_24"), ("float", "wav", "FLOAT"),
        ("16", "flac", "PCM_16"), ("24", "flac", "PCM_24"), ("24", "WAV", "PCM_24"),
    ],
)  # fmt: skip
def test_each_depth_and_format_holds_the_same_sound(livelag, tmp_path, depth, suffix, subtype):
    common = ("render", "--phrase", "run", "--rate", 16000)
    assert livelag(*common, "--depth", "float", "--out", "ref.wav").status == 0
    assert livelag(*common, "--depth", depth, "--out", f"x.{suffix}").status == 0
    info = soundfile.info(tmp_path / f"x.{suffix}")
    assert (info.subtype, info.channels, info.samplerate) == (subtype, 1, 16000)
    assert info.format == suffix.upper()
    reference, _ = soundfile.read(tmp_path / "ref.wav")
    samples, _ = soundfile.read(tmp_path / f"x.{suffix}")
    # Rounding and dither of two steps' width reach 1.5 steps.
    step = {"16": 2.0**-15, "24": 2.0**-23, "float": 0.0}[depth]
    assert np.abs(samples - reference).max() <= 1.5 * step + 2.0**-25
    assert np.abs(samples).max() > 0.1


@pytest.mark.parametrize(("option", "full_scale"), [((), 10.0), (("--full-scale-volts", 5), 5.0)])
def test_the_second_channel_is_the_pitch_curve_at_its_full_scale(
    livelag, tmp_path, option, full_scale
):
    answer = livelag(
        "render", "--phrase", "octaves", "--rate", 8000, "--depth", "float", "--stereo", *option,
        "--out", "x.wav", "--cv", "x.csv", "--cv-rate", 8000, "--json",
    )  # fmt: skip
    found = json.loads(answer.out)
    assert (found["channels"], found["full_scale_volts"]) == (2, full_scale)
    samples, _ = soundfile.read(tmp_path / "x.wav")
    _, rows = curve_of(tmp_path / "x.csv")
    assert samples.shape == (found["frames"], 2)
    np.testing.assert_allclose(samples[:, 1] * full_scale, rows[:, 2], atol=1e-6)
    assert rows[:, 2].max() > 3.9


def test_the_curve_has_a_row_a_millisecond_and_the_volts_of_the_closed_form(livelag, tmp_path):
    livelag(
        "render", "--phrase", "bass", "--range", "slow", "--rotation", 0.2, "--rate", 44100,
        "--out", "x.wav", "--cv", "x.csv",
    )  # fmt: skip
    header, rows = curve_of(tmp_path / "x.csv")
    assert header == ["time_s", "key_volts", "glide_volts", "pitch_hz"]
    frames = soundfile.info(tmp_path / "x.wav").frames
    assert len(rows) == pytest.approx(frames / 44.1, abs=1)
    np.testing.assert_allclose(rows[:, 0], np.arange(len(rows)) / 1000, atol=0.51 / 44100)
    stage, setting = load_stage("two-range-film"), Setting(1, 0.2)
    # The phrase starts on note 40 and goes to 47 after two beats at 66 a minute.
    start = round(2 * 60 / 66 * 44100) / 44100
    first, second = (stage.note_volts(n) for n in (40, 47))
    inside = (rows[:, 0] >= start) & (rows[:, 0] < start + 0.85)
    np.testing.assert_allclose(rows[inside, 1], second, atol=1e-11)
    expected = stage.response(
        stage.settled_state(first, setting), second, setting, rows[inside, 0] - start
    )
    np.testing.assert_allclose(rows[inside, 2], expected, atol=1e-8)
    # Equal temperament, A4 = 440 Hz (ISO 16); 0 V is note 36 on this stage.
    hertz = 440.0 * 2.0 ** ((36 - 69) / 12) * 2.0 ** rows[:, 2]
    np.testing.assert_allclose(rows[:, 3], hertz, rtol=1e-8)


def test_the_curve_takes_another_rate(livelag, tmp_path):
    livelag("render", "--phrase", "run", "--out", "x.wav", "--cv", "x.csv", "--cv-rate", 50)
    _, rows = curve_of(tmp_path / "x.csv")
    np.testing.assert_allclose(np.diff(rows[:, 0]), 0.02, atol=1e-9)


@pytest.mark.parametrize(
    ("suffix", "start"), [("png", b"\x89PNG\r\n\x1a\n"), ("svg", b"<?xml"), ("pdf", b"%PDF-")]
)
def test_pictures_are_what_their_suffix_says(livelag, tmp_path, suffix, start):
    answer = livelag(
        "render", "--phrase", "run", "--rate", 8000, "--out", "x.wav", "--picture", f"x.{suffix}"
    )
    assert (answer.status, answer.err) == (0, "")
    data = (tmp_path / f"x.{suffix}").read_bytes()
    assert data.startswith(start)
    assert len(data) > 5000
    assert {path.name for path in tmp_path.iterdir()} == {"x.wav", f"x.{suffix}"}


@pytest.mark.parametrize(("depth", "picture"), [("16", "png"), ("24", "svg"), ("float", "pdf")])
def test_two_renders_are_the_same_to_the_byte(livelag, tmp_path, depth, picture):
    for name in "ab":
        livelag(
            "render", "--phrase", "run", "--rate", 8000, "--depth", depth, "--stereo",
            "--out", f"{name}.wav", "--cv", f"{name}.csv", "--picture", f"{name}.{picture}",
        )  # fmt: skip
    for suffix in ("wav", "csv", picture):
        data = (tmp_path / f"a.{suffix}").read_bytes()
        assert data == (tmp_path / f"b.{suffix}").read_bytes(), suffix


@pytest.mark.parametrize("preset", preset_names())
def test_every_preset_renders_and_says_what_the_model_leaves_out(livelag, preset):
    answer = livelag("render", preset, "--phrase", "scale", "--rate", 16000, "--out", "x.flac")
    assert answer.status == 0
    warnings = load_stage(preset).warnings()
    assert answer.err == "".join(f"note: {sentence}\n" for sentence in warnings)


@pytest.mark.parametrize("phrase", PHRASES)
def test_every_phrase_renders_without_clamp_or_ceiling(livelag, phrase):
    answer = livelag("render", "--phrase", phrase, "--rate", 16000, "--out", "x.wav", "--json")
    found = json.loads(answer.out)
    assert found["notes"] == PHRASES[phrase].note_count
    for count in ("clipped_notes", "unglided_notes", "clamped_frames", "ceiling_frames"):
        assert found[count] == 0


def test_bypass_puts_the_glide_on_the_key(livelag, tmp_path):
    livelag("render", "ideal", "--phrase", "run", "--bypass", "--out", "x.wav", "--cv", "x.csv")
    _, rows = curve_of(tmp_path / "x.csv")
    np.testing.assert_array_equal(rows[:, 1], rows[:, 2])


def test_level_waveform_and_width_reach_the_sound(livelag, tmp_path):
    common = ("render", "--phrase", "bass", "--rate", 48000, "--depth", "float", "--out", "x.wav")
    means = {}
    for width in (0.25, 0.75):
        livelag(*common, "--waveform", "pulse", "--pulse-width", width, "--level", -6)
        samples, _ = soundfile.read(tmp_path / "x.wav")
        means[width] = samples.mean()
    assert means[0.25] < -0.1 < 0.1 < means[0.75]
    livelag(*common, "--waveform", "sine", "--level", -30)
    samples, _ = soundfile.read(tmp_path / "x.wav")
    assert np.abs(samples).max() == pytest.approx(10 ** (-30 / 20), rel=1e-3)


def test_what_the_sound_would_not_tell_is_said(livelag, make_song):
    song = make_song((60, 12, 40))
    answer = livelag("render", "battery-9v", "--midi", song, "--rate", 8000, "--out", "x.wav")
    assert answer.status == 0
    (line,) = answer.err.splitlines()
    assert line.startswith("note: notes that the buffers cannot pass")
    assert line.endswith("out of tune: 1")


def test_music_that_turns_the_glide_off_is_told_and_can_be_overruled(livelag, tmp_path):
    messages = [TimedMessage(0.0, Message("control_change", control=121, value=0))]
    for number, note in enumerate((60, 72)):
        messages.append(TimedMessage(0.2 * number, Message("note_on", note=note)))
        messages.append(TimedMessage(0.2 * number + 0.2, Message("note_off", note=note)))
    write_midi_file(tmp_path / "off.mid", messages, 48000)
    common = ("render", "ideal", "--midi", "off.mid", "--out", "x.wav", "--cv", "x.csv")
    answer = livelag(*common)
    assert "turned the glide off (controller 65): 2; --keep-gliding" in answer.err
    _, rows = curve_of(tmp_path / "x.csv")
    assert np.array_equal(rows[:, 1], rows[:, 2])
    assert livelag(*common, "--keep-gliding").err == ""
    _, rows = curve_of(tmp_path / "x.csv")
    assert np.abs(rows[:, 1] - rows[:, 2]).max() > 0.9


def test_names_and_titles_are_shown_as_they_are_written(livelag, make_song, tmp_path):
    song = make_song(name="[/red] costs $5 \\frac{ é :smile:")
    answer = livelag(
        "render", "--midi", song, "--rate", 8000, "--out", "[b]x.wav", "--picture", "[b].png"
    )
    assert (answer.status, answer.err) == (0, "")
    assert "'[/red] costs $5 \\\\frac{ é :smile:'" in answer.out
    assert "[b]x.wav" in answer.out
    assert (tmp_path / "[b].png").stat().st_size > 5000


def test_an_older_file_is_replaced(livelag, tmp_path):
    (tmp_path / "x.wav").write_text("an older file")
    assert livelag("render", "--phrase", "run", "--rate", 8000, "--out", "x.wav").status == 0
    assert soundfile.info(tmp_path / "x.wav").samplerate == 8000


def test_a_name_as_long_as_the_system_takes_will_do(livelag, tmp_path):
    name = "n" * 251 + ".wav"
    assert livelag("render", "--phrase", "run", "--rate", 8000, "--out", name).status == 0
    assert [path.name for path in tmp_path.iterdir()] == [name]


@pytest.mark.parametrize(
    ("options", "message"),
    [
        (("--channels", "1"), "--channels goes with --midi"),
        (("--tracks", "1"), "--tracks goes with --midi"),
        (("--keep-gliding",), "--keep-gliding goes with --midi"),
        (("--pulse-width", "0.3"), "--pulse-width goes with --waveform pulse"),
        (("--full-scale-volts", "5"), "--full-scale-volts goes with --stereo"),
        (("--cv-rate", "100"), "--cv-rate goes with --cv"),
        (("--rotation", "0", "--rotations", "0,1"), "--rotation and --rotations exclude"),
        (("--range", "slow", "--ranges", "all"), "--range and --ranges exclude"),
        (("--ranges", "all", "--cv", "x.csv"), "--cv is for one rendering"),
        (("--rotations", "0,1", "--picture", "x.png"), "--picture is for one rendering"),
        (("--ranges", "all", "--bypass"), "--bypass makes every rendering"),
        (("--bypass", "--legato-only"), "--legato-only changes nothing"),
        (("--bypass", "--rotation", "0"), "--rotation changes nothing"),
        (("--bypass", "--range", "slow"), "--range changes nothing"),
        (("--phrase", "run", "--midi", "x.mid"), "not allowed with argument"),
        (("--rotation", "half"), "is not a number"),
        (("--rate", "44.1k"), "is not a whole number"),
        (("--loudly",), "there is no option --loudly"),
    ],
)
def test_an_option_that_does_not_apply_is_a_wrong_command_line(livelag, tmp_path, options, message):
    answer = livelag("render", *options)
    assert answer.status == 2
    assert answer.out == ""
    assert message in answer.err.splitlines()[-1]
    assert not any(tmp_path.iterdir())
