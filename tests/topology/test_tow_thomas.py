"""The Tow-Thomas section: equations, amplifier effects, rounding, what each resistor tunes."""

from __future__ import annotations

import pytest

from synth.topology.tow_thomas import TOPOLOGY
from tests.topology import placed


@pytest.mark.parametrize("name", ["OPA1612", "OPA1656", "LM4562", "ADA4898-1", "OPA820", "ADA4625-1", "TL072"])
def test_margin(name: str) -> None:
    """45 degrees with every type that has 60 at unity gain: the inverter's resistors are small enough."""
    assert placed.margin(TOPOLOGY, name) > 45
