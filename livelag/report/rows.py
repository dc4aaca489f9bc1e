"""Rows of numbers as CSV, for a spreadsheet or a script."""

from __future__ import annotations

import csv
from collections.abc import Iterable, Sequence
from pathlib import Path


def write_csv(path: Path, header: Sequence[str], rows: Iterable[Sequence[object]]) -> None:
    """Write a header and rows; numbers keep twelve digits, None is an empty cell.

    Raises:
        OSError: if the file cannot be written.
    """
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file)
        writer.writerow(header)
        writer.writerows([_cell(value) for value in row] for row in rows)


def _cell(value: object) -> object:
    if isinstance(value, bool):
        return int(value)
    return f"{value:.12g}" if isinstance(value, float) else value
