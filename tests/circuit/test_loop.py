"""Return ratio and phase margin against determinants and closed forms."""

from __future__ import annotations

import math

import numpy as np
import pytest

from synth import circuit
from synth.circuit.network import Network
from tests.support.networks import (
    Board,
    amplifier,
    chain_of,
    check_return_difference,
    determinant,
    gain_chain,
    op_amp,
    random_chain,
    resistor,
    section_chain,
    stray_op_amp,
    without,
)

CENTER = 100e3
DECADES = np.geomspace(1e2, 1e7, 11)


@pytest.mark.parametrize("seed", range(10))
def test_return_difference_is_a_ratio_of_determinants(seed: int) -> None:
    network = random_chain(seed, CENTER, largest=18)
    for amplifier_ in network.amplifiers:
        check_return_difference(network, amplifier_.ref, DECADES)


def test_return_difference_of_real_stages() -> None:
    for chain in (gain_chain(20.0, stray_op_amp()), section_chain(model=stray_op_amp(), resistor_stray=4e-14)):
        check_return_difference(circuit.build_network(chain), "U1", DECADES)


@pytest.mark.parametrize("seed", range(6))
def test_closed_loop_by_the_asymptotic_gain(seed: int) -> None:
    """H = H_inf T/(1 + T) + H_0/(1 + T), H_0 with the source dead, H_inf its limit (H. W. Bode, 1945; from memory).

    H is bilinear in the source's value; H_inf comes from the value at hand scaled by -1, where T changes sign:
    H(-) = (H_0 - T H_inf)/(1 - T).
    """
    network = random_chain(seed, CENTER, largest=18)
    f = CENTER * np.array([0.5, 0.97, 1.3])
    for amplifier_ in network.amplifiers:
        t = circuit.return_ratio(network, amplifier_.ref, f)
        h_0 = circuit.response(without(network, amplifier_.gain_element), f)
        turned = _scaled(network, amplifier_.gain_element, -1.0)
        h_inf = (h_0 - circuit.response(turned, f) * (1 - t)) / t
        doubled = _scaled(network, amplifier_.gain_element, 2.0)
        np.testing.assert_allclose(circuit.response(network, f), (h_inf * t + h_0) / (1 + t), rtol=1e-7)
        np.testing.assert_allclose(circuit.response(doubled, f), (h_inf * 2 * t + h_0) / (1 + 2 * t), rtol=1e-7)


def test_impedance_by_blackmans_formula() -> None:
    """Z = Z_0 (1 + T_short)/(1 + T_open) at the output of a gain stage (R. B. Blackman, 1943; from memory)."""
    network = circuit.build_network(gain_chain(20.0, stray_op_amp()))
    f = np.array([1e3, 1e5, 1e6])
    at = network.unknowns.index("out")
    z = circuit.injected_voltages(network, "out", f)[:, at]
    z_0 = circuit.injected_voltages(without(network, "U1_gm"), "out", f)[:, at]
    t_open = circuit.return_ratio(network, "U1", f)
    board = Board(list(network.elements), [], list(network.amplifiers))
    board.add("short", "conductance", ("out", "0"), 1e9)
    t_short = circuit.return_ratio(board.network(), "U1", f)
    np.testing.assert_allclose(z, z_0 * (1 + t_short) / (1 + t_open), rtol=1e-6)


def test_loop_gain_of_a_non_inverting_stage() -> None:
    """T = A/(1 + RF/RG), A = A0/(1 + j f A0/GBW): not GBW/f at low frequency."""
    model = op_amp(dc_gain=1e5, gain_bandwidth=10e6, output_resistance=1e-3)
    network = circuit.build_network(gain_chain(20.0, model))
    f = np.array([0.1, 100.0, 1e4, 1e6])
    want = 1e5 / (1 + 1j * f * 1e5 / 10e6) / 20.0
    np.testing.assert_allclose(circuit.return_ratio(network, "U1", f), want, rtol=1e-6)


def two_pole_stage(gain: float, second_pole: float) -> Network:
    """A non-inverting stage without reactances but the amplifier's, A0 = 1e5, GBW = 10 MHz."""
    model = op_amp(dc_gain=1e5, gain_bandwidth=10e6, second_pole=second_pole, output_resistance=1e-3)
    parts = (
        resistor("R1", "m", "0", 1e3),
        resistor("R2", "m", "out", 1e3 * (gain - 1)),
        amplifier("U1", "sig", "m", "out", model),
    )
    return circuit.build_network(chain_of(parts, (model,)))


@pytest.mark.parametrize("gain", [2.0, 5.0, 30.0])
@pytest.mark.parametrize("second_pole", [1e6, 5e6, 50e6])
def test_phase_margin_of_a_two_pole_amplifier(gain: float, second_pole: float) -> None:
    """|T|^2 = T0^2/((1 + (f/f1)^2)(1 + (f/f2)^2)) = 1 in closed form; 180 - atan(f/f1) - atan(f/f2) degrees."""
    t0, f1, f2 = 1e5 / gain, 100.0, second_pole
    b, c = f1**2 + f2**2, (1 - t0**2) * f1**2 * f2**2
    crossing = math.sqrt((-b + math.sqrt(b**2 - 4 * c)) / 2)
    margin = 180 - math.degrees(math.atan(crossing / f1) + math.atan(crossing / f2))
    got = circuit.phase_margin(two_pole_stage(gain, second_pole), "U1", 1e2, 1e9)
    assert got.ref == "U1"
    assert got.crossing == pytest.approx(crossing, rel=1e-5)
    assert got.phase_margin == pytest.approx(margin, abs=1e-3)


def test_no_crossing_is_a_full_margin() -> None:
    got = circuit.phase_margin(two_pole_stage(2.0, 5e6), "U1", 1e8, 1e9)
    assert got.crossing is None
    assert got.phase_margin == 180.0


def test_closed_loop_poles_are_the_zeros_of_the_return_difference() -> None:
    """det(Y) = 0 at the closed-loop poles: 1 + T falls to rounding there, not beside them."""
    network = two_pole_stage(5.0, 5e6)
    pole = circuit.poles(network, 1e6)[-1]
    assert abs(determinant(network, complex(pole))) < 1e-9 * abs(determinant(network, complex(pole) * 1.1))


def _scaled(network: Network, name: str, factor: float) -> Network:
    from dataclasses import replace

    elements = tuple(replace(e, value=factor * e.value) if e.name == name else e for e in network.elements)
    return replace(network, elements=elements)
