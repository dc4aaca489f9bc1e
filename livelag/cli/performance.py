"""Options that rendering and auditioning share: how keys sound, where controls stand."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from livelag.circuit.stage import GlideStage
    from livelag.notes.player import PlayerSettings
    from livelag.sound.parameters import Value


def add_key_options(group: argparse._ArgumentGroup) -> None:
    """Add the options that say how held keys become a note."""
    group.add_argument("--priority", metavar="RULE", help="which held key sounds: last, low, high")
    group.add_argument(
        "--retrigger", action="store_true", help="restart the level at every note, held or not"
    )
    group.add_argument(
        "--legato-only", action="store_true", help="glide only between overlapping notes"
    )


def add_setting_options(group: argparse._ArgumentGroup) -> None:
    """Add the options that say where the stage's controls stand."""
    group.add_argument("--rotation", type=float, metavar="X", help="pot, 0 to 1; default 0.5")
    group.add_argument("--range", metavar="NAME", help="range switch; default the first range")
    group.add_argument("--method", metavar="M", default="exact", help="exact (default) or bilinear")


def add_sound_options(group: argparse._ArgumentGroup, level_dbfs: float) -> None:
    """Add the options of the test oscillator and its level."""
    group.add_argument("--waveform", metavar="W", help="saw (default), pulse, triangle, sine")
    group.add_argument(
        "--pulse-width", type=float, metavar="X", help="0.02 to 0.98, for --waveform pulse"
    )
    group.add_argument(
        "--level", type=float, metavar="DBFS",
        help=f"peak of the waveform; default {level_dbfs:g}; edges ring a little beyond",
    )  # fmt: skip
    group.add_argument(
        "--velocity", type=float, metavar="X",
        help="how far velocity sets the level, 0 (default) to 1",
    )  # fmt: skip


def parameters_from(
    args: argparse.Namespace, stage: GlideStage, level_dbfs: float
) -> dict[str, Value]:
    """The patch's parameters that the options ask for.

    Raises:
        UnknownNameError: if there is no such range.
    """
    asked: dict[str, Value | None] = {
        "rotation": args.rotation,
        "range": None if args.range is None else float(stage.range_index(args.range)),
        "waveform": args.waveform,
        "pulse_width": args.pulse_width,
        "level": level_dbfs if args.level is None else args.level,
        "velocity": args.velocity,
    }
    return {name: value for name, value in asked.items() if value is not None}


def player_settings_from(args: argparse.Namespace, *, heed_switch: bool = True) -> PlayerSettings:
    """How keys become volts, as the options say.

    Raises:
        UnknownNameError: if there is no such priority.
    """
    from livelag.notes.player import PlayerSettings

    return PlayerSettings(
        priority="last" if args.priority is None else args.priority,
        retrigger=args.retrigger,
        glide="legato only" if args.legato_only else "always",
        heed_portamento_switch=heed_switch,
    )


def check_method(method: str) -> None:
    """Refuse a method that is neither of the two.

    Raises:
        UnknownNameError: naming those that exist.
    """
    from livelag.errors import UnknownNameError

    methods = ("exact", "bilinear")
    if method not in methods:
        raise UnknownNameError("method", method, methods)
