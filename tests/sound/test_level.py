"""Level: ramps that blocks cannot change, retriggering through silence, the ceiling."""

import numpy as np
import pytest

from livelag.sound.level import ATTACK_S, CEILING_DBFS, RELEASE_S, Level

RATE = 48000
ATTACK, RELEASE = round(ATTACK_S * RATE), round(RELEASE_S * RATE)


def filled(level, frames):
    gains = np.empty(frames)
    level.fill(gains)
    return gains


def test_it_opens_over_the_attack_and_stays():
    level = Level(RATE)
    level.open(0.5)
    gains = filled(level, ATTACK + 10)
    assert gains[0] == 0.0
    assert (np.diff(gains[: ATTACK + 1]) >= 0).all()
    assert gains[ATTACK // 2] == pytest.approx(0.25, abs=0.01)
    assert (gains[ATTACK:] == 0.5).all()


def test_it_closes_to_exact_silence():
    level = Level(RATE)
    level.open(0.5)
    filled(level, ATTACK)
    level.close()
    gains = filled(level, RELEASE + 5)
    assert gains[0] == 0.5
    assert (gains[RELEASE:] == 0.0).all()


def test_a_turn_in_mid_ramp_goes_on_from_where_it_stood():
    level = Level(RATE)
    level.open(1.0)
    rising = filled(level, ATTACK // 2)
    level.close()
    falling = filled(level, 10)
    assert abs(falling[0] - rising[-1]) < 0.02


def test_retrigger_passes_through_silence():
    level = Level(RATE)
    level.open(0.5)
    filled(level, ATTACK)
    level.open(0.5, retrigger=True)
    gains = filled(level, RATE // 10)
    assert gains.min() == 0.0
    assert gains[-1] == 0.5


def test_blocks_never_matter():
    def run(cuts):
        level = Level(RATE)
        level.open(0.7, retrigger=True)
        parts = [filled(level, n) for n in cuts]
        level.close()
        return np.concatenate([*parts, filled(level, 700)])

    assert np.array_equal(run([300]), run([1, 99, 143, 57]))


def test_the_ceiling_clips_and_counts():
    level = Level(RATE)
    ceiling = 10 ** (CEILING_DBFS / 20)
    audio = np.array([0.1, 1.5, -2.0, ceiling])
    level.limit(audio)
    assert audio.tolist() == pytest.approx([0.1, ceiling, -ceiling, ceiling])
    assert level.ceiling_frames == 2
