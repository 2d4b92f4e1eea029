"""The compiled elimination and its batches against dense solution in extended precision."""

from __future__ import annotations

import numpy as np
import pytest

from synth import circuit
from synth.circuit.batch import direct_response
from tests.support.networks import (
    Board,
    check_matches_reference,
    check_response_matches_reference,
    multiple_feedback,
    random_chain,
    reference_response,
    resistor,
    scattered,
    section_chain,
    stray_op_amp,
)

CENTER = 100e3
NEAR = CENTER * np.linspace(0.8, 1.25, 41)
WIDE = CENTER * np.geomspace(1e-3, 1e3, 61)


@pytest.mark.parametrize("seed", range(24))
def test_random_chains_near_the_band(seed: int) -> None:
    network = random_chain(seed, CENTER)
    assert len(network.unknowns) <= 42
    check_matches_reference(network, scattered(network, seed, 4, 0.01), NEAR)


@pytest.mark.parametrize("seed", range(16))
def test_builds_far_from_nominal(seed: int) -> None:
    network = random_chain(100 + seed, CENTER)
    check_matches_reference(network, scattered(network, seed, 4, 0.3), NEAR)


@pytest.mark.parametrize("seed", range(12))
@pytest.mark.parametrize("notch", [False, True])
def test_wide_grids_are_halved_until_they_fit(seed: int, notch: bool) -> None:
    network = random_chain(200 + seed, CENTER, notch)
    check_matches_reference(network, scattered(network, seed, 2, 0.3), WIDE)


@pytest.mark.parametrize("seed", range(16))
def test_transmission_zero_in_the_band(seed: int) -> None:
    network = random_chain(300 + seed, CENTER, notch=True)
    values = scattered(network, seed, 3, 0.02)
    check_matches_reference(network, values, NEAR)


@pytest.mark.parametrize("seed", range(8))
def test_single_solutions(seed: int) -> None:
    check_response_matches_reference(random_chain(400 + seed, CENTER, notch=seed % 2 == 1), WIDE)


@pytest.mark.parametrize("sections", [2, 4, 6, 8])
@pytest.mark.parametrize(("low", "high"), [(0.7, 1.4), (0.95, 1.4), (0.94, 1.14), (0.5, 1.01)])
def test_many_narrow_sections_inside_a_wide_stretch(sections: int, low: float, high: float) -> None:
    """The determinant at the peak is many decades below its largest in the stretch: rounding must not reach it."""
    board, before, c, q = Board(), "in", 1e-9, 50.0
    omega = 2 * np.pi * CENTER
    for k in range(sections):
        r1a, r2 = q / (omega * c), 2 * q / (omega * c)
        r1b = 1 / ((omega * c) ** 2 * r2 - 1 / r1a)
        multiple_feedback(board, f"S{k}", before, f"n{k}", r1a, r1b, r2, c, c, 1e3 * CENTER, 1e6)
        before = f"n{k}"
    network = board.network(before)
    check_matches_reference(network, scattered(network, 1, 3, 0.01), CENTER * np.linspace(low, high, 101))


def test_interpolated_equals_direct() -> None:
    network = random_chain(7, CENTER)
    values = scattered(network, 7, 900, 0.02)  # several chunks of builds
    f = CENTER * np.linspace(0.95, 1.05, 201)
    got, want = circuit.batch_response(network, values, f), direct_response(network, values, f)
    np.testing.assert_allclose(got, want, rtol=1e-9)


def test_a_failing_build_is_solved_on_its_own() -> None:
    """Beyond the first builds, which decide for all, one with a far narrower resonance than the rest."""
    board = Board()
    board.source("gi", ("0", "a", "in", "0"), 1e-3)
    board.resistor("R", "a", "0", 1e3)
    board.inductor("L", "a", "0", 1e3 / (2 * np.pi * CENTER))
    board.capacitor("C", "a", "0", 1 / (2 * np.pi * CENTER * 1e3))
    network = board.network("a")
    values = scattered(network, 3, 40, 0.001)
    names = [e.name for e in network.elements]
    values[names.index("R"), 30] = 1e-12  # almost lossless
    f = CENTER * np.linspace(0.5, 1.5, 200)  # its pole falls between two frequencies
    got, want = circuit.batch_response(network, values, f), reference_response(network, values, f)
    size = np.maximum(np.abs(want), 1e-4 * np.abs(want).max(axis=0))
    assert float(np.max(np.abs(got - want) / size)) < 1e-9


def test_one_frequency_and_zero_frequency() -> None:
    network = random_chain(5, CENTER)
    values = scattered(network, 5, 3, 0.1)
    check_matches_reference(network, values, [CENTER])
    board = Board()
    board.resistor("R1", "in", "out", 1e3)
    board.resistor("R2", "out", "0", 1e3)
    divider = board.network()
    assert circuit.batch_response(divider, divider.values[:, None], [0.0])[0, 0] == pytest.approx(0.5)


def test_pivot_is_found_where_only_a_small_one_is_left() -> None:
    """A node that only listens to the output, its conductance far below the transconductance that drives it."""
    board = Board()
    board.source("g1", ("0", "out", "in", "0"), 1e-3)
    board.add("g2", "conductance", ("out", "0"), 1e-3)
    board.source("g3", ("0", "x", "out", "0"), 1.0)
    board.add("g4", "conductance", ("x", "0"), 1e-3)
    network = board.network()
    assert circuit.batch_response(network, network.values[:, None], [1.0])[0, 0] == pytest.approx(1.0)


def test_drawn_values_equal_a_chain_built_anew() -> None:
    """build_values against the circuit of a chain whose parts and models hold the drawn figures."""
    from dataclasses import replace

    model = stray_op_amp()
    chain = section_chain(model=model, resistor_stray=0.04e-12, loss_tangent=1e-3)
    rng = np.random.default_rng(11)
    parts = {p.ref: p.number * (1 + 0.05 * rng.uniform(-1, 1, 5)) for p in chain.parts if p.kind != "op-amp"}
    drawn = {
        **parts,
        "U1.gain_bandwidth": model.gain_bandwidth * rng.uniform(0.7, 1.3, 5),
        "U1.dc_gain": model.dc_gain * rng.uniform(0.5, 2.0, 5),
    }
    table = circuit.build_values(chain, drawn)
    for k in range(5):
        figures = {name: float(drawn[f"U1.{name}"][k]) for name in ("gain_bandwidth", "dc_gain")}
        built = replace(
            chain,
            parts=tuple(p if p.kind == "op-amp" else replace(p, value=float(parts[p.ref][k])) for p in chain.parts),
            models={model.type: replace(model, **figures)},
        )
        np.testing.assert_allclose(table[:, k], circuit.build_network(built).values, rtol=1e-14)
    network = circuit.build_network(chain)
    np.testing.assert_array_equal(circuit.build_values(chain, {})[:, 0], network.values)
    check_matches_reference(network, table, 10e3 * np.linspace(0.8, 1.2, 31))
    assert resistor("R1", "a", "0", 1.0).number == 1.0
