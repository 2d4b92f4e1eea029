"""The resistance whose thermal noise is an amplifier's own voltage noise."""

from __future__ import annotations

from synth.circuit.network import BOLTZMANN, ZERO_CELSIUS
from synth.model.part import OpAmp


def quiet_resistance(op_amp: OpAmp, ambient: float) -> float:
    """en^2 / 4kT [ohm] at an ambient temperature [degC]: smaller resistors at the input add less than the amplifier."""
    return op_amp.voltage_noise**2 / (4 * BOLTZMANN * (ambient + ZERO_CELSIUS))
