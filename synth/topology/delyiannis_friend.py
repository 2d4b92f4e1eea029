"""Multiple-feedback bandpass section with Q enhancement (one amplifier, inverting; Delyiannis-Friend).

      in --R1A--+--C2--+------- (-)
                |      |                        RB from out to (+), RA from (+) to ground
               R1B     R2         amplifier out
                |      |
               gnd    out         C1 from the R1A-R1B node to out

    H(s) = -(s (1 + K)/(C1 R1A)) / (s^2 + s [(C1 + C2)/(R2 C1 C2) - K/(R1 C1)] + 1/(R1 R2 C1 C2))
    K = RA/RB, R1 = R1A parallel R1B

Positive feedback K takes from the damping, so that the resistors need a spread R2/R1 = 4 Q0^2 of a lower Q0 only.
The price is that Q is a difference: it moves by Q/Q0 - 1 times the change of K and by 2 Q/Q0 - 1 times that of
sqrt(R2/R1).  Q0 = Q/1.5, at most 5, is a choice of this program: the spread is at most 100, and no more Q is made of
positive feedback than that takes.

References:
    T. Delyiannis, "High-Q factor circuit with reduced sensitivity", Electron. Lett. 4 (1968) 577 (from memory).
    J. J. Friend, C. A. Harris, D. Hilberman, "STAR: an active biquadratic filter section", IEEE Trans. Circuits Syst.
    CAS-22 (1975) 115 (from memory).
    The transfer function, and the effects of finite gain, by nodal analysis.
"""

from __future__ import annotations

import math

import numpy as np

from synth.topology.base import FloatArray, SectionTopology, Slot, Values

LARGEST_Q0 = 5.0
LEAST_ENHANCEMENT = 1.5  # Q over Q0
GROUND_LEG = 100.0  # [ohm] RA: with some 10 pF of a fast amplifier it keeps the phase margin
FEEDBACK_RANGE = (1e3, 10e3)  # [ohm] RB: light for the amplifier, RA not too small


def passive_q(q: FloatArray | float) -> FloatArray:
    """Q0 = sqrt(R2/R1)/2, the Q that the resistors make without positive feedback (equal capacitors)."""
    chosen: FloatArray = np.minimum(np.asarray(q, dtype=float) / LEAST_ENHANCEMENT, LARGEST_Q0)
    return chosen


def feedback_ratio(q: FloatArray | float, c1: FloatArray | float, c2: FloatArray | float) -> FloatArray:
    """K = RA/RB that raises Q0 to `q`.

    With r = 2 Q0 = sqrt(R2/R1) the damping is 1/Q = (C1 + C2)/(sqrt(C1 C2) r) - K r sqrt(C2/C1); equal capacitors:
    1/Q = 2/r - K r.  Unequal ones take r larger by (C1 + C2)/(2 sqrt(C1 C2)), which keeps Q0.

    >>> round(float(feedback_ratio(15.0, 1e-9, 1e-9)), 6)
    0.013333
    """
    c1, c2 = np.asarray(c1, dtype=float), np.asarray(c2, dtype=float)
    q0 = passive_q(q)
    r = q0 * (c1 + c2) / np.sqrt(c1 * c2)
    ratio: FloatArray = (1 / q0 - 1 / np.asarray(q)) / (r * np.sqrt(c2 / c1))
    return ratio


def fixed(_frequency: FloatArray, q: FloatArray, _gain: FloatArray, given: Values) -> Values:
    """RB within its range and RA = K RB, near its usual level [ohm]."""
    ratio = feedback_ratio(q, given["C1"], given["C2"])
    feedback = np.clip(GROUND_LEG / ratio, *FEEDBACK_RANGE)
    return {"RA": ratio * feedback, "RB": feedback}


def solve(frequency: FloatArray, q: FloatArray, gain: FloatArray, given: Values) -> Values:
    """R1A, R1B, R2 [ohm] for a pole pair and a peak gain magnitude, ideal amplifier; any K.

    R2 is the positive root of K w0^2 C2 R2^2 + (w0/Q) R2 - (C1 + C2)/(C1 C2) = 0, R1 = 1/(w0^2 R2 C1 C2),
    R1A = (1 + K) Q/(w0 C1 gain).

    Args:
        frequency: [Hz]; q; gain: [V/V] magnitude at `frequency`; given: C1, C2 [F], RA, RB [ohm].

    Returns:
        R1B is infinite or negative where the gain is more than the section can give, (1 + K) 2 Q Q0.

    Example:
        >>> found = solve(1e4, 10.0, 1.0, {"C1": 1e-9, "C2": 1e-9, "RA": 3500.0, "RB": 20e3})
        >>> [round(float(found[key])) for key in ("R1A", "R1B", "R2")]
        [187007, 5267, 49449]
    """
    c1, c2, k = given["C1"], given["C2"], given["RA"] / given["RB"]
    omega = 2 * np.pi * np.asarray(frequency)
    a, b, c = k * omega**2 * c2, omega / q, (c1 + c2) / (c1 * c2)
    r2 = 2 * c / (b + np.sqrt(b**2 + 4 * a * c))  # without loss of digits for small K
    r1 = 1 / (omega**2 * r2 * c1 * c2)
    r1a = (1 + k) * q / (omega * c1 * gain)
    with np.errstate(divide="ignore"):
        r1b = 1 / (1 / r1 - 1 / r1a)
    return {"R1A": r1a, "R1B": r1b, "R2": r2}


def frequency_shift(q: float, ratio: float) -> tuple[float, float]:
    """First-order shifts of frequency and Q for f0/GBW = `ratio`: -Q0 (1 + K)^2 ratio, +Q0 (1 + K)^2 ratio.

    Equal capacitors; 1 + K = 1/(1 - k) with k = RA/(RA + RB).  R. Schaumann, M. E. Van Valkenburg, Design of Analog
    Filters (from memory), and nodal analysis.
    """
    size = float(passive_q(q)) * (1 + float(feedback_ratio(q, 1.0, 1.0))) ** 2 * ratio
    return -size, size


def q_loss(q: float, dc_gain: float) -> float:
    """First-order relative shift of Q by a finite DC gain, -2 Q Q0 (1 + K)^2/A0 (nodal analysis, equal capacitors)."""
    return -2 * q * float(passive_q(q)) * (1 + float(feedback_ratio(q, 1.0, 1.0))) ** 2 / dc_gain


def noise_gain(q: float) -> float:
    """Output noise at the centre over the amplifier's: Q (1 + 2 Q0^2)(1 + K)/Q0 (nodal analysis, equal capacitors)."""
    q0 = float(passive_q(q))
    return q * (1 + 2 * q0**2) * (1 + float(feedback_ratio(q, 1.0, 1.0))) / q0


def q_spread(q: float) -> float:
    """Standard deviation of Q over the resistors' tolerance: Q is a difference of two dampings.

    Q moves by 2 Q/Q0 - 1 times the change of sqrt(R2/R1), two resistors, and by Q/Q0 - 1 times that of RA/RB.
    """
    ratio = q / min(q / 1.5, 5.0)
    return math.hypot(0.41 * (2 * ratio - 1), 0.82 * (ratio - 1))


TOPOLOGY = SectionTopology(
    name="delyiannis-friend",
    title="multiple-feedback bandpass with Q enhancement",
    kind="bandpass",
    slots=(
        Slot("R1A", "resistor", "input resistor, sets the gain", ("in", "a"), sets_frequency=True),
        Slot("R1B", "resistor", "input shunt, trims the frequency", ("a", "0"), sets_frequency=True),
        Slot("C1", "capacitor", "feedback to the input node", ("a", "out"), sets_frequency=True),
        Slot("C2", "capacitor", "to the inverting input", ("a", "m"), sets_frequency=True),
        Slot("R2", "resistor", "feedback", ("m", "out"), sets_frequency=True),
        Slot("RA", "resistor", "positive feedback, to ground", ("p", "0"), sets_frequency=True),
        Slot("RB", "resistor", "positive feedback, from the output", ("p", "out"), sets_frequency=True),
        Slot("U", "op-amp", "amplifier", ("p", "m", "out")),
    ),
    sign=-1,
    source="Delyiannis 1968; Friend et al. 1975",
    tuned=("R1A", "R1B", "R2"),
    fixed=fixed,
    solve=solve,
    trimmer="R1B",
    shift=frequency_shift,
    loss=q_loss,
    noise_gain=noise_gain,
    q_spread=q_spread,
    margin_loss=(0.0, 0.022),
    largest_q=20.0,
    limit="its Q is the difference of two dampings: at Q/Q0 = 4 it moves seven times as far as sqrt(R2/R1)",
)
