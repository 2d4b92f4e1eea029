"""Largest voltages inside the chain: full scale plus every interference in the worst phase, on top of DC."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from synth import circuit
from synth.circuit.network import ComplexArray, FloatArray
from synth.model.chain import Chain
from synth.model.part import Part
from synth.spec import Interference, Spec

NEARLY_DC = 1e-6  # of the centre
RAMP = 0.8  # a linear edge spends this share of its length between 10 and 90 %


@dataclass(frozen=True, slots=True)
class Excursion:
    """What one amplifier's output must carry.

    Attributes:
        ref: of the amplifier; peak: [V] at its output, DC included; allowed: [V] its swing; slew: [V/s] needed;
        slew_allowed: [V/s]; input_peak: [V] at its non-inverting input; input_allowed: [V].
        level: [V] rms of the full-scale signal alone; dc: [V] largest, offsets and bias currents adding up.
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

    @property
    def swing_use(self) -> float:
        """Share of the swing that is used; infinite where the supply leaves none."""
        return self.peak / self.allowed if self.allowed > 0 else math.inf

    @property
    def slew_use(self) -> float:
        """Share of the slew rate that is used."""
        return self.slew / self.slew_allowed

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
    n = np.arange(1.0, max(2.0, highest / interference.frequency), 2.0)
    edge = (interference.rise_time or 0.0) / RAMP
    return n * interference.frequency, 4 * level / (n * np.pi) * np.abs(np.sinc(n * interference.frequency * edge))


def excursions(chain: Chain, network: circuit.Network, spec: Spec) -> tuple[Excursion, ...]:
    """The excursion of every amplifier, in chain order."""
    center = spec.target.center_frequency
    frequencies = [np.array([center])]
    voltages = [circuit.node_voltages(network, [center]) * (math.sqrt(2) * spec.target.full_scale)]
    for interference in spec.interference:
        f, amplitude = tones(interference, 100 * center)
        frequencies.append(f)
        voltages.append(_node_response(network, interference, f) * amplitude[:, None])
    f = np.concatenate(frequencies)
    peaks: FloatArray = np.abs(np.concatenate(voltages))
    dc = dc_voltages(chain, network)
    index = {node: k for k, node in enumerate(network.unknowns)}
    found = []
    for part in chain.parts:
        if part.kind == "op-amp":
            plus, _, out = part.nodes
            at_plus = peaks[:, index[plus]].sum() + dc[index[plus]] if plus in index else 0.0
            found.append(_excursion(chain, part, spec, f, peaks[:, index[out]], dc[index[out]], at_plus))
    return tuple(found)


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


def _excursion(
    chain: Chain, part: Part, spec: Spec, f: FloatArray, peaks: FloatArray, dc: float, at_plus: float
) -> Excursion:
    model = chain.models[str(part.value)]
    high, low = rails(spec)
    return Excursion(
        part.ref,
        float(peaks[0] / math.sqrt(2)),
        float(dc),
        float(peaks.sum() + dc),
        min(high - model.swing_headroom_high, low - model.swing_headroom_low),
        float((2 * np.pi * f * peaks).sum()),
        model.slew_rate,
        float(at_plus),
        min(high - model.common_mode_headroom_high, low - model.common_mode_headroom_low),
    )


def rails(spec: Spec) -> tuple[float, float]:
    """Distance of the positive and of the negative rail from the signal's reference [V]."""
    if spec.supply.negative is None:
        return spec.supply.positive / 2, spec.supply.positive / 2
    return spec.supply.positive, -spec.supply.negative
