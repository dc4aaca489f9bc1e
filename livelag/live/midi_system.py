"""The MIDI back end: which one, what inputs it has now, opening one of them.

Messages are mido's throughout, and MIDO_BACKEND names a back end as it does for mido, with the
interface after a slash. mido's default, `mido.backends.rtmidi`, stands for the RtMidi library:
through python-rtmidi where that is installed and through rtmidi2 where it is not.
"""

from __future__ import annotations

import importlib.util
import os
import re
from collections import deque
from collections.abc import Callable
from typing import Any, Protocol

import mido

from livelag.errors import DeviceError
from livelag.live.quiet import stderr_silenced
from livelag.live.rtmidi_inputs import RtMidiLibrary

RTMIDI = "mido.backends.rtmidi"
_INSTALL = (
    "Debian: apt install python3-rtmidi (in a virtual environment: apt install libasound2-dev, "
    "then pip install python-rtmidi); Fedora: dnf install python3-rtmidi; "
    "macOS and Windows: pip install rtmidi2"
)
_NO_SEQUENCER = (
    "on Linux load the ALSA sequencer (modprobe snd-seq) or, with JACK running, "
    f"set MIDO_BACKEND={RTMIDI}/UNIX_JACK"
)
#: What each interface puts in a name and changes from one plugging to the next.
_UNSTABLE = {
    "LINUX_ALSA": re.compile(r"\s+\d+:\d+$"),
    "WINDOWS_MM": re.compile(r"\s+\d+$"),
    "UNIX_JACK": re.compile(r"\s*\[\d+\]"),
}


class Port(Protocol):
    """An open input."""

    def fetch(self) -> list[tuple[float, mido.Message]]:
        """Channel messages that came since the last time, with their monotonic seconds."""

    def close(self) -> None:
        """Give the port back."""


class MidiSystem:
    """One back end, asked for its inputs as often as one likes.

    Attributes:
        backend_name: the back end in use, without its interface.
        api: the interface in use, as `LINUX_ALSA`; empty where the back end has only one.
    """

    def __init__(self, backend: str | None = None) -> None:
        """Load a back end.

        Args:
            backend: its name as MIDO_BACKEND gives it; None for what MIDO_BACKEND or, without
                it, the library that is installed says.

        Raises:
            DeviceError: if there is none or it does not start, saying what would help.
        """
        named = backend or os.environ.get("MIDO_BACKEND") or RTMIDI
        self.backend_name, _, self.api = named.partition("/")
        self._library: RtMidiLibrary | None = None
        self._backend: Any = None
        try:
            with stderr_silenced():
                if self.backend_name == RTMIDI:
                    self._library = RtMidiLibrary(_wrapper(), self.api or None)
                    self.api = self._library.api
                else:
                    self._backend = mido.Backend(self.backend_name, api=self.api or None)
                    self._backend.get_input_names()
        except DeviceError:
            raise
        except Exception as error:  # a back end raises what it likes
            raise DeviceError(self._explain(error)) from error

    @property
    def has_virtual(self) -> bool:
        """Whether other programs can be offered an input of ours to connect to."""
        with_virtual = {"LINUX_ALSA", "UNIX_JACK", "MACOSX_CORE"}
        return self._library is not None and self.api in with_virtual

    def stable_name(self, name: str) -> str:
        """A port's name without the numbers that change when it is plugged in again."""
        unstable = _UNSTABLE.get(self.api)
        return unstable.sub("", name) if unstable else name

    def input_names(self) -> list[str]:
        """Full names of the inputs there are now.

        Raises:
            DeviceError: if the back end no longer answers.
        """
        try:
            return self._library.names() if self._library else self._backend.get_input_names()
        except Exception as error:  # a back end raises what it likes
            raise DeviceError(self._explain(error)) from error

    def open_input(self, name: str, clock: Callable[[], float], virtual: bool = False) -> Port:
        """Open an input by its full name, or offer a virtual one.

        Args:
            name: a name out of `input_names`, or the name to offer.
            clock: monotonic seconds, for the stamps.
            virtual: offer a port instead of opening one.

        Raises:
            DeviceError: if it cannot be opened.
        """
        if virtual and not self.has_virtual:
            where = f"{self.backend_name}{'/' + self.api if self.api else ''}"
            raise DeviceError(f"virtual MIDI input {name!r}: {where} has none; leave it out")
        try:
            with stderr_silenced():
                if self._library:
                    return self._library.open(name, virtual, clock)
                return _MidoInput(self._backend, name, clock)
        except Exception as error:  # a back end raises what it likes
            reason = _one_line(error)
            raise DeviceError(f"MIDI input {name!r} cannot be opened: {reason}") from error

    def close(self) -> None:
        """Let go of what is kept for looking."""
        if self._library:
            self._library.close()

    def _explain(self, error: Exception) -> str:
        place = f"MIDI back end {self.backend_name}{'/' + self.api if self.api else ''}"
        if isinstance(error, ImportError):
            return f"{place} cannot be loaded: {_one_line(error)}; {_INSTALL}"
        help_ = f"; {_NO_SEQUENCER}" if self.backend_name == RTMIDI else ""
        return f"{place} does not start: {_one_line(error)}{help_}"


class _MidoInput:
    """An input of any other back end of mido's: by callback if it has them, else by asking."""

    def __init__(self, backend: Any, name: str, clock: Callable[[], float]) -> None:
        self._clock = clock
        self._arrived: deque[tuple[float, mido.Message]] = deque()
        self._asked = False
        try:
            self._port = backend.open_input(name, callback=self._put)
        except ValueError as error:
            if "callback" not in str(error):
                raise
            self._asked = True
            self._port = backend.open_input(name)

    def _put(self, message: mido.Message) -> None:
        if hasattr(message, "channel"):
            self._arrived.append((self._clock(), message))

    def fetch(self) -> list[tuple[float, mido.Message]]:
        if self._asked:
            for message in self._port.iter_pending():
                self._put(message)
        return [self._arrived.popleft() for _ in range(len(self._arrived))]

    def close(self) -> None:
        self._port.close()


def _wrapper() -> str:
    """Name of the installed module that wraps RtMidi."""
    for name in ("rtmidi", "rtmidi2"):
        if importlib.util.find_spec(name):
            return name
    raise DeviceError(f"no MIDI back end is installed; {_INSTALL}")


def _one_line(error: BaseException) -> str:
    return " ".join(str(error).split()).rstrip(".") or type(error).__name__
