"""Figures of every build, from responses of whole chunks at once."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from synth import circuit
from synth.circuit.network import ComplexArray, FloatArray
from synth.model.chain import Chain
from synth.quantity import format_si
from synth.spec import Spec
from synth.verification.builds.draw import CHUNK, draw
from synth.verification.figures import detuned

POINTS = 201
SPAN = 3.0  # bandwidths either side of the centre
CROWDING = 2.0  # how much denser the grid is at the centre


@dataclass(frozen=True, slots=True)
class Statistics:
    """Figures over builds, each of shape (builds,), by the name of the requirement they belong to.

    A build without two -3 dB points has NaN for its band.  `shares` is, for each figure, the share of its variance
    by cause, largest first.
    """

    count: int
    figures: dict[str, FloatArray]
    shares: dict[str, tuple[tuple[str, float], ...]]


def statistics(chain: Chain, spec: Spec, count: int, seed: int) -> Statistics:
    """Draw builds and take their figures: output, band, rejects and ripple.

    Raises:
        CircuitError: a build's circuit is singular.
    """
    network = circuit.build_network(chain)
    collected: dict[str, list[FloatArray]] = {}
    moments = _Moments()
    for chunk in range(math.ceil(count / CHUNK)):
        draws = draw(chain, spec, seed, chunk, min(CHUNK, count - chunk * CHUNK))
        figures = _figures(network, circuit.build_values(chain, draws.values), draws.scale, spec)
        for name, values in figures.items():
            collected.setdefault(name, []).append(values)
        moments.add(draws.causes, figures)
    joined = {name: np.concatenate(parts) for name, parts in collected.items()}
    return Statistics(count, joined, moments.shares())


def _figures(network: circuit.Network, values: FloatArray, scale: FloatArray, spec: Spec) -> dict[str, FloatArray]:
    target = spec.target
    center, relative = target.center_frequency, target.bandwidth / target.center_frequency
    u = SPAN * relative * np.sinh(CROWDING * np.linspace(-1, 1, POINTS)) / math.sinh(CROWDING)
    f = detuned(center, u)
    f[POINTS // 2] = center
    response = circuit.batch_response(network, values, f)
    level = np.abs(response[POINTS // 2])
    low, high = edges(f, response)
    found = {
        "output at full scale": level * scale * target.full_scale,
        "bandwidth": high - low,
        "center frequency": np.sqrt(low * high),
    }
    far = sorted({reject.frequency for reject in target.reject})
    if far:
        away = np.abs(circuit.batch_response(network, values, far))
        for frequency, row in zip(far, away, strict=True):
            found[f"reject {format_si(frequency, 'Hz')}"] = 20 * np.log10(level / row)
    if target.ripple is not None:
        found["ripple"] = ripples(f, response, low, high)
    return found


def edges(f: FloatArray, response: ComplexArray) -> tuple[FloatArray, FloatArray]:
    """First -3 dB crossings outward from the middle of the grid, re its middle [Hz]; NaN where there is none.

    The level in dB is interpolated between grid points by its square, nearly linear there.
    """
    middle = f.size // 2
    power = np.abs(response) ** 2
    power = power / power[middle]
    return _outward(f[middle::-1], power[middle::-1]), _outward(f[middle:], power[middle:])


def _outward(f: FloatArray, power: FloatArray) -> FloatArray:
    under = power < 0.5
    first = np.argmax(under, axis=0)
    columns = np.arange(power.shape[1])
    before = np.maximum(first - 1, 0)
    above, below = np.log(power[before, columns]), np.log(power[first, columns])
    drop = np.where(under.any(axis=0), above - below, np.nan)
    return np.asarray(f[before] + (f[first] - f[before]) * (above - math.log(0.5)) / drop, dtype=float)


def ripples(f: FloatArray, response: ComplexArray, low: FloatArray, high: FloatArray) -> FloatArray:
    """Peak to valley between the outermost maxima in the band [dB], 0 for a single peak."""
    level = 20 * np.log10(np.abs(response))
    inside = (f[:, None] >= low) & (f[:, None] <= high)
    rise = np.diff(level, axis=0) > 0
    peak: NDArray[np.bool_] = np.zeros_like(inside)
    peak[1:-1] = rise[:-1] & ~rise[1:] & inside[1:-1]
    first, last = np.argmax(peak, axis=0), f.size - 1 - np.argmax(peak[::-1], axis=0)
    index = np.arange(f.size)[:, None]
    between = (index >= first) & (index <= last)
    span = np.where(between, level, -np.inf).max(axis=0) - np.where(between, level, np.inf).min(axis=0)
    return np.where(peak.sum(axis=0) >= 2, span, 0.0)


class _Moments:
    """Running covariances of causes and figures, for the shares of variance."""

    def __init__(self) -> None:
        self._causes: list[str] = []
        self._cross: dict[str, FloatArray] = {}
        self._figure: dict[str, FloatArray] = {}
        self._square: FloatArray = np.zeros(0)

    def add(self, causes: dict[str, FloatArray], figures: dict[str, FloatArray]) -> None:
        self._causes = list(causes)
        table = np.array(list(causes.values()))
        self._square = self._square + (table**2).sum(axis=1) if self._square.size else (table**2).sum(axis=1)
        for name, values in figures.items():
            good = np.isfinite(values)
            v = np.where(good, values, 0.0)
            reference = self._figure.get(name, np.array([0.0, 0.0, 0.0, v[good].mean() if good.any() else 0.0]))
            v = np.where(good, v - reference[3], 0.0)
            sums = np.array([good.sum(), v.sum(), (v**2).sum(), 0.0])
            self._figure[name] = reference + sums
            cross = table @ v
            self._cross[name] = self._cross[name] + cross if name in self._cross else cross

    def shares(self) -> dict[str, tuple[tuple[str, float], ...]]:
        """Squared correlation of each cause with each figure: the causes are independent, so the squares add up."""
        result: dict[str, tuple[tuple[str, float], ...]] = {}
        for name, (count, total, square, _) in self._figure.items():
            variance = square - total**2 / max(count, 1)
            if variance <= 0:
                result[name] = ()
                continue
            share = self._cross[name] ** 2 / (self._square * variance)
            order = np.argsort(-share, kind="stable")[:12]
            result[name] = tuple((self._causes[k], float(share[k])) for k in order)
        return result
