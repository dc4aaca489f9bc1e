"""A process that answers calls: pickles of (function, arguments) in, of (done, answer) out.

It ends when its standard input does, in the midst of a call too, so that it never outlives the
command that started it.
"""

from __future__ import annotations

import os
import pickle
import sys
import threading
from collections.abc import Callable
from queue import SimpleQueue
from typing import Any

Call = tuple[Callable[..., Any], tuple[Any, ...]]


def main() -> None:
    """Answer calls for ever; a call that raises is answered by (False, what it raised)."""
    answers = os.fdopen(os.dup(1), "wb")
    os.dup2(2, 1)  # what a library prints must not get among the answers
    calls: SimpleQueue[Call] = SimpleQueue()
    threading.Thread(target=_read, args=(calls,), daemon=True).start()
    while True:
        function, arguments = calls.get()
        try:
            answer: tuple[bool, Any] = (True, function(*arguments))
        except Exception as error:
            answer = (False, error)
        pickle.dump(answer, answers)
        answers.flush()


def _read(calls: SimpleQueue[Call]) -> None:
    try:
        while True:
            calls.put(pickle.load(sys.stdin.buffer))
    finally:
        os._exit(0)
