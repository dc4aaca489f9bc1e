"""Inputs of the RtMidi library, read from its own queue: python-rtmidi, or rtmidi2 in its place.

Neither wrapper is given a callback. A callback runs on the library's thread (under JACK the
real-time one) and has to wait there for the interpreter; closing a port meanwhile holds the
interpreter and waits for that thread, or frees what it is about to use. With 10,000 messages a
second about one closing in a hundred locked up or crashed, with both wrappers. Read from
the queue, nothing of the kind can happen, and the library's time of arrival comes with each
message, free of the interpreter's delays.
"""

from __future__ import annotations

import contextlib
import importlib
from collections.abc import Callable
from typing import Any

import mido

from livelag.live.stamps import Stamper

#: Messages the library keeps until they are read: six seconds of the worst flood.
QUEUE_SIZE = 65536
#: Interfaces whose clock is not the monotonic one; JACK's is not steered by the network's time.
_DRIFT = {"UNIX_JACK": 20e-6, "WINDOWS_MM": 200e-6}


class RtMidiLibrary:
    """One of the two wrappers, and the interface in use.

    Attributes:
        api: the interface, as `LINUX_ALSA` or `UNIX_JACK`.
    """

    def __init__(self, module_name: str, api: str | None) -> None:
        """Load the wrapper and make a client for looking.

        Listing through a fresh client each time takes 40 ms under JACK and reorders everybody's
        graph; with a client that stays a look takes 0.04 ms.

        Args:
            module_name: `rtmidi` or `rtmidi2`.
            api: the interface; None for the library's choice.

        Raises:
            ImportError: if the wrapper is not installed.
            ValueError: if it has no such interface.
            Exception: what the wrapper raises when the system has no MIDI.
        """
        self._module: Any = importlib.import_module(module_name)
        self._first = module_name == "rtmidi"
        self._number = getattr(self._module, f"API_{api or 'UNSPECIFIED'}", None)
        if self._number is None:
            raise ValueError(f"unknown interface {api}")
        self._looker = self.client("livelag look")
        current = self._looker.get_current_api()
        names = [n for n in dir(self._module) if n.startswith("API_")]
        self.api = next(
            (n.removeprefix("API_") for n in names if getattr(self._module, n) == current), ""
        )

    def client(self, name: str) -> Any:
        """A new client of the wrapper's, connected to nothing."""
        if self._first:
            return self._module.MidiIn(rtapi=self._number, name=name, queue_size_limit=QUEUE_SIZE)
        return self._module.MidiIn(name, queuesize=QUEUE_SIZE, api=self._number)

    def names(self) -> list[str]:
        """Full names of the inputs there are."""
        return list(self._looker.get_ports() if self._first else self._looker.ports)

    def open(self, name: str, virtual: bool, clock: Callable[[], float]) -> RtMidiInput:
        """Open an input by full name, or offer one.

        Args:
            name: the name.
            virtual: offer an input instead of opening one.
            clock: monotonic seconds, for the stamps.

        Raises:
            OSError: if there is no input of that name.
            Exception: what the wrapper raises when the input is taken.
        """
        client = self.client("livelag")
        if virtual:
            client.open_virtual_port(name)
        else:
            names = client.get_ports() if self._first else client.ports
            if name not in names:
                raise OSError("it is gone")
            client.open_port(names.index(name))
        drift = _DRIFT.get(self.api, 2e-6)
        return RtMidiInput(client, self._first, clock, drift)

    def close(self) -> None:
        """Let go of the client for looking."""
        if self._first:
            self._looker.delete()
        self._looker = None


class RtMidiInput:
    """An open input of either wrapper."""

    def __init__(self, client: Any, first: bool, clock: Callable[[], float], drift: float) -> None:
        self._client = client
        self._first = first
        self._clock = clock
        self._stamper = Stamper(drift)
        # The time of a message left out would be missing from the next one's delta.
        client.ignore_types(False, False, False)

    def fetch(self) -> list[tuple[float, mido.Message]]:
        """Messages that came since the last time, each with the second it arrived."""
        got: list[tuple[float, mido.Message]] = []
        client = self._client
        while True:
            if self._first:
                data, delta_s = client.get_message() or (None, 0.0)
            else:
                data = client.get_message()
                delta_s = client.deltatime if data else 0.0
            if not data:
                return got
            stamp_s = self._stamper.stamp(delta_s, self._clock())
            if data[0] < 0xF0:  # clock and system exclusive are nothing to a glide
                with contextlib.suppress(ValueError):
                    got.append((stamp_s, mido.Message.from_bytes(data)))

    def close(self) -> None:
        """Close it, whether or not messages are pouring in; `fetch` no more after this."""
        self._client.close_port()
        if self._first:
            self._client.delete()
        self._client = None
