"""Bounds rounded to their safe side: the value that a message names has to work."""

from __future__ import annotations

import math


def at_most(bound: float, digits: int = 4) -> float:
    """The bound with a few significant digits, never above it.

    >>> at_most(3.46482), at_most(38.46, 3)
    (3.464, 38.4)
    """
    if bound == 0:
        return 0.0
    step = 10.0 ** (math.floor(math.log10(abs(bound))) - digits + 1)
    return float(f"{math.floor(bound / step) * step:.{digits}g}")


def at_least(bound: float, digits: int = 4) -> float:
    """The bound with a few significant digits, never below it."""
    return -at_most(-bound, digits)
