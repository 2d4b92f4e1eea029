"""The pole of every build nearest a starting point, found together for all builds."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from synth.circuit.compiled import Program, run
from synth.circuit.network import ComplexArray, FloatArray

ITERATIONS = 25
CONVERGED = 1e-11


def track_pole(program: Program, values: FloatArray, start: ComplexArray) -> tuple[ComplexArray, NDArray[np.bool_]]:
    """Root of the determinant near a start, by Muller's method on all builds at once.

    D. E. Muller, "A method for solving algebraic equations using an automatic computer", Math. Tables Aids Comput.
    10 (1956) 208 (from memory).

    Args:
        values: element values, shape (elements, builds).
        start: [rad/s], shape (builds,).

    Returns:
        roots [rad/s] and whether each has converged, both of shape (builds,).
    """

    def determinant(s: ComplexArray) -> ComplexArray:
        value: ComplexArray = run(program, values, s[None, :])[1][0]
        return value

    size = np.abs(start)
    s0, s1, s2 = start * (1 + 1e-3), start * (1 - 1e-3j), start.copy()
    f0, f1, f2 = determinant(s0), determinant(s1), determinant(s2)
    done = np.zeros(start.shape, dtype=bool)
    with np.errstate(all="ignore"):  # a build that diverges is reported in `done`, not as a warning
        for _ in range(ITERATIONS):
            q = (s2 - s1) / (s1 - s0)
            a = q * f2 - q * (1 + q) * f1 + q**2 * f0
            b = (2 * q + 1) * f2 - (1 + q) ** 2 * f1 + q**2 * f0
            c = (1 + q) * f2
            root = np.sqrt(b**2 - 4 * a * c)
            larger = np.where(np.abs(b + root) > np.abs(b - root), b + root, b - root)
            step = np.where(done, 0.0, -(s2 - s1) * 2 * c / larger)
            step = np.where(np.isfinite(step), step, 0.0)
            s0, s1, s2 = np.where(done, s0, s1), np.where(done, s1, s2), s2 + step
            done = done | (np.abs(step) < CONVERGED * size)
            if done.all():
                break
            f0, f1, f2 = f1, f2, determinant(s2)
    return s2, done & np.isfinite(s2)
