"""Line styles that are told apart by dash as well as by colour, so that a picture reads in grey."""

from __future__ import annotations

from typing import Any

LINE_COLOURS = ("#0b5fa5", "#a5480b", "#3d7a2a", "#6b3fa0", "#8a6d00", "#444444")
DASHES = ("-", (0, (7, 2)), (0, (5, 2, 1, 2)), (0, (2, 1.5)), (0, (9, 2, 2, 2, 2, 2)), (0, (1, 1)))


def line_style(number: int) -> dict[str, Any]:
    """Colour and dash of the so-manieth line, told apart in grey too."""
    return {
        "color": LINE_COLOURS[number % len(LINE_COLOURS)],
        "linestyle": DASHES[number % len(DASHES)],
    }
