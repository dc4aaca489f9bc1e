"""The panel in a process of its own, so that drawing never holds up the audio callback.

One drawing keeps the interpreter busy for longer than a block of sound lasts. The parent only
pickles a snapshot now and then; and it never waits: a snapshot that finds the panel still busy is
dropped, the next one is only a fifteenth of a second away.
"""

from __future__ import annotations

import contextlib
import multiprocessing
import os
import select
import signal
import sys
from collections.abc import Iterator
from multiprocessing.connection import Connection
from multiprocessing.context import SpawnProcess
from types import TracebackType
from typing import Self

from livelag.errors import DeviceError
from livelag.live.panel_child import GOODBYE, READY, main
from livelag.live.panel_screen import LEAVE, write_all
from livelag.live.snapshot import Snapshot
from livelag.live.terminal import attributes_of

_STDIN, _STDOUT = 0, 1
_END_WITHIN_S = 2.0
_GONE = (OSError, EOFError)


def can_show_panel() -> bool:
    """Whether standard output is a terminal that can show the panel."""
    try:
        return os.isatty(_STDOUT) and os.environ.get("TERM") != "dumb"
    except OSError:
        return False


class PanelProcess:
    """A panel on standard output; a context manager.

    Start it before keys are read from the terminal: it keeps the terminal's settings, to put them
    back if this process is killed.

    Attributes:
        problem: why the panel stopped by itself; empty while all is well.
        dropped: snapshots that found the panel busy.
    """

    def __init__(self) -> None:
        self._connection: Connection | None = None
        self._process: SpawnProcess | None = None
        self._ready = False
        self._help_shown = False
        self.problem = ""
        self.dropped = 0

    def start(self) -> None:
        """Start the process; the panel appears with the first snapshot that it takes.

        Raises:
            DeviceError: if standard output is no terminal that can show a panel.
        """
        if not can_show_panel():
            raise DeviceError("standard output is not a terminal for a panel; use --plain")
        context = multiprocessing.get_context("spawn")
        ours, theirs = context.Pipe()
        self._process = context.Process(
            target=main, args=(theirs, os.getpid(), _settings()), name="panel", daemon=True
        )
        with _signals_held():
            self._process.start()
        theirs.close()
        self._connection = ours

    def show(self, snapshot: Snapshot) -> bool:
        """Offer a snapshot; never waits.

        Returns:
            Whether the panel took it.
        """
        if self._connection is None:
            return False
        try:
            self._listen(self._connection)
            if not self._ready:
                self.dropped += 1
                return False
            self._connection.send((snapshot, self._help_shown))
        except _GONE:
            self._lost()
            return False
        self._ready = False
        return True

    def help(self, shown: bool) -> None:
        """Show the help page, or the panel again, from the next snapshot on."""
        self._help_shown = shown

    def close(self) -> None:
        """End the panel and have the screen as it was; may be called twice."""
        if self._connection is None:
            return
        connection, self._connection = self._connection, None
        with contextlib.suppress(*_GONE):
            self._listen(connection)
            if self._ready:
                connection.send(GOODBYE)
        connection.close()
        self._end()

    def __enter__(self) -> Self:
        self.start()
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()

    def _listen(self, connection: Connection) -> None:
        """Take what the child has said since the last time."""
        while connection.poll(0):
            said = connection.recv_bytes()
            if said == READY:
                self._ready = True
            else:
                self.problem = said.decode("utf-8", "replace")

    def _lost(self) -> None:
        """The child ended by itself."""
        if self._connection is not None:
            self._connection.close()
            self._connection = None
        status = self._end()
        self.problem = self.problem or f"its process ended with status {status}"

    def _end(self) -> int | None:
        """Wait for the child to end, make it, and clean the screen if it could not."""
        process = self._process
        if process is None:
            return None
        process.join(_END_WITHIN_S)
        if process.is_alive():
            process.terminate()
            process.join(_END_WITHIN_S / 4)
        if process.is_alive():
            process.kill()
            process.join()
        if process.exitcode:
            _restore_screen()
        return process.exitcode


def _settings() -> list[object] | None:
    """The terminal's settings, if keys come from the terminal that shows the panel."""
    with contextlib.suppress(OSError):
        if os.fstat(_STDIN).st_rdev == os.fstat(_STDOUT).st_rdev:
            return attributes_of(_STDOUT)
    return None


def _restore_screen() -> None:
    """Leave the other screen on the child's behalf, unless the terminal takes nothing."""
    with contextlib.suppress(OSError, ValueError):
        if sys.platform == "win32" or select.select([], [_STDOUT], [], 0.2)[1]:
            write_all(_STDOUT, LEAVE)


@contextlib.contextmanager
def _signals_held() -> Iterator[None]:
    """Keep signals waiting for a moment: the child inherits that and must not die unprepared."""
    if sys.platform == "win32":
        yield
        return
    held = {signal.SIGINT, signal.SIGTERM, signal.SIGHUP, signal.SIGQUIT, signal.SIGTSTP}
    before = signal.pthread_sigmask(signal.SIG_BLOCK, held)
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)
