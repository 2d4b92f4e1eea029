"""Kinds of resistors and dielectrics of capacitors as the catalogs describe them: frozen and checked."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from types import MappingProxyType

from synth.parts.catalog import PART_TABLES, Bound, Entry, entries, provenance, read_catalog
from synth.parts.eseries import series_names
from synth.parts.locate import catalog_path

NAME_GRAMMAR = "[A-Za-z0-9][A-Za-z0-9 ._-]{0,39}"
_TOLERANCE = Bound(1e-5, 0.5)
_COEFFICIENT = Bound(0.0, 1e-2, "per kelvin")
_SHARE = Bound(0.0, 1.0)
_OHM = Bound(1e-4, 1e12, "ohm")
_FARAD = Bound(1e-14, 1.0, "F")
_VOLT = Bound(1.0, 1e4, "V")
_LOSS = Bound(1e-6, 0.5)


@dataclass(frozen=True, slots=True)
class ToleranceClass:
    """A tolerance on offer, the series stocked in it, the largest value by case (empty: that of the case)."""

    tolerance: float
    series: tuple[str, ...]
    highest: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class ResistorSize:
    """A case: power rating [W], value range [ohm], capacitance across the body [F]."""

    size: str
    power: float
    low: float
    high: float
    parallel_capacitance: float


@dataclass(frozen=True, slots=True, kw_only=True)
class ResistorKind:
    """A technology of resistors; the figures are explained at the head of resistors.toml."""

    name: str
    classes: tuple[ToleranceClass, ...]
    default_tolerance: float
    default_series: str
    temperature_coefficients: tuple[float, ...]
    common_share: float
    low_value: float
    low_value_coefficient: float
    useful_range: tuple[float, float]
    sizes: tuple[ResistorSize, ...]
    default_size: str
    excess_noise: tuple[tuple[float, float], ...]
    provenance: Mapping[str, str]
    source: str
    note: str


@dataclass(frozen=True, slots=True)
class CapacitorCase:
    """A case: voltage rating [V], value range [F]."""

    size: str
    voltage: float
    low: float
    high: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Dielectric:
    """A dielectric of capacitors; the figures are explained at the head of capacitors.toml."""

    name: str
    sets_frequency: bool
    reason: str
    classes: tuple[ToleranceClass, ...]
    default_tolerance: float
    default_series: str
    temperature_coefficients: tuple[float, ...]
    common_share: float
    loss: tuple[tuple[float, float], ...]
    loss_maximum: float
    frequency_range: tuple[float, float]
    voltage: float
    cases: tuple[CapacitorCase, ...]
    provenance: Mapping[str, str]
    source: str
    note: str


@dataclass(frozen=True, slots=True)
class CouplingRule:
    """Which dielectrics couple, first choice first: (dielectric, tolerance, low [F], high [F]), all of one series."""

    series: str
    rows: tuple[tuple[str, float, float, float], ...]


_COMMON = (
    "classes",
    "default_tolerance",
    "default_series",
    "temperature_coefficient_common_share",
    "source",
    "note",
    "provenance",
)
_RESISTOR_KEYS = (
    *_COMMON,
    "temperature_coefficients",
    "low_value",
    "useful_range",
    "sizes",
    "default_size",
    "excess_noise",
)
_DIELECTRIC_KEYS = (
    *_COMMON,
    "sets_frequency",
    "reason",
    "temperature_coefficient",
    "loss_tangent",
    "loss_tangent_maximum",
    "frequency_range",
    "voltage",
    "cases",
)


def resistor_kinds(extra: Sequence[Path] = ()) -> Mapping[str, ResistorKind]:
    """All kinds of resistors by name, the default kind first; `extra` catalogs add and replace."""
    merged = dict(_house_resistors())
    for path in extra:
        for name, entry in entries(read_catalog(path, PART_TABLES), "resistors", NAME_GRAMMAR).items():
            merged[name] = _resistor_kind(entry, name, complete=False)
    return MappingProxyType(merged)


def dielectrics(extra: Sequence[Path] = ()) -> Mapping[str, Dielectric]:
    """All dielectrics by name, the default one first; `extra` catalogs add and replace."""
    merged = dict(_house_capacitors()[0])
    for path in extra:
        for name, entry in entries(read_catalog(path, PART_TABLES), "capacitors", NAME_GRAMMAR).items():
            merged[name] = _dielectric(entry, name, complete=False)
    return MappingProxyType(merged)


def coupling_rule() -> CouplingRule:
    """The dielectrics of coupling capacitors."""
    return _house_capacitors()[1]


@cache
def _house_resistors() -> Mapping[str, ResistorKind]:
    return read_house_resistors(catalog_path("resistors.toml"))


@cache
def _house_capacitors() -> tuple[Mapping[str, Dielectric], CouplingRule]:
    return read_house_capacitors(catalog_path("capacitors.toml"))


def read_house_resistors(path: Path) -> Mapping[str, ResistorKind]:
    """Read a catalog of resistors that stands alone; its default kind comes first."""
    content = read_catalog(path, ("default_kind", "resistors"))
    found = entries(content, "resistors", NAME_GRAMMAR)
    default = content.choice("default_kind", found)
    names = [default, *(name for name in found if name != default)]
    return MappingProxyType({name: _resistor_kind(found[name], name, complete=True) for name in names})


def read_house_capacitors(path: Path) -> tuple[Mapping[str, Dielectric], CouplingRule]:
    """Read a catalog of capacitors that stands alone; its default dielectric comes first."""
    content = read_catalog(path, ("default_dielectric", "coupling", "capacitors"))
    found = entries(content, "capacitors", NAME_GRAMMAR)
    default = content.choice("default_dielectric", found)
    names = [default, *(name for name in found if name != default)]
    read = {name: _dielectric(found[name], name, complete=True) for name in names}
    if not read[default].sets_frequency:
        raise content.error("must be a dielectric with sets_frequency = true", "default_dielectric")
    rule = content.sub_table("coupling")
    rule.check_keys(("series", "use", "source"))
    rule.text("source")
    rows = []
    for row in rule.rows("use"):
        row.check_keys(("dielectric", "tolerance", "range"))
        tolerance = row.number("tolerance", _TOLERANCE)
        rows.append((row.choice("dielectric", found), tolerance, *_range(row, "range", _FARAD)))
    return MappingProxyType(read), CouplingRule(rule.choice("series", series_names()), tuple(rows))


def _range(entry: Entry, key: str, bound: Bound) -> tuple[float, float]:
    figures = entry.numbers(key, bound)
    if len(figures) != 2 or figures[0] >= figures[1]:
        raise entry.error("must be two figures [low, high], low below high; correct the range", key)
    return figures[0], figures[1]


def _classes(entry: Entry, sizes: Sequence[str], bound: Bound) -> tuple[ToleranceClass, ...]:
    classes = []
    for row in entry.rows("classes"):
        row.check_keys(("tolerance", "series", "highest"))
        series = row.texts("series")
        for name in series:
            if name not in series_names():
                raise row.error(f"there is no E-series {name!r}; write some of {', '.join(series_names())}", "series")
        highest: dict[str, float] = {}
        if "highest" in row.table:
            table = row.sub_table("highest")
            table.check_keys(sizes)
            highest = {size: table.number(size, bound) for size in table.table}
        classes.append(ToleranceClass(row.number("tolerance", _TOLERANCE), series, MappingProxyType(highest)))
    tolerances = [one.tolerance for one in classes]
    if len(set(tolerances)) != len(tolerances):
        raise entry.error("lists a tolerance twice; keep one row of each", "classes")
    default = entry.number("default_tolerance", _TOLERANCE)
    if default not in tolerances:
        raise entry.error(f"must be one of the classes {', '.join(map(str, tolerances))}", "default_tolerance")
    stocked = classes[tolerances.index(default)].series
    if entry.choice("default_series", series_names()) not in stocked:
        raise entry.error(f"must be stocked in the default tolerance: {', '.join(stocked)}", "default_series")
    return tuple(classes)


def _tags(entry: Entry, complete: bool) -> Mapping[str, str]:
    figures = [key for key in entry.table if key not in ("source", "note", "provenance")]
    return provenance(entry, figures, complete)


def _resistor_kind(entry: Entry, name: str, complete: bool) -> ResistorKind:
    entry.check_keys(_RESISTOR_KEYS)
    sizes = []
    for row in entry.rows("sizes"):
        row.check_keys(("size", "power", "range", "parallel_capacitance"))
        low, high = _range(row, "range", _OHM)
        power = row.number("power", Bound(0.01, 100.0, "W"))
        capacitance = row.number("parallel_capacitance", Bound(0.0, 1e-11, "F"))
        sizes.append(ResistorSize(row.text("size", NAME_GRAMMAR), power, low, high, capacitance))
    names = [size.size for size in sizes]
    below, coefficient = 0.0, 0.0
    if "low_value" in entry.table:
        row = entry.sub_table("low_value")
        row.check_keys(("below", "temperature_coefficient"))
        below, coefficient = row.number("below", _OHM), row.number("temperature_coefficient", _COEFFICIENT)
    return ResistorKind(
        name=name,
        classes=_classes(entry, names, _OHM),
        default_tolerance=entry.number("default_tolerance", _TOLERANCE),
        default_series=entry.text("default_series"),
        temperature_coefficients=entry.numbers("temperature_coefficients", _COEFFICIENT),
        common_share=entry.number("temperature_coefficient_common_share", _SHARE),
        low_value=below,
        low_value_coefficient=coefficient,
        useful_range=_range(entry, "useful_range", _OHM),
        sizes=tuple(sizes),
        default_size=entry.choice("default_size", names),
        excess_noise=entry.pairs("excess_noise", _OHM, Bound(1e-10, 1e-3, "V/V")),
        provenance=_tags(entry, complete),
        source=entry.text("source"),
        note=entry.optional_text("note"),
    )


def _dielectric(entry: Entry, name: str, complete: bool) -> Dielectric:
    entry.check_keys(_DIELECTRIC_KEYS)
    cases = []
    for row in entry.rows("cases"):
        row.check_keys(("size", "voltage", "range"))
        low, high = _range(row, "range", _FARAD)
        cases.append(CapacitorCase(row.text("size", NAME_GRAMMAR), row.number("voltage", _VOLT), low, high))
    voltage = entry.number("voltage", _VOLT)
    if voltage not in [case.voltage for case in cases]:
        raise entry.error("must be the rating of one of the cases", "voltage")
    loss = entry.pairs("loss_tangent", Bound(1.0, 1e9, "Hz"), _LOSS)
    loss_maximum = entry.number("loss_tangent_maximum", _LOSS)
    if max(tangent for _, tangent in loss) > loss_maximum:
        raise entry.error(f"must not exceed loss_tangent_maximum = {loss_maximum:g}; correct one", "loss_tangent")
    sets_frequency = entry.flag("sets_frequency")
    return Dielectric(
        name=name,
        sets_frequency=sets_frequency,
        reason=entry.optional_text("reason") if sets_frequency else entry.text("reason"),
        classes=_classes(entry, [case.size for case in cases], _FARAD),
        default_tolerance=entry.number("default_tolerance", _TOLERANCE),
        default_series=entry.text("default_series"),
        temperature_coefficients=(entry.number("temperature_coefficient", _COEFFICIENT),),
        common_share=entry.number("temperature_coefficient_common_share", _SHARE),
        loss=loss,
        loss_maximum=loss_maximum,
        frequency_range=_range(entry, "frequency_range", _FARAD),
        voltage=voltage,
        cases=tuple(cases),
        provenance=_tags(entry, complete),
        source=entry.text("source"),
        note=entry.optional_text("note"),
    )
