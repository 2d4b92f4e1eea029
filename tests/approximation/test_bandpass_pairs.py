"""Bandpass pole pairs: what the chain of them does, for every family."""

from __future__ import annotations

import math

import numpy as np
import pytest

from synth.approximation import FAMILIES, PROTOTYPES, bandpass_pairs, half_power_frequency
from synth.errors import InfeasibleError


def magnitude(family: str, sections: int, f: np.ndarray, center: float, bandwidth: float) -> np.ndarray:
    """Product of the sections' responses, each one at its peak, over its value at the centre."""
    h = np.ones_like(f, dtype=complex)
    at = np.ones(1, dtype=complex)
    for pair in bandpass_pairs(family, sections, center, bandwidth):
        h = h / (1 + 1j * pair.q * (f / pair.frequency - pair.frequency / f))
        at = at / (1 + 1j * pair.q * (center / pair.frequency - pair.frequency / center))
    return np.abs(h) / np.abs(at)


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("sections", [1, 2, 3, 4])
@pytest.mark.parametrize("fraction", [0.01, 0.1, 0.6])
def test_half_power_points_are_the_bandwidth_apart(family: str, sections: int, fraction: float) -> None:
    """At f0 (sqrt(1 + b^2/4) +- b/2), b = B/f0, the chain is 3.01 dB below the centre, and not outside them."""
    center = 60e3
    root = math.sqrt(1 + fraction**2 / 4)
    edges = center * np.array([root - fraction / 2, root + fraction / 2])
    got = magnitude(family, sections, edges, center, fraction * center)
    np.testing.assert_allclose(got, 1 / math.sqrt(2), rtol=1e-7)
    outside = magnitude(family, sections, edges[1] * np.geomspace(1.001, 30, 200), center, fraction * center)
    assert float(outside.max()) < 1 / math.sqrt(2)


@pytest.mark.parametrize("family", FAMILIES)
def test_one_section_is_the_same_in_every_family(family: str) -> None:
    (pair,) = bandpass_pairs(family, 1, 1000.0, 50.0)
    assert pair.frequency == pytest.approx(1000.0, rel=1e-9)
    assert pair.q == pytest.approx(20.0, rel=1e-7)


@pytest.mark.parametrize("family", FAMILIES)
def test_pairs_come_by_rising_q_then_frequency(family: str) -> None:
    pairs = bandpass_pairs(family, 4, 1e5, 5e3)
    keys = [(round(p.q, 9), p.frequency) for p in pairs]
    assert keys == sorted(keys)
    assert all(p.q > 0.5 for p in pairs)


@pytest.mark.parametrize("ripple", [0.1, 0.5, 1.0])
@pytest.mark.parametrize("sections", [2, 3])
def test_ripple_of_a_chebyshev_chain(ripple: float, sections: int) -> None:
    """Largest over smallest response between the ripple edges is the ripple."""
    edge = half_power_frequency(PROTOTYPES["chebyshev"](sections, ripple))
    f = np.linspace(1 - 0.5 / edge * 0.02, 1 + 0.5 / edge * 0.02, 20001)
    h = np.ones_like(f, dtype=complex)
    for pair in bandpass_pairs("chebyshev", sections, 1.0, 0.02, ripple):
        h = h / (1 + 1j * pair.q * (f / pair.frequency - pair.frequency / f))
    inside = np.abs(f - 1 / f) <= 0.02 / edge
    decibels = 20 * np.log10(np.abs(h[inside]))
    assert decibels.max() - decibels.min() == pytest.approx(ripple, abs=2e-3)


@pytest.mark.parametrize("order", [1, 2, 3, 4, 5])
def test_gaussian_magnitude_is_the_series_of_the_exponential(order: int) -> None:
    """1/|H|^2 = sum of w^2k/k! up to the order (from memory)."""
    poles = PROTOTYPES["gaussian"](order, 0.0)
    assert np.all(poles.real < 0)
    w = np.array([0.3, 1.0, 2.0])
    inverse = np.prod(np.abs(1j * w[:, None] - poles) ** 2, axis=1) / np.prod(np.abs(poles) ** 2)
    want = sum(w ** (2 * k) / math.factorial(k) for k in range(order + 1))
    np.testing.assert_allclose(inverse, want, rtol=1e-9)


def test_unknown_family() -> None:
    with pytest.raises(InfeasibleError, match=r'filter.family = "elliptic" has no design here; choose one of '):
        bandpass_pairs("elliptic", 2, 1e3, 1e2)
