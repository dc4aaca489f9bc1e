"""Level: the gate as a ramp without clicks, the output level, and a ceiling.

A gain moves from where it stands to its target along a smoothstep, 3 g^2 - 2 g^3, counted in
whole frames, so that the samples do not depend on the block sizes.
"""

from __future__ import annotations

from functools import cache

import numpy as np
from numpy.typing import NDArray

from livelag.units import dbfs_to_amplitude

CEILING_DBFS = -1.0
ATTACK_S = 0.003
RELEASE_S = 0.010
RETRIGGER_S = 0.002


@cache
def _smoothstep(frames: int) -> NDArray[np.float64]:
    """(frames,) 3 x^2 - 2 x^3 for x from 0, in steps of 1 / frames."""
    x = np.arange(frames) / frames
    steps: NDArray[np.float64] = x * x * (3.0 - 2.0 * x)
    steps.setflags(write=False)
    return steps


class Level:
    """Gain over time, and the ceiling that nothing passes.

    Attributes:
        ceiling_frames: frames that the ceiling has held down since the last reset.
        peak: greatest absolute sample of the last block.
    """

    def __init__(self, sample_rate_hz: float) -> None:
        self._attack = max(1, round(ATTACK_S * sample_rate_hz))
        self._release = max(1, round(RELEASE_S * sample_rate_hz))
        self._retrigger = max(1, round(RETRIGGER_S * sample_rate_hz))
        self._ceiling = dbfs_to_amplitude(CEILING_DBFS)
        self.reset()

    def reset(self) -> None:
        """Silence, gate closed, counter at zero."""
        self._from = 0.0
        self._plan: list[tuple[float, int]] = []  # targets to come, each with its frames
        self._done = 0
        self.ceiling_frames = 0
        self.peak = 0.0

    @property
    def gain(self) -> float:
        """Gain at the next frame."""
        if not self._plan:
            return self._from
        target, frames = self._plan[0]
        return self._from + (target - self._from) * float(_smoothstep(frames)[self._done])

    @property
    def at_rest(self) -> bool:
        """Whether the gain is zero and stays there."""
        return not self._plan and self._from == 0.0

    def open(self, gain: float, *, retrigger: bool = False) -> None:
        """Ramp up (or over) to a gain; with ``retrigger`` by way of silence."""
        first = [(0.0, self._retrigger)] if retrigger and self.gain > 0.0 else []
        self._start([*first, (gain, self._attack)])

    def close(self) -> None:
        """Ramp down to silence."""
        self._start([(0.0, self._release)])

    def _start(self, plan: list[tuple[float, int]]) -> None:
        self._from = self.gain
        self._plan = plan
        self._done = 0

    def fill(self, gains: NDArray[np.float64]) -> None:
        """Write the gains of the next frames.

        Args:
            gains: (frames,) filled in place.
        """
        position = 0
        while self._plan and position < len(gains):
            target, frames = self._plan[0]
            count = min(frames - self._done, len(gains) - position)
            ramp = gains[position : position + count]
            steps = _smoothstep(frames)[self._done : self._done + count]
            np.multiply(steps, target - self._from, out=ramp)
            ramp += self._from
            position += count
            self._done += count
            if self._done == frames:
                self._from, self._done = target, 0
                self._plan.pop(0)
        gains[position:] = self._from

    def limit(self, audio: NDArray[np.float64]) -> None:
        """Hold a block under the ceiling, in place, and count the frames that needed it."""
        self.peak = max(float(audio.max()), -float(audio.min()))
        if self.peak > self._ceiling:
            self.peak = self._ceiling
            self.ceiling_frames += int(np.count_nonzero(np.abs(audio) > self._ceiling))
            np.clip(audio, -self._ceiling, self._ceiling, out=audio)
