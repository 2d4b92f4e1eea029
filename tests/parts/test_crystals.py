"""Resonators: the worked examples of the catalog, physical sense, errors."""

from __future__ import annotations

from pathlib import Path

import pytest

from synth.errors import CatalogError
from synth.parts.crystals import load_crystals

CATALOG = load_crystals()


def test_worked_examples_of_tuning_forks() -> None:
    a, b = CATALOG["32.768 kHz"], CATALOG["32.768 kHz, 9 pF"]
    assert a.series_frequency == pytest.approx(32763.9338, rel=1e-8)
    assert a.motional_inductance == pytest.approx(6741.9, rel=1e-5)
    assert a.q == pytest.approx(39654, rel=1e-5)
    assert b.series_frequency == pytest.approx(32764.3961, rel=1e-8)
    assert b.q == pytest.approx(44160, rel=1e-4)


def test_measured_resonances_at_ten_megahertz() -> None:
    crystal = CATALOG["10.000 MHz"]
    assert crystal.series_frequency == pytest.approx(9.996490e6, abs=100)
    parallel = crystal.series_frequency * (1 + crystal.motional_capacitance / crystal.shunt_capacitance) ** 0.5
    assert parallel == pytest.approx(10.017730e6, abs=100)
    assert crystal.motional_inductance == pytest.approx(9.3535e-3, rel=1e-3)


@pytest.mark.parametrize("name", CATALOG)
def test_physical_sense(name: str) -> None:
    crystal = CATALOG[name]
    assert float(name.split()[0]) * {"kHz": 1e3, "MHz": 1e6}[name.split()[1].strip(",")] == crystal.frequency
    assert 20e3 < crystal.q < 200e3
    assert 100 < crystal.shunt_capacitance / crystal.motional_capacitance < 1500
    assert set(crystal.provenance) == {
        "frequency",
        "series_resistance",
        "motional_capacitance",
        "shunt_capacitance",
        "load_capacitance",
        "drive_limit",
    }
    assert crystal.source


OWN = """
[crystals."50 kHz"]
frequency = 50e3
series_resistance = 30e3
motional_capacitance = 2e-15
shunt_capacitance = 1e-12
load_capacitance = 12.5e-12
drive_limit = 1e-6
source = "bench"
"""


def test_own_crystal(tmp_path: Path) -> None:
    file = tmp_path / "mine.toml"
    file.write_text(OWN)
    assert load_crystals([file])["50 kHz"].frequency == 50e3


@pytest.mark.parametrize(
    ("old", "new", "complaint"),
    [
        ("2e-15", "2e-12", "motional_capacitance = 2e-12: must lie between 1e-17 and 1e-12 F"),
        ("30e3", "30.0", "series_resistance = 30.0: gives a quality factor of 5.31e.07, must lie between"),
        ("drive_limit", "drive", "unknown key; nearest: drive_limit"),
    ],
)
def test_broken_crystal(tmp_path: Path, old: str, new: str, complaint: str) -> None:
    file = tmp_path / "mine.toml"
    file.write_text(OWN.replace(old, new))
    with pytest.raises(CatalogError, match=rf"mine\.toml: \[crystals\.50 kHz\] .*{complaint}"):
        load_crystals([file])
