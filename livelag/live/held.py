"""What a MIDI input has left down, and how to let go of it when the input is gone."""

from __future__ import annotations

from dataclasses import dataclass, field

import mido


@dataclass
class Held:
    """What a port has left down: its notes, pedals and bend, by channel."""

    notes: set[tuple[int, int]] = field(default_factory=set)
    pedals: set[tuple[int, int]] = field(default_factory=set)
    bends: set[int] = field(default_factory=set)

    def follow(self, message: mido.Message) -> None:
        """Note what a message puts down or lets go."""
        kind, channel = message.type, message.channel
        if kind == "note_on" and message.velocity:
            self.notes.add((channel, message.note))
        elif kind in ("note_on", "note_off"):
            self.notes.discard((channel, message.note))
        elif kind == "control_change" and message.control in (64, 66):
            key = (channel, message.control)
            (self.pedals.add if message.value >= 64 else self.pedals.discard)(key)
        elif kind == "pitchwheel":
            (self.bends.add if message.pitch else self.bends.discard)(channel)

    def releases(self) -> list[mido.Message]:
        """Messages that let go of everything: pedals first, or they would hold the notes."""
        message = mido.Message
        return [
            *(
                message("control_change", channel=c, control=n, value=0)
                for c, n in sorted(self.pedals)
            ),
            *(message("note_off", channel=c, note=n) for c, n in sorted(self.notes)),
            *(message("pitchwheel", channel=c, pitch=0) for c in sorted(self.bends)),
        ]
