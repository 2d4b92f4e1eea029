"""What can be known before any chain is built: keys that no design covers yet, and bounds that no chain can pass."""

from __future__ import annotations

import math

import numpy as np

from synth import circuit
from synth.circuit.sensor import sensor_network
from synth.errors import CircuitError, InfeasibleError
from synth.model.part import OpAmp
from synth.planning.amplifiers import suits_sections
from synth.planning.safe import at_least, at_most
from synth.quantity import format_si
from synth.spec import Spec
from synth.topology import SECTIONS
from synth.verification import rails


def check_supported(spec: Spec) -> None:
    """Refuse what would change the circuit and has no design: a chain for something else would be no answer.

    Raises:
        InfeasibleError: names the key and what can be designed instead.
    """
    try:
        sensor_network(spec.sensor, spec.environment.ambient)
    except CircuitError as error:
        raise InfeasibleError(f"{spec.source}: sensor: {error}") from error
    topology = spec.filter.topology
    if topology is not None and topology not in SECTIONS:
        raise InfeasibleError(
            f'{spec.source}: filter.topology = "{topology}": has no design here; choose one of {", ".join(SECTIONS)} '
            "or leave it out"
        )


def usable_op_amps(spec: Spec, op_amps: tuple[OpAmp, ...]) -> tuple[OpAmp, ...]:
    """The amplifiers that work on the spec's supply, swing its output and slew it.

    Raises:
        InfeasibleError: none is left; names the key that excludes them and the nearest value that would not.
    """
    high, low = rails(spec)
    total = high + low
    on_supply = tuple(a for a in op_amps if a.supply_minimum <= total <= a.supply_maximum)
    peak = math.sqrt(2) * spec.full_scale_output
    suited = tuple(a for a in op_amps if suits_sections(a)) or op_amps
    if not set(on_supply) & set(suited):
        raise InfeasibleError(
            f"{spec.source}: supply of {format_si(total, 'V')} in total is outside every amplifier's range; "
            f"the nearest that works is {_nearest_supply(suited, total, peak)}"
        )
    swings = {a.type: min(high - a.swing_headroom_high, low - a.swing_headroom_low) for a in on_supply}
    swinging = tuple(a for a in on_supply if swings[a.type] >= peak)
    if not swinging:
        best = max(on_supply, key=lambda a: swings[a.type])
        raise InfeasibleError(
            f"{spec.source}: target.output of {format_si(spec.full_scale_output, 'V')} rms needs a swing of "
            f"{format_si(peak, 'V')} peak; on this supply the largest output that works is "
            f"{format_si(at_most(max(swings[best.type], 0.0) / math.sqrt(2)), 'V')} rms ({best.type})"
        )
    slew = 2 * math.pi * spec.target.center_frequency * peak
    fast = tuple(a for a in swinging if a.slew_rate >= slew)
    if not fast:
        best = max(swinging, key=lambda a: a.slew_rate)
        raise InfeasibleError(
            f"{spec.source}: target.output of {format_si(spec.full_scale_output, 'V')} rms at "
            f"{format_si(spec.target.center_frequency, 'Hz')} slews {format_si(slew, 'V/s')}; the largest output that "
            f"works is {format_si(at_most(spec.full_scale_output * best.slew_rate / slew), 'V')} rms ({best.type})"
        )
    return fast


def _nearest_supply(op_amps: tuple[OpAmp, ...], total: float, peak: float) -> str:
    """The supply nearest a total [V] that an amplifier works on and swings a peak [V] on, rails alike."""
    reach = []
    for a in op_amps:
        swing = 2 * (peak + max(a.swing_headroom_high, a.swing_headroom_low))
        lowest = max(a.supply_minimum, swing)
        if lowest <= a.supply_maximum:
            bound = at_least(lowest) if total < lowest else at_most(a.supply_maximum)
            reach.append((abs(bound - total), bound, a.type))
    if not reach:
        return "that of a smaller target.output"
    _, bound, name = min(reach)
    return f"{format_si(bound, 'V')} ({name})"


def sensor_gain(spec: Spec) -> float:
    """Magnitude of the sensor's response at the centre, re its flat region."""
    network = sensor_network(spec.sensor, spec.environment.ambient)
    return float(abs(circuit.response(network, [spec.target.center_frequency])[0])) / spec.sensor.scale


def check_source_noise(spec: Spec) -> None:
    """The source's own noise in the band bounds the signal-to-noise ratio of any chain.

    The band of a bandpass between its -3 dB points is taken as wide as the spec's bandwidth tolerance lets it be
    narrow; noise inside it is shaped by at most 3 dB.

    Raises:
        InfeasibleError: even a noiseless chain could not reach the ratio; names the nearest values that would work.
    """
    asked = spec.target.signal_to_noise
    if asked is None:
        return
    network = sensor_network(spec.sensor, spec.environment.ambient)
    center = spec.target.center_frequency
    narrow = spec.target.bandwidth * (1 - spec.target.bandwidth_tolerance)
    f = np.linspace(max(center - narrow / 2, center / 100), center + narrow / 2, 41)
    spectrum = circuit.noise(network, f)
    gain = np.abs(circuit.response(network, [center])[0])
    weight = 0.5  # -3 dB at the edges: no less of the noise than this comes through
    rms = circuit.integrated(f, spectrum.density, float(f[0]), float(f[-1])) * math.sqrt(weight)
    if rms == 0:
        return
    best = 20 * math.log10(gain * spec.target.smallest / rms)
    if best < asked:
        smallest = spec.target.smallest * 10 ** ((asked - best) / 20)
        raise InfeasibleError(
            f"{spec.source}: target.signal_to_noise of {asked:.4g} dB: the source's own noise allows at most "
            f"{at_most(best, 3):g} dB with a noiseless chain; ask for less, or raise target.smallest to "
            f"{format_si(at_least(smallest), spec.input_unit)}, or narrow the bandwidth"
        )
