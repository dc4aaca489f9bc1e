"""A phrase or song played round and round, scheduled a little ahead of the sound."""

from __future__ import annotations

from collections.abc import Sequence

from livelag.live.engine import Engine
from livelag.notes.midi_file import TimedMessage

AHEAD_S = 0.5
_LEAST_ROUND_S = 0.1


class Loop:
    """Feeds an engine from the session's thread; messages still play at exact frames."""

    def __init__(
        self, messages: Sequence[TimedMessage], duration_s: float, start_frame: int, rate_hz: float
    ) -> None:
        """Prepare the messages of one round.

        Args:
            messages: in order of time.
            duration_s: length of a round; a moment at least.
            start_frame: frame of the stream at which the first round begins.
            rate_hz: frames per second.
        """
        self._round_frames = round(max(duration_s, _LEAST_ROUND_S) * rate_hz)
        self._messages = [(round(t.time_s * rate_hz), t.message) for t in messages]
        self._ahead = round(AHEAD_S * rate_hz)
        self._start = start_frame
        self._next = 0

    def feed(self, engine: Engine) -> None:
        """Schedule what is due within the next half second."""
        horizon = engine.meters.frames + self._ahead
        while self._messages:
            if self._next == len(self._messages):
                self._next = 0
                self._start += self._round_frames
            offset, message = self._messages[self._next]
            if self._start + offset >= horizon:
                return
            engine.post_at(self._start + offset, message)
            self._next += 1
