"""A delay-locked clock: what frame was sounding when a message arrived.

The audio callback knows how many frames have gone by and, with a few tenths of a millisecond of
scheduling noise, what time it is. A second-order delay-locked loop smooths that into a straight
line between seconds and frames that follows slow drift between the two crystals and forgets
the noise: F. Adriaensen, "Using a DLL to filter time", Linux Audio Conference 2005 (from memory).

The line answers for the past: a message that arrived during the last block belongs to frames
already handed to the sound card. Whoever plays messages adds a constant delay of one block to
`frame_at`, so that every message lands in the block being computed, at its own frame.
"""

from __future__ import annotations

import math

from livelag.errors import InputError

#: Loop bandwidth once settled, hertz: 0.5 ms of callback noise leaves 0.02 ms, and a step of
#: drift is followed in about two seconds.
BANDWIDTH_HZ = 0.1
#: While the loop is young its bandwidth falls as 1/age, which is close to a least-squares line.
_START_AGE = 16
_MAX_DRIFT = 0.005
#: So many callbacks in a row, all off to the same side, are a dropout and not noise.
_RELOCK_AFTER = 4


class DelayLockedClock:
    """Second-order loop from monotonic seconds to stream frames.

    Feed it once per callback, from the callback, and ask it from the same thread. It uses
    plain floats and allocates nothing that grows.

    Attributes:
        relocks: how often the loop had to jump, once for each dropout or pause it noticed.
    """

    def __init__(self, rate_hz: float, bandwidth_hz: float = BANDWIDTH_HZ) -> None:
        """Make a clock that has seen nothing yet.

        Args:
            rate_hz: nominal frames per second, positive.
            bandwidth_hz: loop bandwidth once settled, hertz, positive.

        Raises:
            InputError: if either is not a positive finite number.
        """
        if not (math.isfinite(rate_hz) and rate_hz > 0):
            raise InputError(f"rate {rate_hz!r}: must be a positive number of hertz")
        if not (math.isfinite(bandwidth_hz) and bandwidth_hz > 0):
            raise InputError(f"bandwidth {bandwidth_hz!r}: must be a positive number of hertz")
        self.relocks = 0
        self._nominal = 1.0 / rate_hz
        self._two_pi_b = 2.0 * math.pi * bandwidth_hz
        self._period = self._nominal  # seconds per frame, as the loop sees it
        self._frames = 0
        self._time = math.nan  # filtered time of frame `_frames`
        self._age = self._slope_age = 0
        self._off_count = 0
        self._off_sum = 0.0

    @property
    def rate_hz(self) -> float:
        """Frames per monotonic second as the loop sees them now."""
        return 1.0 / self._period

    def update(self, frames: int, now_s: float) -> None:
        """Take in one callback.

        Args:
            frames: frames handed over before this callback; never falls.
            now_s: monotonic seconds at the callback's entry.
        """
        passed = frames - self._frames
        predicted = self._time + passed * self._period
        error = now_s - predicted
        block_s = passed * self._nominal
        if not abs(error) <= 0.25 + 2.0 * block_s:  # also the first callback, where it is nan
            self._lock(frames, now_s)
            return
        # A dropout shifts every later callback by at least most of a block; noise does not.
        limit = 0.6 * block_s + 0.0005
        if abs(error) > limit:
            if self._off_count and (error > 0) != (self._off_sum > 0):
                self._off_count, self._off_sum = 0, 0.0
            self._off_count += 1
            self._off_sum += error
            if self._off_count >= _RELOCK_AFTER:
                self._lock(frames, predicted + self._off_sum / self._off_count)
                return
            error = 0.0  # until it is known which it is, coast
        else:
            self._off_count, self._off_sum = 0, 0.0
        self._age += 1
        self._slope_age += 1
        omega = self._omega(block_s, self._age)
        self._time = predicted + math.sqrt(2.0) * omega * error  # b = sqrt(2) omega
        self._frames = frames
        if passed > 0:
            omega = self._omega(block_s, self._slope_age)
            period = self._period + omega * omega * error / passed  # c = omega^2
            low, high = (1 - _MAX_DRIFT) * self._nominal, (1 + _MAX_DRIFT) * self._nominal
            self._period = min(max(period, low), high)

    def frame_at(self, stamp_s: float) -> float:
        """Frame that was at the stream's head at a monotonic time.

        Args:
            stamp_s: monotonic seconds, of the same clock that `update` is fed from.

        Returns:
            Frames since the stream began, with a fraction; add one block to play at.

        Raises:
            RuntimeError: if no callback has been taken in yet.
        """
        if not self._time == self._time:  # nan: nothing to map to
            raise RuntimeError("the clock has not seen a callback yet")
        return self._frames + (stamp_s - self._time) / self._period

    def _omega(self, block_s: float, age: int) -> float:
        """Of the loop, omega = 2 pi B T, and more while the loop is young."""
        return max(self._two_pi_b * block_s, 2.8 / age)

    def _lock(self, frames: int, time_s: float) -> None:
        """Start the line anew at a point; a dropout has not changed the slope that was learnt."""
        if self._time == self._time:
            self.relocks += 1
        self._frames, self._time = frames, time_s
        self._age = _START_AGE
        self._slope_age = max(self._slope_age, _START_AGE)
        self._off_count, self._off_sum = 0, 0.0
