"""From a normalised filter to the pole pairs of a bandpass."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from synth.errors import InfeasibleError

DEFAULT_RIPPLE = 0.5  # [dB] of a Chebyshev chain where the spec names none
ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class PolePair:
    """Natural frequency [Hz] and quality factor of one bandpass section."""

    frequency: float
    q: float


def bandpass_pairs(
    family: str, sections: int, center: float, bandwidth: float, ripple: float = DEFAULT_RIPPLE
) -> tuple[PolePair, ...]:
    """Pole pairs of a bandpass whose -3 dB points (re the centre) are `bandwidth` apart, geometrically centred.

    Prototype poles p, scaled to -3 dB at 1, are taken to the bandpass by s/w0 + w0/s = p w0/B (A. I. Zverev,
    Handbook of Filter Synthesis, 1967; from memory).

    Args:
        family: one of FAMILIES.
        sections: number of pole pairs, 1 or more.
        center, bandwidth: [Hz].
        ripple: [dB] of a Chebyshev chain.

    Returns:
        pairs by rising Q, then frequency.

    Raises:
        InfeasibleError: the family has no design here.

    Example:
        >>> [(round(p.frequency, 1), round(p.q, 2)) for p in bandpass_pairs("butterworth", 2, 1000.0, 100.0)]
        [(965.2, 14.15), (1036.0, 14.15)]
    """
    if family not in PROTOTYPES:
        raise InfeasibleError(
            f'filter.family = "{family}" has no design here; choose one of {", ".join(FAMILIES)} or leave it out'
        )
    prototype = PROTOTYPES[family](sections, ripple)
    prototype = prototype / half_power_frequency(prototype)
    upper = prototype[prototype.imag > -1e-9]
    half = upper * bandwidth / (2 * center)
    root = np.sqrt(half**2 - 1 + 0j)
    s = np.concatenate([half + root, (half - root)[np.abs(upper.imag) > 1e-9]])
    pairs = [PolePair(float(abs(p)) * center, float(-abs(p) / (2 * p.real))) for p in s]
    return tuple(sorted(pairs, key=lambda pair: (round(pair.q, 9), pair.frequency)))


def half_power_frequency(poles: ComplexArray) -> float:
    """Angular frequency at which an all-pole response is last 3 dB below its value at zero."""

    def excess(w: float) -> float:
        return float(np.sum(np.log(np.abs(1j * w - poles) / np.abs(poles)))) - 0.5 * math.log(2)

    grid = np.linspace(0.0, 10 * float(np.abs(poles).max()), 2001)
    loss = np.log(np.abs(1j * grid[:, None] - poles) / np.abs(poles)).sum(axis=1)
    k = int(np.flatnonzero(loss < 0.5 * math.log(2))[-1])
    low, high = float(grid[k]), float(grid[k + 1])
    for _ in range(60):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if excess(middle) < 0 else (low, middle)
    return 0.5 * (low + high)


def _synchronous(order: int, _ripple: float) -> ComplexArray:
    """Equal real poles: n equal bandpass sections (any textbook of tuned amplifiers)."""
    return np.full(order, -1.0 + 0j)


def _butterworth(order: int, _ripple: float) -> ComplexArray:
    from scipy.signal import buttap

    return np.asarray(buttap(order)[1], dtype=complex)


def _chebyshev(order: int, ripple: float) -> ComplexArray:
    from scipy.signal import cheb1ap

    return np.asarray(cheb1ap(order, ripple)[1], dtype=complex)


def _bessel(order: int, _ripple: float) -> ComplexArray:
    from scipy.signal import besselap

    return np.asarray(besselap(order, norm="mag")[1], dtype=complex)


def _gaussian(order: int, _ripple: float) -> ComplexArray:
    """1/|H|^2 is the series of exp(w^2), cut after the order (M. Dishal, "Gaussian-response filter design",
    Electrical Communication 36 (1959) 3; from memory)."""
    squares = np.roots([(-1.0) ** k / math.factorial(k) for k in range(order, -1, -1)])  # in s^2
    s = np.sqrt(squares.astype(complex))
    return np.asarray(np.where(s.real > 0, -s, s), dtype=complex)


PROTOTYPES: dict[str, Callable[[int, float], ComplexArray]] = {
    "synchronous": _synchronous,
    "gaussian": _gaussian,
    "bessel": _bessel,
    "butterworth": _butterworth,
    "chebyshev": _chebyshev,
}
FAMILIES = tuple(PROTOTYPES)
