import io
from dataclasses import replace

import pytest
from hypothesis import HealthCheck, given, settings
from panel_snapshots import any_snapshots, played_snapshot

from livelag.live.plain import PlainPrinter


class Clock:
    def __init__(self):
        self.now = 100.0

    def __call__(self):
        return self.now


@pytest.fixture(scope="module")
def played():
    return played_snapshot(2.0)


@pytest.fixture
def printed(played):
    """A printer that has said the first things, its stream since, and its clock."""
    stream, clock = io.StringIO(), Clock()
    printer = PlainPrinter(stream, clock)
    printer.show(played)
    first = stream.getvalue()
    stream.truncate(0)
    stream.seek(0)
    clock.now += 10.0
    return printer, stream, clock, first


def test_begins_with_where_everything_stands(printed, played):
    lines = printed[3].splitlines()
    assert lines[0] == f"stage {played.stage_title}"
    assert "range fast, 1 of 2" in lines
    assert any(x.startswith("pot 0.420, time constant 65.") and "kilohms" in x for x in lines)
    assert "glide on" in lines
    assert "note G4" in lines
    assert "saw at -24 dB" in lines
    assert "MIDI inputs Workshop keys, Foot pedal" in lines
    assert lines[-1] == "A stored: fast, 0.42"


@pytest.mark.parametrize(
    ("changes", "line"),
    [
        ({"range_index": 1}, "range slow, 2 of 2"),
        ({"glide_on": False}, "glide off"),
        ({"note": 60}, "note C4"),
        ({"gate": False}, "note G4 released"),
        ({"recording": "on", "take_name": "take-1.wav"}, "take running take-1.wav"),
        ({"recording": "armed"}, "take armed"),
        ({"dropouts": 3}, "dropouts 3"),
        ({"take_drops": 2}, "take lost 2 frames"),
        ({"message": "B stored"}, "B stored"),
        ({"shortest_s": 0.0021}, "mark fastest useful 2.10 ms"),
        ({"handover_s": 0.08}, "mark hand-over 80.0 ms"),
        ({"longest_s": 1.9}, "mark slowest useful 1.90 s"),
        ({"waveform": "sine"}, "sine at -24 dB"),
        ({"octave": -1}, "typed octave -1"),
        ({"midi_ports": ()}, "no MIDI input"),
        ({"slot_b": "slow 0.8"}, "stored B: slow 0.8"),
        ({"message": "\x1b[31mred"}, "·[31mred"),
    ],
)
def test_one_line_for_each_change(printed, played, changes, line):
    printer, stream, clock, _ = printed
    changed = replace(played, **changes)
    printer.show(changed)
    printer.show(changed)
    clock.now += 5.0
    printer.show(changed)
    assert stream.getvalue() == f"{line}\n"


def test_what_moves_by_itself_is_not_worth_a_line(printed, played):
    printer, stream, _, _ = printed
    printer.show(replace(played, pitch_hz=1.0, cents_to_go=9.0, load=0.5, peak_dbfs=-3.0, take_s=4))
    assert stream.getvalue() == ""


def test_a_turning_pot_gives_four_lines_a_second_and_the_last_place(printed, played):
    printer, stream, clock, _ = printed
    for step in range(1, 31):  # two seconds at 15 snapshots a second
        printer.show(replace(played, rotation=0.42 + step / 100))
        clock.now += 1 / 15
    lines = stream.getvalue().splitlines()
    assert 6 <= len(lines) <= 9
    clock.now += 0.25
    printer.show(replace(played, rotation=0.72))
    assert stream.getvalue().splitlines()[-1].startswith("pot 0.720,")


def test_closing_says_what_still_waits(printed, played):
    printer, stream, _, _ = printed
    printer.show(replace(played, rotation=0.5))
    printer.show(replace(played, rotation=0.6))
    assert stream.getvalue().count("pot") == 1
    printer.close()
    assert stream.getvalue().splitlines()[-1].startswith("pot 0.600,")
    before = stream.getvalue()
    printer.close()
    assert stream.getvalue() == before


def test_nothing_to_close_before_the_first_snapshot():
    stream = io.StringIO()
    PlainPrinter(stream).close()
    assert stream.getvalue() == ""


def test_a_stream_that_cannot_write_every_letter_still_gets_the_line(played):
    raw = io.BytesIO()
    with io.TextIOWrapper(raw, encoding="ascii") as stream:
        PlainPrinter(stream).show(replace(played, message="Überall 鍵"))
        assert b"?berall ?\n" in raw.getvalue()


@settings(max_examples=60, deadline=None, suppress_health_check=list(HealthCheck))
@given(any_snapshots())
def test_any_snapshot_is_plain_lines(snapshot):
    stream = io.StringIO()
    PlainPrinter(stream, Clock()).show(snapshot)
    assert all(line.isprintable() and line for line in stream.getvalue()[:-1].split("\n"))
