"""`livelag fit`: what an oscilloscope's capture says of a built stage."""

from __future__ import annotations

import argparse
from pathlib import Path
from typing import TYPE_CHECKING, Any

from livelag.cli.common import DEFAULT_PRESET, add_command, console, refuse, show_json, warn
from livelag.cli.extras import (
    Rows,
    add_extras,
    check_extras,
    keep_what_is_read,
    show_written,
    write_extras,
)
from livelag.errors import InputError, LivelagError

if TYPE_CHECKING:
    from livelag.circuit.stage import GlideStage, Setting
    from livelag.cli.fit_job import Found

_CAPTURE = "FILE[@RANGE:ROTATION]"


def add_to(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "fit",
        "time constant, gain and offset of a built stage from an oscilloscope's CSV, and whether "
        "it is within its bench sheet",
        "livelag fit scope.csv --range fast --rotation 0.5 --picture fit.png --save built.toml\n"
        "         livelag fit a.csv@fast:0 b.csv@fast:0.5 c.csv@fast:1 d.csv@slow:1",
    )
    parser.add_argument(
        "captures",
        metavar=_CAPTURE,
        nargs="+",
        help="CSV with the input and the output of the stage; several at known settings give the "
        "ratios of the parts",
    )
    plan = parser.add_argument_group("where the controls stood")
    plan.add_argument(
        "--preset", default=DEFAULT_PRESET, metavar="PRESET",
        help=f"the stage as planned, a shipped name or a TOML file; default {DEFAULT_PRESET}",
    )  # fmt: skip
    plan.add_argument("--range", metavar="NAME", help="the range switch, of captures without @")
    plan.add_argument(
        "--rotation", type=float, metavar="X", help="the pot, 0 to 1, of captures without @"
    )
    scope = parser.add_argument_group("oscilloscope")
    scope.add_argument(
        "--in", dest="input_channel", metavar="CHANNEL",
        help="name or number of the channel before the glide; found by itself if not given",
    )  # fmt: skip
    scope.add_argument(
        "--out", dest="output_channel", metavar="CHANNEL", help="same of the channel after it"
    )
    scope.add_argument(
        "--sample-interval", metavar="TIME", help="such as 20u, where the file has no time column"
    )
    scope.add_argument(
        "--volts-accuracy", type=float, metavar="X",
        help="relative accuracy of its channels, which gain and offset allow for; default 0.03",
    )  # fmt: skip
    add_extras(
        parser, "time, input, output, fit and residual of every row fitted", "data, fit, residual"
    )
    parser.add_argument("--save", metavar="FILE", help="the stage as built, a preset (.toml)")
    parser.set_defaults(run=run)


def run(args: argparse.Namespace) -> None:
    """Fit the captures and show what came of them.

    Raises:
        InputError: if an option has a value it cannot take, or a capture cannot tell.
    """
    check_extras(args)
    interval_s = _interval(args)
    accuracy = _accuracy(args)
    from livelag.circuit.presets import load_stage

    stage = load_stage(args.preset)
    named = [_named(args, stage, text) for text in args.captures]
    _check_named(args, named)
    keep_what_is_read(args, [path for path, _ in named])
    for sentence in stage.warnings():
        warn(sentence)
    from livelag.cli import fit_job, fit_tables

    found = fit_job.fit_all(args, stage, named, interval_s, accuracy)
    built = None
    if args.save is not None:
        built = fit_job.as_built(stage, found, accuracy)

    def draw() -> Any:
        from livelag.report.fit_figure import fit_figure

        title = stage.title if found.captures[0].setting else ""  # not said to be of this stage
        return fit_figure(title, [(one.where, one.fit) for one in found.captures])

    written = write_extras(args, lambda: _csv_rows(found), draw, built)
    if args.json:
        show_json({**fit_job.answer(args.preset, stage, found), **written})
        return
    out = console()
    fit_tables.show(out, stage, found, accuracy)
    saved = written.pop("saved", None)
    show_written(out, written)
    if saved is not None:
        out.print(f"as built in {saved}; hear it beside the plan:")
        for preset in (args.preset, saved):
            out.print(f"  livelag render {preset} {_hear(found)}", soft_wrap=True)
        out.print(f"  livelag audition {saved} {_hear(found)}", soft_wrap=True)


def _hear(found: Found) -> str:
    one = found.captures[0]
    name = one.range_name if one.range_name.isalnum() else f"'{one.range_name}'"
    assert one.setting is not None
    return f"--range {name} --rotation {one.setting.rotation:g}"


def _interval(args: argparse.Namespace) -> float | None:
    if args.sample_interval is None:
        return None
    from livelag.units import parse_value

    value = parse_value(args.sample_interval, "second", "--sample-interval")
    if value <= 0.0:
        raise InputError(f"--sample-interval is {args.sample_interval!r}; it must be more than 0")
    return value


def _accuracy(args: argparse.Namespace) -> float:
    from livelag.bench.fit_verdict import VOLTS_ACCURACY

    accuracy = args.volts_accuracy
    if accuracy is None:
        return VOLTS_ACCURACY
    if not 0.0 <= accuracy < 1.0:
        raise InputError(
            f"--volts-accuracy is {accuracy!r}; it must be a fraction from 0 to 1 (3 % is 0.03)"
        )
    return float(accuracy)


def _named(args: argparse.Namespace, stage: GlideStage, text: str) -> tuple[Path, Setting | None]:
    """A capture's file and its setting, None if none was given."""
    from livelag.circuit.stage import Setting

    whole = Path(text)
    name, mark, setting = text.rpartition("@")
    if not mark or whole.is_file():
        if args.range is None and args.rotation is None:
            return whole, None
        name = args.range if args.range is not None else _only_range(args, stage)
        if args.rotation is None:
            refuse(args, "--range needs --rotation: a verdict is for one setting of the pot")
        return whole, Setting(stage.range_index(name), args.rotation)
    range_name, mark, turn = setting.rpartition(":")
    try:
        rotation = float(turn)
    except ValueError:
        rotation = float("nan")
    if not mark or rotation != rotation:
        raise InputError(
            f"{text}: {setting!r} is not a setting; write it as FILE@RANGE:ROTATION, such as "
            f"{name or 'a.csv'}@{stage.range_names[0]}:0.5"
        )
    try:
        return Path(name), Setting(stage.range_index(range_name), rotation)
    except LivelagError as error:
        raise InputError(f"{text}: {error}") from None


def _only_range(args: argparse.Namespace, stage: GlideStage) -> str:
    if len(stage.range_names) > 1:
        refuse(args, f"--rotation needs --range, one of {', '.join(stage.range_names)}")
    return stage.range_names[0]


def _check_named(args: argparse.Namespace, named: list[tuple[Path, Setting | None]]) -> None:
    settings = [setting for _, setting in named]
    marked = [text for text in args.captures if "@" in text and not Path(text).is_file()]
    told = args.range is not None or args.rotation is not None
    if told and len(marked) == len(named):
        refuse(args, "--range and --rotation are for captures without @RANGE:ROTATION")
    if len(named) > 1 and (None in settings or not marked):
        refuse(args, "several captures each need their setting: FILE@RANGE:ROTATION")
    if args.volts_accuracy is not None and None in settings:
        refuse(args, "--volts-accuracy is for a verdict, which needs --range and --rotation")
    if args.save is not None and None in settings:
        refuse(args, "--save needs to know where the controls stood: --range and --rotation")


def _csv_rows(found: Found) -> Rows:
    header = ("capture", "time_s", "input_v", "output_v", "fitted_v", "residual_v", "used")

    def rows() -> Any:
        for one in found.captures:
            trace = one.fit.trace
            columns = (trace.times_s, trace.input_v, trace.output_v, one.fit.fitted_v)
            for row in zip(*columns, one.fit.residual_v, trace.usable, strict=True):
                yield one.fit.name, *(float(value) for value in row[:-1]), bool(row[-1])

    return header, rows()
