"""`livelag ranges`: the times of each range, how they meet, and where the pot's travel goes."""

from __future__ import annotations

import argparse
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
from livelag.cli.extras import Rows, add_extras, check_extras, show_written, write_extras

if TYPE_CHECKING:
    from rich.table import Table

    from livelag.circuit.stage import GlideStage

CSV_STEPS = 100


def add_to(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "ranges",
        "times at both ends of each range, how ranges meet, where the pot's travel goes",
        "livelag ranges two-range-bipolar --picture ranges.png",
    )
    add_preset(parser)
    add_extras(
        parser,
        f"times at {CSV_STEPS + 1} rotations of every range",
        "time against rotation for every range and taper",
    )
    parser.set_defaults(run=run)


def run(args: argparse.Namespace) -> None:
    """Show the ranges of a stage."""
    check_extras(args)
    stage = load_preset(args)
    answer = ranges_answer(stage, args.preset)

    def draw() -> Any:
        from livelag.report.ranges_figure import ranges_figure

        return ranges_figure(stage)

    written = write_extras(args, lambda: _rows(stage), draw)
    if args.json:
        show_json({**answer, **written})
        return
    out = console()
    out.print(_times_table(stage.title, answer))
    out.print(
        "Time constant, rise from 10 to 90 %, and when an octave is within 5 cents for good, at "
        "both ends of the pot."
    )
    for row in answer["neighbours"]:
        out.print(_meeting(row))
    out.print(_travel_table(answer))
    out.print(
        "Share of the pot's travel spent in each decade of the time constant, and the rotation "
        f"from which the glide is heard:\nan octave takes {answer['audible_s'] * 1e3:.0f} ms, "
        "the least shift in time heard between short tones (Friberg and Sundberg 1992)."
    )
    show_written(out, written)


def ranges_answer(stage: GlideStage, preset: str) -> dict[str, Any]:
    """The answer of the command; the overlap ratio is the least of neighbours, None for one."""
    from livelag.bench.ranges import AUDIBLE_S, all_range_times, all_travel, neighbours

    times = all_range_times(stage)
    meetings = neighbours(stage)
    return {
        "preset": preset,
        "ranges": [
            {
                "name": row.name,
                "capacitance_f": row.capacitance_f,
                "shortest_s": row.fastest.time_constant_s,
                "longest_s": row.slowest.time_constant_s,
                "rise_shortest_s": row.fastest.rise_s,
                "rise_longest_s": row.slowest.rise_s,
                "octave_arrival_shortest_s": row.fastest.octave_arrival_s,
                "octave_arrival_longest_s": row.slowest.octave_arrival_s,
                "audible_from_rotation": row.audible_from,
            }
            for row in times
        ],
        "overlap_ratio": min((row.overlap_ratio for row in meetings), default=None),
        "neighbours": [
            {"faster": row.faster, "slower": row.slower, "overlap_ratio": row.overlap_ratio}
            for row in meetings
        ],
        "audible_s": AUDIBLE_S,
        "travel": [
            {
                "range": row.range_name,
                "taper": row.taper,
                "fitted": row.fitted,
                "audible_from_rotation": row.audible_from,
                "decades": [
                    {"from_s": 10.0**decade, "to_s": 10.0 ** (decade + 1), "share": share}
                    for decade, share in row.shares.items()
                ],
            }
            for row in all_travel(stage)
        ],
    }


def _rows(stage: GlideStage) -> Rows:
    from livelag.bench.ranges import pot_position
    from livelag.circuit.stage import Setting

    def rows() -> Any:
        for index, name in enumerate(stage.range_names):
            for step in range(CSV_STEPS + 1):
                at = pot_position(stage, Setting(index, step / CSV_STEPS))
                yield name, at.rotation, at.time_constant_s, at.rise_s, at.octave_arrival_s

    return ("range", "rotation", "time_constant_s", "rise_s", "octave_arrival_s"), rows()


def _times_table(title: str, answer: dict[str, Any]) -> Table:
    from livelag.units import format_value

    columns = ("range", "capacitance", "shortest", "longest", "rise", "to", "octave in", "to ")
    table = new_table(*columns, title=title, right=columns[1:])
    for row in answer["ranges"]:
        ends = [
            seconds(row[f"{what}{end}_s"])
            for what in ("", "rise_", "octave_arrival_")
            for end in ("shortest", "longest")
        ]
        table.add_row(row["name"], format_value(row["capacitance_f"], "F"), *ends)
    return table


def _meeting(row: dict[str, Any]) -> str:
    ratio = row["overlap_ratio"]
    pair = f"{row['faster']!r} and {row['slower']!r}"
    if ratio >= 1:
        return f"{pair} overlap by a factor of {ratio:.3g}."
    return f"Between {pair} there is a gap: times across a factor of {1 / ratio:.3g} are missing."


def _travel_table(answer: dict[str, Any]) -> Table:
    from livelag.units import format_value

    spans = sorted({(d["from_s"], d["to_s"]) for row in answer["travel"] for d in row["decades"]})
    names = [f"{format_value(low, 's')}\nto {format_value(high, 's')}" for low, high in spans]
    columns = ("range", "taper", "heard from", *names)
    table = new_table(*columns, right=columns[2:])
    last = None
    for row in answer["travel"]:
        shares = {d["from_s"]: f"{100 * d['share']:.1f} %" for d in row["decades"]}
        heard = row["audible_from_rotation"]
        table.add_row(
            "" if row["range"] == last else row["range"],
            f"{row['taper']} (fitted)" if row["fitted"] else row["taper"],
            _heard(heard),
            *(shares.get(low, "") for low, _ in spans),
        )
        last = row["range"]
    return table


def _heard(rotation: float | None) -> str:
    if rotation is None:
        return "never"
    return "always" if rotation == 0.0 else f"{100 * rotation:.2g} %"
