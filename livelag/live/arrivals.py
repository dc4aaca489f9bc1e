"""Messages on their way from the MIDI threads to the audio callback: stamped, bounded, in order."""

from __future__ import annotations

from collections import deque
from typing import NamedTuple

import mido

#: About a tenth of a second of the worst flood; the audio callback empties it every block.
LIMIT = 1024

_PEDALS = frozenset({64, 66})
_MODE_RELEASES = frozenset({120, 121, 123, 124, 125, 126, 127})


class Arrival(NamedTuple):
    """A message, when it came and through which port.

    Attributes:
        stamp_s: monotonic seconds at arrival.
        message: a channel message.
        port: name of the port without the numbers the system adds to it.
    """

    stamp_s: float
    message: mido.Message
    port: str


def is_release(message: mido.Message) -> bool:
    """Whether losing the message could leave a note hanging.

    That is a note-off, a note-on with velocity 0, a hold or sostenuto pedal going up (below 64),
    and the channel mode messages that end notes.
    """
    kind = message.type
    if kind == "note_on":
        return bool(message.velocity == 0)
    if kind == "control_change":
        number = message.control
        return number in _MODE_RELEASES or (number in _PEDALS and message.value < 64)
    return bool(kind == "note_off")


class ArrivalQueue:
    """First in, first out, many writers, one reader, nobody waits.

    Up to `limit` messages are kept as they come. Past that, until the reader has caught up,
    only releases are kept (see `is_release`), one per note or controller of each port; anything
    else is dropped and counted. Notes cannot start meanwhile, so one release each is enough and
    the queue stays bounded.

    Attributes:
        dropped: messages lost so far; never a release.
    """

    def __init__(self, limit: int = LIMIT) -> None:
        """Make an empty queue that keeps `limit` messages (1 or more) before it drops."""
        self.dropped = 0
        self._limit = limit
        self._items: deque[Arrival] = deque()
        self._full = False
        self._owed: set[tuple[str, int, str, int]] = set()

    def __len__(self) -> int:
        return len(self._items)

    def put(self, arrival: Arrival) -> bool:
        """Add a message from any thread; return whether it was kept."""
        if not self._full and len(self._items) < self._limit:
            self._items.append(arrival)
            return True
        self._full = True
        message = arrival.message
        if not is_release(message):
            self.dropped += 1
            return False
        key = (
            (arrival.port, message.channel, "control", message.control)
            if message.type == "control_change"
            else (arrival.port, message.channel, "note", message.note)
        )
        if key not in self._owed:
            self._owed.add(key)
            self._items.append(arrival)
        return True

    def take(self, most: int = LIMIT) -> list[Arrival]:
        """Up to `most` messages, oldest first; called by the one reader."""
        taken: list[Arrival] = []
        pop = self._items.popleft
        while len(taken) < most:
            try:
                taken.append(pop())
            except IndexError:
                # Only now may notes start again, or a kept release could end a newer note.
                self._owed.clear()
                self._full = False
                break
        return taken
