"""The dual-amplifier section by the engine, with R4 = R5 as published, against published amplifier effects."""

from __future__ import annotations

import math

import pytest

from synth.topology.dual_amplifier import TOPOLOGY
from tests.support.networks import pole_pair
from tests.topology.placed import ideal, realized, section_network, values


def matched(frequency: float, q: float, c: float = 1e-9) -> dict[str, float]:
    """R1 = R3 = R4 = R5 = 1/(w0 C), R = Q/(w0 C) without a shunt: the gain is 2."""
    r = 1 / (2 * math.pi * frequency * c)
    parts = values(TOPOLOGY, frequency, q, 1.0, c, c, R3=r, R4=r, R5=r)
    assert parts["R1"] == pytest.approx(r)
    return parts | {"RIN": q * r, "RG": math.inf}


@pytest.mark.parametrize("q", [5.0, 10.0, 20.0, 50.0])
def test_first_order_shift_by_finite_gain_bandwidth(q: float) -> None:
    """df0/f0 = -2 e, no shift of Q: Antoniou 1969 (from memory; recomputed in the checks list)."""
    e = 1e-5 / q
    frequency, shifted = pole_pair(section_network(TOPOLOGY, matched(10e3, q), ideal(10e3 / e)), 10e3)
    assert (frequency / 10e3 - 1) / e == pytest.approx(-2.0, rel=0.01)
    assert (shifted / q - 1) / e == pytest.approx(0.0, abs=0.01)


def test_large_shift_by_finite_gain_bandwidth() -> None:
    """e = 0.01, Q = 20: 0.98058 f0 and Q 19.847 (recomputed in the checks list)."""
    frequency, q = pole_pair(section_network(TOPOLOGY, matched(10e3, 20.0), ideal(1e6)), 10e3)
    assert frequency / 10e3 == pytest.approx(0.98058, abs=5e-6)
    assert q == pytest.approx(19.847, abs=5e-4)


def test_printed_point() -> None:
    """2 kHz, Q = 25 at 1 MHz: 1992.05 Hz, 24.990, gain 1.9952 (recomputed in the checks list)."""
    frequency, q, response = realized(section_network(TOPOLOGY, matched(2e3, 25.0), ideal(1e6), 2e3), 2e3)
    assert frequency == pytest.approx(1992.05, abs=0.005)
    assert q == pytest.approx(24.990, abs=5e-4)
    assert abs(response) == pytest.approx(1.9952, abs=5e-4)


@pytest.mark.parametrize("q", [10.0, 20.0, 40.0])
def test_loss_by_finite_dc_gain(q: float) -> None:
    """dQ/Q = -4 Q/A0 and next to no shift of frequency (recomputed in the checks list; within 0.3 %)."""
    frequency, lowered = pole_pair(section_network(TOPOLOGY, matched(10e3, q), ideal(1e13, 1e5 * q)), 10e3)
    assert (lowered / q - 1) * 1e5 / 4 == pytest.approx(-1.0, rel=0.003)
    assert (frequency / 10e3 - 1) * 1e5 * q == pytest.approx(0.0, abs=0.1)
