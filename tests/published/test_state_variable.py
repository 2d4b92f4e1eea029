"""The state-variable section by the engine, with the signal at either input of the summer, against printed figures."""

from __future__ import annotations

import math

import pytest

from synth.circuit.network import GROUND, Network
from synth.topology.state_variable import TOPOLOGY
from tests.support.networks import Board, pole_pair
from tests.topology.placed import ideal, realized, section_network, values


def at_the_inverting_input(r: float, r1: float, r2: float, c: float, gain_bandwidth: float = 1e13) -> Network:
    """Franco's form (sec. 3.7): R3 from the source, R4 and R5 meet at the summer's (-), R1 and R2 at its (+)."""
    board = Board()
    for name, a, b, ohm in (
        ("R3", "in", "m", r),
        ("R4", "l", "m", r),
        ("R5", "h", "m", r),
        ("R2", "out", "p", r2),
        ("R1", "p", GROUND, r1),
        ("R6", "h", "m2", r),
        ("R7", "out", "m3", r),
    ):
        board.resistor(name, a, b, ohm)
    board.capacitor("C1", "m2", "out", c)
    board.capacitor("C2", "m3", "l", c)
    for ref, plus, minus, out in (("U1", "p", "m", "h"), ("U2", GROUND, "m2", "out"), ("U3", GROUND, "m3", "l")):
        board.op_amp(ref, plus, minus, out, gain_bandwidth)
    return board.network()


def test_franco_example() -> None:
    """Franco, 3rd ed., Example 3.18: 1 kHz, 10 Hz wide, 10 nF: R = 15.9155k, R2/R1 = 299; Q 100, +100."""
    parts = values(TOPOLOGY, 1e3, 100.0, 1.0, 10e-9, 10e-9)
    assert (parts["R6"], parts["R7"]) == pytest.approx((15915.5, 15915.5), rel=2e-6)
    frequency, q, response = realized(at_the_inverting_input(parts["R6"], 1e3, 299e3, 10e-9), 1e3)
    assert (frequency, q) == pytest.approx((1000.0, 100.0), rel=1e-6)
    assert response == pytest.approx(100.0, rel=1e-5)


def test_stocked_parts_of_franco_example() -> None:
    """Example 3.18 with R = 15.8k, 1k and 301k: 1007.31 Hz, Q 100.667 (recomputed in the checks list)."""
    got = pole_pair(at_the_inverting_input(15.8e3, 1e3, 301e3, 10e-9), 1e3)
    assert got == pytest.approx((1007.31, 100.667), abs=6e-3)


@pytest.mark.parametrize("q", [10.0, 100.0])
def test_same_pole_pair_with_the_signal_at_the_other_input(q: float) -> None:
    """The program's form: the gain is -R2/R3 whatever the Q, 40 dB smaller here than in Franco's form."""
    parts = values(TOPOLOGY, 1e3, q, 1.0, 10e-9, 10e-9)
    got = realized(section_network(TOPOLOGY, parts, center=1e3), 1e3)
    assert got[:2] == pytest.approx((1000.0, q), rel=1e-6)
    assert got[2] == pytest.approx(-1.0, rel=1e-5)


def test_first_order_shift_by_finite_gain_bandwidth() -> None:
    """Signal at the (+), Q = 10: -0.850 e and d(1/Q) = -3.985 e (recomputed in the checks list)."""
    e = 1e-6
    parts = values(TOPOLOGY, 10e3, 10.0, 1.0, 1e-9, 1e-9)
    frequency, q = pole_pair(section_network(TOPOLOGY, parts, ideal(10e3 / e)), 10e3)
    assert (frequency / 10e3 - 1) / e == pytest.approx(-0.850, rel=2e-3)
    assert (1 / q - 0.1) / e == pytest.approx(-3.985, rel=2e-3)


def test_first_order_shift_with_the_signal_at_the_inverting_input() -> None:
    """Equal resistors, Q = 10: -0.800 e and d(1/Q) = -4.980 e, worse for Q (recomputed in the checks list)."""
    e = 1e-6
    network = at_the_inverting_input(1 / (2 * math.pi * 10e3 * 1e-9), 1e3, 29e3, 1e-9, 10e3 / e)
    frequency, q = pole_pair(network, 10e3)
    assert (frequency / 10e3 - 1) / e == pytest.approx(-0.800, rel=2e-3)
    assert (1 / q - 0.1) / e == pytest.approx(-4.980, rel=2e-3)
