from __future__ import annotations

import os
import random
from io import BytesIO
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from mido import Message, MetaMessage, MidiFile, MidiTrack

from livelag.errors import FileError, InputError, MidiFileError
from livelag.notes.midi_file import (
    LONGEST_SONG_S,
    TimedMessage,
    read_midi_file,
    tempo_for,
    write_midi_file,
)
from livelag.notes.phrases import PHRASES

RATES = (8000, 11025, 16000, 22050, 24000, 32000, 44100, 48000, 50000, 88200, 96000, 176400, 192000)


def tempo(us: int, time: int = 0) -> MetaMessage:
    return MetaMessage("set_tempo", tempo=us, time=time)


def on(note: int, time: int = 0, channel: int = 0) -> Message:
    return Message("note_on", note=note, time=time, channel=channel)


def off(note: int, time: int = 0, channel: int = 0) -> Message:
    return Message("note_off", note=note, time=time, channel=channel)


def end(time: int = 0) -> MetaMessage:
    return MetaMessage("end_of_track", time=time)


@pytest.fixture
def save(tmp_path):
    def _save(*tracks: list, division: int = 480, kind: int = 1) -> Path:
        path = tmp_path / "song.mid"
        MidiFile(
            type=kind, ticks_per_beat=division, tracks=[MidiTrack(track) for track in tracks]
        ).save(path)
        return path

    return _save


def times(song) -> list[tuple[float, str]]:
    return [(timed.time_s, timed.message.type) for timed in song.messages]


class TestRead:
    def test_default_tempo_and_duration_to_the_end_of_the_track(self, save):
        song = read_midi_file(save([on(60), off(60, 480), end(960)]))
        assert times(song) == [(0.0, "note_on"), (0.5, "note_off")]
        assert (song.duration_s, song.note_count, song.warnings) == (1.5, 1, ())

    def test_tempo_map_applies_across_tracks(self, save):
        path = save(
            [tempo(1_000_000), tempo(250_000, 480), end()],
            [on(60, 240), off(60, 480), end()],
        )
        # half a quarter at 1 s, then half at 1 s and half at 0.25 s
        assert times(read_midi_file(path)) == [(0.5, "note_on"), (1.125, "note_off")]
        assert times(read_midi_file(path, tracks={2})) == times(read_midi_file(path))

    def test_many_tempo_changes_add_up_without_drift(self, save):
        changes = [tempo(333_333 + number % 7, 1) for number in range(7000)]
        song = read_midi_file(save([*changes, on(60), off(60, 1), end()], division=96))
        passed_us = 500_000 + sum(change.tempo for change in changes[:-1])
        assert song.messages[0].time_s == passed_us / 96e6

    def test_time_code_division_ignores_the_tempo(self, save):
        path = save([tempo(1_000_000), on(60, 80), off(60, 40), end()], division=0x60)
        data = bytearray(path.read_bytes())
        data[12:14] = b"\xe7\x28"  # 25 frames of 40 ticks: a tick is a millisecond
        path.write_bytes(data)
        assert times(read_midi_file(path)) == [(0.08, "note_on"), (0.12, "note_off")]

    def test_channels_and_tracks_are_counted_from_one(self, save):
        path = save(
            [on(60), off(60, 10), end()],
            [on(62, channel=3), off(62, 20, channel=3), end()],
        )
        assert read_midi_file(path).note_count == 2
        assert {m.message.note for m in read_midi_file(path, channels={4}).messages} == {62}
        assert {m.message.note for m in read_midi_file(path, tracks={1}).messages} == {60}

    def test_at_one_tick_tracks_come_in_their_order(self, save):
        path = save([on(60), off(60, 10), on(61), end()], [on(72, 10), end()])
        assert [m.message.note for m in read_midi_file(path).messages] == [60, 60, 61, 72]

    def test_a_note_on_without_velocity_is_no_note(self, save):
        song = read_midi_file(save([on(60), Message("note_on", note=60, velocity=0), end()]))
        assert song.note_count == 1

    def test_title_is_the_first_tracks_name_or_the_files(self, save):
        assert read_midi_file(save([on(60), end()])).title == "song.mid"
        named = save([MetaMessage("track_name", name="Walk"), on(60), end()])
        assert read_midi_file(named).title == "Walk"

    def test_a_hundred_thousand_events(self, save):
        body = [message for _ in range(50_000) for message in (on(60, 5), off(60, 5))]
        song = read_midi_file(save([*body, end()]))
        assert song.note_count == 50_000
        assert song.duration_s == pytest.approx(500_000 / 960)


class TestRefusals:
    def test_missing(self, tmp_path):
        with pytest.raises(FileError, match=r"none\.mid: does not exist"):
            read_midi_file(tmp_path / "none.mid")

    def test_folder(self, tmp_path):
        with pytest.raises(FileError, match="is a folder"):
            read_midi_file(tmp_path)

    @pytest.mark.skipif(os.geteuid() == 0, reason="root may read everything")
    def test_unreadable(self, save):
        path = save([on(60), end()])
        path.chmod(0)
        with pytest.raises(FileError, match="cannot be read: Permission denied"):
            read_midi_file(path)

    @pytest.mark.parametrize("name", ["a\0b.mid", "a" * 300 + ".mid", "song.mid/inside.mid"])
    def test_impossible_names(self, save, name):
        folder = save([on(60), end()]).parent
        with pytest.raises(FileError, match="cannot be read"):
            read_midi_file(f"{folder}/{name}")

    def test_endless(self):
        if not Path("/dev/zero").exists():
            pytest.skip("no endless file on this system")
        with pytest.raises(MidiFileError, match="is over 8 MiB"):
            read_midi_file("/dev/zero")

    @pytest.mark.parametrize("cut", [0, 3, 9, 13, 14, 20, 25, 30])
    def test_truncated(self, save, cut):
        path = save([on(60), off(60, 480), end()])
        path.write_bytes(path.read_bytes()[:cut])
        with pytest.raises(MidiFileError, match=r"is empty|cut off|starts with"):
            read_midi_file(path)

    def test_no_notes_at_all(self, save):
        with pytest.raises(MidiFileError, match="holds no notes; choose a file that does"):
            read_midi_file(save([tempo(500_000), end()]))

    def test_no_tracks(self, save):
        with pytest.raises(MidiFileError, match="holds no notes"):
            read_midi_file(save())

    def test_no_notes_on_the_chosen_channel_or_track(self, save):
        path = save([end()], [on(60), on(62, channel=9), end()])
        with pytest.raises(
            MidiFileError,
            match="no notes on channel 3, 4; there are notes on track 2 channel 1; track 2 chan",
        ):
            read_midi_file(path, channels={4, 3})
        with pytest.raises(MidiFileError, match="no notes on track 1 channel 10;"):
            read_midi_file(path, tracks={1}, channels={10})

    def test_tracks_and_channels_that_do_not_exist(self, save):
        path = save([on(60), end()])
        with pytest.raises(MidiFileError, match="track is 2; the file has tracks 1 to 1"):
            read_midi_file(path, tracks={2})
        with pytest.raises(InputError, match="channel is 0; it must be 1 to 16"):
            read_midi_file(path, channels={0})

    def test_absurd_duration(self, save):
        path = save([tempo(0xFFFFFF), on(60), off(60, 0x0FFFFFFF), end()], division=1)
        with pytest.raises(MidiFileError, match=r"lasts 1\.251e\+06 hours; at most 24 can"):
            read_midi_file(path)

    def test_a_missing_end_of_track_is_played_with_a_warning(self, save):
        path = save([on(60), off(60, 480), end()])
        data = bytearray(path.read_bytes()[:-4])
        data[21] -= 4
        path.write_bytes(data)
        song = read_midi_file(path)
        assert song.warnings == ("track 1 has no end-of-track event; played to its last event",)
        assert song.duration_s == 0.5


def valid_file() -> bytes:
    track = MidiTrack(
        [
            MetaMessage("track_name", name="x"),
            tempo(400_000),
            MetaMessage("key_signature", key="Dm"),
            MetaMessage("time_signature"),
            on(60),
            Message("sysex", data=(1, 2, 3), time=3),
            Message("pitchwheel", pitch=100, time=300),
            off(60, 480),
            end(5),
        ]
    )
    buffer = BytesIO()
    MidiFile(type=1, tracks=[track, MidiTrack([on(40, 7), end()])]).save(file=buffer)
    return buffer.getvalue()


VALID = valid_file()


def plays_or_is_refused(path: Path, data: bytes) -> bool:
    """Read the file; anything but a MidiFileError fails the test."""
    path.write_bytes(data)
    try:
        song = read_midi_file(path)
    except MidiFileError as error:
        said = str(error)
    else:
        moments = [timed.time_s for timed in song.messages]
        assert moments == sorted(moments)
        assert song.note_count > 0
        assert 0.0 <= moments[0] <= moments[-1] <= song.duration_s <= LONGEST_SONG_S
        return True
    assert said.startswith(f"{path}: ")
    assert "\n" not in said
    return False


shared = settings(
    max_examples=300, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)


class TestFuzz:
    @shared
    @given(st.binary(max_size=200), st.sampled_from([b"", VALID[:14], VALID[:22], VALID[:30]]))
    def test_random_bytes(self, tmp_path, rest, start):
        plays_or_is_refused(tmp_path / "a.mid", start + rest)

    @shared
    @given(st.data())
    def test_mutated_files(self, tmp_path, data):
        mutant = bytearray(VALID)
        for _ in range(data.draw(st.integers(1, 6))):
            place = data.draw(st.integers(0, len(mutant) - 1))
            mutant[place] = data.draw(st.integers(0, 255))
        cut = data.draw(st.one_of(st.just(len(mutant)), st.integers(0, len(mutant))))
        plays_or_is_refused(tmp_path / "a.mid", bytes(mutant[:cut]))

    def test_every_single_byte_change(self, tmp_path):
        played = [
            plays_or_is_refused(
                tmp_path / "a.mid", VALID[:place] + bytes([value]) + VALID[place + 1 :]
            )
            for place in range(len(VALID))
            for value in (0x00, 0x01, 0x7F, 0x80, 0xF0, 0xFF)
        ]
        assert 0.2 < sum(played) / len(played) < 0.8


def frames_of(song, rate: int) -> list[tuple[int, list[int]]]:
    return [(round(timed.time_s * rate), timed.message.bytes()) for timed in song.messages]


class TestWrite:
    @pytest.mark.parametrize("rate", RATES)
    def test_a_tick_is_exactly_a_frame(self, rate):
        tempo_us, per_quarter = tempo_for(rate)
        assert per_quarter * 1_000_000 == rate * tempo_us
        assert 0 < per_quarter <= 0x7FFF
        assert 0 < tempo_us <= 0xFFFFFF

    @pytest.mark.parametrize(
        ("rate", "made"),
        [(48000, (500_000, 24_000)), (96000, (250_000, 24_000)), (44100, (500_000, 22_050))],
    )
    def test_common_rates_have_round_tempos(self, rate, made):
        assert tempo_for(rate) == made

    @pytest.mark.parametrize("rate", RATES)
    def test_round_trip_keeps_every_frame(self, tmp_path, rate):
        chance = random.Random(rate)
        frames = sorted(chance.randrange(3600 * rate) for _ in range(400))
        messages = [
            TimedMessage(frame / rate, chance.choice((on, off))(chance.randrange(128)))
            for frame in frames
        ]
        path = tmp_path / "take.mid"
        write_midi_file(path, messages, rate, duration_s=3600.0)
        song = read_midi_file(path)
        assert frames_of(song, rate) == [
            (frame, timed.message.bytes()) for frame, timed in zip(frames, messages, strict=True)
        ]
        assert song.duration_s == 3600.0
        assert MidiFile(path).type == 0

    def test_a_long_silence_is_kept(self, tmp_path):
        path = tmp_path / "take.mid"
        late = 20 * 3600 + 1 / 192_000
        write_midi_file(path, [TimedMessage(0.0, on(60)), TimedMessage(late, off(60))], 192_000)
        assert frames_of(read_midi_file(path), 192_000)[1][0] == 20 * 3600 * 192_000 + 1

    def test_messages_of_one_frame_keep_their_order(self, tmp_path):
        path = tmp_path / "take.mid"
        given_order = [
            TimedMessage(1.0, off(60)),
            TimedMessage(1.0, on(60)),
            TimedMessage(0, on(2)),
        ]
        write_midi_file(path, given_order, 48_000)
        assert [m.message.note for m in read_midi_file(path).messages] == [2, 60, 60]
        assert read_midi_file(path).messages[1].message.type == "note_off"

    @pytest.mark.parametrize("name", PHRASES)
    def test_phrases_survive_a_file(self, tmp_path, name):
        path = tmp_path / "phrase.mid"
        phrase = PHRASES[name]
        write_midi_file(path, phrase.messages, 48_000, phrase.duration_s)
        assert frames_of(read_midi_file(path), 48_000) == frames_of(phrase, 48_000)

    @pytest.mark.parametrize("rate", [0, -1, 44_101, 191_999, 48_000.0, True])
    def test_rates_that_cannot_be_exact_are_refused(self, tmp_path, rate):
        with pytest.raises(InputError, match="ticks"):
            write_midi_file(tmp_path / "a.mid", [], rate)
        assert list(tmp_path.iterdir()) == []

    @pytest.mark.parametrize("time_s", [-0.1, float("nan"), float("inf"), 1e6])
    def test_times_that_cannot_be_are_refused(self, tmp_path, time_s):
        with pytest.raises(InputError, match="it must be 0 to 86400 s"):
            write_midi_file(tmp_path / "a.mid", [TimedMessage(time_s, on(60))], 48_000)
        assert list(tmp_path.iterdir()) == []

    def test_only_channel_messages_can_be_written(self, tmp_path):
        with pytest.raises(InputError, match="is not a channel message"):
            write_midi_file(tmp_path / "a.mid", [TimedMessage(0.0, Message("clock"))], 48_000)

    def test_a_missing_folder_is_refused(self, tmp_path):
        with pytest.raises(FileError, match="does not exist"):
            write_midi_file(tmp_path / "none" / "a.mid", [], 48_000)

    def test_a_full_disk_leaves_the_old_file_and_no_half(self, tmp_path, monkeypatch):
        path = tmp_path / "a.mid"
        path.write_bytes(b"old")

        def full(self, filename):
            Path(filename).write_bytes(b"half")
            raise OSError(28, "No space left on device")

        monkeypatch.setattr(MidiFile, "save", full)
        with pytest.raises(FileError, match=r"a\.mid: cannot be written: No space left"):
            write_midi_file(path, [], 48_000)
        assert [entry.name for entry in tmp_path.iterdir()] == ["a.mid"]
        assert path.read_bytes() == b"old"
