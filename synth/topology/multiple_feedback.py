"""Multiple-feedback bandpass section (one amplifier, inverting).

      in --R1A--+--C2--+------- (-)
                |      |
               R1B     R2         amplifier out
                |      |
               gnd    out         C1 from the R1A-R1B node to out, (+) on ground

    H(s) = -(s / (C1 R1A)) / (s^2 + s (C1 + C2)/(R2 C1 C2) + (R1A + R1B)/(R1A R1B R2 C1 C2))

References:
    S. Franco, Design with Operational Amplifiers and Analog Integrated Circuits, 3rd ed., sec. 3.5, Example 3.15;
    the finite gain-bandwidth shift, Example 6.12.
    T. Kugelstadt, "Active Filter Design Techniques", ch. 16 of Op Amps for Everyone.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from synth.topology.base import Slot, Topology

FloatArray = NDArray[np.float64]

LARGEST_Q = 25.0  # the resistor spread is 4 Q^2, and finite DC gain costs 2 Q^2/A0 of Q

TOPOLOGY = Topology(
    name="multiple-feedback",
    title="multiple-feedback bandpass",
    kind="bandpass",
    slots=(
        Slot("R1A", "resistor", "input resistor, sets the gain", ("in", "a"), sets_frequency=True),
        Slot("R1B", "resistor", "input shunt, trims the frequency", ("a", "0"), sets_frequency=True),
        Slot("C1", "capacitor", "feedback to the input node", ("a", "out"), sets_frequency=True),
        Slot("C2", "capacitor", "to the inverting input", ("a", "m"), sets_frequency=True),
        Slot("R2", "resistor", "feedback, sets the bandwidth", ("m", "out"), sets_frequency=True),
        Slot("U", "op-amp", "amplifier", ("0", "m", "out")),
    ),
    sign=-1,
    source="Franco, 3rd ed., sec. 3.5",
)


def resistors(
    frequency: FloatArray, q: FloatArray, gain: FloatArray, c1: FloatArray, c2: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Resistors for a pole pair and a peak gain magnitude, ideal amplifier; arrays of one shape.

    R2 = Q (C1 + C2)/(w0 C1 C2), R1A = R2 C2/(gain (C1 + C2)), R1A parallel R1B = 1/(w0^2 R2 C1 C2) (sec. 3.5).

    Args:
        frequency: [Hz]; q; gain: [V/V] magnitude at `frequency`; c1, c2: [F].

    Returns:
        R1A, R1B, R2 [ohm]; R1B is infinite or negative where the gain is more than the section can give,
        2 Q^2 for equal capacitors.

    Example:
        >>> r1a, r1b, r2 = resistors(1000.0, 10.0, 10.0, 10e-9, 10e-9)
        >>> round(float(r1a), 1), round(float(r1b), 2), round(float(r2), 0)
        (15915.5, 837.66, 318310.0)
    """
    omega = 2 * np.pi * np.asarray(frequency)
    r2 = q * (c1 + c2) / (omega * c1 * c2)
    r1a = r2 * c2 / (gain * (c1 + c2))
    parallel = 1 / (omega**2 * r2 * c1 * c2)
    with np.errstate(divide="ignore"):
        r1b = 1 / (1 / parallel - 1 / r1a)
    return r1a, r1b, r2


def frequency_shift(frequency: float, q: float, gain_bandwidth: float) -> float:
    """First-order relative shift of the centre by a finite gain-bandwidth product, -Q f0/GBW.

    Franco, Example 6.12; the Q rises by the same share, for equal capacitors and any gain.
    """
    return -q * frequency / gain_bandwidth


def q_loss(q: float, dc_gain: float) -> float:
    """First-order relative loss of Q by a finite DC gain, -2 Q^2/A0 (equal capacitors)."""
    return -2 * q**2 / dc_gain
