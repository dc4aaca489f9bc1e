"""A POSIX terminal read key by key, and how it is put back whatever happens."""

from __future__ import annotations

import contextlib
import os
import select
import signal
import sys
import threading
import time
from collections.abc import Callable
from types import FrameType
from typing import Any

if sys.platform != "win32":
    import termios

Attributes = list[Any]
Handler = Callable[[int, FrameType | None], Any] | int | None

_READ_BYTES = 4096
#: The panel's own process leaves the screen at the same signal; the shell must find it left.
_PANEL_LEAVES_S = 0.05


def attributes_of(fd: int) -> Attributes | None:
    """Settings of a terminal, to be put back later; None where there is none."""
    if sys.platform == "win32":
        return None
    with contextlib.suppress(termios.error, OSError, ValueError):
        return termios.tcgetattr(fd)
    return None


def cbreak(attributes: Attributes) -> Attributes:
    """The same settings without echo and without waiting for a whole line."""
    changed = [*attributes[:6], list(attributes[6])]
    changed[3] &= ~(termios.ICANON | termios.ECHO)
    changed[6][termios.VMIN] = 1
    changed[6][termios.VTIME] = 0
    return changed


def put_back(fd: int, attributes: Attributes) -> None:
    """Give a terminal its settings back; one that has gone is left alone."""
    with contextlib.suppress(termios.error, OSError, ValueError):
        termios.tcsetattr(fd, termios.TCSADRAIN, attributes)


class CbreakTerminal:
    """A terminal in cbreak mode between `open` and `close`, and while the program is not stopped.

    Attributes:
        gone: whether it has hung up.
    """

    def __init__(self, fd: int) -> None:
        self._fd = fd
        self._saved: Attributes | None = None
        self._handlers: dict[int, Handler] = {}
        self.gone = False

    def open(self) -> bool:
        """Stop the echo; False if the terminal does not let us."""
        self._saved = attributes_of(self._fd)
        if self._saved is None:
            return False
        self._catch_signals()
        self._enter()
        return True

    def close(self) -> None:
        """Put the terminal and the signals back."""
        self._leave()
        for number, handler in self._handlers.items():
            signal.signal(number, handler)
        self._handlers = {}
        self._saved = None

    def read(self, timeout_s: float) -> bytes:
        """What has been typed; waits up to ``timeout_s`` seconds for something."""
        try:
            if not select.select([self._fd], [], [], timeout_s)[0]:
                return b""
            data = os.read(self._fd, _READ_BYTES)
        except (OSError, ValueError):
            data = b""
        if not data:
            self.gone = True
        return data

    def discard(self) -> None:
        """Forget what has been typed and not read."""
        with contextlib.suppress(termios.error, OSError):
            termios.tcflush(self._fd, termios.TCIFLUSH)

    def _enter(self) -> None:
        if self._saved is not None:
            put_back(self._fd, cbreak(self._saved))

    def _leave(self) -> None:
        if self._saved is not None:
            put_back(self._fd, self._saved)

    def _catch_signals(self) -> None:
        if threading.current_thread() is not threading.main_thread():
            return
        for number, handler in (
            (signal.SIGTSTP, self._stop),
            (signal.SIGCONT, self._go_on),
            (signal.SIGTERM, self._end),
            (signal.SIGHUP, self._end),
        ):
            # A program that catches the end itself unwinds, and so comes by `close`.
            if signal.getsignal(number) == signal.SIG_DFL:
                self._handlers[number] = signal.signal(number, handler)

    def _stop(self, number: int, frame: FrameType | None) -> None:
        self._leave()
        time.sleep(_PANEL_LEAVES_S)
        signal.signal(signal.SIGTSTP, signal.SIG_DFL)
        os.kill(os.getpid(), signal.SIGTSTP)
        # Going on: this line runs when the program is continued.
        signal.signal(signal.SIGTSTP, self._stop)

    def _go_on(self, number: int, frame: FrameType | None) -> None:
        self._enter()

    def _end(self, number: int, frame: FrameType | None) -> None:
        self._leave()
        signal.signal(number, signal.SIG_DFL)
        os.kill(os.getpid(), number)
