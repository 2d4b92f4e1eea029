"""Reads a catalog file: named entries of figures that people edit.

Every mistake becomes a `CatalogError` that names file, entry, key, value, bound and remedy, in the form
``mine.toml: [op_amps.X] gain_bandwidth = -3: must lie between 1000 and 1e+11 Hz; correct the figure``.
"""

from __future__ import annotations

import difflib
import re
import tomllib
from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path
from types import MappingProxyType

from synth.errors import CatalogError

FORMAT = 1
PROVENANCE = ("found", "macromodel", "derived", "memory", "uncertain")
PART_TABLES = ("op_amps", "resistors", "capacitors", "crystals")
_LONGEST_TEXT = 1000


@dataclass(frozen=True, slots=True)
class Bound:
    """Smallest and largest plausible figure, both allowed, and their unit."""

    low: float
    high: float
    unit: str = ""

    def __str__(self) -> str:
        return f"between {self.low:g} and {self.high:g} {self.unit}".rstrip()


def nearest_name(name: str, known: Iterable[str]) -> str:
    """Text that offers the known names most like `name`: "nearest: OPA1612", or "known: a, b" when none is like it."""
    listed = list(known)
    lower = {entry.lower(): entry for entry in reversed(listed)}
    close = [lower[match] for match in difflib.get_close_matches(name.lower(), lower, n=3, cutoff=0.5)]
    if close:
        return f"nearest: {', '.join(close)}"
    return f"known: {', '.join(listed)}" if listed else "none is known"


@dataclass(frozen=True, slots=True)
class Entry:
    """One table of a catalog file, with typed and bounded access to its keys.

    Attributes:
        file: the catalog it stands in.
        name: the table as written in the file, "op_amps.OPA1612".
        table: its keys.
    """

    file: Path
    name: str
    table: Mapping[str, object]

    def error(self, complaint: str, key: str | None = None) -> CatalogError:
        """The error for this entry, and for `key` with its value when given."""
        where = f"{self.file}: [{self.name}]" if self.name else f"{self.file}:"
        if key is not None:
            where += f" {key} = {_shown(self.table[key])}:" if key in self.table else f" {key}:"
        return CatalogError(f"{where} {complaint}")

    def check_keys(self, known: Collection[str]) -> None:
        """Refuse a key that is not in `known`, naming the nearest that is."""
        for key in self.table:
            if key not in known:
                raise self.error(f"unknown key; {nearest_name(key, known)}; correct or remove it", key)

    def _get(self, key: str) -> object:
        if key not in self.table:
            raise self.error("is missing; add it to the entry", key)
        return self.table[key]

    def number(self, key: str, bound: Bound) -> float:
        """The figure `key`, a finite number inside `bound`."""
        return self._number(self._get(key), key, bound)

    def optional_number(self, key: str, bound: Bound) -> float | None:
        """The figure `key`, or None where the entry does not give it."""
        return self.number(key, bound) if key in self.table else None

    def _number(self, value: object, key: str, bound: Bound) -> float:
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise self.error(f"must be a plain number {bound}; write it without quotes and unit", key)
        if not bound.low <= value <= bound.high:
            raise self.error(f"must lie {bound}; correct the figure", key)
        return float(value)

    def numbers(self, key: str, bound: Bound) -> tuple[float, ...]:
        """A list of figures, at least one."""
        return tuple(self._number(item, key, bound) for item in self._list(key))

    def pairs(self, key: str, first: Bound, second: Bound) -> tuple[tuple[float, float], ...]:
        """A list of pairs [x, y], x rising."""
        pairs = []
        for item in self._list(key):
            if not isinstance(item, list) or len(item) != 2:
                raise self.error("must be a list of pairs [x, y]; write [[1e3, 5e-4]]", key)
            pairs.append((self._number(item[0], key, first), self._number(item[1], key, second)))
        if any(a[0] >= b[0] for a, b in pairwise(pairs)):
            raise self.error("the first figures must rise; sort the pairs", key)
        return tuple(pairs)

    def _list(self, key: str) -> list[object]:
        value = self._get(key)
        if not isinstance(value, list) or not value:
            raise self.error("must be a list with at least one item; write [a, b]", key)
        return value

    def flag(self, key: str) -> bool:
        """`true` or `false`."""
        value = self._get(key)
        if not isinstance(value, bool):
            raise self.error("must be true or false", key)
        return value

    def text(self, key: str, grammar: str | None = None) -> str:
        """One line of text without control characters, of the given grammar (a regular expression) if any."""
        return self._text(self._get(key), key, grammar)

    def optional_text(self, key: str) -> str:
        """The text `key`, "" where the entry does not give it."""
        return self.text(key) if key in self.table else ""

    def _text(self, value: object, key: str, grammar: str | None = None) -> str:
        if not isinstance(value, str) or not value.strip():
            raise self.error("must be a text; write it in double quotes", key)
        if not value.isprintable() or len(value) > _LONGEST_TEXT:
            raise self.error(f"must be one printable line of at most {_LONGEST_TEXT} characters", key)
        if grammar is not None and not re.fullmatch(grammar, value):
            raise self.error(f"must match {grammar}; correct the name", key)
        return value

    def choice(self, key: str, offered: Collection[str]) -> str:
        """A text that is one of `offered`."""
        value = self.text(key)
        if value not in offered:
            raise self.error(f"must be one of {', '.join(offered)}; {nearest_name(value, offered)}", key)
        return value

    def texts(self, key: str) -> tuple[str, ...]:
        """A list of texts, at least one."""
        return tuple(self._text(item, key) for item in self._list(key))

    def sub_table(self, key: str) -> Entry:
        """The table under `key`."""
        value = self._get(key)
        name = f"{self.name}.{key}" if self.name else key
        if not isinstance(value, dict):
            raise self.error(f"must be a table; write [{name}]", key)
        return Entry(self.file, name, value)

    def rows(self, key: str) -> tuple[Entry, ...]:
        """The array of tables under `key`, at least one row."""
        rows = []
        for index, item in enumerate(self._list(key)):
            if not isinstance(item, dict):
                raise self.error(f"must be an array of tables; write [[{self.name}.{key}]]", key)
            rows.append(Entry(self.file, f"{self.name}.{key} {index + 1}", item))
        return tuple(rows)


def _shown(value: object) -> str:
    if isinstance(value, dict):
        return "{...}"
    text = repr(value)
    return text if len(text) <= 60 else f"{text[:57]}..."


def read_catalog(path: Path, tables: Collection[str]) -> Entry:
    """Read a catalog file, checking its top-level tables and its format number.

    Raises:
        CatalogError: the file cannot be read, is not TOML, is of a newer format or holds another table.
    """
    try:
        with path.open("rb") as stream:
            content = tomllib.load(stream)
    except OSError as error:
        raise CatalogError(f"{path}: cannot be read ({error.strerror}); give the path of a catalog file") from error
    except UnicodeDecodeError as error:
        raise CatalogError(f"{path}: is not UTF-8 text; save it as UTF-8") from error
    except (ValueError, RecursionError) as error:
        raise CatalogError(f"{path}: is not TOML: {error}; correct that line") from error
    catalog = Entry(path, "", content)
    catalog.check_keys(("format", *tables))
    version = catalog.number("format", Bound(1, 1e6)) if "format" in content else FORMAT
    if version != FORMAT:
        raise catalog.error(f"is not the format this program reads ({FORMAT}); use a newer program", "format")
    return catalog


def entries(catalog: Entry, table: str, grammar: str) -> dict[str, Entry]:
    """The named entries of one table of a catalog, {} where the file has no such table.

    Raises:
        CatalogError: the table is not made of tables, or a name is not of the grammar.
    """
    if table not in catalog.table:
        return {}
    section = catalog.sub_table(table)
    for name in section.table:
        if not re.fullmatch(grammar, name):
            raise section.error(f"entry name {name!r} must match {grammar}; correct the name")
    return {name: section.sub_table(name) for name in section.table}


def provenance(entry: Entry, figures: Collection[str], complete: bool) -> Mapping[str, str]:
    """Where each figure of an entry comes from: figure -> "found", "macromodel", "derived", "memory" or "uncertain".

    Args:
        entry: may hold a table `provenance` with lists of figures.
        figures: the figures that the entry gives.
        complete: a figure without provenance is an error; otherwise it counts as uncertain.

    Raises:
        CatalogError: a figure is missing, listed twice or not in the entry.
    """
    if "provenance" not in entry.table and not complete:
        return MappingProxyType(dict.fromkeys(figures, "uncertain"))
    listed = entry.sub_table("provenance")
    listed.check_keys(PROVENANCE)
    tags: dict[str, str] = {}
    for tag in listed.table:
        for figure in listed.texts(tag):
            if figure in tags:
                raise listed.error(f"lists {figure!r}, already listed as {tags[figure]}; keep one", tag)
            if figure not in figures:
                raise listed.error(f"{figure!r} is not a figure of the entry; {nearest_name(figure, figures)}", tag)
            tags[figure] = tag
    for figure in figures:
        if figure not in tags:
            if complete:
                raise listed.error(f"says nothing of {figure!r}; add it to one of {', '.join(PROVENANCE)}")
            tags[figure] = "uncertain"
    return MappingProxyType(tags)
