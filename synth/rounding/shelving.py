"""Joint choice of a shelving stage's values on the stocked grid, so that sensor and stage together are flat.

For every stocked capacitor and several bounds of the shelf, resistors are found for which the *real* stage (finite
amplifier, strays, loss) has the wanted gain and slope at the centre; then the resistor neighbours of all of them are
evaluated together over the band, and the best by an explicit key is taken.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from synth import circuit
from synth.circuit.compiled import Program, compile_network, run
from synth.circuit.network import FloatArray
from synth.errors import InfeasibleError
from synth.model.chain import Chain, StageTarget
from synth.model.part import OpAmp
from synth.quantity import format_si
from synth.rounding.gain import bias_resistor, coupling_capacitor
from synth.rounding.quiet import quiet_resistance
from synth.rounding.section import MOST_VARIANTS, Variant
from synth.spec import Sensor
from synth.topology import shelving
from synth.topology.place import Draft, Stocks, Surroundings, place
from synth.topology.shelving import ShelfKind
from synth.verification.figures import detuned

BAND_POINTS = 13  # odd: the centre is among them
POLES: dict[ShelfKind, tuple[float, ...]] = {  # of the centre; beyond them noise and overload cost more than flatness
    "rising": (3.0, 4.0, 5.0, 6.3, 8.0, 10.0),
    "falling": (1 / 5, 1 / 6.3, 1 / 8, 1 / 10, 1 / 12.5, 1 / 16, 1 / 20),
}
PREDISTORTIONS = 6
NEIGHBOURS = 3
MOST_IDEAL = 120  # capacitors and bounds whose neighbours are tried
FREE_SHARE = 0.25  # of what is allowed: an unevenness below it costs nothing
FREE_GAIN = 0.01  # the chain's gain is trimmed elsewhere
UNKNOWN = 1e9
PHASE_MARGIN = 55.0  # [degree] of the stage on its own
MARGIN_SPAN = (1e-3, 1e5)  # of the centre: where the loop's unity crossings are searched for


@dataclass(frozen=True, slots=True)
class Left:
    """What a response leaves of flatness; numbers, or arrays over trials.

    Attributes:
        tilt: [dB] upper band edge over lower: its symmetric part, which moves only the bandwidth, has no share in it.
        swing: [dB] largest over smallest gain in the band.
        signal: change of gain over the signal tolerance, upper end over lower, a share.
    """

    tilt: FloatArray
    swing: FloatArray
    signal: FloatArray


@dataclass(frozen=True, slots=True)
class Window:
    """Where a response has to be flat.

    Attributes:
        center: [Hz]; bandwidth: [Hz], its edges geometrically about the centre, as those of a bandpass.
        signal: how far the signal may lie from the centre, a share of it.
    """

    center: float
    bandwidth: float
    signal: float

    @property
    def frequencies(self) -> FloatArray:
        """[Hz]: the centre, the ends of the signal's range, then the band."""
        ends = self.center * np.array([1.0, 1 - self.signal, 1 + self.signal])
        band = detuned(self.center, np.linspace(-1, 1, BAND_POINTS) * self.bandwidth / self.center)
        return np.concatenate([ends, band])

    @property
    def log_span(self) -> float:
        """ln of the upper band edge over the lower."""
        edges = detuned(self.center, np.array([-1.0, 1.0]) * self.bandwidth / self.center)
        return float(np.log(edges[1] / edges[0]))

    def left(self, magnitude: FloatArray) -> Left:
        """Unevenness of a magnitude given at `frequencies`, shape (F,) or (F, trials)."""
        band = 20 * np.log10(magnitude[3:])
        return Left(
            band[-1] - band[0],
            np.asarray(band.max(axis=0) - band.min(axis=0)),
            magnitude[2] / magnitude[1] - 1,
        )


@dataclass(frozen=True, slots=True)
class ShelfAim:
    """What a shelving stage is for.

    Attributes:
        kind: rising or falling; target: gain magnitude at the centre.
        window: where sensor and stage together have to be flat; sensor: its magnitude at the window's frequencies.
        tilt: [dB], signal: share, that may be left.
        ambient: [degC]; source_resistance: [ohm] at its input, where it is the first stage.
    """

    kind: ShelfKind
    target: StageTarget
    window: Window
    sensor: FloatArray
    tilt: float
    signal: float
    ambient: float
    source_resistance: float = 0.0

    def measure(self, left: Left) -> FloatArray:
        """Unevenness over what may be left: at most 1 where the aim is reached."""
        return np.maximum(np.abs(left.swing) / self.tilt, np.abs(left.signal) / self.signal)


@dataclass(frozen=True, slots=True)
class Shelf:
    """A rounded shelving stage.

    Attributes:
        draft: on paper; kind: rising or falling; zero, pole: [Hz] of its values with an ideal amplifier.
        gain: magnitude at the centre; high_gain: far above, with an ideal amplifier.
        left: of sensor and stage together, with the real amplifier.
        phase_margin: [degree] of its loop; measure: unevenness over what may be left.
        variants: values as flat with the same capacitor and bound, the chosen ones first.
    """

    draft: Draft
    kind: ShelfKind
    zero: float
    pole: float
    gain: float
    high_gain: float
    left: Left
    phase_margin: float
    measure: float
    variants: tuple[Variant, ...] = ()


@dataclass(frozen=True, slots=True)
class _Bench:
    """A compiled shelving stage between an ideal source and nothing."""

    aim: ShelfAim
    op_amp: OpAmp
    stocks: Stocks
    chain: Chain
    program: Program
    refs: Mapping[str, str]

    def magnitude(self, values: Mapping[str, FloatArray]) -> FloatArray:
        """Gain magnitude at the window's frequencies, shape (F, trials)."""
        table = circuit.build_values(self.chain, {ref: values[key] for key, ref in self.refs.items()})
        s = np.asarray(2j * np.pi * self.aim.window.frequencies[:, None], dtype=np.complex128)
        numerator, determinant = run(self.program, table, s)
        return np.abs(numerator / determinant)


def round_shelf(aim: ShelfAim, op_amp: OpAmp, stocks: Stocks) -> Shelf:
    """The best stocked values for a shelving stage with one amplifier.

    Raises:
        InfeasibleError: its gain is below what a shelf of the wanted slope has, or nothing stocked makes it.
    """
    poles, capacitors = (grid.ravel() for grid in np.meshgrid(POLES[aim.kind], stocks.capacitors.values, indexing="ij"))
    bench, ideal = _fitted(aim, op_amp, stocks, poles, capacitors)
    values, pole = _neighbourhood(ideal, bench, poles)
    magnitude = bench.magnitude(values)
    left = aim.window.left(magnitude * aim.sensor[:, None])
    measure = aim.measure(left)
    order = _ranked(values, pole, measure, magnitude[0] / aim.target.gain - 1, bench)
    best: Shelf | None = None
    seen: set[float] = set()
    for k in order:
        if float(pole[k]) in seen:
            continue
        seen.add(float(pole[k]))
        parts = {key: float(v[k]) for key, v in values.items()}
        shelf = _shelf(bench, parts, float(magnitude[0, k]), _one(left, int(k)), float(measure[k]))
        if best is None or (shelf.phase_margin > best.phase_margin and best.phase_margin < PHASE_MARGIN):
            held = values[shelving.CAPACITOR[aim.kind]]
            alike = (measure <= max(FREE_SHARE, float(measure[k]))) & (pole == pole[k]) & (held == held[k])
            alike[k] = True
            best = replace(shelf, variants=_variants(shelf, values, magnitude[0], order[alike[order]][:MOST_VARIANTS]))
        if best.phase_margin >= PHASE_MARGIN or measure[k] > max(1.0, 2 * measure[order[0]]):
            break
    assert best is not None
    return best


def _fitted(
    aim: ShelfAim, op_amp: OpAmp, stocks: Stocks, poles: FloatArray, capacitors: FloatArray
) -> tuple[_Bench, dict[str, FloatArray]]:
    """Resistors with which the real stage has the wanted gain and slope; NaN where it cannot."""
    wanted = -np.log(aim.sensor[-1] / aim.sensor[3]) / aim.window.log_span
    slope, gain = np.full(poles.shape, wanted), np.full(poles.shape, aim.target.gain)
    bench: _Bench | None = None
    values: dict[str, FloatArray] = {}
    for _ in range(PREDISTORTIONS):
        values = _ideal(aim, gain, slope, poles, capacitors)
        possible = np.all([np.isfinite(v) & (v > 0) for v in values.values()], axis=0)
        if not possible.any():
            raise InfeasibleError(
                f"no {aim.kind} shelf of slope {wanted:.3g} has a gain of {aim.target.gain:.3g} at the center; a "
                "non-inverting stage is nowhere below 1: give it more gain"
            )
        bench = bench or _bench(aim, op_amp, stocks, {key: float(v[possible][0]) for key, v in values.items()})
        magnitude = bench.magnitude({key: np.where(possible, v, 1e3) for key, v in values.items()})
        miss = aim.window.left(magnitude * aim.sensor[:, None]).tilt * (math.log(10) / 20) / aim.window.log_span
        slope = slope - np.clip(miss, -0.2, 0.2)
        gain = gain * np.clip(aim.target.gain / magnitude[0], 0.5, 2.0)
        values = {key: np.where(possible, v, np.nan) for key, v in values.items()}
    assert bench is not None
    return bench, values


def _ideal(
    aim: ShelfAim, gain: FloatArray, slope: FloatArray, poles: FloatArray, capacitors: FloatArray
) -> dict[str, FloatArray]:
    """Ideal values for a gain and slope at the centre, the zero held where the small end's gain stays above one."""
    least = shelving.LEAST_RESISTIVE_GAIN
    zero = shelving.zero_for_slope(slope, poles)
    with np.errstate(all="ignore"):
        if aim.kind == "rising":
            zero = np.maximum(zero, 1 / np.sqrt((gain / least) ** 2 * (1 + 1 / poles**2) - 1))
        else:
            zero = np.minimum(zero, np.sqrt((gain / least) ** 2 * (1 + poles**2) - 1))
    low, high = shelving.end_gains(gain, zero, poles)
    small, f0 = low if aim.kind == "rising" else high, aim.window.center
    made = shelving.resistors(aim.kind, small, zero * f0, poles * f0, capacitors)
    return {**made, shelving.CAPACITOR[aim.kind]: capacitors}


def _bench(aim: ShelfAim, op_amp: OpAmp, stocks: Stocks, values: Mapping[str, float]) -> _Bench:
    arrays = {key: np.array([v]) for key, v in values.items()}
    bias = bias_resistor(float(shelving.low_gain(aim.kind, arrays)[0]), op_amp, stocks, aim.source_resistance)
    center = aim.window.center
    coupling = {"CC": coupling_capacitor(bias, stocks, center), "RB": bias}
    chain = _chain(aim, op_amp, stocks, {**coupling, **values})
    passive = zip(shelving.SHELVES[aim.kind].slots, chain.stages[0].parts, strict=True)
    refs = {slot.key: ref for slot, ref in passive if slot.key in values}
    return _Bench(aim, op_amp, stocks, chain, compile_network(circuit.build_network(chain), center), refs)


def _chain(aim: ShelfAim, op_amp: OpAmp, stocks: Stocks, values: Mapping[str, float]) -> Chain:
    around = Surroundings(aim.window.center, aim.ambient, Sensor(scale=1.0, input_unit="V"), None, 0.0)
    return place([Draft(shelving.SHELVES[aim.kind], aim.target, op_amp, values)], stocks, around)


def _neighbourhood(
    ideal: Mapping[str, FloatArray], bench: _Bench, poles: FloatArray
) -> tuple[dict[str, FloatArray], FloatArray]:
    """All combinations of the nearest stocked resistors around the most comfortable ideal sets, and their bounds."""
    grid = bench.stocks.resistors.values
    tuned = shelving.RESISTORS[bench.aim.kind]
    inside = np.all([(ideal[key] >= grid[0] * 0.99) & (ideal[key] <= grid[-1] * 1.01) for key in tuned], axis=0)
    if not inside.any():
        low, high = (format_si(float(r), "ohm") for r in grid[[0, -1]])
        raise InfeasibleError(
            f"no stocked capacitor makes a {bench.aim.kind} shelf at {format_si(bench.aim.window.center, 'Hz')} with "
            f"resistors between {low} and {high}; stock other capacitors"
        )
    comfort = _discomfort(ideal, bench)
    kept = np.flatnonzero(inside)
    kept = kept[np.argsort(comfort[kept], kind="stable")[:MOST_IDEAL]]
    picks = np.array(np.meshgrid(*[range(NEIGHBOURS)] * len(tuned), indexing="ij")).reshape(len(tuned), -1)
    values = {}
    for key, v in ideal.items():
        if key not in tuned:
            values[key] = np.repeat(v[kept], picks.shape[1])
            continue
        distance = np.abs(np.log(grid[None, :] / v[kept][:, None]))
        choices = grid[np.sort(np.argsort(distance, axis=1, kind="stable")[:, :NEIGHBOURS], axis=1)]
        values[key] = choices[:, picks[tuned.index(key)]].ravel()
    return values, np.repeat(poles[kept], picks.shape[1])


def _ranked(
    values: Mapping[str, FloatArray], pole: FloatArray, measure: FloatArray, gain_error: FloatArray, bench: _Bench
) -> NDArray[np.intp]:
    """Trials best first: by error class, comfort of the impedance level, the tighter bound, plain error, values."""
    worst = np.maximum(measure / FREE_SHARE, np.abs(gain_error) / FREE_GAIN)
    worst = np.where(np.isfinite(worst), worst, UNKNOWN)
    grade = np.where(worst <= 1, 0, np.ceil(np.log2(np.maximum(worst, 1.0)) * 2))
    bound = np.round(np.abs(np.log(pole)), 6)
    keys = [*values.values(), np.round(worst, 3), bound, _discomfort(values, bench).astype(float), grade]
    return np.lexsort(np.array(keys))


def _discomfort(values: Mapping[str, FloatArray], bench: _Bench) -> NDArray[np.intp]:
    """How far the impedance level is from comfortable; each limit passed adds to it.

    Limits: noise of the impedance at the inverting input against the amplifier's own; resistors that load the
    amplifier; resistors in the strays' reach or tiny; capacitors large against strays.
    """
    op_amp, kind = bench.op_amp, bench.aim.kind
    quiet = quiet_resistance(op_amp, bench.aim.ambient)
    resistors = [values[key] for key in shelving.RESISTORS[kind]]
    capacitor = values[shelving.CAPACITOR[kind]]
    leg = values["RG"]
    if kind == "rising":
        reactance = 1 / (2 * np.pi * bench.aim.window.center * capacitor)
        leg = 1 / np.abs(1 / leg + 1 / (values["RS"] - 1j * reactance))
    penalty = np.zeros(leg.shape, dtype=np.intp)
    for measure, limits in (
        (leg / max(quiet, 100.0), (1.0, 2.0, 4.0, 8.0, 16.0)),
        (1e3 / (leg * bench.aim.target.gain), (1.0, 2.0, 4.0, 8.0)),
        (22.0 / np.min(resistors, axis=0), (1.0, 2.0)),
        (np.max(resistors, axis=0) / 100e3, (1.0, 2.0, 4.0)),
        (100e-12 / capacitor, (1.0, 2.0, 4.0)),
    ):
        with np.errstate(invalid="ignore"):
            for limit in limits:
                penalty += measure > limit
    return penalty


def _shelf(bench: _Bench, parts: Mapping[str, float], gain: float, left: Left, measure: float) -> Shelf:
    coupling, bias = (bench.chain.part(ref).number for ref in bench.chain.stages[0].parts[:2])
    chosen = {"CC": coupling, "RB": bias, **parts}
    chain = _chain(bench.aim, bench.op_amp, bench.stocks, chosen)
    network, f0 = circuit.build_network(chain), bench.aim.window.center
    margin = circuit.phase_margin(network, network.amplifiers[0].ref, f0 * MARGIN_SPAN[0], f0 * MARGIN_SPAN[1])
    arrays = {key: np.array(v) for key, v in parts.items()}
    zero, pole = (float(corner) for corner in shelving.corners(bench.aim.kind, arrays))
    high = float(shelving.low_gain(bench.aim.kind, arrays)) * pole / zero
    draft = Draft(shelving.SHELVES[bench.aim.kind], bench.aim.target, bench.op_amp, chosen)
    return Shelf(draft, bench.aim.kind, zero, pole, gain, high, left, margin.phase_margin, measure)


def _variants(
    shelf: Shelf, values: Mapping[str, FloatArray], gain: FloatArray, alike: NDArray[np.intp]
) -> tuple[Variant, ...]:
    """Other values as flat, the chosen ones first; its coupling stays."""
    found = [
        Variant({**shelf.draft.values, **{key: float(v[k]) for key, v in values.items()}}, float(gain[k]))
        for k in alike
    ]
    return tuple(sorted(found, key=lambda variant: variant.values != shelf.draft.values))


def _one(left: Left, k: int) -> Left:
    return Left(left.tilt[k], left.swing[k], left.signal[k])
