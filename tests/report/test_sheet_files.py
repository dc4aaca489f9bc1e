"""The bench sheet as files."""

import base64
import re
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import pytest
from matplotlib.image import imread
from sheet_stages import FILM

from livelag.bench.limits import Limits
from livelag.bench.sheet import bench_sheet
from livelag.circuit.presets import load_stage
from livelag.errors import UnknownNameError
from livelag.report.sheet_files import PAPERS, SUFFIXES, sheet_paths, write_sheet
from livelag.report.sheet_words import hertz, seconds, seconds_within, volts_within

SHEET = bench_sheet(load_stage("one-range-log"))


def written(folder, suffix, paper="a4", sheet=SHEET):
    places = sheet_paths(folder / f"sheet{suffix}")
    write_sheet(sheet, paper, places)
    return places


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    """Each kind of sheet, written once: suffix -> its files."""
    return {suffix: written(tmp_path_factory.mktemp("made"), suffix) for suffix in SUFFIXES}


def test_a_picture_holds_one_page_and_a_document_both():
    assert sheet_paths(Path("x/a.b.png")) == (Path("x/a.b-1.png"), Path("x/a.b-2.png"))
    assert sheet_paths(Path("s.SVG")) == (Path("s-1.SVG"), Path("s-2.SVG"))
    assert sheet_paths(Path("s.pdf")) == (Path("s.pdf"),)
    with pytest.raises(UnknownNameError, match=r"s\.txt: unknown sheet suffix '\.txt'; .*\.html"):
        sheet_paths(Path("s.txt"))


@pytest.mark.parametrize("suffix", [".pdf", ".png", ".svg"])
def test_a_sheet_repeats_to_the_byte(made, tmp_path, suffix):
    first = [path.read_bytes() for path in made[suffix]]
    assert [path.read_bytes() for path in written(tmp_path, suffix)] == first
    assert min(map(len, first)) > 20_000


@pytest.mark.parametrize(
    ("paper", "points"), [("a4", (595.276, 841.890)), ("letter", (612.0, 792.0))]
)
def test_a_pdf_has_two_pages_of_the_paper(made, tmp_path, paper, points):
    """ISO 216: A4 is 210 by 297 mm; Letter is 8.5 by 11 inches (ANSI/ASME Y14.1)."""
    (place,) = made[".pdf"] if paper == "a4" else written(tmp_path, ".pdf", paper)
    data = place.read_bytes()
    assert len(re.findall(rb"/Type /Page\b", data)) == 2
    for found in re.findall(rb"/MediaBox \[([^]]*)\]", data):
        assert [float(word) for word in found.split()][2:] == pytest.approx(points, abs=0.01)
    assert b"/CreationDate" not in data


def test_papers_are_those_offered():
    assert PAPERS == ("a4", "letter")


def test_png_pages_are_grey_and_large_enough_to_print(made):
    for place in made[".png"]:
        picture = imread(place)
        assert picture.shape[0] == pytest.approx(297 / 25.4 * 200, abs=1)
        red, green, blue = (picture[..., n] for n in range(3))
        assert np.array_equal(red, green)
        assert np.array_equal(green, blue)
        assert 0.01 < (red < 0.5).mean() < 0.2  # ink, and mostly paper


def test_svg_pages_are_well_formed(made):
    for place in made[".svg"]:
        root = ElementTree.parse(place).getroot()
        assert root.get("width", "").endswith("pt")
        assert float(root.get("width")[:-2]) == pytest.approx(595.276, abs=0.01)


class Page(HTMLParser):
    """What a browser would find."""

    def __init__(self, text):
        super().__init__()
        self.images, self.cells, self.tags, self.links = [], [], [], []
        self.feed(text)

    def handle_starttag(self, tag, attributes):
        found = dict(attributes)
        self.tags.append(tag)
        if tag == "img":
            self.images.append(found)
        self.links += [v for k, v in found.items() if k in ("src", "href", "data", "srcset")]

    def handle_data(self, data):
        self.cells.append(data.strip())


def test_html_needs_nothing_but_itself(made):
    (place,) = made[".html"]
    page = Page(place.read_text(encoding="utf-8"))
    assert len(page.images) == 2
    for image in page.images:
        assert image["alt"].startswith("Page ")
        kind, _, data = image["src"].partition(",")
        assert kind == "data:image/svg+xml;base64"
        ElementTree.fromstring(base64.b64decode(data))
    assert all(link.startswith("data:") for link in page.links)
    assert not {"script", "link", "iframe"} & set(page.tags)
    assert "1.50 (1.14–1.90) s" in page.cells  # 1.00082 Mohm x 1.5 uF, by hand: 1.501 s
    assert "@page { size: a4;" in place.read_text(encoding="utf-8")


@pytest.mark.parametrize("suffix", [".html", ".pdf"])
def test_any_name_can_be_printed(tmp_path, suffix):
    title = "<b>$5 & \\frac{ % \"'字🎭</b> _^{}"
    stage = replace(FILM, title=title, about=title)
    stage = replace(stage, ranges=(replace(stage.ranges[0], name=title), stage.ranges[1]))
    (place,) = written(tmp_path, suffix, sheet=bench_sheet(stage))
    if suffix == ".html":
        page = Page(place.read_text(encoding="utf-8"))
        assert "b" not in page.tags
        assert f"Bench sheet: {title}" in page.cells


def test_limits_are_printed_in_one_unit_and_rounded_outwards():
    assert seconds_within(Limits(77.93e-3, 56.19e-3, 102.71e-3)) == "77.9 (56.1–102.8) ms"
    assert seconds_within(Limits(2.369, 1.7069, 3.1262)) == "2.37 (1.70–3.13) s"
    assert seconds_within(Limits(331e-6, 294.5e-6, 367.4e-6)) == "331 (294–368) µs"
    assert seconds_within(Limits(331e-6, 331e-6, 331e-6)) == "331 µs"
    assert seconds_within(Limits(1.0, 1.0, 1.0)) == "1.00 s"
    assert volts_within(Limits(4.99963, 4.97181, 5.01456)) == "5.000 (4.971–5.015) V"
    assert volts_within(Limits(0.1, -0.25, 0.4)) == "0.100 (-0.250 to 0.400) V"
    assert (hertz(0.022), hertz(1300.0), hertz(47e-5)) == ("22 mHz", "1.3 kHz", "470 µHz")
    assert (seconds(0.0), seconds(1.4706), seconds(47e-6)) == ("0", "1.47 s", "47 µs")
