"""Which amplifier for which stage, by figures that need no circuit."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from synth.errors import InfeasibleError
from synth.model.part import OpAmp
from synth.parts.op_amps import phase_margin
from synth.quantity import format_si
from synth.rounding.gain import BIAS_RANGE, DC_SHARE, SOURCE_RATIO
from synth.spec import Spec
from synth.topology import SECTIONS, SectionTopology, non_inverting

ACCURACY_SHARE = 0.2  # of the accuracy, that the gain-bandwidth spread of one gain stage may take
DEFAULT_ACCURACY = 0.03  # where the spec asks none
NOISE_SLACK = 1.15  # a noise within this ratio of the best is as good
GAIN_CEILING = 300.0  # of one stage: beyond it layout decides
SLEW_RESERVE = 0.5  # of the slew rate, for the signal
SMALLEST_STAGE_GAIN = 1.5
USUAL_CAPACITANCE = 4.7e-10  # [F] the impedance level that a section's noise is guessed at
SCORE_GRADES = (0.4, 1.0)  # effects of amplifier spreads, in units of what is tolerated
USUAL_TOLERANCE = 0.01  # of resistors, where the spec names none
SECTION_MARGIN = 47.0  # [degree] that a section's amplifier should keep
UNITY_MARGIN = 50.0  # [degree] of phase at unity gain, that a section's amplifier should have
LARGEST_SHIFT, LARGEST_LOSS = 0.12, 0.3  # of a section's frequency and Q by its amplifier: beyond it, no design


@dataclass(frozen=True, slots=True)
class Fit:
    """An amplifier for a gain stage with the most gain it may be given, and its noise there [V/rtHz, at its input]."""

    op_amp: OpAmp
    largest_gain: float
    noise: float


@dataclass(frozen=True, slots=True)
class SectionCircuit:
    """A section's circuit and the amplifier type for it."""

    topology: SectionTopology
    op_amp: OpAmp


def gain_candidates(spec: Spec, op_amps: tuple[OpAmp, ...], source_resistance: float) -> tuple[Fit, ...]:
    """Amplifiers for a gain stage, quietest first, those within `NOISE_SLACK` by supply current.

    The largest gain keeps the change by the spread of the gain-bandwidth product inside its share of the accuracy,
    and leaves bias current a path to ground large against the source.
    """
    center = spec.target.center_frequency
    accuracy = spec.target.accuracy if spec.target.accuracy is not None else DEFAULT_ACCURACY
    fits = []
    for op_amp in op_amps:
        spread = op_amp.gain_bandwidth_spread
        gain = non_inverting.largest_gain(
            center, op_amp.gain_bandwidth, op_amp.dc_gain, spread, ACCURACY_SHARE * accuracy
        )
        bias_path = max(BIAS_RANGE[0], SOURCE_RATIO * source_resistance)
        gain = min(gain, GAIN_CEILING, DC_SHARE / (op_amp.bias_current * bias_path))
        if gain >= max(SMALLEST_STAGE_GAIN, op_amp.minimum_noise_gain):
            fits.append(Fit(op_amp, gain, input_noise(op_amp, center, source_resistance)))
    if not fits:
        return ()
    best = min(fit.noise for fit in fits)

    def key(fit: Fit) -> tuple[int, float, str]:
        slack_steps = math.floor(math.log(fit.noise / best) / math.log(NOISE_SLACK) + 1e-9)
        return slack_steps, fit.op_amp.supply_current, fit.op_amp.type

    return tuple(sorted(fits, key=key))


def input_noise(op_amp: OpAmp, frequency: float, source_resistance: float) -> float:
    """Density of an amplifier's own noise at its input [V/rtHz]: en^2 + (in Rs)^2 at a frequency."""
    voltage = op_amp.voltage_noise**2 * (1 + op_amp.voltage_noise_corner / frequency)
    current = op_amp.current_noise**2 * (1 + op_amp.current_noise_corner / frequency)
    current += (op_amp.current_noise_slope * frequency) ** 2
    return math.sqrt(voltage + current * source_resistance**2)


def section_circuits(
    spec: Spec, op_amps: tuple[OpAmp, ...], q: float, topologies: Iterable[SectionTopology]
) -> tuple[SectionCircuit, ...]:
    """Circuits and amplifiers for a section of some Q, best first: by how much amplifier spreads move its pole pair.

    Finite gain-bandwidth and DC gain move frequency and Q; the spread of each counts, in units of what centre and
    bandwidth tolerate, graded by `SCORE_GRADES`; an amplifier whose loop would be short of phase comes last.  Within
    a grade fewer amplifiers win, then fewer parts, then the
    smaller effect in steps of 1.5, once below a tenth of the tolerance the quieter, then the lower current.
    """
    ranked = []
    for topology in topologies:
        if q > topology.largest_q:
            continue
        for op_amp in op_amps:
            score = _spread_score(spec, op_amp, q, topology)
            if score is not None:
                noise = section_noise(op_amp, spec.target.center_frequency, q, topology)
                shaky = section_margin(op_amp, topology) < SECTION_MARGIN
                grade = sum(score > limit for limit in SCORE_GRADES)
                effort = (topology.amplifiers, len(topology.slots))
                key = (shaky, grade, *effort, _steps(max(score, 0.1) / 0.1), _steps(noise / 1e-9))
                ranked.append(((*key, op_amp.supply_current, op_amp.type, topology.name), topology, op_amp))
    return tuple(SectionCircuit(row[1], row[2]) for row in sorted(ranked, key=lambda row: row[0]))


def _spread_score(spec: Spec, op_amp: OpAmp, q: float, topology: SectionTopology) -> float | None:
    """Worst effect of the amplifier's spreads over what is tolerated; None where the amplifier cannot do it."""
    if op_amp.minimum_noise_gain > 1:
        return None
    center = spec.target.center_frequency
    shift, stretch = (abs(x) for x in topology.shift(q, center / op_amp.gain_bandwidth))
    loss = abs(topology.loss(q, op_amp.dc_gain))
    if max(shift, stretch) > LARGEST_SHIFT or loss > LARGEST_LOSS:
        return None
    moved = shift * op_amp.gain_bandwidth_spread * center / (spec.target.center_tolerance * spec.target.bandwidth)
    tolerance = spec.parts.resistors.tolerance or USUAL_TOLERANCE
    widened = loss * op_amp.dc_gain_spread + stretch * op_amp.gain_bandwidth_spread
    widened += 2 * topology.q_spread(q) * tolerance
    return max(moved, widened / spec.target.bandwidth_tolerance)


def _steps(ratio: float) -> int:
    """A ratio in steps of 1.5, so that near misses compare as equal."""
    return round(math.log(ratio) / math.log(1.5))


def section_noise(op_amp: OpAmp, frequency: float, q: float, topology: SectionTopology) -> float:
    """Amplifier noise of a section, referred to its output at unity gain and divided by 2 Q [V/rtHz].

    Voltage noise meets the circuit's noise gain, current noise the resistors of the usual impedance level.
    """
    reactance = 1 / (2 * math.pi * frequency * USUAL_CAPACITANCE)
    return input_noise(op_amp, frequency, reactance) * topology.noise_gain(q) / (2 * q)


def suits_sections(op_amp: OpAmp) -> bool:
    """Stable at unity gain: the loops of a section are closed by capacitors at high frequency."""
    margin = phase_margin(op_amp.gain_bandwidth, op_amp.dc_gain, op_amp.second_pole, 1.0)
    return op_amp.minimum_noise_gain <= 1 and margin >= UNITY_MARGIN


def section_margin(op_amp: OpAmp, topology: SectionTopology) -> float:
    """Phase margin [degree] that an amplifier would have in a section, by the circuit's fitted loss."""
    own = phase_margin(op_amp.gain_bandwidth, op_amp.dc_gain, op_amp.second_pole, 1.0)
    capacitance = op_amp.input_capacitance
    fixed, each = topology.margin_loss
    return own - fixed - each * op_amp.gain_bandwidth * 1e-6 * capacitance * 1e12


def choose_section_circuits(spec: Spec, op_amps: tuple[OpAmp, ...], q: float) -> tuple[SectionCircuit, ...]:
    """`section_circuits` over the circuit that the spec insists on or all.

    Raises:
        InfeasibleError: none is fast enough; names the bandwidth that would do.
    """
    topologies = allowed_topologies(spec)
    found = section_circuits(spec, op_amps, q, topologies)
    if found:
        return found
    stable = [a for a in op_amps if suits_sections(a)]
    if not stable:
        raise InfeasibleError(
            f"{spec.source}: parts.op_amps: a bandpass section needs an amplifier that is stable at unity gain; "
            "allow one, or leave parts.op_amps out"
        )
    for reachable in np.geomspace(q, 0.5, 60):
        if section_circuits(spec, tuple(stable), float(reachable), topologies):
            wider = spec.target.bandwidth * q / float(reachable)
            raise InfeasibleError(
                f"{spec.source}: target.bandwidth of {format_si(spec.target.bandwidth, 'Hz')} needs a section of Q "
                f"{q:.3g} at {format_si(spec.target.center_frequency, 'Hz')}, too much for any amplifier allowed; Q "
                f"{reachable:.3g} works: widen target.bandwidth to about {format_si(wider, 'Hz')}"
            )
    raise InfeasibleError(
        f"{spec.source}: target.center_frequency of {format_si(spec.target.center_frequency, 'Hz')} is too high for a "
        "section of any Q with the amplifiers allowed; lower it or allow faster types in parts.op_amps"
    )


def allowed_topologies(spec: Spec) -> tuple[SectionTopology, ...]:
    """The section circuit that the spec insists on, or all."""
    wanted = spec.filter.topology
    return tuple(SECTIONS.values()) if wanted is None else (SECTIONS[wanted],)


def largest_q(spec: Spec) -> float:
    """The highest Q that any section circuit allowed may be given."""
    return max(topology.largest_q for topology in allowed_topologies(spec))
