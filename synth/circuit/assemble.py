"""From a chain to its circuit: sensor, every part with its strays, every amplifier's model, the load.

One walk over the chain gives both the nominal circuit and the values of many builds at once: a drawn figure is an
array where the nominal one is a number, and the same arithmetic serves both.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np

from synth.circuit.network import (
    GROUND,
    ZERO_CELSIUS,
    Amplifier,
    Element,
    ElementKind,
    FloatArray,
    Network,
    NoiseSource,
)
from synth.circuit.sensor import TERMINAL, sensor_elements, sensor_noise
from synth.model.chain import Chain
from synth.model.part import OpAmp, Part

INPUT, OUTPUT = "in", "out"
SUPPLY = "vcc"  # held by an ideal supply: ground to the signal
INPUT_TRANSCONDUCTANCE = 1e-3  # [S] scale of the amplifier model's inside; no effect at its terminals
Drawn = Mapping[str, FloatArray]


@dataclass(frozen=True, slots=True)
class Placed:
    """An element before its value is known to be a number or an array over builds."""

    name: str
    kind: ElementKind
    nodes: tuple[str, ...]
    value: float | FloatArray
    noisy: bool = False
    owner: str = ""


def build_network(chain: Chain) -> Network:
    """The nominal circuit of a chain."""
    elements = tuple(
        Element(p.name, p.kind, p.nodes, float(p.value), p.noisy, p.owner) for p in _walk(chain, {})
    )
    noise = sensor_noise(chain.sensor)
    amplifiers = []
    for part in chain.parts:
        if part.kind == "op-amp":
            noise += _op_amp_noise(part, chain.models[str(part.value)])
            amplifiers.append(Amplifier(part.ref, f"{part.ref}_gm", part.nodes[2]))
    return Network(INPUT, OUTPUT, elements, noise, tuple(amplifiers), chain.ambient + ZERO_CELSIUS)


def build_values(chain: Chain, drawn: Drawn) -> FloatArray:
    """Element values of many builds, shape (elements, builds), in the order of `build_network(chain).elements`.

    Args:
        drawn: arrays of shape (builds,) by key: a part reference ("R3", in ohm or farad), or a reference and a
            figure of it ("U1.gain_bandwidth", "R3.stray", "C1.loss_tangent"), or "sensor." and an element of the
            sensor, by which its value is multiplied; what is not drawn is nominal.
    """
    values = [np.asarray(p.value, dtype=float) for p in _walk(chain, drawn)]
    count = max((v.size for v in values), default=1)
    return np.stack([np.broadcast_to(v, (count,)) for v in values])


def _walk(chain: Chain, drawn: Drawn) -> Iterator[Placed]:
    for name, kind, nodes, value, noisy in sensor_elements(chain.sensor, INPUT):
        yield Placed(name, kind, nodes, value * drawn.get(f"sensor.{name}", 1.0), noisy, "sensor")
    omega = 2 * np.pi * chain.center_frequency
    for part in map(_at_signal_ground, chain.parts):
        if part.kind == "resistor":
            yield from _resistor(part, drawn)
        elif part.kind == "capacitor":
            yield from _capacitor(part, drawn, omega)
        else:
            yield from _op_amp(part, chain.models[str(part.value)], drawn)
    if chain.load_resistance is not None:
        yield Placed("R_load", "conductance", (OUTPUT, GROUND), 1 / chain.load_resistance, True, "load")
    if chain.load_capacitance > 0:
        yield Placed("C_load", "capacitance", (OUTPUT, GROUND), chain.load_capacitance, False, "load")


def _at_signal_ground(part: Part) -> Part:
    """The part with the supply node taken as ground."""
    if SUPPLY not in part.nodes:
        return part
    return replace(part, nodes=tuple(GROUND if node == SUPPLY else node for node in part.nodes))


def _resistor(part: Part, drawn: Drawn) -> Iterator[Placed]:
    value = drawn.get(part.ref, part.number)
    yield Placed(part.ref, "conductance", part.nodes, 1 / value, True, part.ref)
    if part.stray > 0:
        stray = drawn.get(f"{part.ref}.stray", part.stray)
        yield Placed(f"C_{part.ref}_stray", "capacitance", part.nodes, stray, False, part.ref)


def _capacitor(part: Part, drawn: Drawn, omega: float) -> Iterator[Placed]:
    """A capacitor with its loss as the series resistance tan d / (omega C) at the chain's centre."""
    value = drawn.get(part.ref, part.number)
    if part.loss_tangent <= 0:
        yield Placed(part.ref, "capacitance", part.nodes, value, False, part.ref)
        return
    inner = f"{part.ref}_x"
    yield Placed(part.ref, "capacitance", (part.nodes[0], inner), value, False, part.ref)
    series = omega * value / drawn.get(f"{part.ref}.loss_tangent", part.loss_tangent)
    yield Placed(f"R_{part.ref}_loss", "conductance", (inner, part.nodes[1]), series, True, part.ref)


def _op_amp(part: Part, model: OpAmp, drawn: Drawn) -> Iterator[Placed]:
    """Transconductance into R0 parallel C0, optional second pole, Norton output, input capacitances, strays.

    The loop gain at low frequency is the DC gain A0, not GBW/f: A(s) = A0 / (1 + s A0/(2 pi GBW)) / (1 + s/w2).
    """
    plus, minus, out = part.nodes
    ref, gm, inner = part.ref, INPUT_TRANSCONDUCTANCE, f"{part.ref}_p"

    def figure(name: str) -> float | FloatArray:
        nominal: float = getattr(model, name)
        return drawn.get(f"{ref}.{name}", nominal)

    def placed(suffix: str, kind: ElementKind, nodes: tuple[str, ...], value: float | FloatArray) -> Placed:
        return Placed(f"{ref}_{suffix}", kind, nodes, value, False, ref)

    yield placed("gm", "transconductance", (GROUND, inner, plus, minus), gm)
    yield placed("g0", "conductance", (inner, GROUND), gm / figure("dc_gain"))
    yield placed("c0", "capacitance", (inner, GROUND), gm / (2 * np.pi * figure("gain_bandwidth")))
    if model.second_pole is not None:
        second = f"{ref}_q"
        yield placed("gm2", "transconductance", (GROUND, second, inner, GROUND), gm)
        yield placed("g2", "conductance", (second, GROUND), gm)
        yield placed("c2", "capacitance", (second, GROUND), gm / (2 * np.pi * figure("second_pole")))
        inner = second
    yield placed("gmo", "transconductance", (GROUND, out, inner, GROUND), 1 / figure("output_resistance"))
    yield placed("go", "conductance", (out, GROUND), 1 / figure("output_resistance"))
    differential, common = figure("input_capacitance_differential"), figure("input_capacitance_common")
    to_ground = common + figure("stray_inverting_to_ground")
    if plus != GROUND:
        yield placed("cdiff", "capacitance", (plus, minus), differential)
        yield placed("cplus", "capacitance", (plus, GROUND), common)
    else:
        to_ground = to_ground + differential
    if minus != out:
        yield placed("cminus", "capacitance", (minus, GROUND), to_ground)
        yield placed("cstray", "capacitance", (out, minus), figure("stray_output_to_inverting"))


def _op_amp_noise(part: Part, model: OpAmp) -> tuple[NoiseSource, ...]:
    """Voltage noise as a current into the gain node, and the two uncorrelated input currents."""
    plus, minus, _ = part.nodes
    ref, gm = part.ref, INPUT_TRANSCONDUCTANCE
    voltage = NoiseSource(
        f"{ref}_en",
        (GROUND, f"{ref}_p"),
        gm * model.voltage_noise,
        model.voltage_noise_corner,
        owner=ref,
        label=f"{ref} voltage noise",
    )
    currents = tuple(
        NoiseSource(
            f"{ref}_{name}",
            (GROUND, node),
            model.current_noise,
            model.current_noise_corner,
            model.current_noise_slope,
            ref,
            f"{ref} current noise",
        )
        for name, node in (("ip", plus), ("in", minus))
        if node != GROUND
    )
    return (voltage, *currents)


__all__ = ["INPUT", "OUTPUT", "TERMINAL", "Drawn", "build_network", "build_values"]
