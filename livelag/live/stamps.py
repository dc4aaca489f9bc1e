"""When a message arrived, although it was fetched a little later.

RtMidi notes on its own thread how long after the one before each message came, and keeps it in
a queue of its own. Summed up, these deltas are a clock with an unknown start; the smallest lag
ever seen between that clock and ours is that start, because a message can be fetched late but
never early. Deltas can be wrong: what they say is only believed within bounds.
"""

from __future__ import annotations

#: Messages are fetched every millisecond; so many in a row, all later than this, mean that
#: the library's clock is wrong.
_TRUST_S = 0.003
_DOUBTS = 8
#: A single message is never fetched later than this.
_NEVER_S = 0.25


class Stamper:
    """Turns the deltas of one port's messages into stamps of the monotonic clock."""

    def __init__(self, drift: float) -> None:
        """Start with nothing known.

        Args:
            drift: how fast the library's clock and ours may part, seconds per second, 0 or more.
        """
        self._drift = drift
        self._source_s = 0.0
        self._fetched_s = float("nan")
        self._offset_s = float("inf")
        self._doubts = 0
        self._least_doubted_s = float("inf")

    def stamp(self, delta_s: float, now_s: float) -> float:
        """Monotonic seconds at which a message arrived; never after `now_s`.

        Args:
            delta_s: seconds since the port's previous message, as the library says; any number.
            now_s: monotonic seconds now, when the message was fetched.
        """
        passed_s = now_s - self._fetched_s
        self._fetched_s = now_s
        if not 0.0 <= delta_s <= passed_s + _NEVER_S:  # nan, or the first message
            delta_s = max(passed_s, 0.0) if passed_s == passed_s else 0.0
        self._source_s += delta_s
        lag_s = now_s - self._source_s
        self._offset_s = min(self._offset_s + self._drift * delta_s, lag_s)
        late_s = lag_s - self._offset_s
        if late_s <= _TRUST_S:
            self._doubts = 0
        else:
            least = min(self._least_doubted_s, lag_s) if self._doubts else lag_s
            self._doubts, self._least_doubted_s = self._doubts + 1, least
            if late_s > _NEVER_S or self._doubts >= _DOUBTS:
                self._offset_s, self._doubts = least, 0
        return min(self._source_s + self._offset_s, now_s)  # rounding aside, the former
