"""Transfer, group delay and noise of one circuit, by direct solution at each frequency.

The adjoint (transposed) solution y gives, at every frequency, the effect on the output of a current into any
node, hence all noise transfers in one solve [1]_ and the exact derivative of the transfer with respect to
frequency, dH/ds = -y^T C x, without differencing [2]_.

References:
    .. [1] R. Rohrer, L. Nagel, R. Meyer, L. Weber, "Computationally efficient electronic-circuit noise
       calculations", IEEE J. Solid-State Circuits SC-6 (1971) 204 (from memory).
    .. [2] S. W. Director, R. A. Rohrer, "The generalized adjoint network and network sensitivities",
       IEEE Trans. Circuit Theory CT-16 (1969) 318 (from memory).
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from synth.circuit.linear import frequency_array, scaled_systems, solve, solve_many
from synth.circuit.network import BOLTZMANN, ComplexArray, FloatArray, Matrices, Network, matrices
from synth.errors import CircuitError


@dataclass(frozen=True, slots=True)
class NoiseSpectrum:
    """Noise at the output.

    Attributes:
        frequencies: [Hz], shape (F,).
        density: [V/rtHz] total, shape (F,).
        labels: contributors, "R3", "U1 voltage noise".
        contributions: [V/rtHz] of each contributor, shape (contributors, F).
    """

    frequencies: FloatArray
    density: FloatArray
    labels: tuple[str, ...]
    contributions: FloatArray


def solutions(m: Matrices, frequencies: FloatArray) -> tuple[ComplexArray, ComplexArray]:
    """Node voltages x and adjoint y at each frequency, both of shape (F, n).

    x is in volt for one input unit; y[k] is the output voltage for one ampere into node k [ohm].
    """
    Y, scale = scaled_systems(m, frequencies)
    x = solve(Y, m.b / scale)
    readout = np.zeros(Y.shape[:2], dtype=complex)
    readout[:, m.output] = 1.0
    y = solve(np.swapaxes(Y, 1, 2), readout) / scale
    return x, y


def response(network: Network, frequencies: ArrayLike) -> ComplexArray:
    """Output voltage for one input unit [V per input unit], shape (F,)."""
    return node_voltages(network, frequencies)[:, matrices(network).output]


def node_voltages(network: Network, frequencies: ArrayLike) -> ComplexArray:
    """Every node's voltage for one input unit, shape (F, nodes), nodes as in `network.unknowns`."""
    m = matrices(network)
    Y, scale = scaled_systems(m, frequency_array(frequencies))
    return solve(Y, m.b / scale)


def injected_voltages(network: Network, node: str, frequencies: ArrayLike) -> ComplexArray:
    """Every node's voltage for one ampere into a node, the input at rest [ohm], shape (F, nodes).

    Raises:
        CircuitError: the node is not one of the circuit's unknowns.
    """
    m = matrices(network)
    if m.index(node) < 0:
        raise CircuitError(f"no node {node!r} in the circuit; it has {', '.join(m.nodes)}")
    Y, scale = scaled_systems(m, frequency_array(frequencies))
    into = np.zeros(len(m.nodes))
    into[m.index(node)] = 1.0
    return solve(Y, into / scale)


def resistances(network: Network, frequencies: ArrayLike) -> ComplexArray:
    """Voltage of every node (row) for one ampere into every node (column), the input at rest [ohm], (F, n, n)."""
    m = matrices(network)
    Y, scale = scaled_systems(m, frequency_array(frequencies))
    return solve_many(Y, np.eye(len(m.nodes)) / scale[:, :, None])


def response_and_delay(network: Network, frequencies: ArrayLike) -> tuple[ComplexArray, FloatArray]:
    """Response [V per input unit] and group delay -d(phase)/d(omega) [s], both of shape (F,).

    Example:
        >>> from synth.circuit.network import Element, Network
        >>> rc = (Element("g1", "transconductance", ("0", "a", "in", "0"), 1e-3),
        ...       Element("g2", "conductance", ("a", "0"), 1e-3), Element("c1", "capacitance", ("a", "0"), 1e-9))
        >>> h, delay = response_and_delay(Network("in", "a", rc, (), (), 300.15), [0.0])
        >>> round(float(abs(h[0])), 9), round(float(delay[0]) * 1e6, 9)
        (1.0, 1.0)
    """
    m = matrices(network)
    x, y = solutions(m, frequency_array(frequencies))
    h = x[:, m.output]
    slope = -np.einsum("fi,ij,fj->f", y, m.C, x)
    return h, -np.real(slope / h)


def noise(network: Network, frequencies: ArrayLike) -> NoiseSpectrum:
    """Output noise density and its contributors.

    Thermal noise of a conductance is 4 k T G (J. B. Johnson, H. Nyquist, Phys. Rev. 32 (1928) 97 and 110).
    A source's own noise, 4 k T Re Z(f), follows from the noisy resistors inside it.

    Raises:
        CircuitError: a frequency is zero (1/f noise has no finite density there).
    """
    f = frequency_array(frequencies)
    if np.any(f <= 0):
        raise CircuitError("noise is defined above 0 Hz only")
    m = matrices(network)
    _, y = solutions(m, f)
    powers: dict[str, FloatArray] = {}
    for label, ends, square in _generators(network, f):
        power = np.abs(_across(y, m, ends)) ** 2 * square
        powers[label] = powers[label] + power if label in powers else power
    table = np.array(list(powers.values())).reshape(len(powers), f.size)
    return NoiseSpectrum(f, np.sqrt(table.sum(axis=0)), tuple(powers), np.sqrt(table))


def node_noise(network: Network, nodes: Sequence[str], frequencies: ArrayLike) -> FloatArray:
    """Noise density of several nodes at once [V/rtHz], shape (nodes, F).

    Raises:
        CircuitError: a frequency is zero, or a node is not one of the circuit's unknowns.
    """
    f = frequency_array(frequencies)
    if np.any(f <= 0):
        raise CircuitError("noise is defined above 0 Hz only")
    m = matrices(network)
    missing = [node for node in nodes if m.index(node) < 0]
    if missing:
        raise CircuitError(f"no node {missing[0]!r} in the circuit; it has {', '.join(m.nodes)}")
    Y, scale = scaled_systems(m, f)
    readout = np.zeros((f.size, len(m.nodes), len(nodes)))
    readout[:, [m.index(node) for node in nodes], range(len(nodes))] = 1.0
    adjoint = solve_many(np.swapaxes(Y, 1, 2), readout) / scale[:, :, None]
    power = np.zeros((len(nodes), f.size))
    for k in range(len(nodes)):
        y = adjoint[:, :, k]
        power[k] = sum(np.abs(_across(y, m, ends)) ** 2 * square for _, ends, square in _generators(network, f))
    return np.sqrt(power)


def _across(y: ComplexArray, m: Matrices, ends: tuple[str, ...]) -> ComplexArray:
    """Effect of a current from the first to the second end, given the adjoint of each node, shape (F,)."""
    padded = np.concatenate([y, np.zeros((y.shape[0], 1))], axis=1)  # row -1: ground and the held input
    return np.asarray(padded[:, m.index(ends[1])] - padded[:, m.index(ends[0])], dtype=np.complex128)


def _generators(network: Network, f: FloatArray) -> Iterator[tuple[str, tuple[str, ...], FloatArray]]:
    """Every noise current: its label, its ends, and its density squared [A^2/Hz], shape (F,)."""
    for element in network.elements:
        if element.noisy:
            thermal = np.full(f.shape, 4 * BOLTZMANN * network.temperature * element.value)
            yield element.owner or element.name, element.nodes, thermal
    for source in network.noise:
        square = source.white**2 * (1 + source.corner / f) + (source.slope * f) ** 2
        yield source.label or source.name, source.nodes, square


def integrated(frequencies: FloatArray, density: FloatArray, low: float, high: float) -> float:
    """Rms value of a density between two frequencies: trapezoid of its square, ends interpolated.

    Args:
        frequencies: [Hz] rising, shape (F,).
        density: [V/rtHz], shape (F,).
        low, high: [Hz] limits, inside the frequencies.

    Returns:
        [V] rms.
    """
    square = density**2
    inside = (frequencies > low) & (frequencies < high)
    f = np.concatenate([[low], frequencies[inside], [high]])
    p = np.concatenate(
        [[np.interp(low, frequencies, square)], square[inside], [np.interp(high, frequencies, square)]]
    )
    return float(np.sqrt(np.trapezoid(p, f)))
