"""A capture: what an oscilloscope recorded, as times and volts, whatever its CSV looked like."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from livelag.bench.capture_numbers import read_numbers
from livelag.bench.capture_preamble import Column, columns_of, sample_interval_s
from livelag.bench.capture_stamps import even_stamps
from livelag.bench.capture_text import EXPECTED, find_layout
from livelag.errors import FileError, InputError

Vector = NDArray[np.float64]
Matrix = NDArray[np.float64]
FEWEST_ROWS = 16
LARGEST_V, LATEST_S = 1e6, 1e10


@dataclass(frozen=True)
class Capture:
    """Times and channels of one recording.

    Attributes:
        name: the file.
        times_s: (rows,) rising.
        channel_names: as the file names them, or ``column N``.
        volts: (channels, rows).
        notes: sentences about what had to be mended or left out.
    """

    name: str
    times_s: Vector
    channel_names: tuple[str, ...]
    volts: Matrix
    notes: tuple[str, ...] = ()


def read_capture(
    path: Path,
    interval_s: float | None = None,
    progress: Callable[[int], None] = lambda done: None,
) -> Capture:
    """Read a capture from a CSV file.

    Args:
        path: the file.
        interval_s: seconds between samples, more than 0; overrides what the file says.
        progress: told how many bytes have been read so far.

    Raises:
        FileError: if the file cannot be read.
        InputError: if it is not a capture; the message says what was found and expected.
    """
    if path.is_dir():
        raise FileError(f"{path}: is a folder; name a CSV file")
    layout = find_layout(path)
    columns = columns_of(layout)
    stated_s = interval_s if interval_s is not None else sample_interval_s(layout)
    rows = read_numbers(path, layout, progress)
    notes: list[str] = []
    if len(columns) > 1 and not np.isfinite(rows[:, 1:]).any():
        raise InputError(f"{path}: no channel holds a number, only NaN or blanks; {EXPECTED}")
    time_at = _time_column(path, columns, rows, stated_s, interval_s is not None)
    channels = [i for i in range(len(columns)) if i != time_at and not _is_counter(rows[:, i])]
    alive = [i for i in channels if np.isfinite(rows[:, i]).any()]
    for i in channels:
        if i not in alive:
            notes.append(f"{columns[i].name!r} holds no number and is left out")
    if len(alive) < 2:
        only = ", ".join(repr(columns[i].name) for i in alive) or "none"
        raise InputError(
            f"{path}: holds one channel only ({only}); expected two, before and after the glide"
            if alive
            else f"{path}: holds no channel beside the time; {EXPECTED}"
        )
    used = alive if time_at is None else [*alive, time_at]
    kept = np.isfinite(rows[:, used]).all(axis=1)
    if not kept.all():
        notes.append(f"rows with blanks or NaN are left out: {int((~kept).sum()):,}")
    if int(kept.sum()) < FEWEST_ROWS:
        raise InputError(
            f"{path}: holds {int(kept.sum())} whole rows of numbers; at least {FEWEST_ROWS} are "
            "needed, some hundred are better"
        )
    scales = np.array([[columns[i].scale] for i in alive])
    volts: Matrix = np.asarray(rows[kept][:, alive].T * scales, dtype=np.float64)
    if time_at is None:
        assert stated_s is not None
        times: Vector = np.flatnonzero(kept).astype(np.float64) * stated_s
    else:
        times = rows[kept, time_at] * columns[time_at].scale
        times, volts, said = even_stamps(str(path), times, volts)
        notes += said
    _check_sizes(path, times, volts)
    names = tuple(columns[i].name for i in alive)
    return Capture(str(path), times, names, volts, tuple(notes))


def _check_sizes(path: Path, times_s: Vector, volts: Matrix) -> None:
    """Refuse what cannot be seconds and volts.

    Raises:
        InputError: naming the value.
    """
    largest = float(np.abs(volts).max())
    if largest > LARGEST_V:
        raise InputError(f"{path}: holds {largest:.3g} V; expected volts, at most {LARGEST_V:g}")
    latest = float(np.abs(times_s).max())
    if latest > LATEST_S:
        raise InputError(f"{path}: holds a time of {latest:.3g} s; expected {LATEST_S:g} at most")


def _time_column(
    path: Path, columns: tuple[Column, ...], rows: Matrix, stated_s: float | None, told: bool
) -> int | None:
    """Which column holds time; None where the sample interval takes its place."""
    named = [i for i, column in enumerate(columns) if column.is_time]
    if told:
        return None
    if named:
        return named[0]
    first = rows[:, 0][np.isfinite(rows[:, 0])]
    steps = np.diff(first)
    rising = len(first) > 1 and bool((steps >= 0).all()) and first[-1] > first[0]
    counts = rising and bool((steps == 1.0).all())
    if stated_s is not None and (counts or not rising):
        return None
    if rising and not counts and len(columns) > 2:
        return 0
    if rising and not counts:
        raise InputError(f"{path}: holds time and one channel only; expected two channels")
    what = "its first column only counts rows" if counts else "no column holds time"
    raise InputError(
        f"{path}: {what} and the preamble states no sample interval; export with a time column, or "
        "give --sample-interval"
    )


def _is_counter(column: Vector) -> bool:
    """Whether a column rises in equal steps from end to end: a count of rows or a second time."""
    finite = column[np.isfinite(column)]
    if len(finite) < FEWEST_ROWS:
        return False
    steps = np.diff(finite)
    mean = (finite[-1] - finite[0]) / (len(finite) - 1)
    return bool(mean > 0 and np.all(np.abs(steps - mean) < 0.05 * mean))
