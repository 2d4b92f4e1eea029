"""Sections bent until the whole chain, sensor and gain stages included, has the wanted band."""

from __future__ import annotations

from collections.abc import Sequence

from synth.approximation import DEFAULT_RIPPLE, PolePair, bandpass_pairs
from synth.model.judgement import Realized
from synth.planning.amplifiers import largest_q
from synth.planning.partition import Partition
from synth.planning.workshop import BuiltChain, Workshop, build_chain
from synth.spec import Spec
from synth.verification import nominal_band

BENDS = 4
ON_TARGET = 0.25  # of the tolerance of bandwidth or centre: nearer is not tried
RIPPLE_RESERVE = 0.8  # of the ripple allowed: rounding and the sensor take the rest
MOST_RIPPLE = 1.0  # [dB] of a Chebyshev chain, however much is allowed


def proposed_ripple(spec: Spec) -> float:
    """Ripple [dB] that a Chebyshev chain is given."""
    allowed = spec.target.ripple
    return DEFAULT_RIPPLE if allowed is None else min(RIPPLE_RESERVE * allowed, MOST_RIPPLE)


def build_on_target(shop: Workshop, family: str, pairs: Sequence[PolePair], split: Partition) -> BuiltChain:
    """The chain with these sections, or with bent ones where its band is off by more than it should be.

    A sensor that falls or resonates near the band narrows and shifts it; the bandwidth and centre given to the
    family move against it.

    Raises:
        InfeasibleError: a section or a gain stage has no stocked values.
        CircuitError: the chain is no bandpass.
    """
    spec, target = shop.spec, shop.spec.target
    center, bandwidth = target.center_frequency, target.bandwidth
    made = build_chain(shop, pairs, split)
    band = nominal_band(made.chain, spec)
    for _ in range(BENDS):
        if off_target(band, spec) < ON_TARGET:
            break
        center *= target.center_frequency / band.center_frequency
        bandwidth *= target.bandwidth / band.bandwidth
        bent = bandpass_pairs(family, len(pairs), center, bandwidth, proposed_ripple(spec))
        if max(pair.q for pair in bent) > largest_q(spec):
            break
        trial = build_chain(shop, bent, split)
        moved = nominal_band(trial.chain, spec)
        if off_target(moved, spec) >= off_target(band, spec):
            break
        made, band = trial, moved
    return made


def off_target(band: Realized, spec: Spec) -> float:
    """Error of bandwidth or centre, the larger, in units of what is tolerated."""
    target = spec.target
    width = abs(band.bandwidth / target.bandwidth - 1) / target.bandwidth_tolerance
    place = abs(band.center_frequency - target.center_frequency) / (target.center_tolerance * target.bandwidth)
    return max(width, place)

