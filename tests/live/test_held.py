"""What a port has left down."""

import mido

from livelag.live.held import Held


def test_what_is_held_is_followed():
    held = Held()
    for message in [
        mido.Message("note_on", note=60, channel=2),
        mido.Message("note_on", note=61, channel=2),
        mido.Message("note_on", note=60, velocity=0, channel=2),
        mido.Message("control_change", control=66, value=64),
        mido.Message("control_change", control=66, value=63),
        mido.Message("pitchwheel", pitch=5),
        mido.Message("pitchwheel", pitch=0),
    ]:
        held.follow(message)
    assert held.releases() == [mido.Message("note_off", note=61, channel=2)]
