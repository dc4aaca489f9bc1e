"""MIDI inputs that come and go: opened by name, stamped on arrival, released when they vanish."""

from __future__ import annotations

import contextlib
import threading
import time
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from types import TracebackType
from typing import Self

from livelag.errors import DeviceError, UnknownNameError
from livelag.live.arrivals import LIMIT, Arrival, ArrivalQueue
from livelag.live.held import Held
from livelag.live.midi_system import MidiSystem, Port

#: Seconds between looks for ports that came or went. A USB keyboard that is pulled and pushed back
#: takes longer to be recognised, so it is always noticed as gone in between.
LOOK_EVERY_S = 0.5
_RETRY_S = 2.0

#: Seconds between fetches while somebody plays, and while nobody has for some time. Each one
#: takes the interpreter for a moment, which the audio callback may be waiting for.
FETCH_EVERY_S = 0.001
_IDLE_FETCH_S = 0.02
_IDLE_AFTER_S = 2.0


@dataclass
class _Open:
    """An open port: its stable name, the back end's port and what is held on it."""

    name: str
    port: Port
    held: Held


class MidiInputs:
    """Any number of MIDI inputs feeding one queue.

    Messages are stamped with the monotonic second they arrived at and queued, by a thread that
    fetches every millisecond while somebody plays and by `take` itself, so that the audio
    callback sees all that came before it began. Messages that are not for a channel (clock,
    system exclusive) are left out. Another thread looks twice a second for ports that went,
    whose notes it then releases by messages in the queue, and for ports that came (back), which
    it opens.

    A port's first messages may be stamped up to one fetch late; about ten later the stamps are
    as even as the back end's own.

    A name asked for is compared without regard to case, and without the numbers that the system
    adds and changes. It means the ports of exactly that name if there are any, otherwise every
    port whose name contains it.

    Attributes:
        received: messages queued or dropped so far, for a light that blinks.
        fault: what one of the threads ran into first, or None.
    """

    def __init__(
        self,
        names: Iterable[str] | None = None,
        *,
        virtual_name: str | None = None,
        backend: str | None = None,
        clock: Callable[[], float] = time.perf_counter,
        limit: int = LIMIT,
        look_every_s: float | None = LOOK_EVERY_S,
    ) -> None:
        """Open inputs.

        Args:
            names: inputs to open, by name or part of one; None for all, present and to come.
            virtual_name: offer an input of this name for others to connect to.
            backend: as MIDO_BACKEND gives it; None for the one MIDO_BACKEND or what is
                installed says.
            clock: monotonic seconds, the same clock that the audio callback reads.
            limit: messages kept before notes are dropped; see `ArrivalQueue`.
            look_every_s: seconds between looks for changes; None to look only on `look`.

        Raises:
            DeviceError: if there is no back end, or the virtual input cannot be offered.
            UnknownNameError: if a name matches no input, listing those that exist.
        """
        self.received = 0
        self.fault: Exception | None = None
        self._played_s = float("-inf")
        self._queue = ArrivalQueue(limit)
        self._clock = clock
        self._looking = threading.Lock()
        self._fetching = threading.Lock()
        self._open: dict[str, _Open] = {}
        self._sources: tuple[_Open, ...] = ()
        self._retry_at: dict[str, float] = {}
        self._lost: dict[str, None] = {}
        self._virtual: _Open | None = None
        self._stop = threading.Event()
        self._threads: list[threading.Thread] = []
        self._system = MidiSystem(backend)
        try:
            self._wanted = None if names is None else self._resolve(names)
            if virtual_name is not None:
                self._virtual = self._connect(virtual_name, virtual=True)
            self.look()
        except BaseException:
            self.close()
            raise
        self._start(self.fetch, self._fetch_period)
        if look_every_s is not None:
            self._start(self.look, lambda: look_every_s)

    @property
    def connected(self) -> tuple[str, ...]:
        """Names of the inputs that are open, the virtual one last."""
        return tuple(source.name for source in self._sources)

    @property
    def lost(self) -> tuple[str, ...]:
        """Names of the inputs that vanished and have not come back."""
        return tuple(self._lost)

    @property
    def dropped(self) -> int:
        """Messages lost because nobody took them in time; never one that ends a note."""
        return self._queue.dropped

    def take(self, most: int = LIMIT, wait_s: float = 0.0002) -> list[Arrival]:
        """Messages that have arrived, oldest first on each port; for one reader.

        Args:
            most: no more than so many; the rest is kept.
            wait_s: how long to wait at most for the fetching thread to finish a round.
        """
        self.fetch(wait_s)
        return self._queue.take(most)

    def fetch(self, wait_s: float = 0.0) -> None:
        """Move what has arrived into the queue, unless another thread is doing so for `wait_s`."""
        if not self._fetching.acquire(timeout=wait_s):
            return
        try:
            for source in self._sources:
                for stamp_s, message in source.port.fetch():
                    source.held.follow(message)
                    self._queue.put(Arrival(stamp_s, message, source.name))
                    self.received += 1
                    self._played_s = stamp_s
        finally:
            self._fetching.release()

    def look(self) -> None:
        """Compare what is open with what exists: release what went, open what came.

        Called by the looking thread; call it to look at once.
        """
        with self._looking:
            if self._stop.is_set():
                return
            try:
                present = self._system.input_names()
            except DeviceError as error:
                self.fault = self.fault or error
                present = []
            for full_name in [name for name in self._open if name not in present]:
                self._let_go(full_name)
            for full_name in present:
                if full_name not in self._open and self._is_wanted(full_name):
                    self._try(full_name)
            self._publish()

    def close(self) -> None:
        """Stop the threads and close every port; what is queued can still be taken."""
        self._stop.set()
        for thread in self._threads:
            thread.join(5.0)
        with self._looking:
            sources = [*self._open.values(), *([self._virtual] if self._virtual else [])]
            self._open.clear()
            self._virtual = None
            self._publish()
            for source in sources:
                with contextlib.suppress(Exception):
                    source.port.close()
            self._system.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()

    def _resolve(self, names: Iterable[str]) -> frozenset[str]:
        """Stable names of the ports that the names asked for mean."""
        present = self._system.input_names()
        stable = list(dict.fromkeys(self._system.stable_name(name) for name in present))
        wanted: set[str] = set()
        for name in names:
            asked = self._system.stable_name(name).casefold()
            found = [s for s in stable if s.casefold() == asked]
            found = found or [s for s in stable if asked and asked in s.casefold()]
            if not found:
                raise UnknownNameError("MIDI input", name, stable)
            wanted.update(found)
        return frozenset(wanted)

    def _is_wanted(self, full_name: str) -> bool:
        stable = self._system.stable_name(full_name)
        return self._wanted is None or stable in self._wanted

    def _connect(self, full_name: str, virtual: bool = False) -> _Open:
        name = full_name if virtual else self._system.stable_name(full_name)
        return _Open(name, self._system.open_input(full_name, self._clock, virtual), Held())

    def _try(self, full_name: str) -> None:
        """Open a port that is there; if another program has it, try again later."""
        now_s = self._clock()
        if now_s < self._retry_at.get(full_name, now_s):
            return
        try:
            source = self._connect(full_name)
        except DeviceError as error:
            self.fault = self.fault or error
            self._retry_at[full_name] = now_s + _RETRY_S
            return
        self._open[full_name] = source
        self._lost.pop(source.name, None)

    def _publish(self) -> None:
        """Hand the fetchers the ports that are open now; none of the others is in use after."""
        with self._fetching:
            self._sources = (*self._open.values(), *([self._virtual] if self._virtual else []))

    def _let_go(self, full_name: str) -> None:
        self.fetch(1.0)  # what it said last comes before the release
        gone = self._open.pop(full_name)
        self._lost[gone.name] = None
        self._publish()
        stamp_s = self._clock()
        for message in gone.held.releases():
            self._queue.put(Arrival(stamp_s, message, gone.name))
        with contextlib.suppress(Exception):  # there may be nothing left to close
            gone.port.close()

    def _fetch_period(self) -> float:
        idle = self._clock() - self._played_s > _IDLE_AFTER_S
        return _IDLE_FETCH_S if idle else FETCH_EVERY_S

    def _start(self, work: Callable[[], None], period: Callable[[], float]) -> None:
        def go_on() -> None:
            while not self._stop.wait(period()):
                try:
                    work()
                except Exception as error:  # a thread's errors reach nobody by themselves
                    self.fault = self.fault or error

        thread = threading.Thread(target=go_on, name=f"livelag MIDI {work.__name__}", daemon=True)
        self._threads.append(thread)
        thread.start()


def list_inputs(backend: str | None = None) -> tuple[str, ...]:
    """Names of the MIDI inputs that exist, as one may ask for them.

    Raises:
        DeviceError: if there is no MIDI back end, saying what to install.
    """
    system = MidiSystem(backend)
    try:
        return tuple(dict.fromkeys(system.stable_name(name) for name in system.input_names()))
    finally:
        system.close()
