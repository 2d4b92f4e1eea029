"""The sensor's circuit against the closed form of each kind of rolloff."""

from __future__ import annotations

import numpy as np
import pytest

from synth import circuit
from synth.circuit.sensor import sensor_network, terminal_network
from synth.circuit.sensor_rolloff import first_order_corner
from synth.errors import CircuitError
from synth.spec import Motional, Rolloff, Sensor
from tests.support.networks import K, check_matches_reference, scattered

F = np.geomspace(1e2, 1e7, 51)


def gain(*rolloff: Rolloff, f: float | np.ndarray = F) -> np.ndarray:
    """Response of a sensor of 20 V per unit without impedance, over its scale."""
    sensor = Sensor(scale=20.0, input_unit="A", rolloff=rolloff)
    return circuit.response(sensor_network(sensor, 27.0), f) / 20.0


@pytest.mark.parametrize("order", [1, 2, 6])
def test_low_pass(order: int) -> None:
    want = (1 / (1 + 1j * F / 30e3)) ** order
    np.testing.assert_allclose(gain(Rolloff("low-pass", corner=30e3, order=order)), want, rtol=1e-12)


@pytest.mark.parametrize("order", [1, 2, 6])
def test_high_pass(order: int) -> None:
    want = (1j * F / 48e3 / (1 + 1j * F / 48e3)) ** order
    np.testing.assert_allclose(gain(Rolloff("high-pass", corner=48e3, order=order)), want, rtol=1e-10)


@pytest.mark.parametrize("q", [0.5, 5.0, 200.0])
def test_resonance(q: float) -> None:
    s = 1j * F / 60e3
    got = gain(Rolloff("resonant", frequency=60e3, q=q))
    np.testing.assert_allclose(got, (s / q) / (s**2 + s / q + 1), rtol=1e-9)
    assert gain(Rolloff("resonant", frequency=60e3, q=q), f=60e3)[0] == pytest.approx(1.0, rel=1e-12)


def test_factors_multiply() -> None:
    one, two = Rolloff("high-pass", corner=48e3), Rolloff("low-pass", corner=300e3, order=2)
    np.testing.assert_allclose(gain(one, two), gain(one) * gain(two), rtol=1e-12)


@pytest.mark.parametrize("shape", ["high-pass", "low-pass"])
@pytest.mark.parametrize(("loss", "emphasis"), [(0.12, 1.136), (0.20, 1.25)])
def test_loss_needs_its_reciprocal(shape: str, loss: float, emphasis: float) -> None:
    """12 % down needs 1.136 and not 1.12, 20 % down needs 1.25 and not 1.20 (by algebra)."""
    rolloff = Rolloff("loss", at=100e3, loss=loss, shape=shape)
    left = abs(gain(rolloff, f=100e3)[0])
    assert left == pytest.approx(1 - loss, rel=1e-12)
    assert 1 / left == pytest.approx(emphasis, abs=5e-4)


def test_corner_of_a_loss() -> None:
    """20 % down in a high-pass: fc/f = sqrt(1/0.64 - 1) = 0.75 exactly; the reciprocal in a low-pass."""
    assert first_order_corner(Rolloff("loss", at=1e5, loss=0.2, shape="high-pass")) == pytest.approx(0.75e5)
    assert first_order_corner(Rolloff("loss", at=1e5, loss=0.2, shape="low-pass")) == pytest.approx(1e5 / 0.75)
    assert first_order_corner(Rolloff("low-pass", corner=3e3)) == 3e3


def test_source_impedance_is_resistance_and_inductance_across_a_capacitance() -> None:
    """Open-circuit response 1/(1 + s C (R + s L)) and impedance at the terminals, by hand."""
    r, inductance, c = 25.0, 1e-3, 470e-12
    sensor = Sensor(scale=20.0, input_unit="A", resistance=r, inductance=inductance, capacitance=c)
    network = sensor_network(sensor, 27.0)
    s = 2j * np.pi * F
    series = r + s * inductance
    np.testing.assert_allclose(circuit.response(network, F), 20.0 / (1 + s * c * series), rtol=1e-9)
    at = network.unknowns.index("sig")
    z = circuit.injected_voltages(network, "sig", F)[:, at]
    np.testing.assert_allclose(z, series / (1 + s * c * series), rtol=1e-9)


def test_a_source_of_resistance_is_its_thevenin_equivalent() -> None:
    network = sensor_network(Sensor(scale=2.0, input_unit="A", resistance=1e3), 27.0)
    np.testing.assert_allclose(circuit.response(network, [1e3]), 2.0, rtol=1e-12)
    np.testing.assert_allclose(circuit.injected_voltages(network, "sig", [1e3])[:, -1], 1e3, rtol=1e-12)


def test_a_table_of_a_high_pass_is_the_high_pass() -> None:
    """Rows of a first-order high-pass, magnitudes only: its phase follows (minimum phase)."""
    f = np.geomspace(10e3, 200e3, 25)
    want = 1j * f / 48e3 / (1 + 1j * f / 48e3)
    table = Rolloff("table", points=tuple(zip(f.tolist(), np.abs(want).tolist(), strict=True)))
    np.testing.assert_allclose(gain(table, f=f), want, rtol=2e-3)


def impedance(sensor: Sensor) -> np.ndarray:
    """Impedance at the terminals by the engine [ohm]."""
    network = terminal_network(sensor, 27.0)
    return circuit.injected_voltages(network, "sig", F)[:, network.unknowns.index("sig")]


S = 2j * np.pi * F
MOTIONAL = Motional(resistance=2e3, inductance=0.1, capacitance=1e-10)
SOURCES = {
    "transformer": (
        Sensor(scale=3.0, input_unit="A", burden=50.0, magnetizing_inductance=5e-3),
        1 / (1 / 50.0 + 1 / (S * 5e-3)),
        3.0 * S * 5e-3 / (50.0 + S * 5e-3),
    ),
    "motional": (
        Sensor(scale=3.0, input_unit="A", motional=MOTIONAL, capacitance=1e-9),
        1 / (S * 1e-9 + 1 / (2e3 + S * 0.1 + 1 / (S * 1e-10))),
        3.0 / (1 + S * 1e-9 * (2e3 + S * 0.1 + 1 / (S * 1e-10))),
    ),
    "current": (
        Sensor(scale=3.0, input_unit="W", output="current", resistance=1e6, capacitance=20e-12),
        1 / (1e-6 + S * 20e-12),
        3.0 / (1e-6 + S * 20e-12),
    ),
    "charge": (
        Sensor(scale=3.0, input_unit="N", output="charge", resistance=1e9, capacitance=1e-9),
        1 / (1e-9 + S * 1e-9),
        3.0 * S / (1e-9 + S * 1e-9),
    ),
}


@pytest.mark.parametrize("kind", SOURCES)
def test_kinds_of_source_by_hand(kind: str) -> None:
    """Impedance and open-circuit response of each network, noise 4kT Re Z, and the same by compiled elimination."""
    sensor, z, response = SOURCES[kind]
    network = terminal_network(sensor, 27.0)
    np.testing.assert_allclose(impedance(sensor), z, rtol=1e-8)
    np.testing.assert_allclose(circuit.response(network, F), response, rtol=1e-8)
    np.testing.assert_allclose(circuit.noise(network, F).density ** 2, 4 * K * 300.15 * z.real, rtol=1e-8)
    check_matches_reference(network, scattered(network, 1, 3, 0.05), F)


@pytest.mark.parametrize(
    ("sensor", "message"),
    [
        (
            Sensor(scale=1.0, input_unit="W", output="current", inductance=1e-3),
            "sensor.inductance does not belong to a source of current; give its resistance and capacitance",
        ),
        (
            Sensor(scale=1.0, input_unit="A", motional=MOTIONAL, inductance=1e-3),
            "sensor.inductance has no place beside sensor.motional; add it to motional.inductance",
        ),
    ],
)
def test_sources_without_a_circuit(sensor: Sensor, message: str) -> None:
    with pytest.raises(CircuitError, match=message):
        terminal_network(sensor, 27.0)


def test_corner_of_a_kind_without_one() -> None:
    with pytest.raises(CircuitError, match="a rolloff of kind resonant has no corner"):
        first_order_corner(Rolloff("resonant", frequency=1e3, q=1.0))
