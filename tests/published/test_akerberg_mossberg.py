"""The Akerberg-Mossberg section by the engine, with R5 = R6 as published, against recomputed designs and shifts."""

from __future__ import annotations

import math

import pytest

from synth.topology.akerberg_mossberg import TOPOLOGY
from tests.support.networks import pole_pair
from tests.topology.placed import ideal, realized, section_network, values

R = 10e3  # [ohm] R3, R4, R5, R6


def matched(q: float = 25.0, gain: float = 1.0) -> dict[str, float]:
    """f0 = 10 kHz."""
    c = 1 / (2 * math.pi * 10e3 * R)
    return values(TOPOLOGY, 10e3, q, gain, c, c, R3=R, R5=R, R6=R)


def test_worked_example() -> None:
    """10 kHz, Q = 25, R = 10k: Q R = 250k; 10 kHz, 25, -1 (recomputed in the checks list)."""
    parts = matched()
    assert [parts[key] for key in ("R1", "R2", "R4")] == pytest.approx([250e3, 250e3, 10e3], rel=1e-9)
    frequency, q, response = realized(section_network(TOPOLOGY, parts), 10e3)
    assert (frequency, q) == pytest.approx((10e3, 25.0), rel=1e-6)
    assert response == pytest.approx(-1.0, rel=1e-5)


@pytest.mark.parametrize(("gain_bandwidth", "frequency", "q"), [(5e6, 9979.70, 25.0008), (1e6, 9900.46, 25.0013)])
def test_large_shifts(gain_bandwidth: float, frequency: float, q: float) -> None:
    """10 kHz, Q = 25, unity gain (recomputed in the checks list); 1e-5."""
    got = pole_pair(section_network(TOPOLOGY, matched(), ideal(gain_bandwidth)), 10e3)
    assert got == pytest.approx((frequency, q), rel=1e-5)


@pytest.mark.parametrize("gain", [1.0, 5.0])
def test_first_order_shift_by_finite_gain_bandwidth(gain: float) -> None:
    """df0/f0 = -(1 + H0/2Q) e, dQ/Q = +H0 e/2Q (checks list; -1.050 e, +0.05 e at Q = 10, unity gain)."""
    e = 1e-6
    frequency, q = pole_pair(section_network(TOPOLOGY, matched(10.0, gain), ideal(10e3 / e)), 10e3)
    assert (frequency / 10e3 - 1) / e == pytest.approx(-(1 + gain / 20), rel=2e-3)
    assert (q / 10 - 1) / e == pytest.approx(gain / 20, abs=5e-3)
