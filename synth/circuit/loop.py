"""Loop gain of each amplifier by return ratio.

The return ratio of a controlled source is minus its value times what a unit current in its place brings back to
its own control, all other sources alive and its own set to zero (H. W. Bode, Network Analysis and Feedback
Amplifier Design, 1945, ch. 4; from memory).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from synth.circuit.linear import frequency_array, scaled_systems, solve
from synth.circuit.network import ComplexArray, FloatArray, Network, matrices
from synth.errors import CircuitError


@dataclass(frozen=True, slots=True)
class Margin:
    """Phase margin [degree] of one amplifier's loop at its worst crossing [Hz].

    The crossing is None, the margin 180 degrees, where the loop gain never reaches one.
    """

    ref: str
    phase_margin: float
    crossing: float | None


def return_ratio(network: Network, ref: str, frequencies: ArrayLike) -> ComplexArray:
    """Return ratio of amplifier `ref`'s gain source, shape (F,); 1 + it is the return difference."""
    amplifier = next((a for a in network.amplifiers if a.ref == ref), None)
    if amplifier is None:
        known = ", ".join(a.ref for a in network.amplifiers)
        raise CircuitError(f"no amplifier {ref!r} in the circuit; it has {known}")
    f = frequency_array(frequencies)
    source = next(e for e in network.elements if e.name == amplifier.gain_element)
    dead = replace(
        network, elements=tuple(replace(e, value=0.0) if e is source else e for e in network.elements)
    )
    m = matrices(dead)
    Y, scale = scaled_systems(m, f)
    injected = np.zeros(len(m.nodes))
    for node, sign in ((source.nodes[0], -1.0), (source.nodes[1], 1.0)):
        if m.index(node) >= 0:
            injected[m.index(node)] += sign
    x = np.concatenate([solve(Y, injected / scale), np.zeros((f.size, 1))], axis=1)
    back = x[:, m.index(source.nodes[2])] - x[:, m.index(source.nodes[3])]
    ratio: ComplexArray = -source.value * back
    return ratio


def phase_margin(network: Network, ref: str, low: float, high: float) -> Margin:
    """Worst phase margin over all unity crossings of an amplifier's loop gain between two frequencies [Hz]."""
    f = np.geomspace(low, high, 361)
    t = return_ratio(network, ref, f)
    crossings = np.flatnonzero(np.diff(np.sign(np.log(np.abs(t)))) != 0)
    if crossings.size == 0:
        return Margin(ref, 180.0, None)
    worst = Margin(ref, 360.0, None)
    for k in crossings:
        at = _crossing(network, ref, f[k], f[k + 1])
        angle = float(np.degrees(np.angle(-return_ratio(network, ref, [at])[0])))
        margin = abs(angle)  # distance of the loop gain from -1, in angle
        if margin < worst.phase_margin:
            worst = Margin(ref, margin, at)
    return worst


def _crossing(network: Network, ref: str, low: float, high: float) -> float:
    """Frequency of |return ratio| = 1 between two grid points, by repeated refinement of the grid."""
    for _ in range(4):
        grid: FloatArray = np.geomspace(low, high, 17)
        size = np.log(np.abs(return_ratio(network, ref, grid)))
        k = int(np.flatnonzero(np.diff(np.sign(size)) != 0)[0])
        low, high = float(grid[k]), float(grid[k + 1])
    return float(np.sqrt(low * high))
