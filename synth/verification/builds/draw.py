"""Drawn builds: every part inside its tolerance, at a temperature.

Each item has random numbers of its own, seeded by the seed, its name and the chunk, so that adding an item or asking
for more builds leaves the others as they were.  Rectangular inside the tolerance.
"""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from synth.circuit.network import FloatArray
from synth.circuit.sensor_rolloff import corner_elements
from synth.model.chain import Chain
from synth.model.part import OpAmp, Part
from synth.spec import Rolloff, Spec

CHUNK = 2500  # builds drawn and judged at once: fixed, so that sums come out the same
# half-widths that no catalog gives; uncertain, from memory: layout strays, dielectric loss, output resistance
STRAY_SPREAD, LOSS_SPREAD, OUTPUT_SPREAD, INPUT_SPREAD = 0.5, 0.5, 0.3, 0.2


@dataclass(slots=True)
class Draws:
    """One chunk of builds.

    Attributes:
        count: builds in it.
        values: drawn figures by key, as `circuit.build_values` takes them, shape (count,).
        scale: factor of the sensor's scale, shape (count,).
        causes: what was drawn, each uniform in -1..1, by the part or figure that a person knows it by.
        temperature: [degC], shape (count,).
    """

    seed: int
    chunk: int
    count: int
    values: dict[str, FloatArray] = field(default_factory=dict)
    causes: dict[str, FloatArray] = field(default_factory=dict)
    scale: FloatArray = field(default_factory=lambda: np.ones(1))
    temperature: FloatArray = field(default_factory=lambda: np.zeros(1))

    def uniform(self, item: str) -> FloatArray:
        """Numbers in -1..1 that belong to an item, remembered as a cause."""
        digest = hashlib.sha256(f"{self.seed}/{item}/{self.chunk}".encode()).digest()
        generator = np.random.Generator(np.random.PCG64(int.from_bytes(digest[:16], "big")))
        drawn: FloatArray = generator.uniform(-1.0, 1.0, CHUNK)[: self.count]
        self.causes[item] = drawn
        return drawn


def draw(chain: Chain, spec: Spec, seed: int, chunk: int, count: int) -> Draws:
    """The builds of one chunk."""
    draws = Draws(seed, chunk, count)
    limits = spec.environment.temperature or (chain.ambient, chain.ambient)
    middle, half = 0.5 * (limits[0] + limits[1]), 0.5 * (limits[1] - limits[0])
    draws.temperature = middle + half * (draws.uniform("temperature") if half > 0 else np.zeros(count))
    warmth = draws.temperature - chain.ambient
    technologies = sorted({part.technology for part in chain.parts if part.tolerance})
    common = {name: draws.uniform(f"{name}, common drift") for name in technologies}
    for part in chain.parts:
        if part.kind == "op-amp":
            _op_amp(draws, part, chain.models[str(part.value)])
        else:
            _passive(draws, part, warmth, common)
    _sensor(draws, chain, warmth)
    return draws


def _passive(draws: Draws, part: Part, warmth: FloatArray, common: Mapping[str, FloatArray]) -> None:
    value = part.number * (1 + part.tolerance * draws.uniform(part.ref))
    if np.any(warmth != 0) and part.temperature_coefficient:
        shared = part.common_share * common.get(part.technology, np.zeros(draws.count))
        own = (1 - part.common_share) * draws.uniform(f"{part.ref} drift")
        value = value * (1 + part.temperature_coefficient * (shared + own) * warmth)
    draws.values[part.ref] = value
    if part.stray > 0:
        draws.values[f"{part.ref}.stray"] = part.stray * (1 + STRAY_SPREAD * draws.uniform(f"{part.ref} stray"))
    if part.loss_tangent > 0:
        loss = part.loss_tangent * (1 + LOSS_SPREAD * draws.uniform(f"{part.ref} loss"))
        draws.values[f"{part.ref}.loss_tangent"] = loss


def _op_amp(draws: Draws, part: Part, model: OpAmp) -> None:
    spreads = {
        "gain_bandwidth": model.gain_bandwidth_spread,
        "dc_gain": model.dc_gain_spread,
        "output_resistance": OUTPUT_SPREAD,
        "input_capacitance_differential": INPUT_SPREAD,
        "input_capacitance_common": INPUT_SPREAD,
        "stray_output_to_inverting": STRAY_SPREAD,
        "stray_inverting_to_ground": STRAY_SPREAD,
    }
    for name, spread in spreads.items():
        item = f"{part.ref} {name.replace('_', ' ')}"
        draws.values[f"{part.ref}.{name}"] = getattr(model, name) * (1 + spread * draws.uniform(item))


def _sensor(draws: Draws, chain: Chain, warmth: FloatArray) -> None:
    sensor = chain.sensor
    scale = np.ones(draws.count)
    if sensor.scale_tolerance:
        scale = scale * (1 + sensor.scale_tolerance * draws.uniform("sensor scale"))
    if sensor.scale_temperature_coefficient:
        scale = scale * (1 + sensor.scale_temperature_coefficient * warmth)
    draws.scale = scale
    for number, (rolloff, names) in enumerate(corner_elements(sensor.rolloff), start=1):
        if rolloff.tolerance and rolloff.kind != "table":
            factor = _corner_factor(rolloff, draws.uniform(f"sensor rolloff {number}"))
            draws.values.update({f"sensor.{name}": 1 / factor for name in names})


def _corner_factor(rolloff: Rolloff, drawn: FloatArray) -> FloatArray:
    """Corner over its nominal value; the tolerance of a loss is that of the loss itself."""
    spread = 1 + (rolloff.tolerance or 0.0) * drawn
    if rolloff.kind != "loss":
        return spread
    assert rolloff.loss is not None
    nominal, moved = (np.sqrt(1 / (1 - np.asarray(x)) ** 2 - 1) for x in (rolloff.loss, rolloff.loss * spread))
    return np.asarray(moved / nominal if rolloff.shape == "high-pass" else nominal / moved)
