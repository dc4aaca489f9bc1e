"""`livelag arrival`: which notes of a song arrive in tune before they end."""

from __future__ import annotations

import argparse
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from livelag.cli.common import (
    add_command,
    add_preset,
    console,
    load_preset,
    new_table,
    seconds,
    show_json,
    warn,
)
from livelag.cli.extras import Rows, add_extras, check_extras, show_written, write_extras
from livelag.cli.song_options import (
    add_song_options,
    read_song,
    refuse_midi_options,
    song_player_settings,
)

if TYPE_CHECKING:
    from rich.table import Table

    from livelag.bench.arrival import LongestSetting, NoteArrival, PileUp
    from livelag.bench.timeline import Timeline
    from livelag.circuit.stage import GlideStage, Setting

MOST_ROWS = 40
MOST_PILE_UPS = 3


def add_to(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "arrival",
        "which notes of a phrase or MIDI file arrive in tune before they end",
        "livelag arrival --phrase run --range fast --rotation 0.2 --share 0.9",
    )
    add_preset(parser)
    add_song_options(parser)
    stage = parser.add_argument_group("stage")
    stage.add_argument("--rotation", type=float, metavar="X", help="pot, 0 to 1; default 0.5")
    stage.add_argument("--range", metavar="NAME", help="range switch; default the first range")
    asked = parser.add_argument_group("what counts")
    asked.add_argument(
        "--cents", type=float, metavar="N", help="within N cents is in tune; default 5"
    )
    asked.add_argument(
        "--share", type=float, metavar="X",
        help="seek the longest setting up to which this share of the notes arrives, 0 to 1",
    )  # fmt: skip
    add_extras(parser, "one row a note", "keys and glide against time, and each note's residual")
    parser.set_defaults(run=run)


def run(args: argparse.Namespace) -> None:
    """Show how the notes of a song fare."""
    check_extras(args)
    refuse_midi_options(args)
    _, song = read_song(args)
    from livelag.bench.arrival import arrivals, longest_setting
    from livelag.bench.timeline import lay_out
    from livelag.circuit.stage import ARRIVAL_TOLERANCE_CENTS, Setting

    stage = load_preset(args)
    index = stage.range_index(args.range) if args.range is not None else 0
    setting = Setting(index, 0.5 if args.rotation is None else args.rotation)
    tolerance = ARRIVAL_TOLERANCE_CENTS if args.cents is None else args.cents
    settings = song_player_settings(args)

    def timeline_from(start_range: int) -> Timeline:
        return lay_out(stage, song.messages, song.duration_s, start_range, settings)

    timeline = timeline_from(index)
    notes = arrivals(stage, timeline, setting.rotation, tolerance)
    longest = []
    if args.share is not None:
        ranges = [index] if args.range is not None else range(len(stage.ranges))
        longest = [longest_setting(stage, timeline_from(n), args.share, tolerance) for n in ranges]

    def draw() -> Any:
        from livelag.report.arrival_figure import arrival_figure

        heading = f"{song.title}; {_where(stage, setting)}"
        return arrival_figure(stage, timeline, setting.rotation, notes, tolerance, heading)

    written = write_extras(args, lambda: _rows(notes), draw)
    answer = _answer(args, stage, song.title, setting, tolerance, notes)
    if args.share is not None:
        answer["share"] = args.share
        answer["longest"] = [asdict(row) for row in longest]
    for sentence in song.warnings:
        warn(sentence)
    if args.json:
        show_json({**answer, **written})
        return
    _warn_about(stage, timeline)
    _show(stage, setting, tolerance, notes, song.title, longest, args.share)
    show_written(console(), written)


def _answer(
    args: argparse.Namespace,
    stage: GlideStage,
    title: str,
    setting: Setting,
    tolerance: float,
    notes: tuple[NoteArrival, ...],
) -> dict[str, Any]:
    from livelag.bench.arrival import arrived_fraction, pile_ups

    return {
        "preset": args.preset,
        "song": title,
        "range": stage.range_names[setting.range_index],
        "rotation": setting.rotation,
        "time_constant_s": stage.time_constant_s(setting),
        "tolerance_cents": tolerance,
        "arrived_fraction": arrived_fraction(notes),
        "notes": [asdict(note) for note in notes],
        "pile_ups": [asdict(row) for row in pile_ups(notes)],
    }


def _rows(notes: tuple[NoteArrival, ...]) -> Rows:
    header = tuple(asdict(notes[0]))
    return header, (tuple(asdict(note).values()) for note in notes)


def _where(stage: GlideStage, setting: Setting) -> str:
    return (
        f"range {stage.range_names[setting.range_index]!r}, rotation {setting.rotation:g}, "
        f"time constant {seconds(stage.time_constant_s(setting))}"
    )


def _warn_about(stage: GlideStage, timeline: Timeline) -> None:
    """Say what the table alone would not tell."""
    low, high = stage.swing_volts()
    sounding = [s for s in timeline.stretches if s.note is not None and s.duration_s > 0]
    cut = len({s.note for s in sounding if not low <= s.key_volts <= high})
    if cut:
        first, last = stage.swing_notes()
        warn(
            f"{cut} notes are beyond what the buffers can pass (notes {first:.1f} to {last:.1f}): "
            "they settle out of tune, which livelag tuning tells more about"
        )
    bypassed = len({s.note for s in sounding if s.bypassed})
    if bypassed:
        warn(
            f"{bypassed} notes go without glide, as the song or --legato-only asks, and arrive "
            "at once"
        )
    if timeline.turns_pot:
        warn("the song turns the pot itself")
    if timeline.switches_range:
        warn("the song moves the range switch itself")


def _show(
    stage: GlideStage,
    setting: Setting,
    tolerance: float,
    notes: tuple[NoteArrival, ...],
    title: str,
    longest: list[LongestSetting],
    share: float | None,
) -> None:
    from livelag.bench.arrival import pile_ups

    out = console()
    shown = sorted(sorted(notes, key=lambda n: -abs(n.residual_cents))[:MOST_ROWS], key=_start)
    out.print(_notes_table(f"{title}: {_where(stage, setting)}", shown))
    if len(shown) < len(notes):
        out.print(f"The {len(shown)} of {len(notes)} notes that end furthest off; --csv has all.")
    out.print(
        f"In tune: within {tolerance:g} cents of where the stage settles for that note (static "
        "error: livelag tuning).\n'left over' is what the last glide still lacked as the note "
        "began; a time after a note's length is what it would have needed."
    )
    arrived = sum(note.arrives for note in notes)
    out.print(f"{arrived} of {len(notes)} notes arrive ({100 * arrived / len(notes):.1f} %).")
    for row in pile_ups(notes)[:MOST_PILE_UPS]:
        out.print(_pile_up(row))
    if share is not None:
        out.print(_longest_table(longest))
        out.print(
            f"The longest setting of the pot up to which {100 * share:g} % of the notes arrive: "
            "at every faster setting looked at they do, past it they do not."
        )
        for setting_row in longest:
            if setting_row.holds_again:
                out.print(
                    f"In {setting_row.range_name!r} the share holds again at some slower setting: "
                    "a glide that hardly leaves a note is in tune when it comes back."
                )


def _start(note: NoteArrival) -> float:
    return note.start_s


def _notes_table(title: str, notes: list[NoteArrival]) -> Table:
    from livelag.units import note_name

    columns = ("at", "note", "lasts", "interval", "left over", "arrives", "after", "off at its end")
    table = new_table(
        *columns, title=title, right=[c for c in columns if c not in ("note", "arrives")]
    )
    for note in notes:
        table.add_row(
            f"{note.start_s:.3f} s",
            note_name(note.note),
            seconds(note.end_s - note.start_s),
            f"{note.interval_cents:+.0f}",
            f"{note.carried_cents:+.1f}",
            "yes" if note.arrives else "no",
            seconds(note.arrival_s),
            f"{note.residual_cents:+.1f}",
        )
    return table


def _pile_up(row: PileUp) -> str:
    return (
        f"Errors pile up from {row.start_s:.2f} to {row.end_s:.2f} s: {row.notes} notes in a row "
        f"miss, the worst by {row.worst_cents:+.1f} cents."
    )


def _longest_table(longest: list[LongestSetting]) -> Table:
    columns = ("range", "rotation", "time constant", "arrive there")
    table = new_table(*columns, right=columns[1:])
    for row in longest:
        table.add_row(
            row.range_name,
            "none" if row.rotation is None else f"{row.rotation:.4f}",
            "" if row.time_constant_s is None else seconds(row.time_constant_s),
            f"{100 * row.arrived_fraction:.1f} %"
            + (" at rotation 0" if row.rotation is None else ""),
        )
    return table
