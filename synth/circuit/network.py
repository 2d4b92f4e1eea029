"""The linear circuit: every element a conductance, a capacitance or a voltage-controlled current source.

With these three kinds the nodal matrix is Y(s) = G + s C exactly, with no frequency inside G or C, so that
transfer, group delay, noise, poles and loop gain all come from one pair of matrices.  The input is a node held
by an ideal source of one input unit; it is not an unknown.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from synth.errors import CircuitError

BOLTZMANN = 1.380649e-23  # [J/K] SI 2019, exact
ELEMENTARY_CHARGE = 1.602176634e-19  # [C] SI 2019, exact
ZERO_CELSIUS = 273.15  # [K]
GROUND = "0"

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]
ElementKind = Literal["conductance", "capacitance", "transconductance"]


@dataclass(frozen=True, slots=True)
class Element:
    """One element of the circuit.

    Attributes:
        name: unique identifier, letters, digits and underscores.
        kind: conductance [S], capacitance [F] or transconductance [S].
        nodes: (a, b); for a transconductance (from, to, plus, minus): the current value * (v(plus) - v(minus))
            leaves node `from` and enters node `to`.
        value: in the unit of its kind; may be negative.
        noisy: True for a conductance with thermal noise.
        owner: reference of the part, or name of the model, that it belongs to.
    """

    name: str
    kind: ElementKind
    nodes: tuple[str, ...]
    value: float
    noisy: bool = False
    owner: str = ""


@dataclass(frozen=True, slots=True)
class NoiseSource:
    """A noise current from node a to node b, beside the thermal noise of the noisy conductances.

    Its density squared is white^2 (1 + corner/f) + (slope f)^2, single-sided [A^2/Hz].
    """

    name: str
    nodes: tuple[str, str]
    white: float
    corner: float = 0.0
    slope: float = 0.0
    owner: str = ""
    label: str = ""


@dataclass(frozen=True, slots=True)
class Amplifier:
    """Where an op amp stands in the circuit: `gain_element` is the name of its input transconductance."""

    ref: str
    gain_element: str
    output: str


@dataclass(frozen=True, slots=True)
class Network:
    """A circuit ready for analysis: the input node is held at one input unit, the output node is read."""

    input: str
    output: str
    elements: tuple[Element, ...]
    noise: tuple[NoiseSource, ...]
    amplifiers: tuple[Amplifier, ...]
    temperature: float  # [K]

    @property
    def unknowns(self) -> tuple[str, ...]:
        """The nodes whose voltages are solved for, in order of first use."""
        seen = dict.fromkeys(node for element in self.elements for node in element.nodes)
        return tuple(node for node in seen if node not in (GROUND, self.input))

    @property
    def values(self) -> FloatArray:
        """The element values, shape (elements,)."""
        return np.array([element.value for element in self.elements])


@dataclass(frozen=True, slots=True)
class Stamps:
    """Where each element enters the equations: entry k adds sign[k] * value[element[k]] at (row[k], column[k]).

    Column -1 is the right-hand side: the negative of what multiplies the input voltage.
    """

    nodes: tuple[str, ...]
    output: int
    element: NDArray[np.intp]
    row: NDArray[np.intp]
    column: NDArray[np.intp]
    sign: FloatArray
    reactive: NDArray[np.bool_]


def stamps(network: Network) -> Stamps:
    """The stamps of every element, nodal analysis.

    Raises:
        CircuitError: the output is not a node of the circuit, or a capacitance hangs on the input node
            (the equations' right-hand side must not depend on frequency).
    """
    nodes = network.unknowns
    index = {node: k for k, node in enumerate(nodes)}
    if network.output not in index:
        raise CircuitError(f"output node {network.output!r} is not in the circuit; connect a stage to it")
    rows: list[tuple[int, int, int, float, bool]] = []
    for k, element in enumerate(network.elements):
        a, b = element.nodes[:2]
        plus, minus = element.nodes[2:] if element.kind == "transconductance" else (a, b)
        reactive = element.kind == "capacitance"
        for node, row_sign in ((a, 1.0), (b, -1.0)):
            if node not in index:
                continue
            for control, sign in ((plus, 1.0), (minus, -1.0)):
                if control in index:
                    rows.append((k, index[node], index[control], row_sign * sign, reactive))
                elif control == network.input:
                    if reactive:
                        raise CircuitError(f"{element.name} is a capacitance on the input node; buffer it")
                    rows.append((k, index[node], -1, -row_sign * sign, False))
    table = list(zip(*rows, strict=True))
    return Stamps(
        nodes,
        index[network.output],
        np.array(table[0], dtype=np.intp),
        np.array(table[1], dtype=np.intp),
        np.array(table[2], dtype=np.intp),
        np.array(table[3]),
        np.array(table[4], dtype=np.bool_),
    )


@dataclass(frozen=True, slots=True)
class Matrices:
    """(G + s C) x = b, x the node voltages [V] for one input unit; G, C of shape (n, n), b of shape (n,)."""

    nodes: tuple[str, ...]
    output: int
    G: FloatArray
    C: FloatArray
    b: FloatArray

    def index(self, node: str) -> int:
        """Row of a node; -1 for ground and the input."""
        return self.nodes.index(node) if node in self.nodes else -1


def matrices(network: Network) -> Matrices:
    """Assemble the nodal matrices of a network."""
    s = stamps(network)
    n = len(s.nodes)
    parts = s.sign * network.values[s.element]
    G, C, b = np.zeros((n, n)), np.zeros((n, n)), np.zeros(n)
    inside = s.column >= 0
    static, dynamic = inside & ~s.reactive, inside & s.reactive
    np.add.at(G, (s.row[static], s.column[static]), parts[static])
    np.add.at(C, (s.row[dynamic], s.column[dynamic]), parts[dynamic])
    np.add.at(b, s.row[~inside], parts[~inside])
    return Matrices(s.nodes, s.output, G, C, b)
