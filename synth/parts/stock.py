"""The person's own drawer: what lies in it, stocks restricted to it, and what a chain needs beyond it.

A drawer is a CSV file with the header ``kind,value,quantity``; lines that start with #, and what follows a # behind a
space, are comments.  Its passives count as parts of the class that the spec asks for (tolerance, dielectric, size).
Resistors and capacitors are restricted to what is listed; a drawer that lists no op amp leaves them to the catalogs.
"""

from __future__ import annotations

import csv
import math
import re
from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from synth.errors import CatalogError, QuantityError, SpecError
from synth.model.part import OpAmp, Part, PartKind
from synth.parts.op_amps import TYPE_GRAMMAR
from synth.parts.passives import CapacitorStock, CouplingStock, ResistorStock
from synth.quantity import format_si, parse, rkm, show
from synth.spec.files import read_text

COLUMNS = ("kind", "value", "quantity")
LARGEST_QUANTITY = 999_999_999
_WHAT = "a list of stocked parts, CSV with the header kind,value,quantity"
_SPELLINGS: Mapping[PartKind, str] = {
    "resistor": "resistors r",
    "capacitor": "capacitors c",
    "op-amp": "op-amps opamp u",
}
_KINDS = {name: kind for kind, others in _SPELLINGS.items() for name in (kind, *others.split())} | {"op amp": "op-amp"}
_UNITS = {"resistor": "ohm", "capacitor": "F"}
_LETTERS = {"resistor": "R", "capacitor": "C", "op-amp": "U"}
_ORDER = {"resistor": 0, "capacitor": 1, "op-amp": 2}
_BOUNDS = {"resistor": (0.0, 1e12), "capacitor": (1e-15, 1.0)}  # [ohm] a jumper is 0, [F]

Value = float | str


@dataclass(frozen=True, slots=True)
class Item:
    """A value in the drawer (resistor [ohm], capacitor [F], op amp by type number) and how many there are."""

    kind: PartKind
    value: Value
    quantity: int


@dataclass(frozen=True, slots=True)
class Drawer:
    """What lies in the drawer: every value once, by kind, then rising.

    Attributes:
        source: the file, for messages.
        items: a quantity of 0 is listed, but used up.
    """

    source: str
    items: tuple[Item, ...]

    def __post_init__(self) -> None:
        keys = [_key(item.kind, item.value) for item in self.items]
        if len(set(keys)) != len(keys):
            raise SpecError(f"{self.source}: lists a value twice; add up the quantities")

    def lists(self, kind: PartKind) -> bool:
        """Whether the file names any part of a kind."""
        return any(item.kind == kind for item in self.items)

    def quantity(self, kind: PartKind, value: Value) -> int:
        """How many parts of a value there are, 0 where it is not listed."""
        key = _key(kind, value)
        return next((item.quantity for item in self.items if _key(item.kind, item.value) == key), 0)

    def values(self, kind: Literal["resistor", "capacitor"], least: int = 1) -> tuple[float, ...]:
        """The values [ohm] or [F] of which there are at least `least`, rising."""
        fit = (item.value for item in self.items if item.kind == kind and item.quantity >= max(least, 1))
        return tuple(value for value in fit if not isinstance(value, str))


@dataclass(frozen=True, slots=True)
class Shortage:
    """A value of which the drawer holds too few.

    Attributes:
        kind: "resistor", "capacitor" or "op-amp".
        value: [ohm], [F], or the type number to order.
        needed: parts, packages for op amps; available: how many there are.
        references: where it is used; the package for op amps.
        alternative: the value nearest by ratio that has enough left for those that are missing; for op amps another
            package of the same type; None where there is none.
    """

    kind: PartKind
    value: Value
    needed: int
    available: int
    references: tuple[str, ...]
    alternative: Value | None

    @property
    def missing(self) -> int:
        """How many there are too few."""
        return self.needed - self.available

    def __str__(self) -> str:
        other = "none has enough left" if self.alternative is None else f"{_code(self.kind, self.alternative)} is near"
        where = f" ({' '.join(self.references)})" if self.references else ""
        what = f"{_LETTERS[self.kind]} {_code(self.kind, self.value)}"
        return f"{what}: {self.needed} needed, {self.available} there{where}; {other}"


def load_drawer(path: Path) -> Drawer:
    """Read a drawer; lines of the same value add up.

    Raises:
        SpecError: the file cannot be read or lists nothing, or a line cannot be used; names the line.
    """
    columns: tuple[int, ...] | None = None
    found: dict[tuple[PartKind, Value], Item] = {}
    for number, raw in enumerate(read_text(path, _WHAT).splitlines(), start=1):
        line = re.sub(r"(?:^|\s)#.*$", "", raw).strip()
        if not line:
            continue
        where = f"{path}, line {number}"
        cells = _cells(line, where)
        if columns is None:
            columns = _header(cells, where)
            continue
        if len(cells) != len(COLUMNS):
            raise SpecError(f"{where}: has {len(cells)} cells, must have {len(COLUMNS)}: {', '.join(COLUMNS)}")
        kind, value, quantity = (cells[column] for column in columns)
        item = _item(kind, value, quantity, where)
        key = _key(item.kind, item.value)
        first = found.get(key, replace(item, quantity=0))
        found[key] = replace(first, quantity=first.quantity + item.quantity)
        if found[key].quantity > LARGEST_QUANTITY:
            raise SpecError(f"{where}: quantity adds up to more than {LARGEST_QUANTITY}; correct the quantity")
    if not found:
        raise SpecError(f"{path}: lists no parts; write lines such as resistor,4k7,20 under {','.join(COLUMNS)}")
    return Drawer(str(path), tuple(found[key] for key in sorted(found, key=_sorting)))


def _cells(line: str, where: str) -> list[str]:
    if not all(char.isprintable() or char == "\t" for char in line):
        raise SpecError(f"{where}: contains a control character; save it as plain CSV")
    try:
        return [cell.strip() for cell in next(csv.reader([line], strict=True))]
    except csv.Error as error:
        raise SpecError(f"{where}: is not CSV ({error}); every quoted cell must end on its line") from error


def _header(cells: Sequence[str], where: str) -> tuple[int, ...]:
    """Column of kind, value and quantity."""
    names = [cell.lower() for cell in cells]
    if sorted(names) != sorted(COLUMNS):
        hint = "; separate the columns by commas" if ";" in "".join(cells) else ""
        shown = show(",".join(cells))
        raise SpecError(f"{where}: {shown} must be the header; write {','.join(COLUMNS)} as first line{hint}")
    return tuple(names.index(name) for name in COLUMNS)


def _item(kind: str, value: str, quantity: str, where: str) -> Item:
    known = _KINDS.get(kind.lower())
    if known is None:
        raise SpecError(f"{where}: kind {show(kind)}: must be resistor, capacitor or op-amp; correct it")
    if not re.fullmatch(r"[0-9]{1,9}", quantity):
        wanted = f"must be a whole number from 0 to {LARGEST_QUANTITY}; write how many there are"
        raise SpecError(f"{where}: quantity {show(quantity)}: {wanted}")
    return Item(known, _value(known, value, where), int(quantity))


def _value(kind: PartKind, text: str, where: str) -> Value:
    if kind == "op-amp":
        if not re.fullmatch(TYPE_GRAMMAR, text):
            raise SpecError(f"{where}: value {show(text)}: must be a type number, such as LM358; correct it")
        return text
    unit = _UNITS[kind]
    try:
        number = parse(text, unit)
    except QuantityError as error:
        try:
            number = parse(f"{text}{unit}", unit)  # '4.7k', as it is often written
        except QuantityError:
            raise SpecError(f"{where}: value {error}") from error
    low, high = _BOUNDS[kind]
    if not low <= number <= high:
        raise SpecError(f"{where}: value {show(text)}: must lie between {low:g} and {high:g} {unit}; correct it")
    return abs(number)


def _same(value: float) -> float:
    """A value to nine digits, as design.json holds it: what agrees so far is one value."""
    return float(f"{value:.9g}")


def _key(kind: PartKind, value: Value) -> tuple[PartKind, Value]:
    return kind, value.upper() if isinstance(value, str) else _same(value)


def _sorting(key: tuple[PartKind, Value]) -> tuple[int, float, str]:
    kind, value = key
    return (_ORDER[kind], 0.0, value) if isinstance(value, str) else (_ORDER[kind], value, "")


def _code(kind: PartKind, value: Value) -> str:
    if isinstance(value, str):
        return value
    return rkm(value, "resistor" if kind == "resistor" else "capacitor")


def without(drawer: Drawer, kind: PartKind, *values: Value) -> Drawer:
    """The drawer with some values used up, so that a stock restricted to it no longer offers them."""
    gone = {_key(kind, value) for value in values}
    items = (replace(item, quantity=0) if _key(item.kind, item.value) in gone else item for item in drawer.items)
    return Drawer(drawer.source, tuple(items))


def exhausted(drawer: Drawer, short: Iterable[Shortage]) -> Drawer:
    """The drawer without the values that are short, so that the next choice takes others.

    Where stocks are restricted to the drawer, each round takes a value away that was on offer: a loop over it ends.
    """
    for one in short:
        drawer = without(drawer, one.kind, one.value)
    return drawer


def affords(drawer: Drawer, needs: Iterable[tuple[PartKind, Value]]) -> bool:
    """Whether the drawer holds all of some parts at once, given as (kind, value), a value as often as it is needed."""
    counts = Counter(_key(kind, value) for kind, value in needs)
    return all(drawer.quantity(*key) >= count for key, count in counts.items())


def remaining(
    drawer: Drawer, parts: Sequence[Part], models: Mapping[str, OpAmp] | None = None, boards: int = 1
) -> Drawer:
    """The drawer after parts were taken from it; what is short ends at 0.  Arguments as of `shortages`."""
    used = {key: len(refs) * boards for key, refs in _needs(parts, models or {}).items()}
    left = (item.quantity - used.get(_key(item.kind, item.value), 0) for item in drawer.items)
    items = (replace(item, quantity=max(n, 0)) for item, n in zip(drawer.items, left, strict=True))
    return Drawer(drawer.source, tuple(items))


def shortages(
    parts: Sequence[Part], drawer: Drawer, models: Mapping[str, OpAmp] | None = None, boards: int = 1
) -> tuple[Shortage, ...]:
    """What the parts of a whole chain need beyond the drawer: resistors, capacitors, op amp packages, each by value.

    Args:
        models: `Chain.models`, which say the type number to order for a package; without them it is the type.
        boards: how many such chains are built.
    """
    needs = _needs(parts, models or {})
    left = remaining(drawer, parts, models, boards)
    found = []
    for (kind, value), refs in sorted(needs.items(), key=lambda need: _sorting(need[0])):
        if kind == "op-amp" and not drawer.lists(kind):
            continue
        needed, available = len(refs) * boards, drawer.quantity(kind, value)
        if needed > available:
            other = _alternative(kind, value, needed - available, left, models or {})
            found.append(Shortage(kind, value, needed, available, refs, other))
    return tuple(found)


def _needs(parts: Sequence[Part], models: Mapping[str, OpAmp]) -> dict[tuple[PartKind, Value], tuple[str, ...]]:
    """References of the parts of each value, packages of each type to order."""
    needs: dict[tuple[PartKind, Value], tuple[str, ...]] = {}
    packages: dict[str, list[Part]] = {}
    for part in parts:
        if part.kind == "op-amp":
            packages.setdefault(_package(part.ref)[0], []).append(part)
        else:
            key = _key(part.kind, part.value)
            needs[key] = (*needs.get(key, ()), part.ref)
    for package, units in packages.items():
        key = _key("op-amp", _order_type(units, models.get(str(units[0].value))))
        needs[key] = (*needs.get(key, ()), package)
    return needs


def _package(ref: str) -> tuple[str, str]:
    match = re.fullmatch(r"(.*\d)([A-Z])", ref)
    return (match[1], match[2]) if match else (ref, "")


def _order_type(units: Sequence[Part], model: OpAmp | None) -> str:
    """The smallest package that holds the units of one reference, as the bill orders it."""
    if model is None:
        return str(units[0].value)
    needed = max(" ABCDEFGH".find(_package(unit.ref)[1] or " ") for unit in units)  # 0: a package of its own
    for least in (max(needed, 2), needed) if needed else (1,):
        for size, order in model.packages:
            if size >= least:
                return order
    return model.packages[-1][1]


def _alternative(kind: PartKind, value: Value, missing: int, left: Drawer, models: Mapping[str, OpAmp]) -> Value | None:
    enough = [item.value for item in left.items if item.kind == kind and item.quantity >= missing]
    if isinstance(value, str):
        families = ({order.upper() for _, order in model.packages} for model in models.values())
        related = {order for family in families if value in family for order in family - {value}}
        return next((other for other in enough if str(other).upper() in related), None)
    numbers = [other for other in enough if not isinstance(other, str) and other > 0 and _same(other) != value]
    if not numbers or value <= 0:
        return None
    return min(numbers, key=lambda other: (round(abs(math.log(other / value)), 9), other))


def usable_types(drawer: Drawer) -> tuple[str, ...] | None:
    """Type numbers of the op amps in the drawer; None where it lists none and the catalogs decide."""
    if not drawer.lists("op-amp"):
        return None
    return tuple(str(item.value) for item in drawer.items if item.kind == "op-amp" and item.quantity > 0)


def restrict_op_amps(op_amps: Sequence[OpAmp], drawer: Drawer) -> tuple[OpAmp, ...]:
    """The op amps that the drawer holds, each with the packages that it holds; all where it lists none.

    A type number in the drawer is that of a package, else the name of the catalog entry in its smallest package.

    Raises:
        CatalogError: the drawer holds none of them.
    """
    types = usable_types(drawer)
    if types is None:
        return tuple(op_amps)
    held = {name.upper(): name for name in types}
    found = []
    for op_amp in op_amps:
        packages = tuple((size, held[order.upper()]) for size, order in op_amp.packages if order.upper() in held)
        if not packages and op_amp.type.upper() in held:
            packages = ((op_amp.packages[0][0], held[op_amp.type.upper()]),)
        if packages:
            found.append(replace(op_amp, packages=packages))
    if not found:
        listed = ", ".join(types) if types else "none that is left"
        allowed = ", ".join(op_amp.type for op_amp in op_amps[:8]) + (", ..." if len(op_amps) > 8 else "")
        raise CatalogError(
            f"{drawer.source}: op amps in the drawer: {listed}; must hold one that the catalogs describe and the spec "
            f"allows ({allowed}); add one to the drawer, or describe yours in a catalog"
        )
    return tuple(found)


def restrict_resistors(stock: ResistorStock, drawer: Drawer, least: int = 1) -> ResistorStock:
    """The resistors of the drawer inside the range of a stock, of any series; `least`: pieces there must be of each.

    Raises:
        CatalogError: the drawer holds none.
    """
    return replace(stock, values=_restricted("resistor", stock.values, drawer, least))


def restrict_capacitors(stock: CapacitorStock, drawer: Drawer, least: int = 1) -> CapacitorStock:
    """The capacitors of the drawer inside the range of a stock, as `restrict_resistors`."""
    return replace(stock, values=_restricted("capacitor", stock.values, drawer, least))


def restrict_coupling(stock: CouplingStock, drawer: Drawer, least: int = 1) -> CouplingStock:
    """The coupling capacitors of the drawer, as `restrict_resistors`: each dielectric inside its own range."""
    values = _restricted("capacitor", stock.values, drawer, least, "coupling ")
    inside = [(one, _inside(one.values, values.tolist())) for one in stock.stocks]
    stocks = tuple(replace(one, values=own) for one, own in inside if own.size)
    within = np.unique(np.concatenate([one.values for one in stocks]))
    within.flags.writeable = False
    return replace(stock, values=within, stocks=stocks)


def _inside(stocked: NDArray[np.float64], offered: Sequence[float]) -> NDArray[np.float64]:
    """The values offered that lie in the range stocked, read-only."""
    low, high = stocked[0] * (1 - 1e-9), stocked[-1] * (1 + 1e-9)
    values = np.array([value for value in offered if low <= value <= high], dtype=np.float64)
    values.flags.writeable = False
    return values


def _restricted(
    kind: Literal["resistor", "capacitor"], stocked: NDArray[np.float64], drawer: Drawer, least: int, use: str = ""
) -> NDArray[np.float64]:
    values = _inside(stocked, drawer.values(kind, least))
    if values.size:
        return values
    low, high = (format_si(float(value), _UNITS[kind]) for value in (stocked[0], stocked[-1]))
    others = len(drawer.values(kind))
    pieces = f" with {least} pieces" if least > 1 else ""
    raise CatalogError(
        f"{drawer.source}: no {use}{kind} between {low} and {high}{pieces} is left in the drawer "
        f"({others or 'no'} other value{'' if others == 1 else 's'}); add lines {kind},VALUE,QUANTITY "
        "or leave parts.stock out"
    )
