"""Files that appear whole or not at all: written under a temporary name, renamed when complete."""

from __future__ import annotations

import os
from pathlib import Path
from types import TracebackType

from livelag.errors import FileError


class WholeFiles:
    """Several files that belong together: all of them appear, or none.

    Use as a context manager; ask `temporary` for a place to write each file. On a normal exit
    every one is renamed into place; on any exception, an interrupt included, all are removed.
    """

    def __init__(self) -> None:
        self._pending: list[tuple[Path, Path]] = []

    def __enter__(self) -> WholeFiles:
        return self

    def temporary(self, path: Path) -> Path:
        """A name beside ``path`` to write to, with the same suffix.

        Raises:
            FileError: if the folder is missing or cannot be written to, or ``path`` is a folder.
        """
        folder = path.parent
        if not folder.is_dir():
            raise FileError(f"{path}: folder {str(folder)!r} does not exist; make it first")
        if path.is_dir():
            raise FileError(f"{path}: is a folder; name a file")
        if not os.access(folder, os.W_OK):
            raise FileError(f"{path}: folder {str(folder)!r} cannot be written to")
        temporary = folder / f".{path.stem}.{os.getpid()}.part{path.suffix}"
        self._pending.append((temporary, path))
        return temporary

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        try:
            if kind is None:
                for temporary, path in self._pending:
                    temporary.replace(path)
        except OSError as failure:
            raise cannot_write(path, failure) from failure
        finally:
            for temporary, _ in self._pending:
                temporary.unlink(missing_ok=True)
        if isinstance(error, OSError) and not isinstance(error, FileError) and self._pending:
            raise cannot_write(self._pending[0][1], error) from error


def cannot_write(path: Path, error: OSError) -> FileError:
    """The one line for a file that the system would not let us write."""
    return FileError(f"{path}: cannot be written: {error.strerror or error}")
