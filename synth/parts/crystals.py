"""Quartz resonators with typical motional figures, from catalogs/crystals.toml."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from types import MappingProxyType

from synth.parts.catalog import PART_TABLES, Bound, Entry, entries, provenance, read_catalog
from synth.parts.locate import catalog_path

NAME_GRAMMAR = "[A-Za-z0-9][A-Za-z0-9 .,_-]{0,39}"
_CAPACITANCE = Bound(1e-14, 1e-9, "F")
_BOUNDS = {
    "frequency": Bound(1e3, 1e9, "Hz"),
    "series_resistance": Bound(0.1, 1e7, "ohm"),
    "motional_capacitance": Bound(1e-17, 1e-12, "F"),
    "shunt_capacitance": _CAPACITANCE,
    "load_capacitance": _CAPACITANCE,
    "drive_limit": Bound(1e-9, 1e-1, "W"),
}
_Q = Bound(1e3, 1e7)


@dataclass(frozen=True, slots=True, kw_only=True)
class Crystal:
    """A quartz resonator.

    Attributes:
        name: as in the catalog, "32.768 kHz".
        frequency: [Hz] as marked, at the load capacitance.
        series_resistance: [ohm] motional.
        motional_capacitance: [F].
        shunt_capacitance: [F].
        load_capacitance: [F].
        drive_limit: [W] largest power in the motional resistance.
        provenance: figure -> "found", "derived", "memory" or "uncertain".
        source, note: text.
    """

    name: str
    frequency: float
    series_resistance: float
    motional_capacitance: float
    shunt_capacitance: float
    load_capacitance: float
    drive_limit: float
    provenance: Mapping[str, str]
    source: str
    note: str

    @property
    def series_frequency(self) -> float:
        """Series resonance [Hz]: fL / sqrt(1 + C1/(C0 + CL)), exact without loss."""
        pulling = self.motional_capacitance / (self.shunt_capacitance + self.load_capacitance)
        return self.frequency / math.sqrt(1.0 + pulling)

    @property
    def motional_inductance(self) -> float:
        """L1 [H] = 1 / ((2 pi fs)^2 C1)."""
        return 1.0 / ((2.0 * math.pi * self.series_frequency) ** 2 * self.motional_capacitance)

    @property
    def q(self) -> float:
        """Quality factor 1 / (2 pi fs C1 R1)."""
        omega = 2.0 * math.pi * self.series_frequency
        return 1.0 / (omega * self.motional_capacitance * self.series_resistance)


def load_crystals(extra: Sequence[Path] = ()) -> Mapping[str, Crystal]:
    """All known resonators by name; `extra` catalogs add and replace.

    Raises:
        CatalogError: a catalog cannot be used.

    >>> round(load_crystals()["32.768 kHz"].series_frequency, 2)
    32763.93
    """
    merged = dict(_house_crystals())
    for path in extra:
        for name, entry in entries(read_catalog(path, PART_TABLES), "crystals", NAME_GRAMMAR).items():
            merged[name] = _crystal(entry, name, complete=False)
    return MappingProxyType(merged)


@cache
def _house_crystals() -> Mapping[str, Crystal]:
    return read_house_crystals(catalog_path("crystals.toml"))


def read_house_crystals(path: Path) -> Mapping[str, Crystal]:
    """Read a catalog that stands alone, with a provenance for every figure."""
    found = entries(read_catalog(path, ("crystals",)), "crystals", NAME_GRAMMAR)
    return MappingProxyType({name: _crystal(entry, name, complete=True) for name, entry in found.items()})


def _crystal(entry: Entry, name: str, complete: bool) -> Crystal:
    entry.check_keys((*_BOUNDS, "source", "note", "provenance"))
    figures = {key: entry.number(key, bound) for key, bound in _BOUNDS.items()}
    crystal = Crystal(
        name=name,
        provenance=provenance(entry, figures, complete),
        source=entry.text("source"),
        note=entry.optional_text("note"),
        **figures,
    )
    if not _Q.low <= crystal.q <= _Q.high:
        raise entry.error(
            f"gives a quality factor of {crystal.q:.3g}, must lie {_Q}; check it against the motional capacitance",
            "series_resistance",
        )
    return crystal
