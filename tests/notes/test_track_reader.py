from __future__ import annotations

from fractions import Fraction

import pytest

from livelag.errors import MidiFileError
from livelag.notes.track_reader import read_tracks

NOTE = b"\x00\x90\x3c\x40\x60\x80\x3c\x40"
END = b"\x00\xff\x2f\x00"


def chunk(kind: bytes, body: bytes) -> bytes:
    return kind + len(body).to_bytes(4, "big") + body


def file_of(
    *tracks: bytes, kind: int = 1, division: int = 96, promised: int | None = None
) -> bytes:
    count = len(tracks) if promised is None else promised
    header = b"".join(number.to_bytes(2, "big") for number in (kind, count, division))
    return chunk(b"MThd", header) + b"".join(chunk(b"MTrk", track) for track in tracks)


def only_track(body: bytes):
    return read_tracks(file_of(body), "a.mid").tracks[0]


def test_events_come_at_their_ticks():
    track = only_track(b"\x81\x00\x90\x3c\x40" + b"\x10\xc1\x07" + b"\x05" + END[1:])
    assert [(tick, message.type) for tick, message in track.events] == [
        (128, "note_on"),
        (144, "program_change"),
    ]
    assert (track.end_tick, track.ended) == (149, True)


def test_the_time_before_an_unknown_meta_event_counts():
    track = only_track(b"\x60\xff\x60\x02ab" + NOTE + END)
    assert track.events[0][0] == 96


def test_an_odd_key_signature_does_not_matter():
    assert len(only_track(b"\x00\xff\x59\x02\x0b\x07" + NOTE + END).events) == 2


def test_running_status_goes_on_past_meta_and_sysex():
    body = b"\x00\x90\x3c\x40\x00\xff\x01\x01a\x01\x3e\x40\x00\xf0\x02\x01\xf7\x01\x40\x40" + END
    assert [message.note for _, message in only_track(body).events] == [60, 62, 64]


def test_unknown_chunks_are_passed_over():
    whole = file_of(NOTE + END)
    with_other = whole[:14] + chunk(b"XFIH", b"whatever") + whole[14:]
    assert read_tracks(with_other, "a.mid").tracks == read_tracks(whole, "a.mid").tracks


def test_a_longer_header_is_read():
    whole = file_of(NOTE + END)
    longer = b"MThd\x00\x00\x00\x08" + whole[8:14] + b"\x00\x00" + whole[14:]
    assert read_tracks(longer, "a.mid").tracks == read_tracks(whole, "a.mid").tracks


def test_the_name_is_one_printable_line():
    assert only_track(b"\x00\xff\x03\x06a\nb\x07\xe9 " + NOTE + END).name == "a b é"


def test_what_can_be_played_all_the_same_is_warned_about():
    content = read_tracks(file_of(NOTE, NOTE + END, promised=1) + b"rest", "a.mid")
    assert content.warnings == (
        "4 bytes after the last track were passed over",
        "track 1 has no end-of-track event; played to its last event",
    )
    content = read_tracks(file_of(NOTE + END, NOTE + END, promised=1), "a.mid")
    assert content.warnings == ("the header promises 1 tracks; all 2 are played",)


@pytest.mark.parametrize(
    ("division", "ticks_per_second"),
    [
        (0xE828, Fraction(24 * 40)),
        (0xE728, Fraction(25 * 40)),
        (0xE350, Fraction(30_000 * 80, 1001)),
        (0xE201, Fraction(30)),
    ],
)
def test_time_code_divisions(division, ticks_per_second):
    content = read_tracks(file_of(NOTE + END, division=division), "a.mid")
    assert (content.ticks_per_quarter, content.ticks_per_second) == (0, ticks_per_second)


@pytest.mark.parametrize(
    ("data", "said"),
    [
        (b"", "a.mid: is empty"),
        (b"RIFF....", "starts with b'RIFF', not with b'MThd'"),
        (b"MThd\x00\x00", "cut off inside its header, at byte 6"),
        (b"MThd\x00\x00\x00\x04\x00\x00\x00\x01\x00\x60", "holds 4 bytes; at least 6"),
        (file_of(NOTE + END, kind=2), "format 2 .separate patterns.; save it as format 0 or 1"),
        (file_of(NOTE + END, kind=7), "is format 7; formats 0 and 1"),
        (file_of(NOTE + END, division=0), "division is 0 ticks a quarter"),
        (file_of(NOTE + END, division=0xE700), "division is 0 ticks a frame"),
        (file_of(NOTE + END, division=0x9C28), "division is 100 frames a second; 24, 25, 29"),
        (file_of(NOTE + END, promised=2), "promises 2 tracks, 1 are there"),
        (
            file_of(NOTE + END)[:-3],
            "cut off at byte 31, in track 1 of 1; its chunk ends at byte 34",
        ),
        (file_of(NOTE[:-1]), "track 1, byte 29: the track ends in the middle of an event"),
        (file_of(b"\x00\x90\x3c\x80" + END), "byte 26: data byte 0x80 is over 127"),
        (file_of(b"\x00\x3c\x40" + END), "data byte 0x3C comes before any status"),
        (file_of(b"\x00\xf8" + END), "status byte 0xF8 has no place in a file"),
        (file_of(b"\xff\xff\xff\xff\x7f" + NOTE), "number runs over four bytes"),
        (file_of(b"\x00\xff\x51\x03\x00\x00\x00" + END), "tempo '00 00 00' is not three bytes"),
        (file_of(b"\x00\xff\x51\x00" + END), "tempo 'without a value'"),
        (file_of(b"\x00\xff\x01\xff\xff\xff\x7f" + END), "ends in the middle of an event"),
    ],
)
def test_damage_is_refused_in_one_line(data, said):
    with pytest.raises(MidiFileError, match=said) as caught:
        read_tracks(data, "a.mid")
    assert str(caught.value).startswith("a.mid: ")
    assert "\n" not in str(caught.value)
