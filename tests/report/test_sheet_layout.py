"""The bench sheet as laid out: nothing overlaps, nothing is cut, nothing is coloured."""

from functools import cache
from itertools import combinations, pairwise

import numpy as np
import pytest
from matplotlib import rc_context
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.collections import Collection
from matplotlib.colors import to_rgba_array
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from matplotlib.text import Text
from sheet_stages import CROWDED, SPARE, WORDY

from livelag.bench.sheet import bench_sheet
from livelag.circuit.presets import load_stage, preset_names
from livelag.report.sheet_files import SETTINGS
from livelag.report.sheet_page import MARGIN_MM, MM_PER_INCH, PAPERS_MM, fitted, width_mm, wrapped
from livelag.report.sheet_pages import sheet_pages

STAGES = {name: load_stage(name) for name in preset_names()}
DPI = 100
TOUCH_MM = 0.15  # letters' boxes have a little air of their own


HARD = {"wordy": WORDY, "crowded": CROWDED, "spare": SPARE}
# Letter is the lower of the two, so the hard ones are tried on it alone.
EVERY = [(name, paper) for name in STAGES for paper in PAPERS_MM]
EVERY += [(name, "letter") for name in HARD]
sheet_of = cache(bench_sheet)


@pytest.fixture(scope="module", params=EVERY, ids="-".join)
def pages(request):
    name, paper = request.param
    with rc_context({**SETTINGS, "figure.dpi": DPI}):
        drawn = sheet_pages(sheet_of((STAGES | HARD)[name]), paper)
        for figure in drawn:
            FigureCanvasAgg(figure)
            figure.draw_without_rendering()
        yield paper, drawn


def boxes(figure):
    """Text and its box in mm from the bottom left corner, of all that is printed."""
    renderer = figure.canvas.get_renderer()
    mm = MM_PER_INCH / figure.dpi
    for text in figure.findobj(Text):
        if text.get_text().strip() and text.get_visible() and text.get_window_extent().width > 0:
            box = text.get_window_extent(renderer)
            yield text, np.array([box.x0, box.y0, box.x1, box.y1]) * mm


def test_no_two_texts_overlap(pages):
    _, drawn = pages
    for figure in drawn:
        found = list(boxes(figure))
        assert len(found) > 60
        for (one, a), (other, b) in combinations(found, 2):
            across = min(a[2], b[2]) - max(a[0], b[0])
            down = min(a[3], b[3]) - max(a[1], b[1])
            assert across < TOUCH_MM or down < TOUCH_MM, (one.get_text(), other.get_text())


def test_no_heading_is_shortened(pages):
    """A long name may be; what the sheet itself says may not."""
    _, drawn = pages
    texts = [text.get_text() for figure in drawn for text, _ in boxes(figure)]
    assert "Settling square" in texts
    assert "Hurried square" in texts
    assert "Out at hurried, peak to peak" in texts


def test_all_text_is_inside_the_margins(pages):
    paper, drawn = pages
    width, height = PAPERS_MM[paper]
    for figure in drawn:
        for text, (left, bottom, right, top) in boxes(figure):
            assert left > MARGIN_MM - 1.0, text.get_text()
            assert right < width - MARGIN_MM + 1.0, text.get_text()
            assert top < height - MARGIN_MM + 1.0, text.get_text()
            # Only the foot of the page is below the bottom margin.
            foot = text.get_text().startswith(("Bench sheet:", "page "))
            assert bottom > (4.0 if foot else MARGIN_MM - 0.5), text.get_text()


def test_no_label_of_the_drawing_is_crossed_by_a_wire(pages):
    _, (first, _) = pages
    axes = first.axes[1]  # the page itself, then the drawing
    mm = MM_PER_INCH / first.dpi
    points = []
    for line in axes.lines:
        xy = line.get_transform().transform(line.get_xydata()) * mm
        for start, end in pairwise(xy):
            if np.isfinite(start).all() and np.isfinite(end).all():
                points.append(np.linspace(start, end, 40))
    points = np.concatenate(points)
    assert len(points) > 1000
    labels = [(t, b) for t, b in boxes(first) if t.axes is axes and t.get_text() != "1"]
    assert len(labels) > 12
    for text, (left, bottom, right, top) in labels:
        inside = (
            (points[:, 0] > left) & (points[:, 0] < right)
            & (points[:, 1] > bottom + TOUCH_MM) & (points[:, 1] < top - TOUCH_MM)
        )  # fmt: skip
        assert not inside.any(), text.get_text()


def test_black_and_greys_only(pages):
    _, drawn = pages
    for figure in drawn:
        for artist in figure.findobj(lambda a: a.get_visible()):
            for colour in colours(artist):
                red, green, blue, _ = colour
                assert red == green == blue, artist


def colours(artist):
    if isinstance(artist, (Text, Line2D)):
        yield from to_rgba_array(artist.get_color())
    elif isinstance(artist, (Patch, Collection)):
        for found in (artist.get_facecolor(), artist.get_edgecolor()):
            yield from to_rgba_array(found)


def test_every_number_of_the_rows_is_printed(pages):
    _, (_, second) = pages
    printed = [text.get_text() for text, _ in boxes(second)]
    assert printed.count("1/4") == printed.count("3/4") == printed.count("Settled volts") >= 1
    assert not any(t.endswith("…") and t[0].isdigit() for t in printed)  # no number is cut


def test_text_is_broken_between_words_and_cut_with_an_ellipsis():
    words = "one of 10 MΩ and one of 1 MΩ " * 3
    lines = wrapped(words, 40.0, 7.0)
    assert " ".join(lines).replace("\u00a0", " ") == words.strip()
    assert all(width_mm(line, 7.0) <= 40.0 for line in lines)
    assert not any(line.endswith(("10", "1")) for line in lines)  # a number keeps its unit
    cut = wrapped(words, 40.0, 7.0, most_lines=1)
    assert len(cut) == 1
    assert cut[0].endswith("…")
    assert wrapped("", 40.0, 7.0) == []
    assert fitted("x" * 200, 20.0, 7.0).endswith("…")
    assert width_mm(fitted("x" * 200, 20.0, 7.0), 7.0) <= 20.0
    assert fitted("short", 20.0, 7.0) == "short"
