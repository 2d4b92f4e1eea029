"""IEC 60063:2015, preferred number series: the printed tables, and the package eseries as independent reference."""

from __future__ import annotations

import math
import random
from itertools import pairwise

import eseries
import pytest

from synth.parts.eseries import nearest, neighbours, series_names, series_values, series_within, values_between

# fmt: off
TABLES = {
    "E3": "10 22 47",
    "E6": "10 15 22 33 47 68",
    "E12": "10 12 15 18 22 27 33 39 47 56 68 82",
    "E24": "10 11 12 13 15 16 18 20 22 24 27 30 33 36 39 43 47 51 56 62 68 75 82 91",
    "E48": "100 105 110 115 121 127 133 140 147 154 162 169 178 187 196 205 215 226 237 249 261 274 287 301 316 332 "
           "348 365 383 402 422 442 464 487 511 536 562 590 619 649 681 715 750 787 825 866 909 953",
    "E96": "100 102 105 107 110 113 115 118 121 124 127 130 133 137 140 143 147 150 154 158 162 165 169 174 178 182 "
           "187 191 196 200 205 210 215 221 226 232 237 243 249 255 261 267 274 280 287 294 301 309 316 324 332 340 "
           "348 357 365 374 383 392 402 412 422 432 442 453 464 475 487 499 511 523 536 549 562 576 590 604 619 634 "
           "649 665 681 698 715 732 750 768 787 806 825 845 866 887 909 931 953 976",
    "E192": "100 101 102 104 105 106 107 109 110 111 113 114 115 117 118 120 121 123 124 126 127 129 130 132 133 135 "
            "137 138 140 142 143 145 147 149 150 152 154 156 158 160 162 164 165 167 169 172 174 176 178 180 182 184 "
            "187 189 191 193 196 198 200 203 205 208 210 213 215 218 221 223 226 229 232 234 237 240 243 246 249 252 "
            "255 258 261 264 267 271 274 277 280 284 287 291 294 298 301 305 309 312 316 320 324 328 332 336 340 344 "
            "348 352 357 361 365 370 374 379 383 388 392 397 402 407 412 417 422 427 432 437 442 448 453 459 464 470 "
            "475 481 487 493 499 505 511 517 523 530 536 542 549 556 562 569 576 583 590 597 604 612 619 626 634 642 "
            "649 657 665 673 681 690 698 706 715 723 732 741 750 759 768 777 787 796 806 816 825 835 845 856 866 876 "
            "887 898 909 920 931 942 953 965 976 988",
}
# fmt: on


@pytest.mark.parametrize("name", TABLES)
def test_printed_table(name: str) -> None:
    assert series_values(name) == tuple(int(text) for text in TABLES[name].split())


@pytest.mark.parametrize("name", TABLES)
def test_table_of_the_reference_package(name: str) -> None:
    assert series_values(name) == tuple(int(value) for value in eseries.series(eseries.ESeries[name]))


def test_names_and_sizes() -> None:
    assert series_names() == ("E3", "E6", "E12", "E24", "E48", "E96", "E192")
    assert [len(series_values(name)) for name in series_names()] == [3, 6, 12, 24, 48, 96, 192]


@pytest.mark.parametrize(
    ("name", "digits", "exceptions"),
    [
        ("E3", 1, {4.6: 47}),
        ("E6", 1, {3.2: 33, 4.6: 47}),
        ("E12", 1, {2.6: 27, 3.2: 33, 3.8: 39, 4.6: 47, 8.3: 82}),
        ("E24", 1, {2.6: 27, 2.9: 30, 3.2: 33, 3.5: 36, 3.8: 39, 4.2: 43, 4.6: 47, 8.3: 82}),
        ("E48", 2, {}),
        ("E96", 2, {}),
        ("E192", 2, {9.19: 920}),
    ],
)
def test_generating_rule_and_its_exceptions(name: str, digits: int, exceptions: dict[float, int]) -> None:
    values = series_values(name)
    rule = [round(10 ** (i / len(values)), digits) for i in range(len(values))]
    found = {r: v for r, v in zip(rule, values, strict=True) if round(r * 10**digits) != v}
    assert found == exceptions


def test_nesting() -> None:
    for chain in (("E3", "E6", "E12", "E24"), ("E48", "E96", "E192")):
        assert all(series_within(a, b) for a, b in pairwise(chain))
        assert not any(series_within(b, a) for a, b in pairwise(chain))
    assert not series_within("E24", "E192")
    common = {10 * value for value in series_values("E24")} & set(series_values("E192"))
    assert sorted(common) == [100, 110, 120, 130, 150, 160, 180, 200, 240, 470, 750]


def test_documented_examples_of_the_reference_package() -> None:
    assert nearest(319, "E24") == 330.0
    assert values_between("E96", 184, 200)[0] == 187.0
    assert sorted(neighbours(5000, "E24", 3)) == [4700.0, 5100.0, 5600.0]


def test_decade_wrap() -> None:
    assert nearest(9.7, "E24") == 10.0
    assert nearest(9.9e5, "E12") == 1e6
    assert nearest(9.95, "E192") == 10.0
    assert nearest(9.9e-10, "E6") == 1e-9
    assert neighbours(10.0, "E6", 3) == (10.0, 6.8, 15.0)


@pytest.mark.parametrize("name", TABLES)
def test_values_below_and_above_agree_with_the_reference_package(name: str) -> None:
    draw = random.Random(f"iec 60063 {name}")
    key = eseries.ESeries[name]
    for _ in range(300):
        value = 10 ** draw.uniform(-11, 7)
        both = values_between(name, value / 11, value * 11)
        above, below = both[both >= value][0], both[both <= value][-1]
        assert above == pytest.approx(eseries.find_greater_than_or_equal(key, value), rel=1e-12, abs=0.0)
        assert below == pytest.approx(eseries.find_less_than_or_equal(key, value), rel=1e-12, abs=0.0)
        closer = below if value / below <= above / value else above
        assert nearest(value, name) == closer


@pytest.mark.parametrize("name", TABLES)
def test_every_value_is_the_float_of_its_decimal_text(name: str) -> None:
    for exponent in range(-12, 8):
        low = float(f"1e{exponent}")
        decade = values_between(name, low, 9.99 * low)
        assert len(decade) == len(series_values(name))
        for value in decade:
            assert float(f"{value:.3g}") == value
            assert nearest(value, name) == value
            assert nearest(value * (1 + 1e-12), name) == value


@pytest.mark.parametrize("name", TABLES)
def test_nearest_and_neighbours_against_a_search(name: str) -> None:
    draw = random.Random(f"neighbours {name}")
    every = values_between(name, 1e-3, 1e6).tolist()
    for _ in range(200):
        value, count = 10 ** draw.uniform(-1, 4), draw.randint(1, 9)
        found = neighbours(value, name, count)
        distance = sorted(abs(math.log(v / value)) for v in every)
        assert len(set(found)) == count
        assert [abs(math.log(v / value)) for v in found] == pytest.approx(distance[:count], abs=1e-11)
        assert found[0] == nearest(value, name)
