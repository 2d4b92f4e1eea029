"""Stocked resistors for a gain stage, and the trim of the whole chain's gain in one of them."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from synth import circuit
from synth.circuit.network import FloatArray
from synth.errors import InfeasibleError
from synth.model.chain import Chain, StageTarget
from synth.model.part import OpAmp
from synth.quantity import format_si
from synth.rounding.quiet import quiet_resistance
from synth.rounding.section import Variant
from synth.topology import FIRST_STAGES, Topology, non_inverting, shelving
from synth.topology.place import Draft, Stocks, Surroundings, place

FEEDBACK_RANGE = (1e3, 22e3)  # [ohm] light for the amplifier, small against its input capacitance
SMALLEST_FEEDBACK = 220.0  # [ohm] that any amplifier drives at these levels
PHASE_COST = 0.2  # [rad] that the input's pole may take at the loop's crossover
FIRST_LEG_ROOM = 1.2  # how far the trim may raise the first stage's ground leg: it is in the signal's noise
GROUND_LEG_RANGE = (22.0, 4.7e3)  # [ohm]
WINDOW = 1.6  # how far the ground leg may move for a better ratio
COUPLING_RATIO = 100.0  # the coupling corner lies this far below the centre
DC_SHARE = 0.1  # [V] that bias current may shift the output by
BIAS_RANGE = (470.0, 1e6)  # [ohm]
USUAL_BIAS, USUAL_RATIO = 100e3, 50.0  # [ohm], and of the source: larger bias resistors gain nothing
SOURCE_RATIO = 10.0  # least ratio of bias resistor to source resistance
STEPS = 2  # of the series either side of the wanted feedback resistor
TRIMS = 4
FAIR = 1e-3  # of the gain: what is left after two gain stages, before a section is moved instead of one
GOOD = 1e-4  # of the gain: no better pair is looked for
DAMPED: dict[str, Topology] = {non_inverting.TOPOLOGY.name: non_inverting.DAMPED, **shelving.DAMPED}


def gain_draft(
    target: StageTarget, op_amp: OpAmp, stocks: Stocks, frequency: float, ambient: float, source_resistance: float
) -> Draft:
    """A gain stage with stocked values, its closed-loop gain at a frequency as near the target as the grid allows.

    The ground leg is sized so that the noise of RF parallel RG stays below the amplifier's own.

    Raises:
        InfeasibleError: the bias current allows no bias resistor large against the source.
    """
    bias = bias_resistor(target.gain, op_amp, stocks, source_resistance)
    wanted = _resistor_ratio(target.gain, op_amp, frequency)
    leg = ground_leg(wanted, target.gain, op_amp, ambient)
    rg, rf = _ratio_pair(wanted, leg, stocks)
    chosen = {"CC": coupling_capacitor(bias, stocks, frequency), "RB": bias, "RG": rg, "RF": rf}
    return Draft(non_inverting.TOPOLOGY, target, op_amp, chosen)


def ground_leg(ratio: float, gain: float, op_amp: OpAmp, ambient: float) -> float:
    """Ground leg RG [ohm]: quiet beside the amplifier, RF easy to drive, the input's pole beyond the crossover.

    RF parallel RG with the capacitance on the inverting input takes phase from the loop at its crossover GBW/gain.
    """
    quiet = quiet_resistance(op_amp, ambient)
    leg = min(max(quiet, FEEDBACK_RANGE[0] / ratio, GROUND_LEG_RANGE[0]), FEEDBACK_RANGE[1] / ratio)
    capacitance = op_amp.input_capacitance + op_amp.stray_inverting_to_ground
    pole = 2 * math.pi * op_amp.gain_bandwidth / gain * capacitance
    parallel = PHASE_COST / pole if pole > 0 else math.inf
    leg = min(leg, max(parallel * (1 + ratio) / ratio, SMALLEST_FEEDBACK / ratio))
    return min(max(leg, GROUND_LEG_RANGE[0]), GROUND_LEG_RANGE[1])


def coupling_capacitor(bias: float, stocks: Stocks, frequency: float) -> float:
    """The smallest stocked coupling capacitor [F] whose corner lies far enough below a frequency [Hz].

    Raises:
        InfeasibleError: none is large enough.
    """
    coupling = COUPLING_RATIO / (2 * math.pi * frequency * bias)
    values = stocks.coupling.values
    larger = values[values >= coupling * (1 - 1e-9)]
    if larger.size == 0:
        raise InfeasibleError(
            f"no stocked coupling capacitor reaches {format_si(coupling, 'F')} for {format_si(bias, 'ohm')} at "
            f"{format_si(frequency, 'Hz')}; raise target.center_frequency or take an amplifier of less bias current"
        )
    return float(larger[0])


def damped(draft: Draft, inductance: float, stocks: Stocks) -> Draft:
    """The stage with a damper across its input, for a source of some inductance [H]."""
    assert draft.op_amp is not None
    resistor, capacitor = non_inverting.damper(inductance, draft.op_amp)
    values, capacitors = stocks.resistors.values, stocks.coupling.values
    chosen = {
        "RD": float(values[np.argmin(np.abs(np.log(values / resistor)))]),
        "CD": float(capacitors[np.argmin(np.abs(np.log(capacitors / capacitor)))]),
    }
    return replace(draft, topology=DAMPED[draft.topology.name], values={**draft.values, **chosen})


def bias_resistor(gain: float, op_amp: OpAmp, stocks: Stocks, source_resistance: float) -> float:
    """Bias resistor [ohm]: as large as the bias current allows, and large against the source.

    Raises:
        InfeasibleError: the two exclude each other.
    """
    by_current, stocked = DC_SHARE / (op_amp.bias_current * gain), float(stocks.resistors.values[-1])
    largest = min(by_current, BIAS_RANGE[1], stocked)
    least = max(BIAS_RANGE[0], SOURCE_RATIO * source_resistance)
    if largest < least:
        limit, remedy = f"the largest resistor in stock is {format_si(stocked, 'ohm')}", "lower sensor.resistance"
        if by_current <= min(BIAS_RANGE[1], stocked):
            drawn = format_si(op_amp.bias_current, "A")
            limit = f"the bias current of {op_amp.type} ({drawn}) allows {format_si(largest, 'ohm')}"
            remedy = "take a type of less bias current"
        raise InfeasibleError(
            f"sensor.resistance: a source of {format_si(source_resistance, 'ohm')} needs a bias resistor of "
            f"{format_si(least, 'ohm')} at a gain of {gain:.3g}; {limit}; {remedy}"
        )
    values = stocks.resistors.values
    usual = min(largest, max(USUAL_BIAS, USUAL_RATIO * source_resistance))
    fitting = values[(values <= usual) & (values >= least)]
    return float(fitting[-1]) if fitting.size else float(values[np.argmin(np.abs(np.log(values / usual)))])


def _resistor_ratio(gain: float, op_amp: OpAmp, frequency: float) -> float:
    """RF/RG for a closed-loop gain magnitude at a frequency with the amplifier's finite gain.

    Raises:
        InfeasibleError: the amplifier does not reach the gain.
    """
    noise_gain = gain
    for _ in range(60):
        reached = noise_gain * non_inverting.magnitude(
            noise_gain, frequency, op_amp.gain_bandwidth, op_amp.dc_gain
        )
        if abs(reached / gain - 1) < 1e-12:
            break
        noise_gain *= gain / reached
        if noise_gain > 20 * gain:
            raise InfeasibleError(f"{op_amp.type} does not reach a gain of {gain:.3g} at {format_si(frequency, 'Hz')}")
    return max(noise_gain - 1, 0.05)


def _ratio_pair(ratio: float, leg: float, stocks: Stocks) -> tuple[float, float]:
    """Stocked RG near `leg` and RF with RF/RG nearest to `ratio`; ties go to the RG nearest `leg`."""
    values = stocks.resistors.values
    legs = values[(values >= leg / WINDOW) & (values <= leg * WINDOW)]
    if legs.size == 0:
        legs = values[[int(np.argmin(np.abs(np.log(values / leg))))]]
    feedback = legs * ratio
    nearest = np.argmin(np.abs(np.log(values[None, :] / feedback[:, None])), axis=1)
    error = np.round(np.abs((1 + values[nearest] / legs) / (1 + ratio) - 1), 6)
    order = np.lexsort((legs, np.round(np.abs(np.log(legs / leg)), 6), error))
    return float(legs[order[0]]), float(values[nearest[order[0]]])


@dataclass(frozen=True, slots=True)
class _Lever:
    """Other values for one draft, and by what factor each would move its gain."""

    index: int
    values: tuple[Mapping[str, float], ...]
    factors: FloatArray


def trim_chain(
    drafts: Sequence[Draft],
    variants: Mapping[int, Sequence[Variant]],
    stocks: Stocks,
    around: Surroundings,
    gain: float,
) -> tuple[Draft, ...]:
    """Move the chain's exact gain at the centre onto `gain` [V per input unit].

    One stage cannot do it finely: ratios of a geometric series fall on the series again.  The last gain stage is
    moved together with another one, or with a section that has other values as good; where there is none, as beside a
    lone pre-emphasis stage whose values are bound by its shape, two sections are moved.

    Args:
        variants: for a section's place in `drafts`, its other values of the same quality.

    Raises:
        InfeasibleError: there is neither a gain stage nor a section with variants.
    """
    trimmed = list(drafts)
    best, best_error = tuple(trimmed), math.inf
    for attempt in range(2 * TRIMS):
        reached = chain_gain(place(trimmed, stocks, around))
        error = abs(reached / gain - 1)
        if error < best_error:
            best, best_error = tuple(trimmed), error
        if best_error < (GOOD if attempt < TRIMS else FAIR):
            break
        most = 2 if attempt < TRIMS else 1  # gain stages, before a section is moved as well
        first, second = _levers(trimmed, drafts, variants, stocks, gain / reached, most)
        for lever, k in zip((first, second), _best_pair(first.factors, second.factors, gain / reached), strict=True):
            trimmed[lever.index] = replace(trimmed[lever.index], values=lever.values[k])
    return best


def _levers(
    drafts: Sequence[Draft],
    planned: Sequence[Draft],
    variants: Mapping[int, Sequence[Variant]],
    stocks: Stocks,
    factor: float,
    most: int,
) -> tuple[_Lever, _Lever]:
    """The two that are moved together: at most so many gain stages from the last, then sections from the last."""
    gains = [k for k, d in enumerate(drafts) if d.topology.kind == "gain" and d.topology.name not in FIRST_STAGES]
    moved = gains[: -most - 1 : -1]
    found = [_gain_lever(drafts, planned, k, factor if k == gains[-1] else 1.0, stocks) for k in moved]
    found += [_section_lever(drafts, k, variants[k]) for k in sorted(variants, reverse=True)[: 2 - len(found)]]
    if not found:
        raise InfeasibleError("the chain has no gain stage to trim; ask for more gain")
    still = _Lever(found[0].index, found[0].values, np.ones(1))
    return found[0], found[1] if len(found) > 1 else replace(still, values=(drafts[found[0].index].values,))


def _section_lever(drafts: Sequence[Draft], index: int, variants: Sequence[Variant]) -> _Lever:
    now = drafts[index].values
    current = next((v.gain for v in variants if v.values.items() <= now.items()), variants[0].gain)
    options = tuple({**now, **v.values} for v in variants)  # a damper stays
    return _Lever(index, options, np.array([v.gain / current for v in variants]))


def _gain_lever(
    drafts: Sequence[Draft], planned: Sequence[Draft], index: int, factor: float, stocks: Stocks
) -> _Lever:
    """Stocked pairs near the planned ground leg whose ratio lies within a few steps of the wanted one."""
    now, leg = drafts[index].values, planned[index].values["RG"]
    grid = stocks.resistors.values
    wanted = max((1 + now["RF"] / now["RG"]) * factor - 1, 0.05)
    raised = FIRST_LEG_ROOM if index == 0 else WINDOW
    legs = grid[(grid >= leg / WINDOW) & (grid <= leg * raised)]
    nearest = np.searchsorted(grid, legs * wanted)
    columns = np.clip(nearest[:, None] + np.arange(-STEPS, STEPS + 1), 0, grid.size - 1)
    rg, rf = np.repeat(legs, columns.shape[1]), grid[columns].ravel()
    factors = (1 + rf / rg) / (1 + now["RF"] / now["RG"])
    options = tuple({**now, "RG": float(g), "RF": float(f)} for g, f in zip(rg, rf, strict=True))
    return _Lever(index, options, factors)


def _best_pair(first: FloatArray, second: FloatArray, wanted: float) -> tuple[int, int]:
    """Indices whose product is nearest to `wanted`; within a step of a hundredth percent, the smallest move."""
    error = np.round(np.abs(first[:, None] * second[None, :] / wanted - 1), 4)
    move = np.round(np.abs(np.log(second))[None, :] + np.zeros_like(error), 6)
    exact = np.abs(first[:, None] * second[None, :] / wanted - 1)
    order = np.lexsort((np.arange(error.size), exact.ravel(), move.ravel(), error.ravel()))
    i, j = np.unravel_index(int(order[0]), error.shape)
    return int(i), int(j)


def chain_gain(chain: Chain) -> float:
    """Magnitude of the whole chain's gain at its centre [V per input unit]."""
    return float(abs(circuit.response(circuit.build_network(chain), [chain.center_frequency])[0]))
