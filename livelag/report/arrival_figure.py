"""Picture of a song's arrivals: keys and glide against time, and how far off each note ends."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from livelag.bench.arrival import NoteArrival
from livelag.bench.timeline import Timeline
from livelag.bench.walk import walk
from livelag.circuit.stage import GlideStage, Setting
from livelag.report.figures import ERROR_COLOUR, GLIDE_COLOUR, KEY_COLOUR, new_figure
from livelag.units import note_name, volts_to_note

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Samples = NDArray[np.float64]

_POINTS = 8000


def arrival_figure(
    stage: GlideStage,
    timeline: Timeline,
    rotation: float,
    notes: Sequence[NoteArrival],
    tolerance_cents: float,
    heading: str,
) -> Figure:
    """Keys and glide as notes against time above, the residual of every note below.

    Args:
        stage: the stage.
        timeline: what is played.
        rotation: where the pot stands, until the song turns it.
        notes: how its notes fare.
        tolerance_cents: within this a note has arrived.
        heading: song and setting in words.
    """
    figure = new_figure(10.0, 6.0)
    upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=[2, 1])
    figure.suptitle(f"{stage.title}\n{heading}", fontsize=11, parse_math=False)
    _draw_glide(upper, stage, timeline, rotation, notes)
    _draw_residuals(lower, notes, tolerance_cents)
    last = timeline.stretches[-1]
    lower.set_xlim(0.0, last.start_s + last.duration_s)
    lower.set_xlabel("time, s")
    return figure


def _draw_glide(
    axes: Axes,
    stage: GlideStage,
    timeline: Timeline,
    rotation: float,
    notes: Sequence[NoteArrival],
) -> None:
    times, keys, glide = _curve(stage, timeline, rotation)
    axes.plot(
        times, keys, color=KEY_COLOUR, linewidth=1.0, linestyle=(0, (4, 2)),
        label="where the stage would settle",
    )  # fmt: skip
    axes.plot(times, glide, color=GLIDE_COLOUR, linewidth=1.8, label="glide")
    missed = [note for note in notes if not note.arrives]
    ends = [note.end_s for note in missed]
    axes.plot(
        ends, np.interp(ends, times, glide), "x", color=ERROR_COLOUR, markeredgewidth=1.6,
        label="ends before it arrives",
    )  # fmt: skip
    low, high = (
        int(np.floor(min(keys.min(), glide.min()))),
        int(np.ceil(max(keys.max(), glide.max()))),
    )
    step = next(step for step in (1, 2, 3, 6, 12, 24) if (high - low) / step <= 14 or step == 24)
    shown = [n for n in range(low, high + 1) if n % step == 0]
    axes.set_yticks(shown, [note_name(n) for n in shown])
    axes.set_ylabel("note")
    axes.grid(alpha=0.3)
    axes.legend(loc="lower center", bbox_to_anchor=(0.5, 1.0), ncols=3, frameon=False, fontsize=9)


def _curve(
    stage: GlideStage, timeline: Timeline, rotation: float
) -> tuple[Samples, Samples, Samples]:
    """Times, settled and gliding output as note numbers, each (points,)."""
    end = timeline.stretches[-1].start_s + timeline.stretches[-1].duration_s
    pieces = []
    for step in walk(stage, timeline, (rotation,)):
        stretch = step.stretch
        if stretch.duration_s <= 0.0:
            continue
        count = max(2, round(_POINTS * stretch.duration_s / end))
        # The square puts more points where a glide is steep.
        since = stretch.duration_s * np.linspace(0.0, 1.0, count) ** 2
        turn = rotation if stretch.rotation is None else stretch.rotation
        at = Setting(stretch.range_index, turn, stretch.bypassed)
        settled = stage.network(at).gain * stage.source_volts(stretch.key_volts, at)
        bus = settled + np.exp(np.multiply.outer(since, step.poles[0])) @ step.weights[0]
        held = stage.output_volts(np.full(count, settled))
        pieces.append((stretch.start_s + since, held, stage.output_volts(bus)))
    times, keys, glide = (np.concatenate(part) for part in zip(*pieces, strict=True))
    zero, per_octave = stage.scale.zero_volt_note, stage.scale.volts_per_octave
    return times, volts_to_note(keys, zero, per_octave), volts_to_note(glide, zero, per_octave)


def _draw_residuals(axes: Axes, notes: Sequence[NoteArrival], tolerance_cents: float) -> None:
    axes.axhspan(-tolerance_cents, tolerance_cents, color="0.85")
    axes.set_title(f"grey: within {tolerance_cents:g} cents", loc="right", fontsize=8)
    for arrives, mark, colour in ((True, "o", GLIDE_COLOUR), (False, "x", ERROR_COLOUR)):
        chosen = [note for note in notes if note.arrives == arrives]
        ends = [note.end_s for note in chosen]
        residuals = [note.residual_cents for note in chosen]
        axes.vlines(ends, 0.0, residuals, color=colour, linewidth=1.0)
        axes.plot(ends, residuals, mark, color=colour, markersize=5, markeredgewidth=1.6)
    # Straight within twice the tolerance, logarithmic beyond.
    knee = 2.0 * tolerance_cents
    axes.set_yscale("symlog", linthresh=knee, linscale=1.0)
    reach = max(2.0 * knee, 1.6 * max(abs(note.residual_cents) for note in notes))
    axes.set_ylim(-reach, reach)
    steps = (1.0, 2.0) if reach < 5.0 * knee else (1.0, 10.0, 100.0)
    marks = [step * knee for step in steps if step * knee < reach]
    ticks = [-m for m in reversed(marks)] + [0.0, *marks]
    axes.set_yticks(ticks, [f"{t:g}" for t in ticks])
    axes.minorticks_off()
    axes.set_ylabel("off at its end, cents")
    axes.grid(alpha=0.3)
