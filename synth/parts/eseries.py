"""Preferred values of IEC 60063, the E-series.

Values are built from an integer mantissa and a power of ten as decimal text, so that 4.7e-9 is the float nearest to
4.7e-9 and never 4.699999e-9.  "Nearest" means nearest by ratio, the scale on which a series is even.
"""

from __future__ import annotations

import math
from bisect import bisect_left
from collections.abc import Mapping
from functools import cache, lru_cache
from itertools import pairwise
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from synth.errors import CatalogError
from synth.parts.catalog import Bound, Entry, entries, read_catalog
from synth.parts.locate import catalog_path

_SAME = 1e-9  # values closer than this ratio are one value: bounds such as 4.7 * 1e-9 include 4.7e-9
_RANGE = Bound(1e-18, 1e15)


@cache
def _tables() -> Mapping[str, tuple[int, ...]]:
    catalog = read_catalog(catalog_path("e_series.toml"), ("series",))
    return MappingProxyType({name: _read(entry, name) for name, entry in entries(catalog, "series", "E[0-9]+").items()})


def _read(entry: Entry, name: str) -> tuple[int, ...]:
    entry.check_keys(("values", "tolerance", "source", "note"))
    entry.text("source")
    entry.optional_text("note")
    entry.optional_number("tolerance", Bound(1e-4, 1.0))
    numbers = entry.numbers("values", Bound(10, 999))
    values = tuple(int(number) for number in numbers)
    first = values[0]
    if first not in (10, 100) or values[-1] >= 10 * first or any(a >= b for a, b in pairwise(values)):
        raise entry.error("must rise through one decade from 10 or from 100; correct the table", "values")
    if values != numbers or len(values) != int(name[1:]):
        raise entry.error(f"must be {name[1:]} whole numbers; correct the table", "values")
    return values


def series_names() -> tuple[str, ...]:
    """The known series, coarse to fine.

    >>> series_names()[:3]
    ('E3', 'E6', 'E12')
    """
    return tuple(_tables())


def series_values(name: str) -> tuple[int, ...]:
    """Integer mantissas of one decade of a series: two digits up to E24, three from E48 (IEC 60063:2015).

    Raises:
        CatalogError: there is no such series.

    >>> series_values("E6")
    (10, 15, 22, 33, 47, 68)
    """
    tables = _tables()
    if name not in tables:
        raise CatalogError(f"series {name!r}: there is no such E-series; write one of {', '.join(tables)}")
    return tables[name]


def series_within(name: str, other: str) -> bool:
    """Whether every value of series `name` is a value of series `other`.

    >>> series_within("E12", "E24"), series_within("E24", "E96")
    (True, False)
    """
    return _three_digits(name) <= _three_digits(other)


def _three_digits(name: str) -> frozenset[int]:
    values = series_values(name)
    scale = 100 // values[0]
    return frozenset(scale * value for value in values)


@lru_cache(maxsize=1024)
def _decades(values: tuple[int, ...], first: int, last: int) -> tuple[float, ...]:
    """The values from 10**first to the end of decade `last`, rising, each the float nearest to its decimal text."""
    digits = 1 if values[0] == 10 else 2
    return tuple(float(f"{value}e{decade - digits}") for decade in range(first, last + 1) for value in values)


def _checked(value: float, name: str) -> float:
    if not (math.isfinite(value) and _RANGE.low <= value <= _RANGE.high):
        raise CatalogError(f"{name} = {value!r}: must be a finite number {_RANGE}; correct the value")
    return value


def values_between(name: str, low: float, high: float) -> NDArray[np.float64]:
    """The values of a series from `low` to `high`, both included, rising; read-only.

    Args:
        name: "E3" to "E192".
        low, high: [ohm], [F], ...

    Raises:
        CatalogError: unknown series, or bounds that are not positive, finite and in order.

    >>> values_between("E6", 1000, 4700).tolist()
    [1000.0, 1500.0, 2200.0, 3300.0, 4700.0]
    """
    values = series_values(name)
    if _checked(low, "low") > _checked(high, "high"):
        raise CatalogError(f"low = {low!r}: must not exceed high = {high!r}; exchange the bounds")
    first, last = math.floor(math.log10(low) - _SAME), math.floor(math.log10(high) + _SAME)
    every = np.array(_decades(values, first, last), dtype=np.float64)
    array = every[(every >= low * (1 - _SAME)) & (every <= high * (1 + _SAME))]
    array.flags.writeable = False
    return array


def neighbours(value: float, name: str, count: int) -> tuple[float, ...]:
    """The `count` values of a series nearest to `value` by ratio, closest first, the smaller first in a tie.

    Raises:
        CatalogError: unknown series, a value that is not positive and finite, or a count below one.

    >>> neighbours(5000, "E24", 3)
    (5100.0, 4700.0, 5600.0)
    """
    values = series_values(name)
    if count < 1:
        raise CatalogError(f"count = {count!r}: must be at least 1; ask for one neighbour or more")
    exponent = math.floor(math.log10(_checked(value, "value")))
    reach = 1 + math.ceil(count / len(values))
    every = _decades(values, exponent - reach, exponent + reach)
    at = bisect_left(every, value)
    around = every[at - count : at + count]
    return tuple(sorted(around, key=lambda v: (round(abs(math.log(v / value)), 12), v))[:count])


def nearest(value: float, name: str) -> float:
    """The value of a series nearest to `value` by ratio, the smaller in a tie.

    Raises:
        CatalogError: unknown series, or a value that is not positive and finite.

    >>> nearest(9.7, "E24"), nearest(4.68e-9, "E12")
    (10.0, 4.7e-09)
    """
    return neighbours(value, name, 1)[0]
