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

from synth.topology.base import FloatArray, SectionTopology, Slot, Values, no_fixed


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


def _solve(frequency: FloatArray, q: FloatArray, gain: FloatArray, given: Values) -> Values:
    r1a, r1b, r2 = resistors(frequency, q, gain, given["C1"], given["C2"])
    return {"R1A": r1a, "R1B": r1b, "R2": r2}


def frequency_shift(q: float, ratio: float) -> tuple[float, float]:
    """First-order shifts of frequency and Q for f0/GBW = `ratio`: -Q ratio, +Q ratio, equal capacitors, any gain.

    Franco, Example 6.12.
    """
    return -q * ratio, q * ratio


def q_loss(q: float, dc_gain: float) -> float:
    """First-order relative shift of Q by a finite DC gain, -2 Q^2/A0 (equal capacitors)."""
    return -2 * q**2 / dc_gain


TOPOLOGY = SectionTopology(
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
    tuned=("R1A", "R1B", "R2"),
    fixed=no_fixed,
    solve=_solve,
    trimmer="R1B",
    shift=frequency_shift,
    loss=q_loss,
    noise_gain=lambda q: 1 + 2 * q**2,
    q_spread=lambda _q: 0.41,
    margin_loss=(3.0, 0.0),
    largest_q=25.0,
    limit="its resistor spread is 4 Q^2 and finite DC gain costs 2 Q^2/A0 of Q",
)
