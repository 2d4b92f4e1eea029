"""The state-variable section: equations, amplifier effects, rounding, what each resistor tunes."""

from __future__ import annotations

import pytest

from synth.topology.state_variable import TOPOLOGY
from tests.topology import placed


def test_damping_resistor_leaves_frequency_and_gain() -> None:
    """R1 sets Q alone: why the signal enters at the summer's (+)."""
    parts = placed.values(TOPOLOGY, 10e3, 10.0, 1.5, 1e-9, 1e-9)
    before = placed.realized(placed.section_network(TOPOLOGY, parts), 10e3)
    after = placed.realized(placed.section_network(TOPOLOGY, parts | {"R1": 0.9 * parts["R1"]}), 10e3)
    assert after[1] > 1.05 * before[1]
    assert after[0] == pytest.approx(before[0], rel=1e-6)
    assert after[2] == pytest.approx(before[2], rel=1e-5)


def test_most_gain() -> None:
    """2 Q - 1 at equal reactances: there R1 is open, beyond it negative."""
    most = 2 * 5.0 - 1
    assert placed.values(TOPOLOGY, 10e3, 5.0, 0.999 * most, 1e-9, 1e-9)["R1"] > 100e3
    assert placed.values(TOPOLOGY, 10e3, 5.0, 1.001 * most, 1e-9, 1e-9)["R1"] < 0


@pytest.mark.parametrize("name", ["OPA1656", "LM4562", "ADA4898-1", "OPA820", "ADA4625-1", "TL072"])
def test_margin(name: str) -> None:
    """45 degrees with most types that have 60 at unity gain: the summer's resistors are small enough."""
    assert placed.margin(TOPOLOGY, name) > 45
