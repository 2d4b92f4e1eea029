"""Joint choice of a section's values on the stocked grid, judged on the real amplifier with strays and loss.

Every stocked capacitor pair is tried.  For each, resistors are found for which the *realized* pole pair (a root of
the section's determinant, not of the ideal formula) is the wanted one; then the resistor neighbours of all pairs
are evaluated together, exactly, and the best by an explicit key is taken.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from synth import circuit
from synth.circuit.compiled import Program, compile_network, run
from synth.circuit.network import ComplexArray, FloatArray
from synth.circuit.tracking import track_pole
from synth.errors import InfeasibleError
from synth.model.chain import Chain, StageTarget
from synth.model.part import OpAmp
from synth.quantity import format_si
from synth.spec import Sensor
from synth.topology import multiple_feedback
from synth.topology.place import Draft, Stocks, Surroundings, place

FREE_FREQUENCY, FREE_Q, FREE_GAIN = 5e-4, 5e-3, 0.06  # errors that cost nothing; the chain's gain is trimmed elsewhere
SPREAD_SHARE = 0.1  # an error below this share of what tolerance spreads is free, too
NEIGHBOURS = 3
MOST_VARIANTS = 60
PREDISTORTIONS = 12
KEYS = ("R1A", "R1B", "R2", "C1", "C2")


@dataclass(frozen=True, slots=True)
class Variant:
    """Values that realize a section as well as the chosen ones, with the gain they give at the chain's centre."""

    values: Mapping[str, float]
    gain: float


@dataclass(frozen=True, slots=True)
class Section:
    """A rounded section: its draft, what its pole pair and gain become with the real amplifier, and its variants."""

    draft: Draft
    frequency: float
    q: float
    gain: float
    variants: tuple[Variant, ...]


@dataclass(frozen=True, slots=True)
class _Bench:
    """A section on its own between an ideal source and nothing, compiled, so that many values can be tried."""

    chain: Chain
    program: Program
    refs: dict[str, str]
    center: float

    def evaluate(self, values: dict[str, FloatArray], start: ComplexArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Realized frequency [Hz], Q and gain magnitude at the chain's centre; NaN where no pole was found."""
        drawn = {self.refs[key]: values[key] for key in KEYS}
        table = circuit.build_values(self.chain, drawn)
        pole, found = track_pole(self.program, table, start)
        numerator, determinant = run(self.program, table, np.array([[2j * np.pi * self.center]]))
        gain = np.abs(numerator[0] / determinant[0])
        good = found & (pole.imag > 0) & (pole.real < 0)
        frequency = np.where(good, np.abs(pole) / (2 * np.pi), np.nan)
        with np.errstate(divide="ignore", invalid="ignore"):
            q = np.where(good, -np.abs(pole) / (2 * pole.real), np.nan)
        return frequency, q, np.where(good, gain, np.nan)


def round_section(target: StageTarget, op_amp: OpAmp, stocks: Stocks, center: float, ambient: float) -> Section:
    """The best stocked values for a multiple-feedback section.

    Args:
        target: pole pair, and gain magnitude at the chain's centre.
        center: [Hz] of the chain; ambient: [degC].

    Raises:
        InfeasibleError: no stocked values realize the pole pair with this amplifier.
    """
    if target.center_frequency is None or target.q is None:
        raise InfeasibleError("a section needs a center frequency and a Q")
    bench = _bench(target, op_amp, stocks, center, ambient)
    c1, c2 = _capacitor_pairs(target.center_frequency, target.q, stocks)
    ideal, start, good = _fit_resistors(bench, target, c1, c2)
    if not good.any():
        raise InfeasibleError(
            f"no stocked parts make {format_si(target.center_frequency, 'Hz')} at Q {target.q:.3g} with "
            f"{op_amp.type}; allow a wider bandwidth, a faster amplifier or more capacitor values"
        )
    trial, start = _neighbourhood({k: v[good] for k, v in ideal.items()}, start[good], stocks)
    frequency, q, gain = bench.evaluate(trial, start)
    order, equals = _ranked(
        trial, frequency / target.center_frequency - 1, q / target.q - 1, gain / target.gain - 1, target, stocks
    )
    best = order[0]
    variants = tuple(
        Variant({key: float(trial[key][k]) for key in KEYS}, float(gain[k])) for k in order[: min(equals, MOST_VARIANTS)]
    )
    draft = Draft(multiple_feedback.TOPOLOGY, target, op_amp, variants[0].values)
    return Section(draft, float(frequency[best]), float(q[best]), float(gain[best]), variants)


def _bench(target: StageTarget, op_amp: OpAmp, stocks: Stocks, center: float, ambient: float) -> _Bench:
    capacitor = float(stocks.capacitors.values[stocks.capacitors.values.size // 2])
    f0, q = target.center_frequency, target.q
    assert f0 is not None
    assert q is not None
    r1a, r1b, r2 = (float(r) for r in _ideal(np.array(f0), np.array(q), np.array(target.gain), capacitor, capacitor))
    values = {"R1A": r1a, "R1B": r1b if r1b > 0 else r1a, "R2": r2, "C1": capacitor, "C2": capacitor}
    source = Surroundings(center, ambient, Sensor(scale=1.0, input_unit="V"), None, 0.0)
    chain = place([Draft(multiple_feedback.TOPOLOGY, target, op_amp, values)], stocks, source)
    slots = [slot.key for slot in multiple_feedback.TOPOLOGY.slots]
    refs = dict(zip(slots, chain.stages[0].parts, strict=True))
    return _Bench(chain, compile_network(circuit.build_network(chain), center), refs, center)


def _ideal(
    f: FloatArray, q: FloatArray, gain: FloatArray, c1: FloatArray | float, c2: FloatArray | float
) -> tuple[FloatArray, FloatArray, FloatArray]:
    return multiple_feedback.resistors(f, q, gain, np.asarray(c1), np.asarray(c2))


def _capacitor_pairs(frequency: float, q: float, stocks: Stocks) -> tuple[FloatArray, FloatArray]:
    """Every pair of stocked capacitors within a ratio of 4.7 whose resistors are within the stocked range.

    The first is what holds for equal capacitors: R2 = 2 Q/(w C), R1' = 1/(2 Q w C).
    """
    stocked, resistors = stocks.capacitors.values, stocks.resistors.values
    first, second = (grid.ravel() for grid in np.meshgrid(stocked, stocked, indexing="ij"))
    omega = 2 * np.pi * frequency
    r2 = q * (first + second) / (omega * first * second)
    shunt = 1 / (omega**2 * r2 * first * second)
    keep = (np.abs(np.log(first / second)) < math.log(4.8)) & (r2 < resistors[-1]) & (shunt > resistors[0])
    if not keep.any():
        raise InfeasibleError(
            f"no stocked capacitors make {format_si(frequency, 'Hz')} at Q {q:.3g} with resistors between "
            f"{format_si(float(resistors[0]), 'ohm')} and {format_si(float(resistors[-1]), 'ohm')}; "
            "allow a wider bandwidth or stock other capacitors"
        )
    return first[keep], second[keep]


def _fit_resistors(
    bench: _Bench, target: StageTarget, c1: FloatArray, c2: FloatArray
) -> tuple[dict[str, FloatArray], ComplexArray, NDArray[np.bool_]]:
    """Resistors that realize the target with the real amplifier: the design's target is bent until they do."""
    f0, q0 = target.center_frequency, target.q
    assert f0 is not None
    assert q0 is not None
    f, q, gain = (np.full(c1.shape, x) for x in (f0, q0, target.gain * _detuning(f0, q0, bench.center)))
    start = np.full(c1.shape, 2 * np.pi * f0 * complex(-0.5 / q0, math.sqrt(1 - 0.25 / q0**2)))
    error = np.full(c1.shape, np.inf)
    values: dict[str, FloatArray] = {}
    for _ in range(PREDISTORTIONS):
        r1a, r1b, r2 = _ideal(f, q, gain, c1, c2)
        possible = np.isfinite(r1b) & (r1b > 0)
        values = {"R1A": r1a, "R1B": np.where(possible, r1b, r1a), "R2": r2, "C1": c1, "C2": c2}
        got_f, got_q, got_gain = bench.evaluate(values, start)
        steps = [np.where(possible, x, np.nan) for x in (f0 / got_f, q0 / got_q, target.gain / got_gain)]
        error = np.maximum(np.abs(steps[0] - 1), np.abs(steps[1] - 1))
        with np.errstate(invalid="ignore"):
            f, q, gain = (np.where(np.isfinite(s), x * np.clip(s, 0.5, 2), x) for x, s in zip((f, q, gain), steps, strict=True))
    with np.errstate(invalid="ignore"):
        return values, start, np.isfinite(error) & (error < 1e-4)


def _detuning(frequency: float, q: float, center: float) -> float:
    """Peak gain of a section over its gain at the chain's centre."""
    return math.hypot(1.0, q * (frequency / center - center / frequency))


def _neighbourhood(
    ideal: dict[str, FloatArray], start: ComplexArray, stocks: Stocks
) -> tuple[dict[str, FloatArray], ComplexArray]:
    """All combinations of the nearest stocked resistors around each ideal set, in one row."""
    grid = stocks.resistors.values
    choices = []
    for key in ("R1A", "R1B", "R2"):
        distance = np.abs(np.log(grid[None, :] / ideal[key][:, None]))
        choices.append(grid[np.sort(np.argsort(distance, axis=1, kind="stable")[:, :NEIGHBOURS], axis=1)])
    picks = np.array(np.meshgrid(*[range(NEIGHBOURS)] * 3, indexing="ij")).reshape(3, -1)
    trial = {key: choices[k][:, picks[k]].ravel() for k, key in enumerate(("R1A", "R1B", "R2"))}
    for key in ("C1", "C2"):
        trial[key] = np.repeat(ideal[key], picks.shape[1])
    return trial, np.repeat(start, picks.shape[1])


def _ranked(
    trial: dict[str, FloatArray],
    frequency_error: FloatArray,
    q_error: FloatArray,
    gain_error: FloatArray,
    target: StageTarget,
    stocks: Stocks,
) -> tuple[NDArray[np.intp], int]:
    """Trials best first, and how many share the best's error class: error class, then how comfortable the impedance is, equal capacitors, plain error.

    Scores are quantised before they are compared, ties are broken by the values themselves.
    """
    frequency_spread, q_spread = _spreads(stocks)
    free_frequency = max(FREE_FREQUENCY, SPREAD_SHARE * frequency_spread)
    free_q = max(FREE_Q, SPREAD_SHARE * q_spread)
    measure = np.maximum(np.abs(frequency_error) / free_frequency, np.abs(q_error) / free_q)
    measure = np.maximum(measure, np.abs(gain_error) / FREE_GAIN)
    measure = np.where(np.isfinite(measure), measure, 1e9)
    grade = np.where(measure <= 1, 0, np.ceil(np.log2(np.maximum(measure, 1.0)) * 2))
    plain = np.round(measure, 3)
    unequal = trial["C1"] != trial["C2"]
    keys = (trial["C2"], trial["C1"], trial["R2"], trial["R1B"], trial["R1A"], plain, unequal, _comfort(trial, target), grade)
    order = np.lexsort(keys)
    if measure[order[0]] >= 1e9:
        raise InfeasibleError(f"no stocked values near {target} hold a pole pair; stock more values")
    return order, int(np.count_nonzero(grade == grade[order[0]]))


def _spreads(stocks: Stocks) -> tuple[float, float]:
    """Standard deviation of frequency and Q by tolerance alone, rectangular: f ~ (R R C C)^-1/2, Q ~ (R/R)^1/2."""
    r, c = stocks.resistors.tolerance, stocks.capacitors.tolerance
    return 0.5 * math.sqrt(2 * (r**2 + c**2) / 3), 0.5 * math.sqrt(2 * r**2 / 3)


def _comfort(trial: dict[str, FloatArray], target: StageTarget) -> NDArray[np.intp]:
    """How far the impedance level is from comfortable: 0 is good, each limit passed adds to it.

    Limits: a trimmable shunt, a feedback resistor not in the stray's reach, capacitors large against strays
    (2 Q^2 C3/C, design rule of high-Q sections), a load the amplifier drives easily.
    """
    q, f0 = target.q, target.center_frequency
    assert q is not None
    assert f0 is not None
    c = np.minimum(trial["C1"], trial["C2"])
    stray = 2 * q**2 * 0.14e-12 / c
    load = 1 / (2 * np.pi * f0 * np.maximum(trial["C1"], trial["C2"]))
    penalty = np.zeros(c.shape, dtype=np.intp)
    for values, limits in (
        (100 / trial["R1B"], (1, 2, 4, 4, 8, 8)),
        (trial["R2"] / 330e3, (1, 2, 4)),
        (500 / load, (1, 2, 4)),
    ):
        for limit in limits:  # a limit named twice weighs twice
            penalty += values > limit
    for limit in (0.03, 0.06, 0.12, 0.25):
        penalty += stray > limit
    return penalty
