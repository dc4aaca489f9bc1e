"""The exceptions a user can meet. Each refines a built-in, so plain `except ValueError` works too.

Every message is one line that names the place, the value and what would be right; the command
line prints it as it stands and ends with status 1.
"""

from __future__ import annotations

from collections.abc import Iterable
from difflib import get_close_matches


class LivelagError(Exception):
    """Base of every error that is the input's or a device's fault, never the program's."""


class InputError(LivelagError, ValueError):
    """A value that cannot be used: out of range, of the wrong type, or contradicting another."""


class UnknownNameError(LivelagError, LookupError):
    """A name that is not among those that exist.

    Attributes:
        what: what kind of thing was asked for.
        name: the name asked for.
        known: the names that exist, in the order they are offered.
        where: the file and field, if there is one.
    """

    def __init__(self, what: str, name: object, known: Iterable[str], where: str = "") -> None:
        self.what = what
        self.name = name
        self.known = tuple(known)
        self.where = where
        near = get_close_matches(str(name), self.known, n=1)
        hint = f"did you mean {near[0]!r}? " if near else ""
        place = f"{where}: " if where else ""
        offer = ", ".join(self.known) or "none"
        super().__init__(f"{place}unknown {what} {str(name)!r}; {hint}known: {offer}")

    def __reduce__(self) -> tuple[type, tuple[str, object, tuple[str, ...], str]]:
        # Exceptions are unpickled by their arguments, and this one's are not its message.
        return type(self), (self.what, self.name, self.known, self.where)

    def at(self, where: str) -> UnknownNameError:
        """The same error with the place where the name stands."""
        return UnknownNameError(self.what, self.name, self.known, where)


class FileError(LivelagError, OSError):
    """A file or folder that cannot be read or written."""


class MidiFileError(InputError):
    """A file that is not a Standard MIDI File this tool can play."""


class DeviceError(LivelagError, RuntimeError):
    """A sound or MIDI device that is missing, refuses, or went away."""
