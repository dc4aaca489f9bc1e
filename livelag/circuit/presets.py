"""Presets: one stage per TOML file, read strictly and written so that reading gives the same stage.

Reading asks for every key once and refuses any other (see `livelag.circuit.table`).
"""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path
from typing import Any

from livelag.circuit.kinds import BUFFER_CLASSES, CAPACITOR_KINDS, Absorption
from livelag.circuit.parts import Buffer, Capacitor, Pot, Resistor, Taper
from livelag.circuit.stage import GlideStage, Range, Scale, Supply
from livelag.circuit.table import Table
from livelag.errors import FileError, InputError, UnknownNameError
from livelag.files import WholeFiles
from livelag.units import format_value, parse_value

DEFAULT_PRESET = "two-range-film"
_TAPERS: dict[str, Callable[..., Taper]] = {
    "linear": Taper.linear,
    "logarithmic": Taper.logarithmic,
    "reverse logarithmic": Taper.reverse_logarithmic,
}


def presets_folder() -> Path:
    """Folder of the shipped presets: inside the wheel, or beside the package in a checkout."""
    package = Path(__file__).resolve().parent.parent
    inside = package / "presets"
    return inside if inside.is_dir() else package.parent / "presets"


def preset_names() -> tuple[str, ...]:
    """Names of the shipped presets, the default first."""
    names = sorted(path.stem for path in presets_folder().glob("*.toml"))
    return tuple(sorted(names, key=lambda name: name != DEFAULT_PRESET))


def load_stage(name_or_path: str) -> GlideStage:
    """Load a shipped preset by name, or any TOML file by path.

    Raises:
        UnknownNameError: if it is neither a shipped name nor the path of a file.
        FileError: if the file cannot be read.
        InputError: if the file does not describe a stage; the message names the key.
    """
    if name_or_path in preset_names():
        return load_preset_file(presets_folder() / f"{name_or_path}.toml")
    path = Path(name_or_path)
    # Unlike Path.exists, os.path.exists is quiet about names too long to be a file's.
    if path.suffix == ".toml" or os.sep in name_or_path or os.path.exists(path):  # noqa: PTH110
        return load_preset_file(path)
    raise UnknownNameError("preset", name_or_path, preset_names())


def load_preset_file(path: Path) -> GlideStage:
    """Load a stage from a TOML file.

    Raises:
        FileError: if the file cannot be read.
        InputError: if it is not TOML or does not describe a stage; the message names the key.
        UnknownNameError: if it names a part class, taper or capacitor that does not exist.
    """
    try:
        text = path.read_text(encoding="utf-8-sig")  # some editors write a byte order mark
    except UnicodeDecodeError as error:
        raise InputError(f"{path}: not a text file in UTF-8; a preset is a TOML file") from error
    except OSError as error:
        raise FileError(f"{path}: cannot be read: {error.strerror}") from error
    return parse_stage(text, str(path))


def parse_stage(text: str, where: str) -> GlideStage:
    """Build a stage from the text of a TOML file; ``where`` names it in messages.

    Raises:
        InputError: if it is not TOML or does not describe a stage; the message names the key.
        UnknownNameError: if it names a part class, taper or capacitor that does not exist.
    """
    return _stage(Table.parse(text, where, "a preset"))


def _stage(top: Table) -> GlideStage:
    supply, scale = top.table("supply"), top.table("scale")
    input_side, output_side = top.table("input"), top.table("output")
    time, switch = top.table("time", required=True), top.table("switch")
    capacitors = tuple(_capacitor(row) for row in top.tables("capacitor"))
    known = tuple(capacitor.name for capacitor in capacitors)
    fields: dict[str, Any] = {
        "title": top.text("title", required=True),
        "about": top.text("about"),
        "supply": supply.build(
            Supply,
            positive_v=supply.number("positive", "volt", 12.0),
            negative_v=supply.number("negative", "volt", -12.0),
        ),
        "scale": scale.build(
            Scale,
            volts_per_octave=scale.number("volts_per_octave", "volt", 1.0),
            zero_volt_note=scale.number("zero_volt_note", "", 36.0),
        ),
        "pull_down": _resistor(input_side, "pull_down"),
        "input_buffer": _buffer(input_side),
        "series": _resistor(time, "series", required=True),
        "pot": _pot(time.table("pot", required=True)),
        "capacitors": capacitors,
        "ranges": tuple(_range(row, known) for row in top.tables("range")),
        "bleed": _resistor(switch, "bleed"),
        "output_buffer": _buffer(output_side),
        "output_series": _resistor(output_side, "series"),
        "load": _resistor(output_side, "load"),
    }
    for table in (supply, scale, input_side, output_side, time, switch, top):
        table.finish()
    return top.build(GlideStage, **fields)


def _resistor(table: Table, key: str, *, required: bool = False) -> Resistor | None:
    if key not in table and not required:
        return None
    if not table.is_table(key):
        return table.build(
            Resistor, at=key, resistance_ohms=table.number(key, "ohm", required=required)
        )
    inner = table.table(key)
    part = inner.build(
        Resistor,
        resistance_ohms=inner.number("value", "ohm", required=True),
        tolerance=inner.number("tolerance", "", 0.01),
    )
    inner.finish()
    return part


def _pot(table: Table) -> Pot:
    pot = table.build(
        Pot,
        resistance_ohms=table.number("value", "ohm", required=True),
        taper=_taper(table),
        tolerance=table.number("tolerance", "", 0.2),
        end_ohms=table.number("end", "ohm", 0.0),
    )
    table.finish()
    return pot


def _taper(table: Table) -> Taper:
    if table.is_table("taper"):
        law = table.table("taper")
        if "law" in law:
            taper = _law_taper(law, law.text("law"))
        else:
            taper = law.build(
                Taper.measured,
                rotations=law.numbers("rotation"),
                fractions=law.numbers("fraction"),
            )
        law.finish()
        return taper
    name = table.text("taper", "linear")
    if name not in _TAPERS:
        raise UnknownNameError("taper", name, _TAPERS, where=table.place("taper"))
    return _TAPERS[name]()


def _law_taper(table: Table, law: str) -> Taper:
    if law not in _TAPERS:
        raise UnknownNameError("taper", law, _TAPERS, where=table.place("law"))
    if law == "linear" or "middle" not in table:  # a linear track has no middle to choose
        return _TAPERS[law]()
    return table.build(_TAPERS[law], middle=table.number("middle", ""))


def _capacitor(table: Table) -> Capacitor:
    kind = table.text("kind", required=True)
    if kind not in CAPACITOR_KINDS:
        raise UnknownNameError("capacitor kind", kind, CAPACITOR_KINDS, where=table.place("kind"))
    insulation = table.number("insulation", "ohm") if "insulation" in table else None
    branches = None
    if "absorption" in table:
        branches = tuple(_absorption(row) for row in table.tables("absorption"))
    part = table.build(
        Capacitor,
        name=table.text("name", required=True),
        capacitance_f=table.number("value", "farad", required=True),
        kind=kind,
        tolerance=table.number("tolerance", "", CAPACITOR_KINDS[kind].tolerance),
        insulation_ohms=insulation,
        absorption=branches,
    )
    table.finish()
    return part


def _absorption(table: Table) -> Absorption:
    branch = Absorption(
        table.number("fraction", "", required=True), table.number("time", "second", required=True)
    )
    table.finish()
    return branch


def _range(table: Table, known: tuple[str, ...]) -> Range:
    connects = table.texts("connects")
    for name in connects:
        if name not in known:
            raise UnknownNameError("capacitor", name, known, where=table.place("connects"))
    position = table.build(
        Range,
        name=table.text("name", required=True),
        connects=connects,
        series=_resistor(table, "series"),
    )
    table.finish()
    return position


def _buffer(table: Table) -> Buffer:
    if not table.is_table("buffer"):
        name = table.text("buffer", "ideal")
        if name not in BUFFER_CLASSES:
            raise UnknownNameError(
                "buffer class", name, BUFFER_CLASSES, where=table.place("buffer")
            )
        return Buffer.of_class(name)
    row = table.table("buffer")
    offset = row.number("offset", "volt", 0.0)
    bias = row.number("bias", "ampere", 0.0)
    if row.is_table("headroom"):
        headroom = row.table("headroom")
        positive = headroom.number("positive", "volt", required=True)
        negative = headroom.number("negative", "volt", required=True)
        headroom.finish()
    else:
        positive = negative = row.number("headroom", "volt", 0.0)
    buffer = row.build(
        Buffer,
        name="custom",
        offset_v=offset,
        bias_a=bias,
        headroom_positive_v=positive,
        headroom_negative_v=negative,
        offset_limit_v=row.number("offset_limit", "volt", abs(offset)),
        bias_limit_a=row.number("bias_limit", "ampere", abs(bias)),
    )
    row.finish()
    return buffer


# Writing


def save_stage(stage: GlideStage, path: Path) -> None:
    """Write a stage as a preset, whole or not at all.

    Raises:
        FileError: if the file cannot be written.
    """
    with WholeFiles() as files:
        files.temporary(path).write_text(stage_to_toml(stage), encoding="utf-8")


def stage_to_toml(stage: GlideStage) -> str:
    """The text of a preset that reads back as an equal stage."""
    import tomli_w

    return tomli_w.dumps(_without_none(_stage_dict(stage)), multiline_strings=False)


def _stage_dict(stage: GlideStage) -> dict[str, Any]:
    return {
        "title": stage.title,
        "about": stage.about,
        "supply": {
            "positive": _written(stage.supply.positive_v),
            "negative": _written(stage.supply.negative_v),
        },
        "scale": {
            "volts_per_octave": stage.scale.volts_per_octave,
            "zero_volt_note": stage.scale.zero_volt_note,
        },
        "input": {
            "pull_down": _resistor_dict(stage.pull_down),
            "buffer": _buffer_value(stage.input_buffer),
        },
        "time": {
            "series": _resistor_dict(stage.series),
            "pot": {
                "value": _written(stage.pot.resistance_ohms),
                "taper": _taper_value(stage.pot.taper),
                "tolerance": stage.pot.tolerance,
                "end": _written(stage.pot.end_ohms),
            },
        },
        "switch": None if stage.bleed is None else {"bleed": _resistor_dict(stage.bleed)},
        "output": {
            "buffer": _buffer_value(stage.output_buffer),
            "series": _resistor_dict(stage.output_series),
            "load": _resistor_dict(stage.load),
        },
        "capacitor": [_capacitor_dict(capacitor) for capacitor in stage.capacitors],
        "range": [
            {
                "name": position.name,
                "connects": list(position.connects),
                "series": _resistor_dict(position.series),
            }
            for position in stage.ranges
        ],
    }


def _resistor_dict(part: Resistor | None) -> dict[str, Any] | None:
    if part is None:
        return None
    return {"value": _written(part.resistance_ohms), "tolerance": part.tolerance}


def _capacitor_dict(part: Capacitor) -> dict[str, Any]:
    branches = None
    if part.absorption is not None:
        branches = [{"fraction": b.fraction, "time": b.time_s} for b in part.absorption]
    return {
        "name": part.name,
        "value": _written(part.capacitance_f),
        "kind": part.kind,
        "tolerance": part.tolerance,
        "insulation": None if part.insulation_ohms is None else _written(part.insulation_ohms),
        "absorption": branches,
    }


def _taper_value(taper: Taper) -> str | dict[str, Any]:
    if taper == Taper.linear():
        return "linear"
    if taper.name == "logarithmic" and len(taper.rotations) == 3:
        return {"law": taper.name, "middle": taper.fractions[1]}
    if taper.name == "reverse logarithmic" and len(taper.rotations) == 3:
        middle = 1.0 - taper.fractions[1]
        if Taper.reverse_logarithmic(middle) == taper:
            return {"law": taper.name, "middle": middle}
    return {"rotation": list(taper.rotations), "fraction": list(taper.fractions)}


def _buffer_value(buffer: Buffer) -> str | dict[str, Any]:
    if buffer.name in BUFFER_CLASSES and buffer == Buffer.of_class(buffer.name):
        return buffer.name
    return {
        "offset": _written(buffer.offset_v),
        "bias": _written(buffer.bias_a),
        "headroom": {
            "positive": _written(buffer.headroom_positive_v),
            "negative": _written(buffer.headroom_negative_v),
        },
        "offset_limit": _written(buffer.offset_limit_v),
        "bias_limit": _written(buffer.bias_limit_a),
    }


def _written(number: float) -> str | float:
    """Engineering notation where it reads back as the very same number, else the number."""
    text = format_value(number, digits=6).replace(" ", "")
    try:
        return text if parse_value(text) == number else number
    except InputError:
        return number


def _without_none(value: Any) -> Any:
    if isinstance(value, dict):
        return {key: _without_none(inner) for key, inner in value.items() if inner is not None}
    if isinstance(value, list):
        return [_without_none(inner) for inner in value]
    return value
