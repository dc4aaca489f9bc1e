"""`livelag ranges`: time constants and arrival times at both ends of each range."""

from __future__ import annotations

import argparse
from itertools import pairwise
from typing import TYPE_CHECKING, Any

from livelag.cli.common import (
    add_command,
    add_preset,
    console,
    load_preset,
    new_table,
    seconds,
    show_json,
)

if TYPE_CHECKING:
    from livelag.circuit.stage import GlideStage


def add_to(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "ranges",
        "time constants and octave arrival at both ends of each range",
        "livelag ranges two-range-bipolar",
    )
    add_preset(parser)
    parser.set_defaults(run=run)


def run(args: argparse.Namespace) -> None:
    """Show the ranges of a stage."""
    stage = load_preset(args)
    answer = ranges_answer(stage, args.preset)
    if args.json:
        show_json(answer)
        return
    from livelag.units import format_value

    columns = ("range", "capacitance", "shortest", "longest", "octave in", "to")
    table = new_table(*columns, title=stage.title, right=columns[1:])
    for row in answer["ranges"]:
        table.add_row(
            row["name"],
            format_value(row["capacitance_f"], "F"),
            seconds(row["shortest_s"]),
            seconds(row["longest_s"]),
            seconds(row["octave_arrival_shortest_s"]),
            seconds(row["octave_arrival_longest_s"]),
        )
    out = console()
    out.print(table)
    out.print("Time constants at both ends of the pot; an octave is in when 5 cents from settled.")
    if answer["overlap_ratio"] is not None:
        ratio = answer["overlap_ratio"]
        out.print(
            f"Neighbouring ranges overlap by a factor of {ratio:.2f}."
            if ratio >= 1
            else f"Between ranges times from x1 to x{1 / ratio:.2f} are missing."
        )


def ranges_answer(stage: GlideStage, preset: str) -> dict[str, Any]:
    """Both ends of each range, and the least overlap of neighbours (under 1 is a gap)."""
    from livelag.circuit.stage import Setting

    rows: list[dict[str, Any]] = []
    for index, name in enumerate(stage.range_names):
        fast, slow = Setting(index, 0.0), Setting(index, 1.0)
        rows.append(
            {
                "name": name,
                "capacitance_f": stage.capacitance_f(index),
                "shortest_s": stage.time_constant_s(fast),
                "longest_s": stage.time_constant_s(slow),
                "octave_arrival_shortest_s": stage.octave_arrival_s(fast),
                "octave_arrival_longest_s": stage.octave_arrival_s(slow),
            }
        )
    ordered = sorted(rows, key=lambda row: row["shortest_s"])
    overlaps = [before["longest_s"] / after["shortest_s"] for before, after in pairwise(ordered)]
    return {"preset": preset, "ranges": rows, "overlap_ratio": min(overlaps, default=None)}
