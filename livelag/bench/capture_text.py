"""The shape of a capture's text: encoding, separator, where numbers start, what comes before.

Oscilloscopes export comma, semicolon or tab; decimal points or commas; any number of preamble rows
(``key,value`` above the numbers or to the left of the first of them); a row of names, perhaps a
row of units. The numbers themselves show what is what: the last rows looked at are data.
"""

from __future__ import annotations

import codecs
import re
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

from livelag.errors import FileError, InputError

LOOK_BYTES = 65_536
_SEPARATORS = (",", ";", "\t", "|", None)  # None is any run of spaces
_BOMS = (
    (codecs.BOM_UTF8, "utf-8-sig"),
    (codecs.BOM_UTF16_LE, "utf-16"),
    (codecs.BOM_UTF16_BE, "utf-16"),
)
_NOT_TEXT = {
    b"PK\x03\x04": "a spreadsheet or zip archive",
    b"\x1f\x8b": "a compressed archive",
    b"%PDF": "a PDF document",
    b"\x89PNG": "a picture",
    b"\xff\xd8\xff": "a picture",
    b"BM": "a picture",
    b"GIF8": "a picture",
    b"RIFF": "a sound or video file",
}
EXPECTED = "expected a CSV with a time column and two channels of numbers"


@dataclass(frozen=True)
class Layout:
    """How the text of a capture is laid out.

    Attributes:
        encoding: for `open`.
        separator: between cells; None is any run of spaces.
        decimal_comma: whether numbers are written with a comma.
        first_row: line number of the first row of data, from 0.
        columns: cell numbers that hold data, in order.
        cells: how many cells a full row has.
        preamble: rows of cells before the data, and cells to the left of it.
    """

    encoding: str
    separator: str | None
    decimal_comma: bool
    first_row: int
    columns: tuple[int, ...]
    cells: int
    preamble: tuple[tuple[str, ...], ...]


def number_in(cell: str, decimal_comma: bool) -> float | None:
    """The number that a cell holds, None if it holds text or nothing."""
    text = cell.strip().strip('"').strip()
    if decimal_comma:
        if "." in text:
            return None
        text = text.replace(",", ".")
    if not text or "_" in text:
        return None
    try:
        return float(text)
    except ValueError:
        return None


def split_cells(line: str, separator: str | None) -> list[str]:
    """The cells of a line, without blanks and quotes around them."""
    cells = line.split() if separator is None else line.split(separator)
    return [cell.strip().strip('"').strip() for cell in cells]


def find_layout(path: Path) -> Layout:
    """Look at the start of a file and say how it is laid out.

    Raises:
        FileError: if the file cannot be read.
        InputError: if it holds no rows of numbers.
    """
    try:
        with path.open("rb") as file:
            head = file.read(LOOK_BYTES)
            cut = bool(file.read(1))
    except OSError as error:
        raise FileError(f"{path}: cannot be read: {error.strerror}") from error
    encoding = _encoding(path, head)
    text = codecs.getincrementaldecoder(encoding)(errors="replace").decode(head)
    lines = re.split(r"\r\n|\n|\r", text)
    if cut and len(lines) > 1:
        lines.pop()  # cut short
    if not any(line.strip() for line in lines):
        raise InputError(f"{path}: is empty; {EXPECTED}")
    best: tuple[tuple[int, int], str | None, bool] | None = None
    for separator in _SEPARATORS:
        for decimal_comma in (False, True) if separator != "," else (False,):
            score = _score(lines, separator, decimal_comma)
            if score[0] and (best is None or score > best[0]):
                best = (score, separator, decimal_comma)
    if best is None:
        shown = next(line.strip() for line in lines if line.strip())
        raise InputError(
            f"{path}: holds no rows of numbers, it starts with {shown[:40]!r}; {EXPECTED}"
        )
    return _layout(lines, encoding, best[1], best[2])


def _encoding(path: Path, head: bytes) -> str:
    for mark, encoding in _BOMS:
        if head.startswith(mark):
            return encoding
    for start, what in _NOT_TEXT.items():
        if head.startswith(start):
            raise InputError(f"{path}: is {what}, not text; {EXPECTED}")
    even, odd = head[0::2], head[1::2]
    # UTF-16 without its mark: every other byte of plain text is zero.
    if len(head) > 8 and odd.count(0) > 0.9 * len(odd) and not even.count(0):
        return "utf-16-le"
    if len(head) > 8 and even.count(0) > 0.9 * len(even) and not odd.count(0):
        return "utf-16-be"
    if sum(byte < 9 or 13 < byte < 27 for byte in head) > 0.002 * len(head):
        raise InputError(f"{path}: is not text (it holds control bytes); {EXPECTED}")
    try:
        codecs.getincrementaldecoder("utf-8")().decode(head)
    except UnicodeDecodeError:
        return "latin-1"
    return "utf-8"


def _numeric_cells(cells: list[str], decimal_comma: bool) -> tuple[int, ...]:
    return tuple(i for i, cell in enumerate(cells) if number_in(cell, decimal_comma) is not None)


def _score(lines: list[str], separator: str | None, decimal_comma: bool) -> tuple[int, int]:
    """Columns of numbers in the last rows looked at, and how many of those rows have them."""
    last = [line for line in lines[-100:] if line.strip()][-30:]
    counts = []
    for line in last:
        cells = split_cells(line, separator)
        numeric = _numeric_cells(cells, decimal_comma)
        # Text right of a number is no data row of this shape; text on the left may be preamble.
        text = [i for i, cell in enumerate(cells) if cell and i not in numeric]
        bad = any(i > min(numeric, default=0) for i in text)
        counts.append(0 if bad and len(numeric) < 2 else len(numeric))
    usual = max(set(counts), key=lambda n: (counts.count(n), n)) if counts else 0
    return usual, counts.count(usual)


def _layout(lines: list[str], encoding: str, separator: str | None, decimal_comma: bool) -> Layout:
    rows = [split_cells(line, separator) for line in lines]
    filled = [i for i, row in enumerate(rows) if any(row)]
    usual: dict[tuple[int, ...], int] = {}
    for i in filled[-30:]:
        shape = _numeric_cells(rows[i], decimal_comma)
        if shape:
            usual[shape] = usual.get(shape, 0) + 1
    columns = max(usual, key=lambda shape: (usual[shape], len(shape)))
    starts = {i for i in filled if set(columns) <= set(_numeric_cells(rows[i], decimal_comma))}
    # Two rows of data in succession: a lone row of numbers above may be part of the preamble.
    first = next((i for i, j in pairwise(filled) if i in starts and j in starts), min(starts))
    preamble = [tuple(row) for row in rows[:first] if any(row)]
    left = min(columns)
    preamble += [tuple(row[:left]) for row in rows[first:] if left and any(row[:left])]
    cells = max(len(rows[i]) for i in filled if i >= first)
    return Layout(encoding, separator, decimal_comma, first, columns, cells, tuple(preamble))
