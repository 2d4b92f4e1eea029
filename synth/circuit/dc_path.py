"""Every amplifier input needs a resistive path for its bias current: without one it drifts into a rail."""

from __future__ import annotations

from synth.circuit.network import GROUND
from synth.circuit.sensor import TERMINAL
from synth.model.chain import Chain
from synth.spec import Sensor


def dc_path_problem(chain: Chain) -> str:
    """What lacks a resistive path to ground or to an amplifier's output, "" if nothing does.

    Paths are the resistors of the chain, the load, and the sensor's own.
    """
    reached = {GROUND} | {part.nodes[2] for part in chain.parts if part.kind == "op-amp"}
    if sensor_conducts(chain.sensor):
        reached.add(TERMINAL)
    links = [part.nodes for part in chain.parts if part.kind == "resistor"]
    if chain.load_resistance is not None:
        links.append(("out", GROUND))
    while grown := {node for link in links if reached & set(link) for node in link} - reached:
        reached |= grown
    for part in chain.parts:
        if part.kind != "op-amp":
            continue
        for name, node in zip(("(+)", "(-)"), part.nodes[:2], strict=True):
            if node not in reached:
                return (
                    f"the {name} input of {part.ref} at node {node} has no path for its bias current; "
                    "lead a resistor from it to ground or to an amplifier's output"
                )
    return ""


def sensor_conducts(sensor: Sensor) -> bool:
    """True where the sensor passes direct current between its terminals."""
    if sensor.output == "voltage":
        return sensor.motional is None  # a resistance, an inductance or a burden; a branch holds a capacitance
    return sensor.resistance is not None
