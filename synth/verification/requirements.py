"""The spec's lines turned into limits and judged on the nominal chain."""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np

from synth import circuit
from synth.model.judgement import NoiseTable, Realized, Requirement, ResponseTable
from synth.quantity import format_percent, format_si
from synth.spec import Choose, Spec
from synth.verification.figures import delay_variation, rejection, ripple
from synth.verification.headroom import Excursion
from synth.verification.settling import settling_time

LEVEL_TOLERANCE = 0.01  # of the output at full scale, where the spec asks no accuracy
PHASE_MARGIN = 45.0  # [degree] least of any amplifier's loop; common practice, no source


def limited(
    name: str,
    unit: str,
    nominal: float,
    at_least: float | None = None,
    at_most: float | None = None,
    note: str = "",
) -> Requirement:
    """A judged requirement: margin is the distance to the nearest limit, negative beyond it."""
    margins = []
    if at_least is not None:
        margins.append(nominal - at_least)
    if at_most is not None:
        margins.append(at_most - nominal)
    margin = min(margins)
    return Requirement(
        name, unit, at_least, at_most, nominal, margin=margin, met=bool(margin >= 0), note=note
    )


def judged(
    spec: Spec,
    network: circuit.Network,
    table: ResponseTable,
    band: Realized,
    noise: NoiseTable,
) -> Iterator[Requirement]:
    """What the spec's [target] asks of response and noise."""
    target = spec.target
    level = 10 ** (band.gain_db / 20) * target.full_scale
    share = target.accuracy if target.accuracy is not None else LEVEL_TOLERANCE
    wanted = spec.full_scale_output
    yield limited("output at full scale", "V", level, wanted * (1 - share), wanted * (1 + share))
    slack = target.bandwidth_tolerance * target.bandwidth
    yield limited("bandwidth", "Hz", band.bandwidth, target.bandwidth - slack, target.bandwidth + slack)
    slack = target.center_tolerance * target.bandwidth
    center = target.center_frequency
    yield limited("center frequency", "Hz", band.center_frequency, center - slack, center + slack)
    for reject in target.reject:
        attenuation = rejection(network, center, reject.frequency)
        yield limited(f"reject {format_si(reject.frequency, 'Hz')}", "dB", attenuation, at_least=reject.by)
    if target.ripple is not None:
        yield limited("ripple", "dB", ripple(table, band.low_edge, band.high_edge), at_most=target.ripple)
    if target.group_delay_variation is not None:
        variation = delay_variation(network, center, target.bandwidth)
        yield limited("group delay variation", "s", variation, at_most=target.group_delay_variation)
    if target.settling is not None:
        within, to = target.settling.within, target.settling.to
        settled = settling_time(network, center, target.bandwidth, within, to)
        yield limited("settling", "s", settled, at_most=within, note=f"of the envelope, to {format_percent(to)}")
    if target.signal_to_noise is not None:
        note = "at the smallest reading"
        yield limited("signal to noise", "dB", noise.smallest_reading_snr_db, target.signal_to_noise, note=note)


def derived(found: tuple[Excursion, ...], margins: tuple[circuit.Margin, ...], band: Realized) -> Iterator[Requirement]:
    """What every chain must do whatever the spec says: swing, slew, current, input range, loop margins, poles."""
    swing = max(found, key=lambda e: e.swing_use)
    yield limited("output swing", "V", swing.peak, at_most=swing.allowed, note=f"peak at {swing.ref}")
    slew = max(found, key=lambda e: e.slew_use)
    yield limited("slew rate", "V/s", slew.slew, at_most=slew.slew_allowed, note=f"at {slew.ref}")
    current = max(found, key=lambda e: e.current_use)
    drive, note = current.current_allowed, f"peak at {current.ref}"
    yield limited("output current", "A", current.current, at_most=drive, note=note)
    range_ = min(found, key=lambda e: e.input_allowed - e.input_peak)
    yield limited("input range", "V", range_.input_peak, at_most=range_.input_allowed, note=f"peak at {range_.ref}")
    worst = min(margins, key=lambda m: m.phase_margin)
    yield limited("phase margin", "deg", worst.phase_margin, at_least=PHASE_MARGIN, note=f"of {worst.ref}")
    growth = circuit.growth(np.array(band.poles), band.center_frequency)
    moving = growth[growth != 0]  # a charge held somewhere neither grows nor decays
    slowest = 0.0 - float(moving.max()) if moving.size else 0.0
    yield limited("slowest decay", "1/s", slowest, at_least=0.0, note="of all poles; negative grows")


def not_judged(spec: Spec, drawn: bool = False) -> Iterator[Requirement]:
    """Keys of the spec that no judge treats: they are reported as such, never as met."""
    target = spec.target
    asked = [
        ("accuracy", "", target.accuracy, "after calibration, at full scale"),
        ("accuracy at smallest", "", target.accuracy_smallest, "after calibration"),
        ("yield", "", None if drawn else target.required_yield, "share of builds that meet everything"),
        ("signal tolerance", "", target.signal_tolerance, "gain where the signal wanders"),
    ]
    for name, unit, value, note in asked:
        if value is not None:
            yield Requirement(name, unit, note=note)
    sections = [
        ("interference", "", bool(spec.interference), "its part in the reading; its overload is judged"),
        ("temperature", "degC", spec.environment.temperature is not None and not drawn, "figures are at ambient"),
        ("detector", "", spec.detector is not None, "the chain is judged up to its output"),
        ("calibration", "", spec.calibration is not None, "figures are before calibration"),
        ("resonator", "", spec.resonator is not None, "drive level and pulling"),
        ("sensor scale", "", _has_scale_spread(spec) and not drawn, "its tolerance and temperature coefficient"),
        ("preference", "", spec.choose != Choose(), "what is preferred, and how long is searched"),
    ]
    for name, unit, present, note in sections:
        if present:
            yield Requirement(name, unit, note=note)


def _has_scale_spread(spec: Spec) -> bool:
    sensor = spec.sensor
    spread = [sensor.scale_tolerance, sensor.scale_temperature_coefficient]
    return any(value is not None for value in spread) or any(r.tolerance is not None for r in sensor.rolloff)


def relative_margin(requirement: Requirement) -> float:
    """Margin as a share of the limit's size: comparable between requirements, infinite when not judged."""
    if requirement.margin is None:
        return math.inf
    limits = [x for x in (requirement.at_least, requirement.at_most) if x]
    if requirement.at_least and requirement.at_most:
        return requirement.margin / (0.5 * (requirement.at_most - requirement.at_least))
    return requirement.margin / max((abs(x) for x in limits), default=abs(requirement.nominal or 0.0) or 1.0)
