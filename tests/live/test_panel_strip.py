import math
import re

import numpy as np
import pytest

from livelag.live.panel_strip import strip_lines
from livelag.live.snapshot import Snapshot

# Dots of a braille cell by (row, column): Unicode, block Braille Patterns (from memory).
BITS = {0: (0, 0), 1: (1, 0), 2: (2, 0), 3: (0, 1), 4: (1, 1), 5: (2, 1), 6: (3, 0), 7: (3, 1)}


def strip(key, glide, width=66, height=11, **fields):
    snapshot = Snapshot(
        strip_key_volts=np.array(key, np.float32),
        strip_glide_volts=np.array(glide, np.float32),
        **fields,
    )
    return ["".join(s.text for s in line.segments) for line in strip_lines(snapshot, width, height)]


def dots(lines):
    """Places (row, column) of the dots inside the axes."""
    found = set()
    for row, line in enumerate(lines[:-1]):
        for column, cell in enumerate(line[6:]):
            code = ord(cell) - 0x2800 if cell != " " else 0
            found |= {
                (row * 4 + BITS[bit][0], column * 2 + BITS[bit][1])
                for bit in range(8)
                if code >> bit & 1
            }
    return found


def test_glide_is_a_joined_line_and_falls_where_the_exponential_does():
    t = np.linspace(0.0, 8.0, 800)
    volts = 2.0 + np.exp(-t / 1.5)  # an octave down from 3 V
    lines = strip(np.full(800, np.nan), volts, zero_volt_note=36)
    assert len(lines) == 11
    assert all(len(line) == 66 for line in lines)
    found = dots(lines)
    columns = {column for _, column in found}
    assert columns == set(range(120))
    label_rows = {line[:5].strip(): row for row, line in enumerate(lines) if "┤" in line[:6]}
    assert {"C4", "C5"} <= set(label_rows)
    # The labels say where notes are: one label's row is within a row of where the trace is.
    per_octave = (label_rows["C4"] - label_rows["C5"]) * 4
    for column in (5, 30, 60, 100):
        rows = [row for row, c in found if c == column]
        note_rows = per_octave * math.exp(-(8.0 * (column + 1) / 120) / 1.5)
        expected = label_rows["C4"] * 4 + 2 - note_rows
        assert min(abs(row - expected) for row in rows) <= 4
    for column in range(119):  # joined: neighbours touch
        here = {row for row, c in found if c == column}
        there = {row for row, c in found if c == column + 1}
        assert min(abs(a - b) for a in here for b in there) <= 1


def test_key_is_dotted_and_does_not_join_its_steps():
    key = np.repeat([1.0, 2.0], 400)
    found = dots(strip(key, np.full(800, np.nan)))
    assert {column for _, column in found} == set(range(0, 120, 3))
    assert len({row for row, _ in found}) == 2


def test_a_jump_of_the_glide_is_one_upright_line():
    found = dots(strip(np.full(800, np.nan), np.repeat([1.0, 2.0], 400)))
    rows = sorted(row for row, column in found if column == 60)
    assert rows == list(range(rows[0], rows[-1] + 1))
    assert len(rows) > 10


def test_newest_is_at_the_right_and_seconds_are_told():
    glide = np.full(800, 1.0)
    glide[-20:] = 2.0
    lines = strip(np.full(800, np.nan), glide)
    found = dots(lines)
    top = min(row for row, _ in found)
    assert min(column for row, column in found if row == top) == pytest.approx(117, abs=1)
    axis = lines[-1]
    assert axis.endswith("now")
    ticks = {int(m[1]): m.start() - 6 for m in re.finditer(r"-(\d) s", axis)}
    assert len(ticks) >= 3
    for seconds_ago, column in ticks.items():
        assert abs(column - (59 - seconds_ago * 60 / 8)) <= 1


@pytest.mark.parametrize("note", [24, 36, 61.5])
def test_scale_of_the_stage_moves_the_labels(note):
    lines = strip([0.0] * 50, [0.0] * 50, zero_volt_note=note, volts_per_octave=0.5, height=30)
    labels = [line[:5].strip() for line in lines if "┤" in line[:6]]
    assert len(labels) >= 4
    twice = strip([0.5] * 50, [0.5] * 50, zero_volt_note=note, volts_per_octave=0.5, height=30)
    up = [re.sub(r"\d+$", lambda m: str(int(m[0]) + 1), label) for label in labels]
    assert [line[:5].strip() for line in twice if "┤" in line[:6]] == up


@pytest.mark.parametrize(
    ("key", "glide"),
    [([], []), ([math.nan] * 9, [math.inf] * 9), ([1e30, -1e30], [0.0, -math.inf]), ([1.0], [1.0])],
)
def test_points_that_make_no_sense_are_drawn_as_far_as_they_can_be(key, glide):
    lines = strip(key, glide, volts_per_octave=0.0, zero_volt_note=math.nan)
    assert len(lines) == 11
    assert all(len(line) <= 66 for line in lines)
