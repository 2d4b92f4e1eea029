"""Quantities in and out: units, prefixes, letter codes, refusals."""

from __future__ import annotations

import doctest
import math
import pickle
import random

import pytest
from rkm_codes import from_rkm

import synth.quantity
from synth.errors import QuantityError, SynthError
from synth.quantity import (
    PREFIXED_UNITS,
    format_db,
    format_percent,
    format_si,
    parse,
    parse_input,
    parse_ratio,
    rkm,
    show,
    unit_problem,
)

E96 = [round(10 ** (i / 96), 2) for i in range(96)]  # IEC 60063: the rule gives this series without exception


@pytest.mark.parametrize(
    ("text", "unit", "value"),
    [
        ("60 kHz", "Hz", 60e3),
        ("60kHz", "Hz", 60e3),
        ("  60 kHz ", "Hz", 60e3),
        ("1e3", "Hz", 1e3),
        ("1e3 Hz", "Hz", 1e3),
        ("1E-3kHz", "Hz", 1.0),
        (".5 Hz", "Hz", 0.5),
        ("5. Hz", "Hz", 5.0),
        ("+5 V", "V", 5.0),
        ("-5 V", "V", -5.0),
        ("\u22125 V", "V", -5.0),
        ("4.7 nF", "F", 4.7e-9),
        ("10 kohm", "ohm", 1e4),
        ("10 k\u03a9", "ohm", 1e4),
        ("10 k\u2126", "ohm", 1e4),
        ("10 kOhm", "ohm", 1e4),
        ("2 uA", "A", 2e-6),
        ("2 \u00b5A", "A", 2e-6),
        ("2 \u03bcA", "A", 2e-6),
        ("40 dB", "dB", 40.0),
        ("-3.5dB", "dB", -3.5),
        ("3 %", "%", 0.03),
        ("3%", "%", 0.03),
        ("50 ppm", "%", 50e-6),
        ("0.05", "%", 0.05),
        ("50 ppm", "1/K", 50e-6),
        ("50 ppm/K", "1/K", 50e-6),
        ("-0.02 %/K", "1/K", -2e-4),
        ("27 degC", "degC", 27.0),
        ("27 \u00b0C", "degC", 27.0),
        ("0.7 nV", "V/rtHz", 0.7e-9),
        ("0.7 nV/rtHz", "V/rtHz", 0.7e-9),
        ("0.7 nV/sqrt(Hz)", "V/rtHz", 0.7e-9),
        ("2 mV/mA", "V/A", 2.0),
        ("180 deg", "rad", math.pi),
        ("10 mrad", "rad", 0.01),
        ("5 m", "m", 5.0),
        ("5 mm", "m", 5e-3),
        ("5 T", "T", 5.0),
        ("5 mT", "T", 5e-3),
        ("5 Pa", "Pa", 5.0),
        ("5 mPa", "Pa", 5e-3),
        ("2 mm/s^2", "m/s^2", 2e-3),
        ("3 furlong", "furlong", 3.0),
        (60, "Hz", 60.0),
        (0.03, "%", 0.03),
        (40.0, "dB", 40.0),
        ("4k7", "ohm", 4.7e3),
        ("4k7 ohm", "ohm", 4.7e3),
        ("4n7F", "F", 4.7e-9),
        ("4\u00b57", "F", 4.7e-6),
        ("10k", "ohm", 1e4),
        ("10M", "Hz", 1e7),
        ("10u", "H", 1e-5),
        ("3V3", "V", 3.3),
        ("-1V8", "V", -1.8),
    ],
)
def test_parse_reads_the_quantity(text: object, unit: str, value: float) -> None:
    assert parse(text, unit) == pytest.approx(value, rel=1e-15)


# IEC 60062:2016 letter codes; the values as the published list of the `rkm_codes` package decodes them.
@pytest.mark.parametrize(
    ("code", "value"),
    [
        ("R47", 0.47),
        ("4R7", 4.7),
        ("470R", 470.0),
        ("3R32", 3.32),
        ("59R04", 59.04),
        ("332R", 332.0),
        ("4K7", 4.7e3),
        ("47K", 47e3),
        ("47K3", 47.3e3),
        ("470K", 470e3),
        ("4M7", 4.7e6),
        ("1G0", 1e9),
        ("1T0", 1e12),
        ("R10", 0.1),
        ("1K0", 1e3),
        ("1M0", 1e6),
        ("10M", 10e6),
    ],
)
def test_resistor_codes_of_the_standard(code: str, value: float) -> None:
    assert parse(code, "ohm") == value
    assert rkm(value, "resistor") == code


@pytest.mark.parametrize(
    ("code", "value"),
    [
        ("p47", 0.47e-12),
        ("4p7", 4.7e-12),
        ("470p", 470e-12),
        ("4n7", 4.7e-9),
        ("33p2", 33.2e-12),
        ("3n32", 3.32e-9),
        ("470n", 470e-9),
        ("4u7", 4.7e-6),
        ("1m0", 1e-3),
        ("100n", 100e-9),
        ("1u0", 1e-6),
        ("1F0", 1.0),
    ],
)
def test_capacitor_codes_of_the_standard(code: str, value: float) -> None:
    assert parse(code, "F") == value
    assert rkm(value, "capacitor") == code


@pytest.mark.parametrize(
    ("value", "code"),
    [(2490.0, "2K49"), (100.0, "100R"), (47.0, "47R"), (0.0, "0R"), (0.01, "R01"), (999.999, "1K0"), (49.9, "49R9")],
)
def test_resistor_codes_written(value: float, code: str) -> None:
    assert rkm(value, "resistor") == code


def test_codes_of_the_whole_e96_series_agree_with_an_independent_reader() -> None:
    for decade in range(7):
        for mantissa in E96:
            value = float(f"{mantissa}e{decade}")
            code = rkm(value, "resistor")
            assert parse(code, "ohm") == value
            assert float(from_rkm(code)) == pytest.approx(value, rel=1e-12)
    for decade in range(-12, -4):
        for mantissa in E96:
            value = float(f"{mantissa}e{decade}")
            code = rkm(value, "capacitor")
            assert parse(code, "F") == value
            assert float(from_rkm(code)) == pytest.approx(value, rel=1e-12)


@pytest.mark.parametrize(
    ("value", "kind", "match"),
    [
        (-1.0, "resistor", "positive number of ohm"),
        (math.nan, "resistor", "positive number of ohm"),
        (math.inf, "capacitor", "positive number of F"),
        (0.0, "capacitor", "positive number of F"),
        (1e15, "resistor", "less than 1000T"),
        (1e3, "capacitor", "less than 1000F"),
        (1.0, "inductor", 'expected "resistor" or "capacitor"'),
    ],
)
def test_rkm_refuses(value: float, kind: str, match: str) -> None:
    with pytest.raises(QuantityError, match=match):
        rkm(value, kind)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("value", "unit", "match"),
    [
        ("60 kV", "Hz", r'^"60 kV": wrong unit "kV"; expected Hz, such as "60 kHz"$'),
        ("1 Vrms", "V", 'wrong unit "Vrms"; expected V'),
        ("5 m", "ohm", 'wrong unit "m"'),
        ("5 A", "V/A", 'wrong unit "A"'),
        ("5 V/K", "V/A", 'wrong unit "V/K"'),
        ("300 K", "degC", 'expected degC, such as "27 degC"'),
        ("4m7", "ohm", "expected ohm"),  # milli is L in the standard; m is too easily mega
        ("4k7", "A", "wrong unit"),
        ("5 mdB", "dB", "wrong unit"),
        ("3 kHz", "%", "expected a percentage"),
        ("2 mfurlong", "furlong", 'wrong unit "mfurlong"; expected furlong, such as "1 furlong"'),
        ("", "Hz", 'is empty; expected Hz, such as "60 kHz"'),
        ("   ", "Hz", "is empty"),
        ("nan", "Hz", "does not start with a number"),
        ("inf Hz", "Hz", "does not start with a number"),
        ("deg", "rad", "does not start with a number"),
        ("kHz", "Hz", "does not start with a number"),
        ("4,7 nF", "F", "decimal comma"),
        ("1 2 V", "V", 'wrong unit "2 V"'),
        ("\u0661 V", "V", "does not start with a number"),
        ("1e999 Hz", "Hz", "out of range"),
        ("1e-999 Hz", "Hz", "out of range"),
        ("1e99999999999999999999 Hz", "Hz", "out of range"),
        ("1" * 101, "Hz", "101 characters, more than 100"),
        ("5 V\n.quit", "V", "control character"),
        ("5\u2028V", "V", "control character"),
        (math.nan, "Hz", "is not finite"),
        (-math.inf, "Hz", "is not finite"),
        (10**400, "Hz", "is not finite"),
        (True, "Hz", "^true: is not a quantity"),
        (None, "Hz", "is not a quantity"),
        ([1], "Hz", "^a list: is not a quantity"),
        ({}, "Hz", "^a table: is not a quantity"),
    ],
)
def test_parse_refuses(value: object, unit: str, match: str) -> None:
    with pytest.raises(QuantityError, match=match):
        parse(value, unit)


def test_the_error_is_the_projects_own_and_can_be_sent_between_processes() -> None:
    with pytest.raises(SynthError, match='such as "7 V"') as caught:
        parse("x", "V", example='"7 V"')
    assert str(pickle.loads(pickle.dumps(caught.value))) == str(caught.value)


@pytest.mark.parametrize(
    ("text", "numerator", "scale", "unit"),
    [
        ("20 mV/mA", "V", 20.0, "A"),
        ("20mV / mA", "V", 20.0, "A"),
        ("5 mV/Pa", "V", 5e-3, "Pa"),
        ("5 mV/mPa", "V", 5.0, "Pa"),
        ("0.6 A/W", "A", 0.6, "W"),
        ("350 pC/N", "C", 350e-12, "N"),
        ("100 mV/m/s^2", "V", 0.1, "m/s^2"),
        ("1 uV/mT", "V", 1e-3, "T"),
        ("1 V/m", "V", 1.0, "m"),
        ("2 V/furlong", "V", 2.0, "furlong"),
        ("2 mV/mmHg", "V", 2e-3, "mmHg"),
        ("5 mV/%", "V", 5e-3, "%"),
        ("5 mV/\u00b0C", "V", 5e-3, "degC"),
        ("1 V/k\u03a9", "V", 1e-3, "ohm"),
        ("2 mV/V", "V", 2e-3, "V"),
    ],
)
def test_parse_ratio(text: str, numerator: str, scale: float, unit: str) -> None:
    assert parse_ratio(text, numerator) == (pytest.approx(scale, rel=1e-15), unit)
    assert parse_ratio(f"{scale!r} {numerator}/{unit}", numerator) == (scale, unit)  # the canonical text


@pytest.mark.parametrize(
    ("value", "match"),
    [
        ("20 mA/mA", 'unit before the slash is "mA"; expected V over the input unit, such as "20 mV/mA"'),
        ("20 mV", "names no input unit"),
        ("20", "names no input unit"),
        ("20 mV/", "names no input unit"),
        ("", "is empty; expected V over the input unit"),
        ("mV/mA", "does not start with a number"),
        ("1e999 V/A", "out of range"),
        ("1 V/=A1", "not written as a unit"),
        ("1 V/@x", "not written as a unit"),
        ("1 V/a b", "not written as a unit"),
        ("1 V/x;y", "not written as a unit"),
        ("1 V/" + "a" * 25, "25 characters, more than 24"),
        ("1 V/A\n.end", "control character"),
        (20.0, "needs its units"),
        (None, "needs its units"),
    ],
)
def test_parse_ratio_refuses(value: object, match: str) -> None:
    with pytest.raises(QuantityError, match=match):
        parse_ratio(value, "V")


def test_input_units_are_not_scaled() -> None:
    assert parse_input("40 %", "%") == 40.0
    assert parse_input("-3 dB", "dB") == -3.0
    assert parse_input("2 uA", "A") == 2e-6


def test_every_prefixed_unit_takes_every_prefix_and_stands_alone() -> None:
    for unit in PREFIXED_UNITS:
        assert unit_problem(unit) == ""
        assert parse_input(f"3 {unit}", unit) == 3.0
        if f"k{unit}" not in PREFIXED_UNITS:
            assert parse_input(f"3 k{unit}", unit) == 3000.0


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [
        (60e3, "Hz", "60 kHz"),
        (4.7e-9, "F", "4.7 nF"),
        (-2.5e-3, "V", "-2.5 mV"),
        (0.0, "V", "0 V"),
        (-0.0, "V", "0 V"),
        (999.96, "", "1 k"),
        (999.96e3, "Hz", "1 MHz"),
        (999.94, "V", "999.9 V"),
        (0.99999, "V", "1 V"),
        (123456.0, "Hz", "123.5 kHz"),
        (4700.0, "ohm", "4.7 kohm"),
        (2e-6, "A", "2 uA"),
        (27.0, "degC", "27 degC"),
        (1500.0, "furlong", "1500 furlong"),
        (1e-18, "A", "1e-18 A"),
        (1e16, "Hz", "1e+16 Hz"),
        (math.inf, "Hz", "inf Hz"),
        (math.nan, "Hz", "nan Hz"),
    ],
)
def test_format_si(value: float, unit: str, text: str) -> None:
    assert format_si(value, unit) == text


def test_format_si_keeps_the_digits_asked_for() -> None:
    assert format_si(123456.0, "Hz", 2) == "120 kHz"
    assert format_si(123456.0, "Hz", 6) == "123.456 kHz"


def test_format_and_parse_are_inverse() -> None:
    generator = random.Random(60062)
    for _ in range(2000):
        value = generator.choice((-1, 1)) * 10 ** generator.uniform(-15, 14.9)
        unit = generator.choice(["Hz", "V", "A", "ohm", "F", "s", "Pa", "m", "T", "G", "m/s^2", "furlong"])
        digits = generator.choice([3, 4, 6, 9])
        text = format_si(value, unit, digits)
        assert parse(text, unit) == pytest.approx(value, rel=0.51 * 10.0 ** (1 - digits))
        assert text.isascii()
        assert not text.lstrip("-").startswith("1000 ") or unit == "furlong"


def test_format_db_and_percent() -> None:
    assert format_db(1000.0) == "60 dB"
    assert format_db(28000.0) == "88.94 dB"
    assert format_db(-1.0) == "0 dB"
    assert format_db(0.0) == "-inf dB"
    assert format_percent(0.03) == "3 %"
    assert format_percent(5e-5) == "50 ppm"
    assert format_percent(0.001) == "0.1 %"
    assert format_percent(0.0) == "0 %"
    assert format_percent(math.nan) == "nan %"


def test_show_is_one_short_line() -> None:
    assert show("a\nb") == '"a\\nb"'
    assert show("\u2028") == '"\\u2028"'
    assert len(show("x" * 500)) == 62
    assert show(10**30) == "a number of more than 18 digits"


def test_the_examples_in_the_docstrings() -> None:
    results = doctest.testmod(synth.quantity)
    assert results.attempted > 5
    assert results.failed == 0
