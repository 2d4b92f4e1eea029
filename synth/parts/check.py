"""Everything that is wrong in a person's catalog, not only the first mistake.

The readers of the catalogs stop at the first mistake.  Here each entry is read again and again: a mistake is noted, the
key it stands in answers with a stand-in from then on, and a mistake that only follows from another is not told.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Callable, Collection, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import partial
from pathlib import Path

from synth.errors import CatalogError
from synth.parts import crystals, kinds, op_amps
from synth.parts.catalog import FORMAT, PART_TABLES, Bound, Entry, entries, read_catalog
from synth.parts.locate import catalog_path
from synth.spec.toml_lines import KeyPath, key_lines

_NAN = float("nan")  # compares with nothing, so that no further mistake follows from it
_GRAMMARS = {
    "op_amps": op_amps.TYPE_GRAMMAR,
    "resistors": kinds.NAME_GRAMMAR,
    "capacitors": kinds.NAME_GRAMMAR,
    "crystals": crystals.NAME_GRAMMAR,
}
_LOADERS: Mapping[str, Callable[[Sequence[Path]], Mapping[str, object]]] = {
    "op_amps": op_amps.load_op_amps,
    "resistors": kinds.resistor_kinds,
    "capacitors": kinds.dielectrics,
    "crystals": crystals.load_crystals,
}
_HOUSE: Mapping[str, Callable[[Path], object]] = {
    "op_amps.toml": op_amps.read_house_catalog,
    "resistors.toml": kinds.read_house_resistors,
    "capacitors.toml": kinds.read_house_capacitors,
    "crystals.toml": crystals.read_house_crystals,
}
_HOUSE_KEYS = ("defaults", "default_kind", "default_dielectric", "coupling")
# Keys whose check looks at other keys of the entry: where those are wrong already, it says nothing new.
_FOLLOWS: Mapping[str, tuple[str, ...]] = {
    "default_tolerance": ("classes", "classes.tolerance"),
    "default_series": ("classes", "classes.tolerance", "classes.series", "default_tolerance"),
    "default_size": ("sizes", "sizes.size"),
    "voltage": ("cases", "cases.voltage"),
    "highest": ("sizes", "sizes.size", "cases", "cases.size"),
    "series_resistance": ("frequency", "motional_capacitance", "shunt_capacitance", "load_capacitance"),
}


@dataclass(frozen=True, slots=True)
class Problem:
    """One mistake: the table it is in ("op_amps.X", "" for the file), key, line (None: unknown) and the whole text."""

    entry: str
    key: str | None
    line: int | None
    text: str


@dataclass(frozen=True, slots=True)
class CatalogReport:
    """What a catalog holds and what is wrong in it.

    Attributes:
        file: as it was named.
        problems: by line.
        holds: table -> names of its entries; replaces: those that the program's own catalogs hold as well.
    """

    file: Path
    problems: tuple[Problem, ...]
    holds: Mapping[str, tuple[str, ...]]
    replaces: Mapping[str, tuple[str, ...]]


@dataclass
class _Watch:
    """What was found while reading one entry.

    Attributes:
        excused: spots (table, key) of mistakes, which answer with a stand-in; an item of a list is "key:item".
        last: the spot of the last mistake; place: the key or item, for its line.
        plain: whether it lies in the value itself, whatever stands beside it.
    """

    excused: set[tuple[KeyPath, str]] = field(default_factory=set)
    last: tuple[KeyPath, str] = ((), "")
    place: KeyPath = ()
    plain: bool = False


@dataclass(frozen=True)
class _Watched(Entry):
    """An entry that notes where it complains, and answers with a stand-in for what is excused."""

    path: KeyPath = ()
    watch: _Watch = field(default_factory=_Watch)
    lenient: bool = False

    def _excused(self, key: str) -> bool:
        return self.lenient or (self.path, key) in self.watch.excused

    def error(self, complaint: str, key: str | None = None) -> CatalogError:
        self.watch.last, self.watch.place = (self.path, key or ""), self.path if key is None else (*self.path, key)
        listed = self.table.get(key) if key is not None and self.path[-1:] == ("provenance",) else None
        if isinstance(listed, list):  # one item of it is wrong
            said = complaint.removeprefix("lists ")
            index = next((k for k, item in enumerate(listed) if said.startswith(repr(item))), None)
            if index is not None:
                self.watch.last, self.watch.place = (self.path, f"{key}:{listed[index]}"), (*self.watch.place, index)
        return super().error(complaint, key)

    def check_keys(self, known: Collection[str]) -> None:
        rest = {key: value for key, value in self.table.items() if not self._excused(key)}
        Entry.check_keys(replace(self, table=rest), known)

    def number(self, key: str, bound: Bound) -> float:
        if not self._excused(key):
            self.watch.plain = True
            value = super().number(key, bound)
            self.watch.plain = False
            return value
        if key == "default_tolerance":
            return self.rows("classes")[0].number("tolerance", bound)
        if key == "voltage" and "cases" in self.table:
            return self.rows("cases")[0].number("voltage", bound)
        return _NAN

    def numbers(self, key: str, bound: Bound) -> tuple[float, ...]:
        return (_NAN, _NAN) if self._excused(key) else super().numbers(key, bound)

    def pairs(self, key: str, first: Bound, second: Bound) -> tuple[tuple[float, float], ...]:
        return ((_NAN, _NAN),) if self._excused(key) else super().pairs(key, first, second)

    def flag(self, key: str) -> bool:
        return True if self._excused(key) else super().flag(key)

    def text(self, key: str, grammar: str | None = None) -> str:
        if self._excused(key):
            return self._stand_in_text(key)
        self.watch.plain = True
        value = super().text(key, grammar)
        self.watch.plain = False
        return value

    def choice(self, key: str, offered: Collection[str]) -> str:
        if not self._excused(key):
            return super().choice(key, offered)
        return self._stand_in_text(key) if key == "default_series" else next(iter(offered), "")

    def _stand_in_text(self, key: str) -> str:
        if key != "default_series":
            return "-"
        default = self.number("default_tolerance", Bound(0, 1))
        rows = [row for row in self.rows("classes") if row.number("tolerance", Bound(0, 1)) == default]
        return (rows or self.rows("classes"))[0].texts("series")[0]

    def texts(self, key: str) -> tuple[str, ...]:
        if self._excused(key):
            return () if self.path[-1:] == ("provenance",) else ("E24",)
        return tuple(item for item in super().texts(key) if not self._excused(f"{key}:{item}"))

    def sub_table(self, key: str) -> Entry:
        if self._excused(key):
            stand_in = {"single": "-"} if key == "packages" else {}
            return _Watched(self.file, f"{self.name}.{key}", stand_in, (*self.path, key), self.watch, lenient=True)
        plain = super().sub_table(key)
        path = (*self.path, key)
        table = {name: value for name, value in plain.table.items() if (path, name) not in self.watch.excused}
        return _Watched(self.file, plain.name, table if len(path) > 2 else plain.table, path, self.watch)

    def rows(self, key: str) -> tuple[Entry, ...]:
        if self._excused(key):
            return (_Watched(self.file, f"{self.name}.{key} 1", {}, (*self.path, key, 0), self.watch, lenient=True),)
        plain = super().rows(key)
        return tuple(
            _Watched(self.file, row.name, row.table, (*self.path, key, index), self.watch)
            for index, row in enumerate(plain)
        )


def check_catalog(path: Path) -> CatalogReport:
    """Read a catalog and tell all that is wrong in it; without problems, the program can use it.

    A file of the program's own catalogs is held to their rules: a provenance for every figure.
    """
    try:
        text = path.read_bytes().decode("utf-8")
        content = tomllib.loads(text)
    except (OSError, ValueError, RecursionError):
        return CatalogReport(path, _refusals(lambda: read_catalog(path, PART_TABLES)), {}, {})
    house = path.name in _HOUSE and path.resolve() == catalog_path(path.name).resolve()
    problems = _all_problems(path, content, key_lines(text), house)
    if not problems:  # whatever the readers refuse besides
        tables = [table for table in _LOADERS if table in content]
        problems = _refusals(*([partial(_HOUSE[path.name], path)] if house else []))
        problems += _refusals(*(partial(_LOADERS[table], [path]) for table in tables if not house))
    holds = {table: tuple(found) for table in PART_TABLES if isinstance(found := content.get(table), dict) and found}
    known = {} if house else {table: _LOADERS[table](()) for table in holds}
    replaces = {table: tuple(name for name in holds[table] if name in known[table]) for table in known}
    return CatalogReport(path, tuple(sorted(problems, key=lambda one: one.line or 0)), holds, replaces)


def _refusals(*readers: Callable[[], object]) -> tuple[Problem, ...]:
    """What readers of whole files complain of, the first mistake of each."""
    problems = []
    for reader in readers:
        try:
            reader()
        except CatalogError as error:
            line = re.search(r"\bat line ([0-9]+)", str(error))
            problems.append(Problem("", None, int(line[1]) if line else None, str(error)))
    return tuple(problems)


def _all_problems(
    path: Path, content: Mapping[str, object], lines: Mapping[KeyPath, int], house: bool
) -> tuple[Problem, ...]:
    top = ("format", *PART_TABLES, *(_HOUSE_KEYS if house else ()))
    problems = _problems(_Watched(path, "", content), lines, lambda catalog: _read_top(catalog, top))
    for table in PART_TABLES:
        section = content.get(table, {})
        if not isinstance(section, dict):
            problems += _problems(_Watched(path, "", {table: section}), lines, partial(_read_entry, table, "", False))
            continue
        for name, value in section.items():
            one = _Watched(path, "", {table: {name: value}})
            problems += _problems(one, lines, partial(_read_name, table))
            for complete in (True, False) if house else (False,):  # a missing provenance must not hide the rest
                problems += _problems(one, lines, partial(_read_entry, table, name, complete))
    return tuple(dict.fromkeys(problems))


def _read_top(catalog: Entry, known: Collection[str]) -> None:
    catalog.check_keys(known)
    if "format" in catalog.table and catalog.number("format", Bound(1, 1e6)) not in (FORMAT, _NAN):
        raise catalog.error(f"is not the format this program reads ({FORMAT}); use a newer program", "format")


def _read_name(table: str, catalog: Entry) -> None:
    entries(catalog, table, _GRAMMARS[table])


def _read_entry(table: str, name: str, complete: bool, catalog: Entry) -> None:
    entry = catalog.sub_table(table).sub_table(name)
    if table == "op_amps":
        some = dict.fromkeys(op_amps._DEFAULTED, 0.0)  # no check looks at them
        op_amps._op_amp_entry(entry, name, op_amps._Defaults(some, dict.fromkeys(some, "uncertain")), complete)
    elif table == "resistors":
        kinds._resistor_kind(entry, name, complete)
    elif table == "capacitors":
        kinds._dielectric(entry, name, complete)
    else:
        crystals._crystal(entry, name, complete)


def _problems(catalog: _Watched, lines: Mapping[KeyPath, int], read: Callable[[Entry], object]) -> tuple[Problem, ...]:
    """Read until nothing new is wrong: each mistake once, by the text of its error with the line put in."""
    watch = _Watch()
    problems: list[Problem] = []
    while True:
        watch.plain = False
        try:
            read(replace(catalog, watch=watch))
        except CatalogError as error:
            if watch.last in watch.excused:  # no stand-in helps: what follows in this entry stays unread
                return tuple(problems)
            if watch.plain or not _follows(watch):
                problems.append(_problem(catalog.file, str(error), watch, lines))
            watch.excused.add(watch.last)
        else:
            return tuple(problems)


def _problem(file: Path, text: str, watch: _Watch, lines: Mapping[KeyPath, int]) -> Problem:
    path, key = watch.last
    ends = range(len(watch.place), 0, -1)
    line = next((lines[watch.place[:end]] for end in ends if watch.place[:end] in lines), None)
    where = f"{file}, line {line}: " if line else f"{file}: "
    rest = text.removeprefix(f"{file}:").lstrip()
    return Problem(".".join(map(str, path[:2])), key.partition(":")[0] or None, line, where + rest)


def _follows(watch: _Watch) -> bool:
    """Whether the last mistake only follows from another in the same entry."""
    path, key = watch.last
    if len(path) > 2:
        key = "highest" if path[-1] == "highest" else ""
    wrong = {f"{spot[2]}.{name}" if len(spot) > 2 else name for spot, name in watch.excused if spot[:2] == path[:2]}
    inside = key == "packages" and any(other.startswith("packages.") for other in wrong)
    return inside or any(other in wrong for other in _FOLLOWS.get(key, ()))
