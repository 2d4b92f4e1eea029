"""Typed and bounded access to a table of design.json.

Every mistake becomes a `FolderError` of the form
``demo/design.json: parts[3].value = -4700: must be above 0; correct it, or write the folder anew``.
"""

from __future__ import annotations

import difflib
import math
from collections.abc import Collection, Iterator, Mapping
from dataclasses import dataclass
from typing import NoReturn

import numpy as np
from numpy.typing import NDArray

from synth.errors import FolderError
from synth.folder.document import REMEDY
from synth.folder.structure import line_problem
from synth.quantity import show

LARGEST_COUNT = 10**18


@dataclass(frozen=True, slots=True)
class Node:
    """One object of the document.

    Attributes:
        source: the file, for messages.
        path: where it stands, "" for the top, "parts[3]" within.
        table: its keys.
    """

    source: str
    path: str
    table: Mapping[str, object]

    def place(self, key: str) -> str:
        """Path of a key."""
        return f"{self.path}.{key}" if self.path else key

    def fail(self, key: str, value: object, reason: str) -> NoReturn:
        """Raise the error for the value of a key."""
        shown = "null" if value is None else show(value)
        raise FolderError(f"{self.source}: {self.place(key)} = {shown}: {reason}; {REMEDY}")

    def expect(self, known: Collection[str]) -> None:
        """Refuse keys that are not known, and name the nearest."""
        for key in self.table:
            if key not in known:
                near = difflib.get_close_matches(key, known, n=1)
                hint = f"did you mean {near[0]}" if near else f"known: {', '.join(known)}"
                shown = show(key)
                where = f"{self.path}: " if self.path else ""
                raise FolderError(f"{self.source}: {where}the key {shown} is not known; {hint}; else remove it")

    def get(self, key: str) -> object:
        """The value of a key that has to be there."""
        if key not in self.table:
            raise FolderError(f"{self.source}: {self.place(key)} is missing; {REMEDY}")
        return self.table[key]

    def text(self, key: str, options: Collection[str] = ()) -> str:
        """A text of one printable line, one of the options where there are any."""
        return self._text(key, self.get(key), options)

    def number(self, key: str, above: float = -math.inf, least: float = -math.inf, below: float = math.inf) -> float:
        """A number in its bounds; `least` itself is allowed, `above` and `below` are not."""
        return self._number(key, self.get(key), above, least, below)

    def optional(self, key: str, above: float = -math.inf, least: float = -math.inf) -> float | None:
        """A number in its bounds, or None."""
        return None if self.get(key) is None else self.number(key, above, least)

    def integer(self, key: str, least: int = 0) -> int:
        """A whole number, `least` or more."""
        value = self.get(key)
        if isinstance(value, bool) or not isinstance(value, int) or not least <= value <= LARGEST_COUNT:
            self.fail(key, value, f"must be a whole number from {least} to {LARGEST_COUNT:.0e}")
        return value

    def truth(self, key: str) -> bool:
        """true or false."""
        value = self.get(key)
        if not isinstance(value, bool):
            self.fail(key, value, "must be true or false")
        return value

    def optional_truth(self, key: str) -> bool | None:
        """true, false or None."""
        return None if self.get(key) is None else self.truth(key)

    def node(self, key: str, known: Collection[str] | None = None) -> Node:
        """An object below a key, with no keys but the known ones."""
        value = self.get(key)
        if not isinstance(value, dict):
            self.fail(key, value, "must be an object")
        node = Node(self.source, self.place(key), value)
        if known is not None:
            node.expect(known)
        return node

    def nodes(self, key: str, known: Collection[str]) -> Iterator[Node]:
        """The objects in a list, each with no keys but the known ones."""
        for place, value in self._items(key):
            if not isinstance(value, dict):
                self.fail(place, value, "must be an object")
            node = Node(self.source, self.place(place), value)
            node.expect(known)
            yield node

    def texts(self, key: str) -> tuple[str, ...]:
        """A list of texts."""
        return tuple(self._text(place, value) for place, value in self._items(key))

    def numbers(self, key: str, least: float = -math.inf) -> NDArray[np.float64]:
        """A list of numbers as an array."""
        numbers = [self._number(place, value, least=least) for place, value in self._items(key)]
        return np.array(numbers, dtype=np.float64)

    def truths(self, key: str) -> NDArray[np.bool_]:
        """A list of true and false as an array."""
        truths = []
        for place, value in self._items(key):
            if not isinstance(value, bool):
                self.fail(place, value, "must be true or false")
            truths.append(value)
        return np.array(truths, dtype=np.bool_)

    def complexes(self, key: str) -> tuple[complex, ...]:
        """A list of [re, im]."""
        found = []
        for place, value in self._items(key):
            if not isinstance(value, list) or len(value) != 2:
                self.fail(place, value, "must be a pair [real, imaginary]")
            found.append(complex(self._number(place, value[0]), self._number(place, value[1])))
        return tuple(found)

    def _items(self, key: str) -> Iterator[tuple[str, object]]:
        value = self.get(key)
        if not isinstance(value, list):
            self.fail(key, value, "must be a list")
        return ((f"{key}[{k}]", entry) for k, entry in enumerate(value))

    def _text(self, key: str, value: object, options: Collection[str] = ()) -> str:
        if not isinstance(value, str):
            self.fail(key, value, "must be text")
        if options and value not in options:
            self.fail(key, value, f"must be one of {', '.join(options)}")
        if problem := line_problem(value):
            raise FolderError(f"{self.source}: {self.place(key)} = {show(value)}: {problem}")
        return value

    def _number(
        self,
        key: str,
        value: object,
        above: float = -math.inf,
        least: float = -math.inf,
        below: float = math.inf,
    ) -> float:
        if isinstance(value, bool) or not isinstance(value, int | float):
            self.fail(key, value, "must be a number")
        try:
            number = float(value)
        except OverflowError:
            number = math.inf
        if not math.isfinite(number):
            self.fail(key, value, "must be finite")
        if number <= above:
            self.fail(key, value, f"must be above {above:g}")
        if number < least:
            self.fail(key, value, f"must not be below {least:g}")
        if number >= below:
            self.fail(key, value, f"must be below {below:g}")
        return number
