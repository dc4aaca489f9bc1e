"""Options that say which notes are played, for commands that play them from end to end."""

from __future__ import annotations

import argparse
from pathlib import Path
from typing import TYPE_CHECKING

from livelag.cli.common import refuse
from livelag.cli.performance import add_key_options, player_settings_from
from livelag.errors import InputError

if TYPE_CHECKING:
    from livelag.notes.midi_file import Song
    from livelag.notes.player import PlayerSettings

DEFAULT_PHRASE = "procession"  # told in --help, which must start without the phrases


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


def refuse_midi_options(args: argparse.Namespace) -> None:
    """Refuse what would change nothing where a phrase is played."""
    if args.midi is None:
        for option in ("channels", "tracks", "keep_gliding"):
            if getattr(args, option) not in (None, False):
                refuse(args, f"--{option.replace('_', '-')} goes with --midi")


def read_song(args: argparse.Namespace) -> tuple[str, Song]:
    """The notes asked for, after a short name for them.

    Raises:
        UnknownNameError: if there is no such phrase.
        FileError: if the MIDI file cannot be read.
        MidiFileError: if it cannot be played.
        InputError: if a channel or track is not a number that exists.
    """
    from livelag.notes.midi_file import Song, read_midi_file

    if args.midi is None:
        from livelag.notes.phrases import phrase

        chosen = phrase(DEFAULT_PHRASE if args.phrase is None else args.phrase)
        return chosen.name, Song(chosen.name, chosen.messages, chosen.duration_s, chosen.note_count)
    song = read_midi_file(
        Path(args.midi),
        channels=_number_set(args.channels, "--channels"),
        tracks=_number_set(args.tracks, "--tracks"),
    )
    return Path(args.midi).stem, song


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
