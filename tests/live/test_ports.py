"""MIDI inputs on a real server, with a second process at the keys."""

import time

import mido
import numpy as np
import pytest
from jack_server import BACKEND

from livelag.errors import DeviceError, UnknownNameError
from livelag.live.ports import MidiInputs, list_inputs

pytest.importorskip("rtmidi")

ON, OFF = 0x90, 0x80


def until(condition, timeout_s=5.0):
    end = time.perf_counter() + timeout_s
    while time.perf_counter() < end:
        if condition():
            return True
        time.sleep(0.01)
    return False


def collect(inputs, count, timeout_s=5.0):
    """What is taken until there are `count` messages, and a little longer for any too many."""
    taken = []
    until(lambda: taken.extend(inputs.take()) or len(taken) >= count, timeout_s)
    time.sleep(0.05)
    return taken + inputs.take()


def shown(arrivals):
    return [" ".join(str(a.message).split()[:-1]) for a in arrivals]


def test_everything_played_arrives_in_order_and_knows_its_port(jack_server, jack_peer):
    server = jack_server()
    played = [[480 * n, [ON if n % 2 == 0 else OFF, 60 + n // 2, 100]] for n in range(40)]
    played.insert(7, [480 * 6, [0xF8]])  # clock is left out
    peer = jack_peer(server, name="keys", events=played)
    with MidiInputs(backend=BACKEND) as inputs:
        assert inputs.connected == ("keys:out",)
        peer.go()
        report = peer.done()
        got = collect(inputs, 40)
        assert inputs.received == len(got)
        assert inputs.fault is None
    # In order, nothing made up, and nothing missing but what a busy server loses with a cycle.
    sent = iter([bytes(data) for _, data in played if data != [0xF8]])
    assert all(bytes(a.message.bytes()) in sent for a in got)
    assert 40 - len(got) <= report["xruns"] + report["lost_blocks"]
    assert {a.port for a in got} == {"keys:out"}
    assert all(isinstance(a.message, mido.Message) for a in got)


@pytest.mark.parametrize("block", [64, 128, 512])
def test_stamps_add_less_than_a_tenth_of_a_millisecond(jack_server, jack_peer, block):
    # JACK hands messages over once a cycle, when the sender is done with it: all later than that
    # is the server's waking of the next client and what we add. The first notes are left out:
    # the stamps settle on them.
    server = jack_server(block=block)
    for turn in range(3):  # others use the machine too
        if (spread_s := _spread_of_stamps(server, jack_peer, turn)) < 0.0001:
            break
    assert spread_s < 0.0001


def _spread_of_stamps(server, jack_peer, turn):
    """What 90 % of the stamps stay within, around their median, seconds."""
    # A note's number and velocity tell which it is, as a busy server loses some.
    step = -(-480 // server.block) * server.block
    events = [[step * n, [ON, n % 128, 1 + n // 128]] for n in range(160)]
    peer = jack_peer(server, name=f"keys {turn}", events=events)
    with MidiInputs([f"keys {turn}"], backend=BACKEND) as inputs:
        peer.go()
        report = peer.done()
        got = collect(inputs, 160, timeout_s=0.5)
    stamps = {128 * (a.message.velocity - 1) + a.message.note: a.stamp_s for a in got}
    late = np.array([stamps[n] - e[1] for n, e in enumerate(report["events"]) if n in stamps])
    if len(late) < 110:
        return np.inf
    late = late[40:] - np.median(late[40:])
    return np.percentile(np.abs(late), 90)


def test_a_virtual_input_can_be_played(jack_server, jack_peer):
    server = jack_server()
    with MidiInputs(virtual_name="keys in", backend=BACKEND) as inputs:
        assert inputs.connected == ("keys in",)
        peer = jack_peer(
            server, name="keys", events=[[0, [ON, 60, 9]]], send_to=["livelag:keys in"]
        )
        peer.go()
        peer.done()
        got = collect(inputs, 1)
    assert "keys in" in {a.port for a in got}


def test_a_killed_peer_releases_its_notes_and_comes_back_by_name(jack_server, jack_peer):
    server = jack_server()
    held = [[0, [ON, 60, 9]], [480, [ON, 64, 9]], [960, [OFF, 60, 0]], [1440, [0xB0, 64, 127]]]
    held.append([1920, [0xE0, 0, 0]])
    peer = jack_peer(server, name="keys", events=held)
    with MidiInputs(["KEYS"], backend=BACKEND) as inputs:
        peer.go()
        peer.done()
        assert len(collect(inputs, 5)) == 5
        peer.kill()
        assert until(lambda: inputs.lost == ("keys:out",))
        assert inputs.connected == ()
        released = collect(inputs, 3)
        assert shown(released) == [
            "control_change channel=0 control=64 value=0",
            "note_off channel=0 note=64 velocity=64",
            "pitchwheel channel=0 pitch=0",
        ]
        again = jack_peer(server, name="keys", events=[[0, [ON, 72, 9]]])
        jack_peer(server, name="other")
        assert until(lambda: inputs.connected == ("keys:out",))
        assert inputs.lost == ()
        again.go()
        again.done()
        assert shown(collect(inputs, 1)) == ["note_on channel=0 note=72 velocity=9"]
        assert inputs.connected == ("keys:out",)  # the other one was not asked for


def test_ports_that_appear_later_are_opened_when_all_are_wanted(jack_server, jack_peer):
    server = jack_server()
    with MidiInputs(backend=BACKEND) as inputs:
        assert inputs.connected == ()
        jack_peer(server, name="first")
        jack_peer(server, name="second")
        assert until(lambda: set(inputs.connected) == {"first:out", "second:out"})


def test_a_whole_name_beats_a_part_of_one(jack_server, jack_peer):
    server = jack_server()
    for name in ("keys", "keys two", "pads"):
        jack_peer(server, name=name)
    for asked, meant in [
        (["keys:out"], {"keys:out"}),
        (["keys"], {"keys:out", "keys two:out"}),
        (["PADS", "two"], {"pads:out", "keys two:out"}),
    ]:
        with MidiInputs(asked, backend=BACKEND, look_every_s=None) as inputs:
            assert set(inputs.connected) == meant
    with pytest.raises(UnknownNameError, match=r"'drums'.*keys:out.*pads:out"):
        MidiInputs(["drums"], backend=BACKEND)
    assert set(list_inputs(BACKEND)) == {"keys:out", "keys two:out", "pads:out"}


def test_a_flood_neither_blocks_nor_loses_a_note_off(jack_server, jack_peer):
    server = jack_server(block=128)
    cycle = []
    for n in range(40, 80):
        cycle += [[ON, n, 9], [0xB0, 1, n], [OFF, n, 0]]
    peer = jack_peer(server, name="flood", burst=[27, cycle], frames=48000 * 2)
    last, slowest, count = {}, 0.0, 0
    with MidiInputs(backend=BACKEND) as inputs:
        peer.go()
        time.sleep(0.6)  # nobody takes anything: the queue must overflow
        end = time.perf_counter() + 2.0
        while time.perf_counter() < end:
            start = time.perf_counter()
            taken = inputs.take(256)
            slowest = max(slowest, time.perf_counter() - start)
            count += len(taken)
            for arrival in taken:
                if arrival.message.type.startswith("note"):
                    last[arrival.message.note] = arrival.message.type
            time.sleep(0.001)
        report = peer.done()
        taken = inputs.take()
        assert inputs.dropped > 1000
        assert inputs.received > 0.9 * report["burst_events"]
    assert report["burst_events"] > 2 * 9500
    assert count > 9500
    assert slowest < 0.1
    # The flood may end in the middle of a note; a cycle the server lost may have held a release.
    hanging = [note for note, kind in last.items() if kind == "note_on"]
    assert len(hanging) <= 1 + report["xruns"] + report["lost_blocks"]
    assert len(last) == 40


def test_inputs_open_and_close_under_a_flood(jack_server, jack_peer):
    server = jack_server(block=128)
    peer = jack_peer(
        server, name="flood", burst=[27, [[ON, 60, 9], [OFF, 60, 0]]], frames=48000 * 60
    )
    peer.go()
    received = 0
    for _ in range(15):
        with MidiInputs(backend=BACKEND) as inputs:
            until(lambda i=inputs: i.received)
            received += inputs.received
    peer.kill()
    assert received > 15


def test_a_server_that_dies_takes_nothing_down_with_it(jack_server, jack_peer):
    # The library goes on listing what was there; that the sound is gone is the stream's to say.
    server = jack_server()
    peer = jack_peer(server, name="keys", events=[[0, [ON, 60, 9]]])
    inputs = MidiInputs(backend=BACKEND)
    peer.go()
    peer.done()
    assert len(collect(inputs, 1)) == 1
    server.crash()
    time.sleep(0.6)
    assert inputs.take() == []
    start = time.perf_counter()
    inputs.close()
    assert time.perf_counter() - start < 2.0
    assert inputs.connected == ()


def test_no_server_is_one_line(jack_server, monkeypatch, capfd):
    jack_server()
    monkeypatch.setenv("JACK_DEFAULT_SERVER", "livelag-nobody")
    with pytest.raises(
        DeviceError, match=r"UNIX_JACK does not start.*server not running"
    ) as caught:
        list_inputs(BACKEND)
    assert "\n" not in str(caught.value)
    assert capfd.readouterr().err == ""
