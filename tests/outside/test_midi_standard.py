"""The player and the file reader against MIDI 1.0, Standard MIDI Files 1.0, ISO 16 and mido."""

from __future__ import annotations

import random
from io import BytesIO

import pytest
from mido import Message, MetaMessage, MidiFile, MidiTrack

from livelag.notes.midi_file import read_midi_file
from livelag.notes.player import Player, PlayerSettings
from livelag.units import volts_to_hz


def send(player: Player, *data: int):
    """One message as it stands on the wire."""
    return player.handle(Message.from_bytes(data))


def send_all(player: Player, text: str) -> None:
    """Controllers on the first channel, written `number value, number value`."""
    for pair in text.split(","):
        send(player, 0xB0, *(int(number) for number in pair.split()))


# ISO 16: A = 440 Hz; equal temperament, 440 x 2^((n - 69)/12) (computed).
@pytest.mark.parametrize(
    ("note", "hertz"),
    [
        (0, 8.1758),
        (21, 27.5),
        (36, 65.40639),
        (48, 130.81278),
        (60, 261.62557),
        (64, 329.62756),
        (69, 440.0),
        (72, 523.25113),
        (84, 1046.50226),
        (108, 4186.00905),
        (127, 12543.85395),
    ],
)
@pytest.mark.parametrize("volts_per_octave", [1.0, 1.2])
def test_keys_have_the_pitch_of_the_equal_tempered_scale(note, hertz, volts_per_octave):
    settings = PlayerSettings(volts_per_octave=volts_per_octave, zero_volt_note=36.0)
    moment = send(Player(settings), 0x90, note, 100)
    assert volts_to_hz(moment.key_volts, 36.0, volts_per_octave) == pytest.approx(hertz, rel=1e-5)


# 83.3333 mV a semitone at 1 V an octave (computed).
def test_a_semitone_is_a_twelfth_of_a_volt():
    player = Player()
    low = send(player, 0x90, 60, 100).key_volts
    assert send(player, 0x90, 61, 100).key_volts - low == pytest.approx(0.0833333, abs=1e-7)


class TestNotes:
    # MIDI 1.0: note-on with velocity 0 is a note-off (read in renderings of the message table).
    def test_a_note_on_with_velocity_zero_is_a_note_off(self):
        player = Player()
        send(player, 0x90, 60, 100)
        assert send(player, 0x90, 60, 0).gate is False

    # MIDI 1.0: the channel is the low half of the status byte; the player hears every one.
    def test_every_channel_is_heard(self):
        player = Player()
        send(player, 0x95, 60, 100)
        assert send(player, 0x8F, 60, 0).gate is False


class TestBend:
    # MIDI 1.0: low byte first, centre 8192 = 00 40 (read).
    def test_low_byte_comes_first_and_the_centre_is_00_40(self):
        player = Player()
        send(player, 0x90, 60, 100)
        assert send(player, 0xE0, 0x00, 0x00).key_volts == pytest.approx(2.0 - 2 / 12)
        assert send(player, 0xE0, 0x00, 0x40).key_volts == 2.0
        assert send(player, 0xE0, 0x01, 0x40).key_volts == pytest.approx(2.0 + 2 / 12 / 8192)
        assert send(player, 0xE0, 0x00, 0x60).key_volts == pytest.approx(2.0 + 1 / 12)
        assert send(player, 0xE0, 0x7F, 0x7F).key_volts == pytest.approx(2.0 + 2 / 12, abs=3e-5)

    # MIDI 1.0, RPN 0: 101 and 100 choose it, 6 is semitones, 38 cents; default 2 (read).
    def test_the_range_is_registered_parameter_zero(self):
        player = Player()
        assert player.bend_range_semitones == 2.0
        send_all(player, "101 0, 100 0, 6 12, 38 50")
        assert player.bend_range_semitones == 12.5
        send(player, 0x90, 60, 100)
        assert send(player, 0xE0, 0x00, 0x00).key_volts == pytest.approx(2.0 - 12.5 / 12)
        send_all(player, "6 7")  # a coarse value resets the fine one (read)
        assert player.bend_range_semitones == 7.0

    # MIDI 1.0: 127/127 is the null parameter; data entry then means nothing (read).
    # 98 and 99 choose a non-registered parameter, so data entry is no longer the bend range (read).
    @pytest.mark.parametrize("leave", ["101 127, 100 127", "99 1", "98 8", "100 1", "101 1"])
    def test_data_entry_goes_to_the_chosen_parameter_only(self, leave):
        player = Player()
        send_all(player, f"101 0, 100 0, {leave}, 6 24, 38 3")
        assert player.bend_range_semitones == 2.0

    def test_data_entry_without_a_parameter_means_nothing(self):
        player = Player()
        send_all(player, "6 24")
        assert player.bend_range_semitones == 2.0


class TestPortamento:
    # MIDI 1.0: 5 and 37 are portamento time; a coarse value resets the fine one (read).
    def test_time_is_fourteen_bits(self):
        player = Player()
        assert send(player, 0xB0, 5, 0).rotation == 0.0
        assert send(player, 0xB0, 5, 64).rotation == pytest.approx(64 * 128 / 16256)
        assert send(player, 0xB0, 37, 127).rotation == pytest.approx((64 * 128 + 127) / 16256)
        assert send(player, 0xB0, 37, 1).rotation == pytest.approx((64 * 128 + 1) / 16256)
        assert send(player, 0xB0, 5, 64).rotation == pytest.approx(64 * 128 / 16256)
        # livelag's own choice: coarse 127 alone is the full turn, and nothing goes beyond.
        assert send(player, 0xB0, 5, 127).rotation == 1.0
        assert send(player, 0xB0, 37, 127).rotation == 1.0

    # MIDI 1.0: 65 is off from 0 to 63 and on from 64 to 127 (read).
    @pytest.mark.parametrize(("value", "is_on"), [(0, False), (63, False), (64, True), (127, True)])
    def test_switch(self, value, is_on):
        player = Player()
        send_all(player, f"65 {127 - value}, 65 {value}")
        assert player.portamento is is_on
        assert player.now.bypassed is not is_on

    # MIDI 1.0, controller 84: source key of the next note, with 65 off too (from memory).
    def test_control_gives_the_source_key_of_the_next_note_only(self):
        player = Player()
        send_all(player, "65 0, 84 60")
        moment = send(player, 0x90, 72, 100)
        assert (moment.jump_volts, moment.bypassed) == (2.0, False)
        moment = send(player, 0x90, 48, 100)
        assert (moment.jump_volts, moment.bypassed) == (None, True)


class TestChannelMode:
    # MIDI 1.0: 64 is on from 64 up (read).
    @pytest.mark.parametrize(("value", "holds"), [(63, False), (64, True)])
    def test_the_hold_pedal_switches_at_64(self, value, holds):
        player = Player()
        send_all(player, f"64 {value}")
        send(player, 0x90, 60, 100)
        send(player, 0x80, 60, 0)
        assert player.now.gate is holds

    # MIDI 1.0: 120 mutes at once, whatever the pedal does (from memory).
    def test_all_sound_off_mutes_at_once(self):
        player = Player()
        send_all(player, "64 127")
        send(player, 0x90, 60, 100)
        assert send(player, 0xB0, 120, 0).gate is False

    # MIDI 1.0: 123 acts as note-offs and respects hold; 124 to 127 imply it (from memory).
    @pytest.mark.parametrize("mode", [123, 124, 125, 126, 127])
    def test_all_notes_off_respects_the_pedal(self, mode):
        player = Player()
        send(player, 0x90, 60, 100)
        assert send(player, 0xB0, mode, 0).gate is False
        send_all(player, "64 127")
        send(player, 0x90, 60, 100)
        send(player, 0xB0, mode, 0)
        assert player.now.gate
        assert send(player, 0xB0, 64, 0).gate is False

    # Recommended practice RP-015 (read in a paraphrase): 121 resets 64 to 67, the parameter
    # numbers and the bend, and keeps the bend range. A pending 84 is then none (from memory).
    def test_reset_all_controllers(self):
        player = Player()
        send_all(player, "101 0, 100 0, 6 12, 64 127, 84 48")
        send(player, 0xE0, 0x00, 0x60)
        moment = send(player, 0xB0, 121, 0)
        assert moment.key_volts == 0.0
        assert moment.rotation is None  # portamento time is not on the list: the pot stays
        assert player.portamento is False
        assert player.bend_range_semitones == 12.0
        send_all(player, "6 3")
        assert player.bend_range_semitones == 12.0
        assert send(player, 0x90, 60, 100).jump_volts is None
        assert send(player, 0x80, 60, 0).gate is False

    def test_reset_all_controllers_lets_go_what_the_pedal_held(self):
        player = Player()
        send_all(player, "64 127")
        send(player, 0x90, 60, 100)
        send(player, 0x80, 60, 0)
        assert send(player, 0xB0, 121, 0).gate is False


# Standard MIDI Files 1.0, the example of its last pages, in both formats (from memory; the
# lengths of the chunks agree): 96 ticks a quarter, 120 quarters a minute, three channels.
FORMAT_0 = """
4D 54 68 64 00 00 00 06 00 00 00 01 00 60
4D 54 72 6B 00 00 00 3B
00 FF 58 04 04 02 18 08  00 FF 51 03 07 A1 20
00 C0 05  00 C1 2E  00 C2 46
00 92 30 60  00 3C 60  60 91 43 40  60 90 4C 20
81 40 82 30 40  00 3C 40  00 81 43 40  00 80 4C 40  00 FF 2F 00
"""
FORMAT_1 = """
4D 54 68 64 00 00 00 06 00 01 00 04 00 60
4D 54 72 6B 00 00 00 14
00 FF 58 04 04 02 18 08  00 FF 51 03 07 A1 20  83 00 FF 2F 00
4D 54 72 6B 00 00 00 10
00 C0 05  81 40 90 4C 20  81 40 4C 00  00 FF 2F 00
4D 54 72 6B 00 00 00 0F
00 C1 2E  60 91 43 40  82 20 43 00  00 FF 2F 00
4D 54 72 6B 00 00 00 15
00 C2 46  00 92 30 60  00 3C 60  83 00 30 00  00 3C 00  00 FF 2F 00
"""


@pytest.mark.parametrize("text", [FORMAT_0, FORMAT_1])
def test_the_example_of_the_standard(tmp_path, text):
    path = tmp_path / "example.mid"
    path.write_bytes(bytes.fromhex(text))
    song = read_midi_file(path)
    starts = {
        (timed.time_s, timed.message.channel + 1, timed.message.note)
        for timed in song.messages
        if timed.message.type == "note_on" and timed.message.velocity > 0
    }
    assert starts == {(0.0, 3, 48), (0.0, 3, 60), (0.5, 2, 67), (1.0, 1, 76)}
    stops = {
        timed.time_s
        for timed in song.messages
        if timed.message.type == "note_off"
        or (timed.message.type == "note_on" and timed.message.velocity == 0)
    }
    assert stops == {2.0}
    assert (song.duration_s, song.note_count, song.warnings) == (2.0, 4, ())


# Standard MIDI Files 1.0, table of variable-length quantities (from memory).
@pytest.mark.parametrize(
    ("written", "ticks"),
    [
        ("00", 0),
        ("40", 0x40),
        ("7F", 0x7F),
        ("81 00", 0x80),
        ("C0 00", 0x2000),
        ("FF 7F", 0x3FFF),
        ("81 80 00", 0x4000),
        ("C0 80 00", 0x100000),
        ("FF FF 7F", 0x1FFFFF),
        ("81 80 80 00", 0x200000),
        ("C0 80 80 00", 0x8000000),
        ("FF FF FF 7F", 0xFFFFFFF),
    ],
)
def test_variable_length_quantities(tmp_path, written, ticks):
    track = bytes.fromhex(written + "90 3C 40 00 FF 2F 00")
    path = tmp_path / "a.mid"
    path.write_bytes(
        bytes.fromhex("4D 54 68 64 00 00 00 06 00 00 00 01 7F FF 4D 54 72 6B")
        + len(track).to_bytes(4, "big")
        + track
    )
    # default tempo 500000 microseconds a quarter (Standard MIDI Files 1.0, read)
    assert read_midi_file(path).messages[0].time_s == ticks * 0.5 / 0x7FFF


# Standard MIDI Files 1.0: with bit 15 set, the upper byte is minus the frames a second, the
# lower byte ticks a frame; E7 28 is a millisecond a tick; 29 is 30 drop-frame (read).
@pytest.mark.parametrize(
    ("division", "tick_s"),
    [
        ("E7 28", 0.001),
        ("E8 50", 1 / (24 * 80)),
        ("E2 04", 1 / 120),
        ("E3 64", 1001 / 3_000_000),
    ],
)
def test_time_code_division(tmp_path, division, tick_s):
    path = tmp_path / "a.mid"
    path.write_bytes(
        bytes.fromhex(
            f"4D 54 68 64 00 00 00 06 00 00 00 01 {division} 4D 54 72 6B 00 00 00 08"
            "64 90 3C 40 00 FF 2F 00"
        )
    )
    assert read_midi_file(path).messages[0].time_s == pytest.approx(100 * tick_s, rel=1e-15)


# mido 1.3, a general library, as a second reader of files that it reads rightly.
@pytest.mark.parametrize("seed", range(20))
def test_mido_reads_the_same_messages_at_the_same_times(tmp_path, seed):
    chance = random.Random(seed)

    def event():
        time = chance.choice((0, 0, 1, 37, 480, 20_000))
        channel = chance.randrange(16)
        byte = chance.randrange(128)
        return chance.choice(
            (
                Message("note_on", note=byte, channel=channel, time=time),
                Message("note_off", note=byte, channel=channel, time=time),
                Message("control_change", control=byte, value=7, channel=channel, time=time),
                Message("pitchwheel", pitch=byte * 60 - 5000, channel=channel, time=time),
                Message("program_change", program=byte, channel=channel, time=time),
                Message("sysex", data=(1, byte), time=time),
                MetaMessage("set_tempo", tempo=100_000 + byte * 7919, time=time),
                MetaMessage("lyrics", text="la", time=time),
            )
        )

    tracks = [MidiTrack(event() for _ in range(200)) for _ in range(seed % 4 + 1)]
    buffer = BytesIO()
    MidiFile(type=1, ticks_per_beat=chance.choice((96, 480, 960)), tracks=tracks).save(file=buffer)
    path = tmp_path / "a.mid"
    path.write_bytes(buffer.getvalue())
    now_s = 0.0
    expected = []
    for message in MidiFile(file=BytesIO(buffer.getvalue())):
        now_s += message.time
        if not message.is_meta and message.type != "sysex":
            expected.append((now_s, message.bytes()))
    song = read_midi_file(path)
    assert [timed.message.bytes() for timed in song.messages] == [data for _, data in expected]
    assert [t.time_s for t in song.messages] == pytest.approx([s for s, _ in expected], rel=1e-9)
    assert song.duration_s == pytest.approx(now_s, rel=1e-9)
