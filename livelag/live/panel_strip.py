"""The strip: the last seconds of key volts against glide volts, in braille cells.

Glide volts are a solid line, key volts a dotted one that never joins its steps, so the two can be
told apart without colour.
"""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from livelag.live.panel_text import ACCENT, LABEL, PLAIN, Line, fixed
from livelag.live.snapshot import Snapshot
from livelag.units import NOTES_PER_OCTAVE, note_name

_DOT_ROWS, _DOT_COLUMNS = 4, 2
#: Bits of a braille cell by row and column (Unicode, block 2800).
_BITS = np.array([[0x01, 0x08], [0x02, 0x10], [0x04, 0x20], [0x40, 0x80]], np.uint32)
_BRAILLE = 0x2800
_KEY_DOT_EVERY = 3
_LEAST_NOTES = 12
_FAR = 600.0
_STEPS = (1, 2, 3, 4, 6, 12, 24, 36, 48, 60, 120, 240, 480)
_AXIS = 5
_SECOND_STEPS = (0.1, 0.2, 0.5, 1.0, 2.0, 5.0, 10.0, 20.0, 60.0)

Notes = NDArray[np.float64]


def strip_lines(snapshot: Snapshot, width: int, height: int) -> list[Line]:
    """The strip with its axes.

    Args:
        snapshot: what to show.
        width: cells.
        height: lines, the time axis included; 2 or more.

    Returns:
        ``height`` lines of at most ``width`` cells.
    """
    rows = height - 1
    columns = max(1, width - _AXIS - 1)
    key = _notes(snapshot.strip_key_volts, snapshot)
    glide = _notes(snapshot.strip_glide_volts, snapshot)
    low, high = _span(key, glide, snapshot)
    top = high + 0.5
    per_dot = (high - low + 1.0) / (rows * _DOT_ROWS)
    key_dots = _draw(key, columns, rows, top, per_dot, solid=False)
    glide_dots = _draw(glide, columns, rows, top, per_dot, solid=True)
    labels = _note_labels(low, high, rows)
    codes = _cells(key_dots | glide_dots)
    glide_here = _cells(glide_dots) != _BRAILLE
    lines = [
        _join_row(
            Line()
            .add(labels.get(at, "").rjust(_AXIS), LABEL)
            .add("┤" if at in labels else "│", LABEL),
            codes[at],
            glide_here[at],
        )
        for at in range(rows)
    ]
    seconds = len(key) * snapshot.strip_interval_s
    return [*lines, _time_axis(seconds, columns)]


def _notes(volts: NDArray[np.float32], snapshot: Snapshot) -> Notes:
    """Volts as note numbers, held within what can be labelled; NaN where there are none."""
    scale = snapshot.volts_per_octave
    scale = scale if math.isfinite(scale) and scale > 0 else 1.0
    zero = snapshot.zero_volt_note
    zero = zero if math.isfinite(zero) else 0.0
    with np.errstate(all="ignore"):
        notes = zero + np.asarray(volts, np.float64).reshape(-1) * (NOTES_PER_OCTAVE / scale)
        return np.clip(notes, -_FAR, _FAR)


def _span(key: Notes, glide: Notes, snapshot: Snapshot) -> tuple[int, int]:
    """Lowest and highest note of the strip, in steps of three so that it does not tremble."""
    seen = np.concatenate([key, glide])
    seen = seen[np.isfinite(seen)]
    if not len(seen):
        middle = snapshot.zero_volt_note
        middle = min(_FAR, max(-_FAR, middle)) if math.isfinite(middle) else 60.0
        seen = np.array([middle])
    low = math.floor((float(seen.min()) - 0.5) / 3) * 3
    high = math.ceil((float(seen.max()) + 0.5) / 3) * 3
    while high - low < _LEAST_NOTES:
        low, high = low - 3, high + 3
    return low, high


def _draw(
    notes: Notes, columns: int, rows: int, top: float, per_dot: float, *, solid: bool
) -> NDArray[np.bool_]:
    """Dots of one trace, (rows x 4, columns x 2)."""
    width, height = columns * _DOT_COLUMNS, rows * _DOT_ROWS
    if not len(notes):
        return np.zeros((height, width), np.bool_)
    # A gap becomes a place far outside the picture.
    places = np.where(np.isnan(notes), -1e6, np.floor((top - notes) / per_dot))
    starts = np.minimum(np.arange(width) * len(places) // width, len(places) - 1)
    last = places[np.append(starts[1:], len(places)) - 1]  # the newest point of each column
    if not solid:
        dots: NDArray[np.bool_] = np.arange(height)[:, None] == last
        dots[:, np.arange(width) % _KEY_DOT_EVERY != 0] = False
        return dots
    above, below = np.minimum.reduceat(places, starts), np.maximum.reduceat(places, starts)
    before = np.concatenate([places[:1], last[:-1]])
    joined = (before >= 0) & (above >= 0)
    # Reach to just beside the column before, so that a steep glide stays one line.
    above = np.where(joined, np.minimum(above, before + (before < above)), above)
    below = np.where(joined, np.maximum(below, before - (before > below)), below)
    line = np.arange(height)[:, None]
    filled: NDArray[np.bool_] = (line >= np.maximum(above, 0)) & (line <= below)
    return filled


def _cells(dots: NDArray[np.bool_]) -> NDArray[np.uint32]:
    rows, columns = dots.shape[0] // _DOT_ROWS, dots.shape[1] // _DOT_COLUMNS
    blocks = dots.reshape(rows, _DOT_ROWS, columns, _DOT_COLUMNS)
    sums = np.einsum("rdce,de->rc", blocks.astype(np.uint32), _BITS)
    codes: NDArray[np.uint32] = (sums + _BRAILLE).astype(np.uint32)
    return codes


def _join_row(line: Line, codes: NDArray[np.uint32], glide_here: NDArray[np.bool_]) -> Line:
    """Append a row of cells, in runs of one style."""
    text = codes.astype("<u4").tobytes().decode("utf-32-le").replace(chr(_BRAILLE), " ")
    bounds = [0, *(np.flatnonzero(np.diff(glide_here)) + 1).tolist(), len(text)]
    for start, stop in pairwise(bounds):
        line.add(text[start:stop], ACCENT if glide_here[start] else PLAIN)
    return line


def _note_labels(low: int, high: int, rows: int) -> dict[int, str]:
    """Names of notes by the row they stand in, at least two rows apart."""
    span = high - low + 1
    step = next((s for s in _STEPS if s * rows / span >= 2), _STEPS[-1])
    first = math.ceil(low / step) * step
    return {
        min(rows - 1, int((high + 0.5 - note) * rows / span)): note_name(note)
        for note in range(first, high + 1, step)
    }


def _time_axis(seconds: float, columns: int) -> Line:
    """Seconds before now under the strip, now at the right."""
    line = Line().to(_AXIS).add("└", LABEL)
    cells = ["─"] * columns
    if math.isfinite(seconds) and seconds > 0:
        per_s = columns / seconds
        step = next((s for s in _SECOND_STEPS if s * per_s >= len(_ago(s)) + 5), math.inf)
        for count in range(1, int(min(seconds / step, columns)) + 1):
            _place(cells, round(columns - 1 - count * step * per_s), _ago(count * step))
    _place(cells, columns - 3, "now")
    return line.add("".join(cells), LABEL)


def _ago(time_s: float) -> str:
    return f"-{fixed(time_s, 0 if time_s == round(time_s) else 1)} s"


def _place(cells: list[str], column: int, text: str) -> None:
    """Write a label from a column on, where it fits."""
    if column >= 0 and column + len(text) <= len(cells):
        cells[column : column + len(text)] = text
