"""Events waiting for their frame: the callback's own queue, in order of time."""

from __future__ import annotations

import heapq
from typing import Any

from livelag.sound.parameters import Change
from livelag.sound.patch import Event

COLLAPSE_S = 0.001
_CONTINUOUS = frozenset({"control_change", "pitchwheel"})
# Controllers that must never be thinned out: pedals, portamento, and the channel modes.
_SWITCHES = frozenset({64, 65, 66, 84, *range(120, 128)})


class Schedule:
    """A heap of events by frame; events of one frame keep the order they came in.

    Moves of one controller, or of the bend, that crowd within a millisecond collapse into the
    last, so that a flood of them cannot use up the callback's time.
    """

    def __init__(self, rate_hz: float) -> None:
        self._collapse_frames = COLLAPSE_S * rate_hz
        self._heap: list[tuple[int, int, list[Any]]] = []
        self._count = 0
        self._latest: dict[tuple[str, int], tuple[int, list[Any]]] = {}

    def __len__(self) -> int:
        return len(self._heap)

    def add(self, frame: int, event: Event) -> None:
        """Put an event in at a frame."""
        slot: list[Any] = [event]
        key = _continuous_key(event)
        if key is not None:
            before = self._latest.get(key)
            if before is not None and 0 <= frame - before[0] < self._collapse_frames:
                before[1][0] = None
            self._latest[key] = (frame, slot)
        heapq.heappush(self._heap, (frame, self._count, slot))
        self._count += 1

    def take(self, start: int, stop: int) -> list[tuple[int, Event]]:
        """Events before ``stop``, as (frame after ``start``, event); late ones come at 0."""
        taken = []
        while self._heap and self._heap[0][0] < stop:
            frame, _, slot = heapq.heappop(self._heap)
            if slot[0] is not None:
                taken.append((max(0, frame - start), slot[0]))
            slot[0] = None  # what has been played cannot be collapsed any more
        return taken

    def clear(self) -> None:
        """Forget everything that waits."""
        self._heap.clear()
        self._latest.clear()


def _continuous_key(event: Event) -> tuple[str, int] | None:
    if isinstance(event, Change) or event.type not in _CONTINUOUS:
        return None
    if event.type == "pitchwheel":
        return "pitchwheel", 0
    return None if event.control in _SWITCHES else ("control_change", event.control)
