"""A drawer: the parts on hand, from a TOML or CSV file, each with its quantity.

TOML has a table for each lot:

    [[resistor]]
    value = "2k2"
    quantity = 10
    [[pot]]
    value = "220k"
    taper = "linear"
    [[capacitor]]
    value = "1u"
    kind = "polyester"
    tolerance = 0.1
    quantity = 2

CSV has the same as columns: part, value, kind, taper, tolerance, end, quantity. A quantity that
is not given is one; a tolerance that is not given is the usual one.
"""

from __future__ import annotations

import csv
from collections.abc import Callable, Iterable, Sequence
from pathlib import Path
from typing import Any

from livelag.bench.stock import TAPERS, Lot, Part, Pool, check_kinds
from livelag.circuit.kinds import CAPACITOR_KINDS
from livelag.circuit.parts import Capacitor, Pot, Resistor, Taper
from livelag.circuit.table import Table
from livelag.errors import FileError, InputError, UnknownNameError

MOST_LOTS = 1000
MOST_QUANTITY = 1_000_000
COLUMNS = ("part", "value", "kind", "taper", "tolerance", "end", "quantity")
SUFFIXES = (".toml", ".csv")


def load_drawer(
    path: Path,
    kinds: Sequence[str] | None = None,
    taper: str | None = None,
    *,
    can_reverse: bool = True,
) -> Pool:
    """Read a drawer; lots of equal parts are put together.

    Args:
        path: a ``.toml`` or ``.csv`` file.
        kinds: kinds of capacitor allowed; None allows all that suit the supply.
        taper: the only taper allowed; None allows all.
        can_reverse: whether the control voltage can reverse, which leaves out polarised parts.

    Raises:
        FileError: if the file cannot be read.
        InputError: if it is not a drawer, or has nothing left to build with; names the field.
        UnknownNameError: if it names a kind, taper or suffix that does not exist.
    """
    if path.suffix.lower() not in SUFFIXES:
        raise UnknownNameError("drawer suffix", path.suffix, SUFFIXES, where=str(path))
    check_kinds(kinds or (), can_reverse)
    if taper is not None and taper not in TAPERS:
        raise UnknownNameError("taper", taper, TAPERS)
    text = _read(path)
    rows = _toml_rows(text, path) if path.suffix.lower() == ".toml" else _csv_rows(text, path)
    if len(rows) > MOST_LOTS:
        raise InputError(f"{path}: has {len(rows)} lots; {MOST_LOTS} is the most")
    resistors = _lots(rows, "resistor", _resistor)
    pots = [lot for lot in _lots(rows, "pot", _pot) if taper in (None, lot.part.taper.name)]
    capacitors = _lots(rows, "capacitor", _capacitor)
    allowed = [lot for lot in capacitors if kinds is None or lot.part.kind in kinds]
    kept = [lot for lot in allowed if not (can_reverse and lot.part.kind_data.polarised)]
    pool = Pool(tuple(resistors), tuple(pots), tuple(kept), (), len(allowed) - len(kept), str(path))
    _check_not_empty(pool, "" if taper is None else f" with a {taper} taper", kinds)
    return pool


def _check_not_empty(pool: Pool, taper: str, kinds: Sequence[str] | None) -> None:
    kind = "" if kinds is None else f" of {' or '.join(kinds)}"
    if pool.left_out:
        kind += " that may be reversed (polarised ones are left out: the voltage can go negative)"
    for what, lots in (
        ("resistor", pool.resistors),
        (f"pot{taper}", pool.pots),
        (f"capacitor{kind}", pool.capacitors),
    ):
        if not lots:
            raise InputError(
                f"{pool.where}: the drawer has no {what}; it needs a resistor, a pot and a "
                "capacitor for each range"
            )


def _read(path: Path) -> str:
    try:
        return path.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError as error:
        raise InputError(f"{path}: not a text file in UTF-8") from error
    except OSError as error:
        raise FileError(f"{path}: cannot be read: {error.strerror}") from error


Rows = list[tuple[str, Table]]


def _toml_rows(text: str, path: Path) -> Rows:
    top = Table.parse(text, str(path), "a drawer")
    rows = [(part, row) for part in _MAKERS for row in top.tables(part)]
    top.finish()
    return rows


def _csv_rows(text: str, path: Path) -> Rows:
    try:
        lines = list(csv.reader(text.splitlines(), strict=True))
    except csv.Error as error:
        raise InputError(f"{path}: not CSV: {error}") from error
    header = [name.strip() for name in lines[0]] if lines else []
    for name in header:
        if name not in COLUMNS:
            raise UnknownNameError("column", name, COLUMNS, where=f"{path}: line 1")
    if len(set(header)) < len(header) or not {"part", "value"} <= set(header):
        raise InputError(
            f"{path}: line 1 is {','.join(header)!r}; it must name the columns, each once, part "
            f"and value among them: {', '.join(COLUMNS)}"
        )
    rows = []
    for number, line in enumerate(lines[1:], start=2):
        cells = [cell.strip() for cell in line]
        if not any(cells):
            continue
        where = f"line {number}"
        if len(cells) > len(header):
            raise InputError(
                f"{path}: {where} has {len(cells)} cells; there are {len(header)} columns"
            )
        content: dict[str, Any] = {n: c for n, c in zip(header, cells, strict=False) if c}
        part = content.pop("part", "")
        if part not in _MAKERS:
            raise UnknownNameError("part", part, _MAKERS, where=f"{path}: {where}.part")
        rows.append((part, Table(content, str(path), where)))
    return rows


def _lots(rows: Rows, name: str, make: Callable[[Table], Part]) -> list[Lot[Part]]:
    """Lots of one sort of part, equal ones put together, in the order of the file."""
    quantities: dict[Part, float] = {}
    for part_name, row in rows:
        if part_name == name:
            part = make(row)
            quantities[part] = quantities.get(part, 0) + _quantity(row)
            row.finish()
    return [Lot(part, quantity) for part, quantity in quantities.items()]


def _quantity(row: Table) -> float:
    quantity = row.number("quantity", "", 1.0)
    if not (1 <= quantity <= MOST_QUANTITY and quantity.is_integer()):
        raise InputError(
            f"{row.place('quantity')} is {quantity:g}; it must be a whole number from 1 to "
            f"{MOST_QUANTITY}: leave out what has run out"
        )
    return quantity


def _resistor(row: Table) -> Resistor:
    return row.build(
        Resistor,
        resistance_ohms=row.number("value", "ohm", required=True),
        tolerance=row.number("tolerance", "", 0.01),
    )


def _pot(row: Table) -> Pot:
    return row.build(
        Pot,
        resistance_ohms=row.number("value", "ohm", required=True),
        taper=_known(row, "taper", TAPERS, "linear"),
        tolerance=row.number("tolerance", "", 0.2),
        end_ohms=row.number("end", "ohm", 0.0),
    )


def _known(row: Table, key: str, known: dict[str, Taper], default: str) -> Taper:
    name = row.text(key, default)
    if name not in known:
        raise UnknownNameError(key, name, known, where=row.place(key))
    return known[name]


def _capacitor(row: Table) -> Capacitor:
    kind = row.text("kind", required=True)
    if kind not in CAPACITOR_KINDS:
        raise UnknownNameError("capacitor kind", kind, CAPACITOR_KINDS, where=row.place("kind"))
    return row.build(
        Capacitor,
        name="drawer",
        capacitance_f=row.number("value", "farad", required=True),
        kind=kind,
        tolerance=row.number("tolerance", "", CAPACITOR_KINDS[kind].tolerance),
    )


_MAKERS: Iterable[str] = ("resistor", "pot", "capacitor")
