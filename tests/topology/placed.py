"""Section circuits placed by the program, and the checks that each of them must pass, as functions."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from synth import circuit
from synth.circuit.network import Network
from synth.model.chain import Chain, StageTarget
from synth.model.part import GROUND, OpAmp
from synth.parts.op_amps import load_op_amps
from synth.planning.amplifiers import LARGEST_LOSS, LARGEST_SHIFT
from synth.rounding import Section, round_section
from synth.rounding.section import free_errors
from synth.topology import SectionTopology
from synth.topology.place import Draft, Stocks, place
from tests.support.networks import around, op_amp, pole_pair, stocks
from tests.support.simulators import SIMULATORS

Q_ERROR = 5e-3  # what rounding must reach
GAIN_DB = 0.01  # between the engine and a simulator
STEADY_TYPES = ("ADA4625-1", "LM4562", "ADA4898-1", "OPA1612", "OPA820")  # from the slowest to the fastest


def lossless() -> Stocks:
    """Catalog parts without strays and loss."""
    plain = stocks()
    return Stocks(
        replace(plain.resistors, stray_capacitance=0.0), replace(plain.capacitors, losses=((1e3, 0.0),)), plain.coupling
    )


def ideal(gain_bandwidth: float = 1e13, dc_gain: float = 1e12) -> OpAmp:
    """An amplifier without output resistance and strays."""
    return op_amp(gain_bandwidth=gain_bandwidth, dc_gain=dc_gain, output_resistance=1e-3, voltage_noise_corner=0.0)


def values(
    topology: SectionTopology, frequency: float, q: float, gain: float, c1: float, c2: float, **chosen: float
) -> dict[str, float]:
    """All values by the topology's equations; `chosen` stands in place of some of its fixed resistors."""
    first, second = topology.capacitors
    given = {first: np.array([c1]), second: np.array([c2])}
    target = np.array([frequency]), np.array([q]), np.array([gain])
    given.update(topology.fixed(*target, given))
    given.update({key: np.array([value]) for key, value in chosen.items()})
    given.update(topology.solve(*target, given))
    return {key: float(value[0]) for key, value in given.items()}


def section_chain(
    topology: SectionTopology, parts: dict[str, float], model: OpAmp, center: float, parts_from: Stocks | None = None
) -> Chain:
    """The section between an ideal source and nothing."""
    draft = Draft(topology, StageTarget(1.0, 1.0, center, 1.0), model, parts)
    return place([draft], parts_from or lossless(), around(center))


def section_network(
    topology: SectionTopology, parts: dict[str, float], model: OpAmp | None = None, center: float = 10e3
) -> Network:
    """Its circuit, with nearly ideal amplifiers unless others are given, without strays."""
    return circuit.build_network(section_chain(topology, parts, model or ideal(), center))


def realized(network: Network, near: float) -> tuple[float, float, complex]:
    """Frequency [Hz] and Q of the pole pair near a frequency [Hz], and the response at the pair's frequency."""
    frequency, q = pole_pair(network, near)
    return frequency, q, complex(circuit.response(network, [frequency])[0])


def check_round_trip(topology: SectionTopology, seed: int) -> None:
    """A random target, its parts by the equations, and back by the engine with nearly ideal amplifiers."""
    rng = np.random.default_rng(seed)
    wanted, q = 10 ** rng.uniform(3, 5.5), math.exp(rng.uniform(math.log(1.5), math.log(topology.largest_q)))
    gain = 10 ** rng.uniform(-1, math.log10(min(2.0, q)))
    c1 = 10 ** rng.uniform(-9.5, -8)
    parts = values(topology, wanted, q, gain, c1, c1 * 10 ** rng.uniform(-0.6, 0.6))
    assert all(value > 0 for value in parts.values()), parts
    model = ideal(1e9 * wanted, 1e12)
    got = realized(section_network(topology, parts, model, wanted), wanted)
    np.testing.assert_allclose(got[:2], (wanted, q), rtol=1e-6)
    np.testing.assert_allclose(got[2], topology.sign * gain, rtol=1e-5)


def check_amplifier_effects(topology: SectionTopology, q: float) -> None:
    """The topology's shifts by finite gain-bandwidth and its loss by finite DC gain against poles of the engine."""
    parts = values(topology, 10e3, q, 1.0, 1e-9, 1e-9)
    ratio = 1e-5 / q
    frequency, shifted = pole_pair(section_network(topology, parts, ideal(10e3 / ratio)), 10e3)
    moved, stretched = topology.shift(q, ratio)
    np.testing.assert_allclose(frequency / 10e3 - 1, moved, rtol=0.01)
    np.testing.assert_allclose(shifted / q - 1, stretched, rtol=0.02)
    _, lowered = pole_pair(section_network(topology, parts, ideal(1e14, 1e6 * q)), 10e3)
    np.testing.assert_allclose(lowered / q - 1, topology.loss(q, 1e6 * q), rtol=0.03)


def check_noise_gain(topology: SectionTopology, q: float) -> None:
    """Voltage noise of all amplifiers at the output at the centre, unity gain."""
    parts = values(topology, 10e3, q, 1.0, 1e-9, 1e-9)
    spectrum = circuit.noise(section_network(topology, parts), [10e3])
    own = [k for k, label in enumerate(spectrum.labels) if label.endswith("voltage noise")]
    assert len(own) == topology.amplifiers
    total = math.hypot(*(float(spectrum.contributions[k, 0]) for k in own))
    np.testing.assert_allclose(total / ideal().voltage_noise, topology.noise_gain(q), rtol=1e-3)


def suited(topology: SectionTopology, frequency: float, q: float) -> OpAmp | None:
    """The slowest of some catalog types whose first-order effects the planner accepts, None where there is none."""
    known = load_op_amps()
    for name in STEADY_TYPES:
        model = known[name].op_amp
        effects = (*topology.shift(q, frequency / model.gain_bandwidth),)
        if max(map(abs, effects)) <= LARGEST_SHIFT and abs(topology.loss(q, model.dc_gain)) <= LARGEST_LOSS:
            return model
    return None


def random_section(topology: SectionTopology, seed: int) -> tuple[Section, OpAmp]:
    """A rounded section for a random target of 3 to 300 kHz, Q as high as a catalog type allows there."""
    rng = np.random.default_rng(seed)
    frequency = 10 ** rng.uniform(math.log10(3e3), math.log10(3e5))
    q = math.exp(rng.uniform(math.log(2), math.log(topology.largest_q)))
    while (model := suited(topology, frequency, q)) is None:
        q *= 0.8
    target = StageTarget(float(10 ** rng.uniform(-0.5, 0.25)), 1.0, frequency, q)
    return round_section(target, model, stocks(), frequency, 27.0, topology), model


def check_rounding(topology: SectionTopology, seed: int) -> None:
    """Real amplifier, strays, E96 and E12: f0 to what costs nothing, Q to 0.5 %, gain to 6 %; no pole on the right."""
    section, model = random_section(topology, seed)
    target = section.draft.target
    assert target.center_frequency is not None
    assert target.q is not None
    free_frequency, _ = free_errors(stocks())
    assert abs(section.frequency / target.center_frequency - 1) <= free_frequency
    assert abs(section.q / target.q - 1) <= Q_ERROR
    assert abs(section.gain / target.gain - 1) <= 0.06
    chain = section_chain(topology, dict(section.draft.values), model, target.center_frequency, stocks())
    network = circuit.build_network(chain)
    np.testing.assert_allclose(pole_pair(network, section.frequency), (section.frequency, section.q), rtol=1e-6)
    if model.type == STEADY_TYPES[0]:  # the others may have too little margin; the judge sees it
        assert circuit.is_stable(circuit.poles(network, target.center_frequency))


def check_dc_paths(topology: SectionTopology) -> None:
    """Every input of an amplifier is held at DC: by ground, or by resistors to an amplifier's output or the source."""
    chain = section_chain(topology, values(topology, 10e3, 5.0, 1.0, 1e-9, 1e-9), ideal(), 10e3)
    amplifiers = [part for part in chain.parts if part.kind == "op-amp"]
    held = {GROUND, circuit.TERMINAL, *(part.nodes[2] for part in amplifiers)}
    resistors = [set(part.nodes) for part in chain.parts if part.kind == "resistor"]
    for _ in resistors:
        for nodes in resistors:
            held |= nodes if nodes & held else set()
    assert {node for part in amplifiers for node in part.nodes[:2]} <= held
    assert np.isfinite(circuit.response(circuit.build_network(chain), [1e-3])).all()


def check_trimmer(topology: SectionTopology) -> None:
    """The trimmer moves the frequency as its square root and leaves bandwidth and gain."""
    parts = values(topology, 10e3, 10.0, 1.5, 1e-9, 2.2e-9)
    before = realized(section_network(topology, parts), 10e3)
    moved = parts | {topology.trimmer: 1.02 * parts[topology.trimmer]}
    after = realized(section_network(topology, moved), 10e3)
    np.testing.assert_allclose(after[0] / before[0], 1.02**-0.5, rtol=1e-6)
    np.testing.assert_allclose(after[0] / after[1], before[0] / before[1], rtol=1e-5)
    np.testing.assert_allclose(after[2], before[2], rtol=1e-5)


def margin(topology: SectionTopology, name: str, q: float = 10.0, **chosen: float) -> float:
    """Least phase margin [degree] of a section's amplifiers of a catalog type, at a frequency within its reach.

    Args:
        chosen: stands in place of some of its fixed resistors [ohm].
    """
    model = load_op_amps()[name].op_amp
    center = min(model.gain_bandwidth / 3000, 300e3)
    c = float(stocks().capacitors.values[np.argmin(np.abs(stocks().capacitors.values * 2 * np.pi * center * 3e3 - 1))])
    chain = section_chain(topology, values(topology, center, q, 1.0, c, c, **chosen), model, center, stocks())
    network = circuit.build_network(chain)
    assert circuit.is_stable(circuit.poles(network, center)), name
    span = 1e-3 * center, 1e5 * center
    return min(circuit.phase_margin(network, amplifier.ref, *span).phase_margin for amplifier in network.amplifiers)


def check_simulators(topology: SectionTopology) -> None:
    """A rounded section with a catalog amplifier: the engine and two simulators on its netlist, 0.01 dB."""
    section, model = random_section(topology, 1)
    center = section.frequency
    chain = section_chain(topology, dict(section.draft.values), model, center, stocks())
    network = circuit.build_network(chain)
    f = center * np.array([0.01, 0.5, 0.97, 1.0, 1.05, 3.0, 100.0])
    text = circuit.netlist_text(network, topology.title, (), center)
    want = circuit.response(network, f)
    for simulator in SIMULATORS:
        got = simulator.response(text, f)
        np.testing.assert_allclose(20 * np.log10(np.abs(got / want)), 0.0, atol=GAIN_DB, err_msg=simulator.name)
        np.testing.assert_allclose(simulator.noise(text, f[3:4]), circuit.noise(network, f[3:4]).density, rtol=2e-3)
