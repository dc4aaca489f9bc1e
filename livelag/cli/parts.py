"""`livelag parts`: real part values for times picked by ear."""

from __future__ import annotations

import argparse
from pathlib import Path
from typing import TYPE_CHECKING, Any

from livelag.cli.common import DEFAULT_PRESET, add_command, load_preset, refuse, show_json, warn
from livelag.cli.extras import add_extras, check_extras, write_extras
from livelag.errors import InputError

if TYPE_CHECKING:
    from livelag.bench.stock import Pool
    from livelag.bench.wishes import Wishes
    from livelag.circuit.stage import GlideStage

_EXAMPLE = (
    "livelag parts --shortest 2ms --handover 70ms --longest 2.4s --overlap 2 --save ours.toml"
)
_SCORE = """
Every combination counts as tried: what is left out unseen cannot score less. A point
of score, less is better, is 5 % of time (root mean square over all ends; shown is the
worst), a cent of tuning at the slowest setting (insulation over an octave, bias at its
limit), a part more, or 5 mA of drive beyond 5 at the peak of a five-octave leap."""


def add_to(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the command."""
    parser = add_command(
        commands, "parts", "real part values for ranges picked by ear", _EXAMPLE
    )  # fmt: skip
    parser.description = f"{parser.description}\n{_SCORE}"
    _add_wishes(parser.add_argument_group("wishes, all of them time constants"))
    _add_stock(parser.add_argument_group("what to build with"))
    shown = parser.add_argument_group("what to show and write")
    shown.add_argument("--show", type=int, metavar="N", help="how many choices; default 8")
    shown.add_argument(
        "--choice", type=int, metavar="N", default=1, help="the one to detail and save; default 1"
    )
    shown.add_argument("--save", metavar="FILE", help="write the choice as a preset, .toml")
    add_extras(
        parser, "each range of every choice", "the ranges of every choice against the wishes"
    )
    parser.set_defaults(run=run)


def _add_wishes(group: argparse._ArgumentGroup) -> None:
    group.add_argument("--shortest", metavar="S", help="fastest useful time, such as 2ms")
    group.add_argument(
        "--handover", metavar="S[,S]",
        help="where a range hands over to the next; for three ranges two, with a comma",
    )  # fmt: skip
    group.add_argument("--longest", metavar="S", help="slowest useful time, such as 2.4s")
    group.add_argument(
        "--marks", metavar="FILE", help="take the times from a marks file (audition --by-ear)"
    )
    group.add_argument(
        "--ranges", type=int, metavar="N",
        help="1 to 3; default one more than hand-overs; without those, in equal ratios",
    )  # fmt: skip
    group.add_argument(
        "--overlap", metavar="Q",
        help="longest time of a range over shortest of the next; the hand-over is its middle; "
        "1 just meets, default 1.5",
    )  # fmt: skip
    group.add_argument(
        "--ends", metavar="A,B",
        help="rotations at which the ends are wished, such as 0.05,0.95; default 0,1",
    )  # fmt: skip
    group.add_argument(
        "--within", metavar="X", help="the most a time may be off; 0.25 is 25 %% (default)"
    )


def _add_stock(group: argparse._ArgumentGroup) -> None:
    group.add_argument(
        "--connect", metavar="LIST",
        help="ways to wire the switch: added (in parallel), exchanged, series-switched "
        "(exchanged, the series resistor too); default all",
    )  # fmt: skip
    group.add_argument("--resistors", metavar="E", help="E12, E24 (default) or E96")
    group.add_argument("--capacitors", metavar="E", help="E3, E6 (default) or E12")
    group.add_argument(
        "--kinds", metavar="LIST",
        help="kinds of capacitor allowed, such as 'polyester,bipolar electrolytic'",
    )  # fmt: skip
    group.add_argument(
        "--taper", metavar="T", help="linear, logarithmic or reverse logarithmic; default: fitting"
    )
    group.add_argument(
        "--drawer", metavar="FILE", help="use only the parts in this file, .toml or .csv"
    )
    group.add_argument(
        "--preset", metavar="PRESET", default=DEFAULT_PRESET,
        help=f"stage whose supply, scale, buffers and output stay; default {DEFAULT_PRESET}",
    )  # fmt: skip


def run(args: argparse.Namespace) -> None:
    """Search, show, and write what was asked for.

    Raises:
        InputError: if an option has a value it cannot take.
    """
    _check_options(args)
    check_extras(args)
    wishes = _wishes(args)
    if wishes.ranges == 1:
        for name in ("overlap", "connect"):
            if getattr(args, name) is not None:
                refuse(args, f"--{name} does not apply to one range; it has no neighbour")
    base = load_preset(args)
    pool = _pool(args, wishes, base)
    from livelag.bench.candidates import candidate_stage
    from livelag.bench.parts_search import DEFAULT_CANDIDATES, MOST_CANDIDATES, find_parts
    from livelag.cli.parts_answer import csv_rows, parts_answer

    shown = DEFAULT_CANDIDATES if args.show is None else args.show
    if not 1 <= shown <= MOST_CANDIDATES:
        raise InputError(f"--show is {shown}; it must be 1 to {MOST_CANDIDATES}")
    result = find_parts(wishes, pool, base, shown)
    if not 1 <= args.choice <= len(result.candidates):
        raise InputError(
            f"--choice is {args.choice}; there are choices 1 to {len(result.candidates)}"
        )
    stage = candidate_stage(result.candidates[args.choice - 1], wishes, base)
    for sentence in stage.warnings():
        warn(sentence)

    def draw() -> Any:
        from livelag.report.parts_figure import parts_figure

        return parts_figure(wishes, result.candidates)

    saved = None if args.save is None else stage
    written = write_extras(args, lambda: csv_rows(wishes, result.candidates), draw, saved)
    if args.json:
        show_json({**parts_answer(wishes, result, stage, args.choice), **written})
        return
    from livelag.cli.parts_tables import show_parts

    show_parts(wishes, result, stage, args.choice, written)


def _check_options(args: argparse.Namespace) -> None:
    typed = [
        name for name in ("shortest", "handover", "longest") if getattr(args, name) is not None
    ]
    if args.marks is not None and typed:
        refuse(args, f"--marks brings the times; leave out --{typed[0]}")
    if args.marks is None and not {"shortest", "longest"} <= set(typed):
        refuse(args, "give --shortest and --longest, and --handover if you have one; or --marks")
    if args.drawer is not None:
        for name in ("resistors", "capacitors"):
            if getattr(args, name) is not None:
                refuse(args, f"--{name} picks from a series; it does not apply to --drawer")
    elif args.ends is not None and args.taper is None:
        refuse(args, "--ends needs --taper, which says how much of the pot is left there")


def _wishes(args: argparse.Namespace) -> Wishes:
    from livelag.bench.marks import Marks
    from livelag.bench.wishes import wishes_from, wishes_of_marks

    more: dict[str, Any] = {}
    if args.overlap is not None:
        more["overlap_ratio"] = _number(args.overlap, "--overlap")
    if args.within is not None:
        more["within"] = _number(args.within, "--within")
    if args.ends is not None:
        more["ends"] = _numbers(args.ends, "--ends")
        if len(more["ends"]) != 2:
            raise InputError(
                f"--ends is {args.ends!r}; it must be two rotations, such as 0.05,0.95"
            )
    if args.connect is not None:
        more["connections"] = tuple(dict.fromkeys(_names(args.connect)))
    if args.marks is not None:
        return wishes_of_marks(Marks.load(Path(args.marks)), args.ranges, **more)
    return wishes_from(
        _number(args.shortest, "--shortest", "second"),
        () if args.handover is None else _numbers(args.handover, "--handover", "second"),
        _number(args.longest, "--longest", "second"),
        args.ranges,
        **more,
    )


def _pool(args: argparse.Namespace, wishes: Wishes, base: GlideStage) -> Pool:
    from livelag.bench.drawer import load_drawer
    from livelag.bench.stock import shop

    kinds = None if args.kinds is None else _names(args.kinds)
    reverses = base.supply.negative_v < 0
    if args.drawer is None:
        return shop(
            args.resistors or "E24", args.capacitors or "E6", kinds, args.taper,
            can_reverse=reverses,
        )  # fmt: skip
    pool = load_drawer(Path(args.drawer), kinds, args.taper, can_reverse=reverses)
    if pool.left_out:
        warn(
            f"{args.drawer}: polarised capacitors left out: {pool.left_out}; the control voltage "
            "can go negative on this supply, and reversed they can fail"
        )
    return pool


def _names(text: str) -> list[str]:
    return [name.strip() for name in text.split(",")]


def _number(text: str, where: str, unit: str = "") -> float:
    from livelag.units import parse_value

    return parse_value(text, unit, where)


def _numbers(text: str, where: str, unit: str = "") -> tuple[float, ...]:
    return tuple(_number(item, where, unit) for item in text.split(","))
