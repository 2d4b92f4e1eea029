"""The Tow-Thomas section: equations, amplifier effects, rounding, what each resistor tunes."""

from __future__ import annotations

import pytest

from synth.topology.tow_thomas import TOPOLOGY
from tests.topology import placed


@pytest.mark.parametrize("seed", range(12))
def test_round_trip(seed: int) -> None:
    placed.check_round_trip(TOPOLOGY, seed)


@pytest.mark.parametrize("q", [5.0, 20.0])
def test_amplifier_effects_are_those_of_the_circuit(q: float) -> None:
    placed.check_amplifier_effects(TOPOLOGY, q)


@pytest.mark.parametrize("q", [3.0, 20.0])
def test_noise_gain_is_that_of_the_circuit(q: float) -> None:
    placed.check_noise_gain(TOPOLOGY, q)


@pytest.mark.parametrize("seed", range(10))
def test_rounding_reaches_the_target_with_real_amplifiers(seed: int) -> None:
    placed.check_rounding(TOPOLOGY, seed)


def test_every_input_has_a_dc_path() -> None:
    placed.check_dc_paths(TOPOLOGY)


@pytest.mark.spice
def test_simulators_agree() -> None:
    placed.check_simulators(TOPOLOGY)


def test_trimmer_leaves_bandwidth_and_gain() -> None:
    placed.check_trimmer(TOPOLOGY)


@pytest.mark.parametrize("name", ["OPA1612", "OPA1656", "LM4562", "ADA4898-1", "OPA820", "ADA4625-1", "TL072"])
def test_margin(name: str) -> None:
    """45 degrees with every type that has 60 at unity gain: the inverter's resistors are small enough."""
    assert placed.margin(TOPOLOGY, name) > 45
