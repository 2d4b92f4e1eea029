"""The Tow-Thomas section by the engine, against printed designs and printed amplifier shifts."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from synth import circuit
from synth.topology.tow_thomas import TOPOLOGY
from tests.support.networks import pole_pair
from tests.topology.placed import ideal, realized, section_network, values


def test_franco_example() -> None:
    """Franco, 3rd ed., Example 3.19: 8 kHz, 200 Hz wide, 20 dB, 1 nF; five digits; low-pass output -12.041 dB at DC."""
    r = 1 / (2 * np.pi * 8e3 * 1e-9)
    parts = values(TOPOLOGY, 8e3, 40.0, 10.0, 1e-9, 1e-9)
    assert [parts[key] for key in ("R1", "R2", "R3", "R4")] == pytest.approx([79577, 795770, 19894, 19894], rel=2e-5)
    assert r == pytest.approx(19894, rel=2e-5)
    network = section_network(TOPOLOGY, parts, center=8e3)
    frequency, q, response = realized(network, 8e3)
    assert (frequency, q) == pytest.approx((8000.0, 40.0), rel=1e-6)
    assert response == pytest.approx(-10.0, rel=1e-5)
    low_pass = abs(circuit.response(replace(network, output="s1l"), [0.01])[0])
    assert 20 * np.log10(low_pass) == pytest.approx(-12.041, abs=5e-4)


def test_franco_example_of_gain_bandwidth() -> None:
    """Franco, 3rd ed., Example 6.9: 10 kHz, Q = 25 at 100 MHz, Q off by 1 %; 9998.98 Hz, 25.2525 recomputed."""
    parts = values(TOPOLOGY, 10e3, 25.0, 1.0, 1e-9, 1e-9)
    got = pole_pair(section_network(TOPOLOGY, parts, ideal(100e6)), 10e3)
    assert got == pytest.approx((9998.98, 25.2525), rel=1e-5)
    assert got[1] / 25 - 1 == pytest.approx(0.01, rel=0.02)


@pytest.mark.parametrize(
    ("gain_bandwidth", "frequency", "q"),
    [(20e6, 9994.89, 26.3150), (10e6, 9989.76, 27.7738), (5e6, 9979.42, 31.2282)],
)
def test_large_shifts(gain_bandwidth: float, frequency: float, q: float) -> None:
    """10 kHz, Q = 25, unity gain (recomputed in the checks list); at 5 MHz the gain has become 1.2490."""
    parts = values(TOPOLOGY, 10e3, 25.0, 1.0, 1e-9, 1e-9)
    network = section_network(TOPOLOGY, parts, ideal(gain_bandwidth))
    assert pole_pair(network, 10e3) == pytest.approx((frequency, q), rel=1e-5)
    assert q == pytest.approx(25 / (1 - 4 * 25 * 10e3 / gain_bandwidth), rel=2e-3)  # Franco, sec. 6.5
    if gain_bandwidth == 5e6:
        peak = np.abs(circuit.response(network, np.linspace(9950.0, 10000.0, 501))).max()
        assert peak == pytest.approx(1.2490, abs=1e-4)


@pytest.mark.parametrize(("gain", "moved", "damped"), [(1.0, -1.050, -4.005), (10.0, -1.5, -4.012)])
def test_first_order_shift_by_finite_gain_bandwidth(gain: float, moved: float, damped: float) -> None:
    """df0/f0 = -(1 + H0/2Q) e, d(1/Q) = -4 e; figures for Q = 10 recomputed in the checks list."""
    e = 1e-6
    parts = values(TOPOLOGY, 10e3, 10.0, gain, 1e-9, 1e-9)
    frequency, q = pole_pair(section_network(TOPOLOGY, parts, ideal(10e3 / e)), 10e3)
    assert (frequency / 10e3 - 1) / e == pytest.approx(moved, rel=2e-3)
    assert (1 / q - 0.1) / e == pytest.approx(damped, rel=0.01)


@pytest.mark.parametrize("q", [10.0, 20.0, 40.0])
def test_loss_by_finite_dc_gain(q: float) -> None:
    """dQ/Q = -(2 Q + 3)/A0 and df0/f0 = -2/A0 (recomputed in the checks list: within 0.3 %, -1.95 to -1.99)."""
    a0 = 1e7
    parts = values(TOPOLOGY, 10e3, q, 1.0, 1e-9, 1e-9)
    frequency, lowered = pole_pair(section_network(TOPOLOGY, parts, ideal(1e15, a0)), 10e3)
    assert (lowered / q - 1) * a0 == pytest.approx(-(2 * q + 3), rel=0.005)
    assert (frequency / 10e3 - 1) * a0 == pytest.approx(-2.0, rel=0.03)


def test_loss_with_gain() -> None:
    """Gain 5, Q = 20: -46.97/A0 (recomputed in the checks list)."""
    parts = values(TOPOLOGY, 10e3, 20.0, 5.0, 1e-9, 1e-9)
    _, lowered = pole_pair(section_network(TOPOLOGY, parts, ideal(1e15, 1e7)), 10e3)
    assert (lowered / 20 - 1) * 1e7 == pytest.approx(-46.97, rel=0.005)
