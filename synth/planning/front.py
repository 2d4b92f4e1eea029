"""The first stage of a sensor that gives a current or a charge: on a virtual ground, chosen by its noise."""

from __future__ import annotations

import math
from dataclasses import dataclass

from synth.errors import CircuitError, InfeasibleError
from synth.model.chain import StageTarget
from synth.model.part import OpAmp
from synth.planning.amplifiers import NOISE_SLACK
from synth.planning.partition import LOW_GAIN
from synth.quantity import format_si
from synth.rounding.first_stage import (
    DC_SHARE,
    Site,
    charge_draft,
    first_stage_gain,
    first_stage_noise,
    largest_first_stage_gain,
    transimpedance_draft,
)
from synth.spec import Spec
from synth.topology.place import Draft, Stocks
from synth.verification import rails

KINDS = {"current": "transimpedance", "charge": "charge-amplifier"}
MAKERS = {"current": transimpedance_draft, "charge": charge_draft}
MOST_TRIED = 8  # amplifiers that are built, the quietest by their figures
SWING_SHARE, SWING_SHARE_DISTURBED = 0.5, 0.1  # of the swing, for full scale; less where interference comes along


@dataclass(frozen=True, slots=True)
class Front:
    """A first stage and its gain at the centre [V/A or V/C]."""

    draft: Draft
    gain: float


def choose_front(spec: Spec, op_amps: tuple[OpAmp, ...], stocks: Stocks, total: float) -> Front | None:
    """The quietest first stage, frugal within a little noise; None for a sensor that gives a voltage.

    Its gain is the largest that works, that leaves something to a later stage, and that swings full scale.

    Args:
        total: gain from the sensor's output to the chain's [V/A or V/C] at the centre.

    Raises:
        InfeasibleError: no amplifier makes one; says why for the last tried.
    """
    output = spec.sensor.output
    if output not in KINDS:
        return None
    built: list[tuple[float, float, str, Front]] = []
    reason = "none is stable at unity gain"
    for op_amp in _quietest(spec, op_amps):
        site = Site(op_amp, stocks, spec.target.center_frequency, spec.environment.ambient, spec.sensor)
        try:
            largest = largest_first_stage_gain(KINDS[output], site)
            gain = min(largest, total / LOW_GAIN, _swing_gain(spec, op_amp, total))
            draft = MAKERS[output](
                StageTarget(gain), op_amp, stocks, site.frequency, spec.environment.ambient, spec.sensor
            )
            _check_bias(spec, draft)
            front = Front(draft, first_stage_gain(draft, site))
            built.append((first_stage_noise(draft, site), op_amp.supply_current, op_amp.type, front))
        except (InfeasibleError, CircuitError) as error:
            reason = str(error)
    if not built:
        raise InfeasibleError(f'{spec.source}: sensor.output = "{output}": no amplifier makes a first stage: {reason}')
    best = min(noise for noise, *_ in built)

    def key(row: tuple[float, float, str, Front]) -> tuple[int, float, str]:
        return math.floor(math.log(row[0] / best) / math.log(NOISE_SLACK) + 1e-9), row[1], row[2]

    return min(built, key=key)[3]


def _quietest(spec: Spec, op_amps: tuple[OpAmp, ...]) -> list[OpAmp]:
    """Amplifiers by the noise current of their inputs with the source's capacitance: in^2 + (en w C)^2."""
    f = spec.target.center_frequency

    def noise(op_amp: OpAmp) -> float:
        own = op_amp.input_capacitance
        capacitance = own + (spec.sensor.capacitance or 0.0)
        admittance = math.hypot(2 * math.pi * f * capacitance, 1 / (spec.sensor.resistance or math.inf))
        white = op_amp.current_noise**2 * (1 + op_amp.current_noise_corner / f) + (op_amp.current_noise_slope * f) ** 2
        return math.sqrt(white + (op_amp.voltage_noise * admittance) ** 2)

    stable = [a for a in op_amps if a.minimum_noise_gain <= 1]
    return sorted(stable, key=lambda a: (noise(a), a.type))[:MOST_TRIED]


def _swing_gain(spec: Spec, op_amp: OpAmp, total: float) -> float:
    """Largest gain at which full scale stays inside a share of the swing."""
    high, low = rails(spec)
    swing = min(high - op_amp.swing_headroom_high, low - op_amp.swing_headroom_low)
    share = SWING_SHARE_DISTURBED if spec.interference else SWING_SHARE
    full_scale = math.sqrt(2) * spec.full_scale_output / total  # at the sensor's output
    return share * swing / full_scale


def _check_bias(spec: Spec, draft: Draft) -> None:
    """On a single supply the mid-rail drives a current through a sensor that conducts."""
    resistance, feedback = spec.sensor.resistance, draft.values.get("RF", 0.0)
    if spec.supply.negative is not None or resistance is None:
        return
    shift = spec.supply.positive / 2 * feedback / resistance
    if shift > DC_SHARE * 10:
        raise InfeasibleError(
            f"the mid-rail drives {format_si(shift, 'V')} through the sensor's {format_si(resistance, 'ohm')} into the "
            "first stage; give a dual supply (supply.negative)"
        )
