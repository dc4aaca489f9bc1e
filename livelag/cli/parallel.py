"""Several renderings at once, spread over the cores, that end together when one is stopped."""

from __future__ import annotations

import os
import pickle
import subprocess
import sys
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from contextlib import suppress
from queue import SimpleQueue
from typing import IO, Any, TypeVar, cast

from livelag.errors import LivelagError

Answer = TypeVar("Answer")

# In a process group of its own, which Ctrl-C and a closed terminal do not reach: only the command
# that started it tells a worker to end.
_PROGRAM = "import sys; sys.path[:] = {path!r}; from livelag.cli import worker; worker.main()"
_OWN_GROUP: dict[str, Any] = {
    "process_group": 0,
    "creationflags": getattr(subprocess, "CREATE_NEW_PROCESS_GROUP", 0),
}


class _Worker:
    """A process that answers calls one by one; it ends by itself when its pipes close."""

    def __init__(self) -> None:
        self._process = subprocess.Popen(
            [sys.executable, "-c", _PROGRAM.format(path=sys.path)],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            **_OWN_GROUP,
        )
        self._stdin = cast("IO[bytes]", self._process.stdin)
        self._stdout = cast("IO[bytes]", self._process.stdout)

    def call(self, function: Callable[..., Answer], arguments: tuple[Any, ...]) -> Answer:
        try:
            pickle.dump((function, arguments), self._stdin)
            self._stdin.flush()
            done, answer = pickle.load(self._stdout)
        except (EOFError, OSError, pickle.UnpicklingError) as error:
            raise LivelagError(
                "a rendering process was ended from outside, perhaps for want of memory"
            ) from error
        if not done:
            raise answer
        return cast("Answer", answer)

    def kill(self) -> None:
        self._process.kill()

    def bury(self) -> None:
        self._process.wait()
        for pipe in (self._stdout, self._stdin):
            with suppress(OSError):  # a call that it did not take any more
                pipe.close()


def in_parallel(function: Callable[..., Answer], tasks: Sequence[tuple[Any, ...]]) -> list[Answer]:
    """Call a function with each row of arguments, all of it picklable; answers keep the order.

    Raises:
        LivelagError: if a process was ended from outside.
        Exception: what the first call that raised did.
    """
    if len(tasks) < 2:
        return [function(*arguments) for arguments in tasks]
    idle: SimpleQueue[_Worker] = SimpleQueue()

    def call(arguments: tuple[Any, ...]) -> Answer:
        worker = idle.get()
        try:
            return worker.call(function, arguments)
        finally:
            idle.put(worker)

    workers = [_Worker() for _ in range(min(len(tasks), os.cpu_count() or 1))]
    threads = ThreadPoolExecutor(len(workers))
    try:
        for worker in workers:
            idle.put(worker)
        futures = [threads.submit(call, arguments) for arguments in tasks]
        return [future.result() for future in futures]
    finally:
        threads.shutdown(wait=False, cancel_futures=True)  # first: a second interrupt may come
        for worker in workers:
            worker.kill()
        for worker in workers:
            worker.bury()
