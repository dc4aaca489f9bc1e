"""From the bytes a terminal sends to the names of keys.

Control sequences have the form of ECMA-48: ESC [ parameters (0x30-0x3F) intermediates
(0x20-0x2F) final (0x40-0x7E); arrows in application mode come as ESC O and a letter.
"""

from __future__ import annotations

import codecs

_ESCAPE = "\x1b"
_ARROWS = {"A": "up", "B": "down", "C": "right", "D": "left"}
_NAMED = {
    " ": "space",
    "\t": "tab",
    "\r": "enter",
    "\n": "enter",
    "\x7f": "backspace",
    "\x08": "backspace",
}
#: No key sends a sequence as long as this.
_LONGEST = 64


class KeyDecoder:
    """Takes bytes as they come, split anywhere; sequences it does not know give no key."""

    def __init__(self) -> None:
        self._text = codecs.getincrementaldecoder("utf-8")("ignore")
        self._sequence = ""

    @property
    def pending(self) -> bool:
        """Whether an escape sequence has begun and not ended."""
        return bool(self._sequence)

    def feed(self, data: bytes) -> list[str]:
        """Names of the keys that these bytes complete."""
        keys: list[str] = []
        for character in self._text.decode(data):
            name = self._continue(character) if self._sequence else self._begin(character)
            if name:
                keys.append(name)
        return keys

    def give_up(self) -> list[str]:
        """What an unfinished sequence comes to when nothing follows: the escape key, or no key."""
        keys = ["escape"] if self._sequence == _ESCAPE else []
        self._sequence = ""
        return keys

    def _begin(self, character: str) -> str:
        if character == _ESCAPE:
            self._sequence = _ESCAPE
            return ""
        if character in _NAMED:
            return _NAMED[character]
        return character if character.isprintable() else ""

    def _continue(self, character: str) -> str:
        sequence = self._sequence = self._sequence + character
        if character == _ESCAPE and sequence[1] not in "]PX^_":
            self._sequence = _ESCAPE  # a new sequence cuts the old one short
            return ""
        if not self._ended(sequence):
            if len(sequence) > _LONGEST:
                # Drop what a runaway string still sends, keep looking for its end.
                self._sequence = sequence[:2]
            return ""
        self._sequence = ""
        plain_arrow = sequence[1] in "[O" and sequence[2:-1] in ("", "1")
        return _ARROWS.get(sequence[-1], "") if plain_arrow else ""

    @staticmethod
    def _ended(sequence: str) -> bool:
        kind, last = sequence[1], sequence[-1]
        if kind == "[":
            # Anything that is no parameter or intermediate ends it, well or badly.
            return len(sequence) > 2 and not "\x20" <= last <= "\x3f"
        if kind == "O":
            return len(sequence) > 2
        if kind in "]PX^_":  # strings, up to BEL or ESC \
            return last == "\x07" or sequence.endswith("\x1b\\")
        return True  # Alt and a key
