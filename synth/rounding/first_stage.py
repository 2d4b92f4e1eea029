"""Stocked values for a first stage on a virtual ground: transimpedance, charge amplifier, inverting.

The gain of a stage is V/A or V/C where it takes a current or a charge.  Whatever decides (gain at the centre, phase
margin over the spread of the gain-bandwidth product) is read from the exact circuit of sensor and stage.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from synth import circuit
from synth.circuit.network import FloatArray
from synth.circuit.sensor_figures import GAIN_UNITS, sensor_response, stage_gain
from synth.errors import InfeasibleError
from synth.model.chain import Chain, StageTarget
from synth.model.part import OpAmp
from synth.parts.eseries import values_between
from synth.quantity import format_si
from synth.rounding.quiet import quiet_resistance
from synth.spec import Sensor
from synth.topology import charge_amplifier, inverting, transimpedance
from synth.topology.place import Draft, Stocks, Surroundings, place

PHASE_MARGIN = 60.0  # [degree] of a transimpedance stage, over the spread of the gain-bandwidth product
PLAIN_MARGIN = 45.0  # [degree] of the others, whose loop no part can slow
SPREAD = 0.3  # least spread of the gain-bandwidth product that a stage must stand
LARGEST_SHIFT = 0.1  # of the gain at the centre by that spread
PASSED = math.sqrt(0.5)  # of the gain at low frequency, left at the centre: the stage's own corner lies beyond
DC_SHARE = 0.1  # [V] that bias current may shift the output by
CORNER_RATIO = 30.0  # the corners of a charge amplifier lie this far below and above the centre
SOURCE_RATIO = 20.0  # least ratio of an input resistor to the source's impedance
ISOLATION_RANGE = (47.0, 1e3)  # [ohm] of a charge amplifier's input resistor
SMALLEST_FEEDBACK = 220.0  # [ohm] that an amplifier drives easily
INPUT_RANGE = (220.0, 22e3)  # [ohm] of an input resistor
LARGEST_FEEDBACK = 220e3  # [ohm] of an inverting stage: beyond it strays weigh
SMALLEST_CAPACITANCE = 0.99e-12  # [F] beyond it layout decides
WINDOW = 1.6  # how far an input resistor may move for a better ratio
STEPS = 2  # of the series either side, when a value is moved
CORRECTIONS = 6
COARSE = 16  # places of a grid that are tried before it is searched

Maker = Callable[[float], Draft]


@dataclass(frozen=True, slots=True)
class Site:
    """Where a first stage stands.

    Attributes:
        op_amp, stocks: what it is made of; frequency: [Hz] the centre; ambient: [degC]; sensor: before it.
    """

    op_amp: OpAmp
    stocks: Stocks
    frequency: float
    ambient: float
    sensor: Sensor

    def gain_text(self, gain: float) -> str:
        """A gain with its unit, for people."""
        return format_si(gain, "ohm" if self.sensor.output == "current" else GAIN_UNITS[self.sensor.output], 3)

    @property
    def input_capacitance(self) -> float:
        """All capacitance on the inverting input but the feedback's [F]."""
        a = self.op_amp
        own = a.input_capacitance + a.stray_inverting_to_ground
        return own + (self.sensor.capacitance or 0.0)

    @property
    def spread(self) -> float:
        """Relative spread of the gain-bandwidth product to stand."""
        return max(SPREAD, self.op_amp.gain_bandwidth_spread)

    @property
    def largest_path(self) -> float:
        """Largest feedback resistor [ohm] that bias current allows."""
        return DC_SHARE / self.op_amp.bias_current


def transimpedance_draft(
    target: StageTarget, op_amp: OpAmp, stocks: Stocks, frequency: float, ambient: float, sensor: Sensor
) -> Draft:
    """A transimpedance stage whose gain at the centre is as near the target as one stocked resistor allows.

    CF is the smallest stocked capacitor that leaves 60 degrees of phase margin over the spread of the gain-bandwidth
    product, with the sensor's own impedance on the input.

    Args:
        target: `gain` in V/A; frequency: [Hz] centre; ambient: [degC]; sensor: with output = "current".

    Raises:
        InfeasibleError: the gain is more, or less, than the stage can give here; names the one that works.
    """
    site = Site(op_amp, stocks, frequency, ambient, sensor)
    return _nearest(*_transimpedance(target, site), target.gain, site)


def _transimpedance(target: StageTarget, site: Site) -> tuple[Maker, FloatArray]:
    """What makes a draft from RF, and the resistors that bias current allows, rising."""
    _check_output(site.sensor, "current", "a transimpedance stage")
    smallest = float(compensation_values(site.stocks)[0])

    def draft_for(resistance: float) -> Draft:
        return _compensated(
            Draft(transimpedance.TOPOLOGY, target, site.op_amp, {"RF": resistance, "CF": smallest}), site
        )

    grid = site.stocks.resistors.values
    grid = grid[(grid >= SMALLEST_FEEDBACK) & (grid <= site.largest_path)]
    if grid.size == 0:
        raise InfeasibleError(
            f"the bias current of {site.op_amp.type} ({format_si(site.op_amp.bias_current, 'A')}) allows no stocked "
            f"feedback resistor, at most {format_si(site.largest_path, 'ohm')}; take a type of less bias current"
        )
    return draft_for, grid


def charge_draft(
    target: StageTarget, op_amp: OpAmp, stocks: Stocks, frequency: float, ambient: float, sensor: Sensor
) -> Draft:
    """A charge amplifier whose gain at the centre is as near the target as one stocked capacitor allows.

    RF is the largest stocked resistor that bias current allows; the corner lies at a thirtieth of the centre or lower.

    Args:
        target: `gain` in V/C; frequency: [Hz] centre; ambient: [degC]; sensor: with output = "charge".

    Raises:
        InfeasibleError: the gain is more, or less, than the stage can give here; names the one that works.
    """
    site = Site(op_amp, stocks, frequency, ambient, sensor)
    return _nearest(*_charge(target, site), target.gain, site)


def _charge(target: StageTarget, site: Site) -> tuple[Maker, FloatArray]:
    """What makes a draft from 1/CF, and the values that the lower corner allows, rising."""
    _check_output(site.sensor, "charge", "a charge amplifier")
    resistors = site.stocks.resistors.values
    resistors = resistors[resistors <= site.largest_path]
    path = float(resistors[-1]) if resistors.size else 0.0
    least = CORNER_RATIO / (2 * math.pi * site.frequency * path) if path else math.inf
    capacitors = compensation_values(site.stocks)
    grid = capacitors[capacitors >= least * (1 - 1e-9)]
    if grid.size == 0:
        raise InfeasibleError(
            f"a charge amplifier with {site.op_amp.type} needs a feedback capacitor of {format_si(least, 'F')} at "
            f"{format_si(site.frequency, 'Hz')}, beyond the stock: bias current and stock allow "
            f"{format_si(path, 'ohm')} beside it; take a type of less bias current, or stock larger resistors"
        )

    isolation = _isolation(site)

    def draft_for(inverse: float) -> Draft:
        values = {"RS": isolation, "CF": 1 / inverse, "RF": path}
        return Draft(charge_amplifier.TOPOLOGY, target, site.op_amp, values)

    return draft_for, np.sort(1 / grid)


def _isolation(site: Site) -> float:
    """RS [ohm]: as quiet as the amplifier, and its corner with the source a long way above the centre."""
    quiet = quiet_resistance(site.op_amp, site.ambient)
    most = min(max(quiet, ISOLATION_RANGE[0]), ISOLATION_RANGE[1])
    if site.sensor.capacitance is not None:
        most = min(most, 1 / (2 * math.pi * CORNER_RATIO * site.frequency * site.sensor.capacitance))
    values = site.stocks.resistors.values
    return float(values[max(0, int(np.searchsorted(values, most * (1 + 1e-9))) - 1)])


def inverting_draft(
    target: StageTarget, op_amp: OpAmp, stocks: Stocks, frequency: float, ambient: float, source_impedance: float
) -> Draft:
    """An inverting stage with stocked values, its gain at the centre as near the target as a pair allows.

    RIN is no lower than twenty times the source's impedance, and as quiet as the amplifier where that leaves a choice.

    Args:
        target: `gain` from the stage's own input node, V/V; the source's impedance takes its share before it.
        source_impedance: [ohm] magnitude at the centre.

    Raises:
        InfeasibleError: the source's impedance or the amplifier allows less gain; names the gain that works.
    """
    largest = min(LARGEST_FEEDBACK, DC_SHARE / op_amp.bias_current, float(stocks.resistors.values[-1]))
    least = max(INPUT_RANGE[0], SOURCE_RATIO * source_impedance)
    quiet = quiet_resistance(op_amp, ambient)
    ratio = inverting.resistor_ratio(target.gain, frequency, op_amp.gain_bandwidth, op_amp.dc_gain)
    if ratio is None:
        raise InfeasibleError(
            f"{op_amp.type} does not reach an inverting gain of {target.gain:.3g} at {format_si(frequency, 'Hz')}; the "
            f"largest that works is about {op_amp.gain_bandwidth / frequency / 2:.3g}"
        )
    if least * ratio > largest:
        raise InfeasibleError(
            f"an inverting stage of gain {target.gain:.3g} with {op_amp.type} on a source of "
            f"{format_si(source_impedance, 'ohm')} needs a feedback resistor of {format_si(least * ratio, 'ohm')}, "
            f"the most is {format_si(largest, 'ohm')}; the largest gain that works is {largest / least:.3g}"
        )
    leg = min(max(least, min(quiet, INPUT_RANGE[1])), largest / ratio)
    grid = stocks.resistors.values
    legs = grid[(grid >= max(leg / WINDOW, least)) & (grid <= leg * WINDOW)]
    if legs.size == 0:
        legs = grid[[int(np.argmin(np.abs(np.log(grid / leg))))]]
    feedback = grid[np.argmin(np.abs(np.log(grid[None, :] / (legs * ratio)[:, None])), axis=1)]
    error = np.round(np.abs(feedback / legs / ratio - 1), 6)
    k = int(np.lexsort((legs, np.round(np.abs(np.log(legs / leg)), 6), error))[0])
    return Draft(inverting.TOPOLOGY, target, op_amp, {"RIN": float(legs[k]), "RF": float(feedback[k])})


def compensation_values(stocks: Stocks) -> FloatArray:
    """Stocked capacitors of a feedback [F]: those that set a frequency, and the smaller ones of their series."""
    stock = stocks.capacitors
    lowest = max(min(low for _, low, _ in stock.cases), SMALLEST_CAPACITANCE)
    first = float(stock.values[0])
    if lowest >= first:
        return stock.values
    smaller = values_between(stock.series, lowest, first * (1 - 1e-6))
    merged: FloatArray = np.concatenate([smaller[smaller < first * (1 - 1e-6)], stock.values])
    return merged


def _check_output(sensor: Sensor, output: str, what: str) -> None:
    if sensor.output != output:
        raise InfeasibleError(
            f'{what} takes a {output}, the sensor gives a {sensor.output}; give sensor.output = "{output}", or take '
            "another first stage"
        )


def stage_chain(draft: Draft, site: Site, factor: float = 1.0) -> Chain:
    """Sensor and stage alone, the amplifier's gain-bandwidth product times a factor."""
    around = Surroundings(site.frequency, site.ambient, site.sensor, None, 0.0)
    moved = replace(site.op_amp, gain_bandwidth=site.op_amp.gain_bandwidth * factor)
    return place([replace(draft, op_amp=moved)], site.stocks, around)


def first_stage_gain(draft: Draft, site: Site, factor: float = 1.0) -> float:
    """Magnitude of the stage's gain at the centre [V/V, V/A or V/C]."""
    chain = stage_chain(draft, site, factor)
    return abs(stage_gain(chain, chain.stages[0], circuit.build_network(chain), site.frequency))


def first_stage_shift(draft: Draft, site: Site) -> float:
    """Largest relative change of the gain over the spread of the gain-bandwidth product."""
    nominal = first_stage_gain(draft, site)
    return max(abs(first_stage_gain(draft, site, 1 + sign * site.spread) / nominal - 1) for sign in (1, -1))


def first_stage_margin(draft: Draft, site: Site) -> float:
    """Least phase margin [degree] over the spread of the gain-bandwidth product."""
    margins = []
    for factor in (1 - site.spread, 1.0, 1 + site.spread):
        network = circuit.build_network(stage_chain(draft, site, factor))
        high = 30 * site.op_amp.gain_bandwidth
        low = min(site.frequency / 1e3, high / 1e9)
        margins.append(circuit.phase_margin(network, network.amplifiers[0].ref, low, high).phase_margin)
    return min(margins)


def first_stage_noise(draft: Draft, site: Site) -> float:
    """Density at the centre, of sensor and stage, referred to the sensor's output [V, A or C per root hertz].

    For a voltage it is the open-circuit one.
    """
    network = circuit.build_network(stage_chain(draft, site))
    density = circuit.noise(network, [site.frequency]).density[0]
    gain = abs(circuit.response(network, [site.frequency])[0] / sensor_response(site.sensor, [site.frequency])[0])
    return float(density / gain)


def _compensated(draft: Draft, site: Site) -> Draft:
    """The draft with the smallest CF that leaves the phase margin, or the largest margin where none does."""
    gain_bandwidth = site.op_amp.gain_bandwidth * (1 - site.spread)
    classical = transimpedance.feedback_capacitance(draft.values["RF"], site.input_capacitance, gain_bandwidth)
    values = compensation_values(site.stocks)
    start = max(0, int(np.searchsorted(values, 0.5 * classical)) - 1)
    best, most = draft, -math.inf
    for value in values[start:]:
        trial = replace(draft, values={**draft.values, "CF": float(value)})
        margin = first_stage_margin(trial, site)
        if margin >= PHASE_MARGIN:
            return trial
        if margin > most:
            best, most = trial, margin
        elif value > 10 * classical:
            break
    return best


def first_stage_problem(draft: Draft, site: Site) -> str:
    """What keeps a stage from use, "" if nothing."""
    slowed = draft.topology.name == "transimpedance"
    margin, least = first_stage_margin(draft, site), PHASE_MARGIN if slowed else PLAIN_MARGIN
    if margin < least:
        return f"its phase margin is {margin:.3g} degrees, {least:g} are needed"
    if slowed:
        left = first_stage_gain(draft, site) / draft.values["RF"]
        if left < PASSED:
            return f"its own corner leaves {100 * left:.3g} % of the gain at {format_si(site.frequency, 'Hz')}"
    shift = first_stage_shift(draft, site)
    if shift > LARGEST_SHIFT:
        return f"a gain-bandwidth product off by {100 * site.spread:g} % moves its gain by {100 * shift:.3g} %"
    return ""


def _nearest(draft_for: Maker, grid: FloatArray, gain: float, site: Site) -> Draft:
    """The draft on a rising grid of values, roughly proportional to the gain, whose gain is nearest."""
    wanted = gain
    found: dict[int, tuple[float, Draft]] = {}
    for _ in range(CORRECTIONS):
        k = int(np.argmin(np.abs(np.log(grid / wanted))))
        if k in found:
            break
        draft = draft_for(float(grid[k]))
        reached = first_stage_gain(draft, site)
        found[k] = (reached, draft)
        wanted = float(grid[k]) * gain / reached
    best = min(found, key=lambda k: (round(abs(math.log(found[k][0] / gain)), 9), k))
    reached, draft = found[best]
    problem = first_stage_problem(draft, site)
    step = math.log(grid[min(best + 1, grid.size - 1)] / grid[max(best - 1, 0)])
    if not problem and abs(math.log(reached / gain)) > max(step, 1e-3):
        problem = f"the values allowed reach {site.gain_text(reached)}"
    if not problem:
        return draft
    works = _working(draft_for, grid, best, site)
    remedy = "take another amplifier" if works is None else f"the nearest that works is {site.gain_text(works)}"
    raise InfeasibleError(
        f"a {draft.topology.title} stage of {site.gain_text(gain)} with {site.op_amp.type} at "
        f"{format_si(site.frequency, 'Hz')} cannot be built: {problem}; {remedy}"
    )


def _working(draft_for: Maker, grid: FloatArray, place_: int, site: Site) -> float | None:
    """The gain nearest to a place on a grid that has no problem; None where none was found.

    Coarse steps outward to the first value that works, then bisection back towards the place.
    """

    def works(k: int) -> bool:
        return not first_stage_problem(draft_for(float(grid[k])), site)

    stride = max(1, grid.size // COARSE)
    tried = sorted(range(place_ % stride, grid.size, stride), key=lambda k: (abs(k - place_), k))
    good = next((k for k in tried if works(k)), None)
    if good is None:
        return None
    bad = good + max(-stride, min(stride, place_ - good))
    while abs(bad - good) > 1:
        middle = (good + bad) // 2
        good, bad = (middle, bad) if works(middle) else (good, middle)
    return first_stage_gain(draft_for(float(grid[good])), site)


def largest_first_stage_gain(topology: str, site: Site) -> float:
    """Largest gain [V/A or V/C] of a transimpedance stage or a charge amplifier at a site.

    Raises:
        InfeasibleError: no gain works, or the topology is another one.
    """
    makers = {"transimpedance": _transimpedance, "charge-amplifier": _charge}
    if topology not in makers:
        raise InfeasibleError(f'no largest gain is known for "{topology}"; ask for one of {", ".join(makers)}')
    draft_for, grid = makers[topology](StageTarget(1.0), site)
    largest = _working(draft_for, grid, grid.size - 1, site)
    if largest is None:
        raise InfeasibleError(
            f"{site.op_amp.type} makes no {topology} stage at {format_si(site.frequency, 'Hz')} with the sensor's "
            "impedance on its input; take another type"
        )
    return largest


def first_stage_options(draft: Draft, stocks: Stocks) -> tuple[tuple[Mapping[str, float], ...], FloatArray]:
    """Other values for a first stage near its present ones, and the factor by which each moves its gain.

    A transimpedance moves in RF, a charge amplifier in CF, an inverting stage in both resistors.
    """
    now, name = draft.values, draft.topology.name
    if name == "charge-amplifier":
        near = _neighbours(compensation_values(stocks), now["CF"])
        return tuple({**now, "CF": c} for c in near), np.array([now["CF"] / c for c in near])
    near = _neighbours(stocks.resistors.values, now["RF"])
    if name == "transimpedance":
        return tuple({**now, "RF": r} for r in near), np.array([r / now["RF"] for r in near])
    if name != "inverting":
        raise InfeasibleError(f'"{name}" is no first stage; move its gain as that of any gain stage')
    pairs = [(rin, rf) for rin in _neighbours(stocks.resistors.values, now["RIN"]) for rf in near]
    factors = np.array([rf / rin * now["RIN"] / now["RF"] for rin, rf in pairs])
    return tuple({**now, "RIN": rin, "RF": rf} for rin, rf in pairs), factors


def _neighbours(grid: FloatArray, value: float) -> Sequence[float]:
    k = int(np.argmin(np.abs(np.log(grid / value))))
    return [float(x) for x in grid[max(0, k - STEPS) : k + STEPS + 1]]
