"""A TOML table read strictly: every key is asked for once, and one that nobody asked for is named.

Messages name the file and the dotted key, so that one line is enough to mend the file.
"""

from __future__ import annotations

import tomllib
from collections.abc import Callable
from difflib import get_close_matches
from typing import Any, TypeVar

from livelag.errors import InputError, UnknownNameError
from livelag.units import parse_value

Built = TypeVar("Built")

_EXAMPLES = {"": "a number such as 1", "second": "a time such as 2.2 s or 150m"}


class Table:
    """One table of a TOML file, with its place in it."""

    def __init__(self, content: dict[str, Any], file: str, path: str = "") -> None:
        self._content = content
        self._file = file
        self._path = path
        self._asked: list[str] = []

    @classmethod
    def parse(cls, text: str, file: str, what: str) -> Table:
        """The top table of a TOML text; ``what`` it should be, and ``file``, go into messages.

        Raises:
            InputError: if it is not TOML.
        """
        try:
            content = tomllib.loads(text)
        except RecursionError:
            raise InputError(f"{file}: not {what}: nested too deeply") from None
        except ValueError as error:  # tomllib's own, and a whole number of thousands of digits
            raise InputError(f"{file}: not TOML: {' '.join(str(error).split())}") from error
        return cls(content, file)

    def __contains__(self, key: str) -> bool:
        self._asked.append(key)
        return key in self._content

    def place(self, key: str) -> str:
        """``file: dotted.key`` for a message."""
        shown = key if key.isprintable() else repr(key)
        return f"{self._file}: {self._path}{'.' if self._path and key else ''}{shown}".rstrip(": ")

    def is_table(self, key: str) -> bool:
        """Whether the key holds a table of its own."""
        return key in self and isinstance(self._content[key], dict)

    def _get(self, key: str, what: str, required: bool) -> Any:
        if key in self:
            return self._content[key]
        if required:
            strangers = [other for other in self._content if other not in self._asked]
            near = get_close_matches(key, strangers, n=1)
            hint = f" (is {near[0]!r} a slip for it?)" if near else ""
            raise InputError(f"{self.place(key)} is missing{hint}; it must be {what}")
        return None

    def text(self, key: str, default: str = "", *, required: bool = False) -> str:
        """Text at a key.

        Raises:
            InputError: if it is missing though required, or is not text.
        """
        value = self._get(key, "text", required)
        if value is None:
            return default
        if not isinstance(value, str) or (required and not value.strip()):
            blank = ", and not blank" if required else ""
            raise InputError(f"{self.place(key)} is {value!r}; it must be text{blank}")
        return value

    def texts(self, key: str) -> tuple[str, ...]:
        """List of texts at a key, which must be there.

        Raises:
            InputError: if it is not a list of texts.
        """
        value = self._get(key, "a list of names", True)
        if not isinstance(value, list) or not all(isinstance(item, str) for item in value):
            raise InputError(f"{self.place(key)} is {value!r}; it must be a list of names")
        return tuple(value)

    def number(self, key: str, unit: str, default: float = 0.0, *, required: bool = False) -> float:
        """Number at a key, written as one or in RKM code or engineering notation.

        Raises:
            InputError: if it is missing though required, or is not a finite value in the unit.
        """
        value = self._get(key, _EXAMPLES.get(unit, "a value such as 4k7 or 470n"), required)
        return default if value is None else parse_value(value, unit, self.place(key))

    def numbers(self, key: str) -> tuple[float, ...]:
        """List of numbers at a key, which must be there.

        Raises:
            InputError: if it is not a list of finite numbers.
        """
        value = self._get(key, "a list of numbers", True)
        if not isinstance(value, list):
            raise InputError(f"{self.place(key)} is {value!r}; it must be a list of numbers")
        return tuple(parse_value(item, "", self.place(key)) for item in value)

    def table(self, key: str, *, required: bool = False) -> Table:
        """Table at a key; an empty one if it is not there.

        Raises:
            InputError: if it is missing though required, or is not a table.
        """
        value = self._get(key, "a table", required)
        if value is None:
            value = {}
        if not isinstance(value, dict):
            raise InputError(f"{self.place(key)} is {value!r}; it must be a table")
        return Table(value, self._file, f"{self._path}{'.' if self._path else ''}{key}")

    def tables(self, key: str) -> list[Table]:
        """List of tables at a key; none if it is not there.

        Raises:
            InputError: if it is not a list of tables.
        """
        value = self._get(key, "a list of tables", False)
        if value is None:
            value = []
        if not isinstance(value, list) or not all(isinstance(item, dict) for item in value):
            raise InputError(f"{self.place(key)} is {value!r}; write it as [[{key}]] tables")
        prefix = f"{self._path}{'.' if self._path else ''}{key}"
        return [
            Table(item, self._file, f"{prefix}[{number}]")
            for number, item in enumerate(value, start=1)
        ]

    def build(self, make: Callable[..., Built], *, at: str = "", **fields: Any) -> Built:
        """Make a part and put this table's place before whatever it objects to.

        Raises:
            InputError: what the part says, with the place.
            UnknownNameError: what the part says, with the place.
        """
        try:
            return make(**fields)
        except InputError as error:
            raise InputError(f"{self.place(at)}: {error}") from error
        except UnknownNameError as error:
            raise error.at(self.place(at)) from error

    def finish(self) -> None:
        """Refuse any key that nobody asked for.

        Raises:
            InputError: naming the first such key and the keys that exist.
        """
        for key in self._content:
            if key not in self._asked:
                known = list(dict.fromkeys(self._asked))
                near = get_close_matches(key, known, n=1)
                hint = f"did you mean {near[0]!r}? " if near else ""
                raise InputError(
                    f"{self.place(key)} is not a known key; {hint}known: {', '.join(known)}"
                )
