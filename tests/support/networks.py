"""Circuits to try the engine on, and the checks that it must pass, as functions.

The builders write a network element by element, or a chain part by part.  `dense` assembles the nodal matrix anew,
from the elements and not from the engine's stamps, and `eliminate` solves it in extended precision with row pivots:
together they are the reference for every transfer.  The `check_` functions assert; the regular tests use them on the
engine as it is, `tests/circuit/test_planted_defects.py` on the engine with a defect.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from synth import circuit
from synth.circuit.network import GROUND, Amplifier, Element, ElementKind, Network, NoiseSource
from synth.model.chain import Chain, Stage, StageTarget
from synth.model.part import OpAmp, Part
from synth.parts.passives import capacitor_stock, coupling_stock, resistor_stock
from synth.spec import Sensor
from synth.topology.place import Stocks, Surroundings

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

K = 1.380649e-23  # [J/K] SI 2019, exact
KELVIN = 273.15
INNER = 1e-3  # [S] scale inside the amplifiers and gyrators written here
UNIT_SENSOR = Sensor(scale=1.0, input_unit="V")


# ---------------------------------------------------------------------------------------------------------------
# Networks, element by element


@dataclass
class Board:
    """A circuit in the making; the input node "in" is held, every other node is an unknown."""

    elements: list[Element] = field(default_factory=list)
    noise: list[NoiseSource] = field(default_factory=list)
    amplifiers: list[Amplifier] = field(default_factory=list)

    def add(self, name: str, kind: ElementKind, nodes: Sequence[str], value: float, noisy: bool = False) -> None:
        """An element of any kind."""
        self.elements.append(Element(name, kind, tuple(nodes), float(value), noisy, name))

    def resistor(self, name: str, a: str, b: str, ohm: float, noisy: bool = True) -> None:
        """A resistor."""
        self.add(name, "conductance", (a, b), 1 / ohm, noisy)

    def capacitor(self, name: str, a: str, b: str, farad: float) -> None:
        """A capacitor."""
        self.add(name, "capacitance", (a, b), farad)

    def inductor(self, name: str, a: str, b: str, henry: float) -> None:
        """An inductor: a capacitance behind two transconductances, at a node of its own."""
        inner = f"{name}_l"
        self.add(f"{name}_i", "transconductance", (a, b, inner, GROUND), INNER)
        self.add(f"{name}_v", "transconductance", (GROUND, inner, a, b), INNER)
        self.add(f"{name}_c", "capacitance", (inner, GROUND), henry * INNER**2)

    def source(self, name: str, nodes: Sequence[str], siemens: float) -> None:
        """A transconductance: the current leaves nodes[0], enters nodes[1], for v(nodes[2]) - v(nodes[3])."""
        self.add(name, "transconductance", nodes, siemens)

    def op_amp(
        self,
        ref: str,
        plus: str,
        minus: str,
        out: str,
        gain_bandwidth: float = 1e12,
        dc_gain: float = 1e12,
        output_resistance: float = 1e-4,
    ) -> None:
        """A one-pole amplifier A0/(1 + s A0/(2 pi GBW)) with an output resistance and no noise."""
        inner = f"{ref}_p"
        self.source(f"{ref}_gm", (GROUND, inner, plus, minus), INNER)
        self.add(f"{ref}_g0", "conductance", (inner, GROUND), INNER / dc_gain)
        self.capacitor(f"{ref}_c0", inner, GROUND, INNER / (2 * np.pi * gain_bandwidth))
        self.source(f"{ref}_gmo", (GROUND, out, inner, GROUND), 1 / output_resistance)
        self.add(f"{ref}_go", "conductance", (out, GROUND), 1 / output_resistance)
        self.amplifiers.append(Amplifier(ref, f"{ref}_gm", out))

    def amplifier_noise(
        self, ref: str, inputs: Iterable[str], voltage: tuple[float, float], current: tuple[float, float]
    ) -> None:
        """Noise of an amplifier written by `op_amp`: (white density, corner) of its voltage and input currents."""
        self.noise.append(NoiseSource(f"{ref}_en", (GROUND, f"{ref}_p"), INNER * voltage[0], voltage[1], label="en"))
        for k, node in enumerate(inputs):
            self.noise.append(NoiseSource(f"{ref}_i{k}", (GROUND, node), current[0], current[1], label="in"))

    def network(self, output: str = "out", temperature: float = 300.15) -> Network:
        """The finished circuit, at a temperature [K]."""
        return Network("in", output, tuple(self.elements), tuple(self.noise), tuple(self.amplifiers), temperature)


def multiple_feedback(
    board: Board,
    name: str,
    before: str,
    after: str,
    r1a: float,
    r1b: float,
    r2: float,
    c1: float,
    c2: float,
    gain_bandwidth: float = 1e12,
    dc_gain: float = 1e12,
    output_resistance: float = 1e-4,
) -> None:
    """A multiple-feedback section: R1A in, R1B to ground, C1 to the output, C2 to the inverting input, R2 across."""
    a, m = f"{name}a", f"{name}m"
    board.resistor(f"{name}R1A", before, a, r1a)
    board.resistor(f"{name}R1B", a, GROUND, r1b)
    board.capacitor(f"{name}C1", a, after, c1)
    board.capacitor(f"{name}C2", a, m, c2)
    board.resistor(f"{name}R2", m, after, r2)
    board.op_amp(f"{name}U", GROUND, m, after, gain_bandwidth, dc_gain, output_resistance)


def first_order(board: Board, name: str, before: str, node: str, corner: float) -> None:
    """A unilateral pole 1/(1 + j f/corner)."""
    board.source(f"{name}_gm", (GROUND, node, before, GROUND), INNER)
    board.add(f"{name}_g", "conductance", (node, GROUND), INNER)
    board.capacitor(f"{name}_c", node, GROUND, INNER / (2 * np.pi * corner))


def second_order(board: Board, name: str, before: str, node: str, frequency: float, q: float, shape: str) -> None:
    """A unilateral pole pair of two integrators, "band-pass" (one at its peak) or "low-pass" (one at 0 Hz).

    At `band`: C s v = INNER/q (v_in or nothing - v) - INNER v_low + ...; the low-pass output is the integral.
    """
    capacitance = INNER / (2 * np.pi * frequency)
    band, low = (node, f"{name}_low") if shape == "band-pass" else (f"{name}_band", node)
    drive = INNER / q if shape == "band-pass" else INNER
    board.source(f"{name}_gm", (GROUND, band, before, GROUND), drive)
    board.add(f"{name}_gq", "conductance", (band, GROUND), INNER / q)
    board.capacitor(f"{name}_cb", band, GROUND, capacitance)
    board.source(f"{name}_gl", (band, GROUND, low, GROUND), INNER)
    board.source(f"{name}_gi", (GROUND, low, band, GROUND), INNER)
    board.capacitor(f"{name}_cl", low, GROUND, capacitance)


def pole_pair(network: Network, near: float) -> tuple[float, float]:
    """Frequency [Hz] and Q of the complex pair nearest a frequency [Hz]."""
    pairs = circuit.resonant_pairs(circuit.poles(network, near))
    return min(pairs, key=lambda pair: abs(math.log(pair[0] / near)))


# ---------------------------------------------------------------------------------------------------------------
# Random circuits


def random_chain(seed: int, center: float, notch: bool = False, largest: int = 36, capacitors: int = 24) -> Network:
    """A chain of sections, coupled gain stages and ladders around a centre [Hz], up to 40 nodes, 25 capacitors.

    Couplings have their pole near 0.01 of the centre, amplifiers theirs near 1e-6 of it; with `notch` a series
    branch of inductance and capacitance to ground puts a transmission zero into the band.
    """
    rng = np.random.default_rng(seed)
    board = Board()
    board.resistor("RS", "in", "n0", 50.0)
    node, k = "n0", 0
    if notch:
        at = center * (1 + 0.1 * rng.uniform(-1, 1))
        henry = 1e3 / (2 * np.pi * center)
        board.resistor("RN", "n0", "n1", 1e3)
        board.inductor("LN", "n1", "n1x", henry)
        board.capacitor("CN", "n1x", GROUND, 1 / ((2 * np.pi * at) ** 2 * henry))
        board.resistor("RM", "n1", GROUND, 5e3)
        node, k = "n1", 1
    while True:
        kind = ("section", "gain", "ladder")[rng.integers(3)]
        used = len(board.network(node).unknowns)
        caps = sum(e.kind == "capacitance" for e in board.elements)
        if used > largest or caps > capacitors - 3:
            break
        k += 1
        after = f"n{k}"
        if kind == "section":
            _random_section(board, rng, f"S{k}", node, after, center)
        elif kind == "gain":
            _random_gain(board, rng, f"A{k}", node, after, center)
        else:
            ohm = 10 ** rng.uniform(3, 4)
            board.resistor(f"RL{k}", node, after, ohm)
            board.capacitor(f"CL{k}", after, GROUND, 1 / (2 * np.pi * center * rng.uniform(1, 10) * ohm))
        node = after
    board.resistor("RLOAD", node, GROUND, 10e3)
    return board.network(node)


def _random_section(
    board: Board, rng: np.random.Generator, name: str, before: str, after: str, center: float
) -> None:
    q, frequency = rng.uniform(2, 15), center * (1 + 0.05 * rng.uniform(-1, 1))
    c = 10 ** rng.uniform(-9.5, -8.5)
    r2 = 2 * q / (2 * np.pi * frequency * c)
    r1a = r2 / (2 * rng.uniform(1, 3))
    r1b = 1 / ((2 * np.pi * frequency * c) ** 2 * r2 - 1 / r1a)
    multiple_feedback(board, name, before, after, r1a, r1b, r2, c, c, 1e3 * center, 1e9, 40.0)


def _random_gain(board: Board, rng: np.random.Generator, name: str, before: str, after: str, center: float) -> None:
    p, m = f"{name}p", f"{name}m"
    board.capacitor(f"{name}CC", before, p, 1 / (2 * np.pi * 0.01 * center * 100e3))
    board.resistor(f"{name}RB", p, GROUND, 100e3)
    board.resistor(f"{name}RG", m, GROUND, 1e3)
    board.resistor(f"{name}RF", m, after, 1e3 * rng.uniform(1, 50))
    board.op_amp(f"{name}U", p, m, after, 1e3 * center, 1e9, 40.0)


def scattered(network: Network, seed: int, builds: int, spread: float) -> FloatArray:
    """Element values of builds, each element scattered by +-spread on its own; the first build is nominal."""
    factors = 1 + spread * np.random.default_rng(seed).uniform(-1, 1, (len(network.elements), builds))
    factors[:, 0] = 1.0
    return network.values[:, None] * factors


def random_one_port(seed: int) -> tuple[Network, str]:
    """A passive network of random R, L and C between up to six nodes, and its port; resonances near 1 kHz to 1 MHz."""
    rng = np.random.default_rng(seed)
    count = int(rng.integers(2, 7))
    nodes = [GROUND, *(f"n{k}" for k in range(1, count + 1))]
    board = Board()
    for k in range(1, count + 1):  # a tree of resistors keeps every node tied to ground
        board.resistor(f"R{k}", nodes[k], nodes[int(rng.integers(0, k))], 10 ** rng.uniform(1, 5))
    for k in range(3 * count):
        a, b = rng.choice(count + 1, 2, replace=False)
        kind = rng.integers(3)
        if kind == 0:
            board.resistor(f"RX{k}", nodes[a], nodes[b], 10 ** rng.uniform(1, 5))
        elif kind == 1:
            board.inductor(f"LX{k}", nodes[a], nodes[b], 10 ** rng.uniform(-5, -1))
        else:
            board.capacitor(f"CX{k}", nodes[a], nodes[b], 10 ** rng.uniform(-11, -7))
    return board.network("n1", float(rng.uniform(250, 350))), f"n{count}"


# ---------------------------------------------------------------------------------------------------------------
# The reference: nodal equations assembled anew, solved in extended precision


def dense(network: Network, values: FloatArray, s: complex) -> tuple[NDArray[np.clongdouble], NDArray[np.clongdouble]]:
    """Nodal matrices and right-hand sides at one complex frequency, shapes (builds, n, n) and (builds, n).

    Args:
        values: element values, shape (elements, builds).
    """
    names = list(network.unknowns)
    at = {name: k for k, name in enumerate(names)}
    n = len(names)
    Y = np.zeros((values.shape[1], n + 1, n + 2), dtype=np.clongdouble)  # row n: ground; column n: ground, n + 1: input
    at[GROUND], at[network.input] = n, n + 1
    for element, value in zip(network.elements, values, strict=True):
        admittance = value.astype(np.clongdouble)
        if element.kind == "capacitance":
            admittance = admittance * np.clongdouble(s)
        leaves, enters = element.nodes[0], element.nodes[1]
        plus, minus = element.nodes[2:] if element.kind == "transconductance" else (leaves, enters)
        for node, sign in ((leaves, 1), (enters, -1)):
            row = n if node == network.input else at[node]  # nobody asks for the current of the held node
            Y[:, row, at[plus]] += sign * admittance
            Y[:, row, at[minus]] -= sign * admittance
    return Y[:, :n, :n], -Y[:, :n, n + 1]


def eliminate(
    Y: NDArray[np.clongdouble], b: NDArray[np.clongdouble]
) -> tuple[NDArray[np.clongdouble], NDArray[np.clongdouble]]:
    """Solutions and determinants of many systems by Gaussian elimination with row pivots, extended precision."""
    scale = np.abs(Y).max(axis=2)
    A = np.concatenate([Y, b[:, :, None]], axis=2) / scale[:, :, None]
    systems, n = np.arange(A.shape[0]), A.shape[1]
    determinant = np.prod(scale, axis=1).astype(np.clongdouble)
    for k in range(n):
        pivot = k + np.abs(A[:, k:, k]).argmax(axis=1)
        determinant = np.where(pivot == k, determinant, -determinant)
        upper, chosen = A[:, k].copy(), A[systems, pivot].copy()
        A[systems, pivot], A[:, k] = upper, chosen
        determinant = determinant * A[:, k, k]
        factor = A[:, k + 1 :, k] / A[:, k, None, k]
        A[:, k + 1 :] -= factor[:, :, None] * A[:, None, k]
    x = np.zeros((A.shape[0], n), dtype=np.clongdouble)
    for k in range(n - 1, -1, -1):
        x[:, k] = (A[:, k, n] - np.sum(A[:, k, k + 1 : n] * x[:, k + 1 :], axis=1)) / A[:, k, k]
    return x, determinant


def reference_response(network: Network, values: FloatArray, frequencies: ArrayLike) -> ComplexArray:
    """Response of every build at every frequency, shape (F, builds), by dense solution in extended precision."""
    output = network.unknowns.index(network.output)
    rows = [
        eliminate(*dense(network, values, 2j * np.pi * f))[0][:, output]
        for f in np.atleast_1d(np.asarray(frequencies, dtype=float))
    ]
    return np.array(rows).astype(complex)


def determinant(network: Network, s: complex) -> complex:
    """Determinant of the nodal matrix at one complex frequency [S^n]."""
    return complex(eliminate(*dense(network, network.values[:, None], s))[1][0])


def without(network: Network, name: str) -> Network:
    """The network with one element's value set to zero."""
    assert any(e.name == name for e in network.elements)
    return replace(network, elements=tuple(replace(e, value=0.0) if e.name == name else e for e in network.elements))


# ---------------------------------------------------------------------------------------------------------------
# Chains, part by part


def op_amp(**figures: object) -> OpAmp:
    """A fast low-noise op amp without strays; any figure can be set."""
    plain = OpAmp(
        type="TEST",
        technology="bipolar",
        gain_bandwidth=80e6,
        dc_gain=1e6,
        second_pole=None,
        output_resistance=40.0,
        input_capacitance_differential=0.0,
        input_capacitance_common=0.0,
        voltage_noise=3e-9,
        voltage_noise_corner=100.0,
        current_noise=1e-12,
        current_noise_corner=300.0,
        current_noise_slope=0.0,
        minimum_noise_gain=1.0,
        slew_rate=20e6,
        swing_headroom_high=1.5,
        swing_headroom_low=1.5,
        common_mode_headroom_high=1.5,
        common_mode_headroom_low=1.5,
        output_current=20e-3,
        offset_voltage=100e-6,
        offset_voltage_max=500e-6,
        bias_current=100e-9,
        supply_minimum=4.5,
        supply_maximum=36.0,
        supply_current=4e-3,
        gain_bandwidth_spread=0.3,
        dc_gain_spread=0.5,
        stray_output_to_inverting=0.0,
        stray_inverting_to_ground=0.0,
        packages=((1, "TEST"),),
    )
    return replace(plain, **figures)  # type: ignore[arg-type]


def stray_op_amp(**figures: object) -> OpAmp:
    """The same with a second pole, input capacitances and layout strays."""
    strays: dict[str, object] = {
        "second_pole": 300e6,
        "input_capacitance_differential": 4e-12,
        "input_capacitance_common": 2e-12,
        "stray_output_to_inverting": 0.1e-12,
        "stray_inverting_to_ground": 2e-12,
    }
    return op_amp(**(strays | figures))


def resistor(ref: str, a: str, b: str, ohm: float, stray: float = 0.0) -> Part:
    """A resistor part."""
    return Part(ref, "resistor", "test", "stage", (a, b), ohm, 0.01, 50e-6, "thin film", stray=stray)


def capacitor(ref: str, a: str, b: str, farad: float, loss_tangent: float = 0.0) -> Part:
    """A capacitor part."""
    return Part(ref, "capacitor", "test", "stage", (a, b), farad, 0.01, 30e-6, "C0G", loss_tangent=loss_tangent)


def amplifier(ref: str, plus: str, minus: str, out: str, model: OpAmp) -> Part:
    """An op amp part of a model's type."""
    return Part(ref, "op-amp", "amplifier", "stage", (plus, minus, out), model.type)


def chain_of(
    parts: Sequence[Part],
    models: Sequence[OpAmp] = (),
    sensor: Sensor = UNIT_SENSOR,
    center: float = 10e3,
    load: float | None = None,
    load_capacitance: float = 0.0,
    ambient: float = 27.0,
) -> Chain:
    """A chain of one stage from parts whose nodes run from "sig" to "out"."""
    stage = Stage(
        "stage", "bandpass", "multiple-feedback", StageTarget(1.0), "TEST", "sig", "out", tuple(p.ref for p in parts)
    )
    known: Mapping[str, OpAmp] = {model.type: model for model in models}
    return Chain(center, ambient, sensor, load, load_capacitance, (stage,), tuple(parts), known)


def section_chain(
    q: float = 10.0,
    center: float = 10e3,
    c: float = 1e-9,
    model: OpAmp | None = None,
    resistor_stray: float = 0.0,
    loss_tangent: float = 0.0,
) -> Chain:
    """One multiple-feedback section of unit gain: equal capacitors, R1A = Q/(w C), R1 = 1/(2 Q w C), R2 = 2 Q/(w C)."""
    model = model or op_amp(gain_bandwidth=1e14, dc_gain=1e12, output_resistance=1e-3)
    omega = 2 * np.pi * center
    r1a = q / (omega * c)
    parts = (
        resistor("R1", "sig", "a", r1a),
        resistor("R2", "a", GROUND, 1 / (2 * q * omega * c - 1 / r1a)),
        capacitor("C1", "a", "out", c, loss_tangent),
        capacitor("C2", "a", "m", c, loss_tangent),
        resistor("R3", "m", "out", 2 * q / (omega * c), resistor_stray),
        amplifier("U1", GROUND, "m", "out", model),
    )
    return chain_of(parts, (model,), center=center)


def gain_chain(gain: float, model: OpAmp, center: float = 10e3, sensor: Sensor = UNIT_SENSOR) -> Chain:
    """One non-inverting gain stage, coupled a hundred times below the centre."""
    parts = (
        capacitor("C1", "sig", "p", 100 / (2 * np.pi * center * 100e3)),
        resistor("R1", "p", GROUND, 100e3),
        resistor("R2", "m", GROUND, 100.0),
        resistor("R3", "m", "out", 100.0 * (gain - 1)),
        amplifier("U1", "p", "m", "out", model),
    )
    return chain_of(parts, (model,), sensor, center)


def stocks(resistors: str = "E96", capacitors: str = "E12") -> Stocks:
    """Catalog parts of the wanted series."""
    return Stocks(resistor_stock(resistors), capacitor_stock(capacitors), coupling_stock())


def around(center: float, sensor: Sensor = UNIT_SENSOR, load: float | None = None) -> Surroundings:
    """A chain between a sensor and a load, at 27 degC."""
    return Surroundings(center, 27.0, sensor, load, 0.0)


# ---------------------------------------------------------------------------------------------------------------
# Checks


def check_matches_reference(network: Network, values: FloatArray, frequencies: ArrayLike, floor: float = 1e-4) -> None:
    """batch_response equals the dense reference to 1e-9 wherever the response is within 80 dB of its peak."""
    got = circuit.batch_response(network, values, frequencies)
    want = reference_response(network, values, frequencies)
    size = np.maximum(np.abs(want), floor * np.abs(want).max(axis=0))
    assert float(np.max(np.abs(got - want) / size)) < 1e-9


def check_response_matches_reference(network: Network, frequencies: ArrayLike) -> None:
    """response equals the dense reference to 1e-9 of itself."""
    got = circuit.response(network, frequencies)
    want = reference_response(network, network.values[:, None], frequencies)[:, 0]
    np.testing.assert_allclose(got, want, rtol=1e-9, atol=1e-13 * float(np.abs(want).max()))


def check_delay_is_phase_slope(network: Network, frequencies: ArrayLike) -> None:
    """Group delay equals -d(phase)/d(omega) of the dense reference, differenced to fourth order."""
    f = np.asarray(frequencies, dtype=float)
    _, delay = circuit.response_and_delay(network, f)
    step = 1e-5
    points = f[:, None] * (1 + step * np.array([-2.0, -1.0, 1.0, 2.0]))
    h = reference_response(network, network.values[:, None], points.ravel())[:, 0].reshape(points.shape)
    slope = (8 * np.angle(h[:, 2] / h[:, 1]) - np.angle(h[:, 3] / h[:, 0])) / (12 * step * 2 * np.pi * f)
    np.testing.assert_allclose(delay, -slope, rtol=1e-6, atol=1e-7 * float(np.abs(slope).max()))


def check_delay_is_sum_over_poles_and_zeros(network: Network, frequencies: ArrayLike, reference: float) -> None:
    """Group delay of H = k prod(s - z)/prod(s - p): sum of -Re 1/(jw - z) against Re 1/(jw - p)."""
    f = np.asarray(frequencies, dtype=float)
    _, delay = circuit.response_and_delay(network, f)
    s = 2j * np.pi * f[:, None]
    zeros, poles = circuit.zeros(network, reference), circuit.poles(network, reference)
    want = np.real(1 / (s - poles)).sum(axis=1) - np.real(1 / (s - zeros)).sum(axis=1)
    np.testing.assert_allclose(delay, want, rtol=1e-6, atol=1e-7 * float(np.abs(want).max()))


def check_poles_and_zeros_make_the_response(network: Network, frequencies: ArrayLike, reference: float) -> None:
    """k prod(jw - z)/prod(jw - p), k fixed at the reference frequency [Hz], equals the response to 1e-8."""
    f = np.append(np.asarray(frequencies, dtype=float), reference)
    s = 2j * np.pi * f[:, None]
    scale = 2 * np.pi * reference
    zeros, poles = circuit.zeros(network, reference), circuit.poles(network, reference)
    shape = np.prod((s - zeros) / scale, axis=1) / np.prod((s - poles) / scale, axis=1)
    h = circuit.response(network, f)
    np.testing.assert_allclose(shape / shape[-1], h / h[-1], rtol=1e-8)


def check_resonance(network: Network, frequency: float, q: float, rtol: float = 1e-7) -> None:
    """The pole pair nearest a frequency [Hz] has that frequency and that Q."""
    got = pole_pair(network, frequency)
    np.testing.assert_allclose(got, (frequency, q), rtol=rtol)


def check_noise_is_real_part_of_impedance(network: Network, port: str, frequencies: ArrayLike) -> None:
    """Open-circuit noise of a passive port: 4 k T Re Z(f) (H. Nyquist, Phys. Rev. 32 (1928) 110)."""
    f = np.asarray(frequencies, dtype=float)
    at_port = replace(network, output=port)
    density = circuit.noise(at_port, f).density
    z = circuit.injected_voltages(network, port, f)[:, network.unknowns.index(port)]
    np.testing.assert_allclose(density**2, 4 * K * network.temperature * z.real, rtol=1e-8)


def check_reciprocity(network: Network, a: str, b: str, frequencies: ArrayLike) -> None:
    """A passive network: one ampere into a gives at b the voltage that one ampere into b gives at a."""
    at_b = circuit.injected_voltages(network, a, frequencies)[:, network.unknowns.index(b)]
    at_a = circuit.injected_voltages(network, b, frequencies)[:, network.unknowns.index(a)]
    np.testing.assert_allclose(at_b, at_a, rtol=1e-9, atol=1e-13 * float(np.abs(at_a).max()))


def check_return_difference(network: Network, ref: str, frequencies: ArrayLike) -> None:
    """1 + T = det(Y) / det(Y with the source dead) (H. W. Bode, 1945, ch. 4; from memory)."""
    f = np.asarray(frequencies, dtype=float)
    gain_element = next(a.gain_element for a in network.amplifiers if a.ref == ref)
    dead = without(network, gain_element)
    want = np.array([determinant(network, 2j * np.pi * x) / determinant(dead, 2j * np.pi * x) for x in f])
    np.testing.assert_allclose(1 + circuit.return_ratio(network, ref, f), want, rtol=1e-8)


def check_parts_resonate(chain: Chain, r1a: str, r1b: str, r2: str, c1: str, c2: str, rtol: float = 1e-6) -> None:
    """Without strays, pole pair and centre gain of a section are those of the design equations on its parts.

    Franco, 3rd ed., sec. 3.5 (equations via the checks list): w0^2 = 1/(R1 R2 C1 C2), R1 = R1A parallel R1B,
    Q = sqrt(R2/R1) sqrt(C1 C2)/(C1 + C2), peak gain -(R2/R1A) C2/(C1 + C2).
    """
    a, b, f = (chain.part(ref).number for ref in (r1a, r1b, r2))
    first, second = chain.part(c1).number, chain.part(c2).number
    shunt = a * b / (a + b)
    frequency = 1 / (2 * np.pi * math.sqrt(shunt * f * first * second))
    q = math.sqrt(f / shunt) * math.sqrt(first * second) / (first + second)
    network = circuit.build_network(chain)
    check_resonance(network, frequency, q, rtol)
    h = circuit.response(network, [frequency])[0]
    np.testing.assert_allclose(h, -f / a * second / (first + second), rtol=10 * rtol)


def check_stray_costs_q(chain_without: Chain, chain_with: Chain, c3: float, c: float) -> None:
    """A capacitance C3 across the feedback lowers Q to Q/(1 + 2 Q^2 C3/C), first order in C3 (within a tenth of it)."""
    near = chain_without.center_frequency
    _, plain = pole_pair(circuit.build_network(chain_without), near)
    _, lowered = pole_pair(circuit.build_network(chain_with), near)
    loss = 2 * plain**2 * c3 / c
    np.testing.assert_allclose(plain / lowered - 1, loss, rtol=0.1)


def check_white_noise(network: Network, frequency: float, density: float, rtol: float) -> None:
    """Output noise density [V/rtHz] at a frequency [Hz]."""
    np.testing.assert_allclose(circuit.noise(network, [frequency]).density[0], density, rtol=rtol)


def check_netlist_is_the_network(network: Network, center: float) -> None:
    """The netlist, read back element by element, has the response of the network to 1e-9."""
    text = circuit.netlist_text(network, "title", (), center, with_noise=False)
    f = center * np.array([0.01, 0.5, 0.97, 1.0, 1.05, 3.0, 100.0])
    read = read_netlist(text, network.output)
    got = reference_response(read, read.values[:, None], f)[:, 0]
    np.testing.assert_allclose(got, circuit.response(network, f), rtol=1e-9)


def read_netlist(text: str, output: str) -> Network:
    """R, C and G lines of a netlist as a network; everything else is left out."""
    elements = []
    for line in text.splitlines():
        fields = line.split()
        if not fields or fields[0][0] not in "RCG":
            continue
        name, nodes, value = fields[0], tuple(fields[1:-1]), float(fields[-1])
        if name[0] == "R":
            elements.append(Element(name, "conductance", nodes, 1 / value))
        elif name[0] == "C":
            elements.append(Element(name, "capacitance", nodes, value))
        else:
            elements.append(Element(name, "transconductance", nodes, value))
    return Network("in", output, tuple(elements), (), (), 300.15)


NUMBER = re.compile(r"-?\d+(\.\d+)?(e[+-]?\d+)?\Z")

