"""Akerberg-Mossberg bandpass section (three amplifiers, phase-compensated second integrator; inverting).

      in --R1--+------------- (-) U1            R2 parallel C1 from (-) to out
               |                    out --R3--- (+) U2 l       C2 from (+) to x, (-) of U2 on ground
               +--R4-- l                   l --R5-- (-) U3 x   R6 from (-) to x
                                                               (+) of U1 and U3 on ground

    H(s) = -(s/(C1 R1)) / (s^2 + s/(C1 R2) + R5/(C1 C2 R3 R4 R6))

The inverter stands inside the second integrator's loop and makes up for the phase lag of the other two amplifiers:
with R5 = R6 and matched amplifiers Q keeps at first order.  But two amplifiers then share one loop, whose phase margin
is 39 degrees with one-pole amplifiers and none with most real ones.  R6 = R5/3 brings it to 45 degrees with types of
a far second pole, and moves 1/Q by 2.7 f0/GBW, where the uncompensated integrator moves it by 4; a choice of this
program.  R3 is as much larger, so that no amplifier swings further than the output.

R4 enters the frequency alone: it trims it and leaves bandwidth and gain; R2 sets the bandwidth, R1 the gain.

References:
    D. Akerberg, K. Mossberg, "A versatile active RC building block with inherent compensation for the finite bandwidth
    of the amplifier", IEEE Trans. Circuits Syst. CAS-21 (1974) 75 (from memory).
    The transfer function, and the effects of finite gain, by nodal analysis.
"""

from __future__ import annotations

import math

import numpy as np

from synth.topology.base import FloatArray, SectionTopology, Slot, Values

INVERTER_RESISTOR = 390.0  # [ohm] R5: with some 10 pF of a fast amplifier it keeps its phase margin
INVERTER_GAIN = 1 / 3  # R6/R5


def fixed(frequency: FloatArray, _q: FloatArray, _gain: FloatArray, given: Values) -> Values:
    """R5, R6 and R3 = R5/(R6 w0 C2), unity gain from the output to U2 at the centre [ohm]."""
    inverter = np.full_like(np.asarray(frequency, dtype=float), INVERTER_RESISTOR)
    r3 = 1 / (INVERTER_GAIN * 2 * np.pi * np.asarray(frequency) * given["C2"])
    return {"R3": r3, "R5": inverter, "R6": INVERTER_GAIN * inverter}


def solve(frequency: FloatArray, q: FloatArray, gain: FloatArray, given: Values) -> Values:
    """R1, R2, R4 [ohm] for a pole pair and a peak gain magnitude, ideal amplifiers.

    R2 = Q/(w0 C1), R1 = R2/gain, R4 = R5/(w0^2 C1 C2 R3 R6).

    Args:
        frequency: [Hz]; q; gain: [V/V] magnitude at `frequency`; given: C1, C2 [F], R3, R5, R6 [ohm].

    Example:
        >>> found = solve(10e3, 25.0, 1.0, {"C1": 1.5915e-9, "C2": 1.5915e-9, "R3": 10e3, "R5": 1e3, "R6": 1e3})
        >>> [round(float(found[key]), -1) for key in ("R1", "R2", "R4")]
        [250010.0, 250010.0, 10000.0]
    """
    omega = 2 * np.pi * np.asarray(frequency)
    r2 = q / (omega * given["C1"])
    r4 = given["R5"] / (omega**2 * given["C1"] * given["C2"] * given["R3"] * given["R6"])
    return {"R1": r2 / gain, "R2": r2, "R4": r4}


def frequency_shift(q: float, ratio: float) -> tuple[float, float]:
    """First-order shifts of frequency and Q for f0/GBW = `ratio`, matched amplifiers, unity gain.

    -(1 + 1/2Q) ratio and +[(1/a - a) Q + 1/2Q] ratio with a = R6/R5 (nodal analysis); for a = 1, Q but for the last
    term, Akerberg, Mossberg 1974 (from memory).
    """
    return -(1 + 0.5 / q) * ratio, ((1 / INVERTER_GAIN - INVERTER_GAIN) * q + 0.5 / q) * ratio


def q_loss(q: float, dc_gain: float) -> float:
    """First-order relative shift of Q by a finite DC gain, unity gain.

    -(2 Q + 1 + (1/a - a)/2)/A0 with a = R6/R5 (nodal analysis).
    """
    return -(2 * q + 1 + 0.5 * (1 / INVERTER_GAIN - INVERTER_GAIN)) / dc_gain


def noise_gain(q: float) -> float:
    """Output noise at the centre over one amplifier's, all three taken together (nodal analysis, unity gain).

    Q sqrt([(1 + 2/Q)^2 + 1] + [1/a^2 + 1] + (1 + 1/a)^2) for first integrator, second integrator, inverter of gain a =
    R6/R5; R3 = 1/(a w0 C2), R4 = 1/(w0 C1).
    """
    a = INVERTER_GAIN
    return q * math.sqrt((1 + 2 / q) ** 2 + 2 + 1 / a**2 + (1 + 1 / a) ** 2)


TOPOLOGY = SectionTopology(
    name="akerberg-mossberg",
    title="Akerberg-Mossberg bandpass",
    kind="bandpass",
    slots=(
        Slot("R1", "resistor", "input resistor, sets the gain", ("in", "m1")),
        Slot("R2", "resistor", "sets the bandwidth", ("m1", "out"), sets_frequency=True),
        Slot("C1", "capacitor", "first integrator", ("m1", "out"), sets_frequency=True),
        Slot("R3", "resistor", "second integrator", ("out", "p2"), sets_frequency=True),
        Slot("C2", "capacitor", "second integrator", ("p2", "x"), sets_frequency=True),
        Slot("R5", "resistor", "inverter, input", ("l", "m3"), sets_frequency=True),
        Slot("R6", "resistor", "inverter, feedback", ("m3", "x"), sets_frequency=True),
        Slot("R4", "resistor", "closes the loop, trims the frequency", ("l", "m1"), sets_frequency=True),
        Slot("U1", "op-amp", "first integrator", ("0", "m1", "out")),
        Slot("U2", "op-amp", "second integrator", ("p2", "0", "l")),
        Slot("U3", "op-amp", "inverter inside the second integrator", ("0", "m3", "x")),
    ),
    sign=-1,
    source="Akerberg, Mossberg 1974",
    tuned=("R1", "R2", "R4"),
    fixed=fixed,
    solve=solve,
    trimmer="R4",
    shift=frequency_shift,
    loss=q_loss,
    noise_gain=noise_gain,
    q_spread=lambda _q: 0.6,
    margin_loss=(30.0, 0.02),
    largest_q=50.0,
    limit="the loss of its capacitors takes 2 Q tan d of Q, a tenth at 1e-3",
)
