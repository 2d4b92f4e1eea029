"""The multiple-feedback section with Q enhancement by the engine, against printed amplifier shifts."""

from __future__ import annotations

import math

import pytest

from synth.topology.delyiannis_friend import TOPOLOGY
from tests.support.networks import pole_pair
from tests.topology.placed import ideal, section_network, values


def with_spread(spread: float, q: float) -> dict[str, float]:
    """Equal capacitors at 10 kHz with R2/R1 as wanted: 1/Q = 2/r - r RA/RB, r = sqrt(R2/R1) (checks list, 4.1)."""
    r = math.sqrt(spread)
    return values(TOPOLOGY, 10e3, q, 1.0, 1e-9, 1e-9, RB=10e3, RA=10e3 * (2 / r - 1 / q) / r)


@pytest.mark.parametrize("spread", [4.0, 16.0, 36.0])
@pytest.mark.parametrize("q", [5.0, 10.0, 30.0])
def test_first_order_shift_by_finite_gain_bandwidth(spread: float, q: float) -> None:
    """df0/f0 = -Q0/(1 - k)^2 e, Q0 = sqrt(R2/R1)/2, k = RA/(RA + RB); Q as much the other way.

    Schaumann, Van Valkenburg, Design of Analog Filters (from memory; recomputed in the checks list to 5 digits).
    """
    parts = with_spread(spread, q)
    r1 = parts["R1A"] * parts["R1B"] / (parts["R1A"] + parts["R1B"])
    assert parts["R2"] / r1 == pytest.approx(spread, rel=1e-9)
    k = parts["RA"] / (parts["RA"] + parts["RB"])
    e = 1e-5 / q
    frequency, shifted = pole_pair(section_network(TOPOLOGY, parts, ideal(10e3 / e)), 10e3)
    want = math.sqrt(spread) / 2 / (1 - k) ** 2
    assert (frequency / 10e3 - 1) / e == pytest.approx(-want, rel=1e-3)
    assert (shifted / q - 1) / e == pytest.approx(want, rel=2e-3)


def test_printed_shift() -> None:
    """R2/R1 = 16, Q = 10: -2.4200 e (recomputed in the checks list)."""
    frequency, _ = pole_pair(section_network(TOPOLOGY, with_spread(16.0, 10.0), ideal(10e9)), 10e3)
    assert (frequency / 10e3 - 1) / 1e-6 == pytest.approx(-2.4200, abs=2e-4)
