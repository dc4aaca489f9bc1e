"""Keys from a terminal, one at a time and without echo; the terminal is always put back.

Key names: the character itself, and ``left``, ``right``, ``up``, ``down``, ``space``, ``tab``,
``enter``, ``backspace``, ``escape``.
"""

from __future__ import annotations

import contextlib
import os
import sys
import time
from types import TracebackType
from typing import Protocol, Self

from livelag.live.key_decoder import KeyDecoder

#: More keys than this at once are a paste, not typing: all of it is ignored until it ends.
MOST_KEYS = 64
_PASTE_OVER_S = 0.2
#: An escape sequence that is not whole after this long never will be.
_SPLIT_S = 0.05


class _Source(Protocol):
    """A terminal to read from."""

    def open(self) -> bool: ...
    def close(self) -> None: ...
    def read(self, timeout_s: float) -> bytes: ...
    def discard(self) -> None: ...

    @property
    def gone(self) -> bool: ...


class KeyReader:
    """Context manager that reads keys; where there is no terminal it reads none.

    Ctrl-C still interrupts and Ctrl-Z still stops the program; the terminal is itself meanwhile.

    Attributes:
        pasted: how often a flood of keys was taken for a paste and ignored.
    """

    def __init__(self, fd: int | None = None) -> None:
        """Prepare to read.

        Args:
            fd: file descriptor of the terminal; standard input unless said.
        """
        self._source = _source(fd)
        self._decoder = KeyDecoder()
        self._open = False
        self._flooded_until = 0.0
        self.pasted = 0

    @property
    def gone(self) -> bool:
        """Whether the terminal has hung up: nothing will be typed any more."""
        return self._open and self._source.gone

    def __enter__(self) -> Self:
        self._open = self._source.open()
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        if self._open:
            self._open = False
            self._source.close()

    def read_keys(self, timeout_s: float) -> list[str]:
        """Keys typed since the last call; waits up to ``timeout_s`` seconds for the first.

        Args:
            timeout_s: seconds, 0 or more.
        """
        if not self._open or self._source.gone:
            time.sleep(timeout_s)
            return []
        data = self._source.read(timeout_s)
        keys = self._decoder.feed(data)
        while self._decoder.pending:
            rest = self._source.read(_SPLIT_S)
            keys += self._decoder.feed(rest) if rest else self._decoder.give_up()
        return self._without_paste(keys, bool(data))

    def _without_paste(self, keys: list[str], any_data: bool) -> list[str]:
        now = time.monotonic()
        flooded = now < self._flooded_until
        if len(keys) > MOST_KEYS or (flooded and any_data):
            self.pasted += not flooded
            self._flooded_until = now + _PASTE_OVER_S
            self._source.discard()
            return []
        return keys


class _NoTerminal:
    """Nothing to read from: a pipe, a file, or nothing at all."""

    gone = False

    def open(self) -> bool:
        return False

    def close(self) -> None:
        pass

    def read(self, timeout_s: float) -> bytes:
        time.sleep(timeout_s)
        return b""

    def discard(self) -> None:
        pass


def _source(fd: int | None) -> _Source:
    if fd is None:
        try:
            fd = sys.stdin.fileno()
        except (AttributeError, OSError, ValueError):
            return _NoTerminal()
    with contextlib.suppress(OSError):
        if os.isatty(fd):
            if sys.platform == "win32":
                return _Console()
            from livelag.live.terminal import CbreakTerminal

            return CbreakTerminal(fd)
    return _NoTerminal()


if sys.platform == "win32":
    import msvcrt

    _SCAN_CODES = {"K": b"\x1b[D", "M": b"\x1b[C", "H": b"\x1b[A", "P": b"\x1b[B"}

    class _Console(_NoTerminal):
        """The Windows console, whose arrows are made into the sequences of other terminals."""

        def open(self) -> bool:
            return True

        def read(self, timeout_s: float) -> bytes:
            end = time.monotonic() + timeout_s
            while not msvcrt.kbhit():
                if time.monotonic() >= end:
                    return b""
                time.sleep(0.01)
            data = b""
            while msvcrt.kbhit() and len(data) < 4096:
                character = msvcrt.getwch()
                if character == "\x03":
                    raise KeyboardInterrupt
                if character in "\x00\xe0":
                    data += _SCAN_CODES.get(msvcrt.getwch(), b"")
                else:
                    data += character.encode("utf-8", "ignore")
            return data

        def discard(self) -> None:
            while msvcrt.kbhit():
                msvcrt.getwch()
