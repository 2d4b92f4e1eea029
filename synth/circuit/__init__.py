"""The one engine: every electrical number of a chain comes from here."""

from __future__ import annotations

from synth.circuit.analysis import (
    NoiseSpectrum,
    injected_voltages,
    integrated,
    node_noise,
    node_voltages,
    noise,
    resistances,
    response,
    response_and_delay,
)
from synth.circuit.assemble import INPUT, INPUT_TRANSCONDUCTANCE, OUTPUT, TERMINAL, Drawn, build_network, build_values
from synth.circuit.batch import batch_response
from synth.circuit.loop import Margin, phase_margin, phase_margins, return_ratio
from synth.circuit.modes import growth, is_stable, poles, resonant_pairs, zeros
from synth.circuit.netlist import comment_text, netlist_text
from synth.circuit.network import ZERO_CELSIUS, Network

__all__ = [
    "INPUT",
    "INPUT_TRANSCONDUCTANCE",
    "OUTPUT",
    "TERMINAL",
    "ZERO_CELSIUS",
    "Drawn",
    "Margin",
    "Network",
    "NoiseSpectrum",
    "batch_response",
    "build_network",
    "build_values",
    "comment_text",
    "growth",
    "injected_voltages",
    "integrated",
    "is_stable",
    "netlist_text",
    "node_noise",
    "node_voltages",
    "noise",
    "phase_margin",
    "phase_margins",
    "poles",
    "resistances",
    "resonant_pairs",
    "response",
    "response_and_delay",
    "return_ratio",
    "zeros",
]
