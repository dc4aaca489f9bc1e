"""`livelag tuning`: what a stage does to the tuning of a held note, by cause."""

from __future__ import annotations

import argparse
import re
from typing import TYPE_CHECKING, Any

from livelag.cli.common import add_command, add_preset, console, load_preset, new_table, show_json
from livelag.cli.extras import Rows, add_extras, check_extras, show_written, write_extras
from livelag.errors import InputError

if TYPE_CHECKING:
    from collections.abc import Sequence

    from rich.table import Table

    from livelag.bench.tuning import Compass, Tuning
    from livelag.bench.tuning_fix import Fix
    from livelag.circuit.stage import GlideStage

DEFAULT_POSITIONS, MOST_POSITIONS, CSV_POSITIONS = 5, 1001, 101
WORDS = {
    "input_offset": "the offset of the input buffer",
    "output_offset": "the offset of the output buffer",
    "bias_current": "the bias current through the pot",
    "insulation": "the insulation of the capacitors",
    "output_divider": "the divider of output resistor and load",
    "swing": "the swing of the buffers",
}


def add_to(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "tuning",
        "tuning error of a held note along the pot, by cause, and what to change",
        "livelag tuning bipolar-drift --picture tuning.png",
    )
    add_preset(parser)
    asked = parser.add_argument_group("what counts")
    asked.add_argument(
        "--positions", type=int, metavar="N",
        help=f"rotations from 0 to 1 in each range, 2 to {MOST_POSITIONS}; "
        f"default {DEFAULT_POSITIONS}",
    )  # fmt: skip
    asked.add_argument(
        "--notes", metavar="LOW-HIGH",
        help="MIDI notes that are to be in tune; default five octaves up from 0 V",
    )  # fmt: skip
    asked.add_argument(
        "--cents", type=float, metavar="N", help="what a single cause may be worth; default 2"
    )
    add_extras(
        parser, f"{CSV_POSITIONS} rotations of every range", "error against rotation by cause"
    )
    parser.set_defaults(run=run)


def run(args: argparse.Namespace) -> None:
    """Show the tuning error."""
    check_extras(args)
    from livelag.bench.tuning import Compass, tuning_along_pot
    from livelag.bench.tuning_fix import GOAL_CENTS, advise

    stage = load_preset(args)
    compass = Compass.above_zero_volts(stage) if args.notes is None else _compass(args.notes)
    goal = GOAL_CENTS if args.cents is None else args.cents
    rows = tuning_along_pot(stage, _rotations(args.positions), compass)
    fix = advise(stage, rows, compass, goal)

    def draw() -> Any:
        from livelag.report.tuning_figure import tuning_figure

        return tuning_figure(stage, compass)

    written = write_extras(args, lambda: _csv_rows(stage, compass), draw)
    if args.json:
        show_json({**_answer(args.preset, compass, rows, goal, fix), **written})
        return
    out = console()
    out.print(_typical_table(f"{stage.title}: typical parts", rows))
    out.print(
        f"Cents at 0 V and cents per octave above it, below 0 is flat; swing is what the buffers "
        f"cut off note {compass.lowest} or {compass.highest}."
    )
    out.print(_limits_table(rows))
    out.print(
        "With every part as bad as its data sheet allows: the worst case is the sum of all "
        "causes, the root of the sum of squares what is likely."
    )
    out.print(_verdict(rows, goal, fix))
    show_written(out, written)


def _compass(text: str) -> Compass:
    from livelag.bench.tuning import Compass

    found = re.fullmatch(r"\s*(\d{1,3})\s*-\s*(\d{1,3})\s*", text, re.ASCII)
    if found is None:
        raise InputError(f"--notes is {text!r}; write two MIDI notes such as 36-96")
    return Compass(int(found[1]), int(found[2]))


def _rotations(positions: int | None) -> list[float]:
    count = DEFAULT_POSITIONS if positions is None else positions
    if not 2 <= count <= MOST_POSITIONS:
        raise InputError(f"--positions is {count}; it must be 2 to {MOST_POSITIONS}")
    return [number / (count - 1) for number in range(count)]


def _answer(
    preset: str, compass: Compass, rows: Sequence[Tuning], goal: float, fix: Fix | None
) -> dict[str, Any]:
    from livelag.bench.tuning import UNITS
    from livelag.bench.tuning_fix import dominating

    at = dominating(rows)
    return {
        "preset": preset,
        "lowest_note": compass.lowest,
        "highest_note": compass.highest,
        "positions": [_position(row) for row in rows],
        "cause_units": UNITS,
        "dominating": {
            "cause": at.dominant,
            "worth_cents": at.worth_cents[at.dominant],
            "range": at.range_name,
            "rotation": at.rotation,
        },
        "goal_cents": goal,
        "advice": None if fix is None else fix.sentence,
    }


def _position(row: Tuning) -> dict[str, Any]:
    limits = row.limits
    return {
        "range": row.range_name,
        "rotation": row.rotation,
        "offset_cents": row.offset_cents,
        "scale_cents_per_octave": row.scale_cents_per_octave,
        "causes": row.causes,
        "dominating": row.dominant,
        "limits": {
            "worst_offset_cents": limits.worst_offset_cents,
            "rss_offset_cents": limits.rss_offset_cents,
            "worst_scale_cents_per_octave": limits.worst_scale_cents_per_octave,
            "rss_scale_cents_per_octave": limits.rss_scale_cents_per_octave,
            "causes": limits.causes,
        },
    }


def _csv_rows(stage: GlideStage, compass: Compass) -> Rows:
    from livelag.bench.tuning import CAUSES, UNITS, tuning_along_pot

    rows = tuning_along_pot(stage, _rotations(CSV_POSITIONS), compass)
    header = (
        "range", "rotation", "offset_cents", "scale_cents_per_octave",
        *(f"{cause}_{UNITS[cause]}" for cause in CAUSES),
        "worst_offset_cents", "rss_offset_cents",
        "worst_scale_cents_per_octave", "rss_scale_cents_per_octave",
    )  # fmt: skip
    return header, (
        (
            row.range_name, row.rotation, row.offset_cents, row.scale_cents_per_octave,
            *(row.causes[cause] for cause in CAUSES),
            row.limits.worst_offset_cents, row.limits.rss_offset_cents,
            row.limits.worst_scale_cents_per_octave, row.limits.rss_scale_cents_per_octave,
        )
        for row in rows
    )  # fmt: skip


def _typical_table(title: str, rows: Sequence[Tuning]) -> Table:
    columns = (
        "range", "rotation", "offset", "input", "output", "bias", "scale", "insulation", "divider",
        "swing",
    )  # fmt: skip
    table = new_table(*columns, title=title, right=columns[1:])
    last = ""
    for row in rows:
        causes = row.causes
        table.add_row(
            "" if row.range_name == last else row.range_name,
            f"{row.rotation:.4g}",
            _signed(row.offset_cents),
            _signed(causes["input_offset"]),
            _signed(causes["output_offset"]),
            _signed(causes["bias_current"]),
            _signed(row.scale_cents_per_octave),
            _signed(causes["insulation"]),
            _signed(causes["output_divider"]),
            _signed(causes["swing"]),
        )
        last = row.range_name
    return table


def _limits_table(rows: Sequence[Tuning]) -> Table:
    columns = (
        "range", "rotation", "offset, worst", "root of squares", "scale, worst", "root of squares ",
    )  # fmt: skip
    table = new_table(*columns, right=columns[1:])
    last = ""
    for row in rows:
        limits = row.limits
        table.add_row(
            "" if row.range_name == last else row.range_name,
            f"{row.rotation:.4g}",
            f"{limits.worst_offset_cents:.2f}",
            f"{limits.rss_offset_cents:.2f}",
            f"{limits.worst_scale_cents_per_octave:.3f}",
            f"{limits.rss_scale_cents_per_octave:.3f}",
        )
        last = row.range_name
    return table


def _signed(value: float) -> str:
    """Two decimals at least, three significant digits of what is smaller."""
    if value == 0.0:
        return "0"
    return f"{value:+.2f}" if abs(value) >= 0.1 else f"{value:+.2g}"


def _verdict(rows: Sequence[Tuning], goal: float, fix: Fix | None) -> str:
    from livelag.bench.tuning_fix import dominating

    at = dominating(rows)
    worth = at.worth_cents[at.dominant]
    where = f"up to {worth:.3g} cents in range {at.range_name!r} at rotation {at.rotation:.4g}"
    most = f"Most comes from {WORDS[at.dominant]}: {where}."
    if fix is None:
        return f"{most} That is within {goal:g} cents: nothing needs changing."
    return f"{most}\nTo bring it within {goal:g} cents: {fix.sentence}."
