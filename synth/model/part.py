"""Purchasable parts and the amplifier figures that stand behind a type number."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

PartKind = Literal["resistor", "capacitor", "op-amp"]
GROUND = "0"


@dataclass(frozen=True, slots=True)
class Part:
    """One purchasable component in its place in the chain.

    Attributes:
        ref: reference designator, IEEE 315 letter and number ("R3", "C1", "U2A").
        kind: "resistor", "capacitor" or "op-amp".
        role: what it does in its stage, a short phrase ("feedback resistor").
        stage: name of the stage it belongs to.
        nodes: two nodes; for an op amp (non-inverting input, inverting input, output).
        value: [ohm] or [F]; for an op amp the type number.
        tolerance: relative, 0.01 for 1 %; 0 for an op amp.
        temperature_coefficient: [1/K] half-width; 0 for an op amp.
        technology: "thick film", "C0G", ...; the amplifier class for an op amp.
        stray: [F] capacitance across a resistor's body; 0 otherwise.
        loss_tangent: tan d of a capacitor, at the chain's centre; 0 otherwise.
        size: case size, "" when it does not matter.
        rating: power or voltage rating as text for the bill.
        note: anything the bill should say.
        common_share: share of the temperature coefficient that all parts of the technology have in common.
    """

    ref: str
    kind: PartKind
    role: str
    stage: str
    nodes: tuple[str, ...]
    value: float | str
    tolerance: float = 0.0
    temperature_coefficient: float = 0.0
    technology: str = ""
    stray: float = 0.0
    loss_tangent: float = 0.0
    size: str = ""
    rating: str = ""
    note: str = ""
    common_share: float = 0.0

    @property
    def number(self) -> float:
        """The value of a resistor [ohm] or capacitor [F]."""
        if isinstance(self.value, str):
            raise TypeError(f"{self.ref} is an op amp and has no number")
        return self.value


@dataclass(frozen=True, slots=True)
class OpAmp:
    """The figures of one op amp type that the circuit and the judges use (SI units, typical at 25 degC).

    Attributes:
        type: type number.
        technology: input technology class ("bipolar", "JFET", "CMOS").
        gain_bandwidth: [Hz] gain-bandwidth product.
        dc_gain: [V/V] open-loop gain at DC.
        second_pole: [Hz], or None where the type needs none.
        output_resistance: [ohm] open loop.
        input_capacitance_differential, input_capacitance_common: [F].
        voltage_noise: [V/rtHz] white; voltage_noise_corner: [Hz] of its 1/f part.
        current_noise: [A/rtHz] white, each input; current_noise_corner: [Hz] of its 1/f part.
        current_noise_slope: [A/rtHz per Hz] part that grows with frequency (FET inputs), 0 for bipolar.
        minimum_noise_gain: lowest noise gain 1 + Zf/Zg at which the type is stable.
        slew_rate: [V/s].
        swing_headroom_high, swing_headroom_low: [V] distance of the largest output from each rail.
        common_mode_headroom_high, common_mode_headroom_low: [V] the same for the inputs (negative: beyond the rail).
        output_current: [A] usable.
        offset_voltage, offset_voltage_max: [V].
        bias_current: [A].
        supply_minimum, supply_maximum: [V] total supply.
        supply_current: [A] each amplifier.
        gain_bandwidth_spread, dc_gain_spread: relative half-width between builds (0.3 for 30 %).
        stray_output_to_inverting, stray_inverting_to_ground: [F] of the layout around it.
        packages: (amplifiers in the package, type number to order), smallest first.
    """

    type: str
    technology: str
    gain_bandwidth: float
    dc_gain: float
    second_pole: float | None
    output_resistance: float
    input_capacitance_differential: float
    input_capacitance_common: float
    voltage_noise: float
    voltage_noise_corner: float
    current_noise: float
    current_noise_corner: float
    current_noise_slope: float
    minimum_noise_gain: float
    slew_rate: float
    swing_headroom_high: float
    swing_headroom_low: float
    common_mode_headroom_high: float
    common_mode_headroom_low: float
    output_current: float
    offset_voltage: float
    offset_voltage_max: float
    bias_current: float
    supply_minimum: float
    supply_maximum: float
    supply_current: float
    gain_bandwidth_spread: float
    dc_gain_spread: float
    stray_output_to_inverting: float
    stray_inverting_to_ground: float
    packages: tuple[tuple[int, str], ...]

    @property
    def input_capacitance(self) -> float:
        """Differential and common-mode capacitance of an input whose twin is grounded [F]."""
        return self.input_capacitance_differential + self.input_capacitance_common
