"""Gain partition: how many gain stages, how much gain each, and where they stand among the sections."""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from synth.errors import InfeasibleError
from synth.model.part import OpAmp
from synth.planning.amplifiers import Fit, gain_candidates
from synth.planning.safe import at_most
from synth.planning.source import own_noise, stage_source
from synth.quantity import format_si
from synth.spec import Spec

MOST_GAIN_STAGES = 5
RESERVE_DB = 2.0  # of noise, for all that stands behind the first amplifier
ALTERNATIVES = 3  # amplifiers beside the quietest, for each count
LOW_GAIN = 2.0  # a chain that needs less than this takes it back in its sections


@dataclass(frozen=True, slots=True)
class Partition:
    """Gain stages in order with their amplifiers, and the gain left to the bandpass sections together."""

    gains: tuple[float, ...]
    op_amps: tuple[OpAmp, ...]
    section_gain: float


def partitions(spec: Spec, op_amps: tuple[OpAmp, ...], gain: float, attenuation: float) -> tuple[Partition, ...]:
    """Equal gain stages, fewest first; the quietest amplifier that carries each count stands in every stage.

    After them the same counts with the next amplifiers, for a chain that the first ones fail.

    A count whose first amplifier alone is too noisy for the spec is left out, as long as any count is not.

    Raises:
        InfeasibleError: no amplifier can be given gain here, or the gain is more than five stages carry.
    """
    source = stage_source(spec)
    first = gain_candidates(spec, op_amps, source)
    if not first:
        raise InfeasibleError(
            f"{spec.source}: no amplifier allowed has gain to spare at "
            f"{format_si(spec.target.center_frequency, 'Hz')}; allow a faster type in parts.op_amps, or lower "
            "target.center_frequency"
        )
    if gain < LOW_GAIN:
        return (Partition((LOW_GAIN,), (_carrying(first, LOW_GAIN, spec).op_amp,), gain / LOW_GAIN),)
    allowed = noise_allowance(spec, attenuation, first[0].noise)
    found: list[tuple[float, Partition]] = []
    others: list[tuple[float, Partition]] = []
    for count in range(1, MOST_GAIN_STAGES + 1):
        each = gain ** (1 / count)
        fitting = [fit for fit in first if fit.op_amp.minimum_noise_gain <= each <= fit.largest_gain]
        splits = [(fit.noise, Partition((each,) * count, (fit.op_amp,) * count, 1.0)) for fit in fitting]
        found += splits[:1]
        others += splits[1 : 1 + ALTERNATIVES]
    if not found:
        most = max(fit.largest_gain for fit in first) ** MOST_GAIN_STAGES
        raise InfeasibleError(_too_much_gain(spec, gain, most))
    quiet = tuple(split for noise, split in (*found, *others) if noise <= allowed)
    return quiet or (min(found, key=lambda row: row[0])[1],)


def _too_much_gain(spec: Spec, gain: float, most: float) -> str:
    """The message where a voltage gain is more than the most that all gain stages carry."""
    if spec.target.output is not None:
        key, asked = "output", f"{format_si(spec.target.output, 'V')} rms"
        works = f"{format_si(at_most(spec.target.output * most / gain), 'V')} rms"
    else:
        decibels = 20 * math.log10(spec.target.gain or 1.0)
        key, asked = "gain", f"{decibels:.4g} dB"
        works = f"{at_most(decibels + 20 * math.log10(most / gain)):g} dB"
    return (
        f"{spec.source}: target.{key} of {asked} needs {20 * math.log10(gain):.3g} dB of voltage gain, more than "
        f"{MOST_GAIN_STAGES} stages carry; the largest {key} that works is {works}"
    )


def noise_allowance(spec: Spec, attenuation: float, quietest: float) -> float:
    """Density [V/rtHz] that the first amplifier may have at its input.

    What the signal-to-noise ratio leaves after the source's own noise, less a reserve for the rest of the chain;
    where the spec asks none, or a first stage stands before, twice the quietest amplifier's.
    """
    asked = spec.target.signal_to_noise
    if asked is None or spec.sensor.output != "voltage":
        return 2 * quietest
    signal = spec.target.smallest * spec.sensor.scale * attenuation
    total = signal / 10 ** ((asked + RESERVE_DB) / 20) / math.sqrt(spec.target.bandwidth)
    return math.sqrt(max(total**2 - own_noise(spec) ** 2, quietest**2))


def _carrying(fits: Sequence[Fit], gain: float, spec: Spec) -> Fit:
    for fit in fits:
        if fit.op_amp.minimum_noise_gain <= gain <= fit.largest_gain:
            return fit
    raise InfeasibleError(
        f"{spec.source}: no amplifier allowed is stable at a gain of {gain:g}; allow a unity-gain-stable type in "
        "parts.op_amps, or raise target.output"
    )


def orders(gain_stages: int, sections: int) -> Iterator[tuple[str, ...]]:
    """Every order of gain stages and sections, most gain first: noise is best there, overload worst."""
    count = gain_stages + sections
    for places in itertools.combinations(range(count), gain_stages):
        yield tuple("gain" if k in places else "bandpass" for k in range(count))
