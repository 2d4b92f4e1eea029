"""Loop gain of each amplifier by return ratio.

The return ratio of a controlled source is minus its value times what a unit current in its place brings back to
its own control, all other sources alive and its own set to zero (H. W. Bode, Network Analysis and Feedback
Amplifier Design, 1945, ch. 4; from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from synth.circuit.linear import frequency_array, scaled_systems, solve_many
from synth.circuit.network import ComplexArray, Element, FloatArray, Matrices, Network, matrices
from synth.errors import CircuitError

GRID = 241  # points over the span that is searched for unity crossings
REFINEMENTS = 3


@dataclass(frozen=True, slots=True)
class Margin:
    """Phase margin [degree] of one amplifier's loop at its worst crossing [Hz].

    The crossing is None, the margin 180 degrees, where the loop gain never reaches one.
    """

    ref: str
    phase_margin: float
    crossing: float | None


def return_ratio(network: Network, ref: str, frequencies: ArrayLike) -> ComplexArray:
    """Return ratio of amplifier `ref`'s gain source, shape (F,); 1 + it is the return difference.

    Raises:
        CircuitError: there is no such amplifier.
    """
    if ref not in [a.ref for a in network.amplifiers]:
        known = ", ".join(a.ref for a in network.amplifiers)
        raise CircuitError(f"no amplifier {ref!r} in the circuit; it has {known}")
    ratio: ComplexArray = return_ratios(network, frequencies, (ref,))[0]
    return ratio


def return_ratios(network: Network, frequencies: ArrayLike, refs: Sequence[str]) -> ComplexArray:
    """Return ratios of several amplifiers from one solution of the whole circuit, shape (refs, F).

    What a unit current in place of a source g brings back to its control is z with the source dead and
    z' = z/(1 - g z) with it alive; the return ratio is -g z = -g z'/(1 + g z').
    """
    f, m = frequency_array(frequencies), matrices(network)
    elements = {element.name: element for element in network.elements}
    sources = [elements[a.gain_element] for ref in refs for a in network.amplifiers if a.ref == ref]
    Y, scale = scaled_systems(m, f)
    injected = np.zeros((len(m.nodes) + 1, len(sources)))  # last row: ground and the held input
    for k, source in enumerate(sources):
        injected[m.index(source.nodes[0]), k] -= 1.0
        injected[m.index(source.nodes[1]), k] += 1.0
    x = solve_many(Y, injected[:-1] / scale[:, :, None])
    x = np.concatenate([x, np.zeros((f.size, 1, len(sources)))], axis=1)
    rows = [_ratio(source, x[:, :, k], m) for k, source in enumerate(sources)]
    return np.array(rows).reshape(len(sources), f.size)


def _ratio(source: Element, x: ComplexArray, m: Matrices) -> ComplexArray:
    back = x[:, m.index(source.nodes[2])] - x[:, m.index(source.nodes[3])]
    return np.asarray(-source.value * back / (1 + source.value * back), dtype=np.complex128)


def phase_margin(network: Network, ref: str, low: float, high: float) -> Margin:
    """Worst phase margin over all unity crossings of an amplifier's loop gain between two frequencies [Hz]."""
    return next(margin for margin in phase_margins(network, low, high) if margin.ref == ref)


def phase_margins(network: Network, low: float, high: float) -> tuple[Margin, ...]:
    """The phase margin of every amplifier's loop, in the circuit's order."""
    f = np.geomspace(low, high, GRID)
    refs = [amplifier.ref for amplifier in network.amplifiers]
    return tuple(
        _margin(network, ref, f, ratio) for ref, ratio in zip(refs, return_ratios(network, f, refs), strict=True)
    )


def _margin(network: Network, ref: str, f: FloatArray, ratio: ComplexArray) -> Margin:
    crossings = np.flatnonzero(np.diff(np.sign(np.log(np.abs(ratio)))) != 0)
    worst = Margin(ref, 180.0, None)
    for k in crossings:
        at = _crossing(network, ref, float(f[k]), float(f[k + 1]))
        angle = float(np.degrees(np.angle(-return_ratio(network, ref, [at])[0])))
        if abs(angle) < worst.phase_margin or worst.crossing is None:
            worst = Margin(ref, abs(angle), at)  # distance of the loop gain from -1, in angle
    return worst


def _crossing(network: Network, ref: str, low: float, high: float) -> float:
    """Frequency of |return ratio| = 1 between two grid points, by repeated refinement of the grid."""
    for _ in range(REFINEMENTS):
        grid: FloatArray = np.geomspace(low, high, 17)
        size = np.log(np.abs(return_ratio(network, ref, grid)))
        k = int(np.flatnonzero(np.diff(np.sign(size)) != 0)[0])
        low, high = float(grid[k]), float(grid[k + 1])
    return float(np.sqrt(low * high))
