"""The shelving stage: its first-order equations against the engine, and against themselves."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pytest

from synth import circuit
from synth.model.chain import Chain
from synth.topology import GAINS, shelving
from synth.topology.shelving import ShelfKind
from tests.support.networks import GROUND, amplifier, capacitor, chain_of, op_amp, resistor

IDEAL = op_amp(gain_bandwidth=1e15, dc_gain=1e13, output_resistance=1e-3, voltage_noise=1e-12)
CENTER = 10e3
KINDS = pytest.mark.parametrize("kind", ["rising", "falling"])


def stage(kind: ShelfKind, values: Mapping[str, float]) -> Chain:
    """The circuit part by part, written down from the drawing; the coupling lies far below."""
    v = values
    own = (
        (
            resistor("R2", "m", GROUND, v["RG"]),
            resistor("R3", "m", "out", v["RF"]),
            resistor("R4", "m", "x", v["RS"]),
            capacitor("C2", "x", GROUND, v["CS"]),
        )
        if kind == "rising"
        else (
            resistor("R2", "m", GROUND, v["RG"]),
            resistor("R3", "m", "x", v["RF"]),
            resistor("R4", "x", "out", v["RX"]),
            capacitor("C2", "x", "out", v["CX"]),
        )
    )
    input_ = (capacitor("C1", "sig", "p", 1.0), resistor("R1", "p", GROUND, 1e6))
    return chain_of((*input_, *own, amplifier("U1", "p", "m", "out", IDEAL)), (IDEAL,), center=CENTER)


def made(kind: ShelfKind, gain: float, zero: float, pole: float, farad: float) -> dict[str, float]:
    ideal = shelving.resistors(kind, *(np.array([x]) for x in (gain, zero, pole, farad)))
    return {key: float(v[0]) for key, v in ideal.items()} | {shelving.CAPACITOR[kind]: farad}


CASES = (
    ("rising", 2.0, 3e3, 50e3),
    ("rising", 20.0, 8e3, 100e3),
    ("falling", 1.5, 20e3, 1e3),
    ("falling", 8.0, 5e3, 800.0),
)


@pytest.mark.parametrize(("kind", "gain", "zero", "pole"), CASES)
def test_the_circuit_is_one_zero_and_one_pole(kind: ShelfKind, gain: float, zero: float, pole: float) -> None:
    """K0 (1 + s/wz)/(1 + s/wp); the given gain is that of the smaller end (Franco, 3rd ed., sec. 3.2, from memory)."""
    chain = stage(kind, made(kind, gain, zero, pole, 2.2e-9))
    f = np.geomspace(50.0, 500e3, 31)
    low = gain if kind == "rising" else gain * zero / pole
    want = low * (1 + 1j * f / zero) / (1 + 1j * f / pole)
    np.testing.assert_allclose(circuit.response(circuit.build_network(chain), f), want, rtol=1e-6)


@pytest.mark.parametrize(("kind", "gain", "zero", "pole"), CASES)
def test_values_and_corners_are_inverse(kind: ShelfKind, gain: float, zero: float, pole: float) -> None:
    values = {key: np.array(v) for key, v in made(kind, gain, zero, pole, 470e-12).items()}
    np.testing.assert_allclose(shelving.corners(kind, values), (zero, pole), rtol=1e-12)
    low = float(shelving.low_gain(kind, values))
    assert low == pytest.approx(gain if kind == "rising" else gain * zero / pole, rel=1e-12)


def test_slope_is_the_derivative_of_the_response() -> None:
    zero, pole, step = np.array([0.3, 2.0, 0.05]), np.array([8.0, 0.1, 3.0]), 1e-5

    def log_gain(f: float) -> np.ndarray:
        return np.log(np.abs((1 + 1j * f / zero) / (1 + 1j * f / pole)))

    difference = (log_gain(1 + step) - log_gain(1 - step)) / np.log((1 + step) / (1 - step))
    np.testing.assert_allclose(shelving.slope(zero, pole), difference, rtol=1e-8)


def test_zero_for_slope_turns_slope_round() -> None:
    zero, pole = np.array([0.3, 2.0, 1.0]), np.array([8.0, 0.1, 5.0])
    np.testing.assert_allclose(shelving.zero_for_slope(shelving.slope(zero, pole), pole), zero, rtol=1e-12)


def test_slopes_beyond_a_first_order_shelf() -> None:
    """Steeper than one pole and one zero can be: a zero at DC, or none."""
    assert float(shelving.zero_for_slope(1.0, 5.0)) == 0.0
    assert float(shelving.zero_for_slope(-1.0, 0.1)) == np.inf


def test_the_inverse_of_a_first_order_sensor_has_its_slope() -> None:
    """A low-pass of corner fc falls by r^2/(1 + r^2), r = f/fc; a zero there rises as much, less the pole's share."""
    for corner, pole in ((0.3, 8.0), (1.0, 5.0)):
        sensor = -((1 / corner) ** 2) / (1 + (1 / corner) ** 2)
        assert float(shelving.slope(corner, pole)) == pytest.approx(-sensor - 1 / (1 + pole**2), rel=1e-12)


@KINDS
def test_least_gain_leaves_one_at_the_small_end(kind: ShelfKind) -> None:
    """A high-pass of corner 2 f0 needs sqrt(5) at the centre where the small end has 1."""
    zero, pole = (0.3, 8.0) if kind == "rising" else (2.0, 1 / 8)
    least = shelving.least_gain(zero, pole)
    assert float(min(shelving.end_gains(least, zero, pole))) == pytest.approx(shelving.LEAST_RESISTIVE_GAIN, rel=1e-12)
    expected = np.hypot(1, 1 / 0.3) / np.hypot(1, 1 / 8) if kind == "rising" else np.sqrt(5) / np.hypot(1, 1 / 8)
    assert least == pytest.approx(1.05 * expected, rel=1e-12)


@KINDS
def test_what_no_non_inverting_stage_can_do_has_no_values(kind: ShelfKind) -> None:
    """A gain of one or less at the small end: a resistor is infinite, nothing or negative."""
    zero, pole = (3e3, 50e3) if kind == "rising" else (20e3, 1e3)
    for gain in (1.0, 0.5):
        values = made(kind, gain, zero, pole, 1e-9)
        assert not all(np.isfinite(v) and v > 0 for v in values.values())


def test_registered_with_their_kind_and_cause() -> None:
    for topology in shelving.TOPOLOGIES:
        assert GAINS[topology.name] is topology
        assert topology.kind == "pre-emphasis"
        capacitors = [slot for slot in topology.slots if slot.key in ("CS", "CX")]
        assert [slot.sets_frequency for slot in capacitors] == [True]
    for name, damped in shelving.DAMPED.items():
        extra = [slot.key for slot in damped.slots if slot not in GAINS[name].slots]
        assert extra == ["RD", "CD"]
