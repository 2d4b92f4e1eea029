"""Tow-Thomas bandpass section (three amplifiers: lossy integrator, integrator, inverter; inverting).

      in --R1--+------------- (-) U1            R2 parallel C1 from (-) to out
               |                    out --R3--- (-) U2 l       C2 from (-) to l
               +--R4-- n                   l --R5-- (-) U3 n   R6 from (-) to n
                                                               all (+) on ground

    H(s) = -(s/(C1 R1)) / (s^2 + s/(C1 R2) + R6/(C1 C2 R3 R4 R5))

R4 enters the frequency alone: it trims it and leaves bandwidth and gain; R2 sets the bandwidth, R1 the gain.

References:
    J. Tow, "Active RC filters - a state-space realization", Proc. IEEE 56 (1968) 1137 (from memory).
    L. C. Thomas, "The biquad", IEEE Trans. Circuit Theory CT-18 (1971) 350 (from memory).
    S. Franco, Design with Operational Amplifiers and Analog Integrated Circuits, 3rd ed., Examples 3.19 and 6.9.
"""

from __future__ import annotations

import math

import numpy as np

from synth.topology.base import FloatArray, SectionTopology, Slot, Values

INVERTER_RESISTOR = 470.0  # [ohm] R5, R6: with some 10 pF of a fast amplifier they keep its phase margin


def fixed(frequency: FloatArray, _q: FloatArray, _gain: FloatArray, given: Values) -> Values:
    """R3 = 1/(w0 C2), the second integrator of unity gain at the centre; R5 = R6 [ohm]."""
    inverter = np.full_like(np.asarray(frequency, dtype=float), INVERTER_RESISTOR)
    return {"R3": 1 / (2 * np.pi * np.asarray(frequency) * given["C2"]), "R5": inverter, "R6": inverter}


def solve(frequency: FloatArray, q: FloatArray, gain: FloatArray, given: Values) -> Values:
    """R1, R2, R4 [ohm] for a pole pair and a peak gain magnitude, ideal amplifiers (Franco, sec. 3.7).

    R2 = Q/(w0 C1), R1 = R2/gain, R4 = R6/(w0^2 C1 C2 R3 R5).

    Args:
        frequency: [Hz]; q; gain: [V/V] magnitude at `frequency`; given: C1, C2 [F], R3, R5, R6 [ohm].

    Example:
        >>> found = solve(8e3, 40.0, 10.0, {"C1": 1e-9, "C2": 1e-9, "R3": 19894.37, "R5": 1e3, "R6": 1e3})
        >>> [round(float(found[key])) for key in ("R1", "R2", "R4")]
        [79577, 795775, 19894]
    """
    omega = 2 * np.pi * np.asarray(frequency)
    r2 = q / (omega * given["C1"])
    r4 = given["R6"] / (omega**2 * given["C1"] * given["C2"] * given["R3"] * given["R5"])
    return {"R1": r2 / gain, "R2": r2, "R4": r4}


def frequency_shift(q: float, ratio: float) -> tuple[float, float]:
    """First-order shifts of frequency and Q for f0/GBW = `ratio`: -(1 + 1/2Q) ratio, +4 Q ratio; unity gain.

    Q' = Q/(1 - 4 Q f0/GBW): Franco, Example 6.9.
    """
    return -(1 + 0.5 / q) * ratio, 4 * q * ratio


def q_loss(q: float, dc_gain: float) -> float:
    """First-order relative shift of Q by a finite DC gain, -(2 Q + 3)/A0 (nodal analysis, unity gain)."""
    return -(2 * q + 3) / dc_gain


def noise_gain(q: float) -> float:
    """Output noise at the centre over one amplifier's, all three taken together (nodal analysis, unity gain).

    Q sqrt([(1 + 2/Q)^2 + 1] + 2 + 4) for first integrator, second integrator, inverter; equal reactances.
    """
    return q * math.sqrt((1 + 2 / q) ** 2 + 7)


TOPOLOGY = SectionTopology(
    name="tow-thomas",
    title="Tow-Thomas bandpass",
    kind="bandpass",
    slots=(
        Slot("R1", "resistor", "input resistor, sets the gain", ("in", "m1")),
        Slot("R2", "resistor", "sets the bandwidth", ("m1", "out"), sets_frequency=True),
        Slot("C1", "capacitor", "first integrator", ("m1", "out"), sets_frequency=True),
        Slot("R3", "resistor", "second integrator", ("out", "m2"), sets_frequency=True),
        Slot("C2", "capacitor", "second integrator", ("m2", "l"), sets_frequency=True),
        Slot("R5", "resistor", "inverter, input", ("l", "m3"), sets_frequency=True),
        Slot("R6", "resistor", "inverter, feedback", ("m3", "n"), sets_frequency=True),
        Slot("R4", "resistor", "closes the loop, trims the frequency", ("n", "m1"), sets_frequency=True),
        Slot("U1", "op-amp", "first integrator", ("0", "m1", "out")),
        Slot("U2", "op-amp", "second integrator", ("0", "m2", "l")),
        Slot("U3", "op-amp", "inverter", ("0", "m3", "n")),
    ),
    sign=-1,
    source="Franco, 3rd ed., sec. 3.7; Tow 1968; Thomas 1971",
    tuned=("R1", "R2", "R4"),
    fixed=fixed,
    solve=solve,
    trimmer="R4",
    shift=frequency_shift,
    loss=q_loss,
    noise_gain=noise_gain,
    q_spread=lambda _q: 0.6,
    margin_loss=(0.0, 0.022),
    largest_q=50.0,
    limit="the loss of its capacitors takes 2 Q tan d of Q, a tenth at 1e-3",
)
