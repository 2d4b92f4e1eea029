"""Resistors and capacitors that a planner may use: one stock chosen from a catalog kind by what the spec asks."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from synth.errors import CatalogError
from synth.parts.eseries import series_values, series_within, values_between
from synth.parts.kinds import (
    CapacitorCase,
    Dielectric,
    ResistorKind,
    ToleranceClass,
    coupling_rule,
    dielectrics,
    resistor_kinds,
)

_SAME = 1e-9  # figures closer than this ratio are one figure


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ResistorStock:
    """The resistors a planner may use.

    Attributes:
        values: [ohm] rising, read-only.
        series: the E-series they are of.
        tolerance: relative.
        temperature_coefficient: [1/K] half-width, common and individual share together.
        temperature_coefficient_common_share: share of it that all parts of the kind have in common.
        low_value, low_value_coefficient: below this [ohm] the coefficient [1/K] is no better than this.
        technology: kind, "thick film".
        size: case.
        power: [W] rating.
        stray_capacitance: [F] across the body.
        excess_noise: pairs (value [ohm], V rms per V of DC in one decade of frequency).
    """

    values: NDArray[np.float64]
    series: str
    tolerance: float
    temperature_coefficient: float
    temperature_coefficient_common_share: float
    low_value: float
    low_value_coefficient: float
    technology: str
    size: str
    power: float
    stray_capacitance: float
    excess_noise: tuple[tuple[float, float], ...]

    def __post_init__(self) -> None:
        _check_values(self.values, f"resistors, {self.technology} {self.series} in {self.size}")

    @property
    def rating(self) -> str:
        """Power rating for the bill, "0.1 W"."""
        return f"{self.power:g} W"

    def temperature_coefficient_for(self, value: float) -> float:
        """Temperature coefficient [1/K] of a value [ohm]: low values of a kind may be worse than its class."""
        if value < self.low_value * (1 - _SAME):
            return max(self.temperature_coefficient, self.low_value_coefficient)
        return self.temperature_coefficient

    def excess_noise_index(self, value: float) -> float:
        """Excess noise of a value [ohm]: V rms per V of DC in one decade; density index V / sqrt(ln(10) f)."""
        return _interpolated(self.excess_noise, value)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class CapacitorStock:
    """The capacitors of one dielectric that a planner may use.

    Attributes:
        values: [F] rising, read-only.
        series: the E-series they are of.
        tolerance: relative.
        temperature_coefficient: [1/K] half-width, common and individual share together.
        temperature_coefficient_common_share: share of it that all parts of the dielectric have in common.
        loss_tangent: tan d, typical, at 10 kHz.
        loss_tangent_maximum: the limit on the sheets.
        losses: pairs (frequency [Hz], tan d).
        dielectric: "C0G".
        rating: voltage rating for the bill, "50 V".
        cases: (case, smallest value [F], largest value [F]), the preferred case first.
    """

    values: NDArray[np.float64]
    series: str
    tolerance: float
    temperature_coefficient: float
    temperature_coefficient_common_share: float
    loss_tangent: float
    loss_tangent_maximum: float
    losses: tuple[tuple[float, float], ...]
    dielectric: str
    rating: str
    cases: tuple[tuple[str, float, float], ...]

    def __post_init__(self) -> None:
        _check_values(self.values, f"capacitors, {self.dielectric} {self.series} {_percent(self.tolerance)}")

    def size_for(self, value: float) -> str:
        """The preferred case of a value [F].

        Raises:
            CatalogError: no case holds the value.
        """
        for size, low, high in self.cases:
            if low * (1 - _SAME) <= value <= high * (1 + _SAME):
                return size
        lowest, highest = min(case[1] for case in self.cases), max(case[2] for case in self.cases)
        raise CatalogError(
            f"capacitor {value:g} F: no {self.dielectric} case of {_percent(self.tolerance)} and {self.rating} "
            f"holds it; offered are {lowest:g} to {highest:g} F"
        )

    def loss_tangent_at(self, frequency: float) -> float:
        """Typical loss tangent at a frequency [Hz], interpolated in log scales, held at the ends."""
        return _interpolated(self.losses, frequency)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class CouplingStock:
    """Capacitors that pass a signal or hold a reference and set no frequency, the first choice of dielectric first."""

    values: NDArray[np.float64]
    series: str
    stocks: tuple[CapacitorStock, ...]

    def __post_init__(self) -> None:
        _check_values(self.values, "coupling capacitors")

    def stock_for(self, value: float) -> CapacitorStock:
        """The stock of the first dielectric that offers a value [F].

        Raises:
            CatalogError: none does.
        """
        for stock in self.stocks:
            if np.any(np.abs(stock.values / value - 1.0) < _SAME):
                return stock
        raise CatalogError(
            f"coupling capacitor {value:g} F: not stocked; take a value of {self.series} from "
            f"{self.values[0]:g} to {self.values[-1]:g} F"
        )


def resistor_stock(
    series: str | None = None,
    tolerance: float | None = None,
    temperature_coefficient: float | None = None,
    kind: str | None = None,
    *,
    size: str | None = None,
    extra: Sequence[Path] = (),
) -> ResistorStock:
    """The resistors that meet what is asked; what is not asked comes from the catalog.

    Args:
        series: "E3" to "E192".
        tolerance: relative, one of the classes offered.
        temperature_coefficient: [1/K]; a looser one than the best offered is taken as stated.
        kind: "thick film", ...; default the first kind that offers all that is asked.
        size: case; default that of the kind.
        extra: catalogs of the person.

    Raises:
        CatalogError: not offered; names what is.

    >>> resistor_stock("E96", 0.01, 50e-6).technology
    'thin film'
    """
    if series is not None:
        series_values(series)
    kinds = resistor_kinds(extra)
    if kind is not None and kind not in kinds:
        raise CatalogError(f"resistor kind {kind!r}: not in the catalog; offered are {', '.join(kinds)}")
    tried = [kinds[kind]] if kind is not None else list(kinds.values())
    complaints = [_refusal(one, series, tolerance, temperature_coefficient) for one in tried]
    if None not in complaints:
        raise CatalogError(f"resistors: {'; '.join(text for text in complaints if text is not None)}")
    chosen = tried[complaints.index(None)]
    grade, name = _grade(chosen, series, tolerance)
    case = next((one for one in chosen.sizes if one.size == (size or chosen.default_size)), None)
    if case is None:
        offered = ", ".join(one.size for one in chosen.sizes)
        raise CatalogError(f"resistor size {size!r}: {chosen.name} is offered in {offered}; write one of these")
    low, high = max(case.low, chosen.useful_range[0]), min(case.high, chosen.useful_range[1])
    if low >= high:
        raise CatalogError(f"resistor size {case.size!r}: no {chosen.name} in the useful range; take another size")
    return ResistorStock(
        values=values_between(name, low, high),
        series=name,
        tolerance=grade.tolerance,
        temperature_coefficient=_coefficient(chosen, temperature_coefficient),
        temperature_coefficient_common_share=chosen.common_share,
        low_value=chosen.low_value,
        low_value_coefficient=chosen.low_value_coefficient,
        technology=chosen.name,
        size=case.size,
        power=case.power,
        stray_capacitance=case.parallel_capacitance,
        excess_noise=chosen.excess_noise,
    )


def capacitor_stock(
    series: str | None = None,
    tolerance: float | None = None,
    temperature_coefficient: float | None = None,
    dielectric: str | None = None,
    *,
    extra: Sequence[Path] = (),
) -> CapacitorStock:
    """The capacitors that may set a frequency and meet what is asked; what is not asked comes from the catalog.

    Args:
        series: "E3" to "E192".
        tolerance: relative, one of the classes offered.
        temperature_coefficient: [1/K]; a looser one than offered is taken as stated.
        dielectric: default C0G.
        extra: catalogs of the person.

    Raises:
        CatalogError: not offered (names what is), or a dielectric that must not set a frequency.

    >>> stock = capacitor_stock()
    >>> stock.dielectric, float(stock.values[0]), float(stock.values[-1]), stock.size_for(3.3e-9)
    ('C0G', 1e-10, 3.3e-08, '0603')
    """
    known = dielectrics(extra)
    chosen = _known_dielectric(dielectric, known)
    if not chosen.sets_frequency:
        fit = ", ".join(name for name, one in known.items() if one.sets_frequency)
        raise CatalogError(
            f"dielectric {chosen.name!r}: must not set a frequency: {chosen.reason}; write one of {fit} "
            "(coupling and bypass capacitors are chosen apart)"
        )
    return _capacitors(chosen, series, tolerance, temperature_coefficient, chosen.frequency_range)


def coupling_stock(*, extra: Sequence[Path] = ()) -> CouplingStock:
    """The capacitors for coupling and references, with the loss and tolerance of their own dielectric.

    >>> stock = coupling_stock()
    >>> stock.stock_for(100e-9).dielectric, stock.stock_for(1e-6).dielectric
    ('C0G', 'X7R')
    """
    known = dielectrics(extra)
    rule = coupling_rule()
    stocks = tuple(
        _capacitors(known[name], rule.series, tolerance, None, (low, high)) for name, tolerance, low, high in rule.rows
    )
    values = np.unique(np.concatenate([stock.values for stock in stocks]))
    values.flags.writeable = False
    return CouplingStock(values=values, series=rule.series, stocks=stocks)


def _capacitors(
    chosen: Dielectric,
    series: str | None,
    tolerance: float | None,
    coefficient: float | None,
    limits: tuple[float, float],
) -> CapacitorStock:
    if series is not None:
        series_values(series)
    complaint = _refusal(chosen, series, tolerance, coefficient)
    if complaint is not None:
        raise CatalogError(f"capacitors: {complaint}")
    grade, name = _grade(chosen, series, tolerance)
    cases = tuple(_case_range(case, grade) for case in chosen.cases if case.voltage == chosen.voltage)
    values = values_between(name, *limits)
    held = np.zeros(values.shape, dtype=bool)
    for _, low, high in cases:
        held |= (values >= low * (1 - _SAME)) & (values <= high * (1 + _SAME))
    values = values[held]
    values.flags.writeable = False
    return CapacitorStock(
        values=values,
        series=name,
        tolerance=grade.tolerance,
        temperature_coefficient=_coefficient(chosen, coefficient),
        temperature_coefficient_common_share=chosen.common_share,
        loss_tangent=_interpolated(chosen.loss, 10e3),
        loss_tangent_maximum=chosen.loss_maximum,
        losses=chosen.loss,
        dielectric=chosen.name,
        rating=f"{chosen.voltage:g} V",
        cases=cases,
    )


def _case_range(case: CapacitorCase, grade: ToleranceClass) -> tuple[str, float, float]:
    return case.size, case.low, min(case.high, grade.highest.get(case.size, case.high))


def _known_dielectric(name: str | None, known: Mapping[str, Dielectric]) -> Dielectric:
    if name is None:
        return next(iter(known.values()))
    alias = {key.lower(): key for key in known} | {"np0": "C0G", "cog": "C0G"}
    key = alias.get(name.lower(), name)
    if key not in known:
        raise CatalogError(f"dielectric {name!r}: not in the catalog; offered are {', '.join(known)}")
    return known[key]


def _same(a: float, b: float) -> bool:
    return math.isclose(a, b, rel_tol=1e-6, abs_tol=0.0)


def _offering(kind: ResistorKind | Dielectric, series: str | None, tolerance: float | None) -> list[ToleranceClass]:
    """The classes of a kind that meet a series and a tolerance, the default class first, then the tightest first."""
    fit = [
        grade
        for grade in kind.classes
        if (tolerance is None or _same(grade.tolerance, tolerance))
        and (series is None or any(series_within(series, stocked) for stocked in grade.series))
    ]
    return sorted(fit, key=lambda grade: (grade.tolerance != kind.default_tolerance, grade.tolerance))


def _grade(kind: ResistorKind | Dielectric, series: str | None, tolerance: float | None) -> tuple[ToleranceClass, str]:
    """The class taken and its series: the one asked, else the default, else the finest stocked."""
    grade = _offering(kind, series, tolerance)[0]
    if series is not None:
        return grade, series
    stocked = grade.series
    return grade, kind.default_series if kind.default_series in stocked else max(stocked, key=lambda s: int(s[1:]))


def _coefficient(kind: ResistorKind | Dielectric, asked: float | None) -> float:
    return kind.temperature_coefficients[0] if asked is None else asked


def _refusal(
    kind: ResistorKind | Dielectric, series: str | None, tolerance: float | None, coefficient: float | None
) -> str | None:
    """Why a kind does not offer what is asked, None when it does."""
    if coefficient is not None:
        best = min(kind.temperature_coefficients)
        if not (math.isfinite(coefficient) and coefficient >= best * (1 - 1e-6)):
            return (
                f"{kind.name} has no temperature coefficient of {coefficient * 1e6:g} ppm/K; "
                f"the best offered is {best * 1e6:g} ppm/K"
            )
    if not _offering(kind, None, tolerance):
        offered = ", ".join(_percent(grade.tolerance) for grade in kind.classes)
        asked = _percent(tolerance) if tolerance is not None else "any"
        return f"{kind.name} has no tolerance {asked}; offered are {offered}"
    if not _offering(kind, series, tolerance):
        stocked = dict.fromkeys(name for grade in _offering(kind, None, tolerance) for name in grade.series)
        of = "" if tolerance is None else f" at {_percent(tolerance)}"
        return f"{kind.name} has no series {series}{of}; offered are {', '.join(stocked)} and the series within"
    return None


def _percent(tolerance: float) -> str:
    return f"{tolerance * 100:g} %"


def _interpolated(pairs: Sequence[tuple[float, float]], x: float) -> float:
    """Linear interpolation in log x and log y, held at the ends."""
    if not x > 0:
        raise CatalogError(f"figure asked at {x!r}: must be positive; ask at a positive value or frequency")
    xs, ys = zip(*pairs, strict=True)
    if x <= xs[0] or x >= xs[-1] or x in xs:
        return float(ys[0] if x <= xs[0] else ys[-1] if x >= xs[-1] else ys[xs.index(x)])
    return float(np.exp(np.interp(math.log(x), np.log(xs), np.log(ys))))


def _check_values(values: NDArray[np.float64], what: str) -> None:
    if values.size == 0:
        raise CatalogError(f"{what}: no value is stocked; widen the range, the series or the tolerance")
    if not (np.all(np.isfinite(values)) and values[0] > 0 and np.all(np.diff(values) > 0)):
        raise CatalogError(f"{what}: values must be positive, finite and rising; sort them")
    if values.flags.writeable:
        raise CatalogError(f"{what}: values must be read-only; clear their writeable flag")
