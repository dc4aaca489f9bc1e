"""The queue between the MIDI threads and the audio callback."""

import threading

import mido
import pytest

from livelag.live.arrivals import Arrival, ArrivalQueue, is_release


def on(note, velocity=64, port="keys"):
    return Arrival(0.0, mido.Message("note_on", note=note, velocity=velocity), port)


def off(note, port="keys"):
    return Arrival(0.0, mido.Message("note_off", note=note), port)


def control(number, value, port="keys"):
    return Arrival(0.0, mido.Message("control_change", control=number, value=value), port)


@pytest.mark.parametrize(
    ("arrival", "expected"),
    [
        (on(60), False),
        (on(60, velocity=0), True),
        (off(60), True),
        (control(64, 63), True),
        (control(64, 64), False),
        (control(66, 0), True),
        (control(120, 0), True),
        (control(121, 0), True),
        (control(122, 0), False),
        (control(123, 0), True),
        (control(5, 0), False),
        (Arrival(0.0, mido.Message("pitchwheel", pitch=0), "keys"), False),
    ],
)
def test_what_counts_as_a_release(arrival, expected):
    assert is_release(arrival.message) is expected


def test_messages_come_out_in_the_order_they_went_in():
    queue = ArrivalQueue()
    sent = [on(60), control(5, 3), off(60), on(61)]
    for arrival in sent:
        assert queue.put(arrival)
    assert queue.take(3) == sent[:3]
    assert queue.take() == sent[3:]
    assert queue.take() == []


def test_a_full_queue_drops_what_starts_and_keeps_what_ends():
    queue = ArrivalQueue(limit=4)
    for note in range(10):
        queue.put(on(note))
        queue.put(off(note))
    taken = queue.take()
    ended = {a.message.note for a in taken if a.message.type == "note_off"}
    assert ended == set(range(10))
    assert queue.dropped == 8


def test_a_queue_nobody_reads_stays_bounded():
    queue = ArrivalQueue(limit=100)
    for turn in range(10_000):
        queue.put(on(turn % 128))
        queue.put(off(turn % 128))
        queue.put(control(64, turn % 128))
    assert len(queue) <= 100 + 128 + 1
    assert queue.dropped > 10_000


def test_the_last_word_on_a_note_is_its_release_after_an_overflow():
    queue = ArrivalQueue(limit=2)
    for arrival in [on(1), on(2), off(1), on(1), off(1), on(2), off(2)]:
        queue.put(arrival)
    last = {}
    for arrival in queue.take():
        last[arrival.message.note] = arrival.message.type
    assert last == {1: "note_off", 2: "note_off"}
    # caught up: notes start again
    assert queue.put(on(1))
    assert [a.message.type for a in queue.take()] == ["note_on"]


def test_ports_are_owed_their_releases_separately():
    queue = ArrivalQueue(limit=1)
    queue.put(on(1))
    queue.put(off(1, port="left"))
    queue.put(off(1, port="right"))
    queue.put(off(1, port="right"))
    assert [a.port for a in queue.take()] == ["keys", "left", "right"]


def test_a_note_does_not_start_before_the_reader_has_caught_up():
    queue = ArrivalQueue(limit=2)
    for arrival in [on(1), on(2), off(1)]:
        queue.put(arrival)
    queue.take(2)
    assert not queue.put(on(1))
    assert [a.message.type for a in queue.take()] == ["note_off"]
    assert queue.put(on(1))


def test_writers_on_many_threads_lose_no_release():
    queue, ports = ArrivalQueue(limit=64), [f"port {n}" for n in range(4)]
    state = {}

    def write(port):
        for turn in range(3000):
            queue.put(on(turn % 50, port=port))
            queue.put(off(turn % 50, port=port))

    writers = [threading.Thread(target=write, args=(port,)) for port in ports]
    for writer in writers:
        writer.start()
    count = 0
    while any(writer.is_alive() for writer in writers) or len(queue):
        for arrival in queue.take(32):
            state[arrival.port, arrival.message.note] = arrival.message.type
            count += 1
    assert count > 400
    assert queue.dropped > 0
    assert set(state.values()) == {"note_off"}
