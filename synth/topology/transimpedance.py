"""Transimpedance stage: a current into a voltage, the source on a virtual ground.

           +--- RF ----+
           |           |
           +--- CF ----+
           |           |
      in --+--- (-)    |
               amplifier --- out      (+) on ground

    Z(s) = -RF / (1 + s (RF CF + 1/wc) + s^2 RF (Cin + CF)/wc),   wc = 2 pi GBW, A0 large

Cin is all that hangs on (-): source, cable, amplifier, layout.  It turns the feedback by up to 90 degrees; CF turns it
back.  RF carries the bias current and is the DC path.

References:
    J. Graeme, Photodiode Amplifiers: Op Amp Solutions, 1996, ch. 3 (bandwidth and the choice of CF) and ch. 5 (noise
    gain 1 + Cin/CF); from memory.
    S. Franco, Design with Operational Amplifiers and Analog Integrated Circuits, 3rd ed., sec. 2.1 (I-V converters)
    and 8.5 (input capacitance); from memory.
"""

from __future__ import annotations

import math

from synth.topology.base import Slot, Topology

TOPOLOGY = Topology(
    name="transimpedance",
    title="transimpedance",
    kind="gain",
    slots=(
        Slot("RF", "resistor", "feedback, sets the gain", ("in", "out")),
        Slot("CF", "capacitor", "feedback, phase margin", ("in", "out"), sets_frequency=True),
        Slot("U", "op-amp", "amplifier", ("0", "in", "out")),
    ),
    sign=-1,
    source="Graeme, Photodiode Amplifiers, 1996",
)


def feedback_capacitance(resistance: float, input_capacitance: float, gain_bandwidth: float) -> float:
    """CF [F] for a phase margin of 45 degrees by straight lines, 52 in truth: its corner is where the loop gain is one.

    (1 + sqrt(1 + 8 pi RF GBW Cin)) / (4 pi RF GBW), near sqrt(Cin/(2 pi RF GBW)) (Graeme, ch. 3).

    Example:
        >>> cf = feedback_capacitance(1e6, 100e-12, 10e6)
        >>> f = 1 / (2 * math.pi * 1e6 * cf)
        >>> round(f / (10e6 * cf / (cf + 100e-12)), 9)  # there GBW times the feedback factor's end value is f
        1.0
    """
    product = 2 * math.pi * resistance * gain_bandwidth
    return (1 + math.sqrt(1 + 4 * product * input_capacitance)) / (2 * product)


def natural_frequency(resistance: float, capacitance: float, gain_bandwidth: float) -> float:
    """sqrt(GBW/(2 pi RF C)) [Hz], C all capacitance on (-), CF among it: no stage is faster (Graeme, ch. 3)."""
    return math.sqrt(gain_bandwidth / (2 * math.pi * resistance * capacitance))


def quality(resistance: float, feedback: float, input_capacitance: float, gain_bandwidth: float) -> float:
    """Q of the closed loop's pole pair, from the denominator of Z(s)."""
    omega = 2 * math.pi * natural_frequency(resistance, input_capacitance + feedback, gain_bandwidth)
    return 1 / (omega * (resistance * feedback + 1 / (2 * math.pi * gain_bandwidth)))


def transfer(
    frequency: float,
    resistance: float,
    feedback: float,
    input_capacitance: float,
    gain_bandwidth: float,
    dc_gain: float,
) -> complex:
    """Z(j 2 pi f) [ohm], one-pole amplifier A0/(1 + j f A0/GBW), no source resistance."""
    s = 2j * math.pi * frequency
    admittance = 1 / resistance + s * feedback
    inverse_gain = (1 + 1j * frequency * dc_gain / gain_bandwidth) / dc_gain
    return -1 / (admittance + inverse_gain * (admittance + s * input_capacitance))
