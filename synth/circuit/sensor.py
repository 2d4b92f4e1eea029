"""The sensor as circuit: scale, rolloff and source between the input node and the terminals.

What `scale` means, per input unit and before the rolloff:

    voltage             open-circuit voltage [V]; behind a series inductance with a capacitance across the terminals,
                        well below their resonance
    transformer         voltage across the burden [V] well above the corner R/(2 pi L) of burden and magnetizing
                        inductance, whose high-pass follows from the circuit and must not be given again as a rolloff
    motional branch     voltage of the source inside the branch [V]: what drives the element mechanically.  The
                        terminals, open, show it divided by the branch's impedance and the shunt capacitance: nearly
                        all of it at series resonance, the share Cm/(Cm + C) well below, more near the parallel
                        resonance
    current             short-circuit current [A]
    charge              short-circuit charge [C]; the current into the terminals is its derivative

Every rolloff is built from noiseless controlled sources, so that the only noise is that of the source impedance,
4 k T Re Z(f) at the terminals, or the density that the spec gives.
"""

from __future__ import annotations

import math
from collections.abc import Iterator

from synth.circuit.network import BOLTZMANN, GROUND, ZERO_CELSIUS, Element, Network, NoiseSource
from synth.circuit.sensor_rolloff import UNIT, Row, first_order_corner, rolloff_elements
from synth.circuit.sensor_source import (
    TERMINAL,
    TINY_RESISTANCE,
    check_source,
    source_elements,
    source_noise_sources,
)
from synth.spec import Sensor


def sensor_elements(sensor: Sensor, source: str) -> Iterator[Row]:
    """Elements of the sensor from the input node to its terminals.

    Raises:
        CircuitError: a kind of sensor or rolloff that the circuit cannot hold.
    """
    rows, node = _scaled_rolloff(sensor, source)
    yield from rows
    yield from source_elements(sensor, node)


def _scaled_rolloff(sensor: Sensor, source: str) -> tuple[tuple[Row, ...], str]:
    """Scale times rolloff [V, A or C per input unit], and the node where it stands."""
    node = "sen0"
    scale: tuple[Row, ...] = (
        ("sen0_gm", "transconductance", (GROUND, node, source, GROUND), sensor.scale * UNIT, False),
        ("sen0_g", "conductance", (node, GROUND), UNIT, False),
    )
    rows, last = rolloff_elements(sensor.rolloff, node)
    return (*scale, *rows), last


def sensor_noise(sensor: Sensor) -> tuple[NoiseSource, ...]:
    """The density that the spec gives for the terminals, as a current; nothing where it gives none."""
    return source_noise_sources(sensor)


def sensor_network(sensor: Sensor, ambient: float) -> Network:
    """The sensor alone at an ambient temperature [degC]: its output and the noise of it.

    The output node carries the open-circuit voltage [V], or a voltage that is the short-circuit current [A] or the
    short-circuit charge [C] in number.
    """
    if sensor.output == "voltage":
        return terminal_network(sensor, ambient)
    check_source(sensor)
    rows, node = _scaled_rolloff(sensor, "in")
    out = "sen_out"
    readout: list[Row] = [
        ("sen_go", "transconductance", (GROUND, out, node, GROUND), UNIT, False),
        ("sen_gr", "conductance", (out, GROUND), UNIT, False),
    ]
    noise: tuple[NoiseSource, ...] = ()
    if sensor.noise is not None:
        noise = (NoiseSource("sen_noise", (GROUND, out), sensor.noise * UNIT, owner="sensor", label="sensor"),)
    elif sensor.resistance is not None:
        density = math.sqrt(4 * BOLTZMANN * _kelvin(ambient) / sensor.resistance)
        into = out
        if sensor.output == "charge":  # a charge is the integral of the current
            into = "sen_n"
            readout += [
                ("sen_cn", "capacitance", (into, GROUND), UNIT, False),
                ("sen_gn", "transconductance", (GROUND, out, into, GROUND), UNIT, False),
            ]
        noise = (NoiseSource("sen_noise", (GROUND, into), density * UNIT, owner="sensor", label="sensor"),)
    return Network("in", out, _elements((*rows, *readout)), noise, (), _kelvin(ambient))


def terminal_network(sensor: Sensor, ambient: float) -> Network:
    """The sensor alone, its terminals open, at an ambient temperature [degC]; the output is their voltage."""
    elements = _elements(sensor_elements(sensor, "in"))
    return Network("in", TERMINAL, elements, sensor_noise(sensor), (), _kelvin(ambient))


def _elements(rows: Iterator[Row] | tuple[Row, ...]) -> tuple[Element, ...]:
    return tuple(Element(name, kind, nodes, value, noisy, "sensor") for name, kind, nodes, value, noisy in rows)


def _kelvin(celsius: float) -> float:
    return celsius + ZERO_CELSIUS


__all__ = [
    "TERMINAL",
    "TINY_RESISTANCE",
    "UNIT",
    "first_order_corner",
    "sensor_elements",
    "sensor_network",
    "sensor_noise",
    "terminal_network",
]
