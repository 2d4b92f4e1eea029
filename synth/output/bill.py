"""The bill of materials: what to order and where it goes, one line for every different part."""

from __future__ import annotations

import csv
import io
import re
import string
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from synth.errors import SynthError
from synth.model.part import OpAmp, Part
from synth.model.record import DesignRecord
from synth.quantity import format_percent, format_si, rkm
from synth.spec import Supply

COLUMNS = ("reference designators", "quantity", "value", "IEC 60062 code", "tolerance", "rating", "type", "note")
_UNITS = {"resistor": "ohm", "capacitor": "F"}
_ORDER = {"resistor": 0, "capacitor": 1, "op-amp": 2}
_AMPLIFIERS = {1: "single", 2: "dual", 4: "quad"}
_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r", "\uff1d", "\uff0b", "\uff0d", "\uff20")


@dataclass(frozen=True, slots=True)
class BillRow:
    """One line of the bill, as text but for the quantity; `references` in natural order (R2 before R10)."""

    references: tuple[str, ...]
    quantity: int
    value: str
    code: str
    tolerance: str
    rating: str
    type: str
    note: str


def bill_rows(record: DesignRecord) -> tuple[BillRow, ...]:
    """The bill: resistors by value, then capacitors by value, then op amp packages.

    Parts share a line if they can be ordered as one: same kind, value, tolerance, technology, size, temperature
    coefficient and rating.

    Raises:
        SynthError: an amplifier is placed in a package its type does not come in.
    """
    passive = [part for part in record.chain.parts if part.kind != "op-amp"]
    amplifiers = [part for part in record.chain.parts if part.kind == "op-amp"]
    groups: dict[tuple[object, ...], list[Part]] = {}
    for part in sorted(passive, key=lambda p: (_ORDER[p.kind], p.number, p.tolerance, natural(p.ref))):
        key = (part.kind, part.value, part.tolerance, part.technology, part.size)
        groups.setdefault((*key, part.temperature_coefficient, part.rating), []).append(part)
    rows = [_passive_row(group) for group in groups.values()]
    return (*rows, *_package_rows(amplifiers, record.chain.models, record.spec.supply))


def bill_csv(record: DesignRecord) -> str:
    """The bill as CSV, `\\n` line ends; a cell that a spreadsheet would run as a formula starts with an apostrophe.

    Raises:
        SynthError: as `bill_rows`.
    """
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\n")
    writer.writerow(COLUMNS)
    for row in bill_rows(record):
        cells = (" ".join(row.references), str(row.quantity), row.value, row.code, row.tolerance, row.rating)
        writer.writerow([defused(cell) for cell in (*cells, row.type, row.note)])
    return buffer.getvalue()


def defused(cell: str) -> str:
    """One line of text that no spreadsheet takes for a formula.

    >>> defused("=1+1"), defused("4K7")
    ("'=1+1", '4K7')
    """
    line = "".join(char if char.isprintable() or char == "\t" else " " for char in cell)
    return f"'{line}" if line.startswith(_FORMULA_STARTS) or line.lstrip().startswith(_FORMULA_STARTS) else line


def natural(ref: str) -> tuple[tuple[int, int, str], ...]:
    """Sorting key that reads numbers as numbers.

    >>> sorted(["R10", "R2", "C1"], key=natural)
    ['C1', 'R2', 'R10']
    """
    return tuple((0, int(piece), "") if piece.isdecimal() else (1, 0, piece) for piece in re.findall(r"\d+|\D+", ref))


def value_code(part: Part) -> str:
    """What is printed on a drawing beside the reference: the IEC 60062 code, or the type number of an op amp."""
    if part.kind == "op-amp":
        return str(part.value)
    return rkm(part.number, "resistor" if part.kind == "resistor" else "capacitor")


def package_of(ref: str) -> tuple[str, str]:
    """Package and unit letter of an op amp's reference.

    >>> package_of("U12B"), package_of("U2")
    (('U12', 'B'), ('U2', ''))
    """
    match = re.fullmatch(r"(.*\d)([A-Z])", ref)
    return (match[1], match[2]) if match else (ref, "")


def _passive_row(group: list[Part]) -> BillRow:
    part = group[0]
    coefficient = part.temperature_coefficient
    pieces = (part.technology, part.size, f"{format_percent(coefficient)}/K" if coefficient else "")
    return BillRow(
        references=tuple(sorted((p.ref for p in group), key=natural)),
        quantity=len(group),
        value=format_si(part.number, _UNITS[part.kind], 5),
        code=value_code(part),
        tolerance=format_percent(part.tolerance) if part.tolerance else "",
        rating=part.rating,
        type=_joined(pieces, ", "),
        note=_joined(p.note for p in group),
    )


def _package_rows(amplifiers: list[Part], models: Mapping[str, OpAmp], supply: Supply) -> list[BillRow]:
    """One line for every order type; the note names the spare amplifiers."""
    packages: dict[str, list[Part]] = {}
    for part in sorted(amplifiers, key=lambda p: natural(p.ref)):
        packages.setdefault(package_of(part.ref)[0], []).append(part)
    groups: dict[tuple[str, int, str], list[str]] = {}
    for package, units in packages.items():
        size, order = _order_type(package, units, models)
        groups.setdefault((order, size, units[0].rating), []).append(package)
    rows = []
    for (order, size, rating), names in groups.items():
        spares = [spare for name in names for spare in _spares(name, packages[name], size)]
        notes = [part.note for name in names for part in packages[name]]
        kind = f"{_AMPLIFIERS.get(size, f'{size}-fold')} op amp"
        note = _joined((*notes, _tie_off(spares, supply)))
        rows.append(BillRow(tuple(names), len(names), kind, "", "", rating, order, note))
    return rows


def _order_type(package: str, units: list[Part], models: Mapping[str, OpAmp]) -> tuple[int, str]:
    """Amplifiers in the smallest package that holds the units, and the type number to order."""
    types = {str(unit.value) for unit in units}
    if len(types) > 1:
        raise SynthError(f"{package}: holds amplifiers of different types ({', '.join(sorted(types))}); split it")
    model = models[types.pop()]
    letters = [package_of(unit.ref)[1] for unit in units]
    if not any(letters):
        return model.packages[0]
    needed = max(string.ascii_uppercase.index(letter) for letter in letters if letter) + 1
    for least in (max(needed, 2), needed):  # a lettered unit stands in a package of several where there is one
        for size, order in model.packages:
            if size >= least:
                return size, order
    offered = ", ".join(f"{order} with {size}" for size, order in model.packages)
    raise SynthError(f"{package}: has {needed} amplifiers of type {model.type}, which comes as {offered}; split it")


def _spares(package: str, units: list[Part], size: int) -> list[str]:
    used = {package_of(unit.ref)[1] or "A" for unit in units}
    return [package + letter for letter in string.ascii_uppercase[:size] if letter not in used]


def _tie_off(spares: list[str], supply: Supply) -> str:
    if not spares:
        return ""
    middle = "mid-supply (ground)" if supply.negative == -supply.positive else "mid-supply"
    verb, them = ("is", "it") if len(spares) == 1 else ("are", "each")
    return f"{' '.join(spares)} {verb} spare: tie {them} off as a follower at {middle}"


def _joined(texts: Iterable[str], separator: str = "; ") -> str:
    return separator.join(dict.fromkeys(text for text in texts if text))
