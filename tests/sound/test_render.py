"""Offline rendering: sound and volts in step, whole, and the same as the patch played in one go."""

import numpy as np
import pytest
from mido import Message

from livelag.circuit.presets import load_stage
from livelag.errors import InputError
from livelag.notes.midi_file import TimedMessage
from livelag.sound.patch import Patch
from livelag.sound.render import (
    BLOCK_FRAMES,
    TAIL_S,
    check_rate,
    frames_for,
    opening,
    render,
)

RATE = 48000
STAGE = load_stage("two-range-film")


class Keeper:
    """Keeps copies of all it is given."""

    def __init__(self):
        self.blocks = []

    def write(self, audio, key_volts, glide_volts):
        assert len(audio) == len(key_volts) == len(glide_volts)
        self.blocks.append((audio.copy(), key_volts.copy(), glide_volts.copy()))

    @property
    def whole(self):
        return [np.concatenate(column) for column in zip(*self.blocks, strict=True)]


def on(time_s, note):
    return TimedMessage(time_s, Message("note_on", note=note, velocity=100))


def off(time_s, note):
    return TimedMessage(time_s, Message("note_off", note=note))


SONG = (
    TimedMessage(0.0, Message("control_change", control=5, value=90)),
    on(0.1, 60), off(0.2, 60), on(0.2, 67), off(0.35, 67), on(0.37, 48), off(0.5, 48),
)  # fmt: skip


@pytest.mark.parametrize("frames", [1, 100, BLOCK_FRAMES - 1, BLOCK_FRAMES, 3 * BLOCK_FRAMES + 7])
def test_it_is_the_patch_played_in_one_go_without_its_latency(frames):
    keeper = Keeper()
    done = render(Patch(STAGE), SONG, frames, RATE, [keeper])
    patch = Patch(STAGE)
    late = patch.latency_frames
    assert late > 0
    patch.prepare(RATE, frames + late)
    patch.begin(STAGE.note_volts(60), [SONG[0].message])
    events = [(round(m.time_s * RATE), m.message) for m in SONG]
    whole = patch.process(frames + late, [e for e in events if e[0] < frames + late])
    audio, key, glide = keeper.whole
    np.testing.assert_allclose(audio, whole.audio[late:], atol=1e-12)
    np.testing.assert_array_equal(key, whole.key_volts[:frames])
    np.testing.assert_allclose(glide, whole.glide_volts[:frames], atol=1e-12)
    assert (done.frames, done.rate_hz, done.seconds) == (frames, RATE, frames / RATE)
    assert done.peak == np.abs(audio).max()


def test_sound_begins_and_pitch_steps_at_the_frame_of_the_note():
    keeper = Keeper()
    render(Patch(STAGE, waveform="pulse"), SONG, 12000, RATE, [keeper])
    audio, key, _ = keeper.whole
    start = round(0.1 * RATE)
    # The attack starts from nothing at the note's own frame, within the reach of an edge.
    assert np.abs(audio[:start]).max() == 0.0
    assert np.flatnonzero(audio)[0] <= start + 2
    assert key[round(0.2 * RATE) - 1] == STAGE.note_volts(60)
    assert key[round(0.2 * RATE)] == STAGE.note_volts(67)


def test_the_stage_rests_on_the_first_note():
    keeper = Keeper()
    render(Patch(STAGE), SONG, 9000, RATE, [keeper])
    _, key, glide = keeper.whole
    assert set(key[:9000]) == {STAGE.note_volts(60)}
    np.testing.assert_allclose(glide, glide[0], atol=1e-12)


def test_a_piece_opens_on_its_first_note_with_the_controls_before_it():
    patch = Patch(STAGE)
    silent = TimedMessage(0.0, Message("note_on", note=40, velocity=0))
    turn, bend = Message("control_change", control=5, value=9), Message("pitchwheel", pitch=99)
    early, late = TimedMessage(0.4 / RATE, turn), TimedMessage(0.6 / RATE, bend)
    messages = [silent, off(0, 41), early, late, on(1, 72), early, on(2, 20)]
    assert opening(patch, messages, RATE) == (STAGE.note_volts(72), [turn])
    assert opening(patch, [silent, late], RATE) == (0.0, [])


def test_a_used_patch_renders_the_same_again_to_several_sinks():
    patch = Patch(STAGE)
    keepers = [Keeper(), Keeper(), Keeper()]
    render(patch, SONG, 30000, RATE, keepers[:2])
    render(patch, SONG, 30000, RATE, keepers[2:])
    for keeper in keepers[1:]:
        for one, other in zip(keepers[0].whole, keeper.whole, strict=True):
            np.testing.assert_array_equal(one, other)


def test_blocks_stay_small_and_progress_reaches_the_end():
    keeper, seen = Keeper(), []
    render(Patch(STAGE), SONG, 50000, RATE, [keeper], seen.append)
    assert max(len(block[0]) for block in keeper.blocks) <= BLOCK_FRAMES
    assert seen == sorted(seen)
    assert seen[-1] == 50000


def test_messages_after_the_end_are_left_out():
    keeper = Keeper()
    done = render(Patch(STAGE), [on(0.0, 60), on(9.0, 90)], 4800, RATE, [keeper])
    assert done.counts.notes == 1
    assert set(keeper.whole[1]) == {STAGE.note_volts(60)}


@pytest.mark.parametrize("rate", [0, -1, 7999, 192001])
def test_rates_out_of_bounds(rate):
    with pytest.raises(InputError, match=rf"rate is {rate} Hz; it must be 8000 to 192000 Hz"):
        check_rate(rate)
    with pytest.raises(InputError, match="rate is"):
        render(Patch(STAGE), SONG, 10, rate, [])


def test_rates_at_the_bounds():
    for rate in (8000, 192000):
        keeper = Keeper()
        render(Patch(STAGE), SONG, 100, rate, [keeper])
        assert len(keeper.whole[0]) == 100


def test_frames_cover_the_performance_and_its_tail():
    assert frames_for(2.0, 48000) == round((2.0 + TAIL_S) * 48000)
    with pytest.raises(InputError, match="lasts 86401 s; the longest is 86400 s"):
        frames_for(86401.0, 48000)
