"""The terminal's other screen, on which the panel is drawn, and what gives the first one back."""

from __future__ import annotations

import io
import os
import select
import sys

from rich.console import Console

from livelag.live.panel import render_panel
from livelag.live.snapshot import Snapshot

#: Alternate screen, cursor hidden, no wrapping at the right edge.
ENTER = "\x1b[?1049h\x1b[?25l\x1b[?7l\x1b[0m\x1b[2J\x1b[H"
#: Attributes, wrapping and cursor as they were, and the screen that was there before.
LEAVE = "\x1b[0m\x1b[?7h\x1b[?25h\x1b[?1049l"
#: Terminals that know it show everything between the two at once.
_BEGIN, _END = "\x1b[?2026h", "\x1b[?2026l"
_FALLBACK_SIZE = (80, 24)


def write_all(fd: int, text: str) -> None:
    """Write text to a terminal, all of it.

    Raises:
        OSError: if the terminal has gone.
    """
    data = text.encode("utf-8", "replace")
    while data:
        try:
            data = data[os.write(fd, data) :]
        except BlockingIOError:
            select.select([], [fd], [], 1.0)


class PanelScreen:
    """Draws snapshots on a terminal, changed lines only."""

    def __init__(self, fd: int) -> None:
        """Use a terminal.

        Args:
            fd: its file descriptor, open for writing.
        """
        self._fd = fd
        self._size = (0, 0)
        self._lines: list[str] = []
        self._console = Console()

    def enter(self) -> None:
        """Show the other screen, empty."""
        if sys.platform == "win32":
            os.system("")  # makes the Windows console obey control sequences
        self._lines = []
        write_all(self._fd, ENTER)

    def leave(self) -> None:
        """Give the first screen and the cursor back."""
        write_all(self._fd, LEAVE)

    @property
    def resized(self) -> bool:
        """Whether the terminal has another size than at the last drawing."""
        return self._terminal_size() != self._size

    def draw(self, snapshot: Snapshot, help_shown: bool = False) -> None:
        """Show a snapshot; lines that have not changed are left alone."""
        size = self._terminal_size()
        text = _BEGIN
        if size != self._size:
            self._size, self._lines = size, []
            self._console = _console(*size)
            text += "\x1b[0m\x1b[2J"
        lines = self._rendered(snapshot, help_shown)
        for number, line in enumerate(lines):
            if number >= len(self._lines) or line != self._lines[number]:
                text += f"\x1b[{number + 1};1H{line}"
        self._lines = lines
        write_all(self._fd, text + _END)

    def _rendered(self, snapshot: Snapshot, help_shown: bool) -> list[str]:
        width, height = self._size
        with self._console.capture() as captured:
            self._console.print(render_panel(snapshot, width, height, help_shown), end="")
        return captured.get().split("\n")[:height]

    def _terminal_size(self) -> tuple[int, int]:
        try:
            columns, lines = os.get_terminal_size(self._fd)
        except OSError:
            return _FALLBACK_SIZE
        return (columns, lines) if columns > 0 and lines > 0 else _FALLBACK_SIZE


def _console(width: int, height: int) -> Console:
    """A console that renders for the terminal, in its colours and without if NO_COLOR says so."""
    return Console(
        file=io.StringIO(),
        force_terminal=True,
        legacy_windows=False,
        width=width,
        height=height,
        highlight=False,
        markup=False,
        emoji=False,
    )
