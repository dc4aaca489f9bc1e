"""`livelag spread`: what part tolerances do to the ranges of a stage."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING, Any

from livelag.cli.common import (
    add_command,
    add_preset,
    console,
    load_preset,
    new_table,
    refuse,
    seconds,
    show_json,
)
from livelag.cli.extras import Rows, add_extras, check_extras, show_written, write_extras
from livelag.cli.progress import progress_bar
from livelag.errors import InputError

if TYPE_CHECKING:
    from collections.abc import Iterator

    from rich.table import Table

    from livelag.bench.spread import Spread, SpreadResult
    from livelag.circuit.stage import GlideStage

DEFAULT_BUILDS, DEFAULT_SEED, DEFAULT_DISTRIBUTION = 100_000, 1, "uniform"
MOST_CSV_BUILDS = 1_000_000


def add_to(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "spread",
        "what part tolerances do to the ranges, over many builds and at the exact corners",
        "livelag spread two-range-bipolar --builds 20000 --seed 7 --build 12 --save worst.toml",
    )
    add_preset(parser)
    drawn = parser.add_argument_group("builds")
    drawn.add_argument(
        "--builds", type=int, metavar="N", help=f"how many; default {DEFAULT_BUILDS}"
    )
    drawn.add_argument(
        "--seed", type=int, metavar="S",
        help=f"the same seed draws the same builds; default {DEFAULT_SEED}",
    )  # fmt: skip
    drawn.add_argument(
        "--distribution", metavar="D",
        help="uniform within the tolerance (default), or normal: the tolerance at two standard "
        "deviations and cut there",
    )  # fmt: skip
    drawn.add_argument(
        "--build", type=int, metavar="K", help="write build K, from 1, as a preset; with --save"
    )
    drawn.add_argument("--save", metavar="FILE", help="the preset to write, .toml")
    add_extras(
        parser, f"parts and times of every build, up to {MOST_CSV_BUILDS:,}",
        "how both ends of every range scatter",
    )  # fmt: skip
    parser.set_defaults(run=run)


def run(args: argparse.Namespace) -> None:
    """Show the spread, and write one build if asked.

    Raises:
        InputError: if an option has a value it cannot take.
    """
    if (args.build is None) != (args.save is None):
        refuse(args, "--build and --save go together")
    check_extras(args)
    builds = DEFAULT_BUILDS if args.builds is None else args.builds
    seed = DEFAULT_SEED if args.seed is None else args.seed
    distribution = args.distribution or DEFAULT_DISTRIBUTION
    if args.csv is not None and builds > MOST_CSV_BUILDS:
        raise InputError(
            f"--csv with {builds} builds is too long a file; {MOST_CSV_BUILDS} is the most"
        )
    stage = load_preset(args)
    from livelag.bench.spread import build_stage, spread

    chosen = None
    if args.build is not None:
        chosen = build_stage(stage, args.build, builds, seed, distribution)
    show = not args.json and builds > MOST_CSV_BUILDS  # fewer are done at once
    with progress_bar("drawing builds", builds, show=show) as progress:
        result = spread(stage, builds, seed, distribution, progress)

    def draw() -> Any:
        from livelag.report.spread_figure import spread_figure

        return spread_figure(stage, result)

    written = write_extras(args, lambda: _csv_rows(stage, builds, seed, distribution), draw, chosen)
    if args.json:
        show_json({**_answer(args.preset, stage, result, seed, distribution), **written})
        return
    _show(stage, result, seed, distribution)
    saved = written.pop("saved", None)
    show_written(console(), written)
    if saved is not None:
        console().print(f"build {args.build} in {saved}: livelag render {saved}")


def _answer(
    preset: str, stage: GlideStage, result: SpreadResult, seed: int, distribution: str
) -> dict[str, Any]:
    from livelag.bench.builds import Recipe

    return {
        "preset": preset,
        "builds": result.builds,
        "seed": seed,
        "distribution": distribution,
        "ranges": [
            {
                "name": name,
                "shortest_s": _numbers(result.of(name, "shortest")),
                "longest_s": _numbers(result.of(name, "longest")),
            }
            for name in stage.range_names
        ],
        "overlaps": [
            {"neighbours": row.of, "ratio": _numbers(row)}
            for row in result.spreads
            if row.what == "overlap"
        ],
        "gap_fraction": result.gap_fraction,
        "parts": [
            {"name": part.name, f"nominal_{part.unit}": part.nominal, "tolerance": part.tolerance}
            for part in Recipe(stage).parts
        ],
    }


def _numbers(row: Spread) -> dict[str, Any]:
    low, middle, high = row.quantiles
    return {
        "nominal": row.nominal,
        "p2_5": low,
        "p50": middle,
        "p97_5": high,
        "lowest": row.lowest,
        "highest": row.highest,
        "lowest_build": row.lowest_build,
        "highest_build": row.highest_build,
        "variance_shares": row.blame,
        "variance_shares_linear": row.linear_blame,
    }


def _csv_rows(stage: GlideStage, builds: int, seed: int, distribution: str) -> Rows:
    import numpy as np

    from livelag.bench.builds import Recipe, draw

    recipe = Recipe(stage)
    header = (
        "build",
        *(f"{part.name} {part.unit}" for part in recipe.parts),
        *(f"{name} {what} s" for name in stage.range_names for what in ("shortest", "longest")),
    )

    def rows() -> Iterator[list[float]]:
        build = 0
        for deviates in draw(builds, len(recipe.parts), seed, distribution):
            shortest, longest = recipe.times(deviates)
            ends = np.stack([shortest, longest], axis=2).reshape(len(deviates), -1)
            for values in np.column_stack([recipe.values(deviates), ends]).tolist():
                build += 1
                yield [build, *values]

    return header, rows()


def _show(stage: GlideStage, result: SpreadResult, seed: int, distribution: str) -> None:
    out = console()
    out.print(_times_table(stage, result, f"{stage.title}: {result.builds:,} builds, seed {seed}"))
    out.print(
        f"Time constants of builds with {_LAWS[distribution]} parts, and the least and most that "
        "parts inside their\ntolerances can give; the builds that come nearest can be written "
        "with --build K --save FILE."
    )
    for row in result.spreads:
        if row.what == "overlap":
            out.print(_overlap(row))
    if result.gap_fraction is not None:
        out.print(f"{100 * result.gap_fraction:.3g} % of the builds have a gap between ranges.")
    if any(row.blame for row in result.spreads):
        out.print(_blame_table(stage, result))
        out.print(
            "Share of the variance of the time that each part is to blame for (squared "
            "correlation with its logarithm)."
        )


_LAWS = {"uniform": "uniform", "normal": "normal (tolerance at two standard deviations, cut there)"}


def _times_table(stage: GlideStage, result: SpreadResult, title: str) -> Table:
    columns = (
        "range", "end", "nominal", "2.5 %", "50 %", "97.5 %", "least", "most", "least in build",
        "most in build",
    )  # fmt: skip
    table = new_table(*columns, title=title, right=columns[2:])
    for name in stage.range_names:
        for what in ("shortest", "longest"):
            row = result.of(name, what)
            times = (row.nominal, *row.quantiles, row.lowest, row.highest)
            table.add_row(
                name if what == "shortest" else "",
                what,
                *(seconds(value) for value in times),
                str(row.lowest_build),
                str(row.highest_build),
            )
    return table


def _overlap(row: Spread) -> str:
    low, _, high = row.quantiles
    return (
        f"{row.of}: longest over shortest is {row.nominal:.3g} as designed, {low:.3g} to "
        f"{high:.3g} in 95 % of the builds, {row.lowest:.3g} at worst (under 1 is a gap)."
    )


def _blame_table(stage: GlideStage, result: SpreadResult) -> Table:
    ends = [result.of(name, what) for name in stage.range_names for what in ("shortest", "longest")]
    columns = ("part", *(f"{row.of}\n{row.what}" for row in ends))
    table = new_table(*columns, right=columns[1:])
    for part in ends[0].blame or next(row.blame for row in ends if row.blame):
        table.add_row(part, *(f"{100 * row.blame.get(part, 0.0):.1f} %" for row in ends))
    return table
