"""The listening page: sounds to choose from, each with its setting and its pitch curve.

One HTML file that needs nothing but the sound files beside it: no network, no fonts, no cookies.
Its style and script stand inside it, allowed by their hashes alone (Content Security Policy
Level 3), so that nothing that gets into a title can run. Templates are Jinja2's, with every value
escaped.
"""

from __future__ import annotations

import base64
import hashlib
import math
from collections.abc import Iterable
from dataclasses import dataclass
from html.parser import HTMLParser
from typing import Any
from urllib.parse import unquote

import livelag
from livelag.circuit.stage import ARRIVAL_TOLERANCE_CENTS
from livelag.report import curve_drawing
from livelag.report.curve_drawing import CurveDrawing
from livelag.report.templating import page_templates
from livelag.units import format_value

GENERATOR = "livelag"
DIGIT_KEYS = 9  # sounds that a digit key plays


@dataclass(frozen=True, slots=True)
class Sound:
    """One sound of a page.

    Attributes:
        number: from 1, in the order they are offered.
        file: name of its file, beside the page.
        range_name: what the range switch says.
        rotation: turn of the pot, 0 to 1.
        time_constant_s: R C in seconds.
        octave_arrival_s: until an octave is in tune for good, in seconds; may be infinite.
        curve: its pitch curve.
    """

    number: int
    file: str
    range_name: str
    rotation: float
    time_constant_s: float
    octave_arrival_s: float
    curve: CurveDrawing

    @property
    def rotation_words(self) -> str:
        """The pot's turn, with its ends named."""
        ends = {0.0: " (fastest end)", 0.5: " (half way)", 1.0: " (slowest end)"}
        return f"{self.rotation:g}{ends.get(self.rotation, '')}"

    @property
    def name(self) -> str:
        """Range and rotation, short."""
        return f"{self.range_name}, rotation {self.rotation:g}"


@dataclass(frozen=True, slots=True)
class Page:
    """What a page holds.

    Attributes:
        title: the stage's.
        about: a sentence or two on the stage; may be empty.
        tune: what is played.
        note_count: how many notes begin.
        moves_controls: whether the tune itself turns the pot or flips a switch.
        method: ``exact`` or ``bilinear``.
        sounds: one or more.
    """

    title: str
    about: str
    tune: str
    note_count: int
    moves_controls: bool
    method: str
    sounds: tuple[Sound, ...]


def page_html(page: Page) -> str:
    """The whole page as text, to be written as UTF-8."""
    environment = page_templates()
    environment.filters["quantity"] = _quantity
    style = environment.get_template("listening_page.css").render()
    script = environment.get_template("listening_page.js").render()
    return environment.get_template("listening_page.html").render(
        page=page,
        style=style,
        script=script,
        style_hash=_hash(style),
        script_hash=_hash(script),
        field=_field(),
        tolerance_cents=ARRIVAL_TOLERANCE_CENTS,
        digit_keys=min(DIGIT_KEYS, len(page.sounds)),
        generator=GENERATOR,
        version=livelag.__version__,
    )


def page_files(html: str) -> frozenset[str]:
    """Names of the sound files that a page of ours plays; none if it is not one of ours."""
    reader = _PageReader()
    reader.feed(html)
    reader.close()
    return frozenset(reader.sounds) if reader.is_ours else frozenset()


class _PageReader(HTMLParser):
    """Finds who made a page, and its sounds."""

    def __init__(self) -> None:
        super().__init__()
        self.is_ours = False
        self.sounds: list[str] = []

    def handle_starttag(self, tag: str, attrs: Iterable[tuple[str, str | None]]) -> None:
        values = dict(attrs)
        if tag == "meta" and values.get("name") == "generator":
            self.is_ours = (values.get("content") or "").split(" ")[0] == GENERATOR
        if tag == "audio" and values.get("src"):
            self.sounds.append(unquote(values["src"] or ""))


def _field() -> dict[str, float]:
    """The drawing's measures, for the template."""
    names = ("WIDTH", "HEIGHT", "LEFT", "RIGHT", "TOP", "BOTTOM")
    return {name.lower(): getattr(curve_drawing, name) for name in names}


def _hash(text: str) -> str:
    digest = hashlib.sha256(text.encode()).digest()
    return f"sha256-{base64.b64encode(digest).decode()}"


def _quantity(value: float | None, unit: str) -> Any:
    """A value as people read it, which keeps to one line."""
    if value is None or not math.isfinite(value):
        return "never"
    return format_value(value, unit).replace(" ", "\u00a0")
