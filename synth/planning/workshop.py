"""Builds one proposed chain on the stocked grid: sections, gain stages, their order, the gain trimmed."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace

from synth import circuit
from synth.approximation import PolePair
from synth.circuit.dc_path import dc_path_problem
from synth.errors import InfeasibleError
from synth.model.chain import Chain, StageTarget
from synth.model.part import OpAmp
from synth.planning.amplifiers import SectionCircuit, choose_section_circuits
from synth.planning.emphasis import Emphasis, emphasis_notes, make_emphasis
from synth.planning.front import Front
from synth.planning.partition import Partition, orders
from synth.planning.reference import choose_references, reference_caution
from synth.planning.source import insertion_note, stage_source
from synth.rounding import Section, damped, gain_draft, round_section, trim_chain
from synth.spec import Sensor, Spec
from synth.topology.place import Draft, Stocks, Surroundings, place
from synth.verification import MARGIN_SPAN, PHASE_MARGIN
from synth.verification.headroom import excursions, output_noise

MOST_CIRCUITS = 6  # tried for a section before the one of the best phase margin is taken
ISOLATED_CAPACITANCE = 10e-12  # [F] of a load: from here on a resistor stands before it
ISOLATION, LIGHT_LOAD = 100.0, 5e3  # [ohm], half of it before a heavier load; common practice, no source
TRIM_ROOM = 1.05  # what the gain's trim may still move


@dataclass(frozen=True, slots=True)
class Workshop:
    """What every proposal of one spec is built from; remembers the sections and shelves it has rounded."""

    spec: Spec
    op_amps: tuple[OpAmp, ...]
    stocks: Stocks
    attenuation: float
    front: Front | None
    rounded: dict[tuple[str, str, StageTarget], Section] = field(default_factory=dict)
    margins: dict[tuple[str, str, StageTarget], float] = field(default_factory=dict)
    emphases: dict[Partition, Emphasis] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class BuiltChain:
    """A chain and what its making has to say to the person."""

    chain: Chain
    notes: tuple[str, ...] = ()


def surroundings(spec: Spec, stocks: Stocks) -> Surroundings:
    """What a chain for the spec stands between; a load with capacitance is isolated from the last amplifier."""
    target, capacitance = spec.target, spec.target.load_capacitance or 0.0
    isolation = None
    if capacitance >= ISOLATED_CAPACITANCE:
        light = target.load is None or target.load >= LIGHT_LOAD
        wanted, values = ISOLATION if light else ISOLATION / 2, stocks.resistors.values
        isolation = float(min(values, key=lambda v: (abs(math.log(v / wanted)), v)))
    return Surroundings(
        target.center_frequency,
        spec.environment.ambient,
        spec.sensor,
        target.load,
        capacitance,
        isolation=isolation,
    )


def build_chain(shop: Workshop, pairs: Sequence[PolePair], split: Partition) -> BuiltChain:
    """Stages on the stocked grid, in the first order whose amplifiers carry all voltages, the gain trimmed.

    Raises:
        InfeasibleError: a section or a gain stage has no stocked values.
    """
    emphasis = _emphasis(shop, split)
    sections = _sections(shop, pairs, emphasis.split.section_gain)
    gains = _gains(shop, emphasis)
    front = () if shop.front is None else (shop.front.draft,)
    around = surroundings(shop.spec, shop.stocks)
    best: tuple[float, tuple[Draft, ...]] | None = None
    for order in orders(len(gains), len(sections)):
        drafts = (*front, *_in_order(order, gains, [section.draft for section in sections]))
        reserve = _reserve(place(drafts, shop.stocks, around), shop.spec)
        if best is None or reserve > best[0] + 1e-9:
            best = (reserve, drafts)
        if reserve >= TRIM_ROOM:
            break
    assert best is not None
    places = [k for k, draft in enumerate(best[1]) if draft.topology.kind == "bandpass"]
    variants = {k: section.variants for k, section in zip(places, sections, strict=True)}
    if emphasis.shelf is not None and len(gains) == 1:  # no plain gain stage to trim
        variants[[draft.topology.kind for draft in best[1]].index("pre-emphasis")] = emphasis.shelf.variants
    notes: tuple[str, ...] = ()
    if shop.spec.supply.negative is None:
        references = choose_references(shop.spec, best[1], shop.op_amps, shop.stocks, around)
        around = replace(around, references=references)
    trimmed = trim_chain(best[1], variants, shop.stocks, around, shop.spec.overall_gain)
    if around.references:
        notes = (reference_caution(trimmed, shop.stocks, around),)
    notes = (*notes, insertion_note(shop.spec), *emphasis_notes(emphasis, trimmed, shop.stocks, around))
    chain = place(trimmed, shop.stocks, around)
    if problem := dc_path_problem(chain):
        raise InfeasibleError(f"{shop.spec.source}: no DC path for an input's bias current: {problem}")
    return BuiltChain(chain, tuple(note for note in notes if note))


def _emphasis(shop: Workshop, split: Partition) -> Emphasis:
    if split not in shop.emphases:
        shop.emphases[split] = make_emphasis(shop.spec, shop.op_amps, shop.stocks, split, shop.attenuation)
    return shop.emphases[split]


def _sections(shop: Workshop, pairs: Sequence[PolePair], section_gain: float) -> tuple[Section, ...]:
    """The sections rounded, in the first circuit and amplifier whose loops keep their phase margin."""
    target = [StageTarget(section_gain ** (1 / len(pairs)), 1.0, pair.frequency, pair.q) for pair in pairs]
    hardest = max(range(len(pairs)), key=lambda k: pairs[k].q)
    best: tuple[float, SectionCircuit] | None = None
    failure: InfeasibleError | None = None
    for chosen in choose_section_circuits(shop.spec, shop.op_amps, pairs[hardest].q)[:MOST_CIRCUITS]:
        try:
            margin = _margin(shop, _rounded(shop, chosen, target[hardest]))
        except InfeasibleError as error:
            failure = failure or error
            continue
        if best is None or margin > best[0] + 1e-9:
            best = (margin, chosen)
        if margin >= PHASE_MARGIN:
            break
    if best is None:
        assert failure is not None
        raise failure
    return tuple(_rounded(shop, best[1], each) for each in target)


def _rounded(shop: Workshop, chosen: SectionCircuit, target: StageTarget) -> Section:
    key = (chosen.topology.name, chosen.op_amp.type, target)
    if key not in shop.rounded:
        center, ambient = shop.spec.target.center_frequency, shop.spec.environment.ambient
        shop.rounded[key] = round_section(target, chosen.op_amp, shop.stocks, center, ambient, chosen.topology)
    return shop.rounded[key]


def _margin(shop: Workshop, section: Section) -> float:
    """Worst phase margin [degree] of a section's amplifiers, between an ideal source and nothing."""
    draft = section.draft
    assert draft.op_amp is not None
    key = (draft.topology.name, draft.op_amp.type, draft.target)
    if key not in shop.margins:
        center = shop.spec.target.center_frequency
        source = Surroundings(center, shop.spec.environment.ambient, Sensor(1.0, "V"), None, 0.0)
        network = circuit.build_network(place([draft], shop.stocks, source))
        found = circuit.phase_margins(network, center * MARGIN_SPAN[0], center * MARGIN_SPAN[1])
        shop.margins[key] = min(margin.phase_margin for margin in found)
    return shop.margins[key]


def _gains(shop: Workshop, emphasis: Emphasis) -> tuple[Draft, ...]:
    """Gain stages; the last carries the factor that makes good the sensor's loss, the reciprocal of what is left.

    It is a shelf where a flat factor does not do.
    """
    spec, split = shop.spec, emphasis.split
    drafts = []
    for k, (gain, op_amp) in enumerate(zip(split.gains, split.op_amps, strict=True)):
        last = k == len(split.gains) - 1
        source = stage_source(spec) if k == 0 else 0.0
        center, ambient = spec.target.center_frequency, spec.environment.ambient
        if last and emphasis.shelf is not None:
            draft = emphasis.shelf.draft
        else:
            target = StageTarget(gain, emphasis.factor if last else 1.0)
            draft = gain_draft(target, op_amp, shop.stocks, center, ambient, source)
        if k == 0 and spec.sensor.inductance is not None and shop.front is None:
            draft = damped(draft, spec.sensor.inductance, shop.stocks)
        drafts.append(draft)
    return tuple(drafts)


def _in_order(order: Sequence[str], gains: Sequence[Draft], sections: Sequence[Draft]) -> tuple[Draft, ...]:
    waiting: Mapping[str, Iterator[Draft]] = {"gain": iter(gains), "bandpass": iter(sections)}
    return tuple(next(waiting[kind]) for kind in order)


def _reserve(chain: Chain, spec: Spec) -> float:
    """Smallest ratio of what an amplifier can carry to what it must, over swing, slew and input range."""
    network = circuit.build_network(chain)
    found = excursions(chain, network, spec, output_noise(chain, network))
    return 1 / max(max(e.swing_use, e.slew_use, e.input_use, e.current_use) for e in found)
