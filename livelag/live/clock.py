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
#: So many callbacks in a row, all off to the same side by most of a block, are a dropout.
_DROPOUT_AFTER = 4
#: So many, all off to the same side by more than the usual noise, are a sound system that began
#: its time anew after a stall: that shifts it by any part of a block.
_SHIFT_AFTER = 16
_NOISE_OVER_S = 1.0


class _Row:
    """Errors in a row that are all off to the same side by more than a limit."""

    def __init__(self) -> None:
        self.count = 0
        self._sum_s = 0.0

    @property
    def mean_s(self) -> float:
        return self._sum_s / self.count

    def add(self, error_s: float, limit_s: float) -> int:
        """Take in an error; how long the row is with it, 0 if it is within the limit."""
        if abs(error_s) <= limit_s:
            self.clear()
            return 0
        if (error_s > 0) != (self._sum_s > 0):
            self.clear()
        self.count += 1
        self._sum_s += error_s
        return self.count

    def clear(self) -> None:
        self.count, self._sum_s = 0, 0.0


class DelayLockedClock:
    """Second-order loop from monotonic seconds to stream frames.

    Feed it once per callback, from the callback, and ask it from the same thread. It uses
    plain floats and allocates nothing that grows.

    Attributes:
        relocks: how often the loop had to jump, for a dropout, a pause or a shift.
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
        self._noise_s = 0.0  # mean size of the errors of late
        self._dropout, self._shift = _Row(), _Row()

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
        off = self._dropout.add(error, 0.6 * block_s + 0.0005)
        if off >= _DROPOUT_AFTER:
            self._lock(frames, predicted + self._dropout.mean_s)
            return
        usual_s = 1.5 * self._noise_s + 2e-5
        if self._shift.add(error, usual_s) >= _SHIFT_AFTER:
            self._lock(frames, predicted + self._shift.mean_s)
            return
        if off:
            error = 0.0  # until it is known which it is, coast
        else:
            self._noise_s += min(block_s / _NOISE_OVER_S, 1 / 64) * (abs(error) - self._noise_s)
            # A callback that is very late says little, once it is known what is usual.
            if self._age * block_s > _NOISE_OVER_S:
                error = min(max(error, -usual_s), usual_s)
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
        self._dropout.clear()
        self._shift.clear()
