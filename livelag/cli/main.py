"""The `livelag` command: finds the command asked for, runs it, turns errors into one line.

Only `argparse` is imported here; each command imports what it uses when it runs.
"""

from __future__ import annotations

import argparse
import importlib
import io
import os
import signal
import sys
from collections.abc import Sequence
from pathlib import Path
from types import FrameType

import livelag
from livelag.cli.command_line import CommandLineParser
from livelag.errors import LivelagError

COMMANDS = (
    "audition",
    "render",
    "ranges",
    "arrival",
    "tuning",
    "spread",
    "parts",
    "sheet",
    "fit",
    "presets",
    "devices",
)

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


def build_parser() -> CommandLineParser:
    """The whole command line."""
    parser = CommandLineParser(
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
    try:
        _end_on_terminate()
        _make_output_safe()
        try:
            args = build_parser().parse_command(arguments)
            args.run(args)
        finally:
            sys.stdout.flush()
    except LivelagError as error:
        print(f"livelag: {' '.join(str(error).split())}", file=sys.stderr)
        return AT_FAULT
    except KeyboardInterrupt:
        print("livelag: interrupted; nothing was left half-written", file=sys.stderr)
        return INTERRUPTED
    except BrokenPipeError:
        _drop_output()  # whoever read standard output has gone
        return AT_FAULT
    except OSError as error:
        _drop_output()
        place = error.filename or "standard output"
        print(f"livelag: {place}: {error.strerror or error}", file=sys.stderr)
        return AT_FAULT
    return DONE


def _make_output_safe() -> None:
    """Have a standard output even where it is closed, and one that takes any file name."""
    if sys.stdout is None:
        sys.stdout = Path(os.devnull).open("w", encoding="utf-8")  # noqa: SIM115 - until the end
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="backslashreplace")


def _drop_output() -> None:
    """Keep Python from complaining at exit about what it could not write."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _end_on_terminate() -> None:
    """Let SIGTERM and a closed terminal unwind like an interrupt, so that temporary files go."""

    def interrupt(number: int, frame: FrameType | None) -> None:
        raise KeyboardInterrupt

    for name in ("SIGTERM", "SIGHUP"):
        number = getattr(signal, name, None)
        if number is not None and signal.getsignal(number) != signal.SIG_IGN:
            signal.signal(number, interrupt)
