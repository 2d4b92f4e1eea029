"""Poles and zeros of a measured magnitude, from partial fractions.

The square of a magnitude is a real rational function of x = u^2.  Its poles are found by relocation (vector fitting
[1]_ with the relaxed condition of [2]_, on magnitudes as in [3]_).  They are where a finer fit starts.

References:
    .. [1] B. Gustavsen, A. Semlyen, "Rational approximation of frequency domain responses by vector fitting",
       IEEE Trans. Power Delivery 14 (1999) 1052 (from memory).
    .. [2] B. Gustavsen, "Improving the pole relocating properties of vector fitting", IEEE Trans. Power Delivery
       21 (2006) 1587 (from memory).
    .. [3] L. De Tommasi, B. Gustavsen, T. Dhaene, "Robust transfer function identification via an enhanced magnitude
       vector fitting algorithm", IET Control Theory Appl. 4 (2010) 1169 (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np

from synth.circuit.network import ComplexArray, FloatArray

RELOCATIONS = 16
SMALLEST = 1e-12  # constant that stands for none


def starting_poles(count: int, u: FloatArray, angle: float) -> ComplexArray:
    """Poles in x = u^2 spread over the table: at an angle from the positive axis in pairs, or on the negative one."""
    if angle == math.pi:
        return -np.geomspace(u[0], u[-1], count + 2)[1:-1] ** 2 + 0j
    pairs = count // 2
    upper = np.geomspace(u[0], u[-1], pairs + 2)[1:-1] ** 2 * np.exp(1j * angle)
    real = [-1.0 + 0j] if count % 2 else []
    return np.concatenate([np.ravel([upper, upper.conj()], order="F"), real])


def relocated(u: FloatArray, level: FloatArray, poles: ComplexArray) -> ComplexArray:
    """Poles in x of the square of the magnitude, from starting ones."""
    x = u**2
    inverse = np.exp(-2 * (level - level.mean()))  # weight: relative errors count
    count = x.size
    for _ in range(RELOCATIONS):
        basis = _basis(x, poles)
        n = basis.shape[1]
        matrix = np.zeros((count + 1, 2 * n + 2))
        matrix[:count, : n + 1] = np.column_stack([basis, np.ones(count)]) * inverse[:, None]
        matrix[:count, n + 1 :] = -np.column_stack([basis, np.ones(count)])
        matrix[count, n + 1 :] = np.append(basis.sum(axis=0), count)
        wanted = np.append(np.zeros(count), count)
        scale = np.linalg.norm(matrix, axis=0)
        solution = np.linalg.lstsq(matrix / scale, wanted, rcond=None)[0] / scale
        residues, constant = solution[n + 1 : -1], solution[-1]
        poles = _roots_of(poles, residues / (constant if abs(constant) > SMALLEST else SMALLEST))
    return poles


def numerators(u: FloatArray, level: FloatArray, poles: ComplexArray) -> Iterator[tuple[float, int, ComplexArray]]:
    """Zeros that go with given poles, for each number of them: criterion, zeros at the origin, the others in x.

    With the poles known the numerator is linear: N(x) = F(x) D(x).  It is fitted for relative error in Chebyshev
    polynomials of z = (x - 1)/(x + 1), which treats low and high frequencies alike.  The criterion is Schwarz's.
    """
    x = u**2
    known = np.log(np.abs(x[:, None] - poles)).sum(axis=1) + 2 * level
    z = (x - 1) / (x + 1)
    for zeros in range(poles.size + 1):
        for origin in range(zeros + 1):
            power = origin * np.log(x) + (zeros - origin) * np.log1p(x) - known
            matrix = np.polynomial.chebyshev.chebvander(z, zeros - origin) * np.exp(power - power.mean())[:, None]
            scale = np.linalg.norm(matrix, axis=0)
            solution = np.linalg.lstsq(matrix / scale, np.ones(x.size), rcond=None)[0] / scale
            square = float(np.mean((matrix @ solution - 1) ** 2)) / 4 + SMALLEST**2
            parameters = poles.size + zeros - origin + 1
            roots = np.polynomial.chebyshev.chebroots(solution).astype(complex)
            roots = np.where(np.abs(1 - roots) < SMALLEST, 1 - SMALLEST, roots)
            criterion = x.size * math.log(square) + parameters * math.log(x.size)
            yield criterion, origin, _on_the_left((1 + roots) / (1 - roots))


def _basis(x: FloatArray, poles: ComplexArray) -> FloatArray:
    """Partial fractions, real for a conjugate pair (eq. (A.4) of [1]_), shape (K, poles)."""
    columns = []
    for pole in poles:
        if pole.imag == 0:
            columns.append(1 / (x - pole.real))
        elif pole.imag > 0:
            fraction = 1 / (x - pole)
            columns += [2 * fraction.real, -2 * fraction.imag]
    return np.column_stack(columns)


def _roots_of(poles: ComplexArray, residues: FloatArray) -> ComplexArray:
    """Zeros of 1 + sum residues * basis: eigenvalues of A - b c^T."""
    n = residues.size
    A, b, k = np.zeros((n, n)), np.zeros(n), 0
    for pole in poles:
        if pole.imag == 0:
            A[k, k], b[k] = pole.real, 1.0
            k += 1
        elif pole.imag > 0:
            A[k : k + 2, k : k + 2] = [[pole.real, pole.imag], [-pole.imag, pole.real]]
            b[k] = 2.0
            k += 2
    return _on_the_left(np.linalg.eigvals(A - np.outer(b, residues)).astype(complex))


def _on_the_left(roots: ComplexArray) -> ComplexArray:
    """Roots in x, conjugates side by side, none on x > 0: there a magnitude would change its sign."""
    real = roots[roots.imag == 0]
    upper = roots[roots.imag > 0]
    return np.concatenate([np.ravel([upper, upper.conj()], order="F"), -np.abs(real)])
