"""Strays of the layout that close loops: from a later output back to an earlier node.

A capacitance C between two nodes changes the nodal matrix by s C u u^T, u with +1 and -1 at its ends, so that its
effect on everything follows from the circuit without it (Sherman, Morrison, Ann. Math. Statist. 21 (1950) 124, from
memory): H' = H - s C (u^T y)(u^T x)/(1 + s C z), z = u^T Y^-1 u.  The chain is at the verge of oscillation where
1 + j w C z(j w) = 0 for some w.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from synth import circuit
from synth.circuit.linear import scaled_systems, solve_many
from synth.circuit.network import ComplexArray, FloatArray, matrices
from synth.model.chain import Chain, Stage
from synth.model.judgement import LayoutDemand
from synth.spec import Spec
from synth.verification.figures import close_grid

SHARE = 0.1  # of the accuracy, that one stray may take
DEFAULT_ACCURACY = 0.03  # where the spec asks none
LOOP_SPAN = (1e-2, 1e3)  # of the centre: where loops are searched
LOOP_POINTS = 241
SMALLEST, LARGEST = 1e-20, 1e-9  # [F] what is searched
IRRELEVANT = 2e-12  # [F] no layout has so much between two stages: not told


def layout_demands(chain: Chain, network: circuit.Network, spec: Spec) -> tuple[LayoutDemand, ...]:
    """The stray of each pair of a later output and an earlier node that costs its share; the smallest first."""
    pairs = list(_pairs(chain, network))
    if not pairs:
        return ()
    accuracy = spec.target.accuracy if spec.target.accuracy is not None else DEFAULT_ACCURACY
    share, center = SHARE * accuracy, spec.target.center_frequency
    nodes = sorted({node for _, output, _, node in pairs for node in (output, node)})
    wide = center * np.geomspace(*LOOP_SPAN, LOOP_POINTS)
    grid = np.union1d(wide, close_grid(center, spec.target.bandwidth))
    back = _between(network, grid, nodes)
    at_center = _between(network, np.array([center]), [*nodes, network.output])
    x = circuit.node_voltages(network, [center])[0]
    index = {node: k for k, node in enumerate(network.unknowns)}
    demands = []
    for source, output, victim, node in pairs:
        a, b, out = nodes.index(output), nodes.index(node), len(nodes)
        z = _across(at_center, a, b)[0]
        loop = 2j * np.pi * center * (at_center[0, out, a] - at_center[0, out, b]) * (x[index[output]] - x[index[node]])
        ratio = loop / x[index[network.output]]
        limit = _limit(complex(ratio), complex(2j * np.pi * center * z), share)
        critical = _critical(2j * np.pi * grid * _across(back, a, b))
        smallest = min(limit, critical) if critical is not None else limit
        if smallest < IRRELEVANT:
            demands.append(LayoutDemand(source, output, victim, node, limit, critical))
    return tuple(sorted(demands, key=lambda d: (float(f"{d.limit:.6g}"), d.source, d.node)))


def _pairs(chain: Chain, network: circuit.Network) -> Iterator[tuple[str, str, str, str]]:
    """(later stage, its output node, earlier stage, its sensitive node), the sensor's terminals among the latter."""
    signal = [stage for stage in chain.stages if stage.kind != "reference"]
    known = set(network.unknowns)
    for k, later in enumerate(signal):
        victims = [("sensor", circuit.TERMINAL)] if k > 0 else []
        victims += [(earlier.name, node) for earlier in signal[:k] for node in _inputs(chain, earlier)]
        for victim, node in victims:
            if node in known and node != later.output_node:
                yield later.name, later.output_node, victim, node


def _inputs(chain: Chain, stage: Stage) -> tuple[str, ...]:
    """Nodes of a stage that pick up: its amplifiers' inputs."""
    amplifiers = [part for part in (chain.part(ref) for ref in stage.parts) if part.kind == "op-amp"]
    return tuple(dict.fromkeys(node for part in amplifiers for node in part.nodes[:2]))


def _between(network: circuit.Network, f: FloatArray, nodes: list[str]) -> ComplexArray:
    """Voltage of each node (row) for one ampere into each (column) [ohm], shape (F, nodes, nodes)."""
    m = matrices(network)
    Y, scale = scaled_systems(m, f)
    rows = [m.index(node) for node in nodes]
    injected = np.zeros((len(m.nodes), len(nodes)))
    injected[rows, range(len(nodes))] = 1.0
    return np.asarray(solve_many(Y, injected / scale[:, :, None])[:, rows, :], dtype=np.complex128)


def _across(z: ComplexArray, a: int, b: int) -> ComplexArray:
    return np.asarray(z[:, a, a] - z[:, a, b] - z[:, b, a] + z[:, b, b], dtype=np.complex128)


def _limit(ratio: complex, loading: complex, share: float) -> float:
    """Smallest capacitance [F] that changes the gain's magnitude by a share: |H'/H| = |1 - C ratio/(1 + C loading)|."""
    grid = np.geomspace(SMALLEST, LARGEST, 1101)
    change = np.abs(np.abs(1 - grid * ratio / (1 + grid * loading)) - 1)
    over = np.flatnonzero(change > share)
    if over.size == 0:
        return LARGEST
    k = int(over[0])
    if k == 0:
        return SMALLEST
    low, high = np.log(change[k - 1]), np.log(change[k])
    part = (np.log(share) - low) / (high - low) if high > low else 1.0
    return float(np.exp(np.log(grid[k - 1]) + part * np.log(grid[k] / grid[k - 1])))


def _critical(loop: ComplexArray) -> float | None:
    """Smallest capacitance [F] with 1 + C loop(w) = 0 at some w of the grid, None where there is none.

    Args:
        loop: j w z(j w) [1/F] over rising frequency.
    """
    crossing = np.flatnonzero(np.diff(np.sign(loop.imag)) != 0)
    part = loop.imag[crossing] / (loop.imag[crossing] - loop.imag[crossing + 1])
    real = loop.real[crossing] + part * (loop.real[crossing + 1] - loop.real[crossing])
    negative = real[real < 0]
    return float(1 / -negative.min()) if negative.size else None
