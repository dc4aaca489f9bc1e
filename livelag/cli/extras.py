"""What the builder's commands can write beside their table: rows as CSV and a picture."""

from __future__ import annotations

import argparse
import os
from collections.abc import Callable, Iterable, Sequence
from itertools import combinations
from pathlib import Path
from typing import TYPE_CHECKING

from livelag.errors import InputError

if TYPE_CHECKING:
    from matplotlib.figure import Figure
    from rich.console import Console

    from livelag.circuit.stage import GlideStage

Rows = tuple[Sequence[str], Iterable[Sequence[object]]]

_READ = {
    "preset": "the preset",
    "midi": "the MIDI file",
    "drawer": "the drawer",
    "marks": "the marks file",
}
_WRITTEN = ("out", "cv", "csv", "picture", "save")


def add_extras(parser: argparse.ArgumentParser, rows: str, picture: str) -> None:
    """Add `--csv` and `--picture`, saying what each shows."""
    files = parser.add_argument_group("files")
    files.add_argument("--csv", metavar="FILE", help=rows)
    files.add_argument("--picture", metavar="FILE", help=f".png, .svg or .pdf: {picture}")


def check_extras(args: argparse.Namespace) -> None:
    """Refuse names that cannot be written before any work is done.

    Raises:
        UnknownNameError: if the picture's suffix is none of those known.
        InputError: if a suffix is wrong, two name the same file, or one a file that the command
            reads.
    """
    if args.picture is not None:
        from livelag.report.figures import check_picture

        check_picture(Path(args.picture))
    named = [(option, vars(args).get(option)) for option in ("csv", "picture", "save")]
    given = [(option, name) for option, name in named if name is not None]
    for (one, name), (other, same) in combinations(given, 2):
        if same_file(name, same):
            raise InputError(f"{name}: --{one} and --{other} name the same file")
    keep_what_is_read(args)
    if args.csv is not None and Path(args.csv).suffix.lower() != ".csv":
        raise InputError(f"--csv is {args.csv!r}; its name must end in .csv")
    save = vars(args).get("save")
    if save is not None and Path(save).suffix != ".toml":
        raise InputError(f"--save is {save!r}; a preset is a .toml file")


def same_file(one: str | Path, other: str | Path) -> bool:
    """Whether two names, relative or by way of a link, stand for one place."""
    return os.path.realpath(one) == os.path.realpath(other)


def keep_what_is_read(args: argparse.Namespace, captures: Iterable[Path] = ()) -> None:
    """Refuse to write over a file that the command reads.

    Args:
        args: the command line.
        captures: files that it reads beside those of its options.

    Raises:
        InputError: naming the option.
    """
    given = vars(args)
    read = [(given[option], what) for option, what in _READ.items() if given.get(option)]
    read += [(path, "a capture") for path in captures]
    for option in _WRITTEN:
        if (name := given.get(option)) is None:
            continue
        for path, what in read:
            # A shipped preset may have the name of a folder to write to.
            if same_file(name, path) and os.path.isfile(path):  # noqa: PTH113 - quiet about any name
                raise InputError(f"--{option} is {name!r}, which is {what}; name another file")


def write_extras(
    args: argparse.Namespace,
    rows: Callable[[], Rows],
    draw: Callable[[], Figure],
    preset: GlideStage | None = None,
) -> dict[str, str]:
    """Write what was asked for, every file or none; returns what to add to the answer.

    Args:
        args: the command line.
        rows: header and rows of `--csv`.
        draw: makes the figure of `--picture`.
        preset: a stage to write to `--save`; None writes none.

    Raises:
        FileError: if a file cannot be written.
    """
    if args.csv is None and args.picture is None and preset is None:
        return {}
    from livelag.files import WholeFiles

    written = {}
    with WholeFiles() as files:
        if args.csv is not None:
            from livelag.report.rows import write_csv

            write_csv(files.temporary(Path(args.csv)), *rows())
            written["csv"] = args.csv
        if args.picture is not None:
            from livelag.report.figures import save_figure

            place = files.temporary(Path(args.picture))
            save_figure(draw(), place)
            written["picture"] = args.picture
        if preset is not None:
            from livelag.circuit.presets import stage_to_toml

            place = files.temporary(Path(args.save))
            place.write_text(stage_to_toml(preset), encoding="utf-8")
            written["saved"] = args.save
    return written


def show_written(out: Console, written: dict[str, str]) -> None:
    """Say which files there are now."""
    for what, path in written.items():
        out.print(f"{what} in {path}")
