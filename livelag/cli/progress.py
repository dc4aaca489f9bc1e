"""A progress bar for work that takes a while: on a terminal, and nothing where nobody watches."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager


@contextmanager
def progress_bar(
    what: str, total: float, *, show: bool, size_in_bytes: bool = False
) -> Iterator[Callable[[float], None]]:
    """Show a bar on standard error while the work goes on.

    Args:
        what: the work, in words.
        total: how much there is to do.
        show: whether a bar is wanted; without a terminal there is none all the same.
        size_in_bytes: whether the total is a number of bytes, to be told beside the bar.

    Yields:
        A function to tell how much is done.
    """
    if not (show and sys.stderr.isatty()):
        yield lambda done: None
        return
    from rich.console import Console
    from rich.progress import BarColumn, DownloadColumn, Progress, TextColumn

    columns = (TextColumn("{task.description}"), BarColumn(), DownloadColumn())
    with Progress(
        *(columns if size_in_bytes else ()), console=Console(stderr=True), transient=True
    ) as bar:
        task = bar.add_task(what, total=total)
        yield lambda done: bar.update(task, completed=done)
