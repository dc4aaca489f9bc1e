"""`livelag render`: a stage as a sound file, with its pitch curve and picture if asked."""

from __future__ import annotations

import argparse
from pathlib import Path
from typing import TYPE_CHECKING, Any

from livelag.cli.common import (
    add_command,
    add_preset,
    console,
    new_table,
    refuse,
    seconds,
    show_json,
    warn,
)
from livelag.cli.extras import keep_what_is_read
from livelag.cli.performance import add_setting_options, add_sound_options
from livelag.cli.song_options import add_song_options, refuse_midi_options

if TYPE_CHECKING:
    from livelag.cli.render_job import RenderJob

LEVEL_DBFS = -18.0


def add_to(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "render",
        "play a phrase or a MIDI file through a stage into a sound file",
        "livelag render --midi song.mid --range slow --rotation 0.7 --out slow.wav",
    )
    add_preset(parser)
    add_song_options(parser)
    stage = parser.add_argument_group("stage")
    add_setting_options(stage)
    stage.add_argument("--bypass", action="store_true", help="without the glide, to compare with")
    sound = parser.add_argument_group("sound")
    add_sound_options(sound, LEVEL_DBFS)
    sound.add_argument("--rate", type=int, default=48000, metavar="HZ", help="default 48000")
    sound.add_argument("--depth", metavar="BITS", help="16, 24 or float; default 24, for a page 16")
    sound.add_argument(
        "--stereo", action="store_true", help="glide volts as a DC second channel beside the sound"
    )
    sound.add_argument(
        "--full-scale-volts", type=float, metavar="V",
        help="volts at full scale of that channel; default 10",
    )  # fmt: skip
    files = parser.add_argument_group("files")
    files.add_argument("--out", metavar="FILE", help=".wav or .flac; a folder for a set")
    files.add_argument("--cv", metavar="FILE", help="the pitch curve as CSV")
    files.add_argument(
        "--cv-rate", type=float, metavar="HZ", help="rows a second in --cv; default 1000"
    )
    files.add_argument("--picture", metavar="FILE", help=".png, .svg or .pdf of the pitch curve")
    many = parser.add_argument_group("a numbered set in one call")
    many.add_argument("--rotations", metavar="0,0.5,1", help="render each of these rotations")
    many.add_argument("--ranges", metavar="all", help="render each of these ranges, or all")
    many.add_argument(
        "--page", metavar="DIR",
        help="a folder to send: sounds and a page that plays them beside their pitch curves; "
        "default every range at 0, 0.5 and 1",
    )  # fmt: skip
    parser.set_defaults(run=run)


def run(args: argparse.Namespace) -> None:
    """Render one file or a numbered set.

    Raises:
        InputError: if an option has a value it cannot take.
    """
    _refuse_contradictions(args)
    keep_what_is_read(args)
    from livelag.circuit.presets import load_stage
    from livelag.cli.render_job import RenderJob

    if args.depth is None:
        args.depth = "24" if args.page is None else "16"
    job = RenderJob.from_arguments(args, load_stage(args.preset))
    _render(args, job)
    # Said last, so that a rendering that fails says one line only.
    for sentence in (*job.stage.warnings(), *job.song.warnings):
        warn(sentence)


def _render(args: argparse.Namespace, job: RenderJob) -> None:
    if args.page is not None:
        from livelag.cli.render_page import render_page

        render_page(args, job)
        return
    if args.rotations is not None or args.ranges is not None:
        from livelag.cli.render_set import render_set

        render_set(args, job)
        return
    out = Path(f"{Path(args.preset).stem}-{job.song_name}.wav" if args.out is None else args.out)
    answer = job.run(
        out,
        cv=None if args.cv is None else Path(args.cv),
        cv_rate=1000.0 if args.cv_rate is None else args.cv_rate,
        picture=None if args.picture is None else Path(args.picture),
        show_progress=not args.json,
    )
    if args.json:
        show_json(answer)
        return
    show_rendered(job, answer)


def _refuse_contradictions(args: argparse.Namespace) -> None:
    """Refuse options that would change nothing."""
    refuse_midi_options(args)
    if args.pulse_width is not None and args.waveform != "pulse":
        refuse(args, "--pulse-width goes with --waveform pulse")
    if args.full_scale_volts is not None and not args.stereo:
        refuse(args, "--full-scale-volts goes with --stereo")
    if args.cv_rate is not None and args.cv is None:
        refuse(args, "--cv-rate goes with --cv")
    if args.rotations is not None and args.rotation is not None:
        refuse(args, "--rotation and --rotations exclude one another")
    if args.ranges is not None and args.range is not None:
        refuse(args, "--range and --ranges exclude one another")
    if args.page is not None:
        _refuse_with_page(args)
    if args.rotations is not None or args.ranges is not None:
        for option in ("cv", "picture"):
            if getattr(args, option) is not None:
                refuse(args, f"--{option} is for one rendering, not for a set")
        if args.bypass:
            refuse(args, "--bypass makes every rendering of a set the same")
    if args.bypass:
        for option in ("rotation", "range", "legato_only"):
            value = getattr(args, option)
            if value is not None and value is not False:
                refuse(args, f"--{option.replace('_', '-')} changes nothing with --bypass")


def _refuse_with_page(args: argparse.Namespace) -> None:
    for option, why in (
        ("out", "--page names the folder itself"),
        ("cv", "a page draws its curves itself"),
        ("picture", "a page draws its curves itself"),
    ):
        if getattr(args, option) is not None:
            refuse(args, f"--{option} and --page exclude one another: {why}")
    if args.stereo:
        refuse(args, "--stereo would put DC on the loudspeaker of whoever opens the page")
    if args.bypass:
        refuse(args, "--bypass makes every sound of a page the same")
    if args.depth == "float":
        refuse(args, "--depth float does not fit a page, whose sounds are FLAC: 16 or 24")


def show_rendered(job: RenderJob, answer: dict[str, Any]) -> None:
    """Say what was written, and what the user should know about it."""
    out = console()
    table = new_table("", "")
    table.show_header = False
    table.add_row("stage", f"{job.stage.title}; {job.where}")
    table.add_row("notes", f"{answer['notes']} from {job.song_title}")
    table.add_row(
        "sound",
        f"{answer['out']}: {answer['seconds']:.2f} s, {answer['rate_hz']} Hz, "
        f"{answer['channels']} channel{'s' * (answer['channels'] > 1)}, "
        f"peak {answer['peak_dbfs']:.1f} dBFS",
    )
    table.add_row("time constant", f"{seconds(answer['time_constant_s'])}, {answer['method']}")
    for key in ("cv", "picture"):
        if answer.get(key):
            table.add_row({"cv": "pitch curve", "picture": "picture"}[key], answer[key])
    out.print(table)
    for sentence in job.remarks(answer):
        warn(sentence)
