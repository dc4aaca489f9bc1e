"""`livelag audition`: play the stage live."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from livelag.cli.common import add_command, add_preset, load_preset, refuse
from livelag.cli.performance import add_key_options, add_setting_options, add_sound_options

if TYPE_CHECKING:
    from livelag.circuit.stage import GlideStage

LEVEL_DBFS = -24.0


def add_to(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "audition",
        "play a stage live; turn its pot, flip its range, judge by ear",
        "livelag audition two-range-film --phrase procession --by-ear",
    )
    add_preset(parser)
    notes = parser.add_argument_group("notes")
    source = notes.add_mutually_exclusive_group()
    source.add_argument("--phrase", metavar="NAME", help="play a shipped phrase round and round")
    source.add_argument("--midi", metavar="FILE", help="play a Standard MIDI File round and round")
    notes.add_argument(
        "--midi-in", metavar="NAME", action="append",
        help="a MIDI input, by name or part of it; may be given again; default all",
    )  # fmt: skip
    notes.add_argument("--no-midi-in", action="store_true", help="open no MIDI input")
    notes.add_argument(
        "--virtual-in", metavar="NAME", help="offer a MIDI input of this name to other programs"
    )
    notes.add_argument("--pot-cc", type=int, metavar="N", help="controller of the pot; default 5")
    notes.add_argument(
        "--range-cc", type=int, metavar="N", help="controller of the range switch; default 80"
    )
    add_key_options(notes)
    stage = parser.add_argument_group("stage")
    add_setting_options(stage)
    stage.add_argument(
        "--by-ear", action="store_true",
        help="free the pot from its parts (0.5 ms to 10 s) and mark times for livelag parts",
    )  # fmt: skip
    stage.add_argument("--marks", metavar="FILE", help="where marks go; default marks.toml")
    sound = parser.add_argument_group("sound")
    sound.add_argument("--device", metavar="NAME", help="sound output, by name or number")
    sound.add_argument("--rate", type=int, metavar="HZ", help="default the device's own")
    sound.add_argument("--block", type=int, default=128, metavar="FRAMES", help="default 128")
    sound.add_argument(
        "--latency", default="low", metavar="S", help="low (default), high or seconds"
    )
    add_sound_options(sound, LEVEL_DBFS)
    volts = parser.add_argument_group("volts, through a DC-coupled interface")
    volts.add_argument("--cv-out", type=int, metavar="CHANNEL", help="send the glide volts here")
    volts.add_argument(
        "--cv-in", type=int, metavar="CHANNEL", help="glide the volts that come in here"
    )
    volts.add_argument("--cv-device", metavar="NAME", help="sound input of --cv-in")
    volts.add_argument(
        "--full-scale-volts", type=float, metavar="V",
        help="volts at full scale; for --cv-out default the calibration (livelag devices)",
    )  # fmt: skip
    other = parser.add_argument_group("other")
    other.add_argument("--takes", default="takes", metavar="FOLDER", help="default takes")
    other.add_argument("--plain", action="store_true", help="a line on each change, no panel")
    other.add_argument("--seconds", type=float, metavar="S", help="leave by itself after so long")
    parser.set_defaults(run=run)


def run(args: argparse.Namespace) -> None:
    """Play a stage live."""
    _refuse_contradictions(args)
    stage: GlideStage = load_preset(args)
    from livelag.cli.audition_job import audition

    audition(args, stage)


def _refuse_contradictions(args: argparse.Namespace) -> None:
    if args.pulse_width is not None and args.waveform != "pulse":
        refuse(args, "--pulse-width goes with --waveform pulse")
    if args.marks is not None and not args.by_ear:
        refuse(args, "--marks goes with --by-ear")
    if args.by_ear and args.range is not None:
        refuse(args, "--range does not go with --by-ear, which frees the pot from its ranges")
    if args.cv_device is not None and args.cv_in is None:
        refuse(args, "--cv-device goes with --cv-in")
    if args.full_scale_volts is not None and args.cv_out is None and args.cv_in is None:
        refuse(args, "--full-scale-volts goes with --cv-out or --cv-in")
    if args.cv_in is not None and args.full_scale_volts is None:
        refuse(args, "--cv-in needs --full-scale-volts")
    if args.cv_in is not None and (args.phrase or args.midi):
        refuse(args, "--cv-in glides a voltage from outside; it takes no phrase or MIDI file")
    if args.no_midi_in and (args.midi_in or args.virtual_in):
        refuse(args, "--no-midi-in excludes --midi-in and --virtual-in")
    for option in ("cv_out", "cv_in"):
        value = getattr(args, option)
        if value is not None and value < 1:
            refuse(args, f"--{option.replace('_', '-')} is {value}; channels count from 1")
    if not 16 <= args.block <= 8192:
        refuse(args, f"--block is {args.block}; it must be 16 to 8192 frames")
    if args.seconds is not None and not args.seconds > 0:
        refuse(args, f"--seconds is {args.seconds:g}; it must be more than 0")
