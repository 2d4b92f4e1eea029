"""From a normalised filter to the pole pairs of a bandpass."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from synth.errors import InfeasibleError

FAMILIES = ("synchronous", "butterworth")


@dataclass(frozen=True, slots=True)
class PolePair:
    """Natural frequency [Hz] and quality factor of one bandpass section."""

    frequency: float
    q: float


def bandpass_pairs(family: str, sections: int, center: float, bandwidth: float) -> tuple[PolePair, ...]:
    """Pole pairs of a bandpass whose -3 dB points are `bandwidth` apart, geometrically centred.

    Synchronous: n equal sections; each is 1/sqrt(2^(1/n) - 1) wider than the chain (bandwidth shrinkage, any
    textbook of tuned amplifiers).  Butterworth: prototype poles p of scipy.signal, taken to the bandpass by
    s/w0 + w0/s = p w0/B (A. I. Zverev, Handbook of Filter Synthesis, 1967; from memory).

    Args:
        family: "synchronous" or "butterworth".
        sections: number of pole pairs, 1 or more.
        center, bandwidth: [Hz].

    Returns:
        pairs by rising Q, then frequency.

    Raises:
        InfeasibleError: the family has no design here.

    Example:
        >>> [(round(p.frequency, 1), round(p.q, 2)) for p in bandpass_pairs("butterworth", 2, 1000.0, 100.0)]
        [(965.2, 14.15), (1036.0, 14.15)]
    """
    if family == "synchronous":
        q = center / bandwidth * math.sqrt(2 ** (1 / sections) - 1)
        return (PolePair(center, q),) * sections
    if family != "butterworth":
        raise InfeasibleError(
            f'filter.family = "{family}" has no design here; choose one of {", ".join(FAMILIES)} or leave it out'
        )
    from scipy.signal import buttap  # heavy: only where a prototype is needed

    _, prototype, _ = buttap(sections)
    upper = prototype[prototype.imag > -1e-12]
    half = upper * bandwidth / (2 * center)
    root = np.sqrt(half**2 - 1 + 0j)
    s = np.concatenate([half + root, (half - root)[np.abs(upper.imag) > 1e-12]])
    pairs = [PolePair(float(abs(p)) * center, float(-abs(p) / (2 * p.real))) for p in s]
    return tuple(sorted(pairs, key=lambda pair: (round(pair.q, 9), pair.frequency)))
