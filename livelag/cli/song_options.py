"""Options that say which notes are played, for commands that play them without sound."""

from __future__ import annotations

import argparse
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from livelag.cli.common import refuse, warn
from livelag.cli.performance import add_key_options, player_settings_from
from livelag.errors import InputError

if TYPE_CHECKING:
    from livelag.notes.midi_file import TimedMessage
    from livelag.notes.player import PlayerSettings

DEFAULT_PHRASE = "procession"


@dataclass(frozen=True, slots=True)
class SongChoice:
    """The notes asked for.

    Attributes:
        title: the song in words.
        messages: in order of time.
        duration_s: where it ends, in seconds.
    """

    title: str
    messages: tuple[TimedMessage, ...]
    duration_s: float


def add_song_options(parser: argparse.ArgumentParser) -> None:
    """Add the options."""
    notes = parser.add_argument_group("notes")
    source = notes.add_mutually_exclusive_group()
    source.add_argument(
        "--phrase", metavar="NAME", help=f"a shipped phrase; default {DEFAULT_PHRASE}"
    )
    source.add_argument("--midi", metavar="FILE", help="a Standard MIDI File, format 0 or 1")
    notes.add_argument(
        "--channels", metavar="1,2", help="play these channels only, 1 to 16; default all, merged"
    )
    notes.add_argument("--tracks", metavar="1,2", help="play these tracks only, from 1")
    notes.add_argument(
        "--keep-gliding", action="store_true",
        help="glide on when the music turns the glide off (controllers 65 and 121)",
    )  # fmt: skip
    add_key_options(notes)


def read_song(args: argparse.Namespace) -> SongChoice:
    """The notes asked for; what is wrong with their file goes to standard error.

    Raises:
        UnknownNameError: if there is no such phrase.
        FileError: if the MIDI file cannot be read.
        MidiFileError: if it cannot be played.
        InputError: if a channel or track is not a number that exists.
    """
    if args.midi is None:
        for option in ("channels", "tracks", "keep_gliding"):
            if getattr(args, option) not in (None, False):
                refuse(args, f"--{option.replace('_', '-')} goes with --midi")
        from livelag.notes.phrases import phrase

        chosen = phrase(args.phrase or DEFAULT_PHRASE)
        return SongChoice(chosen.name, chosen.messages, chosen.duration_s)
    from livelag.notes.midi_file import read_midi_file

    song = read_midi_file(
        Path(args.midi),
        channels=_number_set(args.channels, "--channels"),
        tracks=_number_set(args.tracks, "--tracks"),
    )
    for sentence in song.warnings:
        warn(sentence)
    return SongChoice(song.title, song.messages, song.duration_s)


def song_player_settings(args: argparse.Namespace) -> PlayerSettings:
    """How keys become volts, as the options say.

    Raises:
        UnknownNameError: if there is no such priority.
    """
    return player_settings_from(args, heed_switch=not args.keep_gliding)


def _number_set(text: str | None, option: str) -> set[int] | None:
    if text is None:
        return None
    try:
        return {int(part) for part in text.split(",")}
    except ValueError:
        raise InputError(f"{option} is {text!r}; write numbers such as 1,2") from None
