"""What keeps a spec from holding a value that cannot be: used by every dataclass of the spec on construction."""

from __future__ import annotations

import difflib
import math
import unicodedata
from collections.abc import Collection, Sequence

from synth.errors import SpecError
from synth.quantity import show

TEXT_LIMIT = 200
ABSOLUTE_ZERO = -273.15  # [degC]

_KEYS = {"required_yield": "yield"}  # attribute -> key, where a key is a word of the language


class InvalidValueError(SpecError):
    """A value that a spec cannot hold.

    Args:
        section: path of the table, "" for the top.
        key: the key in it.
        shown: the value, ready for a message.
        reason: the bound and what to do.
    """

    def __init__(self, section: str, key: str, shown: str, reason: str) -> None:
        super().__init__(section, key, shown, reason)
        self.section, self.key, self.shown, self.reason = section, key, shown, reason

    def __str__(self) -> str:
        path = f"{self.section}.{self.key}" if self.section else self.key
        return f"{path} = {self.shown}: {self.reason}"


def refuse(owner: object, name: str, reason: str) -> InvalidValueError:
    """The error for the attribute `name` of `owner`; the caller raises it."""
    section = getattr(owner, "SECTION", "")
    return InvalidValueError(section, _KEYS.get(name, name), show(getattr(owner, name, None)), reason)


def _given(owner: object, names: Sequence[str]) -> list[tuple[str, float]]:
    """The numbers among the attributes that are given; one that is not finite is refused."""
    pairs = []
    for name in names:
        number = getattr(owner, name)
        if number is None:
            continue
        if not math.isfinite(number):
            raise refuse(owner, name, "must be a finite number; correct it")
        pairs.append((name, number))
    return pairs


def finite(owner: object, *names: str) -> None:
    """Refuse NaN and infinity."""
    _given(owner, names)


def positive(owner: object, *names: str) -> None:
    """Refuse anything not above zero."""
    for name, number in _given(owner, names):
        if number <= 0:
            raise refuse(owner, name, "must be above zero; give its magnitude or leave the key out if it is optional")


def not_negative(owner: object, *names: str) -> None:
    """Refuse anything below zero."""
    for name, number in _given(owner, names):
        if number < 0:
            raise refuse(owner, name, "must not be below zero; give its magnitude")


def share(owner: object, *names: str, zero: bool = False) -> None:
    """Refuse anything outside 0 to 1 (0 % to 100 %); the end 1 is never allowed, zero only where it makes sense."""
    for name, number in _given(owner, names):
        if number >= 1 or number < 0 or (number == 0 and not zero):
            low = "0 % or above" if zero else "above 0 %"
            raise refuse(owner, name, f'must be {low} and below 100 %; write it with its unit, such as "3 %"')


def above_absolute_zero(owner: object, name: str, temperatures: Sequence[float]) -> None:
    """Refuse temperatures [degC] at or below absolute zero."""
    for temperature in temperatures:
        if not math.isfinite(temperature) or temperature <= ABSOLUTE_ZERO:
            raise refuse(owner, name, "must be above absolute zero, -273.15 degC; write degrees Celsius")


def integer(owner: object, name: str, low: int, high: int) -> None:
    """Refuse a whole number outside low to high."""
    number = getattr(owner, name)
    if number is not None and not low <= number <= high:
        raise refuse(owner, name, f"must be a whole number from {low} to {high}; choose one of them")


def one_of(owner: object, name: str, options: Sequence[str]) -> None:
    """Refuse a word that is not among the options; names the nearest."""
    word = getattr(owner, name)
    if word is not None and word not in options:
        raise refuse(owner, name, f"is not known; {suggestion(word, options)}")


def suggestion(word: str, options: Collection[str]) -> str:
    """'did you mean X? ...' where something is near, else the options."""
    spelled = {option.lower(): option for option in options}
    near = difflib.get_close_matches(word.lower(), list(spelled), n=1, cutoff=0.6)
    listed = "choose one of " + ", ".join(options)
    return f"did you mean {spelled[near[0]]}? ({listed})" if near else listed


def one_line(owner: object, *names: str, limit: int = TEXT_LIMIT) -> None:
    """Refuse text that is empty, longer than the limit, or more than one printable line."""
    for name in names:
        given = getattr(owner, name)
        for text in given if isinstance(given, tuple) else (given,):
            problem = None if text is None else text_problem(text, limit)
            if problem:
                raise InvalidValueError(getattr(owner, "SECTION", ""), name, show(text), problem)


def text_problem(text: str, limit: int = TEXT_LIMIT) -> str:
    """What keeps a text from being one printable line, "" if nothing.

    Refused are control characters, the Unicode line and paragraph separators, invisible format characters (they
    can turn the reading direction around) and lone surrogates.
    """
    if not text.strip():
        return "must not be empty; write a short text"
    if len(text) > limit:
        return f"has {len(text)} characters, at most {limit} are allowed; shorten it"
    for char in text:
        if unicodedata.category(char) in ("Cc", "Cf", "Zl", "Zp", "Cs"):
            return f"must be one line of printable text; remove the character U+{ord(char):04X}"
    return ""
