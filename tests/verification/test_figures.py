"""Figures of a chain against closed forms, on circuits whose response is known exactly."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pytest

from synth import circuit
from synth.errors import CircuitError
from synth.model.judgement import Realized
from synth.spec import Spec
from synth.verification.figures import (
    close_grid,
    delay_variation,
    detuned,
    noise_table,
    realized,
    rejection,
    response_table,
    ripple,
)
from tests.api.made import changed, spec_of
from tests.support.networks import INNER, Board, K, first_order, second_order

F0, B = 60e3, 3e3
Q = F0 / B


@pytest.fixture(scope="module")
def spec() -> Spec:
    return spec_of(changed())


def cascade(pairs: Sequence[tuple[float, float]], gain: float = 1.0) -> circuit.Network:
    """Unilateral pole pairs in a row, each one at its peak, the gain in front."""
    board = Board()
    board.source("gm", (circuit.network.GROUND, "n0", "in", circuit.network.GROUND), INNER * gain)
    board.add("g", "conductance", ("n0", circuit.network.GROUND), INNER)
    for k, (frequency, q) in enumerate(pairs):
        second_order(board, f"s{k}", f"n{k}", f"n{k + 1}", frequency, q, "band-pass")
    return board.network(f"n{len(pairs)}")


def exact(f: np.ndarray | float, pairs: Sequence[tuple[float, float]]) -> np.ndarray:
    h = np.ones_like(np.asarray(f, dtype=complex))
    for frequency, q in pairs:
        h = h / (1 + 1j * q * (f / frequency - frequency / np.asarray(f)))
    return h


def judged(network: circuit.Network, spec: Spec) -> Realized:
    return realized(network, response_table(network, F0, B), spec)


# ------------------------------------------------------------------------------------------------ grids


def test_detuning_is_undone_by_its_definition() -> None:
    u = np.linspace(-3, 3, 31)
    f = detuned(F0, u)
    np.testing.assert_allclose(f / F0 - F0 / f, u, atol=1e-12)


def test_the_close_grid_keeps_the_contract() -> None:
    f = close_grid(F0, B)
    assert f.size >= 201
    assert np.all(np.diff(f) > 0)
    assert F0 in f
    u = f / F0 - F0 / f
    assert np.all(np.abs(u) <= 10 * B / F0 * (1 + 1e-12))
    np.testing.assert_allclose(u, -u[::-1], atol=1e-12)
    middle = f.size // 2
    assert u[middle + 1] < u[-1] - u[-2]  # denser at the centre


@pytest.mark.parametrize("bandwidth", [1.0, B, 2 * F0])
def test_the_table_keeps_the_contract(bandwidth: float) -> None:
    network = cascade([(F0, Q)])
    table = response_table(network, F0, bandwidth)
    assert table.frequency[0] == pytest.approx(F0 / 1e3)
    assert table.frequency[-1] == pytest.approx(F0 * 1e3)
    assert F0 in table.frequency
    assert np.all(np.diff(table.frequency) > 0)
    assert len({float(f"{f:.9g}") for f in table.frequency}) == table.frequency.size  # nine digits keep them apart
    u = table.frequency / F0 - F0 / table.frequency
    assert table.close.sum() >= 201
    assert np.all(np.abs(u[table.close]) <= 10 * bandwidth / F0 * (1 + 1e-9))


def test_the_table_holds_response_and_delay() -> None:
    table = response_table(cascade([(F0, Q)]), F0, B)
    np.testing.assert_allclose(table.gain, exact(table.frequency, [(F0, Q)]), rtol=1e-9)
    at = int(np.searchsorted(table.frequency, F0))
    assert table.group_delay[at] == pytest.approx(2 * Q / (2 * np.pi * F0), rel=1e-9)


# ------------------------------------------------------------------------------------------------ centre, bandwidth


@pytest.mark.parametrize("count", [1, 2, 3, 4])
def test_bandwidth_of_equal_sections(count: int, spec: Spec) -> None:
    """n equal sections of Q are down 3 dB where u = sqrt(2^(1/n) - 1)/Q: any textbook of tuned amplifiers."""
    found = judged(cascade([(F0, Q)] * count), spec)
    assert found.bandwidth == pytest.approx(B * math.sqrt(2 ** (1 / count) - 1), rel=1e-7)
    assert found.center_frequency == pytest.approx(F0, rel=1e-9)
    assert found.low_edge * found.high_edge == pytest.approx(F0**2, rel=1e-9)


def test_bandwidth_of_a_wide_section(spec: Spec) -> None:
    found = judged(cascade([(F0, 0.6)]), spec)
    assert found.bandwidth == pytest.approx(F0 / 0.6, rel=1e-7)


def test_the_centre_of_a_detuned_section_is_re_the_gain_at_the_spec_s_centre(spec: Spec) -> None:
    f1 = 1.003 * F0
    found = judged(cascade([(f1, Q)]), spec)
    there = abs(exact(F0, [(f1, Q)]))
    edge = math.sqrt(2 / there**2 - 1) / Q  # |u| at which the gain is 3 dB below that at F0
    assert found.low_edge == pytest.approx(float(detuned(f1, -edge)), rel=1e-8)
    assert found.high_edge == pytest.approx(float(detuned(f1, edge)), rel=1e-8)
    assert found.center_frequency == pytest.approx(f1, rel=1e-8)
    assert found.gain_db == pytest.approx(20 * math.log10(there), abs=1e-9)


def test_gains_are_re_the_input_and_re_the_terminals(spec: Spec) -> None:
    found = judged(cascade([(F0, Q)], 250.0), spec)
    assert found.gain_db == pytest.approx(20 * math.log10(250.0), abs=1e-9)
    assert found.voltage_gain_db == pytest.approx(20 * math.log10(250.0 / spec.sensor.scale), abs=1e-9)


def test_poles_are_those_of_the_sections(spec: Spec) -> None:
    pairs = [(0.98 * F0, 30.0), (1.02 * F0, 40.0)]
    found = circuit.resonant_pairs(np.array(judged(cascade(pairs), spec).poles))
    np.testing.assert_allclose(found, pairs, rtol=1e-8)


def test_a_low_pass_is_no_bandpass(spec: Spec) -> None:
    board = Board()
    first_order(board, "lp", "in", "out", 2 * F0)
    with pytest.raises(CircuitError, match="no -3 dB point below its centre"):
        judged(board.network(), spec)


def test_a_high_pass_is_no_bandpass(spec: Spec) -> None:
    board = Board()
    board.capacitor("C", "a", "out", 1e-9)
    board.source("gm", ("0", "a", "in", "0"), INNER)
    board.add("g", "conductance", ("a", "0"), INNER)
    board.resistor("R", "out", "0", 10e3)
    with pytest.raises(CircuitError, match="no -3 dB point above its centre"):
        judged(board.network(), spec)


# ------------------------------------------------------------------------------------------------ shape


def test_ripple_of_one_peak_is_nothing(spec: Spec) -> None:
    network = cascade([(F0, Q)])
    table, found = response_table(network, F0, B), judged(network, spec)
    assert ripple(table, found.low_edge, found.high_edge) == 0.0


@pytest.mark.parametrize("over", [1.2, 1.5, 2.0])
def test_ripple_of_a_stagger_tuned_pair(over: float) -> None:
    """Two narrow circuits at +-d: with x = 2 Q d/f0 beyond 1 the peaks stand (1 + x^2)/(2 x) above the dip."""
    q = 400.0
    offset = over / (2 * q)
    pairs = [(F0 * (1 - offset), q), (F0 * (1 + offset), q)]
    network = cascade(pairs)
    width = 4 * F0 / q
    table = response_table(network, F0, width)
    expected = 20 * math.log10((1 + over**2) / (2 * over))
    assert ripple(table, F0 - width, F0 + width) == pytest.approx(expected, abs=0.02)
    assert ripple(table, F0 * 0.9999, F0 * 1.0001) == 0.0  # no peak inside


def test_group_delay_variation_of_a_section() -> None:
    """d/dw of atan(Q u), u = f/f0 - f0/f: (Q/w0) (1 + (f0/f)^2)/(1 + (Q u)^2), least where Q u = 1/2."""
    q = 200.0
    peak = 2 * q / (2 * math.pi * F0)
    found = delay_variation(cascade([(F0, q)]), F0, F0 / q)
    edge = float(detuned(F0, 0.5 / q))
    assert found == pytest.approx(peak * (1 - 0.5 * (1 + (F0 / edge) ** 2) / 1.25), rel=1e-4)


def test_group_delay_variation_adds_for_equal_sections() -> None:
    one = delay_variation(cascade([(F0, Q)]), F0, B)
    assert delay_variation(cascade([(F0, Q)] * 3), F0, B) == pytest.approx(3 * one, rel=1e-9)


@pytest.mark.parametrize("factor", [0.1, 0.5, 2.0, 3.0])
def test_rejection_of_equal_sections(factor: float) -> None:
    found = rejection(cascade([(F0, Q)] * 2), F0, factor * F0)
    expected = 2 * 10 * math.log10(1 + (Q * (factor - 1 / factor)) ** 2)
    assert found == pytest.approx(expected, abs=1e-6)


def test_rejection_at_the_centre_is_nothing() -> None:
    assert rejection(cascade([(F0, Q)]), F0, F0) == pytest.approx(0.0, abs=1e-12)


def test_rejection_where_nothing_passes_is_refused() -> None:
    with pytest.raises(CircuitError, match="passes nothing at 1000 Hz"):
        rejection(cascade([(F0, Q)], gain=0.0), F0, 1000.0)


# ------------------------------------------------------------------------------------------------ noise


def noisy(q: float, ohm: float = 1e3) -> circuit.Network:
    """Thermal noise of one resistor, buffered into a section."""
    board = Board()
    board.resistor("RS", "in", "n", ohm)
    board.add("g", "conductance", ("n", "0"), 1e-12)
    second_order(board, "s", "n", "out", F0, q, "band-pass")
    return board.network(temperature=300.0)


def test_noise_between_the_3_db_points_is_half_of_a_resonator_s_whole(spec: Spec) -> None:
    """Whole: the noise bandwidth pi/2 B (F. E. Terman's rule); within +-1 of Q u the integral is half of it."""
    q, ohm = 200.0, 1e3
    network = noisy(q, ohm)
    asked = replace(spec, target=replace(spec.target, bandwidth=F0 / q))
    table = response_table(network, F0, F0 / q)
    band = realized(network, table, asked)
    noise = noise_table(network, table, band, asked)
    density = math.sqrt(4 * K * 300.0 * ohm)
    whole = density * math.sqrt(math.pi / 2 * F0 / q)
    assert band.bandwidth == pytest.approx(F0 / q, rel=1e-7)
    assert noise.inband_rms == pytest.approx(whole / math.sqrt(2), rel=2e-3)
    assert noise.output_rms == pytest.approx(whole, rel=1e-2)
    assert noise.input_density_at_center == pytest.approx(density, rel=1e-6)


def test_signal_to_noise_is_the_smallest_reading_over_the_noise_in_the_band(spec: Spec) -> None:
    network = noisy(Q)
    table = response_table(network, F0, B)
    band = realized(network, table, spec)
    noise = noise_table(network, table, band, spec)
    expected = 20 * math.log10(spec.target.smallest / noise.inband_rms)  # unit gain at the centre
    assert noise.smallest_reading_snr_db == pytest.approx(expected, abs=1e-6)
    louder = replace(spec, target=replace(spec.target, smallest=10 * spec.target.smallest))
    again = noise_table(network, table, band, louder)
    assert again.smallest_reading_snr_db == pytest.approx(expected + 20, abs=1e-6)


def test_signal_to_noise_does_not_depend_on_noiseless_gain(spec: Spec) -> None:
    def ratio(gain: float) -> float:
        board = Board()
        board.resistor("RS", "in", "a", 1e3)
        board.add("ga", "conductance", ("a", "0"), 1e-12)
        board.source("gm", ("0", "n", "a", "0"), INNER * gain)
        board.add("gn", "conductance", ("n", "0"), INNER)
        second_order(board, "s", "n", "out", F0, Q, "band-pass")
        network = board.network()
        table = response_table(network, F0, B)
        return noise_table(network, table, realized(network, table, spec), spec).smallest_reading_snr_db

    assert ratio(1000.0) == pytest.approx(ratio(1.0), abs=1e-9)


def test_contributors_are_sorted_and_add_up(spec: Spec) -> None:
    board = Board()
    board.resistor("RS", "in", "n", 100.0)
    board.resistor("RP", "n", "0", 10e3)
    second_order(board, "s", "n", "m", F0, Q, "band-pass")
    board.resistor("RO", "m", "out", 10.0)
    board.resistor("RL", "out", "0", 1e6)
    network = board.network()
    table = response_table(network, F0, B)
    noise = noise_table(network, table, realized(network, table, spec), spec)
    shares = [c.inband_rms for c in noise.contributors]
    assert shares == sorted(shares, reverse=True)
    assert math.sqrt(sum(x * x for x in shares)) == pytest.approx(noise.inband_rms, rel=1e-9)
    assert {c.label for c in noise.contributors} == {"RS", "RP", "RO", "RL"}
    middle = int(np.searchsorted(table.frequency, F0))
    assert math.sqrt(sum(c.density**2 for c in noise.contributors)) == pytest.approx(noise.density[middle], rel=1e-9)


def test_noise_of_the_close_grid_is_integrated_well_enough(spec: Spec) -> None:
    """The trapezoid on the close grid against a closed form: 0.2 % is the target of the noise density itself."""
    for q in (2.0, 20.0, 1000.0):
        network = noisy(q)
        asked = replace(spec, target=replace(spec.target, bandwidth=F0 / q))
        table = response_table(network, F0, F0 / q)
        band = realized(network, table, asked)
        density = math.sqrt(4 * K * 300.0 * 1e3)
        f = np.linspace(band.low_edge, band.high_edge, 200_001)
        fine = density * math.sqrt(np.trapezoid(np.abs(exact(f, [(F0, q)])) ** 2, f))
        assert noise_table(network, table, band, asked).inband_rms == pytest.approx(fine, rel=2e-3)
