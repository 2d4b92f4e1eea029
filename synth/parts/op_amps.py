"""Op amp types and their figures, from catalogs/op_amps.toml and the person's own catalogs.

An entry is refused when a figure is not plausible or when figures contradict each other: headrooms that use up the
smallest supply, an open-loop gain below the minimum noise gain, a second pole that leaves no phase margin there.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from types import MappingProxyType

from synth.errors import CatalogError
from synth.model.part import OpAmp
from synth.parts.catalog import PART_TABLES, Bound, Entry, entries, nearest_name, provenance, read_catalog
from synth.parts.locate import catalog_path

TYPE_GRAMMAR = "[A-Za-z0-9][A-Za-z0-9+./#_-]{0,39}"
TECHNOLOGIES = ("bipolar", "JFET", "CMOS")
INDUCED_NOISE = 0.4  # induced gate noise over 2 pi f C en of the channel; 0.3 to 0.5 in FET inputs
SMALLEST_PHASE_MARGIN = 15.0  # [degree] below it at the minimum noise gain an entry cannot be right
_AMPLIFIERS = {"single": 1, "dual": 2, "quad": 4}

_SPREAD = Bound(0.0, 0.95)
_HEADROOM = Bound(0.0, 20.0, "V")
_COMMON_MODE = Bound(-5.0, 20.0, "V")
_CORNER = Bound(0.0, 1e6, "Hz")
_STRAY = Bound(0.0, 2e-11, "F")
_REQUIRED = {
    "gain_bandwidth": Bound(1e3, 1e11, "Hz"),
    "dc_gain": Bound(30.0, 1e9, "V/V"),
    "minimum_noise_gain": Bound(1.0, 100.0),
    "output_resistance": Bound(0.1, 1e4, "ohm"),
    "input_capacitance_differential": Bound(1e-14, 1e-10, "F"),
    "input_capacitance_common": Bound(1e-14, 1e-10, "F"),
    "voltage_noise": Bound(1e-10, 1e-6, "V/rtHz"),
    "voltage_noise_corner": _CORNER,
    "current_noise": Bound(1e-17, 1e-10, "A/rtHz"),
    "current_noise_corner": _CORNER,
    "slew_rate": Bound(1e3, 1e11, "V/s"),
    "output_current": Bound(1e-5, 10.0, "A"),
    "swing_headroom_high": _HEADROOM,
    "swing_headroom_low": _HEADROOM,
    "common_mode_headroom_high": _COMMON_MODE,
    "common_mode_headroom_low": _COMMON_MODE,
    "offset_voltage": Bound(0.0, 0.1, "V"),
    "offset_voltage_max": Bound(0.0, 0.1, "V"),
    "bias_current": Bound(1e-16, 1e-3, "A"),
    "supply_minimum": Bound(0.5, 200.0, "V"),
    "supply_maximum": Bound(0.5, 200.0, "V"),
    "supply_current": Bound(1e-7, 0.2, "A"),
}
_OPTIONAL = {
    "second_pole": Bound(1e3, 1e12, "Hz"),
    "current_noise_slope": Bound(0.0, 1e-16, "A/rtHz per Hz"),
    "supply_rejection_positive": Bound(0.0, 200.0, "dB"),
    "supply_rejection_negative": Bound(0.0, 200.0, "dB"),
    "supply_rejection_corner_positive": Bound(0.1, 1e8, "Hz"),
    "supply_rejection_corner_negative": Bound(0.1, 1e8, "Hz"),
}
_DEFAULTED = {
    "gain_bandwidth_spread": _SPREAD,
    "dc_gain_spread": _SPREAD,
    "voltage_noise_spread": _SPREAD,
    "current_noise_spread": _SPREAD,
    "stray_output_to_inverting": _STRAY,
    "stray_inverting_to_ground": _STRAY,
}
_FIGURES = _REQUIRED | _OPTIONAL | _DEFAULTED
_OP_AMP_FIGURES = (
    *(key for key in _REQUIRED),
    "gain_bandwidth_spread",
    "dc_gain_spread",
    "stray_output_to_inverting",
    "stray_inverting_to_ground",
)


@dataclass(frozen=True, slots=True, kw_only=True)
class OpAmpEntry:
    """One catalog entry: the figures the circuit uses, and what the catalog knows besides.

    Attributes:
        op_amp: the figures of the circuit.
        supply_rejection_positive, supply_rejection_negative: [dB] at DC, referred to the input; None: not known.
        supply_rejection_corner_positive, supply_rejection_corner_negative: [Hz] from where it falls 20 dB a decade.
        voltage_noise_spread, current_noise_spread: relative spread between builds.
        provenance: figure -> "found", "macromodel", "derived", "memory" or "uncertain".
        source: where the figures come from.
        note: what a user of the type should know.
    """

    op_amp: OpAmp
    supply_rejection_positive: float | None
    supply_rejection_negative: float | None
    supply_rejection_corner_positive: float | None
    supply_rejection_corner_negative: float | None
    voltage_noise_spread: float
    current_noise_spread: float
    provenance: Mapping[str, str]
    source: str
    note: str


def load_op_amps(extra: Sequence[Path] = ()) -> Mapping[str, OpAmpEntry]:
    """All known op amps by type number, in the order of the catalogs.

    Args:
        extra: catalogs of the same form; each adds its entries and replaces those of the same name, a later one wins.

    Raises:
        CatalogError: a catalog cannot be used.
    """
    defaults, catalog = _house_catalog()
    merged = dict(catalog)
    for path in extra:
        for name, entry in entries(read_catalog(path, PART_TABLES), "op_amps", TYPE_GRAMMAR).items():
            merged[name] = _op_amp_entry(entry, name, defaults, complete=False)
    return MappingProxyType(merged)


def select(names: Iterable[str], catalog: Mapping[str, OpAmpEntry] | None = None) -> tuple[OpAmpEntry, ...]:
    """The entries of the named types, in the order asked, each once.

    Args:
        names: type numbers in upper or lower case, of the entry or of one of its packages ("OPA211" finds OPA2211).
        catalog: what to choose from; default the catalog of the program.

    Raises:
        CatalogError: unknown type; names the nearest known ones.
    """
    known = load_op_amps() if catalog is None else catalog
    index: dict[str, str] = {}
    for name, entry in known.items():
        for _, order in entry.op_amp.packages:
            index.setdefault(order.lower(), name)
    index.update({name.lower(): name for name in known})
    found: dict[str, OpAmpEntry] = {}
    for name in names:
        if name.lower() not in index:
            offered = dict.fromkeys([*known, *(order for e in known.values() for _, order in e.op_amp.packages)])
            raise CatalogError(
                f"op amp {name!r}: in no catalog; {nearest_name(name, offered)}; "
                "correct the type, or describe it in a catalog of your own"
            )
        entry = known[index[name.lower()]]
        found[entry.op_amp.type] = entry
    return tuple(found.values())


@dataclass(frozen=True, slots=True)
class _Defaults:
    figures: Mapping[str, float]
    provenance: Mapping[str, str]


@cache
def _house_catalog() -> tuple[_Defaults, Mapping[str, OpAmpEntry]]:
    return read_house_catalog(catalog_path("op_amps.toml"))


def read_house_catalog(path: Path) -> tuple[_Defaults, Mapping[str, OpAmpEntry]]:
    """Read a catalog that stands alone: with its table of defaults, and with a provenance for every figure."""
    content = read_catalog(path, ("defaults", "op_amps"))
    table = content.sub_table("defaults")
    table.check_keys((*_DEFAULTED, "source", "note", "provenance"))
    table.text("source")
    table.optional_text("note")
    figures = {key: table.number(key, bound) for key, bound in _DEFAULTED.items()}
    defaults = _Defaults(MappingProxyType(figures), provenance(table, figures, complete=True))
    found = entries(content, "op_amps", TYPE_GRAMMAR)
    if not found:
        raise content.error("holds no op amps; add a table [op_amps.TYPE]")
    read = {name: _op_amp_entry(entry, name, defaults, complete=True) for name, entry in found.items()}
    return defaults, MappingProxyType(read)


def _op_amp_entry(entry: Entry, name: str, defaults: _Defaults, complete: bool) -> OpAmpEntry:
    entry.check_keys((*_FIGURES, "technology", "packages", "source", "note", "provenance"))
    technology = entry.choice("technology", TECHNOLOGIES)
    figures = {key: entry.number(key, bound) for key, bound in _REQUIRED.items()}
    figures |= {key: entry.number(key, bound) for key, bound in _FIGURES.items() if key in entry.table}
    tags = dict(provenance(entry, tuple(figures), complete))
    for key, value in defaults.figures.items():
        if key not in figures:
            figures[key] = value
            tags[key] = defaults.provenance[key]
    if "current_noise_slope" not in figures:
        figures["current_noise_slope"] = _induced_noise_slope(figures, technology)
        tags["current_noise_slope"] = "derived"
    _check_consistent(entry, figures)
    return OpAmpEntry(
        op_amp=OpAmp(
            type=name,
            technology=technology,
            second_pole=figures.get("second_pole"),
            current_noise_slope=figures["current_noise_slope"],
            packages=_packages(entry, name),
            **{key: figures[key] for key in _OP_AMP_FIGURES},
        ),
        supply_rejection_positive=figures.get("supply_rejection_positive"),
        supply_rejection_negative=figures.get("supply_rejection_negative"),
        supply_rejection_corner_positive=figures.get("supply_rejection_corner_positive"),
        supply_rejection_corner_negative=figures.get("supply_rejection_corner_negative"),
        voltage_noise_spread=figures["voltage_noise_spread"],
        current_noise_spread=figures["current_noise_spread"],
        provenance=MappingProxyType(tags),
        source=entry.text("source"),
        note=entry.optional_text("note"),
    )


def _induced_noise_slope(figures: Mapping[str, float], technology: str) -> float:
    """Input current noise that grows with frequency [A/rtHz per Hz]: channel noise coupled into the gate of a FET."""
    if technology == "bipolar":
        return 0.0
    capacitance = figures["input_capacitance_differential"] + figures["input_capacitance_common"]
    return INDUCED_NOISE * 2.0 * math.pi * capacitance * figures["voltage_noise"]


def _packages(entry: Entry, name: str) -> tuple[tuple[int, str], ...]:
    """Amplifiers in each package and the type number to order, smallest first; the entry itself, single, by default."""
    if "packages" not in entry.table:
        return ((1, name),)
    table = entry.sub_table("packages")
    table.check_keys(_AMPLIFIERS)
    packages = sorted((_AMPLIFIERS[key], table.text(key, TYPE_GRAMMAR)) for key in table.table)
    if not packages:
        raise entry.error('must name a type to order; write { single = "TYPE" }', "packages")
    return tuple(packages)


def phase_margin(gain_bandwidth: float, dc_gain: float, second_pole: float | None, noise_gain: float) -> float:
    """Phase margin [degree] of a resistive loop: A(f) = A0 / ((1 + jf/fp)(1 + jf/f2)), fp = GBW/A0, loop gain A/N.

    Args:
        gain_bandwidth: [Hz].
        dc_gain: [V/V], above `noise_gain`.
        second_pole: [Hz]; None: a single pole.
        noise_gain: 1 + Zf/Zg.

    >>> round(phase_margin(10e6, 1e5, 15e6, 1.0), 1)
    60.0
    """
    first = gain_bandwidth / dc_gain
    ratio = (dc_gain / noise_gain) ** 2
    if second_pole is None:
        return 180.0 - math.degrees(math.atan(math.sqrt(ratio - 1.0)))
    # |A| = N:  x^2/(a b) + x (1/a + 1/b) + 1 = (A0/N)^2  with x = f^2, a = fp^2, b = f2^2
    a, b = first**2, second_pole**2
    half = (a + b) / 2.0
    constant = a * b * (ratio - 1.0)
    crossing = math.sqrt(constant / (half + math.sqrt(half**2 + constant)))
    return 180.0 - math.degrees(math.atan(crossing / first) + math.atan(crossing / second_pole))


def _check_consistent(entry: Entry, figures: Mapping[str, float]) -> None:
    supply = figures["supply_minimum"]
    if supply >= figures["supply_maximum"]:
        raise entry.error(f"must be below supply_maximum = {figures['supply_maximum']:g} V", "supply_minimum")
    for what in ("swing_headroom", "common_mode_headroom"):
        taken = figures[f"{what}_high"] + figures[f"{what}_low"]
        if taken >= supply:
            raise entry.error(
                f"with {what}_low takes {taken:g} V, must leave something of supply_minimum = {supply:g} V; "
                "correct one of the three",
                f"{what}_high",
            )
    if figures["offset_voltage"] > figures["offset_voltage_max"]:
        largest = figures["offset_voltage_max"]
        raise entry.error(f"must not exceed offset_voltage_max = {largest:g} V; exchange them", "offset_voltage")
    noise_gain = figures["minimum_noise_gain"]
    if figures["dc_gain"] < 10.0 * noise_gain:
        raise entry.error(f"must be at least ten times minimum_noise_gain = {noise_gain:g}", "dc_gain")
    margin = phase_margin(figures["gain_bandwidth"], figures["dc_gain"], figures.get("second_pole"), noise_gain)
    if margin < SMALLEST_PHASE_MARGIN:
        raise entry.error(
            f"leaves {margin:.0f} degrees of phase margin at the minimum noise gain {noise_gain:g}, "
            f"must leave {SMALLEST_PHASE_MARGIN:g}; raise it, or the minimum noise gain",
            "second_pole",
        )
