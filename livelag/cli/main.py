"""The `livelag` command: finds the command asked for, runs it, turns errors into one line.

Only `argparse` is imported here; each command imports what it uses when it runs.
"""

from __future__ import annotations

import argparse
import importlib
import os
import signal
import sys
from collections.abc import Sequence
from types import FrameType

import livelag
from livelag.errors import LivelagError

COMMANDS = ("render", "ranges", "presets")

DONE, AT_FAULT, WRONG_COMMAND_LINE, INTERRUPTED = 0, 1, 2, 130

_DESCRIPTION = """\
Hear the glide stage of an analog synthesizer before building it.

A glide stage is a buffer, a series resistor, a time pot and capacitors picked by a range
switch. livelag plays notes through it and says what its times and its tuning will be.
"""

_EPILOG = """\
Start quiet: a test oscillator is loud and steady. Protect your ears.
Example: livelag render --out demo.wav --picture demo.png
"""


def build_parser() -> argparse.ArgumentParser:
    """The whole command line."""
    parser = argparse.ArgumentParser(
        prog="livelag",
        description=_DESCRIPTION,
        epilog=_EPILOG,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("--version", action="version", version=f"livelag {livelag.__version__}")
    commands = parser.add_subparsers(title="commands", metavar="COMMAND", required=True)
    for name in COMMANDS:
        importlib.import_module(f"livelag.cli.{name}").add_to(commands)
    return parser


def run(arguments: Sequence[str] | None = None) -> int:
    """Run a command line and return its exit status."""
    args = build_parser().parse_args(arguments)
    _end_on_terminate()
    try:
        args.run(args)
        sys.stdout.flush()
    except LivelagError as error:
        print(f"livelag: {' '.join(str(error).split())}", file=sys.stderr)
        return AT_FAULT
    except KeyboardInterrupt:
        print("livelag: interrupted; nothing was left half-written", file=sys.stderr)
        return INTERRUPTED
    except BrokenPipeError:
        # Whoever read standard output has gone; keep Python from complaining at exit.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return AT_FAULT
    return DONE


def _end_on_terminate() -> None:
    """Let SIGTERM unwind like an interrupt, so that temporary files go."""

    def interrupt(number: int, frame: FrameType | None) -> None:
        raise KeyboardInterrupt

    signal.signal(signal.SIGTERM, interrupt)
