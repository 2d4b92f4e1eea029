"""What the engine refuses, each by its message."""

from __future__ import annotations

import numpy as np
import pytest

from synth import circuit
from synth.circuit.compiled import compile_network
from synth.circuit.network import Network
from synth.errors import CircuitError, SynthError
from tests.support.networks import Board, gain_chain, op_amp


def divider() -> Network:
    board = Board()
    board.resistor("R1", "in", "out", 1e3)
    board.resistor("R2", "out", "0", 1e3)
    return board.network()


def floating(capacitor: bool) -> Network:
    """A node that nothing ties to ground: it is only driven, or hangs on a capacitor with another."""
    board = Board()
    board.resistor("R1", "in", "out", 1e3)
    board.resistor("R2", "out", "0", 1e3)
    if capacitor:
        board.capacitor("C1", "x", "y", 1e-9)
    else:
        board.source("G1", ("0", "x", "out", "0"), 1e-3)
    return board.network()


def test_it_is_the_projects_error() -> None:
    assert issubclass(CircuitError, SynthError)
    assert issubclass(CircuitError, ValueError)


@pytest.mark.parametrize("capacitor", [False, True])
def test_floating_node(capacitor: bool) -> None:
    network = floating(capacitor)
    with pytest.raises(CircuitError, match="no unique solution; a node has no path to ground"):
        circuit.response(network, [1e3])
    with pytest.raises(CircuitError, match="no unique solution; a node has no path to ground"):
        circuit.noise(network, [1e3])
    with pytest.raises(CircuitError, match="no unique solution; a node has no path to ground"):
        circuit.poles(network, 1e3)
    with pytest.raises(CircuitError, match="the circuit is singular: a node has no path to ground"):
        circuit.batch_response(network, network.values[:, None], [1e3])


def test_output_without_a_path_to_ground() -> None:
    board = Board()
    board.source("G1", ("0", "out", "in", "0"), 1e-3)
    network = board.network()
    with pytest.raises(CircuitError, match="a node with no path to anything; connect every node"):
        circuit.response(network, [1e3])
    with pytest.raises(CircuitError, match="singular: its output node has no path to ground"):
        compile_network(network, 1e3)


def test_output_that_is_nowhere() -> None:
    board = Board()
    board.resistor("R1", "in", "a", 1e3)
    with pytest.raises(CircuitError, match="output node 'out' is not in the circuit; connect a stage to it"):
        circuit.response(board.network("out"), [1e3])
    with pytest.raises(CircuitError, match="output node 'out' is not in the circuit"):
        circuit.response(Board().network("out"), [1e3])


def test_capacitor_on_the_input() -> None:
    board = Board()
    board.capacitor("C1", "in", "out", 1e-9)
    board.resistor("R1", "out", "0", 1e3)
    with pytest.raises(CircuitError, match="C1 is a capacitance on the input node; buffer it"):
        circuit.response(board.network(), [1e3])


def test_unknown_node() -> None:
    with pytest.raises(CircuitError, match="no node 'x' in the circuit; it has out"):
        circuit.injected_voltages(divider(), "x", [1e3])


def test_unknown_amplifier() -> None:
    network = circuit.build_network(gain_chain(20.0, op_amp()))
    with pytest.raises(CircuitError, match="no amplifier 'U9' in the circuit; it has U1"):
        circuit.return_ratio(network, "U9", [1e3])


def test_noise_at_zero_frequency() -> None:
    with pytest.raises(CircuitError, match="noise is defined above 0 Hz only"):
        circuit.noise(divider(), [0.0, 1.0])


@pytest.mark.parametrize("f", [[-1.0], [np.nan], [np.inf], [[1.0, 2.0]]])
def test_frequencies_out_of_range(f: object) -> None:
    with pytest.raises(CircuitError, match="frequencies must be a list of finite values, 0 Hz or more"):
        circuit.response(divider(), f)  # type: ignore[arg-type]


@pytest.mark.parametrize("f", [[2.0, 1.0], [1.0, 1.0], []])
def test_batch_frequencies_must_rise(f: list[float]) -> None:
    network = divider()
    with pytest.raises(CircuitError, match="frequencies must rise"):
        circuit.batch_response(network, network.values[:, None], f)


@pytest.mark.parametrize("shape", [(2,), (3, 4), (4, 2), (2, 1, 1)])
def test_batch_values_of_another_shape(shape: tuple[int, ...]) -> None:
    with pytest.raises(CircuitError, match=r"values must have shape \(2, builds\), not "):
        circuit.batch_response(divider(), np.ones(shape), [1.0])


@pytest.mark.parametrize("count", [2, 100])
@pytest.mark.parametrize("bad", [-1e-3, np.nan])
def test_batch_with_a_singular_build(count: int, bad: float) -> None:
    """Conductances of +-1 mS cancel; the message names the build."""
    values = np.full((2, 5), 1e-3)
    values[1, 3] = bad
    with pytest.raises(CircuitError, match="build 3 has no finite response; its circuit is singular"):
        circuit.batch_response(divider(), values, np.linspace(1.0, 2.0, count))


def test_singular_only_in_one_build_of_a_reactive_circuit() -> None:
    board = Board()
    board.resistor("R1", "in", "out", 1e3)
    board.capacitor("C1", "out", "0", 1e-9)
    network = board.network()
    values = np.repeat(network.values[:, None], 20, axis=1)
    values[:, 17] = 0.0
    with pytest.raises(CircuitError, match="build 17 has no finite response"):
        circuit.batch_response(network, values, np.linspace(1e5, 2e5, 60))


@pytest.mark.parametrize("reference", [0.0, -1.0, np.nan, np.inf])
def test_reference_frequency_of_poles(reference: float) -> None:
    with pytest.raises(CircuitError, match=r"reference frequency .* Hz must be positive"):
        circuit.poles(divider(), reference)
    with pytest.raises(CircuitError, match=r"reference frequency .* Hz must be positive"):
        circuit.zeros(divider(), reference)


def test_infinite_part() -> None:
    board = Board()
    board.resistor("R1", "in", "out", 1e3)
    board.add("R2", "conductance", ("out", "0"), np.nan)
    with pytest.raises(CircuitError, match=r"no path to anything|no finite solution"):
        circuit.response(board.network(), [1e3])
