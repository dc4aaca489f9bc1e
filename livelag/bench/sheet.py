"""The bench sheet in numbers: what to set, what to expect and how far off it may be.

Everything comes from the closed form in `livelag.circuit`, with limits over the exact corners of
tolerances and data-sheet maxima (`livelag.bench.limits`).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from livelag.bench.limits import Limits, SettingLimits, WorstCase
from livelag.bench.sheet_cautions import cautions
from livelag.bench.sheet_parts import PartList, part_list
from livelag.bench.sheet_signals import (
    STAIRS,
    Levels,
    RangeSignals,
    levels,
    limits_of,
    range_signals,
    settle_hz,
    square_band,
    stair_band,
)
from livelag.circuit.network import Vector
from livelag.circuit.parts import require
from livelag.circuit.stage import GlideStage, Setting

ROTATIONS = (0.0, 0.25, 0.5, 0.75, 1.0)
MOST_RANGES = 5
MOST_CAPACITORS = 5
_POINTS = 241


@dataclass(frozen=True, slots=True)
class SheetRow:
    """What to expect at one position of range switch and pot.

    Attributes:
        limits: time constant, rise, gain and offset.
        square_hz: square wave that settles here.
        after_v: volts out one nominal time constant after its rising edge.
        settled_v: volts out at the end of its high level.
    """

    limits: SettingLimits
    square_hz: float
    after_v: Limits
    settled_v: Limits


@dataclass(frozen=True, slots=True)
class Trace:
    """An expected trace with its band.

    Attributes:
        range_name: the range.
        rotation: the pot.
        signal: ``edge``, ``staircase`` or ``hurried`` square wave.
        times_s: (points,) seconds; the signal's first edge is at 0.
        key_volts: (points,) volts in.
        nominal_v: (points,) volts out as designed.
        low_v: (points,) least.
        high_v: (points,) greatest.
    """

    range_name: str
    rotation: float
    signal: str
    times_s: Vector
    key_volts: Vector
    nominal_v: Vector
    low_v: Vector
    high_v: Vector


@dataclass(frozen=True, slots=True)
class Sheet:
    """Everything on the page.

    Attributes:
        stage: as designed.
        parts: its parts.
        levels: of the test signals.
        signals: for each range.
        rows: for each range, each of `ROTATIONS`.
        traces: for each range an edge at half turn, a staircase and a hurried square at full turn.
        cautions: sentences.
    """

    stage: GlideStage
    parts: PartList
    levels: Levels
    signals: tuple[RangeSignals, ...]
    rows: tuple[SheetRow, ...]
    traces: tuple[Trace, ...]
    cautions: tuple[str, ...]


def bench_sheet(stage: GlideStage) -> Sheet:
    """Work out the bench sheet of a stage.

    Raises:
        InputError: if the stage has more ranges, capacitors or parts than two pages hold, or its
            rails leave no room for a test signal.
    """
    for what, count, most in (
        ("ranges", len(stage.ranges), MOST_RANGES),
        ("capacitors", len(stage.capacitors), MOST_CAPACITORS),
    ):
        require(count <= most, f"the stage has {count} {what}; two pages hold {most} at most")
    worst = WorstCase(stage)
    at = levels(worst)
    parts = part_list(stage)
    every = range(len(stage.ranges))
    signals = tuple(range_signals(worst, index, at) for index in every)
    return Sheet(
        stage,
        parts,
        at,
        signals,
        tuple(_row(worst, Setting(index, turn), at) for index in every for turn in ROTATIONS),
        tuple(trace for index in every for trace in _traces(worst, index, at, signals[index])),
        cautions(stage, parts),
    )


def _row(worst: WorstCase, setting: Setting, at: Levels) -> SheetRow:
    limits = worst.limits(setting)
    hertz = settle_hz(limits)
    times = np.array([limits.time_constant_s.nominal, 0.5 / hertz])
    after, settled = limits_of(worst.step_volts(setting, at.low_v, at.high_v, times))
    return SheetRow(limits, hertz, after, settled)


def _traces(
    worst: WorstCase, index: int, at: Levels, signals: RangeSignals
) -> tuple[Trace, Trace, Trace]:
    half, full = Setting(index, 0.5), Setting(index, 1.0)
    name = signals.range_name

    tau = worst.stage.time_constant_s(half)
    times = np.concatenate([[-0.5 * tau, -1e-9 * tau], np.linspace(0.0, 6.0 * tau, _POINTS)])
    key = np.where(times < 0.0, at.low_v, at.high_v)
    # Before the edge the output rests where the step starts from.
    bands = worst.step_volts(half, at.low_v, at.high_v, np.maximum(times, 0.0))
    edge = Trace(name, half.rotation, "edge", times, key, *bands)

    stair_s = signals.stair_s
    times = np.linspace(0.0, STAIRS * stair_s, STAIRS * _POINTS)
    stairs = np.array(at.stairs_v)
    key = stairs[np.minimum((times / stair_s).astype(int), STAIRS - 1)]
    bands = stair_band(worst, full, at, stair_s, times)
    staircase = Trace(name, full.rotation, "staircase", times, key, *bands)

    half_s = 0.5 / signals.hurried_hz
    times = np.linspace(0.0, 4.0 * half_s, 4 * _POINTS - 3)
    key = np.where((times / half_s).astype(int) % 2 == 0, at.high_v, at.low_v)
    bands = square_band(worst, full, at, half_s, times)
    hurried = Trace(name, full.rotation, "hurried", times, key, *bands)
    return edge, staircase, hurried
