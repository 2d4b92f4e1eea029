"""Responses of many builds at many frequencies.

Numerator and determinant of a circuit are polynomials in the frequency.  On a stretch of the jw axis they are
interpolated from a few Chebyshev nodes [1]_, checked on a few builds at every frequency and on all builds at
frequencies held out, and the stretch is halved where the first check fails; stretches too short to gain from
interpolation are solved directly.

References:
    .. [1] J.-P. Berrut, L. N. Trefethen, "Barycentric Lagrange interpolation", SIAM Review 46 (2004) 501.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from synth.circuit.compiled import Program, compile_network, run
from synth.circuit.linear import frequency_array
from synth.circuit.network import ComplexArray, FloatArray, Network
from synth.errors import CircuitError

NODES = 21
HELD_OUT = 3
FEW = 8  # builds that are checked at every frequency; the others are at those held out
TOLERANCE = 1e-10  # of a response, relative to itself down to FLOOR of the largest in its stretch
FLOOR = 1e-4  # 80 dB
ROUNDING = 4 * float(np.finfo(float).eps)  # of the largest node value, in an interpolated value (measured)
WORKING_SET = 8000  # complex numbers an operation handles at once: amortizes the call, stays in cache (measured)


def batch_response(network: Network, values: FloatArray, frequencies: ArrayLike) -> ComplexArray:
    """Response of every build at every frequency [V per input unit], shape (F, builds).

    Args:
        network: the circuit; its own values choose the elimination order.
        values: element values, shape (elements, builds), as from `build_values`.
        frequencies: [Hz], rising, shape (F,).

    Raises:
        CircuitError: shapes do not match, frequencies do not rise, or a build has no finite response.
    """
    f = frequency_array(frequencies)
    if f.size == 0 or np.any(np.diff(f) <= 0):
        raise CircuitError("frequencies must rise, and there must be one at least")
    if values.ndim != 2 or values.shape[0] != len(network.elements):
        raise CircuitError(f"values must have shape ({len(network.elements)}, builds), not {values.shape}")
    program = compile_network(network, float(np.sqrt(max(f[0], f[-1] * 1e-6) * f[-1])) or 1.0)
    out = np.empty((f.size, values.shape[1]), dtype=complex)
    with np.errstate(all="ignore"):  # a build without a finite response is refused below
        _stretch(program, values, f, out, np.arange(f.size))
    if not np.all(np.isfinite(out)):
        build = int(np.flatnonzero(~np.isfinite(out).all(axis=0))[0])
        raise CircuitError(f"build {build} has no finite response; its circuit is singular")
    return out


def direct_response(network: Network, values: FloatArray, frequencies: ArrayLike) -> ComplexArray:
    """As `batch_response`, every frequency solved: the reference for the interpolated result."""
    f = frequency_array(frequencies)
    program = compile_network(network, float(np.sqrt(max(f[0], f[-1] * 1e-6) * f[-1])) or 1.0)
    numerator, determinant = _evaluate(program, values, f)
    return numerator / determinant


def _stretch(program: Program, values: FloatArray, f: FloatArray, out: ComplexArray, where: np.ndarray) -> None:
    """Fill `out[where]`, interpolating where that saves solutions and passes its check."""
    if where.size <= NODES + HELD_OUT:
        numerator, determinant = _evaluate(program, values, f[where])
        out[where] = numerator / determinant
        return
    low, high = f[where[0]], f[where[-1]]
    held = np.linspace(0, where.size - 1, HELD_OUT + 2).astype(int)[1:-1]
    nodes = 0.5 * (low + high) - 0.5 * (high - low) * np.cos(np.pi * np.arange(NODES) / (NODES - 1))
    weights = _barycentric(nodes, f[where])
    s = _jw(np.concatenate([nodes, f[where][held]]))
    everywhere = _jw(np.concatenate([nodes, f[where]]))
    if _interpolated(program, values[:, :FEW], everywhere, weights, np.arange(where.size))[1].any():
        middle = where.size // 2
        _stretch(program, values, f, out, where[:middle])
        _stretch(program, values, f, out, where[middle:])
        return
    failed: list[int] = []
    for chunk in _chunks(values.shape[1], s.size):
        h, bad = _interpolated(program, values[:, chunk], s, weights, held)
        out[where[0] : where[-1] + 1, chunk] = h
        failed += [chunk.start + int(k) for k in np.flatnonzero(bad)]
    if failed:
        numerator, determinant = _evaluate(program, values[:, failed], f[where])
        out[np.ix_(where, np.array(failed))] = numerator / determinant


def _interpolated(
    program: Program, values: FloatArray, s: ComplexArray, weights: FloatArray, held: np.ndarray
) -> tuple[ComplexArray, np.ndarray]:
    """Interpolated response of every build, and which builds fail the check.

    A build fails where it disagrees at the held-out frequencies, or where its determinant, as small as it gets at
    the peak of the response, drowns in the rounding of its largest node value.

    Args:
        s: the nodes and then the held-out frequencies [rad/s], shape (NODES + HELD_OUT, 1).
        weights: from the nodes to the frequencies wanted, shape (F, NODES); held: indices of the held-out ones.

    Returns:
        response (F, builds) and failures (builds,).
    """
    numerator, determinant = run(program, values, s)
    bottom = _weighed(weights, determinant[:NODES])
    h = _weighed(weights, numerator[:NODES])
    h /= bottom
    size = np.abs(h)
    at_peak = np.abs(bottom[size.argmax(axis=0), np.arange(size.shape[1])])
    rounding = ROUNDING * np.abs(determinant[:NODES]).max(axis=0)
    accurate = rounding <= TOLERANCE * at_peak
    exact = numerator[NODES:] / determinant[NODES:]
    return h, ~accurate | _disagrees(h[held], exact, size.max(axis=0))


def _weighed(weights: FloatArray, values: ComplexArray) -> ComplexArray:
    """Real weights times complex values, as one real product: half the work of a complex one."""
    parts = np.ascontiguousarray(values).view(np.float64)
    return (weights @ parts).view(np.complex128)


def _disagrees(h: ComplexArray, exact: ComplexArray, peak: FloatArray) -> NDArray[np.bool_]:
    size = np.maximum(np.abs(exact), FLOOR * peak)
    wrong: NDArray[np.bool_] = np.any(np.abs(h - exact) > TOLERANCE * size, axis=0)
    return wrong | ~np.isfinite(h).all(axis=0)


def _barycentric(nodes: FloatArray, f: FloatArray) -> FloatArray:
    """Matrix that takes values at the Chebyshev points of the second kind to frequencies f, shape (F, nodes)."""
    weight = np.where(np.arange(nodes.size) % 2 == 0, 1.0, -1.0)
    weight[[0, -1]] *= 0.5
    difference = f[:, None] - nodes[None, :]
    hit = difference == 0
    difference[hit] = 1.0
    terms = weight / difference
    matrix: FloatArray = terms / terms.sum(axis=1, keepdims=True)
    rows = hit.any(axis=1)
    matrix[rows] = hit[rows]
    return matrix


def _chunks(builds: int, frequencies: int) -> list[slice]:
    size = max(1, WORKING_SET // frequencies)
    return [slice(start, min(start + size, builds)) for start in range(0, builds, size)]


def _jw(f: FloatArray) -> ComplexArray:
    return np.asarray(2j * np.pi * f[:, None], dtype=np.complex128)


def _evaluate(program: Program, values: FloatArray, f: FloatArray) -> tuple[ComplexArray, ComplexArray]:
    numerator = np.empty((f.size, values.shape[1]), dtype=complex)
    determinant = np.empty_like(numerator)
    for part in _chunks(f.size, 1):
        for chunk in _chunks(values.shape[1], min(f.size, WORKING_SET)):
            numerator[part, chunk], determinant[part, chunk] = run(program, values[:, chunk], _jw(f[part]))
    return numerator, determinant
