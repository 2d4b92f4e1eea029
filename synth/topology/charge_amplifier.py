"""Charge amplifier: a charge into a voltage, the source on a virtual ground.

                    +--- CF ----+
                    |           |
                    +--- RF ----+
                    |           |
      in --- RS ----+--- (-)    |
                        amplifier --- out      (+) on ground

    V/Q = -(1/CF) s/(s + 1/(RF CF)) / (1 + (1 + Cin/CF)/A)   well above the corner

The gain does not depend on the cable, as long as A is large against 1 + Cin/CF, which is also what the amplifier's
voltage noise is amplified by.  RF is the DC path of (-) and sets the lower corner 1/(2 pi RF CF); its thermal noise is
a charge of sqrt(4 k T/RF)/(2 pi f) per root hertz.  RS keeps the source's capacitance from loading the amplifier
through CF where the loop gain is one, and from its input in a discharge; with the source it has its corner far above
the signal.

References:
    S. Franco, Design with Operational Amplifiers and Analog Integrated Circuits, 3rd ed., sec. 2.7 (transducer
    amplifiers); from memory.
    J. Graeme, Photodiode Amplifiers: Op Amp Solutions, 1996, ch. 5 (noise gain 1 + Cin/CF); from memory.
"""

from __future__ import annotations

import math

from synth.topology.base import Slot, Topology

TOPOLOGY = Topology(
    name="charge-amplifier",
    title="charge amplifier",
    kind="gain",
    slots=(
        Slot("RS", "resistor", "isolates the source's capacitance", ("in", "m")),
        Slot("CF", "capacitor", "feedback, sets the gain", ("m", "out"), sets_frequency=True),
        Slot("RF", "resistor", "DC path of the inverting input", ("m", "out")),
        Slot("U", "op-amp", "amplifier", ("0", "m", "out")),
    ),
    sign=-1,
    source="Franco, 3rd ed., sec. 2.7",
)


def corner(resistance: float, capacitance: float) -> float:
    """Lower corner 1/(2 pi RF CF) [Hz].

    Example:
        >>> round(corner(1e9, 1e-9), 4)
        0.1592
    """
    return 1 / (2 * math.pi * resistance * capacitance)


def transfer(
    frequency: float,
    resistance: float,
    feedback: float,
    input_capacitance: float,
    gain_bandwidth: float,
    dc_gain: float,
) -> complex:
    """V/Q at a frequency [V/C], one-pole amplifier A0/(1 + j f A0/GBW), no source resistance, RS = 0."""
    s = 2j * math.pi * frequency
    admittance = 1 / resistance + s * feedback
    inverse_gain = (1 + 1j * frequency * dc_gain / gain_bandwidth) / dc_gain
    return -s / (admittance + inverse_gain * (admittance + s * input_capacitance))
