"""The numbers of a capture, read fast in blocks of lines; a slow second look finds faults."""

from __future__ import annotations

import io
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from livelag.bench.capture_text import EXPECTED, Layout, number_in, split_cells
from livelag.errors import FileError, InputError

Rows = NDArray[np.float64]
BLOCK_CHARACTERS = 8_000_000
MOST_BYTES = 300_000_000
_EMPTY = ("", "-", "--", "---", "n/a", "N/A", "#N/A")


def read_numbers(path: Path, layout: Layout, progress: Callable[[int], None]) -> Rows:
    """Numbers (rows, columns) of a capture; an empty cell is NaN.

    Args:
        path: the file.
        layout: from `find_layout`.
        progress: told how many bytes have been read so far.

    Raises:
        FileError: if the file cannot be read.
        InputError: if it is too large, or a cell holds text; the message names line and column.
    """
    size = path.stat().st_size
    if size > MOST_BYTES:
        raise InputError(
            f"{path}: is {size / 1e6:,.0f} MB, at most {MOST_BYTES / 1e6:,.0f} MB are read; export "
            "one or two steps of the input, or fewer points: 10,000 are plenty"
        )
    blocks = []
    try:
        with path.open("rb") as raw:
            file = io.TextIOWrapper(raw, encoding=layout.encoding, errors="replace")
            for first_line, lines in _blocks(file, layout.first_row):
                blocks.append(_parse(path, layout, first_line, lines))
                progress(raw.tell())
    except OSError as error:
        raise FileError(f"{path}: cannot be read: {error.strerror}") from error
    if not blocks:
        raise InputError(f"{path}: holds no rows of numbers; {EXPECTED}")
    return np.concatenate(blocks)


def _blocks(file: io.TextIOWrapper, skip: int) -> Iterator[tuple[int, list[str]]]:
    for _ in range(skip):
        file.readline()
    line = skip
    while lines := file.readlines(BLOCK_CHARACTERS):
        yield line, lines
        line += len(lines)


def _parse(path: Path, layout: Layout, first_line: int, lines: list[str]) -> Rows:
    if not any(line.strip() for line in lines):
        return np.empty((0, len(layout.columns)))
    text = lines
    if layout.decimal_comma:
        text = "".join(lines).replace(",", ".").splitlines()
    try:
        return np.loadtxt(
            text, delimiter=layout.separator, usecols=layout.columns, ndmin=2, comments=None
        )
    except ValueError:
        return _parse_slowly(path, layout, first_line, lines)


def _parse_slowly(path: Path, layout: Layout, first_line: int, lines: list[str]) -> Rows:
    rows = []
    for number, line in enumerate(lines, start=first_line + 1):
        if not line.strip():
            continue
        cells = split_cells(line.rstrip("\r\n"), layout.separator)
        rows.append([_value(path, layout, number, cells, column) for column in layout.columns])
    return np.array(rows, dtype=np.float64).reshape(-1, len(layout.columns))


def _value(path: Path, layout: Layout, number: int, cells: list[str], column: int) -> float:
    cell = cells[column] if column < len(cells) else ""
    value = number_in(cell, layout.decimal_comma)
    if value is not None:
        return value
    if cell in _EMPTY:
        return float("nan")
    raise InputError(
        f"{path}: line {number}, column {column + 1} is {cell[:40]!r}; it must be a number"
    )
