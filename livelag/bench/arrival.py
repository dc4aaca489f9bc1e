"""Whether the notes of a song arrive in tune before they end, and how long a glide lets them.

Arrival is measured against where the stage settles for each note: what is wrong with the settled
pitch itself is `livelag.bench.tuning`'s.

| symbol | name here         | meaning                                                | unit  |
|--------|-------------------|--------------------------------------------------------|-------|
| N      | ``tolerance``     | how far off still counts as in tune                    | cents |
| d(t)   | weights, poles    | distance from settled: a sum of decays a_m e^(s_m t)   | V     |
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import groupby, pairwise

import numpy as np
from numpy.typing import NDArray

from livelag.bench.timeline import PlayedNote, Timeline
from livelag.bench.walk import Step, walk
from livelag.circuit.decay import last_time_outside, zero_crossings
from livelag.circuit.parts import require, require_positive
from livelag.circuit.stage import ARRIVAL_TOLERANCE_CENTS, GlideStage, Setting
from livelag.errors import InputError
from livelag.units import cents_to_volts, volts_to_cents

_SECTIONS = 33  # settings looked at side by side in each round of the search
_ROTATION_ERROR = 1e-9


@dataclass(frozen=True, slots=True)
class NoteArrival:
    """How a note fared.

    Attributes:
        note: MIDI note.
        start_s: when it begins, in seconds from the start of the song.
        end_s: when it is released or another takes over.
        interval_cents: from the last key to this one.
        carried_cents: how far from settled the last glide still was when this note began.
        arrives: whether it is within the tolerance at its end.
        arrival_s: seconds from its start until it is within the tolerance and stays there to its
            end; for one that does not arrive, what it would need were its last key held on.
        residual_cents: how far from settled it is at its end; below 0 is flat.
    """

    note: int
    start_s: float
    end_s: float
    interval_cents: float
    carried_cents: float
    arrives: bool
    arrival_s: float
    residual_cents: float


@dataclass(frozen=True, slots=True)
class PileUp:
    """Two or more notes in a row that do not arrive, so that each starts from the last's error.

    Attributes:
        first: its first note, from 0.
        notes: how many.
        start_s: seconds from the start of the song.
        end_s: the end of its last note.
        worst_cents: the residual that is furthest off.
    """

    first: int
    notes: int
    start_s: float
    end_s: float
    worst_cents: float


@dataclass(frozen=True, slots=True)
class LongestSetting:
    """The longest setting of a range up to which a share of the notes arrives.

    Attributes:
        range_name: the range.
        rotation: the pot there; None if the share does not arrive even at rotation 0.
        time_constant_s: R C there, in seconds.
        arrived_fraction: share that arrives there, or at rotation 0 if there is none.
        holds_again: whether the share arrives again at some slower setting. It can: a glide so
            slow that it hardly leaves a note is still in tune when that note comes back.
    """

    range_name: str
    rotation: float | None
    time_constant_s: float | None
    arrived_fraction: float
    holds_again: bool


def arrivals(
    stage: GlideStage,
    timeline: Timeline,
    rotation: float,
    tolerance_cents: float = ARRIVAL_TOLERANCE_CENTS,
) -> tuple[NoteArrival, ...]:
    """How every note fares.

    Args:
        stage: the stage.
        timeline: what is played.
        rotation: where the pot stands, until the song turns it.
        tolerance_cents: N, more than 0.

    Raises:
        InputError: if the tolerance is not a positive number.
    """
    require_positive(tolerance_cents, "arrival tolerance in cents")
    tolerance_v = _bus_volts(stage, tolerance_cents)
    steps: list[list[Step]] = [[] for _ in timeline.notes]
    carried = [0.0] * len(timeline.notes)
    left = 0.0
    for step in walk(stage, timeline, (rotation,)):
        if step.stretch.duration_s > 0.0:
            number = step.stretch.note
            if number is not None:
                if not steps[number]:
                    carried[number] = left
                steps[number].append(step)
            left = float(step.left_v[0])
    return tuple(
        _note_arrival(stage, note, own, before, tolerance_v)
        for note, own, before in zip(timeline.notes, steps, carried, strict=True)
    )


def _note_arrival(
    stage: GlideStage, note: PlayedNote, steps: list[Step], carried_v: float, tolerance_v: float
) -> NoteArrival:
    left_v = float(steps[-1].left_v[0])
    return NoteArrival(
        note=note.note,
        start_s=note.start_s,
        end_s=note.end_s,
        interval_cents=volts_to_cents(note.interval_volts, stage.scale.volts_per_octave),
        carried_cents=_cents(stage, carried_v),
        arrives=abs(left_v) <= tolerance_v,
        arrival_s=_arrival_time(steps, tolerance_v) - note.start_s,
        residual_cents=_cents(stage, left_v),
    )


def _arrival_time(steps: list[Step], tolerance_v: float) -> float:
    """When the distance is last outside, from the last stretch of a note backwards."""
    for step in reversed(steps):
        start = step.stretch.start_s
        if step is not steps[-1] and abs(float(step.left_v[0])) > tolerance_v:
            return start + step.stretch.duration_s
        outside = _last_outside_s(step, tolerance_v)
        if outside > 0.0:
            return start + outside
    return steps[0].stretch.start_s


def _last_outside_s(step: Step, tolerance_v: float) -> float:
    """When a stretch is last outside, 0 if never: up to its end, or beyond if it ends outside."""
    driven = step.weights[0] != 0.0
    if not driven.any():
        return 0.0
    weights, poles = step.weights[0][driven], step.poles[0][driven]
    outside = last_time_outside(weights, poles, tolerance_v)
    duration = step.stretch.duration_s
    if outside <= duration or abs(float(step.left_v[0])) > tolerance_v:
        return outside
    # It ends inside but would leave once more, drawn by what a dielectric remembers.
    crossings = [
        crossing
        for side in (tolerance_v, -tolerance_v)
        for crossing in zero_crossings(np.append(weights, -side), np.append(poles, 0.0), duration)
    ]
    return max(crossings, default=0.0)


def arrived_fraction(notes: Sequence[NoteArrival]) -> float:
    """Share of the notes that arrive."""
    return sum(note.arrives for note in notes) / len(notes)


def pile_ups(notes: Sequence[NoteArrival]) -> tuple[PileUp, ...]:
    """Where errors pile up: rows of notes that do not arrive, the longest row first."""
    found = []
    for arrives, group in groupby(enumerate(notes), key=lambda pair: pair[1].arrives):
        rows = list(group)
        if not arrives and len(rows) > 1:
            worst = max((note.residual_cents for _, note in rows), key=abs)
            found.append(
                PileUp(rows[0][0], len(rows), rows[0][1].start_s, rows[-1][1].end_s, worst)
            )
    return tuple(sorted(found, key=lambda row: -row.notes))


def longest_setting(
    stage: GlideStage,
    timeline: Timeline,
    share: float,
    tolerance_cents: float = ARRIVAL_TOLERANCE_CENTS,
) -> LongestSetting:
    """The longest setting up to which a share of the notes arrives.

    The share falls in steps as the glide slows, but not always: see `LongestSetting`. So the
    first fall below the share is bracketed among settings in equal ratios of resistance, and the
    bracket is cut into sections until it is narrower than 1e-9 of the travel.

    Args:
        stage: the stage.
        timeline: what is played, laid out for the range in question.
        share: of the notes, more than 0, at most 1.
        tolerance_cents: N, more than 0.

    Raises:
        InputError: if a number is out of range, or the song moves the controls itself.
    """
    require(0.0 < share <= 1.0, f"share is {share!r}; it must be more than 0 and at most 1")
    require_positive(tolerance_cents, "arrival tolerance in cents")
    for moves, what in ((timeline.turns_pot, "pot"), (timeline.switches_range, "range switch")):
        if moves:
            raise InputError(f"the song moves the {what} itself, so no one setting can be sought")
    range_index = timeline.stretches[0].range_index
    name = stage.range_names[range_index]

    def shares_at(turns: NDArray[np.float64]) -> NDArray[np.float64]:
        return _arrived_shares(stage, timeline, turns, tolerance_cents)

    turns = _ladder(stage, range_index)
    shares = shares_at(turns)
    holds = shares >= share
    if not holds[0]:
        again = bool(holds.any())
        return LongestSetting(name, None, None, float(shares[0]), again)
    fall = _first_fall(holds)
    holds_again = bool(holds[fall + 1 :].any())
    while fall < len(turns) - 1 and turns[fall + 1] - turns[fall] > _ROTATION_ERROR:
        turns = np.linspace(turns[fall], turns[fall + 1], _SECTIONS)
        shares = shares_at(turns)
        fall = _first_fall(shares >= share)
    rotation = float(turns[fall])
    tau = stage.time_constant_s(Setting(range_index, rotation))
    return LongestSetting(name, rotation, tau, float(shares[fall]), holds_again)


def _first_fall(holds: NDArray[np.bool_]) -> int:
    """Place of the last setting before the first that does not hold; the first one holds."""
    return next((n for n, (_, after) in enumerate(pairwise(holds)) if not after), len(holds) - 1)


def _ladder(stage: GlideStage, range_index: int) -> NDArray[np.float64]:
    """Rotations from 0 to 1 at which the resistance rises in equal ratios, rising."""
    low, high = (stage.resistance_ohms(Setting(range_index, turn)) for turn in (0.0, 1.0))
    fractions = (np.geomspace(low, high, _SECTIONS) - low) / (high - low)
    inner = [stage.pot.taper.rotation(float(fraction)) for fraction in fractions[1:-1]]
    return np.unique([0.0, *inner, 1.0])


def _arrived_shares(
    stage: GlideStage,
    timeline: Timeline,
    rotations: NDArray[np.float64],
    tolerance_cents: float,
) -> NDArray[np.float64]:
    """(rotations,) share of the notes within the tolerance at their end."""
    tolerance_v = _bus_volts(stage, tolerance_cents)
    inside = np.zeros((len(timeline.notes), len(rotations)), dtype=bool)
    for step in walk(stage, timeline, rotations.tolist()):
        if step.stretch.note is not None and step.stretch.duration_s > 0.0:
            inside[step.stretch.note] = np.abs(step.left_v) <= tolerance_v
    shares: NDArray[np.float64] = inside.mean(axis=0)
    return shares


def _bus_volts(stage: GlideStage, cents: float) -> float:
    return cents_to_volts(cents, stage.scale.volts_per_octave) / stage.divider


def _cents(stage: GlideStage, bus_v: float) -> float:
    return volts_to_cents(stage.divider * bus_v, stage.scale.volts_per_octave)
