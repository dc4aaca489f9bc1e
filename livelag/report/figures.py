"""Pictures, through matplotlib, which is imported only when one is asked for.

Lines differ by dash and width as well as by colour, so that a picture reads in grey.
"""

from __future__ import annotations

import warnings
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from livelag.circuit.stage import ARRIVAL_TOLERANCE_CENTS, Scale
from livelag.errors import UnknownNameError
from livelag.units import note_name, note_to_volts, volts_to_cents, volts_to_note

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Samples = NDArray[np.float64]

PICTURE_SUFFIXES = (".png", ".svg", ".pdf")
KEY_COLOUR = "0.35"
GLIDE_COLOUR = "#0b5fa5"
ERROR_COLOUR = "#a5480b"


def check_picture(path: Path) -> None:
    """Refuse a picture whose suffix is none of those known.

    Raises:
        UnknownNameError: naming the suffixes that exist.
    """
    if path.suffix.lower() not in PICTURE_SUFFIXES:
        raise UnknownNameError("picture suffix", path.suffix, PICTURE_SUFFIXES, where=str(path))


def new_figure(width_in: float, height_in: float) -> Figure:
    """An empty figure that needs no screen."""
    from matplotlib.figure import Figure

    return Figure(figsize=(width_in, height_in), layout="constrained")


def save_figure(figure: Figure, path: Path) -> None:
    """Write a figure in the format of its suffix, without date or random names, so it repeats.

    Raises:
        OSError: if the file cannot be written.
    """
    from matplotlib import rc_context

    suffix = path.suffix.lower()
    metadata = {".svg": {"Date": None}, ".pdf": {"CreationDate": None}}.get(suffix)
    # Long lines are drawn in pieces, or the rasteriser's memory would grow with their length.
    settings: Any = {"svg.hashsalt": "livelag", "agg.path.chunksize": 2000}
    with rc_context(settings), warnings.catch_warnings():
        # A title may hold signs that no font at hand has; they show as boxes.
        warnings.filterwarnings("ignore", "Glyph .* missing from", UserWarning)
        try:
            figure.savefig(path, dpi=144, metadata=metadata)
        except OSError as error:
            raise OSError(error.errno, error.strerror, str(path)) from error


def curve_figure(
    times_s: Samples, key_volts: Samples, glide_volts: Samples, scale: Scale, title: str, note: str
) -> Figure:
    """Key volts against glide volts, and below it how far off the glide is.

    Args:
        times_s: (points,) seconds.
        key_volts: (points,) volts before the glide.
        glide_volts: (points,) volts after it.
        scale: what the volts mean.
        title: first line of the heading.
        note: second line: range, rotation, time constant.
    """
    figure = new_figure(10.0, 6.0)
    upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=[2, 1])
    figure.suptitle(f"{title}\n{note}", fontsize=11, parse_math=False)  # a $ is a $
    _draw_volts(upper, times_s, key_volts, glide_volts, scale)
    _draw_error(lower, times_s, volts_to_cents(glide_volts - key_volts, scale.volts_per_octave))
    lower.set_xlim(float(times_s[0]), float(times_s[-1]))
    return figure


def _draw_volts(
    axes: Axes, times_s: Samples, key_volts: Samples, glide_volts: Samples, scale: Scale
) -> None:
    axes.plot(
        times_s, key_volts, color=KEY_COLOUR, linewidth=1.0, linestyle=(0, (4, 2)),
        drawstyle="steps-post", label="key volts (before the glide)",
    )  # fmt: skip
    axes.plot(
        times_s, glide_volts, color=GLIDE_COLOUR, linewidth=1.8,
        label="glide volts (what the oscillator gets)",
    )  # fmt: skip
    axes.set_ylabel("volts")
    axes.grid(alpha=0.3)
    axes.legend(loc="lower center", bbox_to_anchor=(0.5, 1.0), ncols=2, frameon=False, fontsize=9)
    low, high = axes.get_ylim()
    marks = note_marks(low, high, scale)
    names = axes.secondary_yaxis("right")
    names.set_yticks([volts for volts, _ in marks], [name for _, name in marks])
    names.set_ylabel("note")


def note_marks(low_volts: float, high_volts: float, scale: Scale) -> list[tuple[float, str]]:
    """Notes to mark on an axis of volts, as (volts, name): fewer the wider the span.

    Every semitone, the notes of a C major chord, or each C.
    """
    zero, per_octave = scale.zero_volt_note, scale.volts_per_octave
    first, last = (volts_to_note(v, zero, per_octave) for v in (low_volts, high_volts))
    kept = {0} if last - first > 30 else {0, 4, 7} if last - first > 10 else set(range(12))
    notes = [n for n in range(int(np.ceil(first)), int(last) + 1) if n % 12 in kept]
    return [(note_to_volts(float(n), zero, per_octave), note_name(n)) for n in notes]


def _draw_error(axes: Axes, times_s: Samples, error_cents: Samples) -> None:
    band = ARRIVAL_TOLERANCE_CENTS
    axes.axhspan(-band, band, color="0.85", label=f"within {band:g} cents")
    axes.plot(times_s, error_cents, color=ERROR_COLOUR, linewidth=1.2)
    # Straight within 10 cents, logarithmic beyond: an octave and a cent fit one picture.
    axes.set_yscale("symlog", linthresh=10.0, linscale=1.0)
    reach = max(20.0, float(np.abs(error_cents).max()) * 1.3)
    axes.set_ylim(-reach, reach)
    marks = [m for m in (10.0, 100.0, 1000.0) if m < reach]
    ticks = [-m for m in reversed(marks)] + [0.0, *marks]
    axes.set_yticks(ticks, [f"{t:g}" for t in ticks])
    axes.minorticks_off()
    axes.set_ylabel("glide - key, cents")
    axes.set_xlabel("time, s")
    axes.grid(alpha=0.3)
    axes.legend(loc="lower right", bbox_to_anchor=(1.0, 0.98), frameon=False, fontsize=8)
