"""Which amplifier for which stage, by figures that need no circuit."""

from __future__ import annotations

import math
from dataclasses import dataclass

from synth.errors import InfeasibleError
from synth.model.part import OpAmp
from synth.parts.op_amps import phase_margin
from synth.quantity import format_si
from synth.rounding.gain import BIAS_RANGE, DC_SHARE, SOURCE_RATIO
from synth.spec import Spec
from synth.topology import multiple_feedback, non_inverting

ACCURACY_SHARE = 0.2  # of the accuracy, that the gain-bandwidth spread of one gain stage may take
DEFAULT_ACCURACY = 0.03  # where the spec asks none
NOISE_SLACK = 1.15  # a noise within this ratio of the best is as good
GAIN_CEILING = 300.0  # of one stage: beyond it layout decides
SLEW_RESERVE = 0.5  # of the slew rate, for the signal
SMALLEST_STAGE_GAIN = 1.5
OPEN_LOOP_SPREAD = 0.5  # assumed relative spread of the DC gain; uncertain, from memory
USUAL_CAPACITANCE = 4.7e-10  # [F] the impedance level that a section's noise is guessed at
UNITY_MARGIN = 50.0  # [degree] of phase at unity gain, that a section's amplifier should have
LARGEST_SHIFT, LARGEST_LOSS = 0.12, 0.3  # of a section's frequency and Q by its amplifier: beyond it, no design


@dataclass(frozen=True, slots=True)
class Fit:
    """An amplifier for a gain stage with the most gain it may be given, and its noise there [V/rtHz, at its input]."""

    op_amp: OpAmp
    largest_gain: float
    noise: float


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


def section_candidates(spec: Spec, op_amps: tuple[OpAmp, ...], q: float) -> tuple[OpAmp, ...]:
    """Amplifiers for a multiple-feedback section, best first: by how much their spreads move its pole pair.

    Finite gain-bandwidth moves the frequency by -Q f0/GBW and Q by as much, finite DC gain Q by -2 Q^2/A0; the
    spread of each counts, in units of what centre and bandwidth tolerate.  Within a factor of 1.5, or once below a
    tenth of the tolerance, the quieter one wins, then the lower supply current.
    """
    center = spec.target.center_frequency
    center_share = spec.target.center_tolerance * spec.target.bandwidth / center
    found = []
    for op_amp in op_amps:
        if op_amp.minimum_noise_gain > 1:
            continue  # the loop is closed by capacitors: unity noise gain at high frequency
        shift = abs(multiple_feedback.frequency_shift(q, center / op_amp.gain_bandwidth)[0])
        loss = abs(multiple_feedback.q_loss(q, op_amp.dc_gain))
        if shift > LARGEST_SHIFT or loss > LARGEST_LOSS or _unity_margin(op_amp) < UNITY_MARGIN:
            continue
        moved = shift * op_amp.gain_bandwidth_spread / center_share
        widened = (loss * OPEN_LOOP_SPREAD + shift * op_amp.gain_bandwidth_spread) / spec.target.bandwidth_tolerance
        score = max(moved, widened, 0.1)
        steps = (_steps(score / 0.1), _steps(section_noise(op_amp, center, q) / 1e-9))
        found.append((*steps, op_amp.supply_current, op_amp.type, op_amp))
    return tuple(row[-1] for row in sorted(found, key=lambda row: row[:4]))


def _steps(ratio: float) -> int:
    """A ratio in steps of 1.5, so that near misses compare as equal."""
    return round(math.log(ratio) / math.log(1.5))


def section_noise(op_amp: OpAmp, frequency: float, q: float) -> float:
    """Amplifier noise of a section at its centre, over its noise gain 2 Q^2 [V/rtHz].

    Voltage noise meets 2 Q^2, current noise Q R2 (nodal analysis of the section at its centre); R2 is that of the
    usual impedance level.
    """
    r2 = 2 * q / (2 * math.pi * frequency * USUAL_CAPACITANCE)
    return input_noise(op_amp, frequency, r2 / (2 * q))


def _unity_margin(op_amp: OpAmp) -> float:
    return phase_margin(op_amp.gain_bandwidth, op_amp.dc_gain, op_amp.second_pole, 1.0)


def best_section_amplifier(spec: Spec, op_amps: tuple[OpAmp, ...], q: float) -> OpAmp:
    """The first of `section_candidates`.

    Raises:
        InfeasibleError: none is fast enough; names the bandwidth or centre that would do.
    """
    found = section_candidates(spec, op_amps, q)
    if found:
        return found[0]
    stable = [a for a in op_amps if a.minimum_noise_gain <= 1 and _unity_margin(a) >= UNITY_MARGIN]
    center = spec.target.center_frequency
    if not stable:
        raise InfeasibleError(
            f"{spec.source}: parts.op_amps: a bandpass section needs an amplifier that is stable at unity gain; "
            "allow one, or leave parts.op_amps out"
        )
    reachable = {
        a.type: min(LARGEST_SHIFT * a.gain_bandwidth / center, math.sqrt(LARGEST_LOSS / 2 * a.dc_gain)) for a in stable
    }
    fastest = max(stable, key=lambda a: reachable[a.type])
    possible = reachable[fastest.type]
    raise InfeasibleError(
        f"{spec.source}: a section of Q {q:.3g} at {format_si(center, 'Hz')} is too much for any amplifier allowed; "
        f"{fastest.type} reaches Q {possible:.3g}: widen target.bandwidth to about "
        f"{format_si(spec.target.bandwidth * q / possible, 'Hz')}"
    )


