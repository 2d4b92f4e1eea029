"""From the tables of a document to the dataclasses: each key read by its field, each error placed in the file."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, NoReturn, TypeVar

from synth.errors import QuantityError, SpecError
from synth.quantity import parse, parse_input, show
from synth.spec.checks import InvalidValueError, suggestion, text_problem
from synth.spec.files import require_file
from synth.spec.toml_lines import KeyPath

T = TypeVar("T")


@dataclass(frozen=True, slots=True)
class Document:
    """Where a spec comes from.

    Attributes:
        source: name of the file, for messages.
        lines: line of each key path; empty when the source is not TOML text.
        folder: what the file names in the spec are relative to.
        open_files: look for the files that the spec names; False for a spec recorded with what they held.
    """

    source: str
    lines: Mapping[KeyPath, int]
    folder: Path | None
    open_files: bool


@dataclass(frozen=True, slots=True)
class Place:
    """A key of a document."""

    document: Document
    path: KeyPath = ()

    def at(self, key: str | int) -> Place:
        """The place of a key or item below this one."""
        return Place(self.document, (*self.path, key))

    @property
    def name(self) -> str:
        """Path as a person reads it, items counted from 1: "target.reject[1].by"."""
        text = "".join(f"[{key + 1}]" if isinstance(key, int) else f".{key}" for key in self.path)
        return text.removeprefix(".")

    @property
    def where(self) -> str:
        """File, and line of the key or of the nearest table above it."""
        for end in range(len(self.path), 0, -1):
            line = self.document.lines.get(self.path[:end])
            if line is not None:
                return f"{self.document.source}, line {line}"
        return self.document.source

    def fail(self, value: object, reason: str) -> NoReturn:
        """Raise the error for the value at this place."""
        self.fail_shown(show(value), reason)

    def fail_shown(self, shown: str, reason: str) -> NoReturn:
        """As `fail`, with the value ready for the message."""
        raise SpecError(f"{self.where}: {self.name} = {shown}: {reason}")

    def missing(self, key: str, remedy: str) -> NoReturn:
        """Raise the error for a key that should be in the table at this place."""
        raise SpecError(f"{self.where}: {self.at(key).name} is missing; {remedy}")


@dataclass(frozen=True, slots=True)
class Field:
    """How a key is read.

    Attributes:
        read: value at a place to what the dataclass holds.
        example: TOML text of a right value; shown when a required key is missing.
        required: the table is not complete without it.
    """

    read: Callable[[Place, object], Any]
    example: str = ""
    required: bool = False


def require(read: Field, example: str) -> Field:
    """The same field, required."""
    return Field(read.read, example, required=True)


def quantity(unit: str) -> Field:
    """A quantity in a unit, see `synth.quantity.parse`."""

    def read(place: Place, value: object) -> float:
        try:
            return parse(value, unit)
        except QuantityError as error:
            place.fail_shown(error.shown, error.reason)

    return Field(read)


def input_quantity(unit: str, example: str = "") -> Field:
    """A quantity in the sensor's input unit."""

    def read(place: Place, value: object) -> float:
        try:
            return parse_input(value, unit, example=example)
        except QuantityError as error:
            place.fail_shown(error.shown, f"{error.reason} (the input unit of sensor.scale)")

    return Field(read)


def gain() -> Field:
    """A voltage gain: text in dB, or a plain factor; a linear factor comes out."""

    def read(place: Place, value: object) -> float:
        try:
            if isinstance(value, str) and value.rstrip().endswith("dB"):
                return float(10 ** (parse(value, "dB") / 20))
            return parse(value, "V/V")
        except OverflowError:
            place.fail(value, 'is out of range; expected a gain such as "89 dB" or "28000"')
        except QuantityError as error:
            place.fail_shown(error.shown, error.reason)

    return Field(read)


def text() -> Field:
    """A text; whether it is one of some words is checked where it is kept."""

    def read(place: Place, value: object) -> str:
        if not isinstance(value, str):
            place.fail(value, "must be a text in quotes")
        return value

    return Field(read)


def integer() -> Field:
    """A whole number."""

    def read(place: Place, value: object) -> int:
        if not isinstance(value, int) or isinstance(value, bool):
            place.fail(value, "must be a whole number, without quotes")
        return value

    return Field(read)


def file(what: str) -> Field:
    """The name of a file, kept as written; it is looked for unless the document is a record."""

    def read(place: Place, value: object) -> str:
        name: str = text().read(place, value)
        if place.document.open_files:
            open_named(place, name, lambda path: require_file(path, what))
        return name

    return Field(read)


def open_named(place: Place, name: str, open_file: Callable[[Path], T]) -> T:
    """Use the file named at a place; its troubles are reported there.

    Raises:
        SpecError: the name is no line of text, or the file cannot be used.
    """
    if problem := text_problem(name):
        place.fail(name, problem)
    try:
        return open_file(Path(name) if place.document.folder is None else place.document.folder / name)
    except SpecError as error:
        place.fail(name, str(error))


def items(item: Field, *, count: int | None = None) -> Field:
    """A list, of `count` items if given."""

    def read(place: Place, value: object) -> tuple[Any, ...]:
        if not isinstance(value, list) or (count is not None and len(value) != count):
            what = f"a list of {count} values" if count is not None else "a list"
            place.fail(value, f"must be {what} in square brackets")
        return tuple(item.read(place.at(index), entry) for index, entry in enumerate(value))

    return Field(read)


def table(build: Callable[..., Any], fields: Mapping[str, Field]) -> Field:
    """A table, made into `build(**values)`."""
    return Field(lambda place, value: build_at(place, value, build, read_table(place, value, fields)))


def read_table(place: Place, value: object, fields: Mapping[str, Field]) -> dict[str, Any]:
    """The values of a table by key; unknown keys, then missing ones, then wrong ones are refused."""
    content = require_table(place, value, fields)
    for key, known in fields.items():
        if known.required and key not in content:
            place.missing(key, f"add it, such as {key} = {known.example}")
    return {key: known.read(place.at(key), content[key]) for key, known in fields.items() if key in content}


def require_table(place: Place, value: object, known: Mapping[str, object]) -> dict[str, object]:
    """A table without keys that are not known."""
    if not isinstance(value, dict):
        place.fail(value, "must be a table, with keys " + ", ".join(known))
    for key in value:
        if key not in known:
            at = place.at(str(key))
            name = show(at.name, 80).strip('"')
            raise SpecError(f"{at.where}: {name} is not a key of a spec; {suggestion(str(key), known.keys())}")
    return value


def build_at(place: Place, content: object, build: Callable[..., T], values: Mapping[str, Any]) -> T:
    """Construct a dataclass; a value that it refuses is reported where the document has it."""
    try:
        return build(**values)
    except InvalidValueError as error:
        at = place.at(error.key)
        given = content.get(error.key) if isinstance(content, dict) else None
        if given is None:
            raise SpecError(f"{at.where}: {at.name} {error.reason}") from error
        at.fail(given, error.reason)
