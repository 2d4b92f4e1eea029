"""In which line of a TOML text each key stands, so that a message can point at it.

The reader of the standard library gives values without their place.  This scanner walks over a text which that
reader has accepted, and therefore checks nothing itself.
"""

from __future__ import annotations

import re
import tomllib
from contextlib import suppress

KeyPath = tuple[str | int, ...]

_BARE = re.compile(r"[A-Za-z0-9_-]+")
_SCALAR = re.compile(r"[^,\]}\n#]*")
_SPACE = re.compile(r"(?:[ \t\r\n]|#[^\n]*)*")
_STRING = re.compile(
    r'"""(?:\\.|[^\\])*?"{3,5}(?!")|' + r"'''.*?'{3,5}(?!')|" + r'"(?:\\.|[^"\\\n])*"|' + r"'[^'\n]*'", re.DOTALL
)


def key_lines(text: str) -> dict[KeyPath, int]:
    """Line number, from 1, of every table header, key and array item of a valid TOML text.

    A path is the keys from the top; an item of an array is counted from 0: ("target", "reject", 0, "by").
    """
    scanner = _Scanner(text)
    with suppress(_LostError, IndexError, RecursionError):  # lost in the text: no lines from there on
        scanner.document()
    return scanner.lines


class _LostError(Exception):
    """The scanner does not know where it is."""


class _Scanner:
    """A position in the text, and what was found before it."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.position = 0
        self.lines: dict[KeyPath, int] = {}
        self._counts: dict[KeyPath, int] = {}
        self._counted = (0, 1)  # a position, and the line it is in

    def document(self) -> None:
        """Headers and pairs to the end of the text."""
        base: KeyPath = ()
        while self._skip() < len(self.text):
            base = self._header() if self.text[self.position] == "[" else self._pair(base)

    def _header(self) -> KeyPath:
        array = self.text.startswith("[[", self.position)
        self.position += 2 if array else 1
        at = self.position
        path: KeyPath = ()
        keys = self._keys()
        for depth, key in enumerate(keys, start=1):
            path = (*path, key)
            if array and depth == len(keys):
                self._counts[path] = self._counts.get(path, 0) + 1
            self._note(path, at)
            if path in self._counts:
                path = (*path, self._counts[path] - 1)
                self._note(path, at)
        self.position += 2 if array else 1
        return path

    def _pair(self, base: KeyPath) -> KeyPath:
        """One `key = value`; returns the base unchanged."""
        self._skip()
        at = self.position
        path = base
        for key in self._keys():
            path = (*path, key)
            self._note(path, at)
        self.position += 1  # the equals sign
        self._value(path)
        return base

    def _keys(self) -> list[str]:
        """A dotted key; stops before `]` or `=`."""
        keys = []
        while True:
            self._skip()
            if self.text[self.position] in "\"'":
                keys.append(str(tomllib.loads(f"key = {self._match(_STRING)}")["key"]))
            else:
                keys.append(self._match(_BARE))
            self._skip()
            if self.text[self.position] != ".":
                return keys
            self.position += 1

    def _value(self, path: KeyPath) -> None:
        self._skip()
        char = self.text[self.position]
        if char == "[":
            self._items(path)
        elif char == "{":
            self.position += 1
            while self._skip() >= 0 and self.text[self.position] != "}":
                self._pair(path)
                self._skip()
                self.position += self.text[self.position] == ","
            self.position += 1
        else:
            self._match(_STRING if char in "\"'" else _SCALAR)

    def _items(self, path: KeyPath) -> None:
        self.position += 1
        index = 0
        while self._skip() >= 0 and self.text[self.position] != "]":
            self._note((*path, index), self.position)
            self._value((*path, index))
            index += 1
            self._skip()
            self.position += self.text[self.position] == ","
        self.position += 1

    def _skip(self) -> int:
        """Step over white space and comments; returns the new position."""
        self._match(_SPACE)
        return self.position

    def _match(self, pattern: re.Pattern[str]) -> str:
        match = pattern.match(self.text, self.position)
        if match is None:
            raise _LostError
        self.position = match.end()
        return match[0]

    def _note(self, path: KeyPath, at: int) -> None:
        position, line = self._counted
        line += self.text.count("\n", position, at) if at >= position else -self.text.count("\n", at, position)
        self._counted = (at, line)
        self.lines.setdefault(path, line)
