"""The sensor's circuit against the closed form of each kind of rolloff."""

from __future__ import annotations

import numpy as np
import pytest

from synth import circuit
from synth.circuit.sensor import first_order_corner, sensor_elements, sensor_network
from synth.errors import CircuitError
from synth.spec import Rolloff, Sensor

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


def test_a_table_has_no_circuit() -> None:
    rolloff = Rolloff("table", points=((1.0, 1.0), (2.0, 0.9), (3.0, 0.8)))
    with pytest.raises(CircuitError, match="a rolloff of kind table has no circuit"):
        list(sensor_elements(Sensor(scale=1.0, input_unit="A", rolloff=(rolloff,)), "in"))


@pytest.mark.parametrize(
    ("rolloff", "message"),
    [
        (Rolloff("resonant", frequency=1e3, q=1.0), "a rolloff of kind resonant has no corner"),
    ],
)
def test_corner_of_a_kind_without_one(rolloff: Rolloff, message: str) -> None:
    with pytest.raises(CircuitError, match=message):
        first_order_corner(rolloff)
