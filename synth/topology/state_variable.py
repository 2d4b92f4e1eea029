"""State-variable bandpass section (three amplifiers: summer, two integrators; Kerwin-Huelsman-Newcomb, inverting).

      in --R3--+                                         R5 from h to (-) of U1, R4 from l to (-) of U1
      out -R2--+------ (+) U1 h --R6-- (-) U2 out        C1 from (-) of U2 to out
      gnd -R1--+                       out --R7-- (-) U3 l, C2 from (-) of U3 to l
                                       (+) of U2 and U3 on ground

    H(s) = -(s (1 + R5/R4)(G3/G)/(C1 R6)) / (s^2 + s (1 + R5/R4)(G2/G)/(C1 R6) + R5/(C1 C2 R4 R6 R7))
    G = G1 + G2 + G3, each 1/R

Of the two ways in, the signal enters at the summer's (+): the peak gain is R2/R3 whatever the Q, R1 sets Q and leaves
frequency and gain, R7 sets frequency and leaves bandwidth and gain.  By the summer's (-) the resistor for Q moves the
gain with it, and the input resistor raises the summer's noise gain, which costs Q (5 f0/GBW in 1/Q at equal
resistors instead of 4).

References:
    W. J. Kerwin, L. P. Huelsman, R. W. Newcomb, "State-variable synthesis for insensitive integrated circuit transfer
    functions", IEEE J. Solid-State Circuits SC-2 (1967) 87 (from memory).
    S. Franco, Design with Operational Amplifiers and Analog Integrated Circuits, 3rd ed., sec. 3.7 (the signal at the
    summer's (-), Example 3.18); Example 6.9.
    The transfer function, and the effects of finite gain, by nodal analysis.
"""

from __future__ import annotations

import math

import numpy as np

from synth.topology.base import FloatArray, SectionTopology, Slot, Values

SUMMER_RESISTOR = 270.0  # [ohm] R4, R5: with some 10 pF of a fast amplifier they keep its phase margin
DAMPING_RESISTOR = 500.0  # [ohm] R2 over Q: R1 is then about half of it, large enough to trim
DAMPING_RANGE = (1e3, 30e3)  # [ohm] of R2


def fixed(frequency: FloatArray, q: FloatArray, _gain: FloatArray, given: Values) -> Values:
    """R6 = 1/(w0 C1), the first integrator of unity gain at the centre; R2; R4 = R5 [ohm]."""
    summer = np.full_like(np.asarray(frequency, dtype=float), SUMMER_RESISTOR)
    return {
        "R2": np.clip(DAMPING_RESISTOR * np.asarray(q), *DAMPING_RANGE),
        "R4": summer,
        "R5": summer,
        "R6": 1 / (2 * np.pi * np.asarray(frequency) * given["C1"]),
    }


def solve(frequency: FloatArray, q: FloatArray, gain: FloatArray, given: Values) -> Values:
    """R1, R3, R7 [ohm] for a pole pair and a peak gain magnitude, ideal amplifiers.

    R3 = R2/gain, G = Q G2 (1 + R5/R4)/(w0 C1 R6), R1 = 1/(G - G2 - G3), R7 = R5/(w0^2 C1 C2 R4 R6).

    Args:
        frequency: [Hz]; q; gain: [V/V] magnitude at `frequency`; given: C1, C2 [F], R2, R4, R5, R6 [ohm].

    Returns:
        R1 is infinite or negative where the gain is more than the section can give, 2 Q - 1 at the usual values.

    Example:
        >>> known = {"C1": 10e-9, "C2": 10e-9, "R2": 30e3, "R4": 1e3, "R5": 1e3, "R6": 15915.5}
        >>> found = solve(1e3, 16.0, 1.0, known)
        >>> [round(float(found[key])) for key in ("R1", "R3", "R7")]
        [1000, 30000, 15915]
    """
    omega = 2 * np.pi * np.asarray(frequency)
    ratio = given["R5"] / given["R4"]
    r3 = given["R2"] / gain
    total = q / given["R2"] * (1 + ratio) / (omega * given["C1"] * given["R6"])
    with np.errstate(divide="ignore"):
        r1 = 1 / (total - 1 / given["R2"] - 1 / r3)
    return {"R1": r1, "R3": r3, "R7": ratio / (omega**2 * given["C1"] * given["C2"] * given["R6"])}


def frequency_shift(q: float, ratio: float) -> tuple[float, float]:
    """First-order shifts of frequency and Q for f0/GBW = `ratio`: -(1 - 3/2Q) ratio, +4 Q ratio; unity gain.

    Q' = Q/(1 - 4 Q f0/GBW) as in Franco, Example 6.9; the frequency by nodal analysis.
    """
    return -(1 - 1.5 / q) * ratio, 4 * q * ratio


def q_loss(q: float, dc_gain: float) -> float:
    """First-order relative shift of Q by a finite DC gain, -(2 Q - 1)/A0 (nodal analysis, unity gain)."""
    return -(2 * q - 1) / dc_gain


def noise_gain(q: float) -> float:
    """Output noise at the centre over one amplifier's, all three taken together (nodal analysis).

    2 Q sqrt(1 + 1/2 + 1/2) for summer, first and second integrator; equal reactances.
    """
    return 2 * math.sqrt(2) * q


TOPOLOGY = SectionTopology(
    name="state-variable",
    title="state-variable bandpass",
    kind="bandpass",
    slots=(
        Slot("R3", "resistor", "input resistor, sets the gain", ("in", "p"), sets_frequency=True),
        Slot("R2", "resistor", "damping, from the output", ("out", "p"), sets_frequency=True),
        Slot("R1", "resistor", "damping, sets the bandwidth", ("p", "0"), sets_frequency=True),
        Slot("R4", "resistor", "summer, from the low-pass output", ("l", "m1"), sets_frequency=True),
        Slot("R5", "resistor", "summer, feedback", ("h", "m1"), sets_frequency=True),
        Slot("R6", "resistor", "first integrator", ("h", "m2"), sets_frequency=True),
        Slot("C1", "capacitor", "first integrator", ("m2", "out"), sets_frequency=True),
        Slot("R7", "resistor", "second integrator, trims the frequency", ("out", "m3"), sets_frequency=True),
        Slot("C2", "capacitor", "second integrator", ("m3", "l"), sets_frequency=True),
        Slot("U1", "op-amp", "summer", ("p", "m1", "h")),
        Slot("U2", "op-amp", "first integrator", ("0", "m2", "out")),
        Slot("U3", "op-amp", "second integrator", ("0", "m3", "l")),
    ),
    sign=-1,
    source="Kerwin, Huelsman, Newcomb 1967; Franco, 3rd ed., sec. 3.7",
    tuned=("R1", "R3", "R7"),
    fixed=fixed,
    solve=solve,
    trimmer="R7",
    shift=frequency_shift,
    loss=q_loss,
    noise_gain=noise_gain,
    q_spread=lambda _q: 0.6,
    margin_loss=(0.0, 0.027),
    largest_q=50.0,
    limit="the loss of its capacitors takes 2 Q tan d of Q, a tenth at 1e-3",
)
