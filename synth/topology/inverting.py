"""Inverting gain stage.

                    +--- RF ----+
                    |           |
      in --- RIN ---+--- (-)    |
                        amplifier --- out      (+) on ground

    gain = -(RF/RIN) / (1 + (1 + RF/RIN)/A),   A the amplifier's open-loop gain

The source sees RIN, and its own impedance adds to it: for a sensor whose impedance is known and low.  Both inputs stay
at ground, so that a common-mode range does not matter; RIN's thermal noise stands in series with the signal.  The
bias current of (-) flows through RF.

References:
    S. Franco, Design with Operational Amplifiers and Analog Integrated Circuits, 3rd ed., sec. 1.3 (inverting
    amplifier) and 1.6 (finite open-loop gain).
"""

from __future__ import annotations

from synth.topology.base import Slot, Topology

TOPOLOGY = Topology(
    name="inverting",
    title="inverting gain",
    kind="gain",
    slots=(
        Slot("RIN", "resistor", "gain, input", ("in", "m")),
        Slot("RF", "resistor", "gain, feedback", ("m", "out")),
        Slot("U", "op-amp", "amplifier", ("0", "m", "out")),
    ),
    sign=-1,
    source="Franco, 3rd ed., sec. 1.3",
)


def magnitude(ratio: float, frequency: float, gain_bandwidth: float, dc_gain: float) -> float:
    """Closed-loop gain over RF/RIN = `ratio`: |1/(1 + (1 + ratio)/A)|, A = A0/(1 + j f A0/GBW).

    Example:
        >>> round(magnitude(10.0, 1e5, 1.1e6, 1e9), 6)  # 11/A = j: 1/sqrt(2)
        0.707107
    """
    open_loop = dc_gain / complex(1.0, frequency * dc_gain / gain_bandwidth)
    return abs(1 / (1 + (1 + ratio) / open_loop))


def resistor_ratio(gain: float, frequency: float, gain_bandwidth: float, dc_gain: float) -> float | None:
    """RF/RIN for a closed-loop gain magnitude at a frequency; None where the amplifier does not reach it.

    Example:
        >>> ratio = resistor_ratio(10.0, 1e5, 80e6, 1e6)
        >>> round(ratio * magnitude(ratio, 1e5, 80e6, 1e6), 9)
        10.0
    """
    ratio = gain
    for _ in range(60):
        reached = ratio * magnitude(ratio, frequency, gain_bandwidth, dc_gain)
        if abs(reached / gain - 1) < 1e-12:
            break
        ratio *= gain / reached
        if ratio > 20 * gain:
            return None
    return ratio
