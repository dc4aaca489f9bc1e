"""A pitch curve as lines of a small drawing, with its ticks, and the same curve in words.

The drawing's units are those of its view box: x to the right, y down, whatever the size it is
shown at.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from livelag.circuit.stage import ARRIVAL_TOLERANCE_CENTS, Scale
from livelag.report.figures import note_marks
from livelag.units import note_name, volts_to_cents, volts_to_note

Samples = NDArray[np.float64]

WIDTH, HEIGHT = 480.0, 244.0
LEFT, RIGHT, TOP, BOTTOM = 44.0, 434.0, 22.0, 212.0  # of the field that holds the lines
LISTED_STEPS = 60  # a longer table is no help to anyone
NAMED_WITHIN_CENTS = 3.0  # a note named without cents is no further off


@dataclass(frozen=True, slots=True)
class Tick:
    """A mark on an axis.

    Attributes:
        place: x or y in the drawing.
        label: what stands there.
    """

    place: float
    label: str


@dataclass(frozen=True, slots=True)
class KeyStep:
    """A stretch of time over which the key volts stand still.

    Attributes:
        start_s: seconds from the beginning.
        note: the key in words.
        key_volts: volts before the glide.
        arrival_s: seconds until the glide is within 5 cents of where it settles, and stays
            there for the rest of it; None if it never is.
        to_go_cents: where the glide is at its end, less where it would settle.
    """

    start_s: float
    note: str
    key_volts: float
    arrival_s: float | None
    to_go_cents: float


@dataclass(frozen=True, slots=True)
class CurveDrawing:
    """Everything that a page draws and says of one curve.

    Attributes:
        seconds: length of the time axis.
        key_points: the line of the key volts, as ``x,y x,y ...``.
        glide_points: the line of the glide volts.
        times: ticks along the foot, in seconds.
        volts: ticks on the left.
        notes: ticks on the right.
        steps: the first `LISTED_STEPS` steps of the key volts.
        step_count: how many there are in all.
        spacing_s: seconds between the moments at which the curve was read.
    """

    seconds: float
    key_points: str
    glide_points: str
    times: tuple[Tick, ...]
    volts: tuple[Tick, ...]
    notes: tuple[Tick, ...]
    steps: tuple[KeyStep, ...]
    step_count: int
    spacing_s: float

    @property
    def late_count(self) -> int:
        """How many of the listed steps end before the glide arrives."""
        return sum(step.arrival_s is None for step in self.steps)


def draw_curve(
    times_s: Samples,
    key_volts: Samples,
    glide_volts: Samples,
    seconds: float,
    scale: Scale,
    settled_volts: Callable[[float], float],
) -> CurveDrawing:
    """Lay a curve out in the drawing's units.

    Args:
        times_s: (points,) seconds, rising.
        key_volts: (points,) volts before the glide.
        glide_volts: (points,) volts after it.
        seconds: how long the sound is.
        scale: what the volts mean.
        settled_volts: key volts -> glide volts after holding them for ever.
    """
    low, high = _span(key_volts, glide_volts, scale)

    def x(value: Samples | float) -> Samples | float:
        return LEFT + (RIGHT - LEFT) * value / seconds

    def y(value: Samples | float) -> Samples | float:
        return BOTTOM - (BOTTOM - TOP) * (value - low) / (high - low)

    starts = _starts(key_volts)
    corners = np.repeat(times_s[starts], 2)[1:], np.repeat(key_volts[starts], 2)[:-1]
    key_times = np.append(corners[0], times_s[-1])
    key_line = np.append(corners[1], key_volts[-1])
    marks = note_marks(low, high, scale)
    return CurveDrawing(
        seconds,
        _points(x(key_times), y(key_line)),
        _points(x(times_s), y(glide_volts)),
        tuple(Tick(float(x(v)), f"{v:g}") for v in _round_values(0.0, seconds)),
        tuple(Tick(float(y(v)), f"{v:g}") for v in _round_values(low, high)),
        tuple(Tick(float(y(volts)), name) for volts, name in marks),
        _steps(times_s, key_volts, glide_volts, starts, scale, settled_volts),
        len(starts),
        seconds / len(times_s),
    )


def _span(key_volts: Samples, glide_volts: Samples, scale: Scale) -> tuple[float, float]:
    """Lowest and highest volts to show, a semitone of air around the lines."""
    air = scale.volts_per_octave / 12.0
    low = min(float(key_volts.min()), float(glide_volts.min())) - air
    high = max(float(key_volts.max()), float(glide_volts.max())) + air
    return low, high


def _starts(key_volts: Samples) -> NDArray[np.intp]:
    """Where each stretch of equal key volts begins."""
    return np.concatenate(([0], np.flatnonzero(np.diff(key_volts)) + 1))


def _round_values(low: float, high: float) -> list[float]:
    from matplotlib.ticker import MaxNLocator

    values = MaxNLocator(nbins=6, steps=[1, 2, 5, 10]).tick_values(low, high)
    return [float(v) + 0.0 for v in values if low <= v <= high]


def _points(x: Samples | float, y: Samples | float) -> str:
    """The line through the points, less those that the eye cannot tell it from."""
    from matplotlib.path import Path

    line = Path(np.column_stack((x, y)))
    kept = line.cleaned(simplify=True)
    corners: Samples = np.asarray(kept.vertices, dtype=float)[kept.codes != Path.STOP]
    return " ".join(f"{px:.2f},{py:.2f}" for px, py in corners.tolist())


def _steps(
    times_s: Samples,
    key_volts: Samples,
    glide_volts: Samples,
    starts: NDArray[np.intp],
    scale: Scale,
    settled_volts: Callable[[float], float],
) -> tuple[KeyStep, ...]:
    ends = np.append(starts[1:], len(times_s))
    found = []
    for start, end in zip(starts[:LISTED_STEPS], ends[:LISTED_STEPS], strict=True):
        began, volts = float(times_s[start]), float(key_volts[start])
        to_go = volts_to_cents(
            glide_volts[start:end] - settled_volts(volts), scale.volts_per_octave
        )
        outside = np.flatnonzero(np.abs(to_go) > ARRIVAL_TOLERANCE_CENTS)
        settled = start if len(outside) == 0 else start + outside[-1] + 1
        arrival = None if settled == end else float(times_s[settled]) - began
        found.append(KeyStep(began, _note(volts, scale), volts, arrival, float(to_go[-1])))
    return tuple(found)


def _note(volts: float, scale: Scale) -> str:
    exact = volts_to_note(volts, scale.zero_volt_note, scale.volts_per_octave)
    nearest = round(exact)
    cents = 100.0 * (exact - nearest)
    return note_name(nearest) + ("" if abs(cents) < NAMED_WITHIN_CENTS else f" {cents:+.0f} cents")
