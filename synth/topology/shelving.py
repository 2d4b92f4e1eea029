"""AC-coupled non-inverting stage whose gain rises or falls once: the inverse of a first-order sensor, bounded.

    rising                                    falling
      in --CC--+------ (+)                      in --CC--+------ (+)
               RB                                        RB
               |                                         |
              gnd                                       gnd
      RF from out to (-)                        RF from (-) to x, RX parallel CX from x to out
      RG parallel (RS + CS) from (-) to ground  RG from (-) to ground

    K(s) = K0 (1 + s/wz)/(1 + s/wp)

    rising:  K0 = 1 + RF/RG         wp = 1/(RS CS)   wz = 1/((RS + RF parallel RG) CS)   wz < wp
    falling: K0 = 1 + (RF + RX)/RG  wp = 1/(RX CX)   wz = wp K0/(1 + RF/RG)              wp < wz

A sensor with a low-pass of corner fc is made good by a rising shelf of zero fc, one with a high-pass by a falling
shelf of zero fc; the pole bounds the gain above or below the band.  The gain is nowhere below one: no non-inverting
stage can do less.

References:
    S. Franco, Design with Operational Amplifiers and Analog Integrated Circuits, 3rd ed., sec. 3.2 and 3.3 (from
    memory); the equations follow from K = 1 + Zf/Zg.
"""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from synth.topology.base import FloatArray, Slot, Topology, Values
from synth.topology.non_inverting import DAMPED as DAMPED_GAIN

ShelfKind = Literal["rising", "falling"]
SOURCE = "Franco, 3rd ed., sec. 3.2 and 3.3"
LEAST_RESISTIVE_GAIN = 1.05  # of the flat end of the shelf: RF is nothing at 1, or RG infinite

_INPUT = (Slot("CC", "capacitor", "input coupling", ("in", "p")), Slot("RB", "resistor", "bias path", ("p", "0")))
_DAMPER = tuple(slot for slot in DAMPED_GAIN.slots if slot.key in ("RD", "CD"))
_AMPLIFIER = Slot("U", "op-amp", "amplifier", ("p", "m", "out"))
_RISING = (
    Slot("RG", "resistor", "gain, to ground", ("m", "0")),
    Slot("RF", "resistor", "gain, feedback", ("m", "out")),
    Slot("RS", "resistor", "pole of the shelf", ("m", "x"), sets_frequency=True),
    Slot("CS", "capacitor", "zero and pole of the shelf", ("x", "0"), sets_frequency=True),
)
_FALLING = (
    Slot("RG", "resistor", "gain, to ground", ("m", "0")),
    Slot("RF", "resistor", "zero of the shelf, feedback", ("m", "x"), sets_frequency=True),
    Slot("RX", "resistor", "pole of the shelf", ("x", "out"), sets_frequency=True),
    Slot("CX", "capacitor", "zero and pole of the shelf", ("x", "out"), sets_frequency=True),
)


def _topology(kind: ShelfKind, own: tuple[Slot, ...], damper: tuple[Slot, ...]) -> Topology:
    return Topology(
        name=f"shelving-{kind}" + ("-damped" if damper else ""),
        title=f"AC-coupled non-inverting shelf, gain {kind}" + (", input damped" if damper else ""),
        kind="pre-emphasis",
        slots=(*_INPUT, *damper, *own, _AMPLIFIER),
        sign=1,
        source=SOURCE + ("; the damper is common practice, no source" if damper else ""),
    )


SHELVES: dict[ShelfKind, Topology] = {
    "rising": _topology("rising", _RISING, ()),
    "falling": _topology("falling", _FALLING, ()),
}
DAMPED: dict[str, Topology] = {  # by the name of the plain one
    "shelving-rising": _topology("rising", _RISING, _DAMPER),
    "shelving-falling": _topology("falling", _FALLING, _DAMPER),
}
TOPOLOGIES: tuple[Topology, ...] = (*SHELVES.values(), *DAMPED.values())
RESISTORS: dict[ShelfKind, tuple[str, str, str]] = {"rising": ("RG", "RF", "RS"), "falling": ("RG", "RF", "RX")}
CAPACITOR: dict[ShelfKind, str] = {"rising": "CS", "falling": "CX"}


def slope(zero: ArrayLike, pole: ArrayLike) -> FloatArray:
    """d ln|K| / d ln f at the centre, for a zero and a pole given as multiples of it: 1/(1 + z^2) - 1/(1 + p^2).

    Example:
        >>> round(float(slope(1.0, 10.0)), 4)  # an octave of zero alone would be 1/2
        0.4901
    """
    z, p = np.asarray(zero, dtype=float), np.asarray(pole, dtype=float)
    result: FloatArray = 1 / (1 + z**2) - 1 / (1 + p**2)
    return result


def zero_for_slope(wanted: ArrayLike, pole: ArrayLike) -> FloatArray:
    """The zero, as a multiple of the centre, that gives a slope there beside a pole; the inverse of `slope`.

    0 where even a zero at DC is too little of a rise, infinite where even none is too little of a fall.
    """
    share = np.asarray(wanted, dtype=float) + 1 / (1 + np.asarray(pole, dtype=float) ** 2)
    with np.errstate(divide="ignore"):
        square = 1 / np.clip(share, 0.0, 1.0) - 1
    result: FloatArray = np.sqrt(square)
    return result


def end_gains(gain: ArrayLike, zero: ArrayLike, pole: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Gains far below and far above the centre of a shelf with some gain magnitude at the centre.

    K0 = gain sqrt(1 + 1/p^2)/sqrt(1 + 1/z^2), K(infinity) = K0 p/z; zero and pole as multiples of the centre.
    """
    z, p = np.asarray(zero, dtype=float), np.asarray(pole, dtype=float)
    high: FloatArray = np.asarray(gain, dtype=float) * np.sqrt((1 + p**2) / (1 + z**2))
    return high * z / p, high


def least_gain(zero: float, pole: float) -> float:
    """Least gain magnitude at the centre: the smaller end of the shelf is `LEAST_RESISTIVE_GAIN`."""
    return LEAST_RESISTIVE_GAIN / float(min(end_gains(1.0, zero, pole)))


def resistors(kind: ShelfKind, gain: FloatArray, zero: FloatArray, pole: FloatArray, capacitor: FloatArray) -> Values:
    """Ideal resistors of a shelf beside its capacitor; arrays of one shape in and out.

    Rising, from the equations above: RS = 1/(wp CS), RF parallel RG = 1/(wz CS) - RS, RF = K0 (RF parallel RG).
    Falling: RX = 1/(wp CX), RG = RX/(K0 - K1), RF = (K1 - 1) RG with K1 = 1 + RF/RG, the gain far above.

    Args:
        gain: at DC for a rising shelf, far above for a falling one; the smaller end of the two.
        zero, pole: [Hz]; capacitor: CS or CX [F].

    Returns:
        by key; not positive or not finite where the stage cannot do it.

    Example:
        >>> one = np.ones(1)
        >>> made = resistors("rising", 2 * one, 1e3 * one, 10e3 * one, 10e-9 * one)
        >>> [round(float(made[key][0]), 1) for key in ("RG", "RF", "RS")]
        [28647.9, 28647.9, 1591.5]
    """
    with np.errstate(all="ignore"):
        own = 1 / (2 * np.pi * pole * capacitor)
        if kind == "rising":
            parallel = 1 / (2 * np.pi * zero * capacitor) - own
            return {"RG": gain * parallel / (gain - 1), "RF": gain * parallel, "RS": own}
        leg = own / (gain * (zero / pole - 1))
        return {"RG": leg, "RF": (gain - 1) * leg, "RX": own}


def corners(kind: ShelfKind, values: Values) -> tuple[FloatArray, FloatArray]:
    """Zero and pole [Hz] of a shelf by the equations above, from its values."""
    rg, rf = values["RG"], values["RF"]
    if kind == "rising":
        pole = 1 / (2 * np.pi * values["RS"] * values["CS"])
        return 1 / (2 * np.pi * (values["RS"] + rf * rg / (rf + rg)) * values["CS"]), pole
    pole = 1 / (2 * np.pi * values["RX"] * values["CX"])
    return pole * (rg + rf + values["RX"]) / (rg + rf), pole


def low_gain(kind: ShelfKind, values: Values) -> FloatArray:
    """K0, the gain far below the shelf, from its values."""
    feedback = values["RF"] + (values["RX"] if kind == "falling" else 0.0)
    result: FloatArray = 1 + feedback / values["RG"]
    return result
