"""From stages on paper to parts: references, packages, nodes, what the stock says."""

from __future__ import annotations

import re
from collections import Counter

import numpy as np
import pytest

from synth import circuit
from synth.errors import CatalogError
from synth.model.chain import Chain, StageTarget
from synth.model.part import OpAmp
from synth.spec import Sensor
from synth.topology import multiple_feedback, non_inverting
from synth.topology.place import Draft, amplifier_references, place
from tests.support.networks import around, op_amp, stocks, stray_op_amp

SINGLE = stray_op_amp(type="SINGLE", packages=((1, "SINGLE-1"), (2, "SINGLE-2")))
DUAL = stray_op_amp(type="DUAL", packages=((2, "DUAL-2"),))
QUAD = stray_op_amp(type="QUAD", packages=((4, "QUAD-4"),))
SECTION = {"R1A": 15e3, "R1B": 475.0, "R2": 30.1e3, "C1": 1e-9, "C2": 1e-9}
GAIN = {"CC": 1e-7, "RB": 10e3, "RG": 100.0, "RF": 1.91e3}
STOCKS = stocks()


def section(model: OpAmp) -> Draft:
    return Draft(multiple_feedback.TOPOLOGY, StageTarget(1.0, 1.0, 30e3, 8.0), model, SECTION)


def gain(model: OpAmp) -> Draft:
    return Draft(non_inverting.TOPOLOGY, StageTarget(20.0), model, GAIN)


def chain(*drafts: Draft) -> Chain:
    sensor = Sensor(scale=20.0, input_unit="A", resistance=25.0)
    return place(drafts, STOCKS, around(30e3, sensor, 10e3))


@pytest.mark.parametrize(
    ("models", "references"),
    [
        ([SINGLE, SINGLE], ("U1", "U2")),
        ([DUAL, DUAL, DUAL], ("U1A", "U1B", "U2A")),
        ([DUAL, SINGLE, DUAL], ("U1A", "U2", "U1B")),
        ([QUAD] * 5, ("U1A", "U1B", "U1C", "U1D", "U2A")),
        ([DUAL, QUAD, DUAL, QUAD], ("U1A", "U2A", "U1B", "U2B")),
        ([], ()),
    ],
)
def test_amplifiers_share_packages_where_the_type_is_not_sold_alone(
    models: list[OpAmp], references: tuple[str, ...]
) -> None:
    assert amplifier_references(models) == references


def test_references_are_unique_and_counted_along_the_chain() -> None:
    parts = chain(gain(DUAL), section(DUAL), gain(SINGLE), section(SINGLE)).parts
    refs = [part.ref for part in parts]
    assert len(refs) == len(set(refs))
    assert all(re.fullmatch(r"[RCU]\d+[A-D]?", ref) for ref in refs)
    for letter in "RC":
        numbers = [int(ref[1:]) for ref in refs if ref[0] == letter]
        assert numbers == list(range(1, len(numbers) + 1))
    assert [ref for ref in refs if ref[0] == "U"] == ["U1A", "U1B", "U2", "U3"]


def test_stages_follow_each_other_to_the_output() -> None:
    placed = chain(gain(SINGLE), section(SINGLE), gain(SINGLE), section(DUAL))
    assert [stage.name for stage in placed.stages] == ["gain 1", "bandpass 1", "gain 2", "bandpass 2"]
    assert placed.stages[0].input_node == circuit.TERMINAL
    assert placed.stages[-1].output_node == circuit.OUTPUT
    for before, after in zip(placed.stages, placed.stages[1:], strict=False):
        assert before.output_node == after.input_node
    assert sum((stage.parts for stage in placed.stages), ()) == tuple(part.ref for part in placed.parts)
    assert list(placed.models) == ["DUAL", "SINGLE"]


def test_every_node_is_connected() -> None:
    placed = chain(gain(SINGLE), section(SINGLE), section(SINGLE))
    ends = Counter(node for part in placed.parts for node in part.nodes)
    assert all(count >= 2 for node, count in ends.items() if node not in ("sig", "out", "0"))
    assert {"sig", "out", "0"} <= set(ends)
    assert np.all(np.isfinite(circuit.response(circuit.build_network(placed), [0.0, 1.0, 30e3, 1e9])))
    assert circuit.is_stable(circuit.poles(circuit.build_network(placed), 30e3))


def test_inner_nodes_of_two_stages_are_apart() -> None:
    placed = chain(section(SINGLE), section(SINGLE))
    inner = [
        {n for ref in stage.parts for n in placed.part(ref).nodes} - {stage.input_node, stage.output_node, "0"}
        for stage in placed.stages
    ]
    assert not inner[0] & inner[1]


def test_cascade_of_buffered_stages_is_the_product_of_its_stages() -> None:
    """The output resistance alone loads: with none, the chain is the product (common practice, no source)."""
    stiff = op_amp(type="STIFF", output_resistance=1e-6)
    one = place([section(stiff)], STOCKS, around(30e3))
    two = place([section(stiff), section(stiff)], STOCKS, around(30e3))
    f = 30e3 * np.linspace(0.8, 1.2, 9)
    single, double = (circuit.response(circuit.build_network(c), f) for c in (one, two))
    np.testing.assert_allclose(double, single**2, rtol=1e-6)


def test_values_carry_what_the_stock_says() -> None:
    placed = chain(gain(SINGLE), section(SINGLE))
    resistor, film = placed.part("R1"), placed.part("C2")
    assert resistor.tolerance == STOCKS.resistors.tolerance
    assert resistor.stray == STOCKS.resistors.stray_capacitance
    assert resistor.temperature_coefficient == STOCKS.resistors.temperature_coefficient_for(10e3)
    assert film.technology == STOCKS.capacitors.dielectric
    assert film.loss_tangent == STOCKS.capacitors.loss_tangent_at(30e3)
    assert film.tolerance == STOCKS.capacitors.tolerance
    coupling = placed.part("C1")
    assert coupling.technology == STOCKS.coupling.stock_for(1e-7).dielectric
    assert coupling.size == STOCKS.coupling.stock_for(1e-7).size_for(1e-7)
    assert placed.load_resistance == 10e3


def test_part_by_reference() -> None:
    placed = chain(section(SINGLE))
    assert placed.part("U1").nodes == ("0", "s1m", "out")
    with pytest.raises(KeyError, match="R99"):
        placed.part("R99")
    with pytest.raises(TypeError, match="U1 is an op amp and has no number"):
        _ = placed.part("U1").number


def test_a_coupling_capacitor_that_nobody_stocks() -> None:
    draft = Draft(non_inverting.TOPOLOGY, StageTarget(20.0), SINGLE, {**GAIN, "CC": 1.234e-7})
    with pytest.raises(CatalogError, match=r"coupling capacitor 1.234e-07 F: not stocked; take a value of "):
        chain(draft)
