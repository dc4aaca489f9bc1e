"""Pictures of a pitch curve: what must be on them, in grey as in colour."""

from pathlib import Path

import numpy as np
import pytest
from matplotlib.colors import to_rgb

from livelag.circuit.stage import Scale
from livelag.errors import UnknownNameError
from livelag.report.figures import check_picture, curve_figure, save_figure

SCALE = Scale(1.0, 36.0)
TIMES = np.linspace(0.0, 1.0, 1001)
KEY = np.where(TIMES < 0.2, 1.0, 2.0)
GLIDE = np.where(TIMES < 0.2, 1.0, 2.0 - np.exp(-(TIMES - 0.2) / 0.05))


@pytest.fixture
def figure():
    return curve_figure(TIMES, KEY, GLIDE, SCALE, "A stage", "its setting")


def test_two_axes_share_their_time_and_say_what_they_show(figure):
    upper, lower = figure.axes
    assert figure.get_suptitle() == "A stage\nits setting"
    assert upper.get_ylabel() == "volts"
    assert lower.get_ylabel() == "glide - key, cents"
    assert lower.get_xlabel() == "time, s"
    assert upper.get_xlim() == lower.get_xlim() == (0.0, 1.0)
    texts = [text.get_text() for text in upper.get_legend().get_texts()]
    assert texts == ["key volts (before the glide)", "glide volts (what the oscillator gets)"]
    assert [t.get_text() for t in lower.get_legend().get_texts()] == ["within 5 cents"]


def test_the_lines_are_the_volts_and_the_error_in_cents(figure):
    upper, lower = figure.axes
    key, glide = upper.get_lines()
    np.testing.assert_array_equal(key.get_ydata(), KEY)
    np.testing.assert_array_equal(glide.get_ydata(), GLIDE)
    (error,) = lower.get_lines()
    np.testing.assert_allclose(error.get_ydata(), 1200.0 * (GLIDE - KEY))
    low, high = lower.get_ylim()
    assert low < error.get_ydata().min()
    assert high > error.get_ydata().max()


def test_the_lines_differ_without_colour(figure):
    key, glide = figure.axes[0].get_lines()
    assert key.is_dashed()
    assert not glide.is_dashed()
    assert glide.get_linewidth() >= 1.5 * key.get_linewidth()
    for line in (key, glide, *figure.axes[1].get_lines()):
        # Relative luminance on white with a contrast of 4.5 or more (WCAG 2.1, from memory).
        linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4
                  for c in to_rgb(line.get_color())]  # fmt: skip
        luminance = np.dot((0.2126, 0.7152, 0.0722), linear)
        assert 1.05 / (luminance + 0.05) >= 4.5


@pytest.mark.parametrize(
    ("octaves", "expected"),
    [
        (0.5, {"C3", "C#3", "D3", "F#3"}),
        (1.5, {"C3", "E3", "G3", "C4", "F#4"}),
        (4.0, {"C3", "C6"}),
    ],
)
def test_notes_stand_beside_the_volts(octaves, expected):
    glide = np.linspace(1.0, 1.0 + octaves, 1001)
    figure = curve_figure(TIMES, glide, glide, SCALE, "t", "n")
    (names,) = figure.axes[0].child_axes
    assert names.get_ylabel() == "note"
    ticks = dict(
        zip((t.get_text() for t in names.get_yticklabels()), names.get_yticks(), strict=True)
    )
    assert ticks["C3"] == pytest.approx(1.0)  # 0 V is note 36, C2
    assert len(ticks) <= 16
    if octaves != 1.5:
        assert ticks.keys() >= expected
    else:
        assert {name.rstrip("0123456789") for name in ticks} == {"C", "E", "G"}


def test_a_glide_that_never_errs_still_has_an_axis():
    figure = curve_figure(TIMES, KEY, KEY, SCALE, "t", "n")
    low, high = figure.axes[1].get_ylim()
    assert (low, high) == (-20.0, 20.0)


@pytest.mark.parametrize("suffix", ["png", "svg", "pdf"])
def test_a_picture_repeats_to_the_byte(tmp_path, suffix):
    for name in ("a", "b"):
        figure = curve_figure(TIMES, KEY, GLIDE, SCALE, "A stage", "its setting")
        save_figure(figure, tmp_path / f"{name}.{suffix}")
    data = (tmp_path / f"a.{suffix}").read_bytes()
    assert data == (tmp_path / f"b.{suffix}").read_bytes()
    assert len(data) > 5000


@pytest.mark.parametrize("title", ["$5 and \\frac{ $6", "字 and 🎭", "_^{}", "%s"])
def test_any_title_can_be_drawn(tmp_path, title):
    save_figure(curve_figure(TIMES, KEY, GLIDE, SCALE, title, title), tmp_path / "x.png")
    assert (tmp_path / "x.png").stat().st_size > 5000


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="needs /dev/full")
def test_a_disk_that_is_full_is_an_os_error_that_names_the_file(figure, tmp_path):
    path = tmp_path / "x.png"
    path.symlink_to("/dev/full")
    with pytest.raises(OSError, match="No space left") as caught:
        save_figure(figure, path)
    assert caught.value.filename == str(path)


def test_a_picture_needs_a_suffix_that_exists(tmp_path):
    for name in ("x.png", "x.SVG", "x.pdf"):
        check_picture(tmp_path / name)
    with pytest.raises(UnknownNameError, match=r"x\.jpg: unknown picture suffix '\.jpg'; .*\.png"):
        check_picture(tmp_path / "x.jpg")
