"""Bounds, counts and errors of the preferred values; the tables themselves are in tests/published."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from synth.errors import CatalogError
from synth.parts import eseries
from synth.parts.eseries import nearest, neighbours, series_values, values_between


def test_both_bounds_are_included_even_when_they_were_computed() -> None:
    assert values_between("E6", 4.7 * 1e-9, 10 * 1e-9).tolist() == [4.7e-9, 6.8e-9, 1e-8]
    assert values_between("E12", 999.9999999999, 1200.0000000001).tolist() == [1000.0, 1200.0]


def test_more_neighbours_than_a_decade_holds() -> None:
    found = neighbours(1000.0, "E3", 10)
    assert len(set(found)) == 10
    assert sorted(found) == values_between("E3", min(found), max(found)).tolist()


def test_a_tie_goes_to_the_smaller_value() -> None:
    assert nearest(math.sqrt(10 * 15), "E6") == 10.0
    assert nearest(math.sqrt(6.8 * 10), "E6") == 6.8


def test_values_are_read_only_and_rising() -> None:
    values = values_between("E96", 10, 1e6)
    assert len(values) == 5 * 96 + 1
    assert np.all(np.diff(values) > 0)
    with pytest.raises(ValueError, match="read-only"):
        values[0] = 1.0


def test_an_empty_range_between_two_values() -> None:
    assert values_between("E6", 11, 14).size == 0


@pytest.mark.parametrize("name", ["E97", "e96", "", "96"])
def test_unknown_series(name: str) -> None:
    with pytest.raises(CatalogError, match=r"there is no such E-series; write one of E3, .*E192"):
        series_values(name)


@pytest.mark.parametrize("value", [0.0, -1.0, math.nan, math.inf, 1e300])
def test_values_that_have_no_neighbour(value: float) -> None:
    with pytest.raises(CatalogError, match=r"value = .* must be a finite number between"):
        nearest(value, "E12")


def test_bounds_and_counts_refused() -> None:
    with pytest.raises(CatalogError, match="low = 0: must be a finite number"):
        values_between("E12", 0, 1)
    with pytest.raises(CatalogError, match="high = inf: must be a finite number"):
        values_between("E12", 1, math.inf)
    with pytest.raises(CatalogError, match=r"low = 2\.0: must not exceed high = 1\.0"):
        values_between("E12", 2.0, 1.0)
    with pytest.raises(CatalogError, match="count = 0: must be at least 1"):
        neighbours(1.0, "E12", 0)


@pytest.mark.parametrize(
    ("values", "complaint"),
    [
        ("[10, 22, 22]", "must rise through one decade"),
        ("[11, 22, 47]", "must rise through one decade from 10 or from 100"),
        ("[10, 22, 100]", "must rise through one decade"),
        ("[10, 22]", "must be 3 whole numbers"),
        ("[10, 22.5, 47]", "must be 3 whole numbers"),
        ("[10, 22, 4700]", "must lie between 10 and 999"),
    ],
)
def test_a_broken_table(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, values: str, complaint: str) -> None:
    file = tmp_path / "e_series.toml"
    file.write_text(f'[series.E3]\nvalues = {values}\nsource = "test"\n')
    monkeypatch.setattr(eseries, "catalog_path", lambda _: file)
    eseries._tables.cache_clear()
    try:
        with pytest.raises(CatalogError, match=rf"e_series\.toml: \[series\.E3\] values = .*{complaint}"):
            series_values("E3")
    finally:
        eseries._tables.cache_clear()
