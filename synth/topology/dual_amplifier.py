"""Dual-amplifier bandpass section: a resonator of C and an inductance simulated by a GIC (two amplifiers).

      in --RIN--+-- A --R1-- B --C2-- N --R3-- out --R4-- E --R5-- gnd
                |
            RG parallel C         U1: (+) A, (-) N, output out
                |                 U2: (+) E, (-) N, output B
               gnd

    H(s) = (s (1 + R4/R5)/(RIN C1)) / (s^2 + s/(R C1) + R4/(C1 C2 R1 R3 R5)),  R = RIN parallel RG

R1 enters the frequency alone: it trims it and leaves bandwidth and gain.  The peak gain is (1 + R4/R5) R/RIN, set by
the divider RIN, RG.

R4 = R5 is the classical choice, where matched amplifiers leave Q at first order.  But U2 follows inside the loop of U1:
its phase margin is that of a follower less about 25 degrees, below 45 degrees with most types.  R4 = 2 R5 gives back
ten of them and a gain of up to 2.4, and still moves 1/Q by 1.5 f0/GBW only; a choice of this program.

References:
    A. Antoniou, "Realisation of gyrators using operational amplifiers", Proc. IEE 116 (1969) 1838 (from memory).
    N. J. Fliege, "A new class of second-order RC-active filters with two operational amplifiers", NTZ 26 (1973) 279
    (from memory).
    The transfer function, and the effects of finite gain, by nodal analysis.
"""

from __future__ import annotations

import math

import numpy as np

from synth.topology.base import FloatArray, SectionTopology, Slot, Values

RATIO = 2.0  # R4/R5 unless the gain needs more
LARGEST_SHARE = 0.8  # of R/RIN: the shunt RG is then no more than 5 R
RATIO_RESISTOR = 220.0  # [ohm] R5: with some 10 pF of fast amplifiers at E it keeps their phase margin


def fixed(frequency: FloatArray, _q: FloatArray, gain: FloatArray, given: Values) -> Values:
    """R3 = 1/(w0 C2), the reactance of its neighbour; R5, and R4/R5 = 2 or what the gain needs [ohm]."""
    ratio = np.maximum(RATIO, np.asarray(gain) / LARGEST_SHARE - 1)
    return {
        "R3": 1 / (2 * np.pi * np.asarray(frequency) * given["C2"]),
        "R4": ratio * RATIO_RESISTOR,
        "R5": np.full_like(ratio, RATIO_RESISTOR),
    }


def solve(frequency: FloatArray, q: FloatArray, gain: FloatArray, given: Values) -> Values:
    """RIN, RG, R1 [ohm] for a pole pair and a peak gain magnitude, ideal amplifiers.

    R = Q/(w0 C1), RIN = R (1 + R4/R5)/gain, RG = 1/(1/R - 1/RIN), R1 = R4/(w0^2 C1 C2 R3 R5).

    Args:
        frequency: [Hz]; q; gain: [V/V] magnitude at `frequency`; given: C1, C2 [F], R3, R4, R5 [ohm].

    Returns:
        RG is infinite or negative where the gain is 1 + R4/R5 or more.

    Example:
        >>> found = solve(2e3, 25.0, 1.0, {"C1": 10e-9, "C2": 10e-9, "R3": 8e3, "R4": 1e3, "R5": 1e3})
        >>> [round(float(found[key])) for key in ("RIN", "RG", "R1")]
        [397887, 397887, 7916]
    """
    omega = 2 * np.pi * np.asarray(frequency)
    ratio = given["R4"] / given["R5"]
    total = q / (omega * given["C1"])
    rin = total * (1 + ratio) / gain
    with np.errstate(divide="ignore"):
        rg = 1 / (1 / total - 1 / rin)
    return {"RIN": rin, "RG": rg, "R1": ratio / (omega**2 * given["C1"] * given["C2"] * given["R3"])}


def frequency_shift(q: float, ratio: float) -> tuple[float, float]:
    """First-order shifts of frequency and Q for f0/GBW = `ratio`, matched amplifiers, equal reactances.

    With m = R4/R5: -(1 + m)^2/2m ratio and +(m - 1/m)(Q - 1/2) ratio (nodal analysis); -2 ratio and none for m = 1
    (Antoniou 1969, from memory).
    """
    return -((1 + RATIO) ** 2) / (2 * RATIO) * ratio, (RATIO - 1 / RATIO) * (q - 0.5) * ratio


def q_loss(q: float, dc_gain: float) -> float:
    """First-order relative shift of Q by a finite DC gain, -(1 + m)^2/m Q/A0 with m = R4/R5 (nodal analysis)."""
    return -((1 + RATIO) ** 2) / RATIO * q / dc_gain


def noise_gain(q: float) -> float:
    """Output noise at the centre over one amplifier's, both taken together (nodal analysis).

    (1 + m) Q sqrt([(1/m + 1/Q)^2 + 1] + [(1 + 1/m)^2 + 1/Q^2]) for output and second amplifier, m = R4/R5; equal
    reactances.
    """
    output, second = (1 / RATIO + 1 / q) ** 2 + 1, (1 + 1 / RATIO) ** 2 + 1 / q**2
    return (1 + RATIO) * q * math.sqrt(output + second)


TOPOLOGY = SectionTopology(
    name="dual-amplifier",
    title="dual-amplifier bandpass",
    kind="bandpass",
    slots=(
        Slot("RIN", "resistor", "input resistor, sets the gain", ("in", "a"), sets_frequency=True),
        Slot("RG", "resistor", "input shunt, sets the bandwidth", ("a", "0"), sets_frequency=True),
        Slot("C1", "capacitor", "resonator", ("a", "0"), sets_frequency=True),
        Slot("R1", "resistor", "trims the frequency", ("a", "b"), sets_frequency=True),
        Slot("C2", "capacitor", "of the simulated inductance", ("b", "n"), sets_frequency=True),
        Slot("R3", "resistor", "of the simulated inductance", ("n", "out"), sets_frequency=True),
        Slot("R4", "resistor", "ratio, from the output", ("out", "e"), sets_frequency=True),
        Slot("R5", "resistor", "ratio, to ground", ("e", "0"), sets_frequency=True),
        Slot("U1", "op-amp", "output amplifier", ("a", "n", "out")),
        Slot("U2", "op-amp", "second amplifier", ("e", "n", "b")),
    ),
    sign=1,
    source="Antoniou 1969; Fliege 1973",
    tuned=("RIN", "RG", "R1"),
    fixed=fixed,
    solve=solve,
    trimmer="R1",
    shift=frequency_shift,
    loss=q_loss,
    noise_gain=noise_gain,
    q_spread=lambda _q: 0.8,
    margin_loss=(15.0, 0.04),
    largest_q=50.0,
    limit="the loss of its capacitors takes 2 Q tan d of Q, a tenth at 1e-3",
)
