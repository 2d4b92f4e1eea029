"""Design equations of the topologies: round trips and limits."""

from __future__ import annotations

import math
import re

import numpy as np
import pytest

from synth import circuit
from synth.topology import GAINS, SECTIONS, SectionTopology, multiple_feedback, non_inverting
from tests.support.networks import gain_chain, op_amp, pole_pair, section_chain


@pytest.mark.parametrize("seed", range(20))
def test_multiple_feedback_round_trip(seed: int) -> None:
    """Parts from (f0, Q, gain), and back by w0^2 = 1/(R1 R2 C1 C2), Q, -(R2/R1A) C2/(C1 + C2) (Franco, sec. 3.5)."""
    rng = np.random.default_rng(seed)
    f0, q = 10 ** rng.uniform(3, 6), rng.uniform(1, 25)
    c1, c2 = 10 ** rng.uniform(-10, -8, 2)
    gain = rng.uniform(0.05, 0.9) * q**2 * (c1 + c2) / c1
    r1a, r1b, r2 = (float(r) for r in multiple_feedback.resistors(f0, q, gain, c1, c2))
    assert r1b > 0
    shunt = r1a * r1b / (r1a + r1b)
    assert 1 / (2 * math.pi * math.sqrt(shunt * r2 * c1 * c2)) == pytest.approx(f0, rel=1e-12)
    assert math.sqrt(r2 / shunt) * math.sqrt(c1 * c2) / (c1 + c2) == pytest.approx(q, rel=1e-12)
    assert r2 / r1a * c2 / (c1 + c2) == pytest.approx(gain, rel=1e-12)


@pytest.mark.parametrize("q", [2.0, 10.0])
def test_most_gain_of_a_multiple_feedback_section(q: float) -> None:
    """2 Q^2 for equal capacitors: there R1B is open, beyond it negative."""
    below, beyond = (float(multiple_feedback.resistors(1e3, q, 2 * q**2 * x, 1e-8, 1e-8)[1]) for x in (0.999, 1.001))
    assert below > 100 * float(multiple_feedback.resistors(1e3, q, 1.0, 1e-8, 1e-8)[1])
    assert beyond < 0


def test_multiple_feedback_topology_agrees_with_its_function() -> None:
    topology = multiple_feedback.TOPOLOGY
    one = np.ones(3)
    given = {"C1": 1e-9 * one, "C2": 2.2e-9 * one}
    solved = topology.solve(1e4 * one, 8 * one, 2 * one, given)
    want = multiple_feedback.resistors(1e4 * one, 8 * one, 2 * one, given["C1"], given["C2"])
    for key, value in zip(("R1A", "R1B", "R2"), want, strict=True):
        np.testing.assert_array_equal(solved[key], value)
    assert topology.fixed(one, one, one, given) == {}


@pytest.mark.parametrize("q", [5.0, 20.0])
def test_first_order_shifts_are_those_of_the_circuit(q: float) -> None:
    """The topology's -Q e, +Q e and -2 Q^2/A0 against poles of the engine (Franco, 3rd ed., Example 6.12)."""
    topology = multiple_feedback.TOPOLOGY
    ratio = 1e-4 / q
    model = op_amp(gain_bandwidth=10e3 / ratio, dc_gain=1e15, output_resistance=1e-3)
    frequency, shifted = pole_pair(circuit.build_network(section_chain(q, model=model)), 10e3)
    assert (frequency / 10e3 - 1, shifted / q - 1) == pytest.approx(topology.shift(q, ratio), rel=0.01)
    model = op_amp(gain_bandwidth=1e16, dc_gain=1e6 * q**2, output_resistance=1e-3)
    _, lowered = pole_pair(circuit.build_network(section_chain(q, model=model)), 10e3)
    assert lowered / q - 1 == pytest.approx(topology.loss(q, 1e6 * q**2), rel=0.01)


def test_noise_gain_of_a_multiple_feedback_section() -> None:
    """The amplifier's own noise appears at the centre times 1 + 2 Q^2, whatever the gain (by nodal analysis)."""
    for q in (3.0, 10.0, 20.0):
        chain = section_chain(q, model=op_amp(gain_bandwidth=1e14, dc_gain=1e12, voltage_noise_corner=0.0))
        spectrum = circuit.noise(circuit.build_network(chain), [10e3])
        own = spectrum.contributions[spectrum.labels.index("U1 voltage noise"), 0]
        assert own / 3e-9 == pytest.approx(abs(1 + 2 * q**2), rel=2e-3)
        assert multiple_feedback.TOPOLOGY.noise_gain(q) == pytest.approx(own / 3e-9, rel=0.06)


@pytest.mark.parametrize("gain", [1.5, 20.0, 300.0])
@pytest.mark.parametrize("frequency", [1e3, 100e3])
def test_closed_loop_magnitude(gain: float, frequency: float) -> None:
    """|1/(1 + gain/A)| of the equations against the engine, coupling far below."""
    model = op_amp(gain_bandwidth=20e6, dc_gain=1e5, output_resistance=1e-3)
    network = circuit.build_network(gain_chain(gain, model, frequency))
    coupling = abs(1j * 100 / (1 + 1j * 100))
    got = abs(circuit.response(network, [frequency])[0]) / gain / coupling
    assert got == pytest.approx(non_inverting.magnitude(gain, frequency, 20e6, 1e5), rel=1e-6)


def test_largest_gain_is_where_the_spread_is_used_up() -> None:
    args = (100e3, 80e6, 1e6, 0.3)
    gain = non_inverting.largest_gain(*args, 0.005)
    assert non_inverting.spread(gain, *args) == pytest.approx(0.005, rel=1e-6)
    assert non_inverting.spread(1.1 * gain, *args) > 0.005
    assert non_inverting.largest_gain(70e6, 80e6, 1e6, 0.3, 0.005) == 1.0


def test_spread_is_the_larger_of_both_directions() -> None:
    """To second order 1 - |1/(1 + x)|, x = j G f/GBW: -30 % of GBW moves it by (1/0.49 - 1) (G f/GBW)^2/2."""
    x = 20 * 100e3 / 80e6
    assert non_inverting.spread(20.0, 100e3, 80e6, 1e9, 0.3) == pytest.approx((1 / 0.49 - 1) * x**2 / 2, rel=2e-3)


def test_coupling_corner() -> None:
    """1/(2 pi R C): 10 kohm and 1 uF, 15.915 Hz."""
    assert non_inverting.coupling_corner(10e3, 1e-6) == pytest.approx(15.9155, rel=1e-5)


@pytest.mark.parametrize("topology", [*SECTIONS.values(), *GAINS.values()])
def test_every_topology_is_complete(topology: object) -> None:
    """Slots with unique keys, known node names, a source, one output; a section's equations name its slots."""
    slots = topology.slots  # type: ignore[attr-defined]
    keys = [slot.key for slot in slots if slot.kind != "op-amp"]
    assert len(keys) == len(set(keys))
    assert topology.source  # type: ignore[attr-defined]
    assert all(re.fullmatch(r"[A-Za-z0-9]+", node) for slot in slots for node in slot.nodes)
    assert any("in" in slot.nodes for slot in slots)
    assert sum(slot.nodes[2] == "out" for slot in slots if slot.kind == "op-amp") == 1
    if isinstance(topology, SectionTopology):
        assert set(topology.tuned) <= set(keys)
        assert topology.trimmer in topology.tuned
        assert len(topology.capacitors) == 2
        assert topology.largest_q > 1
        assert topology.limit
