"""The patch: the same samples whatever the blocks, keys that act at their frame, honest counts."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from mido import Message

from livelag.circuit.presets import load_stage
from livelag.circuit.stage import Setting
from livelag.errors import InputError, UnknownNameError
from livelag.notes.player import PlayerSettings
from livelag.sound.lag import Lag
from livelag.sound.parameters import PARAMETERS, Change
from livelag.sound.patch import Patch

RATE = 48000


def on(note, velocity=100):
    return Message("note_on", note=note, velocity=velocity)


def off(note):
    return Message("note_off", note=note)


def control(number, value):
    return Message("control_change", control=number, value=value)


def play(patch, frames, events=(), cuts=(), rest=0.0):
    """Run a patch in blocks cut at the given frames and return its three outputs whole."""
    patch.prepare(RATE, max(frames, 1))
    patch.reset(rest)
    edges = sorted({0, frames, *(c for c in cuts if c < frames)})
    parts = []
    for left, right in pairwise(edges):
        block = [(f - left, e) for f, e in events if left <= f < right]
        out = patch.process(right - left, block)
        parts.append([array.copy() for array in out])
    return [np.concatenate(column) for column in zip(*parts, strict=True)]


events = st.lists(
    st.tuples(
        st.integers(0, 599),
        st.one_of(
            st.builds(on, st.integers(20, 110), st.integers(1, 127)),
            st.builds(off, st.integers(20, 110)),
            st.builds(control, st.sampled_from([5, 37, 64, 65, 80, 84, 123]), st.integers(0, 127)),
            st.builds(lambda p: Message("pitchwheel", pitch=p), st.integers(-8192, 8191)),
            st.builds(Change, st.just("waveform"), st.sampled_from(["saw", "pulse", "sine"])),
            st.builds(Change, st.just("pulse_width"), st.floats(0.1, 0.9)),
            st.builds(Change, st.just("rotation"), st.floats(0, 1)),
            st.builds(Change, st.just("range"), st.integers(0, 1)),
            st.builds(Change, st.just("bypass"), st.integers(0, 1)),
            st.builds(Change, st.just("level"), st.floats(-40, -1)),
        ),
    ),
    max_size=12,
)


@settings(max_examples=60, deadline=None)
@given(
    events=events,
    cuts=st.lists(st.integers(1, 599), max_size=10),
    method=st.sampled_from(["exact", "bilinear"]),
    articulation=st.booleans(),
)
def test_blocks_never_matter_to_the_bit(events, cuts, method, articulation):
    events = sorted(events, key=lambda pair: pair[0])
    stage = load_stage("two-range-film")
    patch = Patch(stage, method, PlayerSettings(retrigger=articulation), rotation=0.01)
    whole = play(patch, 600, events)
    for name, row in PARAMETERS.items():
        patch.set(name, {"rotation": 0.01}.get(name, row.default))
    cut = play(patch, 600, events, cuts)
    for a, b in zip(whole, cut, strict=True):
        assert np.array_equal(a, b)
        assert np.isfinite(a).all()


def test_a_key_acts_at_its_own_frame():
    stage = load_stage("ideal")
    patch = Patch(stage, rotation=0.0)
    _, key, glide = play(patch, 400, [(100, on(48))])
    assert (key[:100] == 0.0).all()
    assert (key[100:] == 1.0).all()
    assert (glide[:101] == 0.0).all()
    assert 0.0 < glide[101] < glide[200] < 1.0


def test_sound_begins_with_the_gate_and_ends_after_it():
    patch = Patch(load_stage("ideal"), rotation=0.0)
    audio, *_ = play(patch, RATE // 2, [(1000, on(60)), (12000, off(60))])
    late = patch.latency_frames
    assert (audio[: 1000 + late] == 0.0).all()
    assert np.abs(audio[2000:12000]).max() == pytest.approx(10 ** (-18 / 20), rel=0.2)
    assert (audio[12000 + late + 480 :] == 0.0).all()


def test_the_gate_makes_no_click():
    patch = Patch(load_stage("ideal"), rotation=0.0, waveform="sine", level=-1.0)
    audio, *_ = play(patch, 9600, [(480, on(24)), (4800, off(24))])
    steepest = 2 * np.pi * 33 / RATE + 1.5 / (0.003 * RATE)  # the sine's slope and the ramp's
    assert np.abs(np.diff(audio)).max() < steepest


def test_velocity_counts_only_when_asked():
    def peak(struck, **parameters):
        patch = Patch(load_stage("ideal"), waveform="sine", **parameters)
        return np.abs(play(patch, 9600, [(0, on(60, struck))])[0]).max()

    assert peak(20) == pytest.approx(peak(127), rel=1e-9)
    assert peak(20, velocity=1.0) == pytest.approx(peak(127, velocity=1.0) * 20 / 127, rel=1e-6)


def test_the_ceiling_holds_and_says_so():
    patch = Patch(load_stage("ideal"), level=-1.0)
    audio, *_ = play(patch, 9600, [(0, on(60))])
    assert np.abs(audio).max() == pytest.approx(10 ** (-1 / 20), abs=1e-12)
    assert patch.counts.ceiling_frames > 0
    patch.set("level", -18.0)
    play(patch, 9600, [(0, on(60))])
    assert patch.counts.ceiling_frames == 0


def test_notes_beyond_the_swing_are_counted():
    patch = Patch(load_stage("battery-9v"))
    _, _, glide = play(patch, 900, [(0, on(60)), (300, on(30)), (600, on(62))])
    assert patch.counts.notes == 3
    assert patch.counts.clipped_notes == 1
    assert glide.min() >= 0.0


def test_pitch_beyond_the_rate_is_clamped_and_counted():
    stage = load_stage("ideal")
    patch = Patch(stage, rotation=0.0)
    patch.prepare(8000, 4000)
    patch.reset(stage.note_volts(127))
    patch.process(4000, [(0, on(127))])
    assert patch.counts.clamped_frames > 3000


def test_portamento_off_bypasses_and_is_counted():
    patch = Patch(load_stage("ideal"), rotation=1.0)
    _, key, glide = play(patch, 900, [(0, control(65, 0)), (10, on(48)), (300, on(60))])
    assert np.array_equal(key, glide)
    assert patch.counts.unglided_notes == 2


def test_legato_only_glides_between_overlapping_notes_only():
    stage = load_stage("ideal")
    patch = Patch(stage, player_settings=PlayerSettings(glide="legato only"), rotation=0.5)
    _, _, glide = play(patch, 900, [(0, on(48)), (300, on(60)), (600, off(48)), (600, off(60))])
    assert glide[5] == 1.0
    assert glide[300] == pytest.approx(1.0, abs=1e-12)
    assert 1.0 < glide[310] < 1.1


def test_portamento_control_glides_from_the_given_key():
    patch = Patch(load_stage("ideal"), rotation=0.5)
    _, _, glide = play(patch, 600, [(10, control(84, 72)), (20, on(48))])
    assert glide[20] == pytest.approx(3.0, abs=1e-12)
    assert 2.9 < glide[40] < 3.0


def test_the_pot_and_range_follow_their_controllers():
    stage = load_stage("three-range")
    patch = Patch(stage)
    play(patch, 200, [(0, control(5, 127)), (50, control(80, 64)), (90, control(80, 127))])
    assert patch.setting == Setting(2, 1.0)
    play(patch, 200, [(0, control(80, 64))])
    assert patch.setting.range_index == 1


def test_bypass_compares():
    patch = Patch(load_stage("two-range-film"), bypass=1.0)
    _, key, glide = play(patch, 300, [(50, on(60))])
    offset = glide[0] - key[0]
    assert np.allclose(glide - key * patch.stage.divider, offset, atol=1e-12)


def test_reset_returns_to_the_start():
    patch = Patch(load_stage("two-range-film"), rotation=0.3)
    first = play(patch, 500, [(10, on(50)), (200, on(70))])
    again = play(patch, 500, [(10, on(50)), (200, on(70))])
    for a, b in zip(first, again, strict=True):
        assert np.array_equal(a, b)


def test_a_block_beyond_what_was_prepared_is_refused():
    patch = Patch(load_stage("ideal"))
    patch.prepare(RATE, 64)
    with pytest.raises(InputError, match="65 frames; prepared for 64"):
        patch.process(65)


@pytest.mark.parametrize(
    ("name", "value"),
    [
        ("rotation", 1.01),
        ("rotation", -0.1),
        ("rotation", float("nan")),
        ("range", 2),
        ("level", 0),
    ],
)
def test_values_out_of_range_are_refused_with_the_range(name, value):
    with pytest.raises(InputError, match=f"{name} is .*"):
        Patch(load_stage("two-range-film"), **{name: value})


def test_unknown_names_are_refused_with_those_that_exist():
    with pytest.raises(UnknownNameError, match="known: saw, pulse, triangle, sine"):
        Patch(load_stage("ideal"), waveform="square")
    with pytest.raises(UnknownNameError, match="rotation"):
        Patch(load_stage("ideal")).set("rotatoin", 1.0)


def test_every_default_is_within_its_own_row():
    for row in PARAMETERS.values():
        assert row.check(row.default) == row.default
        assert row.about


def test_outside_volts_glide_in_place_of_the_keys():
    stage = load_stage("two-range-film")
    patch = Patch(stage, "ramp", rotation=0.2)
    patch.prepare(RATE, 512)
    volts = np.linspace(0.0, 1.0, 512)
    _, key, glide = patch.process(512, [(0, on(60))], volts)
    assert np.array_equal(key, volts)
    lag = Lag(stage, RATE, "ramp", Setting(0, 0.2))
    assert np.array_equal(glide, lag.process(volts))


def test_a_piece_begins_with_its_controls_where_it_wants_them():
    stage = load_stage("bipolar-drift")  # where the pot stands shows in the resting volts
    patch = Patch(stage, rotation=0.5)
    patch.prepare(RATE, 512)
    patch.begin(1.0, [control(5, 127)])
    _, _, glide = patch.process(512)
    assert glide[0] == pytest.approx(stage.settled_volts(1.0, Setting(0, 1.0)), abs=1e-12)
    assert np.ptp(glide) < 1e-12


def test_silence_is_known():
    patch = Patch(load_stage("ideal"))
    patch.prepare(RATE, 4800)
    assert patch.silent
    patch.process(4800, [(0, on(60)), (4700, off(60))])
    assert not patch.silent
    patch.process(4800)
    assert patch.silent
