"""Catalogs are found in a wheel and in a checkout."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from synth.errors import CatalogError
from synth.parts.locate import catalog_path

NAMES = ("op_amps.toml", "resistors.toml", "capacitors.toml", "e_series.toml", "crystals.toml")


@pytest.mark.parametrize("name", NAMES)
def test_every_catalog_is_there(name: str) -> None:
    assert catalog_path(name).is_file()


def test_inside_the_package_first_then_beside_it(tmp_path: Path) -> None:
    package = tmp_path / "synth"
    beside, inside = tmp_path / "catalogs" / "x.toml", package / "catalogs" / "x.toml"
    for file in (beside, inside):
        file.parent.mkdir(parents=True)
    beside.touch()
    assert catalog_path("x.toml", package) == beside
    inside.touch()
    assert catalog_path("x.toml", package) == inside


def test_a_missing_catalog_names_both_places(tmp_path: Path) -> None:
    package = tmp_path / "synth"
    places = f"{package / 'catalogs' / 'x.toml'} nor {tmp_path / 'catalogs' / 'x.toml'}"
    with pytest.raises(CatalogError, match=re.escape(f"catalog x.toml: found neither {places}")):
        catalog_path("x.toml", package)
