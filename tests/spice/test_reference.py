"""A single supply's mid-rail is part of the circuit: what it costs, by the tool and by two simulators."""

from __future__ import annotations

import re
from dataclasses import replace

import numpy as np
import pytest

import synth
from synth import api, circuit
from synth.model.chain import Chain
from synth.planning.reference import SHARE
from tests.spice.comparison import with_grounded_reference
from tests.support.simulators import SIMULATORS, Simulator

CENTER = 40e3
ACCURACY = 0.03
SPEC = f"""
format = 1
title = "Receiver of ninety decibels on a single supply, an invented scenario"
[target]
center_frequency = "40 kHz"
bandwidth = "4 kHz"
full_scale = "1 Pa"
smallest = "100 mPa"
gain = "90 dB"
accuracy = "{100 * ACCURACY} %"
[sensor]
scale = "50 uV/Pa"
resistance = "200 ohm"
[supply]
positive = "12 V"
[filter]
sections = 1
"""
pytestmark = pytest.mark.spice


@pytest.fixture(scope="module")
def made() -> synth.Design:
    return synth.design(synth.parse_spec(SPEC))


def with_bare_divider(chain: Chain) -> Chain:
    """The same chain on one divider of two 10 kohm resistors with 10 uF (loss 2.5 %, as X7R) to ground."""
    ideal = with_grounded_reference(chain)
    plan = {p.ref: p.nodes for p in chain.parts}
    parts = [
        replace(p, nodes=tuple("ref" if n.startswith("ref") else n for n in plan[p.ref])) for p in ideal.parts
    ]
    resistor = next(p for p in chain.parts if p.kind == "resistor")
    capacitor = next(p for p in chain.parts if p.value == 10e-6)
    parts += [
        replace(resistor, ref="R901", value=10e3, nodes=("vcc", "ref")),
        replace(resistor, ref="R902", value=10e3, nodes=("ref", "0")),
        replace(capacitor, ref="C901", nodes=("ref", "0")),
    ]
    return replace(ideal, parts=tuple(parts))


def simulated_gain(chain: Chain, simulator: Simulator) -> float:
    text = circuit.netlist_text(circuit.build_network(chain), "reference", [], CENTER, with_noise=False)
    return float(np.abs(simulator.response(text, [CENTER]))[0])


def told_by_the_tool(made: synth.Design) -> tuple[float, float]:
    """Gain over the ideal one with the reference chosen and with the bare divider, as the report says them."""
    caution = next(text for text in made.verification.cautions if text.startswith("mid-rail"))
    found = re.findall(r"by ([0-9.e+-]+) (%|dB)", caution)
    chosen, bare = (1 + float(n) / 100 if unit == "%" else 10 ** (float(n) / 20) for n, unit in found)
    return chosen, bare


@pytest.mark.parametrize("simulator", SIMULATORS, ids=lambda s: s.name)
def test_simulators_show_what_the_report_says(made: synth.Design, simulator: Simulator) -> None:
    chosen, bare = told_by_the_tool(made)
    ideal = simulated_gain(with_grounded_reference(made.chain), simulator)
    with_divider = simulated_gain(with_bare_divider(made.chain), simulator)
    assert with_divider / ideal == pytest.approx(bare, rel=0.02)  # three digits are printed
    assert not 0.5 < bare < 2, "a bare divider changes ninety decibels beyond recognition"
    as_built = simulated_gain(made.chain, simulator)
    assert as_built / ideal == pytest.approx(chosen, abs=2e-4)
    assert abs(as_built / ideal - 1) <= SHARE * ACCURACY * 1.01


def test_the_reference_is_bought_and_simulated(made: synth.Design) -> None:
    references = [s for s in made.chain.stages if s.kind == "reference"]
    assert references
    files = api.design_files(made)
    bill, netlist = files["bom.csv"].decode(), files["chain.cir"].decode()
    for ref in references[0].parts:
        assert re.search(rf"\b{re.sub('[A-D]$', '', ref)}\b", bill)
    assert re.search(r"^R\d+ 0 \w+ ", netlist, re.MULTILINE), "the divider's upper half goes to signal ground"
    assert "vcc" not in netlist


def test_every_bias_path_ends_on_the_reference(made: synth.Design) -> None:
    for stage in made.chain.stages:
        if stage.kind == "gain":
            bias = next(made.chain.part(r) for r in stage.parts if made.chain.part(r).role == "bias path")
            assert bias.nodes[1].startswith("ref")
