"""The mid-rail of a single supply as part of the circuit."""

from __future__ import annotations

import numpy as np
import pytest

from synth import circuit
from synth.model.chain import Chain, StageTarget
from synth.topology import multiple_feedback
from synth.topology.place import Draft, Reference, Surroundings, place
from synth.topology.reference import BUFFERED, DIVIDER
from tests.support.networks import UNIT_SENSOR, op_amp, stocks

STOCKS = stocks()
MODEL = op_amp(output_resistance=40.0, gain_bandwidth=1e12, dc_gain=1e12)
SECTION = {"R1A": 15e3, "R1B": 475.0, "R2": 30.1e3, "C1": 1e-9, "C2": 1e-9}
LEGS = {"RT": 10e3, "RB": 10e3, "CD": 1e-5}


def chain(*references: Reference, sections: int = 1) -> Chain:
    draft = Draft(multiple_feedback.TOPOLOGY, StageTarget(1.0, 1.0, 30e3, 8.0), MODEL, SECTION)
    around = Surroundings(30e3, 27.0, UNIT_SENSOR, None, 0.0, references)
    return place([draft] * sections, STOCKS, around)


def test_divider_stands_first_and_its_supply_is_at_signal_ground() -> None:
    placed = chain(Reference(DIVIDER, None, LEGS))
    assert placed.stages[0].kind == "reference"
    assert placed.stages[0].op_amp == ""
    assert placed.part("R1").nodes == ("vcc", "ref")
    network = circuit.build_network(placed)
    assert "vcc" not in network.unknowns
    f = np.array([0.1, 10.0])
    at = network.unknowns.index("ref")
    got = circuit.injected_voltages(network, "ref", f)[:, at]
    # 10k || 10k || 10 uF with its series loss; the section hangs on it by its (+) and R1B: behind R1A and C only
    loss = placed.part("C1").loss_tangent / (2 * np.pi * 30e3 * 1e-5)
    divider = 1 / (2e-4 + 1 / (loss + 1 / (2j * np.pi * f * 1e-5)))
    load = 1 / (1 / divider + 1 / (15e3 + 475.0))
    np.testing.assert_allclose(got, load, rtol=1e-4)


def test_sections_return_to_the_reference() -> None:
    placed = chain(Reference(DIVIDER, None, LEGS))
    section = placed.stages[1]
    nodes = [placed.part(ref).nodes for ref in section.parts]
    assert not any("0" in ends for ends in nodes)
    assert sum("ref" in ends for ends in nodes) == 2  # R1B and the (+) input


def test_two_references_share_the_stages_in_order() -> None:
    placed = chain(Reference(DIVIDER, None, LEGS), Reference(DIVIDER, None, LEGS), sections=4)
    grounds = [
        {node for ref in stage.parts for node in placed.part(ref).nodes if node.startswith("ref")}
        for stage in placed.stages[2:]
    ]
    assert grounds == [{"ref"}, {"ref"}, {"ref2"}, {"ref2"}]
    refs = [part.ref for part in placed.parts]
    assert len(refs) == len(set(refs))


def test_a_large_decoupling_is_a_ground() -> None:
    """The response tends to that of a dual supply as the reference's impedance goes to zero."""
    plain = circuit.response(circuit.build_network(chain()), [29e3, 30e3, 31e3])
    values = {"RT": 100.0, "RB": 100.0, "CD": 1e-5}
    held = circuit.response(circuit.build_network(chain(Reference(DIVIDER, None, values))), [29e3, 30e3, 31e3])
    np.testing.assert_allclose(held, plain, rtol=0.01)


def test_follower_lowers_the_impedance_at_low_frequency() -> None:
    buffered = {"RT": 10e3, "RB": 10e3, "CD": 1e-6, "RO": 10.0, "CO": 1e-6}
    network = circuit.build_network(chain(Reference(BUFFERED, MODEL, buffered)))
    got = abs(circuit.injected_voltages(network, "ref", [10.0])[0, network.unknowns.index("ref")])
    assert got == pytest.approx(10.0, rel=0.01)
    assert circuit.is_stable(circuit.poles(network, 30e3))
