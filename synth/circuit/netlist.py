"""The circuit as text for any simulator of the SPICE3 class, amplifier noise inside.

Plain numbers only (a simulator reads M as milli), generated identifiers only, text from outside in comments and
there only as printable ASCII.  A noiseless conductance is a controlled source that senses its own voltage.

Amplifier noise comes from pairs of equal diodes at 27 degC, biased by one voltage source at zero impedance.  Each
diode has shot noise 2 q I; their currents are sensed by zero-volt sources and subtracted, which leaves no DC and a
density of 4 q I (1 + fc/f) with KF = 2 q fc and AF = 1.  A current-controlled source scales it to what is wanted.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

from synth.circuit.network import ELEMENTARY_CHARGE, GROUND, ZERO_CELSIUS, Element, Network, NoiseSource
from synth.errors import CircuitError

BIAS_VOLTAGE = 0.1  # [V] low, so that the bias current depends little on a simulator's constants
SATURATION_CURRENT = 1e-6  # [A]
DIODE_CELSIUS = 27.0
DIFFERENTIATOR = 1e-12  # [F] makes a current that grows with frequency
# Boltzmann voltage at 27 degC: k T / q
THERMAL_VOLTAGE = 1.380649e-23 * (DIODE_CELSIUS + ZERO_CELSIUS) / ELEMENTARY_CHARGE
BIAS_CURRENT = SATURATION_CURRENT * math.expm1(BIAS_VOLTAGE / THERMAL_VOLTAGE)
PAIR_DENSITY = math.sqrt(4 * ELEMENTARY_CHARGE * BIAS_CURRENT)  # [A/rtHz] of two diodes' difference
LEAK = 1e-12  # [S] from nodes that only capacitors hold: without it a simulator finds no operating point for them
WIDTH = 100  # characters of a comment


def netlist_text(
    network: Network,
    title: str,
    comments: Sequence[str],
    center_frequency: float,
    points_per_decade: int = 60,
    with_noise: bool = True,
) -> str:
    """Netlist with `.ac` and `.noise` lines over f0/1000 to 1000 f0, source VSIG at node `in`, AC 1 = one input unit.

    Args:
        title: any text; it goes into a comment, cut to printable ASCII.
        comments: lines for the head, each made safe in the same way.
        center_frequency: [Hz].
        with_noise: False leaves the noise generators out, for timing the response alone.

    Raises:
        CircuitError: two names that a simulator takes for one, upper and lower case being the same to it.
    """
    _check_names(network)
    low, high = _number(center_frequency / 1000), _number(center_frequency * 1000)
    lines = ["* analog signal chain, small-signal circuit with its noise", f"* {comment_text(title)}"]
    lines += [f"* {comment_text(text)}" for text in comments]
    lines += ["", f"VSIG {network.input} 0 DC 0 AC 1"]
    lines += [_element_line(element) for element in network.elements]
    lines += [f"Gleak{k + 1} {n} 0 {n} 0 {_number(LEAK)}" for k, n in enumerate(_floating_nodes(network))]
    if with_noise and network.noise:
        lines += ["", "* noise generators", f"VNOISE nbias 0 DC {_number(BIAS_VOLTAGE)}"]
        models = {corner: f"DN{k + 1}" for k, corner in enumerate(_corners(network.noise))}
        for source in network.noise:
            lines += _generator(source, models)
        lines += [_model_line(name, corner) for corner, name in models.items()]
    sweep = f"dec {points_per_decade} {low} {high}"
    lines += ["", f".options temp={_number(network.temperature - ZERO_CELSIUS)} gmin=1e-18", f".ac {sweep}"]
    if with_noise:
        lines.append(f".noise v({network.output}) VSIG {sweep}")
    lines.append(".end")
    return "\n".join(lines) + "\n"


def comment_text(text: str) -> str:
    """Text from outside as one short line of printable ASCII, safe in a comment."""
    return "".join(c if " " <= c <= "~" else "?" for c in text)[:WIDTH]


def _check_names(network: Network) -> None:
    """Refuse nodes and elements that a simulator would join: it knows no upper case, and `gnd` is its ground."""
    generated = [f"{s.name}{end}" for s in network.noise for end in ("d1", "d2", "_r", "_rs", "_rd1", "_rd2")]
    nodes = {name.lower(): name for name in ("0", network.input)}
    nodes |= {name.lower(): f"{name} of the noise generators" for name in ("nbias", *generated)}
    nodes["gnd"] = "ground, 0"
    for node in network.unknowns:
        if nodes.setdefault(node.lower(), node) != node:
            raise CircuitError(f"node {node!r} is the same as {nodes[node.lower()]} to a simulator; rename it")
    elements: dict[str, str] = {}
    for element in network.elements:
        line = _element_line(element).split()[0]
        if elements.setdefault(line.lower(), element.name) != element.name:
            other = elements[line.lower()]
            raise CircuitError(f"{element.name} is the same as {other} to a simulator; rename one of them")


def _floating_nodes(network: Network) -> list[str]:
    """One node of each group that hangs on nothing but capacitors."""
    groups: list[set[str]] = [{GROUND, network.input}]
    for nodes in [set(e.nodes) for e in network.elements if e.kind != "capacitance"] + [{n} for n in network.unknowns]:
        touched = [group for group in groups if group & nodes]
        groups = [group for group in groups if not group & nodes] + [nodes.union(*touched)]
    return sorted(min(group) for group in groups if GROUND not in group)


def _number(value: float) -> str:
    return f"{value:.12g}"


def _name(letter: str, name: str) -> str:
    return name if name[:1].upper() == letter else f"{letter}{name}"


def _element_line(element: Element) -> str:
    a, b = element.nodes[:2]
    if element.kind == "capacitance":
        return f"{_name('C', element.name)} {a} {b} {_number(element.value)}"
    if element.kind == "transconductance":
        plus, minus = element.nodes[2:]
        return f"{_name('G', element.name)} {a} {b} {plus} {minus} {_number(element.value)}"
    if element.noisy:
        return f"{_name('R', element.name)} {a} {b} {_number(1 / element.value)}"
    return f"{_name('G', element.name)} {a} {b} {a} {b} {_number(element.value)}"


def _corners(sources: Sequence[NoiseSource]) -> list[float]:
    found = {source.corner for source in sources if source.white > 0}
    return sorted(found | ({0.0} if any(source.slope > 0 for source in sources) else set()))


def _model_line(name: str, corner: float) -> str:
    flicker = _number(2 * ELEMENTARY_CHARGE * corner)
    return f".model {name} D(IS={_number(SATURATION_CURRENT)} N=1 KF={flicker} AF=1)"


def _generator(source: NoiseSource, models: Mapping[float, str]) -> list[str]:
    """Diode pair and the controlled sources that inject its noise from node a to node b."""
    lines = []
    a, b = source.nodes
    if source.white > 0:
        lines += _pair(source.name, models[source.corner])
        gain = _number(source.white / PAIR_DENSITY)
        lines += [f"F{source.name}1 {a} {b} V{source.name}1 {gain}", f"F{source.name}2 {b} {a} V{source.name}2 {gain}"]
    if source.slope > 0:
        name = f"{source.name}_r"
        lines += _pair(name, models[0.0])
        # one volt per ampere over a noiseless conductance, then the current of a small capacitor
        lines += [
            f"F{name}1 0 {name} V{name}1 1",
            f"F{name}2 {name} 0 V{name}2 1",
            f"G{name} {name} 0 {name} 0 1",
            f"C{name} {name} {name}s {_number(DIFFERENTIATOR)}",
            f"V{name}s {name}s 0 DC 0",
            f"F{name}s {a} {b} V{name}s {_number(source.slope / (2 * math.pi * DIFFERENTIATOR * PAIR_DENSITY))}",
        ]
    return lines


def _pair(name: str, model: str) -> list[str]:
    return [
        line
        for k in (1, 2)
        for line in (
            f"V{name}{k} nbias {name}d{k} DC 0",
            f"D{name}{k} {name}d{k} 0 {model} temp={_number(DIODE_CELSIUS)}",
        )
    ]
