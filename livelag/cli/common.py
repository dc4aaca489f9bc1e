"""What the commands share: their arguments and how they show their answers."""

from __future__ import annotations

import argparse
import json
import sys
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from rich.console import Console
    from rich.table import Table

    from livelag.circuit.stage import GlideStage

DEFAULT_PRESET = "two-range-film"
LEAST_WIDTH = 72


def add_command(
    commands: argparse._SubParsersAction[argparse.ArgumentParser],
    name: str,
    about: str,
    example: str,
) -> argparse.ArgumentParser:
    """Add a command with `--json` and an example at the foot of its help."""
    parser = commands.add_parser(
        name,
        help=about,
        description=f"{about[0].upper()}{about[1:]}.",
        epilog=f"Example: {example}",
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument(
        "--json", action="store_true", help="one JSON object on standard output, SI units"
    )
    parser.set_defaults(parser=parser)
    return parser


def add_preset(parser: argparse.ArgumentParser) -> None:
    """Add the PRESET argument."""
    parser.add_argument(
        "preset",
        metavar="PRESET",
        nargs="?",
        default=DEFAULT_PRESET,
        help=f"a shipped name (livelag presets) or a TOML file; default {DEFAULT_PRESET}",
    )


def load_preset(args: argparse.Namespace) -> GlideStage:
    """Load the stage asked for and show its warnings on standard error."""
    from livelag.circuit.presets import load_stage

    stage = load_stage(args.preset)
    for sentence in stage.warnings():
        warn(sentence)
    return stage


def refuse(args: argparse.Namespace, message: str) -> None:
    """End with status 2: options that contradict one another or do not apply."""
    args.parser.error(message)


def warn(sentence: str) -> None:
    """Say something that the user should know, on standard error."""
    print(f"note: {sentence}", file=sys.stderr)


def show_json(answer: dict[str, Any]) -> None:
    """Print one JSON object; what is not a finite number is null."""
    print(json.dumps(_finite(answer), indent=2, ensure_ascii=False, allow_nan=False))


def _finite(value: Any) -> Any:
    if isinstance(value, dict):
        return {key: _finite(inner) for key, inner in value.items()}
    if isinstance(value, (list, tuple)):
        return [_finite(inner) for inner in value]
    if isinstance(value, float) and (value != value or value in (float("inf"), float("-inf"))):
        return None
    return value


def console() -> Console:
    """The console that tables go to, which shows names and titles as they are written."""
    from rich.console import Console

    if sys.stdout.isatty():
        shown = Console(markup=False, emoji=False)
        # A narrower table loses its numbers; a line that the terminal folds does not.
        shown.width = max(shown.width, LEAST_WIDTH)
        return shown
    return Console(width=120, markup=False, emoji=False)


def new_table(*columns: str, title: str = "", right: Sequence[str] = ()) -> Table:
    """An empty table; columns named in ``right`` hold numbers."""
    from rich.box import SIMPLE_HEAD
    from rich.table import Table

    table = Table(box=SIMPLE_HEAD, title=title or None, title_justify="left", pad_edge=False)
    for column in columns:
        table.add_column(column, justify="right" if column in right else "left")
    return table


def seconds(value: float) -> str:
    """A time as people read it, such as ``78 ms``."""
    from livelag.units import format_value

    return format_value(value, "s", digits=3)
