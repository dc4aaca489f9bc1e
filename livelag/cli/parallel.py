"""Several renderings at once, spread over the cores, that end together when one is stopped."""

from __future__ import annotations

import multiprocessing
import signal
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool
from contextlib import contextmanager
from typing import Any, TypeVar

from livelag.errors import LivelagError

Answer = TypeVar("Answer")


def in_parallel(function: Callable[..., Answer], tasks: Sequence[tuple[Any, ...]]) -> list[Answer]:
    """Call a function with each row of arguments, all of it picklable; answers keep the order.

    Raises:
        LivelagError: if a process was ended from outside.
    """
    if len(tasks) == 1:
        return [function(*tasks[0])]
    # Spawned, not forked: threads of the parent must not be copied half-way.
    pool = ProcessPoolExecutor(mp_context=multiprocessing.get_context("spawn"))
    try:
        with _stop_afterwards():
            futures = [pool.submit(function, *task) for task in tasks]
        return [future.result() for future in futures]
    except BrokenProcessPool as error:
        raise LivelagError(
            "a rendering process was ended from outside, perhaps for want of memory"
        ) from error
    except BaseException:
        for process in list((pool._processes or {}).values()):
            process.terminate()
        raise
    finally:
        pool.shutdown(cancel_futures=True)


@contextmanager
def _stop_afterwards() -> Iterator[None]:
    """Put off Ctrl-C, SIGTERM and SIGHUP, so that no process is lost while it is being started.

    The processes inherit the blocked Ctrl-C and leave it to their parent.
    """
    asked: list[int] = []
    ours = {
        number: signal.signal(number, lambda number, frame: asked.append(number))
        for name in ("SIGINT", "SIGTERM", "SIGHUP")
        if (number := getattr(signal, name, None)) is not None
        and signal.getsignal(number) != signal.SIG_IGN
    }
    if hasattr(signal, "pthread_sigmask"):
        signal.pthread_sigmask(signal.SIG_BLOCK, [signal.SIGINT])
    try:
        yield
    finally:
        if hasattr(signal, "pthread_sigmask"):
            signal.pthread_sigmask(signal.SIG_UNBLOCK, [signal.SIGINT])
        for number, handler in ours.items():
            signal.signal(number, handler)
    if asked:
        raise KeyboardInterrupt
