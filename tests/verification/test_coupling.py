"""Layout demands against the circuit with the stray in it: gain error at the limit, poles about the critical value."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

import synth
from synth import circuit
from synth.circuit.network import Element
from synth.model.judgement import LayoutDemand
from synth.verification.coupling import SHARE

SPECS = {
    "two stages of gain": ("60 dB", "100 kHz", "10 kHz", ""),
    "steep and narrow": ("80 dB", "40 kHz", "3 kHz", "[filter]\nsections = 2\n"),
    "fast": ("60 dB", "400 kHz", "60 kHz", ""),
    "three sections": ("70 dB", "20 kHz", "2 kHz", "[filter]\nsections = 3\n"),
    "a single supply": ("66 dB", "60 kHz", "6 kHz", "single"),
}
ACCURACY = 0.03


def made(name: str) -> synth.Design:
    gain, center, bandwidth, end = SPECS[name]
    negative = "" if end == "single" else 'negative = "-12 V"'
    return synth.design(
        synth.parse_spec(f"""
format = 1
title = "Layout of a chain, an invented scenario"
[target]
center_frequency = "{center}"
bandwidth = "{bandwidth}"
full_scale = "1 mV"
smallest = "100 uV"
gain = "{gain}"
accuracy = "{100 * ACCURACY} %"
[sensor]
scale = "1 mV/mV"
resistance = "200 ohm"
[supply]
positive = "12 V"
{negative}
{"" if end == "single" else end}
""".replace('full_scale = "1 mV"', 'full_scale = "0.2 mV"').replace('"100 uV"', '"20 uV"')),
        builds=0,
    )


@pytest.fixture(scope="module", params=SPECS)
def design(request: pytest.FixtureRequest) -> synth.Design:
    return made(request.param)


def with_stray(network: circuit.Network, demand: LayoutDemand, capacitance: float) -> circuit.Network:
    stray = Element("stray", "capacitance", (demand.output, demand.node), capacitance)
    return replace(network, elements=(*network.elements, stray))


def test_a_stray_at_its_limit_takes_its_share(design: synth.Design) -> None:
    network, center = design.network(), [design.chain.center_frequency]
    plain = abs(circuit.response(network, center)[0])
    assert design.verification.layout
    for demand in design.verification.layout:
        moved = abs(circuit.response(with_stray(network, demand, demand.limit), center)[0])
        assert abs(moved / plain - 1) == pytest.approx(SHARE * ACCURACY, rel=0.1), demand


def test_poles_cross_at_the_critical_stray(design: synth.Design) -> None:
    network, center = design.network(), design.chain.center_frequency
    critical = [demand for demand in design.verification.layout if demand.critical is not None]
    assert critical, "some stray makes every such chain oscillate"
    for demand in critical[:8]:
        assert demand.critical is not None
        for factor, stable in ((0.8, True), (1.25, False)):
            poles = circuit.poles(with_stray(network, demand, factor * demand.critical), center)
            assert circuit.is_stable(poles, center) is stable, (demand, factor)


def test_what_never_oscillates_does_not(design: synth.Design) -> None:
    network, center = design.network(), design.chain.center_frequency
    for demand in design.verification.layout:
        if demand.critical is None:
            for capacitance in np.geomspace(demand.limit, 100 * demand.limit, 7):
                assert circuit.is_stable(circuit.poles(with_stray(network, demand, capacitance), center), center)


def test_demands_are_sorted_and_lead_backwards(design: synth.Design) -> None:
    limits = [demand.limit for demand in design.verification.layout]
    assert limits == sorted(limits)
    order = ["sensor", *(stage.name for stage in design.chain.stages)]
    for demand in design.verification.layout:
        assert order.index(demand.source) > order.index(demand.victim)
