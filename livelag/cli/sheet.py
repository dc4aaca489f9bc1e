"""`livelag sheet`: the bench sheet of a stage, to print and take to the oscilloscope."""

from __future__ import annotations

import argparse
from pathlib import Path
from typing import TYPE_CHECKING, Any

from livelag.cli.common import (
    add_command,
    add_preset,
    console,
    load_preset,
    new_table,
    refuse,
    show_json,
)
from livelag.cli.extras import Rows, keep_what_is_read, same_file
from livelag.errors import InputError, UnknownNameError

if TYPE_CHECKING:
    from rich.table import Table

    from livelag.bench.limits import Limits
    from livelag.bench.sheet import Sheet, SheetRow
    from livelag.bench.sheet_parts import PartLine
    from livelag.bench.sheet_signals import RangeSignals

DEFAULT_PAPER = "a4"


def add_to(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "sheet",
        "the bench sheet: what to set, what the oscilloscope should show, with limits",
        "livelag sheet two-range-film --out sheet.pdf --paper letter",
    )
    add_preset(parser)
    files = parser.add_argument_group("files")
    files.add_argument(
        "--out", metavar="FILE",
        help="two pages to print: .pdf or .html in one file; .png or .svg as FILE-1 and FILE-2",
    )  # fmt: skip
    files.add_argument("--paper", metavar="P", help="a4 (default) or letter; with --out")
    files.add_argument("--csv", metavar="FILE", help="the expected readings with their limits")
    parser.set_defaults(run=run)


def run(args: argparse.Namespace) -> None:
    """Show the bench sheet and write what was asked for.

    Raises:
        InputError: if two files have one name, or one that of the preset.
        UnknownNameError: if there is no such paper or suffix.
    """
    if args.paper is not None and args.out is None:
        refuse(args, "--paper goes with --out")
    paper = _paper(args.paper)
    places = _places(args)
    keep_what_is_read(args)
    stage = load_preset(args)
    from livelag.bench.sheet import bench_sheet

    sheet = bench_sheet(stage)
    written = _write(args, sheet, paper, places)
    if args.json:
        show_json({**_answer(args.preset, sheet), **written})
        return
    out = console()
    out.print(_signals_table(sheet))
    low, high = sheet.levels.low_v, sheet.levels.high_v
    out.print(
        f"Square wave from {low:.4g} V to {high:.4g} V, the pot at 1: the settling one lets every "
        "step settle, the hurried one none;\nwhat comes out of the hurried one, peak to peak."
    )
    out.print(_readings_table(sheet))
    out.print(
        "As designed, and in brackets the least and most that a good build may read. Volts one "
        "time constant after the rising\nedge, and at the end of the high level."
    )
    for path in written.get("out", []):
        out.print(f"sheet in {path}")
    if "csv" in written:
        out.print(f"csv in {written['csv']}")
    if not written:
        out.print("To print it: --out sheet.pdf")


def _paper(name: str | None) -> str:
    from livelag.report.sheet_page import PAPERS_MM

    found = DEFAULT_PAPER if name is None else name.lower()
    if found not in PAPERS_MM:
        raise UnknownNameError("paper", name, PAPERS_MM, where="--paper")
    return found


def _places(args: argparse.Namespace) -> tuple[Path, ...]:
    """The files of `--out`, refused before any work is done if `--csv` names one of them."""
    if args.out is None:
        return ()
    from livelag.report.sheet_files import sheet_paths

    places = sheet_paths(Path(args.out))
    if args.csv is not None and any(same_file(args.csv, place) for place in places):
        raise InputError(f"{args.csv}: --csv and --out name the same file")
    return places


def _write(
    args: argparse.Namespace, sheet: Sheet, paper: str, places: tuple[Path, ...]
) -> dict[str, Any]:
    if not places and args.csv is None:
        return {}
    from livelag.files import WholeFiles

    written: dict[str, Any] = {}
    with WholeFiles() as files:
        if places:
            from livelag.report.sheet_files import write_sheet

            write_sheet(sheet, paper, [files.temporary(path) for path in places])
            written |= {"out": [str(path) for path in places], "paper": paper}
        if args.csv is not None:
            from livelag.report.rows import write_csv

            write_csv(files.temporary(Path(args.csv)), *_csv_rows(sheet))
            written["csv"] = args.csv
    return written


def _readings(row: SheetRow) -> dict[str, Limits]:
    """What can be read at one position, under the names that JSON and CSV give it."""
    limits = row.limits
    return {
        "time_constant_s": limits.time_constant_s,
        "rise_s": limits.rise_s,
        "after_one_time_constant_v": row.after_v,
        "settled_v": row.settled_v,
        "gain": limits.gain,
        "offset_v": limits.offset_v,
        "shown_time_constant_s": limits.shown_time_constant_s,
    }


def _answer(preset: str, sheet: Sheet) -> dict[str, Any]:
    from livelag.bench.sheet_signals import HURRIED, SETTLED

    at = sheet.levels
    return {
        "preset": preset,
        "title": sheet.stage.title,
        "low_v": at.low_v,
        "high_v": at.high_v,
        "stairs_v": at.stairs_v,
        "settled_time_constants": SETTLED,
        "fast_time_constants": HURRIED,
        "signals": [_signals(row) for row in sheet.signals],
        "positions": [
            {
                "range": row.limits.range_name,
                "rotation": row.limits.rotation,
                "square_hz": row.square_hz,
                **{name: _limits(found) for name, found in _readings(row).items()},
            }
            for row in sheet.rows
        ],
        "parts": [_part(line) for line in sheet.parts.lines()],
        "cautions": sheet.cautions,
    }


def _limits(found: Limits) -> dict[str, float]:
    return {"nominal": found.nominal, "low": found.low, "high": found.high}


def _signals(row: RangeSignals) -> dict[str, Any]:
    return {
        "range": row.range_name,
        "rotation": 1.0,
        "slow_square_hz": row.settle_hz,
        "stair_s": row.stair_s,
        "stairs_out_v": [_limits(found) for found in row.stairs],
        "fast_square_hz": row.hurried_hz,
        "fast_trough_v": _limits(row.trough_v),
        "fast_crest_v": _limits(row.crest_v),
        "fast_peak_to_peak_v": _limits(row.swing_v),
    }


def _part(line: PartLine) -> dict[str, Any]:
    unit = {"Ω": "ohms", "F": "f"}.get(line.unit)
    value = {} if unit is None else {f"value_{unit}": line.value, "tolerance": line.tolerance}
    return {"part": line.reference, "place": line.place, **value, "kind": line.kind}


def _csv_rows(sheet: Sheet) -> Rows:
    header = ["range", "rotation", "square_hz"]
    for name in _readings(sheet.rows[0]):
        stem, _, unit = name.rpartition("_")
        named = (f"{stem}_{end}_{unit}" if stem else f"{name}_{end}" for end in ("low", "high"))
        header += [name, *named]
    return header, (
        [
            row.limits.range_name, row.limits.rotation, row.square_hz,
            *(value for found in _readings(row).values()
              for value in (found.nominal, found.low, found.high)),
        ]
        for row in sheet.rows
    )  # fmt: skip


def _signals_table(sheet: Sheet) -> Table:
    from livelag.report.sheet_words import hertz, seconds, volts_within

    columns = ("range", "settling square", "each stair", "hurried square", "out, peak to peak")
    table = new_table(*columns, title=sheet.stage.title, right=columns[1:])
    for row in sheet.signals:
        table.add_row(
            row.range_name, hertz(row.settle_hz), seconds(row.stair_s), hertz(row.hurried_hz),
            volts_within(row.swing_v),
        )  # fmt: skip
    return table


def _readings_table(sheet: Sheet) -> Table:
    from livelag.report.sheet_words import hertz, seconds_within, volts_within

    columns = ("range", "pot", "square", "time constant", "rise", "after it", "settled")
    table = new_table(*columns, right=columns[1:])
    last = ""
    for row in sheet.rows:
        limits = row.limits
        table.add_row(
            "" if limits.range_name == last else limits.range_name,
            f"{limits.rotation:g}",
            hertz(row.square_hz),
            seconds_within(limits.time_constant_s),
            seconds_within(limits.rise_s),
            volts_within(row.after_v),
            volts_within(row.settled_v),
        )
        last = limits.range_name
    return table
