"""Strays, loss and the amplifier's figures as they enter the circuit of a chain."""

from __future__ import annotations

import math

import numpy as np
import pytest

from synth import circuit
from synth.spec import Sensor
from tests.support.networks import (
    K,
    amplifier,
    capacitor,
    chain_of,
    check_stray_costs_q,
    gain_chain,
    op_amp,
    pole_pair,
    resistor,
    section_chain,
    stray_op_amp,
)

IDEAL = {"gain_bandwidth": 1e14, "dc_gain": 1e12, "output_resistance": 1e-3}


@pytest.mark.parametrize("q", [5.0, 10.0, 20.0])
def test_resistor_body_across_the_feedback(q: float) -> None:
    """Q/(1 + 2 Q^2 C3/C), first order in C3; C3 chosen for a loss of 2 %."""
    c3 = 0.01 * 1e-9 / q**2
    check_stray_costs_q(section_chain(q), section_chain(q, resistor_stray=c3), c3, 1e-9)


@pytest.mark.parametrize("q", [5.0, 20.0])
def test_amplifier_pins_across_the_feedback(q: float) -> None:
    c3 = 0.01 * 1e-9 / q**2
    model = op_amp(**IDEAL, stray_output_to_inverting=c3)
    check_stray_costs_q(section_chain(q), section_chain(q, model=model), c3, 1e-9)


def test_strays_of_a_real_section() -> None:
    """0.14 pF across the feedback turns Q 20 into 18 at 1 nF (design guidance; 2 %)."""
    model = op_amp(**IDEAL, stray_output_to_inverting=0.1e-12)
    network = circuit.build_network(section_chain(20.0, model=model, resistor_stray=0.04e-12))
    assert pole_pair(network, 10e3)[1] == pytest.approx(20 / (1 + 2 * 400 * 0.14e-3), rel=0.02)


@pytest.mark.parametrize("q", [5.0, 20.0])
@pytest.mark.parametrize("tangent", [1e-4, 1e-3])
def test_capacitor_loss(q: float, tangent: float) -> None:
    """1/Q' = 1/Q + 2 tan d: both capacitors of equal value lose in series; first order, 3 %."""
    _, plain = pole_pair(circuit.build_network(section_chain(q)), 10e3)
    _, lossy = pole_pair(circuit.build_network(section_chain(q, loss_tangent=tangent)), 10e3)
    assert (1 / lossy - 1 / plain) / (2 * tangent) == pytest.approx(1.0, rel=0.03)


def test_loss_is_a_series_resistance() -> None:
    """tan d/(w0 C) in series at the chain's centre, noisy, and no path for DC."""
    chain = chain_of(
        (capacitor("C1", "sig", "out", 1e-9, 1e-3), resistor("R1", "out", "0", 1e3)),
        sensor=Sensor(scale=1.0, input_unit="V", resistance=50.0),
    )
    network = circuit.build_network(chain)
    loss = 1e-3 / (2 * np.pi * 10e3 * 1e-9)
    f = np.array([100.0, 10e3, 1e6])
    z = 50.0 + loss + 1 / (2j * np.pi * f * 1e-9)
    np.testing.assert_allclose(circuit.response(network, f), 1e3 / (1e3 + z), rtol=1e-9)
    assert abs(circuit.response(network, [0.0])[0]) < 1e-12
    parallel = z * 1e3 / (1e3 + z)
    density = circuit.noise(network, f).density
    np.testing.assert_allclose(density**2, 4 * K * 300.15 * parallel.real, rtol=1e-8)


def test_every_figure_of_the_amplifier_is_in_the_circuit() -> None:
    model = stray_op_amp()
    for chain, to_ground in (
        (section_chain(model=model), 4e-12 + 2e-12 + 2e-12),  # (+) on ground: differential beside common mode
        (gain_chain(20.0, model), 2e-12 + 2e-12),
    ):
        elements = {e.name: e for e in circuit.build_network(chain).elements}
        assert elements["U1_gm"].value / elements["U1_g0"].value == pytest.approx(model.dc_gain)
        assert elements["U1_gm"].value / elements["U1_c0"].value == pytest.approx(2 * math.pi * model.gain_bandwidth)
        assert elements["U1_g2"].value / elements["U1_c2"].value == pytest.approx(2 * math.pi * 300e6)
        assert 1 / elements["U1_go"].value == pytest.approx(model.output_resistance)
        assert elements["U1_cstray"].nodes == ("out", "m")
        assert elements["U1_cstray"].value == pytest.approx(0.1e-12)
        assert elements["U1_cminus"].value == pytest.approx(to_ground)
    assert elements["U1_cdiff"].nodes == ("p", "m")
    assert elements["U1_cdiff"].value == pytest.approx(4e-12)
    assert elements["U1_cplus"].value == pytest.approx(2e-12)


def test_a_follower_has_no_capacitance_across_nothing() -> None:
    model = stray_op_amp()
    chain = chain_of((resistor("R1", "sig", "0", 1e3), amplifier("U1", "sig", "out", "out", model)), (model,))
    names = {e.name for e in circuit.build_network(chain).elements}
    assert "U1_cstray" not in names
    assert "U1_cminus" not in names


def test_closed_loop_gain_with_finite_loop_gain() -> None:
    """(1 + RF/RG)/(1 + (1 + RF/RG)/A), A = A0/((1 + j f A0/GBW)(1 + j f/f2)), behind the coupling."""
    model = op_amp(dc_gain=2e4, gain_bandwidth=5e6, second_pole=8e6, output_resistance=1e-3)
    chain = gain_chain(20.0, model, center=10e3)
    f = np.array([1e3, 1e4, 1e5, 1e6])
    a = 2e4 / (1 + 1j * f * 2e4 / 5e6) / (1 + 1j * f / 8e6)
    coupling = 1j * f / 100.0 / (1 + 1j * f / 100.0)
    got = circuit.response(circuit.build_network(chain), f)
    np.testing.assert_allclose(got, coupling * 20 / (1 + 20 / a), rtol=1e-6)


def test_load_at_the_output() -> None:
    source = Sensor(scale=1.0, input_unit="V", resistance=1e3)
    chain = chain_of((resistor("R1", "sig", "out", 1e3),), sensor=source, load=2e3, load_capacitance=1e-9)
    f = np.array([1e3, 1e5])
    z = 1 / (1 / 2e3 + 2j * np.pi * f * 1e-9)
    np.testing.assert_allclose(circuit.response(circuit.build_network(chain), f), z / (z + 2e3), rtol=1e-12)


def test_ambient_sets_the_noise_temperature() -> None:
    parts = (resistor("R1", "sig", "out", 1e3), resistor("R2", "out", "0", 1e3))
    cold, warm = (
        circuit.noise(circuit.build_network(chain_of(parts, ambient=ambient)), [1e3]).density[0]
        for ambient in (0.0, 100.0)
    )
    assert (warm / cold) ** 2 == pytest.approx(373.15 / 273.15, rel=1e-12)
