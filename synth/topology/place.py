"""From stages on paper to a chain of parts: references, nodes, and what the stock says of each value."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from synth.circuit import OUTPUT, TERMINAL
from synth.model.chain import Chain, Stage, StageTarget
from synth.model.part import GROUND, OpAmp, Part
from synth.parts.passives import CapacitorStock, CouplingStock, ResistorStock
from synth.spec import Sensor
from synth.topology.base import Slot, Topology


@dataclass(frozen=True, slots=True)
class Stocks:
    """Where values come from."""

    resistors: ResistorStock
    capacitors: CapacitorStock
    coupling: CouplingStock


@dataclass(frozen=True, slots=True)
class Draft:
    """A stage on paper: its topology, what is asked of it, its amplifiers' type and the value of each passive slot."""

    topology: Topology
    target: StageTarget
    op_amp: OpAmp
    values: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Surroundings:
    """What the chain stands between."""

    center_frequency: float
    ambient: float
    sensor: Sensor
    load_resistance: float | None
    load_capacitance: float


def place(drafts: Sequence[Draft], stocks: Stocks, around: Surroundings) -> Chain:
    """The chain of parts: stages in order, references counted along it, the last output named `out`."""
    amplifiers = iter(
        amplifier_references([d.op_amp for d in drafts for slot in d.topology.slots if slot.kind == "op-amp"])
    )
    counts = {"resistor": 0, "capacitor": 0, "gain": 0, "bandpass": 0}
    parts: list[Part] = []
    stages: list[Stage] = []
    node = TERMINAL
    for k, draft in enumerate(drafts):
        kind = draft.topology.kind
        counts[kind] += 1
        name = f"{kind} {counts[kind]}"
        following = OUTPUT if k == len(drafts) - 1 else f"n{k + 1}"
        refs = []
        for slot in draft.topology.slots:
            nodes = tuple(_node(local, node, following, k + 1) for local in slot.nodes)
            if slot.kind == "op-amp":
                part = _op_amp(next(amplifiers), name, slot, nodes, draft.op_amp)
            else:
                counts[slot.kind] += 1
                ref = f"{'R' if slot.kind == 'resistor' else 'C'}{counts[slot.kind]}"
                part = _passive(ref, name, slot, nodes, draft.values[slot.key], stocks, around.center_frequency)
            parts.append(part)
            refs.append(part.ref)
        stages.append(
            Stage(name, kind, draft.topology.name, draft.target, draft.op_amp.type, node, following, tuple(refs))
        )
        node = following
    models = {draft.op_amp.type: draft.op_amp for draft in drafts}
    return Chain(
        around.center_frequency,
        around.ambient,
        around.sensor,
        around.load_resistance,
        around.load_capacitance,
        tuple(stages),
        tuple(parts),
        dict(sorted(models.items())),
    )


def _node(local: str, before: str, after: str, number: int) -> str:
    return {"in": before, "out": after, GROUND: GROUND}.get(local, f"s{number}{local}")


def amplifier_references(op_amps: Sequence[OpAmp]) -> tuple[str, ...]:
    """References along the chain: singles where the type is sold so, else the halves of as few packages as do.

    Example:
        a dual-only type three times gives U1A, U1B, U2A.
    """
    refs: list[str] = []
    package = 0
    open_package: dict[str, tuple[int, int]] = {}  # type -> (package number, units used)
    for op_amp in op_amps:
        units = op_amp.packages[0][0]
        if units == 1:
            package += 1
            refs.append(f"U{package}")
            continue
        number, used = open_package.get(op_amp.type, (0, units))
        if used == units:
            package += 1
            number, used = package, 0
        refs.append(f"U{number}{'ABCD'[used]}")
        open_package[op_amp.type] = (number, used + 1)
    return tuple(refs)


def _op_amp(ref: str, stage: str, slot: Slot, nodes: tuple[str, ...], op_amp: OpAmp) -> Part:
    return Part(ref, "op-amp", slot.role, stage, nodes, op_amp.type, technology=op_amp.technology)


def _passive(
    ref: str, stage: str, slot: Slot, nodes: tuple[str, ...], value: float, stocks: Stocks, center: float
) -> Part:
    if slot.kind == "resistor":
        stock = stocks.resistors
        return Part(
            ref,
            "resistor",
            slot.role,
            stage,
            nodes,
            value,
            stock.tolerance,
            stock.temperature_coefficient_for(value),
            stock.technology,
            stray=stock.stray_capacitance,
            size=stock.size,
            rating=stock.rating,
        )
    source = stocks.capacitors if slot.sets_frequency else stocks.coupling.stock_for(value)
    return Part(
        ref,
        "capacitor",
        slot.role,
        stage,
        nodes,
        value,
        source.tolerance,
        source.temperature_coefficient,
        source.dielectric,
        loss_tangent=source.loss_tangent_at(center),
        size=source.size_for(value),
        rating=source.rating,
    )
