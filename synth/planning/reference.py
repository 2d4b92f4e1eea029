"""The mid-rail reference of a single supply: the simplest that costs the chain's gain less than its share."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import replace

from synth import circuit
from synth.errors import InfeasibleError
from synth.model.chain import Chain
from synth.model.part import OpAmp
from synth.planning.amplifiers import DEFAULT_ACCURACY, suits_sections
from synth.quantity import format_si
from synth.rounding import chain_gain
from synth.spec import Spec
from synth.topology.place import Draft, Reference, Stocks, Surroundings, place
from synth.topology.reference import BUFFERED, DIVIDER, FOLLOWER
from synth.verification import MARGIN_SPAN, PHASE_MARGIN

SHARE = 0.1  # of the accuracy, that the reference may take
DIVIDER_RESISTANCE = 10e3  # [ohm] each half
ISOLATION = 10.0  # [ohm] keeps a follower stable into its decoupling
BARE = (10e3, 10e-6)  # the divider and decoupling that are shown for comparison
MOST_REFERENCES = 3
LARGE_CHANGE = 0.2  # of gain: shown in dB from here on


def choose_references(
    spec: Spec, drafts: Sequence[Draft], op_amps: tuple[OpAmp, ...], stocks: Stocks, around: Surroundings
) -> tuple[Reference, ...]:
    """The simplest reference whose loop costs less than its share, tried on the exact circuit.

    A bare divider first, then a follower with its own decoupling, then separate followers for early and late stages.

    Raises:
        InfeasibleError: none stays inside the share.
    """
    accuracy = spec.target.accuracy if spec.target.accuracy is not None else DEFAULT_ACCURACY
    ideal = chain_gain(place(drafts, stocks, around))
    best = math.inf
    shaky: tuple[Reference, ...] = ()
    for references in _options(spec, drafts, op_amps, stocks):
        ratio, stable = _effect(replace(around, references=references), drafts, stocks, ideal)
        if stable and abs(ratio - 1) <= SHARE * accuracy:
            if _follows(replace(around, references=references), drafts, stocks):
                return references
            shaky = shaky or references
        best = min(best, abs(ratio - 1)) if stable else best
    if shaky:
        return shaky  # the judge says what margin is missing
    found = "none of them is stable" if math.isinf(best) else f"the best costs {100 * best:.2g} % of gain"
    raise InfeasibleError(
        f"{spec.source}: supply.negative left out: no mid-rail reference keeps its loop within "
        f"{100 * SHARE * accuracy:.2g} %, {found}; give a dual supply, less gain or a looser target.accuracy"
    )


def _options(
    spec: Spec, drafts: Sequence[Draft], op_amps: tuple[OpAmp, ...], stocks: Stocks
) -> Iterator[tuple[Reference, ...]]:
    values = stocks.coupling.values
    yield (_divider(stocks, float(values[-1])),)
    followers = [a for a in op_amps if suits_sections(a)]
    if not followers:
        return
    center = spec.target.center_frequency
    fast = [a for a in followers if a.gain_bandwidth >= 10 * center] or followers
    frugal = min(fast, key=lambda a: (a.supply_current, a.type))
    used = {draft.op_amp.type for draft in drafts if draft.op_amp is not None}
    low = min(fast, key=lambda a: (a.type not in used, a.output_resistance / a.gain_bandwidth, a.type))
    for count in range(1, MOST_REFERENCES + 1):
        yield (_buffered(stocks, frugal, float(values[-1])),) * count
        yield (_follower(stocks, low, float(values[-1])),) * count


def _divider(stocks: Stocks, capacitance: float) -> Reference:
    each = _stocked(stocks, DIVIDER_RESISTANCE)
    return Reference(DIVIDER, None, {"RT": each, "RB": each, "CD": capacitance})


def _buffered(stocks: Stocks, follower: OpAmp, capacitance: float) -> Reference:
    each, isolation = _stocked(stocks, DIVIDER_RESISTANCE), _stocked(stocks, ISOLATION)
    values = {"RT": each, "RB": each, "CD": capacitance, "RO": isolation, "CO": capacitance}
    return Reference(BUFFERED, follower, values)


def _follower(stocks: Stocks, op_amp: OpAmp, capacitance: float) -> Reference:
    each = _stocked(stocks, DIVIDER_RESISTANCE)
    return Reference(FOLLOWER, op_amp, {"RT": each, "RB": each, "CD": capacitance})


def _stocked(stocks: Stocks, value: float) -> float:
    return float(min(stocks.resistors.values, key=lambda v: (abs(math.log(v / value)), v)))


def _effect(around: Surroundings, drafts: Sequence[Draft], stocks: Stocks, ideal: float) -> tuple[float, bool]:
    """Gain at the centre with the references over the ideal one, and whether the whole is stable with them."""
    chain: Chain = place(drafts, stocks, around)
    stable = circuit.is_stable(
        circuit.poles(circuit.build_network(chain), chain.center_frequency), chain.center_frequency
    )
    return chain_gain(chain) / ideal, stable


def _follows(around: Surroundings, drafts: Sequence[Draft], stocks: Stocks) -> bool:
    """Whether the followers of the references keep their phase margin."""
    chain = place(drafts, stocks, around)
    refs = {ref for stage in chain.stages if stage.kind == "reference" for ref in stage.parts}
    low, high = (chain.center_frequency * span for span in MARGIN_SPAN)
    margins = circuit.phase_margins(circuit.build_network(chain), low, high)
    return all(margin.phase_margin >= PHASE_MARGIN for margin in margins if margin.ref in refs)


def reference_caution(drafts: Sequence[Draft], stocks: Stocks, around: Surroundings) -> str:
    """What a chain's references do to its gain at the centre and what a bare divider would do, in words."""
    references = around.references
    ideal = chain_gain(place(drafts, stocks, replace(around, references=())))
    ratio, _ = _effect(around, drafts, stocks, ideal)
    bare_ratio, stable = _effect(replace(around, references=(_divider(stocks, BARE[1]),)), drafts, stocks, ideal)
    kind = references[0].topology.title
    if len(references) > 1:
        kind = f"{len(references)} separate references, each a {kind}"
    bare = f"{format_si(BARE[0], 'ohm')}/{format_si(BARE[1], 'F')} divider"
    effect = f"would change it by {_change(bare_ratio)}{'' if stable else ' and make the chain oscillate'}"
    return f"mid-rail: {kind}, changes the gain at the centre by {_change(ratio)}; a bare {bare} {effect}"


def _change(ratio: float) -> str:
    """A change of gain, in percent while small, in dB where not."""
    if abs(ratio - 1) < LARGE_CHANGE:
        return f"{100 * (ratio - 1):+.2g} %"
    return f"{20 * math.log10(ratio):+.3g} dB"
