"""Bench sheets as files that repeat to the byte: PDF, HTML, or two pictures."""

from __future__ import annotations

import io
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from livelag.bench.sheet import Sheet
from livelag.errors import UnknownNameError
from livelag.report.sheet_page import PAPERS_MM, without_glyph_warnings

if TYPE_CHECKING:
    from matplotlib.figure import Figure

SUFFIXES = (".pdf", ".png", ".svg", ".html")
PAPERS = tuple(PAPERS_MM)
_DOTS_PER_INCH = 200
SETTINGS: Any = {
    "svg.hashsalt": "livelag",
    "pdf.fonttype": 42,  # letters stay text that can be searched and copied
    "text.hinting": "none",  # letters keep their widths at any size
    "hatch.linewidth": 0.35,
}


def sheet_paths(out: Path) -> tuple[Path, ...]:
    """The files that a name stands for: a picture holds one page, so there are two.

    Raises:
        UnknownNameError: if the suffix is none of `SUFFIXES`.
    """
    suffix = out.suffix.lower()
    if suffix not in SUFFIXES:
        raise UnknownNameError("sheet suffix", out.suffix, SUFFIXES, where=str(out))
    if suffix in (".png", ".svg"):
        return tuple(out.with_name(f"{out.stem}-{page}{out.suffix}") for page in (1, 2))
    return (out,)


def write_sheet(sheet: Sheet, paper: str, places: Sequence[Path]) -> None:
    """Write a sheet.

    Args:
        sheet: what it says.
        paper: one of `PAPERS`.
        places: as many as `sheet_paths` gives, all of one suffix.

    Raises:
        OSError: if a file cannot be written.
    """
    from matplotlib import rc_context

    from livelag.report.sheet_pages import sheet_pages

    with rc_context(SETTINGS), without_glyph_warnings():
        pages = sheet_pages(sheet, paper)
        suffix = places[0].suffix.lower()
        if suffix == ".pdf":
            places[0].write_bytes(_pdf(pages, sheet.stage.title))
        elif suffix == ".html":
            from livelag.report.sheet_html import sheet_html

            html = sheet_html(sheet, paper, [_picture(page, "svg") for page in pages])
            places[0].write_text(html, encoding="utf-8", newline="\n")
        else:
            for place, page in zip(places, pages, strict=True):
                place.write_bytes(_picture(page, suffix.removeprefix(".")))


def _pdf(pages: Sequence[Figure], title: str) -> bytes:
    from matplotlib.backends.backend_pdf import PdfPages

    memory = io.BytesIO()
    told = {"Title": f"Bench sheet: {title}", "Creator": "livelag", "CreationDate": None}
    with PdfPages(memory, metadata=told) as pdf:
        for page in pages:
            pdf.savefig(page)
    return memory.getvalue()


def _picture(page: Figure, kind: str) -> bytes:
    memory = io.BytesIO()
    metadata = {"Date": None} if kind == "svg" else None
    page.savefig(memory, format=kind, dpi=_DOTS_PER_INCH, metadata=metadata)
    return memory.getvalue()
