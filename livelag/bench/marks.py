"""Marks: the times a player judged by ear, and the TOML file that carries them to the desk."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

from livelag.circuit.parts import require, require_positive
from livelag.circuit.table import Table
from livelag.errors import FileError, InputError
from livelag.files import WholeFiles
from livelag.units import format_value, parse_value

VERSION = 1
_DIGITS, _EXACT_DIGITS = 6, 17


@dataclass(frozen=True, slots=True)
class Marks:
    """Three times judged by ear, or two; all are time constants in seconds.

    Attributes:
        shortest_s: the fastest useful time, more than 0.
        handover_s: where the faster range hands over to the slower; None if it was not marked.
        longest_s: the slowest useful time.

    Raises:
        InputError: if one is not a positive number, or they do not rise in this order.
    """

    shortest_s: float
    handover_s: float | None
    longest_s: float

    def __post_init__(self) -> None:
        times = self.by_name()
        for name, seconds in times.items():
            require_positive(seconds, name)
        for (name, seconds), (next_name, later) in pairwise(times.items()):
            require(
                seconds < later,
                f"{name} is {_shown(seconds)} and {next_name} is {_shown(later)}; "
                "the times must rise from shortest over handover to longest",
            )

    def by_name(self) -> dict[str, float]:
        """Each mark that was set, in rising order: name -> seconds."""
        times = {"shortest": self.shortest_s}
        if self.handover_s is not None:
            times["handover"] = self.handover_s
        return times | {"longest": self.longest_s}

    @classmethod
    def load(cls, path: Path) -> Marks:
        """Read a marks file.

        Raises:
            FileError: if the file cannot be read.
            InputError: if it is not a marks file of this version; the message names the key.
        """
        try:
            content = tomllib.loads(path.read_text(encoding="utf-8-sig"))
        except OSError as error:
            raise FileError(f"{path}: cannot be read: {error.strerror}") from error
        except RecursionError:
            raise InputError(f"{path}: not a marks file: nested too deeply") from None
        except ValueError as error:  # not UTF-8, not TOML, a number of thousands of digits
            raise InputError(
                f"{path}: not a marks file in TOML: {' '.join(str(error).split())}"
            ) from error
        table = Table(content, str(path))
        version = table.number("version", "", required=True)
        if version != VERSION:
            raise InputError(
                f"{path}: version is {content['version']!r}; this livelag reads version {VERSION}: "
                "mark the times again with livelag audition --by-ear"
            )
        marks = table.build(
            cls,
            shortest_s=table.number("shortest", "second", required=True),
            handover_s=table.number("handover", "second") if "handover" in table else None,
            longest_s=table.number("longest", "second", required=True),
        )
        table.finish()
        return marks

    def save(self, path: Path) -> None:
        """Write a marks file, whole or not at all; times keep six digits.

        Raises:
            FileError: if the file cannot be written.
        """
        import tomli_w

        content = {"version": VERSION, **self._texts()}
        with WholeFiles() as files:
            files.temporary(path).write_text(tomli_w.dumps(content), encoding="utf-8")

    def _texts(self) -> dict[str, str]:
        """Times as people read them, with more digits only where six would level two of them."""
        times = self.by_name()
        rounded = {name: _shown(seconds) for name, seconds in times.items()}
        read = [parse_value(text, "second") for text in rounded.values()]
        if all(earlier < later for earlier, later in pairwise(read)):
            return rounded
        return {name: _shown(seconds, _EXACT_DIGITS) for name, seconds in times.items()}


def _shown(seconds: float, digits: int = _DIGITS) -> str:
    return format_value(seconds, "s", digits)
