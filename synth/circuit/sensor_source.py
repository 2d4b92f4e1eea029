"""What stands between a sensor's rolloff and its terminals: the source and its impedance.

Voltage: a source behind a resistance, or a transformer's secondary, or a motional branch; an inductance in series, a
capacitance across the terminals.  Current and charge: a source across the terminals, a resistance and a capacitance
beside it.  Thermal noise comes from the resistances alone and so is 4 k T Re Z(f) by itself (H. Nyquist, Phys. Rev.
32 (1928) 110); a density that the spec gives takes its place.
"""

from __future__ import annotations

import math
from collections.abc import Iterator

from synth.circuit.network import GROUND, ElementKind, NoiseSource
from synth.circuit.sensor_rolloff import UNIT, Row
from synth.errors import CircuitError
from synth.spec import Sensor

TERMINAL = "sig"
TINY_RESISTANCE = 1e-3  # [ohm] stands for a source with no impedance, and for the seat of a given noise
SECOND = 1.0  # [s] time constant of the differentiator: a volt at its input is an ampere second

_FOREIGN = ("inductance", "burden", "magnetizing_inductance", "motional")  # to a source of current or charge


def check_source(sensor: Sensor) -> None:
    """Refuse a source that has no circuit.

    Raises:
        CircuitError: names the key, and what to give instead.
    """
    if sensor.output != "voltage":
        for key in _FOREIGN:
            if getattr(sensor, key) is not None:
                raise CircuitError(
                    f'sensor.{key} does not belong to a source of {sensor.output}; give its resistance and '
                    'capacitance, or output = "voltage"'
                )
    if sensor.motional is not None and sensor.inductance is not None:
        raise CircuitError("sensor.inductance has no place beside sensor.motional; add it to motional.inductance")
    if sensor.burden is not None and sensor.magnetizing_inductance is None:
        raise CircuitError("sensor.burden needs sensor.magnetizing_inductance beside it; add it")


def source_elements(sensor: Sensor, node: str) -> Iterator[Row]:
    """Elements from the node where scale times rolloff stands [V, A or C per input unit] to the terminals.

    Raises:
        CircuitError: a source that has no circuit.
    """
    check_source(sensor)
    if sensor.output == "voltage":
        yield from _voltage(sensor, node)
        return
    if sensor.output == "current":
        yield "sen_gs", "transconductance", (GROUND, TERMINAL, node, GROUND), 1.0, False
    else:
        yield from _charge(node)
    if sensor.resistance is not None:
        yield "R_sensor", "conductance", (TERMINAL, GROUND), 1 / sensor.resistance, sensor.noise is None
    if sensor.capacitance is not None:
        yield "C_sensor", "capacitance", (TERMINAL, GROUND), sensor.capacitance, False


def _charge(node: str) -> Iterator[Row]:
    """The current dq/dt into the terminals, exactly.

    Row `sen_d` of the nodal equations has no element but UNIT (v(node) - v(sen_q)), so v(sen_q) is the charge;
    row `sen_q` says C s v(sen_q) = UNIT v(sen_d): v(sen_d) is the charge's derivative.
    """
    yield "sen_gd", "transconductance", (GROUND, "sen_d", node, "sen_q"), UNIT, False
    yield "sen_gq", "transconductance", (GROUND, "sen_q", "sen_d", GROUND), UNIT, False
    yield "sen_cq", "capacitance", ("sen_q", GROUND), UNIT * SECOND, False
    yield "sen_gs", "transconductance", (GROUND, TERMINAL, "sen_d", GROUND), 1 / SECOND, False


def _voltage(sensor: Sensor, node: str) -> Iterator[Row]:
    """The branch, series inductance as a gyrated capacitance, parallel capacitance, and a seat for a given noise."""
    last = "sig0" if noise_seat(sensor) else TERMINAL
    first = "senz" if sensor.inductance is not None else last
    if sensor.motional is not None:
        yield from _motional(sensor, node, first)
    elif sensor.burden is not None:
        yield from _transformer(sensor, node, first)
    else:
        resistance = sensor.resistance or TINY_RESISTANCE
        own_noise = sensor.noise is None and sensor.resistance is not None
        yield from _norton(node, first, resistance, own_noise)
    if sensor.inductance is not None:
        yield from _inductor(("sen_gl", "sen_gv", "sen_cl"), (first, last, "senl"), sensor.inductance, UNIT)
    if sensor.capacitance is not None:
        yield "C_sensor", "capacitance", (last, GROUND), sensor.capacitance, False
    if noise_seat(sensor):
        yield "sen_gn", "conductance", (last, TERMINAL), 1 / TINY_RESISTANCE, False


def _norton(node: str, at: str, resistance: float, noisy: bool) -> Iterator[Row]:
    """The voltage of `node` behind a resistance."""
    yield "sen_gs", "transconductance", (GROUND, at, node, GROUND), 1 / resistance, False
    yield "R_sensor", "conductance", (at, GROUND), 1 / resistance, noisy


def _transformer(sensor: Sensor, node: str, at: str) -> Iterator[Row]:
    """The secondary's current into burden parallel magnetizing inductance: a high-pass at R/(2 pi L) by itself."""
    assert sensor.burden is not None
    assert sensor.magnetizing_inductance is not None
    yield from _norton(node, at, sensor.burden, sensor.noise is None)
    names = ("sen_gml", "sen_gmv", "sen_cm")
    yield from _inductor(names, (at, GROUND, "senm"), sensor.magnetizing_inductance, UNIT)


def _motional(sensor: Sensor, node: str, at: str) -> Iterator[Row]:
    """The source's voltage behind motional resistance, inductance and capacitance in series."""
    assert sensor.motional is not None
    motional = sensor.motional
    yield from _norton(node, "sens1", motional.resistance, sensor.noise is None)
    gyration = 1 / motional.resistance  # keeps the inductance's rows at the level of the resistance
    yield from _inductor(("sen_gml", "sen_gmv", "sen_cm"), ("sens1", "sens2", "senm"), motional.inductance, gyration)
    yield "C_motional", "capacitance", ("sens2", at), motional.capacitance, False


def _inductor(
    names: tuple[str, str, str], nodes: tuple[str, str, str], inductance: float, gyration: float
) -> Iterator[Row]:
    """Inductance between two nodes: a capacitance L g^2 at the third, behind two transconductances g."""
    a, b, inner = nodes
    transconductance: ElementKind = "transconductance"
    yield names[0], transconductance, (a, b, inner, GROUND), gyration, False
    yield names[1], transconductance, (GROUND, inner, a, b), gyration, False
    yield names[2], "capacitance", (inner, GROUND), inductance * gyration**2, False


def noise_seat(sensor: Sensor) -> bool:
    """A given voltage density stands at the terminals: behind a reactance it needs a seat of its own."""
    reactive = (sensor.inductance, sensor.capacitance, sensor.burden, sensor.motional)
    return sensor.output == "voltage" and sensor.noise is not None and any(x is not None for x in reactive)


def source_noise_sources(sensor: Sensor) -> tuple[NoiseSource, ...]:
    """The density that the spec gives for the terminals, as a current; nothing where it gives none.

    A charge of constant density is a current that grows with frequency, 2 pi f times it.
    """
    if sensor.noise is None:
        return ()
    if sensor.output == "current":
        return (_noise((GROUND, TERMINAL), sensor.noise),)
    if sensor.output == "charge":
        return (_noise((GROUND, TERMINAL), 0.0, 2 * math.pi * sensor.noise),)
    if noise_seat(sensor):
        return (_noise(("sig0", TERMINAL), sensor.noise / TINY_RESISTANCE),)
    return (_noise((GROUND, TERMINAL), sensor.noise / (sensor.resistance or TINY_RESISTANCE)),)


def _noise(nodes: tuple[str, str], white: float, slope: float = 0.0) -> NoiseSource:
    return NoiseSource("sen_noise", nodes, white, slope=slope, owner="sensor", label="sensor")
