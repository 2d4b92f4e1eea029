"""AC-coupled non-inverting gain stage.

      in --CC--+------ (+)
               RB                 RF from out to (-), RG from (-) to ground
               |
              gnd                 gain 1 + RF/RG; the coupling passes above 1/(2 pi RB CC)

With an inductive source a series RD, CD from (+) to ground damps its resonance with the input capacitance.
RB is the DC path of the input's bias current.  The closed-loop gain with a finite loop gain T is
(1 + RF/RG) T/(1 + T).

References:
    S. Franco, Design with Operational Amplifiers and Analog Integrated Circuits, 3rd ed., sec. 1.3 and 6.2.
"""

from __future__ import annotations

import math

from synth.model.part import OpAmp
from synth.topology.base import Slot, Topology

TOPOLOGY = Topology(
    name="non-inverting",
    title="AC-coupled non-inverting gain",
    kind="gain",
    slots=(
        Slot("CC", "capacitor", "input coupling", ("in", "p")),
        Slot("RB", "resistor", "bias path", ("p", "0")),
        Slot("RG", "resistor", "gain, to ground", ("m", "0")),
        Slot("RF", "resistor", "gain, feedback", ("m", "out")),
        Slot("U", "op-amp", "amplifier", ("p", "m", "out")),
    ),
    sign=1,
    source="Franco, 3rd ed., sec. 1.3",
)


DAMPED = Topology(
    name="non-inverting-damped",
    title="AC-coupled non-inverting gain, input damped",
    kind="gain",
    slots=(
        *TOPOLOGY.slots[:2],
        Slot("RD", "resistor", "damps the source's inductance", ("p", "d")),
        Slot("CD", "capacitor", "keeps the damping off the signal", ("d", "0")),
        *TOPOLOGY.slots[2:],
    ),
    sign=1,
    source="Franco, 3rd ed., sec. 1.3; the damper is common practice, no source",
)


def damper(inductance: float, op_amp: OpAmp) -> tuple[float, float]:
    """Series resistor [ohm] and capacitor [F] across an input fed by an inductive source.

    The source's inductance resonates with the input capacitance Ci far above the signal, where the input of a
    feedback amplifier can be a negative resistance; sqrt(L/Ci) behind ten times Ci holds it (common practice).
    """
    input_capacitance = op_amp.input_capacitance
    return math.sqrt(inductance / input_capacitance), 10 * input_capacitance


def magnitude(gain: float, frequency: float, gain_bandwidth: float, dc_gain: float) -> float:
    """Closed-loop gain over 1 + RF/RG with a one-pole amplifier: |1/(1 + gain/A)|, A = A0/(1 + j f A0/GBW)."""
    open_loop = dc_gain / complex(1.0, frequency * dc_gain / gain_bandwidth)
    return abs(1 / (1 + gain / open_loop))


def spread(gain: float, frequency: float, gain_bandwidth: float, dc_gain: float, share: float) -> float:
    """Largest relative change of the gain when the gain-bandwidth product moves by a share up or down."""
    nominal = magnitude(gain, frequency, gain_bandwidth, dc_gain)
    moved = [magnitude(gain, frequency, gain_bandwidth * (1 + sign * share), dc_gain) for sign in (1, -1)]
    return max(abs(m / nominal - 1) for m in moved)


def largest_gain(frequency: float, gain_bandwidth: float, dc_gain: float, share: float, allowed: float) -> float:
    """Largest gain whose `spread` stays within `allowed`, 1 or less where there is none.

    Example:
        >>> round(largest_gain(1e5, 80e6, 1e6, 0.3, 0.005), 1)
        79.1
    """
    low, high = 0.0, 7.0  # decades
    if spread(1.0, frequency, gain_bandwidth, dc_gain, share) > allowed:
        return 1.0
    for _ in range(60):
        middle = 0.5 * (low + high)
        if spread(10**middle, frequency, gain_bandwidth, dc_gain, share) <= allowed:
            low = middle
        else:
            high = middle
    return 10**low


def coupling_corner(resistance: float, capacitance: float) -> float:
    """Corner of the input coupling [Hz]."""
    return 1 / (2 * math.pi * resistance * capacitance)
