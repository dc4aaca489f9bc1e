"""The listening page as HTML: well formed, escaped, and all of a piece."""

import base64
import hashlib
import re
from dataclasses import replace

import numpy as np
import pytest
from tinyhtml5.parser import HTMLParser

from livelag.circuit.stage import Scale
from livelag.report.curve_drawing import draw_curve
from livelag.report.listening_page import Page, Sound, page_files, page_html

TIMES = np.arange(2000) / 1000
KEY = np.where(TIMES < 1.0, 1.0, 2.0)
GLIDE = np.where(TIMES < 1.0, 1.0, 2.0 - np.exp(-(TIMES - 1.0) / 0.05))
CURVE = draw_curve(TIMES, KEY, GLIDE, 2.0, Scale(), lambda volts: volts)
SVG = "{http://www.w3.org/2000/svg}"
HOSTILE = """<script>alert("1")</script> & 'two' "three" {{ 7 * 7 }} </style> é"""


def make_page(count=3, **changes):
    sounds = tuple(
        Sound(n, f"{n:02d}-slow-0.500.flac", "slow", 0.5, 0.0779, 0.429, CURVE)
        for n in range(1, count + 1)
    )
    page = Page("A stage", "About it.", "run", 33, False, "exact", sounds)
    return replace(page, **changes)


def parse(html):
    """The page's tree; an error by the HTML standard's own parsing rules fails the test."""
    parser = HTMLParser(namespace_html_elements=False)
    tree = parser.parse(html)
    assert parser.errors == []
    return tree


def text_of(html, path):
    return [" ".join("".join(node.itertext()).split()) for node in parse(html).findall(path)]


def attribute(html, path, name):
    return [node.attrib[name] for node in parse(html).findall(path)]


@pytest.mark.parametrize("count", [1, 2, 12])
def test_it_is_html_without_a_parse_error_and_ids_are_met_once(count):
    html = page_html(make_page(count))
    tree = parse(html)
    ids = attribute(html, ".//*[@id]", "id")
    assert len(ids) == len(set(ids))
    for value in attribute(html, ".//*[@aria-labelledby]", "aria-labelledby"):
        assert set(value.split()) <= set(ids)
    for value in attribute(html, ".//a", "href"):
        assert value.removeprefix("#") in ids
    assert set(attribute(html, ".//label[@for]", "for")) <= set(ids)
    curves = f".//article/figure/{SVG}svg"
    for path in (".//article", ".//audio", curves, f"{curves}/{SVG}title", f"{curves}/{SVG}desc"):
        assert len(tree.findall(path)) == count
    assert len(tree.findall(".//input[@name='choice']")) == (0 if count == 1 else count)


@pytest.mark.parametrize(
    ("good", "bad"),
    [
        ("</article>", ""),
        ('lang="en"', 'lang="en" lang="en"'),
        ("</h1>", "</h2>"),
        ("<!DOCTYPE html>", ""),
    ],
)
def test_the_parser_would_tell(good, bad):
    html = page_html(make_page())
    assert good in html
    with pytest.raises(AssertionError):
        parse(html.replace(good, bad, 1))


def test_names_and_titles_are_escaped():
    sounds = (replace(make_page().sounds[0], range_name=HOSTILE),)
    page = make_page(title=HOSTILE, about=HOSTILE, tune=HOSTILE, sounds=sounds)
    html = page_html(page)
    flat = " ".join(HOSTILE.split())
    assert text_of(html, ".//h1") == [flat]
    assert text_of(html, ".//p[@class='about']") == [flat]
    assert text_of(html, ".//cite") == [flat]
    assert text_of(html, ".//dl[@class='setting']//dd")[0] == flat
    assert attribute(html, ".//textarea", "data-title") == [HOSTILE]
    assert attribute(html, ".//article", "data-name") == [f"Sound 1: {HOSTILE}, rotation 0.5"]
    assert html.count("<script") == html.count("<style") == 1
    assert "49" not in text_of(html, ".//h1")[0]


def test_nothing_but_its_own_style_and_script_may_run():
    html = page_html(make_page(title=HOSTILE))
    (policy,) = attribute(html, ".//meta[@http-equiv='Content-Security-Policy']", "content")
    rules = dict(rule.strip().split(" ", 1) for rule in policy.split(";"))
    assert rules["default-src"] == "'none'"
    assert rules["base-uri"] == rules["form-action"] == "'none'"
    assert set(rules) == {
        "default-src", "style-src", "script-src", "media-src", "img-src", "base-uri", "form-action",
    }  # fmt: skip
    assert "unsafe" not in policy
    for tag in ("style", "script"):
        (content,) = re.findall(f"<{tag}>(.*?)</{tag}>", html, re.DOTALL)
        digest = base64.b64encode(hashlib.sha256(content.encode()).digest()).decode()
        assert rules[f"{tag}-src"] == f"'sha256-{digest}'"
    assert not re.search(r"<[^>]+\s(style|on\w+)=", html)


def test_nothing_points_outside():
    html = page_html(make_page())
    for name in ("src", "href"):
        for value in attribute(html, f".//*[@{name}]", name):
            assert value.startswith(("#", "data:,")) or re.fullmatch(r"[\w.-]+\.flac", value)
    assert "//" not in re.sub(r"^\s*//.*$", "", html, flags=re.MULTILINE)
    assert "@import" not in html
    assert "url(" not in html


def test_file_names_are_links_that_work():
    sounds = (replace(make_page().sounds[0], file='01-ä b#?%"<.flac'),)
    html = page_html(make_page(sounds=sounds))
    assert attribute(html, ".//audio", "src") == ["01-%C3%A4%20b%23%3F%25%22%3C.flac"]
    assert page_files(html) == {'01-ä b#?%"<.flac'}


def test_a_page_knows_its_own():
    html = page_html(make_page())
    assert page_files(html) == {f"{n:02d}-slow-0.500.flac" for n in (1, 2, 3)}
    assert page_files(html.replace('content="livelag', 'content="other')) == frozenset()
    assert page_files("") == page_files("<audio src='x.flac'>") == frozenset()
    assert page_files("\x00<<<!>") == frozenset()


def test_what_does_not_apply_is_not_said():
    one, many = page_html(make_page(1)), page_html(make_page(12))
    assert "next, previous" not in one
    assert "<kbd>9</kbd>" in many
    assert text_of(page_html(make_page(about="")), ".//p[@class='about']") == []
    assert "The tune itself moves" not in one
    assert "The tune itself moves" in page_html(make_page(moves_controls=True))


def test_times_without_end_are_words():
    sounds = (replace(make_page().sounds[0], octave_arrival_s=float("inf")),)
    assert text_of(page_html(make_page(sounds=sounds)), ".//dl[@class='setting']//dd") == [
        "slow", "0.5 (half way)", "77.9 ms", "never",
    ]  # fmt: skip


def test_the_caution_comes_before_any_player():
    html = page_html(make_page())
    assert html.index("Start quiet") < html.index("Protect your ears") < html.index("<audio")


def test_the_table_says_what_the_curve_shows():
    cells = text_of(page_html(make_page(1)), ".//tbody/tr/*")
    assert cells[:3] == ["0.00 s", "C3", "1.000 V"]
    assert cells[3:5] == ["at once", "0.0 cents"]
    assert cells[5:8] == ["1.00 s", "C4", "2.000 V"]
    assert cells[8] == "275 ms"  # 50 ms x ln(1200 / 5) = 274 ms, read every millisecond
