"""Quantities as an engineer writes them: '60 kHz', '4k7' (IEC 60062), '2 mV/mA' in, engineering text out.

A number is SI: hertz, ohm, farad, volt, ampere; decibels, degrees Celsius and fractions (0.03 for 3 %) keep their
own scale.  Prefixes run from femto to tera and are stripped only from the units listed here, so `m` alone is a
metre and `mT` a millitesla; every other unit is opaque and has to be repeated letter for letter.  Powers of ten
are joined to the digits before the text becomes a number, so '4.7 nF' is the float nearest to 4.7e-9.
"""

from __future__ import annotations

import math
import re
from decimal import Decimal
from typing import Literal, NoReturn

from synth.errors import QuantityError

PREFIXES = {"f": -15, "p": -12, "n": -9, "u": -6, "m": -3, "k": 3, "M": 6, "G": 9, "T": 12}
PREFIXED_UNITS = frozenset(
    ["A", "Bq", "C", "F", "G", "Gy", "H", "Hz", "J", "K", "N", "Oe", "Pa", "S", "Sv", "T", "V", "W", "Wb", "bar",
     "cd", "eV", "g", "lm", "lx", "m", "m/s", "m/s^2", "mol", "ohm", "rad", "s", "strain"]
)
UNIT_LIMIT = 24
_TEXT_LIMIT = 100

_LETTER_OF = {exponent: letter for letter, exponent in PREFIXES.items()} | {0: ""}
_NUMBER = r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)"
_QUANTITY = re.compile(rf"({_NUMBER})(?:[eE]([+-]?[0-9]+))?\s*(.*)")
_UNIT = re.compile(r"[A-Za-z%\u00b0(][A-Za-z0-9%^/*.()\u00b0-]*")

# Units of their own scale: power of ten of each accepted spelling.
_SPELLINGS: dict[str, dict[str, int]] = {
    "%": {"%": -2, "ppm": -6},
    "1/K": {"ppm": -6, "%": -2, "ppm/K": -6, "ppm/degC": -6, "%/K": -2, "%/degC": -2, "1/K": 0, "1/degC": 0},
    "dB": {"dB": 0},
    "degC": {"degC": 0},
    "V/V": {"V/V": 0},
}
_ROOT_HERTZ = ("/rtHz", "/sqrt(Hz)", "/\u221aHz")

# IEC 60062: the letter stands for the decimal point; its power of ten for each unit that is written so.
_CODE_LETTERS: dict[str, dict[str, int]] = {
    "ohm": {"L": -3, "R": 0, "k": 3, "K": 3, "M": 6, "G": 9, "T": 12},
    "F": {"p": -12, "n": -9, "u": -6, "m": -3, "F": 0},
    "H": {"n": -9, "u": -6, "m": -3, "H": 0},
    "Hz": {"k": 3, "K": 3, "M": 6, "G": 9},
    "V": {"V": 0},
}
_EXAMPLES = {
    "Hz": '"60 kHz"',
    "ohm": '"4.7 kohm" or "4k7"',
    "F": '"4.7 nF" or "4n7"',
    "H": '"10 mH"',
    "V": '"1 V" or "50 mV"',
    "A": '"2 uA"',
    "C": '"5 pC"',
    "W": '"100 uW"',
    "s": '"2 ms"',
    "%": '"3 %" or "50 ppm"',
    "1/K": '"50 ppm"',
    "dB": '"40 dB"',
    "degC": '"27 degC"',
    "rad": '"1 deg" or "10 mrad"',
    "V/V": '"89 dB" or "28000"',
    "V/rtHz": '"0.7 nV" (per root hertz)',
    "A/rtHz": '"2 fA" (per root hertz)',
    "C/rtHz": '"1 fC" (per root hertz)',
}
_NAMES = {"%": "a percentage", "1/K": "a share per kelvin", "rad": "an angle in deg or rad"}


def show(value: object, limit: int = 60) -> str:
    """A value as it can stand in a one-line message: quoted, escaped, shortened to `limit` characters."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        short = value if len(value) <= limit else value[: limit - 3] + "..."
        return '"' + "".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in short) + '"'
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, list | tuple):
        return "a list"
    if isinstance(value, int) and abs(value) >= 10**18:
        return "a number of more than 18 digits"  # str() of a very long integer raises
    return str(value)


def parse(value: object, unit: str, *, example: str = "") -> float:
    """Read a quantity in a unit.

    Args:
        value: text with number and unit ("60 kHz"), an IEC 60062 code ("4k7") where the unit is written so, a bare
            number as text ("1e3") or a number; bare numbers are SI.
        unit: the unit wanted: "Hz", "ohm", ...; "%" returns a fraction, "1/K" (temperature coefficients) a fraction
            per kelvin, "dB" decibels, "degC" degrees Celsius, "rad" radians (text in deg or rad), "V/rtHz" a noise
            density.  Any other unit is read as by `parse_input`.
        example: a right value for the message, quoted; by default one of the unit.

    Raises:
        QuantityError: wrong unit, not a number, not finite, empty; names value, unit and a right example.

    >>> parse("60 kHz", "Hz"), parse("4k7", "ohm"), parse("50 ppm", "%")
    (60000.0, 4700.0, 5e-05)
    """
    if unit == "rad" and isinstance(value, str) and (text := _clean(value, unit, example)).endswith("deg"):
        return math.radians(_read(text, unit, {"deg": 0}, example))
    if unit in _SPELLINGS:
        return _read(value, unit, _SPELLINGS[unit], example)
    return _read(value, unit, None, example)


def parse_input(value: object, unit: str, *, example: str = "") -> float:
    """Read a quantity in a sensor's input unit: as `parse`, but '%', 'dB' or 'degC' are plain units here.

    Prefixes are stripped if the unit is a listed one ("2 uA" in "A"); an unlisted unit must match exactly.

    Raises:
        QuantityError: as `parse`.

    >>> parse_input("2 uA", "A"), parse_input("40 %", "%")
    (2e-06, 40.0)
    """
    return _read(value, unit, None, example)


def parse_ratio(value: object, numerator: str) -> tuple[float, str]:
    """Read a sensor scale: output over input, the first slash splits them.

    Args:
        value: text ("20 mV/mA", "5 mV/Pa", "100 mV/m/s^2").
        numerator: the unit wanted above the slash ("V", "A" or "C").

    Returns:
        The scale [numerator per input unit] and the input unit without its prefix.  The prefix is stripped only
        from a listed unit; any other text ("furlong", "mmHg") is a unit as it stands.

    Raises:
        QuantityError: no number, no slash, wrong numerator, or a denominator that is not written as a unit.

    >>> parse_ratio("20 mV/mA", "V")
    (20.0, 'A')
    """
    wanted = f'expected {numerator} over the input unit, such as "20 m{numerator}/mA" or "5 m{numerator}/Pa"'
    if not isinstance(value, str):
        _fail(value, f"a scale needs its units; {wanted}")
    text = _clean(value, "", "", wanted)
    match = _QUANTITY.fullmatch(text)
    if match is None:
        _fail(value, f"does not start with a number; {wanted}")
    mantissa, power, units = match.groups()
    above, slash, below = (piece.strip() for piece in units.partition("/"))
    if not slash or not below:
        _fail(value, f"names no input unit after a slash; {wanted}")
    exponent_above, base_above = _split_unit(above)
    if base_above != numerator:
        _fail(value, f"the unit before the slash is {show(above)}; {wanted}")
    problem = unit_problem(below)
    if problem:
        _fail(value, f"the input unit {problem}; {wanted}")
    exponent_below, base_below = _split_unit(below)
    return _number(value, mantissa, power, exponent_above - exponent_below, wanted), base_below


def unit_problem(text: str) -> str:
    """What keeps a text from being an input unit, "" if nothing.

    A unit has 1 to 24 characters: letters, digits, % ^ / * . - ( ) and the degree sign, and starts with a letter,
    % ( or the degree sign.
    """
    plain = _normalise(text)
    if len(plain) > UNIT_LIMIT:
        return f"{show(text)} has {len(plain)} characters, more than {UNIT_LIMIT}"
    if not _UNIT.fullmatch(plain):
        return f"{show(text)} is not written as a unit (letters, digits, % ^ / * . - ( ) and the degree sign)"
    return ""


def _read(value: object, unit: str, spellings: dict[str, int] | None, example: str) -> float:
    """The one reader: `spellings` names the accepted unit texts, or None for prefixes and IEC 60062 codes."""
    wanted = _wanted(unit, example)
    if isinstance(value, int | float) and not isinstance(value, bool):
        return _finite(value, wanted)
    if not isinstance(value, str):
        _fail(value, f"is not a quantity; {wanted}")
    text = _clean(value, unit, example)
    code = _read_code(text, unit) if spellings is None else None
    if code is not None:
        return _number(value, *code, wanted)
    match = _QUANTITY.fullmatch(text)
    if match is None:
        _fail(value, f"does not start with a number; {wanted}")
    mantissa, power, given = match.groups()
    if not given:
        return _number(value, mantissa, power, 0, wanted)
    if given.startswith(","):
        _fail(value, f"has a decimal comma, write a point; {wanted}")
    if spellings is not None:
        exponent = spellings.get(given)
    else:
        exponent = _power_of(_without_root_hertz(given, unit), _without_root_hertz(unit, unit))
    if exponent is None:
        _fail(value, f"wrong unit {show(given)}; {wanted}")
    return _number(value, mantissa, power, exponent, wanted)


def _wanted(unit: str, example: str) -> str:
    example = example or _EXAMPLES.get(unit, f'"1 {unit}"')
    return f"expected {_NAMES.get(unit, unit)}, such as {example}"


def _fail(value: object, reason: str) -> NoReturn:
    raise QuantityError(show(value), reason)


def _normalise(text: str) -> str:
    """One spelling each for micro, ohm, degree Celsius and minus."""
    for char, plain in (("\u00b5", "u"), ("\u03bc", "u"), ("\u03a9", "ohm"), ("\u2126", "ohm"), ("\u2212", "-")):
        text = text.replace(char, plain)
    text = text.replace("\u00b0C", "degC")
    return text[:-3] + "ohm" if text.endswith("Ohm") else text


def _clean(value: str, unit: str, example: str, wanted: str = "") -> str:
    """Normalised text without spaces at its ends; empty, over-long or many-line text is refused."""
    wanted = wanted or _wanted(unit, example)
    if len(value) > _TEXT_LIMIT:
        _fail(value, f"has {len(value)} characters, more than {_TEXT_LIMIT}; {wanted}")
    if not all(c.isprintable() for c in value):
        _fail(value, f"contains a control character; {wanted}")
    text = _normalise(value).strip()
    if not text:
        _fail(value, f"is empty; {wanted}")
    return text


def _split_unit(text: str) -> tuple[int, str]:
    """Power of ten of the prefix and the unit behind it; (0, text) where no listed unit stands behind a prefix."""
    text = _normalise(text)
    if text not in PREFIXED_UNITS and text[:1] in PREFIXES and text[1:] in PREFIXED_UNITS:
        return PREFIXES[text[0]], text[1:]
    return 0, text


def _power_of(given: str, unit: str) -> int | None:
    """Power of ten between a unit as given and the unit wanted ("mV" and "V", "mV/mA" and "V/A"), None if foreign."""
    exponent, base = _split_unit(given)
    if base == unit:
        return exponent
    above, slash, below = (piece.strip() for piece in unit.partition("/"))
    given_above, _, given_below = (piece.strip() for piece in given.partition("/"))
    if slash and {above, below} <= PREFIXED_UNITS:
        powers = _power_of(given_above, above), _power_of(given_below, below)
        if powers[0] is not None and powers[1] is not None:
            return powers[0] - powers[1]
    return None


def _without_root_hertz(text: str, unit: str) -> str:
    """A density may be written with or without its 'per root hertz'."""
    if unit.endswith("/rtHz"):
        for ending in _ROOT_HERTZ:
            text = text.removesuffix(ending)
    return text


def _read_code(text: str, unit: str) -> tuple[str, None, int] | None:
    """Mantissa and power of ten of an IEC 60062 code ("4k7", "R47", "47R"), None if the text is none."""
    letters = _CODE_LETTERS.get(unit)
    if letters is None:
        return None
    match = re.fullmatch(rf"([+-]?)([0-9]*)([{''.join(letters)}])([0-9]*)(?:\s*{unit})?", text)
    if match is None or not (match[2] or match[4]):
        return None
    return f"{match[1]}{match[2] or '0'}.{match[4] or '0'}", None, letters[match[3]]


def _number(value: object, mantissa: str, power: str | None, exponent: int, wanted: str) -> float:
    number = float(f"{mantissa}e{int(power or 0) + exponent}")
    if math.isinf(number) or (number == 0 and mantissa.strip("+-0.")):
        _fail(value, f"is out of range; {wanted}")
    return number


def _finite(value: float, wanted: str) -> float:
    try:
        number = float(value)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        _fail(value, f"is not finite; {wanted}")
    return number


def format_si(value: float, unit: str, digits: int = 4) -> str:
    """Engineering text: '60 kHz', '4.7 nF', '-2.5 mV', '0 V'; micro is 'u', so that any terminal or table shows it.

    Args:
        value: [unit].
        unit: "" gives the prefix alone ('1 k'); a unit that takes no prefix stays bare ('27 degC').
        digits: significant digits; zeros at the end of the fraction are dropped.

    >>> format_si(999.96, "Hz"), format_si(4.7e-9, "F")
    ('1 kHz', '4.7 nF')
    """
    if value == 0 or not math.isfinite(value):
        return f"{abs(value) if value == 0 else value:g} {unit}".rstrip()
    mantissa, exponent = _engineering(value, digits)
    if exponent not in _LETTER_OF or (unit and unit not in PREFIXED_UNITS):
        return f"{value:.{max(digits, 1)}g} {unit}".rstrip()
    return f"{_plain(mantissa)} {_LETTER_OF[exponent]}{unit}".rstrip()


def format_db(ratio: float, digits: int = 2) -> str:
    """A ratio of amplitudes as decibels, '89 dB'; `digits` after the point, zeros at the end dropped.

    >>> format_db(1000.0)
    '60 dB'
    """
    if ratio == 0:
        return "-inf dB"
    return f"{_plain(Decimal(f'{20 * math.log10(abs(ratio)):.{digits}f}'))} dB"


def format_percent(fraction: float, digits: int = 3) -> str:
    """A fraction as '3 %', or as '50 ppm' below 0.1 %.

    >>> format_percent(0.03), format_percent(5e-5)
    ('3 %', '50 ppm')
    """
    scale, unit = (1e6, "ppm") if 0 < abs(fraction) < 0.99995e-3 else (100.0, "%")
    return f"{_plain(Decimal(f'{fraction * scale:.{digits}g}'))} {unit}" if math.isfinite(fraction) else f"{fraction} %"


def rkm(value: float, kind: Literal["resistor", "capacitor"]) -> str:
    """The IEC 60062 code of a value: '4K7', '47R', 'R47', '2K49', '1M0'; '4n7', '470p', 'p47', '4u7', '100n'.

    Args:
        value: [ohm] or [F]; at most five significant digits are kept.  Zero ohm (a jumper) is '0R'.
        kind: which letters: R K M G T, or p n u m F.

    Raises:
        QuantityError: a value that is negative, not finite or too large, a capacitor of zero, an unknown kind.

    Reference:
        IEC 60062:2016, marking codes for resistors and capacitors, letter and digit code for values.

    >>> rkm(4700.0, "resistor"), rkm(4.7e-9, "capacitor")
    ('4K7', '4n7')
    """
    if kind not in ("resistor", "capacitor"):
        _fail(kind, 'is no kind of part with a letter code; expected "resistor" or "capacitor"')
    letters = {0: "R", 3: "K", 6: "M", 9: "G", 12: "T"}
    if kind == "capacitor":
        letters = {-12: "p", -9: "n", -6: "u", -3: "m", 0: "F"}
    if value == 0 and kind == "resistor":
        return "0R"
    if not math.isfinite(value) or value <= 0:
        _fail(value, f"no {kind} has this value; expected a positive number of {'ohm' if kind == 'resistor' else 'F'}")
    mantissa, exponent = _engineering(value, 5)
    if exponent > max(letters):
        _fail(value, f"is too large for the letter code of a {kind}; expected less than 1000{letters[max(letters)]}")
    if exponent < min(letters):
        mantissa, exponent = mantissa.scaleb(exponent - min(letters)), min(letters)
    whole, _, fraction = _plain(mantissa).partition(".")
    fraction = fraction.ljust(2, "0") if whole == "0" else fraction.ljust(2 - len(whole), "0")
    return f"{'' if whole == '0' else whole}{letters[exponent]}{fraction}"


def _engineering(value: float, digits: int) -> tuple[Decimal, int]:
    """Rounded mantissa, 1 <= |mantissa| < 1000, and its power of ten, a multiple of three."""
    lead, _, power = f"{value:.{max(digits, 1) - 1}e}".partition("e")
    exponent = 3 * (int(power) // 3)
    return Decimal(lead).scaleb(int(power) - exponent), exponent


def _plain(number: Decimal) -> str:
    """Decimal text without exponent and without zeros at the end of its fraction."""
    text = f"{number:f}"
    text = text.rstrip("0").rstrip(".") if "." in text else text
    return "0" if text == "-0" else text
