"""Defects planted into the engine: the checks that the other tests use must find each of them."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace

import numpy as np
import pytest

import synth.circuit as engine
from synth import circuit
from synth.circuit import analysis, assemble, batch, compiled, loop, modes, netlist
from synth.circuit.assemble import Placed
from synth.circuit.network import Element, Network
from synth.model.chain import Chain
from synth.model.part import Part
from tests.support.networks import (
    Board,
    check_delay_is_phase_slope,
    check_delay_is_sum_over_poles_and_zeros,
    check_matches_reference,
    check_netlist_is_the_network,
    check_noise_is_real_part_of_impedance,
    check_parts_resonate,
    check_poles_and_zeros_make_the_response,
    check_reciprocity,
    check_response_matches_reference,
    check_return_difference,
    check_stray_costs_q,
    check_white_noise,
    gain_chain,
    multiple_feedback,
    op_amp,
    random_chain,
    random_one_port,
    scattered,
    section_chain,
    stray_op_amp,
)

CENTER = 100e3
BAND = CENTER * np.linspace(0.8, 1.2, 9)
Patch = pytest.MonkeyPatch


def chain_network() -> Network:
    return random_chain(3, CENTER, largest=13)


def fails(check: Callable[[], None]) -> None:
    """Whether the check finds the defect."""
    with pytest.raises(AssertionError):
        check()


# Checks, each with the arguments that it has in the regular tests


def stray_check() -> None:
    check_stray_costs_q(section_chain(10.0), section_chain(10.0, resistor_stray=1e-13), 1e-13, 1e-9)


def amplifier_stray_check() -> None:
    model = op_amp(gain_bandwidth=1e14, dc_gain=1e12, output_resistance=1e-3, stray_output_to_inverting=1e-13)
    check_stray_costs_q(section_chain(10.0), section_chain(10.0, model=model), 1e-13, 1e-9)


def parts_check() -> None:
    check_parts_resonate(section_chain(10.0), "R1", "R2", "R3", "C1", "C2")


def johnson_check() -> None:
    board = Board()
    board.resistor("R1", "out", "0", 1e3)
    check_white_noise(board.network("out", 300.0), 1e3, 4.070355e-9, rtol=1e-6)


def one_port_check() -> None:
    network, port = random_one_port(5)
    check_noise_is_real_part_of_impedance(network, port, [1e3, 1e5])


def reciprocity_check() -> None:
    network, port = random_one_port(1)
    check_reciprocity(network, "n1", port, [1e3, 1e5])


def response_check() -> None:
    check_response_matches_reference(chain_network(), BAND)


def batch_check() -> None:
    network = chain_network()
    check_matches_reference(network, scattered(network, 1, 3, 0.02), CENTER * np.linspace(0.8, 1.25, 41))


def narrow_check() -> None:
    """Six sections of Q 50 in a wide stretch."""
    board, before, c, q = Board(), "in", 1e-9, 50.0
    omega = 2 * np.pi * CENTER
    for k in range(6):
        r1a, r2 = q / (omega * c), 2 * q / (omega * c)
        r1b = 1 / ((omega * c) ** 2 * r2 - 1 / r1a)
        multiple_feedback(board, f"S{k}", before, f"n{k}", r1a, r1b, r2, c, c, 1e3 * CENTER, 1e6)
        before = f"n{k}"
    network = board.network(before)
    check_matches_reference(network, scattered(network, 1, 3, 0.01), CENTER * np.linspace(0.7, 1.4, 101))


def modes_check() -> None:
    check_poles_and_zeros_make_the_response(chain_network(), BAND, CENTER)


def delay_check() -> None:
    check_delay_is_phase_slope(chain_network(), BAND)


def delay_sum_check() -> None:
    check_delay_is_sum_over_poles_and_zeros(chain_network(), BAND, CENTER)


def loop_check() -> None:
    check_return_difference(circuit.build_network(gain_chain(20.0, stray_op_amp())), "U1", [1e3, 1e6])


def netlist_check() -> None:
    check_netlist_is_the_network(chain_network(), CENTER)


CHECKS = [
    stray_check,
    amplifier_stray_check,
    parts_check,
    johnson_check,
    one_port_check,
    reciprocity_check,
    response_check,
    batch_check,
    narrow_check,
    modes_check,
    delay_check,
    delay_sum_check,
    loop_check,
    netlist_check,
]


@pytest.mark.parametrize("check", CHECKS)
def test_the_engine_as_it_is_passes(check: Callable[[], None]) -> None:
    check()


# Defects


def dropped(suffix: str) -> Callable[..., Iterator[Placed]]:
    """The walk over a chain without the elements whose name ends so."""
    walk = assemble._walk

    def without(chain: Chain, drawn: assemble.Drawn) -> Iterator[Placed]:
        return (placed for placed in walk(chain, drawn) if not placed.name.endswith(suffix))

    return without


def test_dropped_stray_of_a_resistor(monkeypatch: Patch) -> None:
    monkeypatch.setattr(assemble, "_walk", dropped("_stray"))
    fails(stray_check)


def test_dropped_stray_of_the_amplifier(monkeypatch: Patch) -> None:
    monkeypatch.setattr(assemble, "_walk", dropped("_cstray"))
    fails(amplifier_stray_check)


def test_swapped_resistors(monkeypatch: Patch) -> None:
    original = assemble._resistor

    def swapped(part: Part, drawn: assemble.Drawn) -> Iterator[Placed]:
        nodes = {"R1": ("a", "0"), "R2": ("sig", "a")}.get(part.ref, part.nodes)
        return original(replace(part, nodes=nodes), drawn)

    monkeypatch.setattr(assemble, "_resistor", swapped)
    fails(parts_check)


@pytest.mark.parametrize("factor", [2.0, 0.5])
@pytest.mark.parametrize("check", [johnson_check, one_port_check])
def test_thermal_noise_off_by_two(monkeypatch: Patch, factor: float, check: Callable[[], None]) -> None:
    monkeypatch.setattr(analysis, "BOLTZMANN", factor * analysis.BOLTZMANN)
    fails(check)


def stamps_with_a_turned_control(network: Network) -> object:
    """Stamps in which the first transconductance that a node of the circuit controls has its sign turned."""
    stamps = ORIGINAL_STAMPS(network)
    kinds = np.array([network.elements[k].kind == "transconductance" for k in stamps.element])
    first = stamps.element[np.flatnonzero(kinds & (stamps.column >= 0))[-1]]
    return replace(stamps, sign=np.where(stamps.element == first, -stamps.sign, stamps.sign))


ORIGINAL_STAMPS = compiled.stamps


@pytest.mark.parametrize("check", [response_check, delay_check, netlist_check])
def test_turned_transconductance_in_the_matrices(monkeypatch: Patch, check: Callable[[], None]) -> None:
    monkeypatch.setattr("synth.circuit.network.stamps", stamps_with_a_turned_control)
    fails(check)


def test_turned_transconductance_in_the_compiled_circuit(monkeypatch: Patch) -> None:
    monkeypatch.setattr(compiled, "stamps", stamps_with_a_turned_control)
    fails(batch_check)


def test_transconductance_that_is_stamped_both_ways(monkeypatch: Patch) -> None:
    """An inductor whose gyrator is not one: reciprocity is lost."""
    original = ORIGINAL_STAMPS

    def stamps(network: Network) -> object:
        s = original(network)
        kinds = np.array([network.elements[k].name.endswith("_v") for k in s.element])
        return replace(s, sign=np.where(kinds & (s.column % 2 == 0), 2 * s.sign, s.sign))

    monkeypatch.setattr("synth.circuit.network.stamps", stamps)
    fails(reciprocity_check)


def test_pole_at_the_wrong_place(monkeypatch: Patch) -> None:
    original = modes.poles

    def shifted(network: Network, reference: float) -> np.ndarray:
        poles = original(network, reference)
        nearest = np.argmin(np.abs(poles - 2j * np.pi * reference))
        poles[nearest] *= 1 + 1e-6
        return poles

    monkeypatch.setattr(engine, "poles", shifted)
    fails(modes_check)
    fails(delay_sum_check)


def test_lost_zero(monkeypatch: Patch) -> None:
    original = modes.zeros
    monkeypatch.setattr(engine, "zeros", lambda network, reference: original(network, reference)[1:])
    fails(modes_check)


def test_sign_of_the_group_delay(monkeypatch: Patch) -> None:
    original = analysis.response_and_delay

    def turned(network: Network, f: object) -> tuple[np.ndarray, np.ndarray]:
        h, delay = original(network, f)  # type: ignore[arg-type]
        return h, -delay

    monkeypatch.setattr(engine, "response_and_delay", turned)
    fails(delay_check)
    fails(delay_sum_check)


def test_group_delay_without_a_capacitance(monkeypatch: Patch) -> None:
    """The adjoint sum misses one entry of C."""
    original = analysis.matrices

    def lost(network: Network) -> object:
        m = original(network)
        C = m.C.copy()
        row, column = np.argwhere(C != 0)[-1]
        C[row, column] = 0.0
        return replace(m, C=C)

    monkeypatch.setattr(analysis, "matrices", lost)
    fails(delay_check)


def test_interpolation_without_its_checks(monkeypatch: Patch) -> None:
    """Neither rounding at the peak nor a held-out frequency is looked at."""
    monkeypatch.setattr(batch, "TOLERANCE", 1e9)
    fails(narrow_check)


def test_interpolation_without_the_check_at_the_peak(monkeypatch: Patch) -> None:
    monkeypatch.setattr(batch, "ROUNDING", 0.0)
    monkeypatch.setattr(batch, "FEW", 0)  # these are checked at every frequency, the peak among them
    fails(narrow_check)


def test_return_ratio_of_the_wrong_sign(monkeypatch: Patch) -> None:
    original = loop.return_ratio
    monkeypatch.setattr(engine, "return_ratio", lambda network, ref, f: -original(network, ref, f))
    fails(loop_check)


def test_netlist_with_exchanged_controls(monkeypatch: Patch) -> None:
    """Of each amplifier's input; to exchange every control would turn nothing."""
    original = netlist._element_line

    def exchanged(element: Element) -> str:
        if element.kind == "transconductance" and element.name.endswith("_gm"):
            a, b, plus, minus = element.nodes
            element = replace(element, nodes=(a, b, minus, plus))
        return original(element)

    monkeypatch.setattr(netlist, "_element_line", exchanged)
    fails(netlist_check)


def test_netlist_with_a_suffix(monkeypatch: Patch) -> None:
    """1e6 written as 1M is a milli to a simulator."""
    original = netlist._number
    monkeypatch.setattr(netlist, "_number", lambda value: original(value * 1e-9 if value >= 1e6 else value))
    board = Board()
    board.resistor("R1", "in", "out", 2.2e6)
    board.resistor("R2", "out", "0", 1e3)
    fails(lambda: check_netlist_is_the_network(board.network(), 1e3))
