"""Largest voltages inside the chain: full scale plus every interference in the worst phase, on top of DC."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from synth import circuit
from synth.circuit.network import ComplexArray, FloatArray
from synth.model.chain import Chain
from synth.model.part import OpAmp, Part
from synth.spec import Interference, Spec

NEARLY_DC = 1e-6  # of the centre
SINGLE_HARMONICS = 200.0  # up to here each harmonic is solved for
HARMONIC_BANDS = 20  # for each neper beyond
NOISE_SIGMAS = 4.0  # of wideband noise that the swing must hold
NOISE_POINTS = 121
RAMP = 0.8  # a linear edge spends this share of its length between 10 and 90 %


@dataclass(frozen=True, slots=True)
class Excursion:
    """What one amplifier's output must carry.

    Attributes:
        ref: of the amplifier; peak: [V] at its output, DC included; allowed: [V] its swing; slew: [V/s] needed;
        slew_allowed: [V/s]; input_peak: [V] at its non-inverting input; input_allowed: [V].
        level: [V] rms of the full-scale signal alone; dc: [V] largest, offsets and bias currents adding up.
        current: [A] peak that its output drives at signal and interference; current_allowed: [A].
    """

    ref: str
    level: float
    dc: float
    peak: float
    allowed: float
    slew: float
    slew_allowed: float
    input_peak: float
    input_allowed: float
    current: float
    current_allowed: float

    @property
    def swing_use(self) -> float:
        """Share of the swing that is used; infinite where the supply leaves none."""
        return self.peak / self.allowed if self.allowed > 0 else math.inf

    @property
    def slew_use(self) -> float:
        """Share of the slew rate that is used."""
        return self.slew / self.slew_allowed

    @property
    def current_use(self) -> float:
        """Share of the output current that is used."""
        return self.current / self.current_allowed

    @property
    def input_use(self) -> float:
        """Share of the input range that is used; infinite where the supply leaves none and there is a signal."""
        if self.input_allowed > 0:
            return self.input_peak / self.input_allowed
        return math.inf if self.input_peak > 0 else 0.0


def tones(interference: Interference, highest: float) -> tuple[FloatArray, FloatArray]:
    """Frequencies [Hz] and peak amplitudes of an interference, in its own unit, up to a frequency.

    A square wave of total rms L has harmonics 4 L/(n pi), n odd, times sinc(n f t) for a linear edge of length t
    (Fourier series, any handbook of mathematics).
    """
    level = interference.level if interference.level is not None else interference.voltage
    assert level is not None
    if interference.kind == "tone":
        return np.array([interference.frequency]), np.array([math.sqrt(2) * level])
    last = max(2.0, highest / interference.frequency)
    n = np.arange(1.0, min(last, SINGLE_HARMONICS), 2.0)
    edge = (interference.rise_time or 0.0) / RAMP

    def amplitudes(order: FloatArray) -> FloatArray:
        return np.asarray(4 * level / (order * np.pi) * np.abs(np.sinc(order * interference.frequency * edge)))

    f, peaks = n * interference.frequency, amplitudes(n)
    if last > SINGLE_HARMONICS:  # the many high ones in narrow bands, each with all its harmonics in its middle
        ends = np.geomspace(n[-1] + 1, last, int(HARMONIC_BANDS * math.log(last / n[-1])) + 2)
        middles = np.sqrt(ends[1:] * ends[:-1])
        f = np.concatenate([f, middles * interference.frequency])
        peaks = np.concatenate([peaks, amplitudes(middles) * np.diff(ends) / 2])
    return f, peaks


def excursions(
    chain: Chain, network: circuit.Network, spec: Spec, noise: Mapping[str, float] | None = None
) -> tuple[Excursion, ...]:
    """The excursion of every amplifier, in chain order.

    Args:
        noise: [V] rms of wideband noise at amplifier outputs, by reference, from `output_noise`; 4 sigma of it add up.
    """
    center = spec.target.center_frequency
    frequencies = [np.array([center])]
    voltages = [circuit.node_voltages(network, [center]) * (math.sqrt(2) * spec.target.full_scale)]
    for interference in spec.interference:
        f, amplitude = tones(interference, 100 * center)
        frequencies.append(f)
        voltages.append(_node_response(network, interference, f) * amplitude[:, None])
    loads = _Loads(
        np.concatenate(frequencies),
        np.concatenate(voltages),
        dc_voltages(chain, network),
        {node: k for k, node in enumerate(network.unknowns)},
    )
    amplifiers = [part for part in chain.parts if part.kind == "op-amp"]
    return tuple(
        _excursion(part, chain.models[str(part.value)], spec, loads, (noise or {}).get(part.ref, 0.0))
        for part in amplifiers
    )


@dataclass(frozen=True, slots=True)
class _Loads:
    """Peak phasors [V] of every node at every frequency of signal and interference, and the largest DC of each."""

    frequencies: FloatArray
    phasors: ComplexArray
    dc: FloatArray
    index: Mapping[str, int]

    def at(self, node: str) -> ComplexArray:
        """Peak phasors of a node, zero for ground, shape (F,)."""
        if node not in self.index:
            return np.zeros(self.frequencies.size, dtype=complex)
        return np.asarray(self.phasors[:, self.index[node]], dtype=np.complex128)

    def dc_at(self, node: str) -> float:
        """Largest DC of a node [V], zero for ground."""
        return float(self.dc[self.index[node]]) if node in self.index else 0.0


def output_noise(chain: Chain, network: circuit.Network) -> dict[str, float]:
    """Wideband noise at every amplifier's output [V rms], by reference."""
    center = chain.center_frequency
    wide = np.geomspace(center * 1e-3, center * 1e3, NOISE_POINTS)
    near = center * np.geomspace(0.7, 1.4, NOISE_POINTS)
    f = np.unique(np.concatenate([wide, near]))
    amplifiers = [part for part in chain.parts if part.kind == "op-amp"]
    densities = circuit.node_noise(network, [part.nodes[2] for part in amplifiers], f)
    return {
        part.ref: circuit.integrated(f, density, float(f[0]), float(f[-1]))
        for part, density in zip(amplifiers, densities, strict=True)
    }


def dc_voltages(chain: Chain, network: circuit.Network) -> FloatArray:
    """Largest DC voltage of every node by offset voltages and bias currents, all adding up [V], shape (nodes,).

    An offset stands at an amplifier's input as its noise does; taken at a frequency far below every corner.
    """
    f = np.array([chain.center_frequency * NEARLY_DC])
    effect = np.abs(circuit.resistances(network, f)[0])  # [ohm], from each node (column) to each (row)
    index = {node: k for k, node in enumerate(network.unknowns)}
    total = np.zeros(len(index))
    for part in chain.parts:
        if part.kind == "op-amp":
            model = chain.models[str(part.value)]
            total += effect[:, index[f"{part.ref}_p"]] * circuit.INPUT_TRANSCONDUCTANCE * model.offset_voltage_max
            for node in part.nodes[:2]:
                if node in index:
                    total += effect[:, index[node]] * model.bias_current
    return total


def _node_response(network: circuit.Network, interference: Interference, f: FloatArray) -> ComplexArray:
    """Node voltages for a unit of the interference: an input, or a voltage through a capacitance to the terminals."""
    if interference.through is None:
        return circuit.node_voltages(network, f)
    current = 2j * np.pi * f * interference.through
    return circuit.injected_voltages(network, circuit.TERMINAL, f) * current[:, None]


def _excursion(part: Part, model: OpAmp, spec: Spec, loads: _Loads, noise: float) -> Excursion:
    plus, _, out = part.nodes
    high, low = rails(spec)
    peaks = np.abs(loads.at(out))
    rest = loads.dc_at(out) + NOISE_SIGMAS * noise
    inner = f"{part.ref}_q" if model.second_pole is not None else f"{part.ref}_p"
    current = np.abs(loads.at(inner) - loads.at(out)) / model.output_resistance  # through the output resistance
    return Excursion(
        part.ref,
        float(peaks[0] / math.sqrt(2)),
        loads.dc_at(out),
        float(peaks.sum() + rest),
        min(high - model.swing_headroom_high, low - model.swing_headroom_low),
        float((2 * np.pi * loads.frequencies * peaks).sum()),
        model.slew_rate,
        float(np.abs(loads.at(plus)).sum() + loads.dc_at(plus)),
        min(high - model.common_mode_headroom_high, low - model.common_mode_headroom_low),
        float(current.sum()),
        model.output_current,
    )


def rails(spec: Spec) -> tuple[float, float]:
    """Distance of the positive and of the negative rail from the signal's reference [V]."""
    if spec.supply.negative is None:
        return spec.supply.positive / 2, spec.supply.positive / 2
    return spec.supply.positive, -spec.supply.negative
