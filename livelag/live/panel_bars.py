"""The bars of the panel: the pot, the level, the load."""

from __future__ import annotations

import math
from itertools import groupby
from operator import itemgetter

from livelag.live.panel_text import ACCENT, ALERT, LABEL, VALUE, Line
from livelag.live.snapshot import BY_EAR_LONGEST_S, BY_EAR_SHORTEST_S, Snapshot
from livelag.sound.level import CEILING_DBFS

METER_LOW_DBFS = -60.0
_EIGHTHS = " ▏▎▍▌▋▊▉"
_TENTHS = 10


def pot_bar(snapshot: Snapshot, width: int) -> Line:
    """The pot's travel, a mark at each tenth, the knob where it stands, the player's marks on it.

    Args:
        snapshot: what to show.
        width: cells, 3 or more.
    """
    inner = width - 2
    last = inner - 1
    turned = round(_fraction(snapshot.rotation) * last)
    ticks = {round(tenth * last / _TENTHS) for tenth in range(1, _TENTHS)}
    cells = [
        ("┿" if place in ticks else "━") if place < turned else ("┼" if place in ticks else "┄")
        for place in range(inner)
    ]
    marks = dict(_marks_on_bar(snapshot, last))
    for place, letter in marks.items():
        cells[place] = letter
    cells[turned] = "◆"
    styles = [ACCENT] * turned + [LABEL] * (inner - turned)
    for place in (*marks, turned):
        styles[place] = VALUE
    line = Line().add("├", LABEL)
    for style, run in groupby(zip(styles, cells, strict=True), key=itemgetter(0)):
        line.add("".join(cell for _, cell in run), style)
    return line.add("┤", LABEL)


def _marks_on_bar(snapshot: Snapshot, last: int) -> list[tuple[int, str]]:
    if not snapshot.by_ear:
        return []
    decades = math.log(BY_EAR_LONGEST_S / BY_EAR_SHORTEST_S)
    return [
        (round(_fraction(math.log(time_s / BY_EAR_SHORTEST_S) / decades) * last), letter)
        for letter, time_s in mark_times(snapshot)
        if time_s is not None and time_s > 0
    ]


def mark_times(snapshot: Snapshot) -> tuple[tuple[str, float | None], ...]:
    """The player's marks by the key that sets each."""
    return (
        ("f", snapshot.shortest_s),
        ("h", snapshot.handover_s),
        ("s", snapshot.longest_s),
    )


def level_meter(peak_dbfs: float, width: int) -> Line:
    """Output level from -60 dBFS to full scale, with the ceiling standing in its way.

    Args:
        peak_dbfs: greatest output of the last moment; minus infinity in silence.
        width: cells, 4 or more.
    """
    inner = width - 2
    ceiling = min(inner - 1, int((CEILING_DBFS / METER_LOW_DBFS * -1 + 1) * inner))
    filled = _fill(1.0 - peak_dbfs / METER_LOW_DBFS, inner)
    at_ceiling = peak_dbfs >= CEILING_DBFS - 0.05
    return (
        Line()
        .add("▕", LABEL)
        .add(filled[:ceiling], ACCENT)
        .add("┃", ALERT if at_ceiling else VALUE)
        .add(filled[ceiling + 1 :], ACCENT)
        .add("▏", LABEL)
    )


def load_meter(load: float, width: int) -> Line:
    """Share of a block's time that the callback takes, up to all of it."""
    return Line().add("▕", LABEL).add(_fill(load, width - 2), ACCENT).add("▏", LABEL)


def _fill(fraction: float, width: int) -> str:
    eighths = round(_fraction(fraction) * width * 8)
    whole, part = divmod(eighths, 8)
    return ("█" * whole + (_EIGHTHS[part] if part else "")).ljust(width)


def _fraction(number: float) -> float:
    """Between 0 and 1, whatever comes."""
    return min(1.0, max(0.0, number)) if not math.isnan(number) else 0.0
