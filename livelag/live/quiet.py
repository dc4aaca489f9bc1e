"""Keep the chatter of C libraries off the user's screen."""

from __future__ import annotations

import contextlib
import os
import sys
import threading
from collections.abc import Iterator

_lock = threading.RLock()


@contextlib.contextmanager
def stderr_silenced() -> Iterator[None]:
    """Send file descriptor 2 nowhere for a moment, and put it back whatever happens.

    Sound and MIDI libraries written in C print their probing straight to standard error. The
    descriptor belongs to the whole process: anything another thread prints meanwhile is lost, so
    keep what is inside short. Where standard error is closed nothing is done.
    """
    with _lock:
        try:
            saved = os.dup(2)
        except OSError:
            yield
            return
        try:
            with contextlib.suppress(AttributeError, OSError, ValueError):
                sys.stderr.flush()
            sink = os.open(os.devnull, os.O_WRONLY)
            os.dup2(sink, 2)
            os.close(sink)
            yield
        finally:
            os.dup2(saved, 2)
            os.close(saved)
