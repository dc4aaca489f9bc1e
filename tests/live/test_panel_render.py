import io
import math
import pickle
import re
import time
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from panel_snapshots import any_snapshots, played_snapshot
from rich.cells import cell_len
from rich.console import Console

from livelag.live.panel import render_panel
from livelag.live.panel_text import tidy
from livelag.live.snapshot import Snapshot

SIZES = [(60, 20), (61, 21), (80, 24), (115, 30), (116, 30), (132, 43), (200, 50)]


@pytest.fixture(scope="module")
def played():
    return played_snapshot()


def text_of(snapshot, width, height, help_shown=False, **console):
    options = {"color_system": None, "force_terminal": False, **console}
    target = Console(file=io.StringIO(), width=width, height=height, **options)
    target.print(render_panel(snapshot, width, height, help_shown), end="")
    return target.file.getvalue()


def lines_of(snapshot, width, height, help_shown=False):
    return text_of(snapshot, width, height, help_shown).split("\n")


def assert_fills(lines, width, height):
    assert len(lines) == height
    assert [cell_len(line) for line in lines] == [width] * height
    assert not any(ord(c) < 32 or 127 <= ord(c) < 160 for line in lines for c in line)


@settings(max_examples=250, deadline=None, suppress_health_check=list(HealthCheck))
@given(
    snapshot=any_snapshots(),
    width=st.integers(1, 220) | st.sampled_from([60, 80, 200]),
    height=st.integers(1, 60) | st.sampled_from([20, 24, 50]),
    help_shown=st.booleans(),
)
def test_any_snapshot_fills_any_screen_exactly(snapshot, width, height, help_shown):
    assert_fills(lines_of(snapshot, width, height, help_shown), width, height)


@pytest.mark.parametrize(("width", "height"), SIZES)
def test_every_value_is_in_sight(played, width, height):
    snapshot = replace(played, by_ear=False, recording="on", take_name="take-03", take_s=12.34)
    lines = lines_of(snapshot, width, height)
    assert_fills(lines, width, height)
    text = "\n".join(lines)
    for wanted in (
        "▐fast▌",
        "slow",
        "0.420",
        # 1 kilohm and 0.42 of 470 kilohms, with the pot's end resistance of 2 ohms
        "198 kΩ",
        "65.",
        "C4",
        "Hz",
        "glide",
        "key",
        "-24 dB",
        "┃",
        "Workshop keys",
        "REC",
        "12.3 s",
        "take-03",
        "A fast 0.42",
        "12 %",
        "0 dropouts",
        "4.00 ms latency",
        "A stored: fast, 0.42",
        "now",
        "? help",
        "q quit",
    ):
        assert wanted in text, wanted


@pytest.mark.parametrize(("width", "height"), SIZES)
def test_marks_show_by_ear_and_not_otherwise(played, width, height):
    marked = replace(played, by_ear=True, shortest_s=0.002, handover_s=None, longest_s=1.9)
    text = "\n".join(lines_of(marked, width, height))
    assert re.search(r"f \D*2\.00 ms", text)
    assert re.search(r"h \D*–", text)
    assert re.search(r"s \D*1\.90 s", text)
    assert "0.500 ms ├" in text
    assert "kΩ" not in text
    assert ("fastest" in text) == (width > 61)
    assert "marks" not in "\n".join(lines_of(played, width, height))


def test_marks_stand_on_the_bar_at_their_place(played):
    # Half of a logarithmic travel from 0.5 ms to 10 s is the geometric mean, 70.7 ms.
    middle = math.sqrt(0.0005 * 10.0)
    marked = replace(played, by_ear=True, rotation=0.0, handover_s=middle)
    bar = next(line for line in lines_of(marked, 101, 24) if "├" in line)
    inside = bar[bar.index("├") + 1 : bar.index("┤")]
    assert inside[0] == "◆"
    assert abs(inside.index("h") - (len(inside) - 1) / 2) <= 0.5


@pytest.mark.parametrize("rotation", [0.0, 0.25, 0.5, 1.0])
def test_knob_stands_where_the_pot_is(played, rotation):
    bar = next(
        line for line in lines_of(replace(played, rotation=rotation), 120, 30) if "├" in line
    )
    inside = bar[bar.index("├") + 1 : bar.index("┤")]
    assert inside.count("◆") == 1
    assert abs(inside.index("◆") - rotation * (len(inside) - 1)) <= 0.5
    assert set(inside[: inside.index("◆")]) <= set("━┿")
    assert set(inside[inside.index("◆") + 1 :]) <= set("┄┼")


@pytest.mark.parametrize(
    ("cents", "wanted"),
    [
        (340.0, "▲ +340 cents to go"),
        (-47.4, "▼ -47 cents to go"),
        (4.9, "● in tune +4.9"),
        (-5.1, "▼ -5 cents"),
        (math.nan, "cents to go –"),
    ],
)
def test_cents_to_go_have_a_sign_and_an_arrow(played, cents, wanted):
    assert wanted in text_of(replace(played, cents_to_go=cents), 80, 24)


@pytest.mark.parametrize(
    ("changes", "wanted"),
    [
        ({"range_index": 1}, "▐slow▌"),
        ({"glide_on": False}, "glide ○ off"),
        ({"gate": False}, "released"),
        ({"midi_active": True}, "◉ busy"),
        ({"midi_ports": ()}, "no input open"),
        ({"recording": "armed"}, "▣ armed"),
        ({"recording": "on", "take_drops": 2}, "! 2 lost"),
        ({"dropouts": 1}, "! 1 dropout "),
        ({"dropouts": 12}, "! 12 dropouts"),
        ({"load": 0.93}, "! 93 %"),
        ({"peak_dbfs": -math.inf}, "silent"),
        ({"octave": -2}, "octave -2"),
        ({"cv_out": "channel 3, 10 V"}, "channel 3, 10 V"),
        ({"cv_in": "channel 1"}, "channel 1"),
        ({"slot_b": "slow 0.80"}, "B slow 0.80"),
        ({"note": None}, "note   –"),
        ({"range_names": tuple(f"range {n}" for n in range(30)), "range_index": 6}, "7 of 30"),
    ],
)
def test_each_change_changes_the_text(played, changes, wanted):
    for width in (80, 200):
        before, after = (text_of(s, width, 24) for s in (played, replace(played, **changes)))
        assert wanted in after
        assert wanted not in before


@pytest.mark.parametrize("peak_dbfs", [-60.0, -30.0, -1.0, 0.0])
def test_meter_fills_and_shows_the_ceiling(played, peak_dbfs):
    line = next(x for x in lines_of(replace(played, peak_dbfs=peak_dbfs), 80, 24) if "level" in x)
    inside = line[line.index("▕") + 1 : line.index("▏", line.index("┃"))]
    assert inside.index("┃") == int(59 / 60 * len(inside))
    filled = inside.count("█") + (peak_dbfs == 0.0)
    assert abs(filled - (1 + peak_dbfs / 60) * len(inside)) <= 1


def test_too_small_a_screen_asks_for_room_and_keeps_the_essentials(played):
    for width, height in ((59, 24), (80, 19), (40, 10)):
        lines = lines_of(replace(played, dropouts=3), width, height)
        assert_fills(lines, width, height)
        assert lines[0].startswith(f"make room: 60x20, not {width}x{height}")
        text = "\n".join(lines)
        assert "65." in text
        assert "C4" in text
        assert "▐fast▌" in text
        assert "3 dropouts" in text
        assert "? help" in lines[-1]


@pytest.mark.parametrize(("width", "height"), SIZES)
def test_help_page_explains_every_key(played, width, height):
    lines = lines_of(replace(played, by_ear=True), width, height, help_shown=True)
    assert_fills(lines, width, height)
    text = "\n".join(lines)
    assert "…" not in text
    for words in ("Turn the pot", "range switch", "Mark fastest", "Swap", "Panic", "leave"):
        assert words in text
    assert "? help" in lines[-1]


def test_no_color_leaves_shapes_only(played, monkeypatch):
    options = {"color_system": "standard", "force_terminal": True}
    coloured = text_of(played, 80, 24, **options)
    assert "\x1b[1;36m" in coloured
    monkeypatch.setenv("NO_COLOR", "1")
    plain = text_of(played, 80, 24, **options)
    codes = {code for found in re.findall(r"\x1b\[([\d;]*)m", plain) for code in found.split(";")}
    assert not any(code.isdigit() and 30 <= int(code) <= 107 for code in codes)
    strip = re.compile(r"\x1b\[[\d;]*m")
    assert strip.sub("", plain) == strip.sub("", coloured) == text_of(played, 80, 24)


def test_tidy_leaves_nothing_that_moves_the_cursor():
    assert tidy("\x1b[2Jname\r\n\x9b5m") == "·[2Jname···5m"
    assert tidy("a\u202eb\u200dc\ufe0f") == "abc·"
    assert tidy("Clavier 鍵盤 é") == "Clavier 鍵盤 é"
    assert tidy("\ud800") == "·"


def test_snapshot_crosses_a_pipe(played):
    again = pickle.loads(pickle.dumps(played))
    assert isinstance(again, Snapshot)
    assert np.array_equal(again.strip_glide_volts, played.strip_glide_volts)
    assert replace(again, strip_key_volts=None, strip_glide_volts=None).pitch_hz == played.pitch_hz


def test_a_drawing_takes_less_than_ten_milliseconds(played):
    times = []
    for _ in range(15):
        start = time.thread_time()
        render_panel(played, 200, 50)
        times.append(time.thread_time() - start)
    assert sorted(times)[7] < 0.010
