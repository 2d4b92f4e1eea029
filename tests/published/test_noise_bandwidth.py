"""Noise bandwidths: the engine's response of cascades, integrated over all frequencies.

The axis is mapped by f = corner tan(theta), a bandpass by f/f0 - f0/f = tan(theta)/Q, and integrated by Gauss and
Legendre's rule; for these responses the integrand is smooth up to both ends.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest

from synth import circuit
from synth.approximation import PROTOTYPES, bandpass_pairs, half_power_frequency
from synth.circuit.network import Network
from tests.support.networks import Board, first_order, second_order

NODES, WEIGHTS = np.polynomial.legendre.leggauss(160)


def low_pass_bandwidth(network: Network) -> float:
    """Integral of |H|^2 over all frequencies [Hz], re 0 Hz."""
    theta = math.pi / 4 * (NODES + 1)
    f = np.tan(theta)
    h = circuit.response(network, f)
    at_zero = abs(circuit.response(network, [0.0])[0])
    return float(np.sum(math.pi / 4 * WEIGHTS * np.abs(h / at_zero) ** 2 * (1 + f**2)))


def band_pass_bandwidth(network: Network, q: float) -> float:
    """Integral of |H|^2 over all frequencies [Hz], re the centre 1 Hz, on the scale of a bandwidth 1/q."""
    theta = math.pi / 2 * NODES
    half = np.tan(theta) / (2 * q)
    f = half + np.sqrt(1 + half**2)
    slope = f / np.sqrt(1 + half**2) * (1 + np.tan(theta) ** 2) / (2 * q)
    h = circuit.response(network, f) / circuit.response(network, [1.0])[0]
    return float(np.sum(math.pi / 2 * WEIGHTS * np.abs(h) ** 2 * slope))


def cascade(count: int, add: Callable[[Board, str, str, str, int], None]) -> Network:
    """Stages one after the other, from "in"."""
    board, before = Board(), "in"
    for k in range(count):
        add(board, f"P{k}", before, f"n{k}", k)
        before = f"n{k}"
    return board.network(before)


def equal_poles(count: int) -> Network:
    """Equal poles at 1 Hz."""
    return cascade(count, lambda board, name, a, b, _: first_order(board, name, a, b, 1.0))


def prototype(family: str, order: int, ripple: float = 0.5) -> Network:
    """A low-pass prototype with its -3 dB frequency re 0 Hz at 1 Hz."""
    poles = PROTOTYPES[family](order, ripple)
    poles = [p for p in poles / half_power_frequency(poles) if p.imag > -1e-9]

    def add(board: Board, name: str, before: str, after: str, k: int) -> None:
        p = complex(poles[k])
        if abs(p.imag) < 1e-9:
            first_order(board, name, before, after, abs(p))
        else:
            second_order(board, name, before, after, abs(p), -abs(p) / (2 * p.real), "low-pass")

    return cascade(len(poles), add)


def band_pass(family: str, sections: int, q: float, ripple: float = 0.5) -> Network:
    """A bandpass at 1 Hz, 1/q wide."""
    pairs = bandpass_pairs(family, sections, 1.0, 1 / q, ripple)

    def add(board: Board, name: str, before: str, after: str, k: int) -> None:
        second_order(board, name, before, after, pairs[k].frequency, pairs[k].q, "band-pass")

    return cascade(sections, add)


# re the corner of one pole; sqrt(pi) G(n - 1/2)/(2 G(n)), table of a public note named in the checks list
@pytest.mark.parametrize(
    ("count", "printed"), [(1, 1.570796), (2, 0.785398), (3, 0.589049), (4, 0.490874), (5, 0.429515), (6, 0.386563)]
)
def test_equal_poles(count: int, printed: float) -> None:
    assert low_pass_bandwidth(equal_poles(count)) == pytest.approx(printed, abs=1e-6)


# re the overall -3 dB frequency: Winder, Analog and Digital Filter Design, 2nd ed., Table A.3, (pi/2n)/sin(pi/2n)
BUTTERWORTH = [(1, 1.570796), (2, 1.110721), (3, 1.047198), (4, 1.026172), (5, 1.016641), (6, 1.011515)]


@pytest.mark.parametrize(("order", "printed"), BUTTERWORTH)
def test_butterworth_low_passes(order: int, printed: float) -> None:
    assert low_pass_bandwidth(prototype("butterworth", order)) == pytest.approx(printed, abs=1e-6)


@pytest.mark.parametrize(("sections", "printed"), BUTTERWORTH[:3])
@pytest.mark.parametrize("q", [1.0, 10.0, 50.0])
def test_butterworth_band_passes_have_the_low_pass_factor(sections: int, printed: float, q: float) -> None:
    network = band_pass("butterworth", sections, q)
    assert band_pass_bandwidth(network, q) * q == pytest.approx(printed, abs=2e-6)


# n equal sections: the factors of equal poles re the overall bandwidth, same note
@pytest.mark.parametrize(
    ("sections", "printed"), [(2, 1.220331), (3, 1.155395), (4, 1.128499), (5, 1.113845), (6, 1.104637)]
)
def test_synchronous_band_passes(sections: int, printed: float) -> None:
    network = band_pass("synchronous", sections, 20.0)
    assert band_pass_bandwidth(network, 20.0) * 20.0 == pytest.approx(printed, abs=2e-6)


# Chebyshev low-passes, re the 3 dB point below the peak; recomputed in the checks list only, 1e-4
@pytest.mark.parametrize(
    ("ripple", "order", "printed"),
    [
        (0.5, 2, 1.0714),
        (0.5, 3, 0.9992),
        (0.5, 4, 0.9749),
        (1.0, 2, 1.0292),
        (1.0, 3, 0.9509),
        (1.0, 4, 0.9245),
        (3.0, 2, 0.8637),
        (3.0, 3, 0.7735),
        (3.0, 4, 0.7441),
    ],
)
def test_chebyshev_low_passes(ripple: float, order: int, printed: float) -> None:
    network = prototype("chebyshev", order, ripple)
    f = np.linspace(0.3, 1.05, 30001)
    size = np.abs(circuit.response(network, np.append(f, 0.0)))
    peak = size.max()
    edge = f[np.flatnonzero(size[:-1] >= peak / math.sqrt(2))[-1]]
    bandwidth = low_pass_bandwidth(network) * (size[-1] / peak) ** 2
    assert bandwidth / edge == pytest.approx(printed, abs=1.2e-4)
