"""What a topology file says about its circuit: its parts, where they sit, its equations and its limits of use."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from synth.model.chain import StageKind
from synth.model.part import PartKind

FloatArray = NDArray[np.float64]
Values = Mapping[str, FloatArray]


@dataclass(frozen=True, slots=True)
class Slot:
    """A place for a part.

    Attributes:
        key: name of the value in the design equations ("R1A").
        kind: of the part; role: what it does there, for people.
        nodes: local names: "in", "out", "0" (ground) or an inner node; an op amp's are (plus, minus, output).
        sets_frequency: True where the value enters the pole pair.
    """

    key: str
    kind: PartKind
    role: str
    nodes: tuple[str, ...]
    sets_frequency: bool = False


@dataclass(frozen=True, slots=True)
class Topology:
    """One circuit that realizes a stage; `sign` is that of its gain at the centre."""

    name: str
    title: str
    kind: StageKind
    slots: tuple[Slot, ...]
    sign: int
    source: str


@dataclass(frozen=True, slots=True)
class SectionTopology(Topology):
    """A bandpass section: its design equations and what its amplifiers may be asked for.

    Attributes:
        tuned: keys of the resistors that are searched together, the frequency trimmer among them.
        fixed: (frequency [Hz], q, gain, capacitors) -> ideal values of the other resistors, which are rounded first.
        solve: (frequency [Hz], q, gain, capacitors and rounded fixed resistors) -> ideal values of the tuned ones;
            not finite or not positive where the section cannot do it.  Arrays of one shape in and out.
        trimmer: key of the tuned resistor that moves the frequency most nearly alone.
        shift: (q, f0/GBW) -> first-order relative shifts of frequency and Q by finite gain-bandwidth.
        loss: (q, A0) -> first-order relative shift of Q by finite DC gain.
        noise_gain: (q,) -> ratio of the output noise at the centre to an amplifier's own voltage noise.
        q_spread: (q,) -> standard deviation of Q over the tolerance of the resistors, linear, rectangular.
        margin_loss: phase that the circuit takes from an amplifier's unity-gain margin: [degree], and [degree] for
            each MHz pF of gain-bandwidth and input capacitance; fitted to the engine's figures at Q 10, the judge
            decides.
        largest_q: beyond it the circuit is not used; `limit` says why.
    """

    tuned: tuple[str, ...]
    fixed: Callable[[FloatArray, FloatArray, FloatArray, Values], Values]
    solve: Callable[[FloatArray, FloatArray, FloatArray, Values], Values]
    trimmer: str
    shift: Callable[[float, float], tuple[float, float]]
    loss: Callable[[float, float], float]
    noise_gain: Callable[[float], float]
    q_spread: Callable[[float], float]
    margin_loss: tuple[float, float]
    largest_q: float
    limit: str

    @property
    def capacitors(self) -> tuple[str, ...]:
        """Keys of the capacitors."""
        return tuple(slot.key for slot in self.slots if slot.kind == "capacitor")

    @property
    def amplifiers(self) -> int:
        """How many amplifiers a section takes."""
        return sum(slot.kind == "op-amp" for slot in self.slots)


def no_fixed(_frequency: FloatArray, _q: FloatArray, _gain: FloatArray, _given: Values) -> Values:
    """For a section all of whose resistors are tuned."""
    return {}
