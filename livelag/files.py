"""Files that appear whole or not at all: written under a temporary name, renamed when complete."""

from __future__ import annotations

import contextlib
import secrets
import shutil
from collections.abc import Callable, Iterable
from functools import partial
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
            FileError: if the folder is missing or cannot be written to, or ``path`` is a folder,
                a device or pipe, or no name that the system takes.
        """
        folder = path.parent
        try:
            if not folder.is_dir():
                raise FileError(f"{path}: folder {str(folder)!r} does not exist; make it first")
            if path.is_dir():
                raise FileError(f"{path}: is a folder; name a file")
            # Renaming over a device would put a file in its place, for every program there is.
            if path.exists() and not path.is_file():
                raise FileError(f"{path}: is a device or pipe; name a file")
        except OSError as error:
            if isinstance(error, FileError):
                raise
            raise cannot_write(path, error) from error
        # A short name, so that whatever the system takes for the file it takes for this one.
        temporary = folder / f".livelag-{secrets.token_hex(6)}.part{path.suffix}"
        self._pending.append((temporary, path))  # before it exists: an interrupt may come between
        try:
            # Made now: permissions alone do not tell whether a folder can be written to.
            temporary.open("xb").close()
        except OSError as error:
            where = f"{path}: folder {str(folder)!r} cannot be written to"
            raise FileError(f"{where}: {error.strerror}") from error
        return temporary

    def discard(self) -> None:
        """Remove what has not been renamed into place."""
        for temporary, _ in self._pending:
            with contextlib.suppress(OSError):
                temporary.unlink()

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
            self.discard()
        if isinstance(error, OSError) and not isinstance(error, FileError) and self._pending:
            raise cannot_write(self._meant(error), error) from error

    def _meant(self, error: OSError) -> Path:
        """The file that a failure was about: the one it names, or else the first."""
        named = [path for temporary, path in self._pending if str(temporary) == error.filename]
        return (named or [self._pending[0][1]])[0]


class WholeFolder:
    """A folder into which new files come together, or not at all.

    Use as a context manager and write to the folder that it gives, which lies hidden beside the
    files' place until a normal exit moves them over, replacing what has their names. On any
    exception, an interrupt included, the place is as it was. Files of other names stay.

    Args:
        path: the folder, made if it is not there; its own folder must be.
        outdated: names of files in it that go when the new ones come.
    """

    def __init__(self, path: Path, outdated: Iterable[str] = ()) -> None:
        self._path = path
        self._outdated = frozenset(outdated)
        self._work = path

    def __enter__(self) -> Path:
        path = self._path
        try:
            if path.exists() and not path.is_dir():
                raise FileError(f"{path}: is a file; name a folder")
            if not path.parent.is_dir():
                raise FileError(
                    f"{path}: folder {str(path.parent)!r} does not exist; make it first"
                )
            # On the same disk as the place, so that moving over is quick and cannot run out.
            beside = path if path.is_dir() else path.parent
            self._work = beside / f".livelag-{secrets.token_hex(6)}.part"
            self._make()
        except OSError as error:
            if isinstance(error, FileError):
                raise
            raise cannot_write(path, error) from error
        return self._work

    def _make(self) -> None:
        try:
            self._work.mkdir()
        except BaseException:  # an interrupt that came meanwhile
            shutil.rmtree(self._work, ignore_errors=True)
            raise

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        try:
            if kind is None:
                self._move_over()
        except OSError as failure:
            error = failure
        finally:
            shutil.rmtree(self._work, ignore_errors=True)
        if isinstance(error, FileError):  # it may name a file in the folder that nobody asked for
            raise FileError(str(error).replace(str(self._work), str(self._path))) from error
        if isinstance(error, OSError):
            raise cannot_write(self._path, error) from error

    def _move_over(self) -> None:
        new = sorted(entry.name for entry in self._work.iterdir())
        older = self._work / "older"
        older.mkdir()
        # Each noted before it is due: an interrupt may come between. One too many only fails.
        undo: list[Callable[[], object]] = []
        try:
            if not self._path.exists():
                undo.append(self._path.rmdir)
                self._path.mkdir()
            for name in sorted(self._outdated.union(new)):
                target = self._path / name
                if target.is_dir():
                    raise FileError(f"{target}: is a folder; it is in the way of a file")
                if target.exists():
                    undo.append(partial((older / name).replace, target))
                    target.replace(older / name)
            for name in new:
                undo.append((self._path / name).unlink)
                (self._work / name).replace(self._path / name)
        except BaseException:
            for step in reversed(undo):
                with contextlib.suppress(OSError):
                    step()
            raise


def check_place(path: Path) -> None:
    """Refuse a file that could not be written, before the work that would go into it.

    Raises:
        FileError: as `WholeFiles.temporary` does.
    """
    files = WholeFiles()
    try:
        files.temporary(path)
    finally:
        files.discard()


def cannot_write(path: Path, error: OSError) -> FileError:
    """The one line for a file that the system would not let us write."""
    return FileError(f"{path}: cannot be written: {error.strerror or error}")
