"""One minimum-phase rational function for a measured response.

The square of the magnitude is a real rational function of x = w^2.  Its poles are found by relocation from partial
fractions (vector fitting [1]_, on magnitudes as in [2]_), each taken at its left-half root s = -sqrt(-x).  Corner
frequencies and dampings are then polished by least squares on the logarithm of the response, in parameters that
cannot leave the left half plane.  The order is the one of least information criterion [3]_: a parameter must earn its
place, so that noise is not fitted.

References:
    .. [1] B. Gustavsen, A. Semlyen, "Rational approximation of frequency domain responses by vector fitting",
       IEEE Trans. Power Delivery 14 (1999) 1052 (from memory).
    .. [2] L. De Tommasi, B. Gustavsen, T. Dhaene, "Robust transfer function identification via an enhanced magnitude
       vector fitting algorithm", IET Control Theory Appl. 4 (2010) 1169 (from memory).
    .. [3] G. Schwarz, "Estimating the dimension of a model", Annals of Statistics 6 (1978) 461 (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np

from synth.circuit.network import ComplexArray, FloatArray
from synth.circuit.sensor_poles import numerators, relocated, starting_poles
from synth.errors import CircuitError

MOST_POLES = 8
NUMERATORS = 3  # of one order, that are tried in full
EXACT = 1e-7  # relative error at which no better fit is looked for
FLOOR = 1e-9  # error that counts as none in the information criterion
PATIENCE = 2  # orders that may fail to improve before the search ends
NARROWEST = 0.25  # of the rows' spacing: a resonance narrower than this was not measured
COMPATIBLE = 0.1  # [rad] rms: a phase farther off is not that of the magnitude (a delay, say)
WORST = 0.25  # relative error beyond which the fit is no answer
_LOG_RANGE = 25.0  # natural logarithms of corner and damping stay within this


@dataclass(frozen=True, slots=True)
class RationalFit:
    """gain * prod(s - zeros) / prod(s - poles), stable and minimum phase, real coefficients.

    Attributes:
        poles, zeros: [rad/s].
        gain: of the factored form; negative where the measured phase says so.
        residual: largest relative error of the magnitude over the table.
        phase_residual: [degree] largest error of the phase over the table, 0 where the table has none.
    """

    poles: tuple[complex, ...]
    zeros: tuple[complex, ...]
    gain: float
    residual: float
    phase_residual: float = 0.0

    def response(self, frequencies: FloatArray) -> ComplexArray:
        """Value at frequencies [Hz], shape (F,)."""
        s = 2j * np.pi * np.asarray(frequencies, dtype=float)
        value = np.full(s.shape, complex(self.gain))
        for k, pole in enumerate(self.poles):  # one zero beside each pole: no factor runs off
            value = value * ((s - self.zeros[k]) if k < len(self.zeros) else 1.0) / (s - pole)
        return value


@dataclass(frozen=True, slots=True)
class _Table:
    """Rows in normalised form: u = w / corner, logarithm of the gain, unwrapped phase [rad] or None."""

    u: FloatArray
    level: FloatArray
    phase: FloatArray | None
    corner: float


@dataclass(frozen=True, slots=True)
class _Shape:
    """Logarithms of corners and dampings: second-order factors (ln w, ln zeta), then first-order ones (ln w).

    Attributes:
        parameters: ln gain, then pole factors, then zero factors.
        poles, zeros: their numbers, zeros at the origin not counted; origin: those.
        sign: of the gain.
    """

    parameters: FloatArray
    poles: int
    zeros: int
    origin: int
    sign: float = 1.0

    @property
    def factors(self) -> Iterator[tuple[int, float, bool]]:
        """Place of each factor's first parameter, exponent (+1 zero, -1 pole), and whether it is of second order."""
        place = 1
        for count, exponent in ((self.poles, -1.0), (self.zeros, 1.0)):
            for second in (True,) * (count // 2) + (False,) * (count % 2):
                yield place, exponent, second
                place += 2 if second else 1


@lru_cache(maxsize=64)
def fit_table(points: tuple[tuple[float, ...], ...]) -> RationalFit:
    """The rational function of least order that follows a table down to its noise.

    The magnitude decides; a phase is fitted along where it is that of a minimum-phase response, and is reported in
    `phase_residual` in any case.

    Args:
        points: rows (Hz, gain) or (Hz, gain, degrees), frequencies rising, gains positive.

    Raises:
        CircuitError: fewer than three rows, rows that are no response, or none of up to eight poles follows them.

    Example:
        >>> f = (1e3, 3e3, 1e4, 3e4, 1e5)
        >>> fit = fit_table(tuple((x, 1 / (1 + (1e4 / x) ** 2) ** 0.5) for x in f))
        >>> len(fit.poles), fit.zeros, round(-fit.poles[0].real / 6.283185307, 1), fit.residual < 1e-6
        (1, (0j,), 10000.0, True)
    """
    table = _table(points)
    best = _seed_constant(table)
    score, since = _criterion(best, table), 0
    for poles in range(1, min(MOST_POLES, (table.u.size - 1) // 2) + 1):
        if _worst(best, table) < EXACT:
            break
        found = [(s, _criterion(s, table)) for s in _candidates(poles, table)]
        shape, value = min(found, key=lambda pair: pair[1])
        if value < score:
            best, score, since = shape, value, 0
        elif _worst(best, table) < WORST:
            since += 1
            if since >= PATIENCE:
                break
    best = _pruned(best, table)
    if table.phase is not None:
        best = _with_phase(best, table)
    fit = _finished(best, table)
    if fit.residual > WORST:
        raise CircuitError(
            f"no response of up to {MOST_POLES} poles follows the table: its best fit is {100 * fit.residual:.0f} % "
            f"off at {_worst_row(best, table):.4g} Hz; remove rows that are wrong, or add rows between them"
        )
    return fit


def _table(points: tuple[tuple[float, ...], ...]) -> _Table:
    if len(points) < 3:
        raise CircuitError(f"a table of {len(points)} rows has no response; give at least 3")
    rows = np.array(points, dtype=float)
    if not (np.all(np.isfinite(rows)) and np.all(np.diff(rows[:, 0]) > 0) and np.all(rows[:, :2] > 0)):
        raise CircuitError("a table's frequencies must rise and its gains be positive; correct its rows")
    omega = 2 * np.pi * rows[:, 0]
    corner = float(np.sqrt(omega[0] * omega[-1]))
    phase = np.unwrap(np.radians(rows[:, 2])) if rows.shape[1] > 2 else None
    return _Table(omega / corner, np.log(rows[:, 1]), phase, corner)


# ---------------------------------------------------------------------------------------------------------------
# The model: logarithm of the response and its derivatives


def _logarithm(shape: _Shape, u: FloatArray, parameters: FloatArray) -> tuple[ComplexArray, ComplexArray]:
    """ln H at ju, shape (K,), and its derivatives with respect to the parameters, shape (K, parameters)."""
    p = _limited(parameters)
    value = p[0] + shape.origin * (np.log(u) + 0.5j * np.pi)
    slopes = np.zeros((u.size, p.size), dtype=complex)
    slopes[:, 0] = 1.0
    for place, exponent, second in shape.factors:
        r = u / math.exp(p[place])
        damping = 2j * r * math.exp(p[place + 1]) if second else 1j * r
        factor = 1 + damping - (r**2 if second else 0.0)
        value = value + exponent * np.log(factor)
        slopes[:, place] = exponent * (-damping + (2 * r**2 if second else 0.0)) / factor
        if second:
            slopes[:, place + 1] = exponent * damping / factor
    return value, slopes


def _polished(shape: _Shape, table: _Table, phase: bool = False) -> _Shape:
    """Least squares on ln|H|, and on the phase where asked, from the present parameters."""
    from scipy.optimize import least_squares

    wanted = table.phase if phase and table.phase is not None else None
    if shape.parameters.size > table.u.size:
        return shape

    def error(p: FloatArray) -> FloatArray:
        value = _logarithm(shape, table.u, p)[0]
        level: FloatArray = value.real - table.level
        return level if wanted is None else np.concatenate([level, _wrapped(value.imag, shape.sign, wanted)])

    def slope(p: FloatArray) -> FloatArray:
        slopes = _logarithm(shape, table.u, p)[1]
        return slopes.real if wanted is None else np.concatenate([slopes.real, slopes.imag])

    found = least_squares(
        error, shape.parameters, jac=slope, method="lm", xtol=1e-14, ftol=1e-14, gtol=1e-14, max_nfev=100
    )
    return replace(shape, parameters=_limited(found.x))


def _limited(parameters: FloatArray) -> FloatArray:
    """Parameters with corners and dampings inside their range; the gain is free."""
    inside: FloatArray = np.clip(parameters, -_LOG_RANGE, _LOG_RANGE)
    inside[0] = parameters[0]
    return inside


def _wrapped(angle: FloatArray, sign: float, wanted: FloatArray) -> FloatArray:
    """Phase error [rad] between -pi and pi."""
    error = angle + (0.0 if sign > 0 else np.pi) - wanted
    turned: FloatArray = error - 2 * np.pi * np.round(error / (2 * np.pi))
    return turned


def _errors(shape: _Shape, table: _Table) -> FloatArray:
    error: FloatArray = _logarithm(shape, table.u, shape.parameters)[0].real - table.level
    return error


def _worst(shape: _Shape, table: _Table) -> float:
    return float(np.abs(np.expm1(_errors(shape, table))).max())


def _worst_row(shape: _Shape, table: _Table) -> float:
    return float(table.u[np.abs(_errors(shape, table)).argmax()] * table.corner / (2 * np.pi))


def _criterion(shape: _Shape, table: _Table) -> float:
    """Schwarz's criterion; infinite where nothing is left to judge by, or a resonance lies between the rows."""
    rows, parameters = table.u.size, shape.parameters.size
    if parameters >= rows or _unsupported(shape, table):
        return math.inf
    square = float(np.mean(_errors(shape, table) ** 2)) + FLOOR**2
    return rows * math.log(square) + parameters * math.log(rows)


def _unsupported(shape: _Shape, table: _Table) -> bool:
    """True where a pair within the table is narrower than the rows can show."""
    for place, _, second in shape.factors:
        if not second:
            continue
        w, zeta = np.exp(shape.parameters[place : place + 2])
        if table.u[0] < w < table.u[-1]:
            k = int(np.searchsorted(table.u, w))
            if zeta * w < NARROWEST * (table.u[k] - table.u[k - 1]):
                return True
    return False


# ---------------------------------------------------------------------------------------------------------------
# Where to start from, and what to leave out


def _seed_constant(table: _Table) -> _Shape:
    return _Shape(np.array([float(table.level.mean())]), 0, 0, 0)


def _candidates(poles: int, table: _Table) -> Iterator[_Shape]:
    """Polished shapes of one order: from relocated poles of two starting sets, and plain flanks for one pole."""
    if poles == 1:
        for origin in (0, 1):
            for corner in (table.u[0], 1.0, table.u[-1]):
                start = np.array([float(table.level.max()), math.log(corner)])
                yield _polished(_Shape(start, 1, 0, origin), table)
    if 2 * poles + 1 > table.u.size:
        return
    choices: dict[tuple[int, int], tuple[float, ComplexArray, ComplexArray]] = {}
    for angle in (0.2, math.pi):
        found = relocated(table.u, table.level, starting_poles(poles, table.u, angle))
        for score, origin, zeros in numerators(table.u, table.level, found):
            key = (origin, zeros.size)
            if key not in choices or score < choices[key][0]:
                choices[key] = score, found, zeros
    ranked = sorted(choices.items(), key=lambda item: (item[1][0], item[0]))
    for (origin, _), (_, found, zeros) in ranked[:NUMERATORS]:
        shape = _polished(_shape(found, zeros, origin, table), table)
        yield shape
        if _worst(shape, table) < EXACT:
            return


def _shape(poles: ComplexArray, zeros: ComplexArray, origin: int, table: _Table) -> _Shape:
    """Parameters from roots in x: the left-half s of each."""
    parameters: list[float] = [0.0]
    for roots in (poles, zeros):
        parameters += _factors(-np.sqrt(-roots))
    shape = _Shape(_limited(np.array(parameters)), poles.size, zeros.size, origin)
    shape.parameters[0] = -float(np.mean(_errors(shape, table)))
    return shape


def _factors(roots: ComplexArray) -> list[float]:
    """ln w and ln zeta of pairs (conjugates, else real roots in order), then ln w of what is left over."""
    tiny = math.exp(-_LOG_RANGE)
    found: list[float] = []
    for root in roots[roots.imag > 0]:
        found += [math.log(abs(root)), math.log(max(-root.real / abs(root), tiny))]
    real = np.sort(np.maximum(np.abs(roots[roots.imag == 0].real), tiny))
    for k in range(0, real.size - 1, 2):
        a, b = float(real[k]), float(real[k + 1])
        found += [0.5 * (math.log(a) + math.log(b)), math.log((a + b) / (2 * math.sqrt(a * b)))]
    if real.size % 2:
        found.append(math.log(real[-1]))
    return found


def _pruned(shape: _Shape, table: _Table) -> _Shape:
    """Zeros moved to infinity or to the origin as long as the criterion does not suffer."""
    score = _criterion(shape, table)
    while shape.zeros:
        zeros = _roots(shape)[1]
        trials = []
        for origin, left in ((0, _without(zeros, -1)), (1, _without(zeros, 0))):
            start = np.concatenate([[0.0], shape.parameters[1 : 1 + shape.poles], _factors(left)])
            trial = _Shape(start, shape.poles, left.size, shape.origin + origin)
            start[0] = -float(np.mean(_errors(trial, table)))
            trial = _polished(trial, table)
            trials.append((_criterion(trial, table), trial))
        value, trial = min(trials, key=lambda pair: pair[0])
        if value > score and not _worst(trial, table) < EXACT:
            break
        shape, score = trial, value
    return shape


def _without(roots: ComplexArray, k: int) -> ComplexArray:
    """Roots by size without the k-th; its conjugate becomes a real one."""
    order = roots[np.argsort(np.abs(roots), kind="stable")]
    gone = order[k]
    left = np.delete(order, k)
    if gone.imag != 0:
        left[np.argmin(np.abs(left - gone.conj()))] = -abs(gone)
    return left


def _with_phase(shape: _Shape, table: _Table) -> _Shape:
    """The shape with the sign that the phase wants, polished on both where they belong together."""
    assert table.phase is not None
    angle = _logarithm(shape, table.u, shape.parameters)[0].imag
    errors = {sign: float(np.sqrt(np.mean(_wrapped(angle, sign, table.phase) ** 2))) for sign in (1.0, -1.0)}
    sign = min(errors, key=lambda s: errors[s])
    shape = replace(shape, sign=sign)
    if errors[sign] > COMPATIBLE:
        return shape
    joint = _polished(shape, table, phase=True)
    return shape if _unsupported(joint, table) else joint


def _roots(shape: _Shape) -> tuple[ComplexArray, ComplexArray]:
    """Poles and zeros in u, those at the origin left out."""
    found: dict[float, list[complex]] = {-1.0: [], 1.0: []}
    for place, exponent, second in shape.factors:
        w = math.exp(shape.parameters[place])
        if not second:
            found[exponent].append(complex(-w))
            continue
        zeta = math.exp(shape.parameters[place + 1])
        if zeta < 1:
            root = w * complex(-zeta, math.sqrt(1 - zeta**2))
            found[exponent] += [root, root.conjugate()]
        else:
            larger = zeta + math.sqrt(zeta**2 - 1)
            found[exponent] += [complex(-w / larger), complex(-w * larger)]
    return np.array(found[-1.0], dtype=complex), np.array(found[1.0], dtype=complex)


def _finished(shape: _Shape, table: _Table) -> RationalFit:
    poles, zeros = _roots(shape)
    gain = shape.sign * math.exp(shape.parameters[0]) * float(np.prod(np.abs(poles)) / np.prod(np.abs(zeros)))
    gain *= table.corner ** (poles.size - zeros.size - shape.origin)
    phase = 0.0
    if table.phase is not None:
        angle = _logarithm(shape, table.u, shape.parameters)[0].imag
        phase = math.degrees(float(np.abs(_wrapped(angle, shape.sign, table.phase)).max()))
    return RationalFit(
        _sorted(poles * table.corner),
        (0j,) * shape.origin + _sorted(zeros * table.corner),
        gain,
        _worst(shape, table),
        phase,
    )


def _sorted(roots: Sequence[complex] | ComplexArray) -> tuple[complex, ...]:
    return tuple(sorted((complex(r) for r in roots), key=lambda r: (abs(r), r.imag)))
