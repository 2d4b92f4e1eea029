"""From stages on paper to a chain of parts: references, nodes, and what the stock says of each value."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace

from synth.circuit import OUTPUT, TERMINAL
from synth.model.chain import Chain, Stage, StageTarget
from synth.model.part import GROUND, OpAmp, Part
from synth.parts.passives import CapacitorStock, CouplingStock, ResistorStock
from synth.spec import Sensor
from synth.topology.base import Slot, Topology
from synth.topology.reference import REFERENCE, SUPPLY


@dataclass(frozen=True, slots=True)
class Stocks:
    """Where values come from."""

    resistors: ResistorStock
    capacitors: CapacitorStock
    coupling: CouplingStock


@dataclass(frozen=True, slots=True)
class Draft:
    """A stage on paper: topology, target, its amplifiers' type (None: it has none), passive values by slot."""

    topology: Topology
    target: StageTarget
    op_amp: OpAmp | None
    values: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Reference:
    """The mid-rail of a single supply on paper; `op_amp` None where it has no follower."""

    topology: Topology
    op_amp: OpAmp | None
    values: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Surroundings:
    """What the chain stands between.

    Attributes:
        center_frequency: [Hz]; ambient: [degC].
        sensor: as asked.
        load_resistance: [ohm] or None; load_capacitance: [F].
        isolation: [ohm] between the last amplifier and a load with capacitance, None for none.
        references: mid-rails of a single supply, the stages shared out among them in order; () on a dual supply.
    """

    center_frequency: float
    ambient: float
    sensor: Sensor
    load_resistance: float | None
    load_capacitance: float
    references: tuple[Reference, ...] = ()
    isolation: float | None = None


def place(drafts: Sequence[Draft], stocks: Stocks, around: Surroundings) -> Chain:
    """The chain of parts: references first, stages in order, designators counted along it, the last output `out`."""
    builder = _Builder(stocks, around, _amplifiers(drafts, around.references))
    share = max(1, math.ceil(len(drafts) / max(1, len(around.references))))
    for k, reference in enumerate(around.references):
        op_amp = reference.op_amp.type if reference.op_amp else ""
        draft = Draft(reference.topology, StageTarget(0.0), reference.op_amp, reference.values)
        builder.add(draft, op_amp, "0", _reference_node(k), GROUND)
    node = TERMINAL
    for k, draft in enumerate(drafts):
        assert draft.op_amp is not None
        last = k == len(drafts) - 1
        following = OUTPUT if last and around.isolation is None else f"n{k + 1}"
        ground = _reference_node(k // share) if around.references else GROUND
        builder.add(draft, draft.op_amp.type, node, following, ground)
        node = following
    if around.isolation is not None:
        builder.isolate(node, around.isolation)
    op_amps = [d.op_amp for d in drafts] + [r.op_amp for r in around.references]
    models = {op_amp.type: op_amp for op_amp in op_amps if op_amp is not None}
    return Chain(
        around.center_frequency,
        around.ambient,
        around.sensor,
        around.load_resistance,
        around.load_capacitance,
        tuple(builder.stages),
        tuple(builder.parts),
        dict(sorted(models.items())),
    )


def _reference_node(number: int) -> str:
    return REFERENCE if number == 0 else f"{REFERENCE}{number + 1}"


def _amplifiers(drafts: Sequence[Draft], references: Sequence[Reference]) -> Iterator[str]:
    """Designators of all op amps, in the order in which the stages are placed."""
    placed = [(r.topology, r.op_amp) for r in references] + [(d.topology, d.op_amp) for d in drafts]
    each = [
        op_amp for topology, op_amp in placed for slot in topology.slots if slot.kind == "op-amp" and op_amp is not None
    ]
    return iter(amplifier_references(each))


ISOLATION = Slot("RI", "resistor", "isolates the load's capacitance", ("out", "load"))


@dataclass(slots=True)
class _Builder:
    """Counts designators and collects parts and stages."""

    stocks: Stocks
    around: Surroundings
    amplifiers: Iterator[str]
    parts: list[Part] = field(default_factory=list)
    stages: list[Stage] = field(default_factory=list)
    counts: dict[str, int] = field(default_factory=dict)

    def count(self, what: str) -> int:
        self.counts[what] = self.counts.get(what, 0) + 1
        return self.counts[what]

    def isolate(self, node: str, resistance: float) -> None:
        """A resistor from the last stage's amplifier to the output, one of that stage's parts."""
        stage = self.stages[-1]
        ref = f"R{self.count('resistor')}"
        center = self.around.center_frequency
        self.parts.append(_passive(ref, stage.name, ISOLATION, (node, OUTPUT), resistance, self.stocks, center))
        self.stages[-1] = replace(stage, parts=(*stage.parts, ref))

    def add(self, draft: Draft, op_amp: str, before: str, after: str, ground: str) -> None:
        kind = draft.topology.kind
        name = f"{kind} {self.count(kind)}"
        local = {"in": before, "out": after, "0": ground, "gnd": GROUND, SUPPLY: SUPPLY}
        prefix = f"s{len(self.stages) + 1}"
        refs = []
        for slot in draft.topology.slots:
            nodes = tuple(local.get(node, prefix + node) for node in slot.nodes)
            if slot.kind == "op-amp":
                assert draft.op_amp is not None
                part = _op_amp(next(self.amplifiers), name, slot, nodes, draft.op_amp)
            else:
                ref = f"{'R' if slot.kind == 'resistor' else 'C'}{self.count(slot.kind)}"
                value = draft.values[slot.key]
                part = _passive(ref, name, slot, nodes, value, self.stocks, self.around.center_frequency)
            self.parts.append(part)
            refs.append(part.ref)
        self.stages.append(
            Stage(name, kind, draft.topology.name, draft.target, op_amp, before, after, tuple(refs))
        )


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
            common_share=stock.temperature_coefficient_common_share,
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
        common_share=source.temperature_coefficient_common_share,
        loss_tangent=source.loss_tangent_at(center),
        size=source.size_for(value),
        rating=source.rating,
    )
