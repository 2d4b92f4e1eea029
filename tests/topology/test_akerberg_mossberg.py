"""The Akerberg-Mossberg section: equations, amplifier effects, rounding, margins."""

from __future__ import annotations

import numpy as np
import pytest

from synth import circuit
from synth.topology.akerberg_mossberg import TOPOLOGY
from tests.topology import placed


def test_second_integrator_swings_no_further_than_the_output() -> None:
    """R3 = R5/(R6 w0 C2): U2 has the output's amplitude at the centre, U3 a third of it."""
    network = placed.section_network(TOPOLOGY, placed.values(TOPOLOGY, 10e3, 10.0, 1.0, 1e-9, 2.2e-9))
    voltages = dict(zip(network.unknowns, np.abs(circuit.node_voltages(network, [10e3])[0]), strict=True))
    assert voltages["s1l"] == pytest.approx(1.0, rel=1e-5)
    assert voltages["s1x"] == pytest.approx(1 / 3, rel=1e-5)


def test_margin() -> None:
    """45 degrees with a far second pole; with R5 = R6, 7 to 23."""
    assert placed.margin(TOPOLOGY, "ADA4625-1") > 45
    assert placed.margin(TOPOLOGY, "ADA4625-1", R6=390.0) < 25
