"""Direct solution of the nodal equations at a list of frequencies."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from synth.circuit.network import ComplexArray, FloatArray, Matrices
from synth.errors import CircuitError


def frequency_array(frequencies: ArrayLike) -> FloatArray:
    """Frequencies [Hz] as a one-dimensional array.

    Raises:
        CircuitError: one of them is negative or not finite.
    """
    f = np.atleast_1d(np.asarray(frequencies, dtype=float))
    if f.ndim != 1 or not np.all(np.isfinite(f)) or np.any(f < 0):
        raise CircuitError("frequencies must be a list of finite values, 0 Hz or more")
    return f


def scaled_systems(m: Matrices, f: FloatArray) -> tuple[ComplexArray, FloatArray]:
    """G + j w C at each frequency, its rows divided by their largest entry; shapes (F, n, n) and (F, n)."""
    Y = m.G + 2j * np.pi * f[:, None, None] * m.C
    scale = np.abs(Y).max(axis=2)
    if not np.all(scale > 0):
        raise CircuitError("the circuit has a node with no path to anything; connect every node")
    return Y / scale[:, :, None], scale


def solve(Y: ComplexArray, rhs: ComplexArray | FloatArray) -> ComplexArray:
    """Solutions of Y x = rhs, shapes (F, n, n), (F, n) or (n,), and (F, n).

    Raises:
        CircuitError: there is no unique or no finite solution.
    """
    columns = np.asarray(np.broadcast_to(rhs, Y.shape[:2])[..., None], dtype=np.complex128)
    return np.asarray(solve_many(Y, columns)[..., 0], dtype=np.complex128)


def solve_many(Y: ComplexArray, rhs: ComplexArray | FloatArray) -> ComplexArray:
    """Solutions of Y X = rhs for several right-hand sides, shapes (F, n, n), (F, n, k) and (F, n, k).

    Raises:
        CircuitError: there is no unique or no finite solution.
    """
    try:
        x = np.asarray(np.linalg.solve(Y, rhs), dtype=np.complex128)
    except np.linalg.LinAlgError:
        raise CircuitError("the circuit has no unique solution; a node has no path to ground") from None
    if not np.all(np.isfinite(x)):
        raise CircuitError("the circuit has no finite solution; a part value is zero or out of range")
    return x
