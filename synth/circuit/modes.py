"""Poles and zeros of a circuit, from the generalized eigenproblem of its matrices.

(G + s C) x = 0 becomes, with a real shift h, the ordinary eigenproblem of (G + h C)^-1 C, whose eigenvalues are
1/(h - s); infinite poles fall on zero and are dropped.  Where several hang together, as the zeros of a cascade of
low-passes do, rounding brings them back from infinity: far ones are kept only where the determinant does vanish.
Zeros are the poles of the system bordered by the input and output vectors.
"""

from __future__ import annotations

import numpy as np

from synth.circuit.network import ComplexArray, FloatArray, Network, matrices
from synth.errors import CircuitError

ZERO = 1e-9  # of the reference: a pole nearer to zero is at zero
FARTHEST = 1e7  # poles beyond this multiple of the reference are taken as infinite
OUTERMOST = 1e9  # beyond this multiple nothing is looked for
FAR = 1e3  # beyond this multiple of the reference a pole must prove itself


def _finite_eigenvalues(G: FloatArray, C: FloatArray, reference: float, farthest: float) -> ComplexArray:
    """Finite s with det(G + s C) = 0 up to a multiple of the reference [rad/s], by magnitude, then imaginary part."""
    shift = reference * 0.7310585786300049  # no natural frequency of a real circuit sits exactly here
    shifted = G + shift * C
    rows = np.abs(shifted).max(axis=1)
    try:
        spectrum = np.linalg.eigvals(np.linalg.solve(shifted / rows[:, None], C / rows[:, None]))
    except np.linalg.LinAlgError:
        raise CircuitError("the circuit has no unique solution; a node has no path to ground") from None
    spectrum = spectrum[np.abs(spectrum) > 1.0 / (farthest * reference)]
    s = (shift - 1.0 / spectrum).astype(complex)
    s = s[[abs(x) < FAR * reference or _vanishes(G, C, x) for x in s]]
    return s[np.lexsort((s.imag, np.abs(s)))]


def _vanishes(G: FloatArray, C: FloatArray, s: complex) -> bool:
    """Whether det(G + s C) at s is well below its size a tenth of s away."""

    def logarithm(x: complex) -> float:
        Y = G + x * C
        rows = np.abs(Y).max(axis=1)
        return float(np.linalg.slogdet(Y / rows[:, None])[1] + np.log(rows).sum())

    # on both sides, so that a conjugate pair is kept or dropped together
    return logarithm(s) < max(logarithm(s * (1 + 0.1j)), logarithm(s * (1 - 0.1j))) - 1.0


def _reference(reference_frequency: float) -> float:
    if not np.isfinite(reference_frequency) or reference_frequency <= 0:
        raise CircuitError(f"reference frequency {reference_frequency!r} Hz must be positive")
    return float(2 * np.pi * reference_frequency)


def poles(network: Network, reference_frequency: float) -> ComplexArray:
    """All finite poles [rad/s] up to 1e7 times the reference frequency [Hz], or as many more as there are zeros.

    A pole so far away does nothing in the band, but a transfer has no more zeros than poles.
    """
    m, reference = matrices(network), _reference(reference_frequency)
    found = _finite_eigenvalues(m.G, m.C, reference, OUTERMOST)
    inside = int(np.searchsorted(np.abs(found), FARTHEST * reference))
    count = max(inside, min(zeros(network, reference_frequency).size, found.size))
    if 0 < count < found.size and found[count - 1].imag < 0 and found[count].imag > 0:
        count += 1  # a conjugate pair stays together
    return found[:count]


def zeros(network: Network, reference_frequency: float) -> ComplexArray:
    """All finite zeros of the transfer from input to output [rad/s], up to 1e7 times the reference frequency [Hz]."""
    m = matrices(network)
    n = len(m.nodes)
    G, C = np.zeros((n + 1, n + 1)), np.zeros((n + 1, n + 1))
    G[:n, :n], C[:n, :n] = m.G, m.C
    G[:n, n] = -m.b
    G[n, m.output] = 1.0
    return _finite_eigenvalues(G, C, _reference(reference_frequency), FARTHEST)


def resonant_pairs(s: ComplexArray) -> tuple[tuple[float, float], ...]:
    """Natural frequency [Hz] and Q of each complex pair, by frequency; real poles are left out."""
    upper = s[s.imag > 1e-9 * np.abs(s)]
    pairs = [(float(abs(p) / (2 * np.pi)), float(-abs(p) / (2 * p.real))) for p in upper if p.real != 0.0]
    return tuple(sorted(pairs))


def is_stable(s: ComplexArray, reference_frequency: float | None = None) -> bool:
    """True when no pole lies right of the imaginary axis; one at zero, as of a charge held, is no instability.

    Args:
        s: poles [rad/s]; reference_frequency: [Hz], in which the rounding of a pole at zero is measured; None
            allows no pole at zero.
    """
    if reference_frequency is None:
        return bool(np.all(s.real < 0.0))
    return bool(np.all(growth(s, reference_frequency) <= 0.0))


def growth(s: ComplexArray, reference_frequency: float) -> FloatArray:
    """Real parts of poles [1/s], those at zero but for rounding set to zero."""
    return np.where(np.abs(s.real) < ZERO * _reference(reference_frequency), 0.0, s.real)
