"""The multiple-feedback section by the engine, against printed designs and printed amplifier shifts."""

from __future__ import annotations

import math

import numpy as np
import pytest

from synth import circuit
from synth.circuit.network import Network
from synth.topology.multiple_feedback import resistors
from tests.support.networks import Board, multiple_feedback, pole_pair, second_order

FRANCO_SECTIONS = (  # Franco, 3rd ed., Example 4.5: printed (frequency, Q) and the gains of the three sections
    (957.6, 20.02, 2.0),
    (1000.0, 10.0, 1.0),
    (1044.3, 20.02, 2.0),
)


def section(
    r1a: float, r1b: float, r2: float, c1: float, c2: float, gain_bandwidth: float = 1e13, dc_gain: float = 1e12
) -> Network:
    board = Board()
    multiple_feedback(board, "S", "in", "out", r1a, r1b, r2, c1, c2, gain_bandwidth, dc_gain)
    return board.network()


def unit_section(q: float, gain_bandwidth: float = 1e12, dc_gain: float = 1e15, gain: float = 1.0) -> Network:
    """f0 = 1 Hz, equal capacitors."""
    r1a, r1b, r2 = (float(r) for r in resistors(1.0, q, gain, 1e-6, 1e-6))
    return section(r1a, r1b, r2, 1e-6, 1e-6, gain_bandwidth, dc_gain)


@pytest.mark.parametrize(
    ("design", "printed", "c"),
    [
        # Franco, 3rd ed., Example 3.15: f0 = 1 kHz, Q = 10, 20 dB, C = 10 nF; five digits
        ((1000.0, 10.0, 10.0), (15915.5, 837.66, 318310.0), 10e-9),
        # Kugelstadt, ch. 16: fm = 1 kHz, Q = 10, Am = -2, C = 100 nF; four digits
        ((1000.0, 10.0, 2.0), (7958.0, 80.38, 31830.0), 100e-9),
        # Franco, 3rd ed., Example 4.5, the middle section; four digits
        ((1000.0, 10.0, 1.0), (159155.0, 799.8, 318310.0), 10e-9),
        ((957.6, 20.02, 2.0), (166368.0, 416.1, 665470.0), 10e-9),
        ((1044.3, 20.02, 2.0), (152556.0, 381.6, 610220.0), 10e-9),
    ],
)
def test_printed_parts(design: tuple[float, ...], printed: tuple[float, ...], c: float) -> None:
    got = [float(r) for r in resistors(*design, c, c)]
    assert got == pytest.approx(printed, rel=2e-4)
    network = section(*got, c, c)
    frequency, q, gain = design
    assert pole_pair(network, frequency) == pytest.approx((frequency, q), rel=1e-6)
    assert complex(circuit.response(network, [frequency])[0]) == pytest.approx(complex(-gain), rel=1e-6)


def test_stocked_parts_of_franco_example() -> None:
    """Franco, 3rd ed., Example 3.15 with E96 parts 15.8k/845/316k: 999.68 Hz, 9.9243, -10.000 (recomputed)."""
    network = section(15.8e3, 845.0, 316e3, 10e-9, 10e-9)
    frequency, q = pole_pair(network, 1000.0)
    assert frequency == pytest.approx(999.68, abs=0.005)
    assert q == pytest.approx(9.9243, abs=5e-5)
    assert abs(circuit.response(network, [frequency])[0]) == pytest.approx(10.0, rel=1e-4)


def test_rounded_parts_of_kugelstadt() -> None:
    """Kugelstadt, ch. 16 with the printed 7.96k/31.8k/80.4: 1000.37 Hz, 9.994, 1.9975 (recomputed)."""
    network = section(7.96e3, 80.4, 31.8e3, 100e-9, 100e-9)
    frequency, q = pole_pair(network, 1000.0)
    assert (frequency, q) == pytest.approx((1000.37, 9.994), rel=1e-5, abs=5e-4)
    assert abs(circuit.response(network, [frequency])[0]) == pytest.approx(1.9975, abs=5e-5)


def test_unequal_capacitors_set_the_gain_by_the_one_at_the_inverting_input() -> None:
    """Peak gain -(R2/R1A) C2/(C1 + C2), C2 to the inverting input (nodal analysis; checks list, trap 4)."""
    r1a, r1b, r2, c1, c2 = 10e3, 500.0, 200e3, 4.7e-9, 15e-9
    network = section(r1a, r1b, r2, c1, c2)
    shunt = r1a * r1b / (r1a + r1b)
    f0 = 1 / (2 * math.pi * math.sqrt(shunt * r2 * c1 * c2))
    q = math.sqrt(r2 / shunt) * math.sqrt(c1 * c2) / (c1 + c2)
    assert pole_pair(network, f0) == pytest.approx((f0, q), rel=1e-6)
    assert complex(circuit.response(network, [f0])[0]) == pytest.approx(complex(-r2 / r1a * c2 / (c1 + c2)), rel=1e-6)


def franco_cascade() -> Network:
    board, before = Board(), "in"
    for k, (frequency, q, gain) in enumerate(FRANCO_SECTIONS):
        after = "out" if k == 2 else f"n{k}"
        parts = (float(r) for r in resistors(frequency, q, gain, 10e-9, 10e-9))
        multiple_feedback(board, f"S{k}", before, after, *parts, 10e-9, 10e-9, 1e13)
        before = after
    return board.network()


def test_cascade_of_franco_example() -> None:
    """Franco, 3rd ed., Example 4.5, the cascade of the printed rounded sections; recomputed, 0.01 dB."""
    f = [800.0, 900.0, 1000.0, 1100.0, 1200.0]
    decibels = 20 * np.log10(np.abs(circuit.response(franco_cascade(), f)))
    np.testing.assert_allclose(decibels, [-39.211, -19.536, -0.028, -16.951, -33.874], atol=0.01)


def test_exact_filter_of_franco_example() -> None:
    """Example 4.5: 10 lg(1 + Om^6), Om = 10 (f/f0 - f0/f); -3 dB at 951.2492 and 1051.2492 Hz; 6.3662 ms at 1 kHz."""
    from synth.approximation import bandpass_pairs

    board, before = Board(), "in"
    for k, pair in enumerate(bandpass_pairs("butterworth", 3, 1000.0, 100.0)):
        second_order(board, f"B{k}", before, f"n{k}", pair.frequency, pair.q, "band-pass")
        before = f"n{k}"
    network = board.network(before)
    f = [951.2492, 1051.2492, 800.0, 900.0, 1100.0, 1200.0, 1000.0]
    h, delay = circuit.response_and_delay(network, f)
    decibels = 20 * np.log10(np.abs(h / h[-1]))
    np.testing.assert_allclose(decibels[:2], -10 * math.log10(2), atol=1e-4)
    np.testing.assert_allclose(decibels[2:6], [-39.193, -19.519, -16.938, -33.858], atol=1e-3)
    assert delay[-1] == pytest.approx(6.3662e-3, abs=5e-8)


def test_group_delay_of_one_section() -> None:
    """Q/(pi f0) at the centre: 3.18310 ms for Q = 10 at 1 kHz (by algebra)."""
    r1a, r1b, r2 = (float(r) for r in resistors(1000.0, 10.0, 10.0, 10e-9, 10e-9))
    _, delay = circuit.response_and_delay(section(r1a, r1b, r2, 10e-9, 10e-9), [1000.0])
    assert delay[0] == pytest.approx(3.18310e-3, abs=5e-9)


@pytest.mark.parametrize("q", [5.0, 10.0, 20.0, 50.0])
@pytest.mark.parametrize("gain", [0.1, 1.0, 20.0])
def test_first_order_shift_by_finite_gain_bandwidth(q: float, gain: float) -> None:
    """df0/f0 = -Q e, dQ/Q = +Q e, e = f0/GBW (Franco, 3rd ed., Example 6.12); 1 % at e = 1e-5/Q."""
    e = 1e-5 / q
    frequency, shifted = pole_pair(unit_section(q, 1 / e, gain=gain), 1.0)
    assert (frequency - 1) / (q * e) == pytest.approx(-1, rel=0.01)
    assert (shifted / q - 1) / (q * e) == pytest.approx(1, rel=0.01)


@pytest.mark.parametrize(("e", "frequency", "q"), [(0.001, 0.980580, 20.3804), (0.005, 0.912856, 21.5500)])
def test_large_shift_by_finite_gain_bandwidth(e: float, frequency: float, q: float) -> None:
    """Q = 20, recomputed in the checks list as eigenvalues of a nodal pencil; 1e-5."""
    assert pole_pair(unit_section(20.0, 1 / e), 1.0) == pytest.approx((frequency, q), rel=1e-5)


def test_franco_example_of_gain_bandwidth() -> None:
    """Franco, 3rd ed., Example 6.12: 10 kHz, Q = 10 at 20 MHz, bandwidth off by 1 %; 9950.37 Hz, 10.0494 recomputed."""
    r1a, r1b, r2 = (float(r) for r in resistors(10e3, 10.0, 1.0, 1e-9, 1e-9))
    frequency, q = pole_pair(section(r1a, r1b, r2, 1e-9, 1e-9, 20e6), 10e3)
    assert (frequency, q) == pytest.approx((9950.37, 10.0494), rel=1e-5)
    assert frequency / q / 1e3 - 1 == pytest.approx(-0.00985, abs=5e-5)


@pytest.mark.parametrize("q", [10.0, 20.0, 40.0])
def test_loss_by_finite_dc_gain(q: float) -> None:
    """dQ/Q = -2 Q^2/A0 and no shift of frequency (recomputed in the checks list; within 0.3 %)."""
    frequency, lowered = pole_pair(unit_section(q, 1e12, 1e6 * q**2), 1.0)
    assert (lowered / q - 1) * 1e6 / 2 == pytest.approx(-1, rel=0.003)
    assert frequency == pytest.approx(1.0, abs=1e-7)


def test_frequency_spread_by_tolerances() -> None:
    """R +-1 %, C +-5 %, rectangular: sd(f0)/f0 = 1/2 sqrt(sum t^2/3) = 2.0817 % linear, 2.0848 % by Monte Carlo.

    Recomputed in the checks list (2e6 draws); here 600 builds, whose sd has a standard error of 2.2 % for this shape,
    and the worst case +6.326 % exactly.
    """
    network = unit_section(10.0, 1e9)
    r, c = [e.name.startswith("SR") for e in network.elements], [e.name in ("SC1", "SC2") for e in network.elements]
    rng = np.random.default_rng(20)
    tolerance = np.where(r, 0.01, np.where(c, 0.05, 0.0))[:, None]
    factor = 1 + tolerance * rng.uniform(-1, 1, (len(network.elements), 600))
    factor[np.array(r)] = 1 / factor[np.array(r)]  # resistors are drawn, conductances stand in the network
    factor[:, 0] = np.where(r, 1 / 0.99, np.where(c, 0.95, 1.0))
    f = np.linspace(0.9, 1.1, 2001)
    values = network.values[:, None] * factor
    phase = np.angle(-circuit.batch_response(network, values, f))  # zero at the centre, falling
    centers = np.array([float(np.interp(0.0, -phase[:, k], f)) for k in range(600)])
    assert np.std(centers[1:]) == pytest.approx(0.020848, rel=0.06)
    assert centers[0] - 1 == pytest.approx(0.06326, abs=1e-5)
