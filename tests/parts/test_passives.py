"""Stocks of resistors and capacitors: what is offered, what is refused, and the sense of the catalogs behind them."""

from __future__ import annotations

import math
import random
from collections.abc import Callable
from functools import partial
from pathlib import Path

import numpy as np
import pytest

from synth.errors import CatalogError
from synth.parts.eseries import nearest, series_within
from synth.parts.kinds import dielectrics, read_house_capacitors, read_house_resistors, resistor_kinds
from synth.parts.locate import catalog_path
from synth.parts.passives import CapacitorStock, ResistorStock, capacitor_stock, coupling_stock, resistor_stock


def broken(tmp_path: Path, name: str, old: str, new: str) -> Path:
    text = catalog_path(name).read_text(encoding="utf-8")
    assert old in text
    file = tmp_path / name
    file.write_text(text.replace(old, new, 1), encoding="utf-8")
    return file


def test_default_resistors() -> None:
    stock = resistor_stock()
    assert (stock.technology, stock.series, stock.tolerance, stock.size) == ("thick film", "E96", 0.01, "0603")
    assert (stock.temperature_coefficient, stock.power, stock.rating) == (100e-6, 0.1, "0.1 W")
    assert stock.stray_capacitance == 0.04e-12
    assert (stock.values[0], stock.values[-1], len(stock.values)) == (10.0, 1e6, 5 * 96 + 1)
    assert not stock.values.flags.writeable


@pytest.mark.parametrize(
    ("series", "tolerance", "coefficient", "kind", "expected"),
    [
        ("E96", 0.01, None, None, ("thick film", "E96", 0.01, 100e-6)),
        ("E96", 0.01, 50e-6, None, ("thin film", "E96", 0.01, 50e-6)),
        ("E24", None, None, None, ("thick film", "E24", 0.01, 100e-6)),
        ("E12", 0.05, 200e-6, None, ("thick film", "E12", 0.05, 200e-6)),
        ("E48", 0.01, None, None, ("thick film", "E48", 0.01, 100e-6)),
        ("E192", None, None, None, ("thin film", "E192", 0.001, 25e-6)),
        (None, 0.05, None, None, ("thick film", "E24", 0.05, 100e-6)),
        (None, 0.001, None, None, ("thin film", "E96", 0.001, 25e-6)),
        (None, None, 10e-6, None, ("thin film", "E96", 0.001, 10e-6)),
        (None, None, 60e-6, None, ("thin film", "E96", 0.001, 60e-6)),
        (None, None, None, "thin film", ("thin film", "E96", 0.001, 25e-6)),
    ],
)
def test_resistors_asked(
    series: str | None,
    tolerance: float | None,
    coefficient: float | None,
    kind: str | None,
    expected: tuple[str, str, float, float],
) -> None:
    stock = resistor_stock(series, tolerance, coefficient, kind)
    assert (stock.technology, stock.series, stock.tolerance, stock.temperature_coefficient) == expected


@pytest.mark.parametrize(
    ("series", "tolerance", "coefficient", "kind", "complaint"),
    [
        ("E97", None, None, None, "series 'E97': there is no such E-series"),
        ("E192", 0.01, None, None, r"thick film has no series E192 at 1 %; offered are E24, E96 .*; thin film has no"),
        (None, 0.03, None, None, r"thick film has no tolerance 3 %; offered are 5 %, 2 %, 1 %, 0\.5 %; thin film"),
        (None, None, 1e-6, None, "thin film has no temperature coefficient of 1 ppm/K; the best offered is 5 ppm/K"),
        (None, None, 25e-6, "thick film", r"thick film has no .* of 25 ppm/K; the best .* 100 ppm/K"),
        (None, None, math.nan, None, "has no temperature coefficient of nan"),
        (None, None, None, "wire", "resistor kind 'wire': not in the catalog; offered are thick film, thin film"),
    ],
)
def test_resistors_refused(
    series: str | None, tolerance: float | None, coefficient: float | None, kind: str | None, complaint: str
) -> None:
    with pytest.raises(CatalogError, match=complaint):
        resistor_stock(series, tolerance, coefficient, kind)


def test_resistor_sizes() -> None:
    assert resistor_stock(kind="thin film").values[-1] == 324e3
    stock = resistor_stock(kind="thin film", size="1206")
    assert (stock.values[-1], stock.power) == (1e6, 0.25)
    with pytest.raises(CatalogError, match="resistor size '2512': thin film is offered in 0402, 0603, 0805, 1206"):
        resistor_stock(kind="thin film", size="2512")


def test_low_values_have_a_worse_coefficient() -> None:
    stock = resistor_stock()
    assert stock.temperature_coefficient_for(100.0) == 100e-6
    assert stock.temperature_coefficient_for(97.6) == 200e-6
    assert resistor_stock(temperature_coefficient=300e-6).temperature_coefficient_for(10.0) == 300e-6
    assert resistor_stock(kind="thin film").temperature_coefficient_for(10.0) == 25e-6


def test_excess_noise_interpolates_and_holds_at_the_ends() -> None:
    stock = resistor_stock()
    assert stock.excess_noise_index(10e3) == pytest.approx(0.25e-6, rel=1e-9, abs=0.0)
    assert stock.excess_noise_index(math.sqrt(1e3 * 10e3)) == pytest.approx(
        math.sqrt(0.1 * 0.25) * 1e-6, rel=1e-9, abs=0.0
    )
    assert stock.excess_noise_index(10.0) == pytest.approx(0.1e-6, rel=1e-9, abs=0.0)
    with pytest.raises(CatalogError, match="figure asked at 0: must be positive"):
        stock.excess_noise_index(0)


def test_default_capacitors() -> None:
    stock = capacitor_stock()
    assert (stock.dielectric, stock.series, stock.tolerance, stock.rating) == ("C0G", "E12", 0.01, "50 V")
    assert (stock.temperature_coefficient, stock.loss_tangent, stock.loss_tangent_maximum) == (30e-6, 5e-4, 1e-3)
    assert (stock.values[0], stock.values[-1]) == (100e-12, 33e-9)
    assert len(stock.values) == 31
    assert not stock.values.flags.writeable


@pytest.mark.parametrize(
    ("value", "tolerance", "size"),
    [
        (100e-12, 0.01, "0603"),
        (3.3e-9, 0.01, "0603"),
        (3.9e-9, 0.01, "0805"),
        (10e-9, 0.01, "0805"),
        (12e-9, 0.01, "1206"),
        (33e-9, 0.02, "1206"),
        (10e-9, 0.05, "0603"),
        (33e-9, 0.05, "0805"),
    ],
)
def test_case_of_a_capacitor(value: float, tolerance: float, size: str) -> None:
    assert capacitor_stock(tolerance=tolerance).size_for(value) == size


@pytest.mark.parametrize("dielectric", ["C0G", "PPS film", "PP film"])
def test_every_stocked_value_has_a_case(dielectric: str) -> None:
    for grade in dielectrics()[dielectric].classes:
        stock = capacitor_stock(tolerance=grade.tolerance, dielectric=dielectric)
        assert all(stock.size_for(value) for value in stock.values)
        assert all(nearest(value, stock.series) == value for value in stock.values)
        assert stock.values[0] >= 100e-12


def test_value_that_no_case_holds() -> None:
    with pytest.raises(CatalogError, match=r"capacitor 4\.7e-08 F: no C0G case of 1 % and 50 V holds it; offered are"):
        capacitor_stock().size_for(47e-9)


@pytest.mark.parametrize(
    ("series", "tolerance", "coefficient", "dielectric", "expected"),
    [
        ("E6", 0.02, 30e-6, "C0G", ("C0G", "E6", 0.02, 30e-6)),
        ("E24", None, None, None, ("C0G", "E24", 0.05, 30e-6)),
        (None, 0.1, 60e-6, "np0", ("C0G", "E12", 0.1, 60e-6)),
        (None, None, None, "pps film", ("PPS film", "E6", 0.02, 50e-6)),
        ("E12", 0.025, None, "PP film", ("PP film", "E12", 0.025, 300e-6)),
    ],
)
def test_capacitors_asked(
    series: str | None,
    tolerance: float | None,
    coefficient: float | None,
    dielectric: str | None,
    expected: tuple[str, str, float, float],
) -> None:
    stock = capacitor_stock(series, tolerance, coefficient, dielectric)
    assert (stock.dielectric, stock.series, stock.tolerance, stock.temperature_coefficient) == expected


@pytest.mark.parametrize(
    ("series", "tolerance", "coefficient", "dielectric", "complaint"),
    [
        ("E13", None, None, None, "series 'E13': there is no such E-series"),
        ("E24", 0.01, None, None, "capacitors: C0G has no series E24 at 1 %; offered are E12 and the series within"),
        ("E96", None, None, None, "capacitors: C0G has no series E96; offered are E12, E24"),
        (None, 0.005, None, None, r"capacitors: C0G has no tolerance 0\.5 %; offered are 10 %, 5 %, 2 %, 1 %"),
        (None, None, 15e-6, None, "C0G has no temperature coefficient of 15 ppm/K; the best offered is 30 ppm/K"),
        (None, None, None, "mica", "dielectric 'mica': not in the catalog; offered are C0G, PPS film, PP film, X7R"),
        (None, None, None, "X7R", r"dielectric 'X7R': must not set a frequency: its value moves .*one of C0G, PPS"),
        (None, None, None, "x7r", "must not set a frequency"),
    ],
)
def test_capacitors_refused(
    series: str | None, tolerance: float | None, coefficient: float | None, dielectric: str | None, complaint: str
) -> None:
    with pytest.raises(CatalogError, match=complaint):
        capacitor_stock(series, tolerance, coefficient, dielectric)


def test_loss_tangent_over_frequency() -> None:
    film = capacitor_stock(dielectric="PP film")
    assert film.loss_tangent == pytest.approx(8e-4)
    assert film.loss_tangent_at(100e3) == pytest.approx(2.5e-3)
    assert film.loss_tangent_at(1e6) == pytest.approx(2.5e-3)
    assert film.loss_tangent_at(1.0) == pytest.approx(5e-4)
    assert film.loss_tangent_at(1e3) < film.loss_tangent_at(3e3) < film.loss_tangent_at(10e3)
    assert capacitor_stock().loss_tangent_at(2e6) == pytest.approx(5e-4)


def test_coupling_capacitors() -> None:
    stock = coupling_stock()
    assert (stock.values[0], stock.values[-1], stock.series) == (100e-12, 10e-6, "E6")
    assert len(stock.values) == 31
    linear, dense = stock.stock_for(100e-9), stock.stock_for(150e-9)
    assert (linear.dielectric, linear.tolerance, linear.loss_tangent) == ("C0G", 0.05, 5e-4)
    assert (dense.dielectric, dense.tolerance, dense.loss_tangent) == ("X7R", 0.1, 2.5e-2)
    assert (linear.size_for(100e-9), dense.size_for(10e-6), dense.size_for(1e-6)) == ("1206", "1206", "0603")
    assert all(stock.stock_for(value).size_for(value) for value in stock.values)
    with pytest.raises(CatalogError, match=r"coupling capacitor 2e-06 F: not stocked; take a value of E6 from 1e-10"):
        stock.stock_for(2e-6)


def test_a_stock_is_checked_when_it_is_made() -> None:
    good = capacitor_stock()
    fields = {name: getattr(good, name) for name in CapacitorStock.__slots__}
    for values, complaint in (
        (np.array([]), "no value is stocked"),
        (np.array([2.0, 1.0]), "must be positive, finite and rising"),
        (np.array([1e-9, np.inf]), "must be positive, finite and rising"),
        (np.array([1e-9]), "must be read-only"),
    ):
        with pytest.raises(CatalogError, match=f"capacitors, C0G E12 1 %: .*{complaint}"):
            CapacitorStock(**{**fields, "values": values})


def stock_or_refusal(
    request: Callable[[], ResistorStock | CapacitorStock],
) -> ResistorStock | CapacitorStock | str:
    try:
        return request()
    except CatalogError as error:
        return str(error)


def test_random_requests_give_a_stock_or_a_named_refusal() -> None:
    draw = random.Random("requests")
    given = 0
    for _ in range(300):
        series = draw.choice([None, "E3", "E6", "E12", "E24", "E48", "E96", "E192"])
        tolerance = draw.choice([None, 0.1, 0.05, 0.02, 0.01, 0.005, 0.001])
        coefficient = draw.choice([None, 5e-6, 25e-6, 30e-6, 100e-6, 500e-6])
        dielectric = draw.choice([None, "PPS film", "PP film"])
        for request in (
            partial(resistor_stock, series, tolerance, coefficient),
            partial(capacitor_stock, series, tolerance, coefficient, dielectric),
        ):
            stock = stock_or_refusal(request)
            if isinstance(stock, str):
                assert "offered" in stock
                continue
            given += 1
            assert series in (None, stock.series)
            assert tolerance in (None, stock.tolerance)
            assert coefficient in (None, stock.temperature_coefficient)
            assert np.all(np.diff(stock.values) > 0)
    assert 100 < given < 500


def test_catalogs_make_sense() -> None:
    for kind in resistor_kinds().values():
        assert [size.power for size in kind.sizes] == sorted(size.power for size in kind.sizes)
        assert all(0.02e-12 < size.parallel_capacitance < 0.1e-12 for size in kind.sizes)
        assert 0 < kind.common_share < 1
        assert kind.default_tolerance in [grade.tolerance for grade in kind.classes]
        assert len(kind.source) > 20
    for one in dielectrics().values():
        assert one.sets_frequency == (one.name != "X7R")
        assert 0 < one.common_share < 1
        assert all(series_within("E6", stocked) for grade in one.classes for stocked in grade.series)
        assert len(one.source) > 20


@pytest.mark.parametrize("name", ["resistors.toml", "capacitors.toml"])
def test_provenance_covers_every_figure(name: str) -> None:
    kinds = resistor_kinds() if name == "resistors.toml" else dielectrics()
    for kind in kinds.values():
        assert {"classes", "default_tolerance", "temperature_coefficient_common_share"} <= set(kind.provenance)
        assert set(kind.provenance.values()) <= {"found", "macromodel", "derived", "memory", "uncertain"}


@pytest.mark.parametrize(
    ("old", "new", "complaint"),
    [
        ('default_kind = "thick film"', 'default_kind = "thick"', "default_kind = 'thick': must be one of thick film"),
        ("tolerance = 0.02", "tolerance = 0.01", "lists a tolerance twice"),
        ("default_tolerance = 0.01", "default_tolerance = 0.03", "must be one of the classes"),
        ('default_series = "E96"', 'default_series = "E48"', "must be stocked in the default tolerance: E24, E96"),
        ('series = ["E24", "E96"]', 'series = ["E24", "E95"]', "there is no E-series 'E95'"),
        ("useful_range = [10.0, 1e6]", "useful_range = [1e6, 10.0]", r"must be two figures \[low, high\]"),
        ('default_size = "0603"', 'default_size = "0604"', "must be one of 0402, 0603"),
        ("excess_noise = [[1e3,", "excess_noise = [[1e5,", "the first figures must rise"),
        ("power = 0.0625", "watts = 0.0625", "watts = .*unknown key"),
        ('"excess_noise"]', "]", "says nothing of 'excess_noise'"),
    ],
)
def test_broken_resistors(tmp_path: Path, old: str, new: str, complaint: str) -> None:
    with pytest.raises(CatalogError, match=complaint):
        read_house_resistors(broken(tmp_path, "resistors.toml", old, new))


@pytest.mark.parametrize(
    ("old", "new", "complaint"),
    [
        ('default_dielectric = "C0G"', 'default_dielectric = "X7R"', "must be a dielectric with sets_frequency = true"),
        ('default_dielectric = "C0G"', 'default_dielectric = "NP0"', "must be one of C0G"),
        ("sets_frequency = true", "sets_frequency = false", r"\[capacitors.C0G\] reason: is missing"),
        ("sets_frequency = true", "sets_frequency = 1", "must be true or false"),
        ("voltage = 50.0\nsource", "voltage = 40.0\nsource", "must be the rating of one of the cases"),
        ("loss_tangent_maximum = 1e-3", "loss_tangent_maximum = 1e-4", "must not exceed loss_tangent_maximum = 0.0001"),
        ("0603 = 3.3e-9", "0604 = 3.3e-9", "unknown key; nearest: 06"),
        ('series = "E6"\nsource', 'series = "E7"\nsource', r"\[coupling\] series = 'E7': must be one of"),
        ('dielectric = "X7R", tolerance', 'dielectric = "X7T", tolerance', "must be one of .*; nearest: X7R"),
    ],
)
def test_broken_capacitors(tmp_path: Path, old: str, new: str, complaint: str) -> None:
    with pytest.raises(CatalogError, match=complaint):
        read_house_capacitors(broken(tmp_path, "capacitors.toml", old, new))


OWN = """
[resistors."wire wound"]
default_tolerance = 0.01
default_series = "E24"
temperature_coefficients = [20e-6]
temperature_coefficient_common_share = 0.5
useful_range = [1.0, 1e3]
default_size = "axial"
excess_noise = [[1e3, 1e-9]]
source = "drawer"
[[resistors."wire wound".classes]]
tolerance = 0.01
series = ["E24"]
[[resistors."wire wound".sizes]]
size = "axial"
power = 2.0
range = [RANGE]
parallel_capacitance = 1e-12

[capacitors.mica]
sets_frequency = true
default_tolerance = 0.01
default_series = "E12"
temperature_coefficient = 50e-6
temperature_coefficient_common_share = 0.5
loss_tangent = [[1e3, 2e-4]]
loss_tangent_maximum = 1e-3
frequency_range = [100e-12, 10e-9]
voltage = 500.0
source = "drawer"
[[capacitors.mica.classes]]
tolerance = 0.01
series = ["E12"]
[[capacitors.mica.cases]]
size = "radial"
voltage = 500.0
range = [10e-12, 4.7e-9]
"""


def test_own_kinds(tmp_path: Path) -> None:
    file = tmp_path / "mine.toml"
    file.write_text(OWN.replace("RANGE", "0.1, 1e4"))
    resistors = resistor_stock(kind="wire wound", extra=[file])
    assert (resistors.values[0], resistors.values[-1], resistors.size) == (1.0, 1e3, "axial")
    assert resistor_stock(temperature_coefficient=20e-6, extra=[file]).technology == "thin film"
    mica = capacitor_stock(dielectric="mica", extra=[file])
    assert (mica.values[-1], mica.rating, mica.size_for(1e-9)) == (4.7e-9, "500 V", "radial")
    assert coupling_stock(extra=[file]).values.tolist() == coupling_stock().values.tolist()


def test_own_kind_without_a_useful_value(tmp_path: Path) -> None:
    file = tmp_path / "mine.toml"
    file.write_text(OWN.replace("RANGE", "1e4, 1e5"))
    with pytest.raises(CatalogError, match="resistor size 'axial': no wire wound in the useful range"):
        resistor_stock(kind="wire wound", extra=[file])
