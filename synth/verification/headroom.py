"""Largest voltages inside the chain: full scale plus every interference in the worst phase."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from synth import circuit
from synth.circuit.network import ComplexArray, FloatArray
from synth.model.chain import Chain
from synth.model.part import Part
from synth.spec import Interference, Spec

RAMP = 0.8  # a linear edge spends this share of its length between 10 and 90 %


@dataclass(frozen=True, slots=True)
class Excursion:
    """What one amplifier's output must carry.

    Attributes:
        ref: of the amplifier; peak: [V] at its output; allowed: [V] its swing; slew: [V/s] needed;
        slew_allowed: [V/s]; input_peak: [V] at its non-inverting input; input_allowed: [V].
        level: [V] rms of the full-scale signal alone.
    """

    ref: str
    level: float
    peak: float
    allowed: float
    slew: float
    slew_allowed: float
    input_peak: float
    input_allowed: float


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
    index = {node: k for k, node in enumerate(network.unknowns)}
    found = []
    for part in chain.parts:
        if part.kind == "op-amp":
            plus, _, out = part.nodes
            at_plus = peaks[:, index[plus]] if plus in index else np.zeros(f.size)
            found.append(_excursion(chain, part, spec, f, peaks[:, index[out]], at_plus))
    return tuple(found)


def _node_response(network: circuit.Network, interference: Interference, f: FloatArray) -> ComplexArray:
    """Node voltages for a unit of the interference: an input, or a voltage through a capacitance to the terminals."""
    if interference.through is None:
        return circuit.node_voltages(network, f)
    current = 2j * np.pi * f * interference.through
    return circuit.injected_voltages(network, circuit.TERMINAL, f) * current[:, None]


def _excursion(
    chain: Chain, part: Part, spec: Spec, f: FloatArray, peaks: FloatArray, at_plus: FloatArray
) -> Excursion:
    model = chain.models[str(part.value)]
    high, low = rails(spec)
    return Excursion(
        part.ref,
        float(peaks[0] / math.sqrt(2)),
        float(peaks.sum()),
        min(high - model.swing_headroom_high, low - model.swing_headroom_low),
        float((2 * np.pi * f * peaks).sum()),
        model.slew_rate,
        float(at_plus.sum()),
        min(high - model.common_mode_headroom_high, low - model.common_mode_headroom_low),
    )


def rails(spec: Spec) -> tuple[float, float]:
    """Distance of the positive and of the negative rail from the signal's reference [V]."""
    if spec.supply.negative is None:
        return spec.supply.positive / 2, spec.supply.positive / 2
    return spec.supply.positive, -spec.supply.negative
