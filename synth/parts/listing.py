"""Looks parts up in the catalogs: op amps by their figures, and one part whole with the provenance of each figure."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from synth.errors import CatalogError, QuantityError
from synth.model.part import OpAmp
from synth.parts.catalog import nearest_name
from synth.parts.crystals import Crystal, load_crystals
from synth.parts.kinds import Dielectric, ResistorKind, ToleranceClass, dielectrics, resistor_kinds
from synth.parts.op_amps import TECHNOLOGIES, OpAmpEntry, load_op_amps
from synth.quantity import format_percent, format_si, parse, show

KINDS = ("op-amps", "resistors", "capacitors", "crystals")
PACKAGES = {1: "single", 2: "dual", 4: "quad"}
OP_AMP_FIGURES: Mapping[str, str] = {
    "gain_bandwidth": "Hz", "dc_gain": "V/V", "second_pole": "Hz", "minimum_noise_gain": "", "output_resistance": "ohm",
    "input_capacitance_differential": "F", "input_capacitance_common": "F",
    "voltage_noise": "V/rtHz", "voltage_noise_corner": "Hz", "current_noise": "A/rtHz", "current_noise_corner": "Hz",
    "current_noise_slope": "A/rtHz/Hz", "slew_rate": "V/s", "output_current": "A",
    "swing_headroom_high": "V", "swing_headroom_low": "V",
    "common_mode_headroom_high": "V", "common_mode_headroom_low": "V",
    "offset_voltage": "V", "offset_voltage_max": "V", "bias_current": "A",
    "supply_minimum": "V", "supply_maximum": "V", "supply_current": "A",
    "supply_rejection_positive": "dB", "supply_rejection_negative": "dB",
    "supply_rejection_corner_positive": "Hz", "supply_rejection_corner_negative": "Hz",
    "gain_bandwidth_spread": "", "dc_gain_spread": "", "voltage_noise_spread": "", "current_noise_spread": "",
    "stray_output_to_inverting": "F", "stray_inverting_to_ground": "F",
}  # fmt: skip
_CRYSTAL_FIGURES: Mapping[str, str] = {
    "frequency": "Hz", "series_resistance": "ohm", "motional_capacitance": "F", "shunt_capacitance": "F",
    "load_capacitance": "F", "drive_limit": "W", "series_frequency": "Hz", "motional_inductance": "H", "q": "",
}  # fmt: skip


@dataclass(frozen=True, slots=True)
class OpAmpQuery:
    """What an op amp must have; None: anything.

    Attributes:
        gain_bandwidth: [Hz] at least.
        frequency: [Hz] where noise is looked at; None: its white part.
        voltage_noise: [V/rtHz] at most, there.
        supply: [V] total, that it must work on.
        technology: "bipolar", "JFET" or "CMOS".
    """

    gain_bandwidth: float | None = None
    frequency: float | None = None
    voltage_noise: float | None = None
    supply: float | None = None
    technology: str | None = None


@dataclass(frozen=True, slots=True)
class OpAmpLine:
    """An op amp that was asked for, with its noise [V/rtHz], [A/rtHz] where it was asked for."""

    entry: OpAmpEntry
    voltage_noise: float
    current_noise: float


@dataclass(frozen=True, slots=True)
class Figure:
    """A figure of a part: a number in a unit, or text; where it comes from, "" for what needs no provenance."""

    name: str
    value: float | str | None
    unit: str
    provenance: str


@dataclass(frozen=True, slots=True)
class Sheet:
    """One part, or kind of parts, whole."""

    kind: str
    name: str
    figures: tuple[Figure, ...]
    source: str
    note: str


def op_amp_query(
    min_gbw: str | None = None,
    noise_at: str | None = None,
    max_noise: str | None = None,
    supply: str | None = None,
    technology: str | None = None,
) -> OpAmpQuery:
    """A query from texts with units, as a person writes them.

    Raises:
        CatalogError: a text is no positive quantity of its unit, or there is no such technology.

    >>> op_amp_query(min_gbw="10MHz", technology="cmos").technology
    'CMOS'
    """
    known = {name.lower(): name for name in TECHNOLOGIES}
    if technology is not None and technology.lower() not in known:
        near = nearest_name(technology, TECHNOLOGIES)
        raise CatalogError(f"technology {show(technology)}: must be one of {', '.join(TECHNOLOGIES)}; {near}")
    return OpAmpQuery(
        _positive("min-gbw", min_gbw, "Hz"),
        _positive("noise-at", noise_at, "Hz"),
        _positive("max-noise", max_noise, "V/rtHz"),
        _positive("supply", supply, "V"),
        None if technology is None else known[technology.lower()],
    )


def _positive(name: str, text: str | None, unit: str) -> float | None:
    if text is None:
        return None
    try:
        number = parse(text, unit)
    except QuantityError as error:
        raise CatalogError(f"{name} {error}") from error
    if number <= 0:
        raise CatalogError(f"{name} {show(text)}: must be above 0 {unit}; correct it")
    return number


def voltage_noise_at(op_amp: OpAmp, frequency: float | None) -> float:
    """Voltage-noise density [V/rtHz]: e sqrt(1 + fc/f) at a frequency [Hz], e without one."""
    return op_amp.voltage_noise * (1.0 if frequency is None else math.sqrt(1 + op_amp.voltage_noise_corner / frequency))


def current_noise_at(op_amp: OpAmp, frequency: float | None) -> float:
    """Current-noise density [A/rtHz] of each input: i sqrt(1 + fc/f) and, uncorrelated, slope f; i without f [Hz]."""
    if frequency is None:
        return op_amp.current_noise
    flicker = op_amp.current_noise * math.sqrt(1 + op_amp.current_noise_corner / frequency)
    return math.hypot(flicker, op_amp.current_noise_slope * frequency)


def list_op_amps(query: OpAmpQuery, catalog: Mapping[str, OpAmpEntry] | None = None) -> tuple[OpAmpLine, ...]:
    """The op amps that fit: quietest first where a frequency is asked, else slowest first."""
    lines = []
    for entry in (load_op_amps() if catalog is None else catalog).values():
        one, f = entry.op_amp, query.frequency
        line = OpAmpLine(entry, voltage_noise_at(one, f), current_noise_at(one, f))
        if (
            one.gain_bandwidth >= (query.gain_bandwidth or 0.0) * (1 - 1e-9)
            and line.voltage_noise <= (query.voltage_noise or math.inf) * (1 + 1e-9)
            and (query.supply is None or one.supply_minimum <= query.supply <= one.supply_maximum)
            and query.technology in (None, one.technology)
        ):
            lines.append(line)
    if query.frequency is not None:
        return tuple(sorted(lines, key=lambda line: (float(f"{line.voltage_noise:.6g}"), line.entry.op_amp.type)))
    return tuple(sorted(lines, key=lambda line: (line.entry.op_amp.gain_bandwidth, line.entry.op_amp.type)))


def sheets(kind: str, extra: Sequence[Path] = ()) -> tuple[Sheet, ...]:
    """All parts of a kind, one of `KINDS`, in the order of the catalogs.

    Raises:
        CatalogError: there is no such kind, or a catalog cannot be used.
    """
    if kind == "op-amps":
        return tuple(_op_amp_sheet(entry) for entry in load_op_amps(extra).values())
    if kind == "resistors":
        return tuple(_resistor_sheet(one) for one in resistor_kinds(extra).values())
    if kind == "capacitors":
        return tuple(_capacitor_sheet(one) for one in dielectrics(extra).values())
    if kind == "crystals":
        return tuple(_crystal_sheet(one) for one in load_crystals(extra).values())
    raise CatalogError(f"kind {show(kind)}: must be one of {', '.join(KINDS)}; {nearest_name(kind, KINDS)}")


def find_sheet(name: str, kind: str | None = None, extra: Sequence[Path] = ()) -> Sheet:
    """One part by name, in upper or lower case; an op amp also by the type number of one of its packages.

    Raises:
        CatalogError: no catalog has it; names the nearest.
    """
    every = [sheet for one in ([kind] if kind else KINDS) for sheet in sheets(one, extra)]
    known = {sheet.name.lower(): sheet for sheet in reversed(every)}
    orders: dict[str, Sheet] = {}
    for entry in load_op_amps(extra).values() if kind in (None, "op-amps") else ():
        for _, order in entry.op_amp.packages:
            orders.setdefault(order, known[entry.op_amp.type.lower()])
    found = known.get(name.lower()) or {order.lower(): one for order, one in orders.items()}.get(name.lower())
    if found is None:
        offered = [*dict.fromkeys([*(sheet.name for sheet in every), *orders])]
        raise CatalogError(
            f"part {show(name)}: in no catalog; {nearest_name(name, offered)}; correct the name, or name a catalog of "
            "your own that has it"
        )
    return found


def packages_text(op_amp: OpAmp) -> str:
    """Packages with the type to order, 'single LM321, dual LM358'."""
    return ", ".join(f"{PACKAGES[size]} {order}" for size, order in op_amp.packages)


def _op_amp_sheet(entry: OpAmpEntry) -> Sheet:
    one, tags = entry.op_amp, entry.provenance
    figures = [Figure("technology", one.technology, "", ""), Figure("packages", packages_text(one), "", "")]
    for name, unit in OP_AMP_FIGURES.items():
        value = getattr(one, name) if hasattr(one, name) else getattr(entry, name)
        figures.append(Figure(name, value, unit, tags.get(name, "not given")))
    return Sheet("op amp", one.type, tuple(figures), entry.source, entry.note)


def _resistor_sheet(one: ResistorKind) -> Sheet:
    sizes = [
        f"{size.size} {format_si(size.power, 'W')}, {_range(size.low, size.high, 'ohm')}, "
        f"{format_si(size.parallel_capacitance, 'F')} across"
        for size in one.sizes
    ]
    low = f"below {format_si(one.low_value, 'ohm')} {_per_kelvin(one.low_value_coefficient)}" if one.low_value else None
    noise = [f"{format_si(index, 'V')}/V at {format_si(value, 'ohm')}" for value, index in one.excess_noise]
    values: dict[str, float | str | None] = {
        **_common(one),
        "temperature_coefficients": ", ".join(map(_per_kelvin, one.temperature_coefficients)),
        "low_value": low,
        "useful_range": _range(*one.useful_range, "ohm"),
        "sizes": "; ".join(sizes),
        "default_size": one.default_size,
        "excess_noise": ", ".join(noise),
    }
    return _kind_sheet("resistor", one, values)


def _capacitor_sheet(one: Dielectric) -> Sheet:
    cases = [f"{case.size} {case.voltage:g} V, {_range(case.low, case.high, 'F')}" for case in one.cases]
    loss = [f"{tangent:g} at {format_si(frequency, 'Hz')}" for frequency, tangent in one.loss]
    values: dict[str, float | str | None] = {
        "sets_frequency": "yes" if one.sets_frequency else f"no: {one.reason}",
        **_common(one),
        "temperature_coefficient": _per_kelvin(one.temperature_coefficients[0]),
        "loss_tangent": ", ".join(loss),
        "loss_tangent_maximum": one.loss_maximum,
        "frequency_range": _range(*one.frequency_range, "F"),
        "voltage": f"{one.voltage:g} V",
        "cases": "; ".join(cases),
    }
    return _kind_sheet("capacitor", one, values)


def _kind_sheet(kind: str, one: ResistorKind | Dielectric, values: Mapping[str, float | str | None]) -> Sheet:
    figures = (Figure(name, value, "", one.provenance.get(name, "not given")) for name, value in values.items())
    return Sheet(kind, one.name, tuple(figures), one.source, one.note)


def _common(one: ResistorKind | Dielectric) -> dict[str, float | str | None]:
    return {
        "classes": "; ".join(map(_class_text, one.classes)),
        "default_tolerance": format_percent(one.default_tolerance),
        "default_series": one.default_series,
        "temperature_coefficient_common_share": one.common_share,
    }


def _class_text(grade: ToleranceClass) -> str:
    return f"{format_percent(grade.tolerance)} in {' '.join(grade.series)}"


def _crystal_sheet(one: Crystal) -> Sheet:
    figures = (
        Figure(name, getattr(one, name), unit, one.provenance.get(name, "derived"))
        for name, unit in _CRYSTAL_FIGURES.items()
    )
    return Sheet("crystal", one.name, tuple(figures), one.source, one.note)


def _per_kelvin(coefficient: float) -> str:
    return f"{format_percent(coefficient)}/K"


def _range(low: float, high: float, unit: str) -> str:
    return f"{format_si(low, unit)} to {format_si(high, unit)}"
