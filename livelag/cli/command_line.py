"""The command line's parser: a fault in it is one line that says what would be right."""

from __future__ import annotations

import argparse
from collections.abc import Sequence
from typing import Any, NoReturn


class CommandLineParser(argparse.ArgumentParser):
    """argparse's parser, whose faults are one line and whose numbers say what they are."""

    def __init__(self, **options: Any) -> None:
        """Take what `argparse.ArgumentParser` takes."""
        super().__init__(**options)
        # Arguments say type=int and type=float, and get these.
        self.register("type", int, _whole_number)
        self.register("type", float, _number)

    def error(self, message: str) -> NoReturn:
        """End with status 2 and one line."""
        said = " ".join(message.removeprefix("argument ").split())
        self.exit(2, f"{self.prog}: {said}; see {self.prog} --help\n")

    def parse_command(self, arguments: Sequence[str] | None) -> argparse.Namespace:
        """Parse a whole command line; what a command does not know, it says itself.

        Args:
            arguments: the words; None for the process's own.
        """
        args, unknown = self.parse_known_args(arguments)
        if unknown:
            args.parser.error(_unknown(unknown[0], args.parser))
        return args


def _unknown(word: str, parser: argparse.ArgumentParser) -> str:
    """What to say of a word that no option takes."""
    if not word.startswith("-"):
        return f"{word!r} is one argument too many"
    from difflib import get_close_matches

    option = word.split("=")[0]
    known = [name for action in parser._actions for name in action.option_strings]
    if option in known:
        return f"{option} goes after the command's name"
    near = get_close_matches(option, known, 1, 0.75)
    return f"there is no option {option}" + (f"; did you mean {near[0]}" if near else "")


def _whole_number(text: str) -> int:
    try:
        return int(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"{text!r} is not a whole number") from None


def _number(text: str) -> float:
    try:
        return float(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"{text!r} is not a number") from None
