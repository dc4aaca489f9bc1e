"""The panel's own process: it draws what comes through the pipe and leaves a clean terminal.

It ends when the pipe closes, whatever closed it, when the terminal goes away, or when told to by a
signal. It ignores the interrupt key, which is meant for the audition.
"""

from __future__ import annotations

import contextlib
import os
import signal
import sys
import time
from collections.abc import Iterator
from multiprocessing.connection import Connection
from types import FrameType
from typing import Any

from livelag.live.panel_screen import PanelScreen
from livelag.live.snapshot import Snapshot
from livelag.live.terminal import Attributes, attributes_of, cbreak, put_back

#: What the child says when it can take another snapshot.
READY = b"r"
#: What the parent says before it closes the pipe.
GOODBYE = "goodbye"
DRAWINGS_PER_S = 15
_LOOK_S = 0.2
_ORPHANED_WITHIN_S = 1.0
_STDOUT = 1


def main(connection: Connection, parent: int, saved: Attributes | None) -> None:
    """Draw until the pipe closes.

    Args:
        connection: snapshots come in, `READY` goes out.
        parent: process id of the audition.
        saved: settings of the terminal before keys were read from it.
    """
    screen = PanelScreen(_STDOUT)
    _handle_signals(screen)
    goodbye = False
    try:
        with _on_screen(screen):
            goodbye = _draw_all(screen, connection)
    except (OSError, EOFError):
        pass  # the terminal or the audition has gone
    except Exception as error:
        with contextlib.suppress(OSError):
            connection.send_bytes(f"{type(error).__name__}: {error}".encode())
        sys.exit(1)
    if not goodbye and saved is not None and _orphaned(parent):
        _put_terminal_back(saved)


@contextlib.contextmanager
def _on_screen(screen: PanelScreen) -> Iterator[None]:
    try:
        screen.enter()
        yield
    finally:
        with contextlib.suppress(OSError):
            screen.leave()


def _draw_all(screen: PanelScreen, connection: Connection) -> bool:
    """Draw what comes; returns whether the audition said goodbye."""
    message: tuple[Snapshot, bool] | None = None
    connection.send_bytes(READY)
    while True:
        if connection.poll(_LOOK_S):
            try:
                received: Any = connection.recv()
            except EOFError:
                return False
            if received == GOODBYE:
                return True
            message = received
        elif message is None or not screen.resized:
            continue
        began = time.monotonic()
        screen.draw(*message)
        # Not faster than the eye needs, even if more is offered.
        time.sleep(max(0.0, 1.0 / DRAWINGS_PER_S - (time.monotonic() - began) - 0.005))
        connection.send_bytes(READY)


def _orphaned(parent: int) -> bool:
    """Whether the audition's process is gone; its pipe closes a moment before it is."""
    until = time.monotonic() + _ORPHANED_WITHIN_S
    while os.getppid() == parent:
        if time.monotonic() >= until:
            return False
        time.sleep(0.01)
    return True


def _put_terminal_back(saved: Attributes) -> None:
    """Undo what the killed audition did to the terminal, unless somebody else uses it by now."""
    if attributes_of(_STDOUT) == cbreak(saved):
        put_back(_STDOUT, saved)


def _handle_signals(screen: PanelScreen) -> None:
    def end(number: int, frame: FrameType | None) -> None:
        sys.exit(0)

    signal.signal(signal.SIGINT, signal.SIG_IGN)
    signal.signal(signal.SIGTERM, end)
    if sys.platform == "win32":
        return

    def stop(number: int, frame: FrameType | None) -> None:
        with contextlib.suppress(OSError):
            screen.leave()
        signal.signal(signal.SIGTSTP, signal.SIG_DFL)
        os.kill(os.getpid(), signal.SIGTSTP)
        # Going on: this line runs when the process is continued.
        signal.signal(signal.SIGTSTP, stop)

    def go_on(number: int, frame: FrameType | None) -> None:
        with contextlib.suppress(OSError):
            screen.enter()

    signal.signal(signal.SIGHUP, end)
    signal.signal(signal.SIGQUIT, signal.SIG_IGN)  # it ends the audition, and so the pipe
    signal.signal(signal.SIGTTOU, signal.SIG_IGN)  # to clean up even when in the background
    signal.signal(signal.SIGTSTP, stop)
    signal.signal(signal.SIGCONT, go_on)
    signal.pthread_sigmask(signal.SIG_SETMASK, set())
