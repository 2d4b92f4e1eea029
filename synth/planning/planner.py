"""The planner: families and orders by rising effort, each built on the stocked grid and judged on the exact circuit."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace

from synth.approximation import FAMILIES, PolePair, bandpass_pairs
from synth.errors import CircuitError, InfeasibleError
from synth.model.chain import Chain
from synth.model.judgement import Requirement, Verification
from synth.model.part import OpAmp
from synth.model.record import Candidate
from synth.planning.amplifiers import largest_q
from synth.planning.bend import build_on_target, proposed_ripple
from synth.planning.bounds import check_source_noise, check_supported, sensor_gain, usable_op_amps
from synth.planning.front import choose_front
from synth.planning.partition import Partition, partitions
from synth.planning.remedies import remedies
from synth.planning.safe import at_least
from synth.planning.workshop import Workshop
from synth.quantity import format_si
from synth.spec import Spec
from synth.topology.place import Stocks
from synth.verification import relative_margin, verify

MOST_SECTIONS = 6
KIND_LETTERS = {"gain": "G", "pre-emphasis": "P", "bandpass": "B"}
QUICK_BUILDS = 2500  # drawn for each candidate
WORTHWHILE = 0.01  # of yield, that two more sections should bring
SPLIT_CURES = {
    *("signal to noise", "phase margin", "input range", "output swing", "slew rate", "output current", "slowest decay")
}
MOST_SPLITS = 5  # of the gain, tried for one proposal
MOST_FAILED = 6  # builds that fail before one succeeds: no more are tried
MOST_JUDGED = 10  # candidates built in full before the best of them is taken


@dataclass(frozen=True, slots=True)
class Plan:
    """The chain that was chosen, its verdict, and what else was considered."""

    chain: Chain
    verification: Verification
    family: str
    order: int
    candidates: tuple[Candidate, ...]
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class _Proposal:
    family: str
    pairs: tuple[PolePair, ...]


@dataclass(frozen=True, slots=True)
class _Built:
    proposal: _Proposal
    chain: Chain
    verdict: Verification
    notes: tuple[str, ...]

    def missed(self) -> set[str]:
        return {r.name for r in self.verdict.requirements if r.met is False}

    @property
    def share(self) -> float:
        """Share of builds that meet everything counted, 1 where none were drawn."""
        return self.verdict.builds.share if self.verdict.builds is not None else 1.0

    def worst(self) -> float:
        missed = [relative_margin(r) for r in self.verdict.requirements if r.met is False]
        return min(missed, default=0.0)


def plan(spec: Spec, op_amps: tuple[OpAmp, ...], stocks: Stocks, builds: int = 0, seed: int = 0) -> Plan:
    """The chain of least order that meets every judged requirement, or the one that misses least.

    Args:
        builds: how many builds to draw for the chain chosen, 0 for none; candidates get a few of them.
        seed: of the draws.

    Raises:
        InfeasibleError: no chain can be built; says which requirement binds and the nearest value that works.
    """
    check_supported(spec)
    usable = usable_op_amps(spec, op_amps)
    check_source_noise(spec)
    attenuation = sensor_gain(spec)
    gain = spec.overall_gain / spec.sensor.scale / attenuation
    front = choose_front(spec, usable, stocks, gain)
    splits = partitions(spec, usable, gain if front is None else gain / front.gain, attenuation)
    search = _Search(Workshop(spec, usable, stocks, attenuation, front), splits, min(builds, QUICK_BUILDS), seed)
    for proposal in _proposals(spec, search.spreads_more):
        search.attempt(proposal)
        if search.is_over():
            break
    if not search.built:
        raise search.failure or _no_proposal(spec, search.lost)
    chosen = _choose(search.built, search.lost)
    notes = chosen.notes
    verdict = verify(chosen.chain, spec, builds, seed, layout=True)
    notes = (*remedies(chosen.chain, spec, verdict, seed), *notes)
    return replace(chosen, verification=replace(verdict, cautions=(*notes, *verdict.cautions)))


@dataclass(slots=True)
class _Search:
    """Chains built and judged so far, and proposals that fell before."""

    shop: Workshop
    splits: tuple[Partition, ...]
    builds: int
    seed: int
    built: list[_Built] = field(default_factory=list)
    lost: list[Candidate] = field(default_factory=list)
    failure: InfeasibleError | None = None
    failed: int = 0

    def attempt(self, proposal: _Proposal) -> None:
        """Build and judge a proposal; other splits of the gain only where another amplifier or count may cure it."""
        screened = _screen(self.shop.spec, proposal)
        if screened is not None:
            self.lost.append(screened)
            return
        for split in self.splits[:MOST_SPLITS]:
            try:
                made = build_on_target(self.shop, proposal.family, proposal.pairs, split)
                verdict = verify(made.chain, self.shop.spec, self.builds, self.seed)
            except (InfeasibleError, CircuitError) as error:
                refusal = error if isinstance(error, InfeasibleError) else InfeasibleError(str(error))
                self.failure = self.failure or refusal
                self.failed += 1
                self.lost.append(Candidate(_describe(proposal, None), False, "cannot be built", str(error)))
                continue
            self.built.append(_Built(proposal, made.chain, verdict, made.notes))
            if not self.built[-1].missed() & SPLIT_CURES or len(self.built) >= MOST_JUDGED:
                return

    def spreads_more(self, _family: str, count: int) -> bool:
        """Of an order whose gentler family misses by its yield alone, a family of higher Q spreads more."""
        return any(b.missed() == {"yield"} for b in self.built if len(b.proposal.pairs) == count)

    def is_over(self) -> bool:
        """All is met, enough was judged, or more sections would not raise the yield that alone is missed."""
        if not self.built:
            return self.failed >= MOST_FAILED
        last = self.built[-1]
        if last.verdict.all_met or len(self.built) >= MOST_JUDGED:
            return True
        shares = [b.share for b in self.built if b.proposal.family == last.proposal.family and b.missed() == {"yield"}]
        return last.missed() == {"yield"} and len(shares) > 2 and max(shares[-2:]) < max(shares[:-2]) + WORTHWHILE


def _choose(built: list[_Built], lost: list[Candidate]) -> Plan:
    order = sorted(
        range(len(built)), key=lambda k: (-round(built[k].worst(), 9), len(built[k].proposal.pairs), k)
    )
    chosen = built[order[0]]
    others = [_candidate(built[k], False) for k in range(len(built)) if k != order[0]]
    candidates = (_candidate(chosen, True), *others, *lost)
    family, count = chosen.proposal.family, len(chosen.proposal.pairs)
    return Plan(chosen.chain, chosen.verdict, family, count, candidates, chosen.notes)


def _candidate(entry: _Built, chosen: bool) -> Candidate:
    missed = [r for r in entry.verdict.requirements if r.met is False]
    description = _describe(entry.proposal, entry.chain)
    if not missed:
        return Candidate(description, chosen)
    # builds of a chain that misses by itself say no more
    worst = min([r for r in missed if r.name != "yield"] or missed, key=relative_margin)
    return Candidate(description, chosen, worst.name, _margin_text(worst))


def _margin_text(requirement: Requirement) -> str:
    return format_si(requirement.margin or 0.0, requirement.unit, 3)


def _describe(proposal: _Proposal, chain: Chain | None) -> str:
    text = f"{proposal.family} x{len(proposal.pairs)}, Q {max(p.q for p in proposal.pairs):.3g}"
    if chain is None:
        return text
    signal = [stage for stage in chain.stages if stage.kind != "reference"]
    return f"{text}: " + ", ".join(f"{KIND_LETTERS[s.kind]} {s.op_amp}" for s in signal)


def _proposals(spec: Spec, skips: Callable[[str, int], bool] = lambda _family, _count: False) -> Iterator[_Proposal]:
    """Families and orders, least order and gentlest family first; what the spec insists on is kept.

    Args:
        skips: whether to leave out a family at an order, asked before its poles are computed.
    """
    target = spec.target
    families = (spec.filter.family,) if spec.filter.family is not None else FAMILIES
    counts = (spec.filter.sections,) if spec.filter.sections is not None else range(1, MOST_SECTIONS + 1)
    for count in counts:
        for family in families:
            if (count == 1 and family != families[0]) or skips(family, count):
                continue  # one section is the same in every family
            pairs = bandpass_pairs(family, count, target.center_frequency, target.bandwidth, proposed_ripple(spec))
            yield _Proposal(family, pairs)


def _screen(spec: Spec, proposal: _Proposal) -> Candidate | None:
    """A proposal that cannot do, and why: a Q beyond the topology, or rejects that even ideal sections miss."""
    q = max(pair.q for pair in proposal.pairs)
    limit = largest_q(spec)
    if q > limit:
        return Candidate(_describe(proposal, None), False, "section Q", f"{limit - q:.3g}")
    for reject in spec.target.reject:
        short = ideal_rejection(proposal.pairs, spec.target.center_frequency, reject.frequency) - reject.by
        if short < -6.0:  # the sensor's own rolloff may still help by a few dB; the judge decides
            return Candidate(
                _describe(proposal, None), False, f"reject {format_si(reject.frequency, 'Hz')}", f"{short:.3g} dB"
            )
    return None


def ideal_rejection(pairs: tuple[PolePair, ...], center: float, frequency: float) -> float:
    """Gain of ideal sections at the centre over that at a frequency [dB]."""

    def gain_db(f: float) -> float:
        return sum(-10 * math.log10(1 + (p.q * (f / p.frequency - p.frequency / f)) ** 2) for p in pairs)

    return gain_db(center) - gain_db(frequency)


def _highest_q(proposal: _Proposal) -> float:
    return max(pair.q for pair in proposal.pairs)


def _narrowest(spec: Spec, proposal: _Proposal, limit: float) -> float:
    """The bandwidth [Hz] at which a proposal's family and order need no more than a Q."""
    insisted = replace(spec.filter, family=proposal.family, sections=len(proposal.pairs))
    bandwidth, most = spec.target.bandwidth, 2 * spec.target.center_frequency
    while _highest_q(proposal) > limit and bandwidth < most:
        bandwidth = min(at_least(1.0002 * bandwidth * _highest_q(proposal) / limit), most)
        wider = replace(spec, filter=insisted, target=replace(spec.target, bandwidth=bandwidth))
        proposal = next(_proposals(wider))
    return bandwidth


def _no_proposal(spec: Spec, lost: list[Candidate]) -> InfeasibleError:
    """Nothing passed the screen: the Q or a reject binds, with the nearest value that would work."""
    steep = [c for c in lost if c.lost_on.startswith("reject")]
    limit = largest_q(spec)
    if not steep:
        gentlest = min(_proposals(spec), key=_highest_q)
        q = _highest_q(gentlest)
        return InfeasibleError(
            f"{spec.source}: target.bandwidth of {format_si(spec.target.bandwidth, 'Hz')} needs sections of Q {q:.3g}, "
            f"beyond the {limit:g} that a section reaches; the narrowest that works is "
            f"{format_si(_narrowest(spec, gentlest, limit), 'Hz')}"
        )
    reject = next(r for r in spec.target.reject if f"reject {format_si(r.frequency, 'Hz')}" == steep[-1].lost_on)
    reachable = max(
        (
            ideal_rejection(p.pairs, spec.target.center_frequency, reject.frequency)
            for p in _proposals(spec)
            if max(pair.q for pair in p.pairs) <= limit
        ),
        default=0.0,
    )
    count = spec.filter.sections or MOST_SECTIONS
    return InfeasibleError(
        f"{spec.source}: target.reject of {reject.by:.4g} dB at {format_si(reject.frequency, 'Hz')} is beyond "
        f"{count} sections of Q {limit:g}; the most that works is {reachable:.3g} dB, or narrow the bandwidth"
    )
