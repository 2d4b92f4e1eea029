"""First stages on a virtual ground: equations as published, the engine against them, and the drawn slots."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from synth import circuit
from synth.circuit.dc_path import dc_path_problem
from synth.circuit.sensor_figures import sensor_response
from synth.model.chain import Chain, StageTarget
from synth.model.part import OpAmp
from synth.spec import Sensor
from synth.topology import FIRST_STAGES, GAINS, Topology, charge_amplifier, inverting, transimpedance
from synth.topology.place import Draft, place
from tests.support.networks import K, around, op_amp, stocks

T = 300.15
PHOTODIODE = Sensor(scale=0.5, input_unit="W", output="current", capacitance=100e-12)
PIEZO = Sensor(scale=12e-12, input_unit="N", output="charge", capacitance=500e-12)
VALUES = {
    "transimpedance": {"RF": 100e3, "CF": 4.7e-12},
    "charge-amplifier": {"RS": 100.0, "CF": 1e-9, "RF": 1e6},
    "inverting": {"RIN": 1e3, "RF": 10e3},
}
PLAIN = stocks()


def chain_for(topology: Topology, model: OpAmp, sensor: Sensor, center: float = 40e3, **values: float) -> Chain:
    """One stage behind its sensor, without a loss or a resistor's stray where a closed form has none."""
    draft = Draft(topology, StageTarget(1.0), model, VALUES[topology.name] | values)
    chain = place([draft], PLAIN, around(center, sensor))
    return replace(chain, parts=tuple(replace(p, stray=0.0, loss_tangent=0.0) for p in chain.parts))


def gain(chain: Chain, f: np.ndarray) -> np.ndarray:
    """Output over the sensor's output."""
    return circuit.response(circuit.build_network(chain), f) / sensor_response(chain.sensor, f)


def test_they_are_registered_as_gains() -> None:
    assert set(FIRST_STAGES) == set(VALUES)
    assert all(GAINS[name] is topology and topology.kind == "gain" for name, topology in FIRST_STAGES.items())


@pytest.mark.parametrize("name", VALUES)
def test_every_input_has_a_bias_path(name: str) -> None:
    sensor = {"transimpedance": PHOTODIODE, "charge-amplifier": PIEZO}.get(name, Sensor(scale=1.0, input_unit="A"))
    chain = chain_for(FIRST_STAGES[name], op_amp(), sensor)
    assert dc_path_problem(chain) == ""
    assert circuit.is_stable(circuit.poles(circuit.build_network(chain), 40e3))


# ---------------------------------------------------------------------------------------------------------------
# Transimpedance


def test_transimpedance_bandwidth() -> None:
    """Natural frequency sqrt(GBW/(2 pi RF C)): 10 MHz, 100 kohm, 104.7 pF give 389.9 kHz (Graeme, ch. 3, by hand)."""
    model = op_amp(gain_bandwidth=10e6, dc_gain=1e9, output_resistance=1e-3)
    chain = chain_for(transimpedance.TOPOLOGY, model, PHOTODIODE)
    (pair,) = circuit.resonant_pairs(circuit.poles(circuit.build_network(chain), 40e3))
    assert pair[0] == pytest.approx(389.9e3, rel=1e-4)
    assert transimpedance.natural_frequency(100e3, 104.7e-12, 10e6) == pytest.approx(389.9e3, rel=1e-4)
    assert pair[1] == pytest.approx(transimpedance.quality(100e3, 4.7e-12, 100e-12, 10e6), rel=1e-4)


def test_transimpedance_transfer() -> None:
    model = op_amp(gain_bandwidth=10e6, dc_gain=1e5, output_resistance=1e-3)
    f = np.geomspace(1e2, 5e6, 25)
    want = [transimpedance.transfer(x, 100e3, 4.7e-12, 100e-12, 10e6, 1e5) for x in f.tolist()]
    np.testing.assert_allclose(gain(chain_for(transimpedance.TOPOLOGY, model, PHOTODIODE), f), want, rtol=1e-5)


@pytest.mark.parametrize(("resistance", "capacitance"), [(10e3, 20e-12), (100e3, 100e-12), (1e6, 1e-9)])
def test_the_classical_feedback_capacitance(resistance: float, capacitance: float) -> None:
    """Graeme, ch. 3: near sqrt(C/(2 pi RF GBW)); 45 degrees by straight lines.

    In truth |T| = 1 lies at x = 1.272 of the feedback's corner, from x^2 = sqrt(1 + x^2), where it gives 51.8 degrees;
    the pole of RF with all capacitance, not infinitely far below, leaves the rest.
    """
    cf = transimpedance.feedback_capacitance(resistance, capacitance, 10e6)
    assert cf == pytest.approx(math.sqrt(capacitance / (2 * math.pi * resistance * 10e6)), rel=0.3)
    model = op_amp(gain_bandwidth=10e6, dc_gain=1e9, output_resistance=1e-3)
    sensor = Sensor(scale=1.0, input_unit="W", output="current", capacitance=capacitance)
    chain = chain_for(transimpedance.TOPOLOGY, model, sensor, RF=resistance, CF=cf)
    margin = circuit.phase_margin(circuit.build_network(chain), "U1", 1e2, 1e8)
    assert margin.crossing is not None
    corner, pole = (1 / (2 * math.pi * resistance * c) for c in (cf, capacitance + cf))
    assert margin.crossing / corner == pytest.approx(1.272, abs=0.02)
    left = 90.0 - math.degrees(math.atan(margin.crossing / pole))
    assert margin.phase_margin == pytest.approx(51.8 + left, abs=0.4)


def test_transimpedance_noise() -> None:
    """At the output: en |1 + Zf/Zin|, 4kT RF and in through |Zf| (Graeme, ch. 5); en (1 + Cin/CF) at the top."""
    model = op_amp(gain_bandwidth=1e15, dc_gain=1e15, output_resistance=1e-3)
    chain = chain_for(transimpedance.TOPOLOGY, model, PHOTODIODE)
    f = np.array([1e4, 1e5, 1e6, 30e6])
    s = 2j * np.pi * f
    zf = 1 / (1 / 100e3 + s * 4.7e-12)
    en = 3e-9 * np.sqrt(1 + 100 / f)
    current = np.sqrt(1e-12**2 * (1 + 300 / f) + 4 * K * T / 100e3)
    want = np.hypot(en * np.abs(1 + zf * s * 100e-12), current * np.abs(zf))
    got = circuit.noise(circuit.build_network(chain), f)
    np.testing.assert_allclose(got.density, want, rtol=1e-5)
    voltage = got.contributions[got.labels.index("U1 voltage noise")]
    assert voltage[-1] == pytest.approx(3e-9 * (1 + 100 / 4.7), rel=1e-3)


# ---------------------------------------------------------------------------------------------------------------
# Charge amplifier


def test_charge_amplifier_transfer() -> None:
    """-1/CF between its corner and the amplifier; RS = 0 in the closed form."""
    model = op_amp(gain_bandwidth=10e6, dc_gain=1e5, output_resistance=1e-3)
    f = np.geomspace(10.0, 1e6, 25)
    want = [charge_amplifier.transfer(x, 1e6, 1e-9, 500e-12, 10e6, 1e5) for x in f.tolist()]
    chain = chain_for(charge_amplifier.TOPOLOGY, model, PIEZO, RS=1e-3)
    np.testing.assert_allclose(gain(chain, f), want, rtol=1e-5)
    assert charge_amplifier.corner(1e6, 1e-9) == pytest.approx(159.15, abs=0.01)
    assert abs(gain(chain, np.array([159.155]))[0]) == pytest.approx(1e9 / math.sqrt(2), rel=1e-3)


def test_charge_amplifier_forgets_its_cable() -> None:
    """Twice the source's capacitance moves the gain by (dC/CF)/A at most: A is 250 at 40 kHz, j."""
    model = op_amp(gain_bandwidth=10e6, dc_gain=1e6)
    longer = Sensor(scale=12e-12, input_unit="N", output="charge", capacitance=1e-9)
    at = np.array([40e3])
    one, two = (abs(gain(chain_for(charge_amplifier.TOPOLOGY, model, s), at)[0]) for s in (PIEZO, longer))
    assert abs(two / one - 1) < 1e-3


def test_charge_amplifier_noise() -> None:
    """en (1 + Cin/CF) at the output, and the charge sqrt(4kT/RF)/(2 pi f) of its resistor over CF."""
    model = op_amp(gain_bandwidth=1e15, dc_gain=1e15, current_noise=1e-20, output_resistance=1e-3)
    chain = chain_for(charge_amplifier.TOPOLOGY, model, PIEZO, RS=1e-3)
    got = circuit.noise(circuit.build_network(chain), [40e3])
    parts = dict(zip(got.labels, got.contributions[:, 0], strict=True))
    assert parts["U1 voltage noise"] == pytest.approx(3e-9 * math.sqrt(1 + 100 / 40e3) * 1.5, rel=1e-4)
    resistor = next(p.ref for p in chain.parts if p.role.startswith("DC path"))
    want = math.sqrt(4 * K * T / 1e6) / (2 * math.pi * 40e3) / 1e-9
    assert parts[resistor] == pytest.approx(want, rel=1e-4)


def test_the_input_resistor_keeps_the_phase() -> None:
    """A source of 500 pF straight on the input loads the output through CF; RS takes it off."""
    model = op_amp(gain_bandwidth=50e6, output_resistance=50.0, second_pole=150e6)
    margins = [
        circuit.phase_margin(
            circuit.build_network(chain_for(charge_amplifier.TOPOLOGY, model, PIEZO, RS=rs)), "U1", 1e2, 1e9
        ).phase_margin
        for rs in (1e-3, 200.0)
    ]
    assert margins[0] < 45.0 < margins[1]


# ---------------------------------------------------------------------------------------------------------------
# Inverting


@pytest.mark.parametrize("frequency", [1e3, 1e5, 2e6])
def test_inverting_gain(frequency: float) -> None:
    """-(RF/RIN)/(1 + (1 + RF/RIN)/A) (Franco, 3rd ed., sec. 1.3 and 1.6)."""
    model = op_amp(gain_bandwidth=10e6, dc_gain=1e5, output_resistance=1e-3)
    chain = chain_for(inverting.TOPOLOGY, model, Sensor(scale=1.0, input_unit="V"))
    got = gain(chain, np.array([frequency]))[0]
    assert abs(got) == pytest.approx(10 * inverting.magnitude(10.0, frequency, 10e6, 1e5), rel=1e-4)
    if frequency == 1e3:
        assert got.real == pytest.approx(-10, rel=2e-3)


def test_inverting_ratio() -> None:
    ratio = inverting.resistor_ratio(10.0, 5e5, 10e6, 1e5)
    assert ratio is not None
    assert ratio > 10.0
    assert ratio * inverting.magnitude(ratio, 5e5, 10e6, 1e5) == pytest.approx(10.0, rel=1e-9)
    assert inverting.resistor_ratio(30.0, 5e5, 10e6, 1e5) is None
