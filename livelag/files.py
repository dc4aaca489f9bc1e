"""Files that appear whole or not at all: written under a temporary name, renamed when complete."""

from __future__ import annotations

import contextlib
import secrets
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
        """An empty file beside ``path`` to write to, with the same suffix.

        Raises:
            FileError: if the folder is missing or cannot be written to, or ``path`` is a folder
                or no name that the system takes.
        """
        folder = path.parent
        try:
            if not folder.is_dir():
                raise FileError(f"{path}: folder {str(folder)!r} does not exist; make it first")
            if path.is_dir():
                raise FileError(f"{path}: is a folder; name a file")
        except OSError as error:
            if isinstance(error, FileError):
                raise
            raise cannot_write(path, error) from error
        # A short name, so that whatever the system takes for the file it takes for this one.
        temporary = folder / f".livelag-{secrets.token_hex(6)}.part{path.suffix}"
        try:
            # Made now: permissions alone do not tell whether a folder can be written to.
            temporary.open("xb").close()
        except OSError as error:
            where = f"{path}: folder {str(folder)!r} cannot be written to"
            raise FileError(f"{where}: {error.strerror}") from error
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
                with contextlib.suppress(OSError):
                    temporary.unlink()
        if isinstance(error, OSError) and not isinstance(error, FileError) and self._pending:
            raise cannot_write(self._meant(error), error) from error

    def _meant(self, error: OSError) -> Path:
        """The file that a failure was about: the one it names, or else the first."""
        named = [path for temporary, path in self._pending if str(temporary) == error.filename]
        return (named or [self._pending[0][1]])[0]


def cannot_write(path: Path, error: OSError) -> FileError:
    """The one line for a file that the system would not let us write."""
    return FileError(f"{path}: cannot be written: {error.strerror or error}")
