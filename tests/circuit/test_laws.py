"""Laws that every circuit obeys, on random ones."""

from __future__ import annotations

import numpy as np
import pytest

from synth import circuit
from synth.circuit.sensor import sensor_network
from synth.model.part import OpAmp
from synth.spec import Rolloff, Sensor
from tests.support.networks import (
    KELVIN,
    Board,
    K,
    check_delay_is_phase_slope,
    check_delay_is_sum_over_poles_and_zeros,
    check_noise_is_real_part_of_impedance,
    check_parts_resonate,
    check_poles_and_zeros_make_the_response,
    check_reciprocity,
    first_order,
    gain_chain,
    op_amp,
    random_chain,
    random_one_port,
    section_chain,
    stray_op_amp,
)

CENTER = 100e3
BAND = CENTER * np.linspace(0.7, 1.4, 15)
DECADES = np.geomspace(1e2, 1e7, 41)


@pytest.mark.parametrize("seed", range(12))
def test_adjoint_group_delay_is_the_slope_of_the_phase(seed: int) -> None:
    check_delay_is_phase_slope(random_chain(seed, CENTER), BAND)


@pytest.mark.parametrize("seed", range(12))
def test_group_delay_is_the_sum_over_poles_and_zeros(seed: int) -> None:
    check_delay_is_sum_over_poles_and_zeros(random_chain(seed, CENTER, largest=13), BAND, CENTER)


@pytest.mark.parametrize("seed", range(12))
def test_poles_and_zeros_make_the_response(seed: int) -> None:
    check_poles_and_zeros_make_the_response(random_chain(seed, CENTER, largest=13), BAND, CENTER)


@pytest.mark.parametrize("model", [op_amp(), stray_op_amp()])
@pytest.mark.parametrize("center", [10e3, 100e3])
def test_poles_and_zeros_of_real_stages(model: OpAmp, center: float) -> None:
    """Poles beyond 1e7 times the reference are left out, which costs about f/1e7 reference near the band."""
    for chain in (section_chain(center=center, model=model, resistor_stray=4e-14), gain_chain(20.0, model, center)):
        network = circuit.build_network(chain)
        check_poles_and_zeros_make_the_response(network, center * np.linspace(0.95, 1.05, 11), center)
        check_delay_is_sum_over_poles_and_zeros(network, center * np.linspace(0.9, 1.1, 5), center)


@pytest.mark.parametrize("order", [1, 3, 5])
@pytest.mark.parametrize("inductance", [None, 1e-3])
def test_zeros_at_infinity_stay_there(order: int, inductance: float | None) -> None:
    """A low-pass has no finite zero, however many poles it has and whatever stands behind it."""
    sensor = Sensor(
        scale=20.0,
        input_unit="A",
        resistance=25.0,
        inductance=inductance,
        capacitance=1e-10,
        noise=1e-9,
        rolloff=(Rolloff("low-pass", corner=CENTER, order=order),),
    )
    assert circuit.zeros(sensor_network(sensor, 27.0), CENTER).size == 0


def test_poles_of_unilateral_stages_are_their_corners() -> None:
    board, before = Board(), "in"
    for k, corner in enumerate((10.0, 1e3, 5e4)):
        first_order(board, f"P{k}", before, f"n{k}", corner)
        before = f"n{k}"
    got = circuit.poles(board.network(before), 1e3)
    np.testing.assert_allclose(got, -2 * np.pi * np.array([10.0, 1e3, 5e4]), rtol=1e-9)
    assert circuit.is_stable(got)
    assert not circuit.is_stable(-got)
    assert circuit.resonant_pairs(got) == ()


def test_poles_of_a_resonance() -> None:
    board = Board()
    board.resistor("R", "in", "out", 10e3)
    board.inductor("L", "out", "0", 1e-3)
    board.capacitor("C", "out", "0", 1e-9)
    pole_pairs = circuit.resonant_pairs(circuit.poles(board.network(), 1e5))
    omega = 1 / np.sqrt(1e-3 * 1e-9)
    np.testing.assert_allclose(pole_pairs, [(omega / (2 * np.pi), 10e3 * omega * 1e-9)], rtol=1e-9)


@pytest.mark.parametrize("seed", range(40))
def test_noise_of_a_passive_one_port_is_that_of_its_resistance(seed: int) -> None:
    network, port = random_one_port(seed)
    check_noise_is_real_part_of_impedance(network, port, DECADES)


@pytest.mark.parametrize("seed", range(20))
def test_passive_networks_are_reciprocal(seed: int) -> None:
    network, port = random_one_port(seed)
    check_reciprocity(network, "n1", port, DECADES)


@pytest.mark.parametrize(
    "source",
    [
        {"resistance": 25.0},
        {"resistance": 25.0, "inductance": 1e-3},
        {"resistance": 1e3, "capacitance": 1e-9},
        {"resistance": 50.0, "inductance": 10e-3, "capacitance": 200e-12},
    ],
)
@pytest.mark.parametrize(
    "rolloff", [(), (Rolloff("high-pass", corner=48e3),), (Rolloff("resonant", frequency=1e5, q=5.0),)]
)
def test_sensor_noise_is_that_of_its_source_impedance(source: dict[str, float], rolloff: tuple[Rolloff, ...]) -> None:
    """4kT Re Z(f) at the terminals, the rolloff noiseless; Z = R + jwL, with C across."""
    sensor = Sensor(scale=1.0, input_unit="A", rolloff=rolloff, **source)  # type: ignore[arg-type]
    network = sensor_network(sensor, 27.0)
    density = circuit.noise(network, DECADES).density
    s = 2j * np.pi * DECADES
    z = source["resistance"] + s * source.get("inductance", 0.0)
    z = z / (1 + s * source.get("capacitance", 0.0) * z)
    np.testing.assert_allclose(density**2, 4 * K * (27.0 + KELVIN) * z.real, rtol=1e-8)
    check_noise_is_real_part_of_impedance(network, "sig", DECADES)


@pytest.mark.parametrize("inductance", [None, 1e-3])
@pytest.mark.parametrize("capacitance", [None, 1e-9])
def test_given_sensor_noise_stands_at_the_terminals(inductance: float | None, capacitance: float | None) -> None:
    sensor = Sensor(
        scale=20.0, input_unit="A", resistance=25.0, inductance=inductance, capacitance=capacitance, noise=0.7e-9
    )
    density = circuit.noise(sensor_network(sensor, 27.0), DECADES).density
    np.testing.assert_allclose(density, 0.7e-9, rtol=1e-9)


@pytest.mark.parametrize("q", [2.0, 10.0, 25.0])
@pytest.mark.parametrize("center", [3e3, 100e3])
def test_parts_of_a_section_resonate_as_designed(q: float, center: float) -> None:
    check_parts_resonate(section_chain(q, center), "R1", "R2", "R3", "C1", "C2")


def test_contributions_add_up_and_each_part_is_listed() -> None:
    chain = gain_chain(20.0, op_amp())
    spectrum = circuit.noise(circuit.build_network(chain), [1e3, 10e3])
    np.testing.assert_allclose((spectrum.contributions**2).sum(axis=0), spectrum.density**2, rtol=1e-12)
    assert {"R1", "R2", "R3", "U1 voltage noise", "U1 current noise"} <= set(spectrum.labels)


def test_noise_of_a_non_inverting_stage_by_hand() -> None:
    """en, in through R2 || R3 and through R1 (behind its coupling), and 4kTR of each, at 10 kHz, gain 20."""
    model = op_amp(gain_bandwidth=1e12, dc_gain=1e12, output_resistance=1e-3)
    chain = gain_chain(20.0, model)
    r1, r2, r3, f = 100e3, 100.0, 1900.0, 10e3
    c1, s = chain.part("C1").number, 2j * np.pi * f
    z = abs(1 / (1 / r1 + s * c1))  # at (+), the sensor without resistance
    kt4 = 4 * K * 300.15
    en = model.voltage_noise**2 * (1 + model.voltage_noise_corner / f)
    i2 = model.current_noise**2 * (1 + model.current_noise_corner / f)
    square = en * 400 + i2 * r3**2 + i2 * z**2 * 400 + kt4 / r1 * z**2 * 400 + kt4 * r3 + kt4 / r2 * r3**2
    got = circuit.noise(circuit.build_network(chain), [f]).density[0]
    assert got == pytest.approx(np.sqrt(square), rel=1e-6)
