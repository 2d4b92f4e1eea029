"""The sensor as circuit: scale, rolloff and source impedance between the input node and the terminals.

Every rolloff is built from noiseless controlled sources, so that the only noise is that of the source impedance,
4 k T Re Z(f) at the terminals, or the density that the spec gives.
"""

from __future__ import annotations

import math
from collections.abc import Iterator

from synth.circuit.network import GROUND, ZERO_CELSIUS, Element, ElementKind, Network, NoiseSource
from synth.errors import CircuitError
from synth.spec import Rolloff, Sensor

TERMINAL = "sig"
UNIT = 1e-3  # [S] scale of the noiseless inside; no effect at the terminals
TINY_RESISTANCE = 1e-3  # [ohm] stands for a source with no impedance, and for the seat of a given noise

Row = tuple[str, ElementKind, tuple[str, ...], float, bool]


def first_order_corner(rolloff: Rolloff) -> float:
    """Corner [Hz] of the first-order response that loses `loss` at the frequency `at`.

    |H| = 1/sqrt(1 + (fc/f)^2) for a high-pass; the reciprocal ratio for a low-pass.
    """
    if rolloff.kind != "loss":
        if rolloff.corner is None:
            raise CircuitError(f"a rolloff of kind {rolloff.kind} has no corner")
        return rolloff.corner
    if rolloff.at is None or rolloff.loss is None:
        raise CircuitError("a rolloff of kind loss needs both `at` and `loss`")
    ratio = math.sqrt(1 / (1 - rolloff.loss) ** 2 - 1)
    return rolloff.at * ratio if rolloff.shape == "high-pass" else rolloff.at / ratio


def sensor_elements(sensor: Sensor, source: str) -> Iterator[Row]:
    """Elements of the sensor from the input node to its terminals.

    Raises:
        CircuitError: a kind of sensor or rolloff that the circuit cannot hold.
    """
    node = "sen0"
    yield "sen0_gm", "transconductance", (GROUND, node, source, GROUND), sensor.scale * UNIT, False
    yield "sen0_g", "conductance", (node, GROUND), UNIT, False
    count = 0
    for rolloff in sensor.rolloff:
        order = rolloff.order if rolloff.kind in ("high-pass", "low-pass") else 1
        for _ in range(order):
            count += 1
            previous, node = node, f"sen{count}"
            yield from _rolloff(rolloff, f"sen{count}", previous, node)
    yield from _source_impedance(sensor, node)


def _rolloff(rolloff: Rolloff, name: str, before: str, node: str) -> Iterator[Row]:
    shape = rolloff.shape if rolloff.kind == "loss" else rolloff.kind
    if shape == "resonant":
        yield from _resonance(rolloff, name, before, node)
        return
    if shape not in ("low-pass", "high-pass"):
        raise CircuitError(f"a rolloff of kind {rolloff.kind} has no circuit")
    low = node if shape == "low-pass" else f"{node}_lp"
    capacitance = UNIT / (2 * math.pi * first_order_corner(rolloff))
    yield f"{name}_gm", "transconductance", (GROUND, low, before, GROUND), UNIT, False
    yield f"{name}_g", "conductance", (low, GROUND), UNIT, False
    yield f"{name}_c", "capacitance", (low, GROUND), capacitance, False
    if shape == "high-pass":  # what the low-pass leaves
        yield f"{name}_gd", "transconductance", (GROUND, node, before, low), UNIT, False
        yield f"{name}_gh", "conductance", (node, GROUND), UNIT, False


def _resonance(rolloff: Rolloff, name: str, before: str, node: str) -> Iterator[Row]:
    """(w0/Q) s / (s^2 + (w0/Q) s + w0^2): one at the resonance."""
    if rolloff.frequency is None or rolloff.q is None:
        raise CircuitError("a rolloff of kind resonant needs both `frequency` and `q`")
    capacitance = UNIT / (2 * math.pi * rolloff.frequency)
    inner = f"{node}_i"
    yield f"{name}_gm", "transconductance", (GROUND, node, before, GROUND), UNIT / rolloff.q, False
    yield f"{name}_g", "conductance", (node, GROUND), UNIT / rolloff.q, False
    yield f"{name}_c", "capacitance", (node, GROUND), capacitance, False
    yield f"{name}_gb", "transconductance", (node, GROUND, inner, GROUND), UNIT, False
    yield f"{name}_gf", "transconductance", (GROUND, inner, node, GROUND), UNIT, False
    yield f"{name}_ci", "capacitance", (inner, GROUND), capacitance, False


def _source_impedance(sensor: Sensor, node: str) -> Iterator[Row]:
    """Norton source with the resistance; series inductance as a gyrated capacitance; parallel capacitance."""
    resistance = sensor.resistance or TINY_RESISTANCE
    own_noise = sensor.noise is None and sensor.resistance is not None
    inductive = sensor.inductance is not None
    last = "sig0" if _noise_seat(sensor) else TERMINAL
    first = "senz" if inductive else last
    yield "sen_gs", "transconductance", (GROUND, first, node, GROUND), 1 / resistance, False
    yield "R_sensor", "conductance", (first, GROUND), 1 / resistance, own_noise
    if sensor.inductance is not None:
        yield "sen_gl", "transconductance", (first, last, "senl", GROUND), UNIT, False
        yield "sen_gv", "transconductance", (GROUND, "senl", first, last), UNIT, False
        yield "sen_cl", "capacitance", ("senl", GROUND), sensor.inductance * UNIT**2, False
    if sensor.capacitance is not None:
        yield "C_sensor", "capacitance", (last, GROUND), sensor.capacitance, False
    if _noise_seat(sensor):
        yield "sen_gn", "conductance", (last, TERMINAL), 1 / TINY_RESISTANCE, False


def _noise_seat(sensor: Sensor) -> bool:
    """A given density stands at the terminals: behind a reactance it needs a seat of its own."""
    return sensor.noise is not None and (sensor.inductance is not None or sensor.capacitance is not None)


def sensor_noise(sensor: Sensor) -> tuple[NoiseSource, ...]:
    """The density that the spec gives for the terminals, as a current; nothing where it gives none."""
    if sensor.noise is None:
        return ()
    if _noise_seat(sensor):
        nodes, resistance = ("sig0", TERMINAL), TINY_RESISTANCE
    else:
        nodes, resistance = (GROUND, TERMINAL), sensor.resistance or TINY_RESISTANCE
    return (NoiseSource("sen_noise", nodes, sensor.noise / resistance, owner="sensor", label="sensor"),)


def sensor_network(sensor: Sensor, ambient: float) -> Network:
    """The sensor alone, its terminals open, at an ambient temperature [degC]."""
    elements = tuple(
        Element(name, kind, nodes, value, noisy, "sensor")
        for name, kind, nodes, value, noisy in sensor_elements(sensor, "in")
    )
    return Network("in", TERMINAL, elements, sensor_noise(sensor), (), ambient + ZERO_CELSIUS)
