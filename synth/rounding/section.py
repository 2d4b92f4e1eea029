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

from synth.circuit.network import FloatArray
from synth.errors import InfeasibleError
from synth.model.chain import StageTarget
from synth.model.part import OpAmp
from synth.quantity import format_si
from synth.rounding.trial import Trial, make_trial
from synth.topology import SectionTopology, multiple_feedback
from synth.topology.place import Draft, Stocks

FREE_FREQUENCY, FREE_Q, FREE_GAIN = 5e-4, 5e-3, 0.06  # errors that cost nothing; the chain's gain is trimmed elsewhere
SPREAD_SHARE = 0.1  # an error below this share of what tolerance spreads is free, too
NEIGHBOURS = 3
FIXED_RANKS = 4  # stocked values tried for a resistor that is not tuned, the next one where none before is good
LARGEST_RATIO = 4.8  # of the two capacitors
MOST_VARIANTS = 60
STRAY = 0.14e-12  # [F] across the feedback: a resistor's body and the amplifier's pins
UNKNOWN = 1e9


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


def round_section(
    target: StageTarget,
    op_amp: OpAmp,
    stocks: Stocks,
    center: float,
    ambient: float,
    topology: SectionTopology = multiple_feedback.TOPOLOGY,
) -> Section:
    """The best stocked values for a section.

    Args:
        target: pole pair, and gain magnitude at the chain's centre.
        center: [Hz] of the chain; ambient: [degC].

    Raises:
        InfeasibleError: no stocked values realize the pole pair with this amplifier.
    """
    trial = make_trial(topology, target, op_amp, stocks, center, ambient)
    pairs = _capacitor_pairs(trial, op_amp)
    has_fixed = len(topology.tuned) + len(topology.capacitors) + topology.amplifiers < len(topology.slots)
    values: dict[str, FloatArray] = {}
    for rank in range(FIXED_RANKS if has_fixed else 1):
        found = _candidates(trial, pairs, rank)
        values = {key: np.concatenate([values.get(key, v[:0]), v]) for key, v in found.items()}
        if values[topology.tuned[0]].size == 0:
            continue
        frequency, q, gain = trial.evaluate(values, trial.start(values[topology.tuned[0]].shape))
        order, equals, good = _ranked(values, (frequency, q, gain), trial, op_amp)
        if good:
            break
    if values[topology.tuned[0]].size == 0:
        raise InfeasibleError(
            f"no stocked parts make {format_si(trial.frequency, 'Hz')} at Q {trial.q:.3g} with {op_amp.type} in a "
            f"{topology.title} section; allow a wider bandwidth, a faster amplifier or more capacitor values"
        )
    best = order[0]
    variants = tuple(
        Variant({key: float(v[k]) for key, v in values.items()}, float(gain[k]))
        for k in order[: min(equals, MOST_VARIANTS)]
    )
    draft = Draft(topology, target, op_amp, variants[0].values)
    return Section(draft, float(frequency[best]), float(q[best]), float(gain[best]), variants)


def _candidates(trial: Trial, pairs: Mapping[str, FloatArray], rank: int) -> dict[str, FloatArray]:
    """Stocked values around the fitted ones of every capacitor pair, none where none fits; `rank` as in `Trial.fit`."""
    ideal, fitted = trial.fit(pairs, rank)
    in_stock = fitted & _within_stock(ideal, trial)
    return _neighbourhood({key: v[in_stock] for key, v in ideal.items()}, trial)


def _capacitor_pairs(trial: Trial, op_amp: OpAmp) -> dict[str, FloatArray]:
    """Every pair of stocked capacitors within a ratio whose ideal resistors are within the stocked range."""
    stocked = trial.stocks.capacitors.values
    first, second = (grid.ravel() for grid in np.meshgrid(stocked, stocked, indexing="ij"))
    near = np.abs(np.log(first / second)) < math.log(LARGEST_RATIO)
    keys = trial.topology.capacitors
    pairs = dict(zip(keys, (first[near], second[near]), strict=True))
    f, q, gain = (np.full(pairs[keys[0]].shape, x) for x in (trial.frequency, trial.q, trial.target.gain))
    with np.errstate(all="ignore"):
        resistors = dict(trial.topology.fixed(f, q, gain, pairs))
        resistors.update(trial.topology.solve(f, q, gain, {**pairs, **resistors}))
        keep = _within_stock(resistors, trial)
    if not keep.any():
        low, high = (format_si(float(r), "ohm") for r in trial.stocks.resistors.values[[0, -1]])
        raise InfeasibleError(
            f"no stocked capacitors make {format_si(trial.frequency, 'Hz')} at Q {trial.q:.3g} in a "
            f"{trial.topology.title} section with {op_amp.type} and resistors between {low} and {high}; "
            "allow a wider bandwidth or stock other capacitors"
        )
    return {key: values[keep] for key, values in pairs.items()}


def _within_stock(values: Mapping[str, FloatArray], trial: Trial) -> NDArray[np.bool_]:
    grid, capacitors = trial.stocks.resistors.values, trial.topology.capacitors
    resistors = np.array([v for key, v in values.items() if key not in capacitors])
    inside: NDArray[np.bool_] = np.all(
        np.isfinite(resistors) & (resistors >= grid[0] * 0.99) & (resistors <= grid[-1] * 1.01), axis=0
    )
    return inside


def _neighbourhood(ideal: Mapping[str, FloatArray], trial: Trial) -> dict[str, FloatArray]:
    """All combinations of the nearest stocked resistors around each ideal set, in one row."""
    grid, tuned = trial.stocks.resistors.values, trial.topology.tuned
    near = min(NEIGHBOURS, grid.size)
    picks = np.array(np.meshgrid(*[range(near)] * len(tuned), indexing="ij")).reshape(len(tuned), -1)
    values = {}
    for key, v in ideal.items():
        if key not in tuned:
            values[key] = np.repeat(v, picks.shape[1])
            continue
        distance = np.abs(np.log(grid[None, :] / v[:, None]))
        choices = grid[np.sort(np.argsort(distance, axis=1, kind="stable")[:, :near], axis=1)]
        values[key] = choices[:, picks[tuned.index(key)]].ravel()
    return values


def _ranked(
    values: Mapping[str, FloatArray],
    realized: tuple[FloatArray, FloatArray, FloatArray],
    trial: Trial,
    op_amp: OpAmp,
) -> tuple[NDArray[np.intp], int, bool]:
    """Trials best first, how many share the best's error class, and whether its error costs nothing.

    The order is by error class, then how comfortable the impedance is, equal capacitors, plain error.  Scores are
    quantised before they are compared, ties are broken by the values themselves.

    Args:
        realized: frequency [Hz], Q, gain magnitude at the chain's centre.
    """
    wanted = (trial.frequency, trial.q, trial.target.gain)
    errors = [got / want - 1 for got, want in zip(realized, wanted, strict=True)]
    free_frequency, free_q = free_errors(trial.stocks)
    measure = np.maximum(np.abs(errors[0]) / free_frequency, np.abs(errors[1]) / free_q)
    measure = np.maximum(measure, np.abs(errors[2]) / FREE_GAIN)
    measure = np.where(np.isfinite(measure), measure, UNKNOWN)
    grade = np.where(measure <= 1, 0, np.ceil(np.log2(np.maximum(measure, 1.0)) * 2))
    first, second = (values[key] for key in trial.topology.capacitors)
    keys = (*values.values(), np.round(measure, 3), first != second, _discomfort(values, trial, op_amp), grade)
    order = np.lexsort(keys)
    if measure[order[0]] >= UNKNOWN:
        raise InfeasibleError(
            f"no stocked values near {format_si(trial.frequency, 'Hz')} and Q {trial.q:.3g} hold a pole pair with "
            f"{op_amp.type}; stock more values"
        )
    return order, int(np.count_nonzero(grade == grade[order[0]])), bool(grade[order[0]] == 0)


def free_errors(stocks: Stocks) -> tuple[float, float]:
    """Errors of frequency and Q that cost nothing: a fixed floor, or a tenth of what tolerance spreads.

    Standard deviations, rectangular, f ~ (R R C C)^-1/2 and Q ~ (R/R)^1/2.
    """
    r, c = stocks.resistors.tolerance, stocks.capacitors.tolerance
    frequency, q = 0.5 * math.sqrt(2 * (r**2 + c**2) / 3), 0.5 * math.sqrt(2 * r**2 / 3)
    return max(FREE_FREQUENCY, SPREAD_SHARE * frequency), max(FREE_Q, SPREAD_SHARE * q)


def _discomfort(values: Mapping[str, FloatArray], trial: Trial, op_amp: OpAmp) -> NDArray[np.intp]:
    """How far the impedance level is from comfortable: 0 is good, each limit passed adds to it.

    Limits: resistors that can be trimmed, and not in the strays' reach; a load the amplifier drives easily;
    capacitors large against strays, which cost 2 Q^2 C3/C of Q in a multiple-feedback section; current noise over
    the largest resistor against voltage noise.
    """
    capacitors = [values[key] for key in trial.topology.capacitors]
    resistors = [v for key, v in values.items() if key not in trial.topology.capacitors]
    largest, f0, noise_gain = np.max(resistors, axis=0), trial.frequency, trial.topology.noise_gain(trial.q)
    load = 1 / (2 * np.pi * f0 * np.max(capacitors, axis=0))
    current = math.hypot(
        op_amp.current_noise * math.sqrt(1 + op_amp.current_noise_corner / f0), op_amp.current_noise_slope * f0
    )
    penalty = np.zeros(largest.shape, dtype=np.intp)
    for measure, limits in (
        (100 / np.min(resistors, axis=0), (1.0, 2.0, 4.0, 4.0, 8.0, 8.0)),
        (largest / 330e3, (1.0, 2.0, 4.0)),
        (500 / load, (1.0, 2.0, 4.0)),
        (noise_gain * STRAY / np.min(capacitors, axis=0), (0.03, 0.06, 0.12, 0.25)),
        (current * largest * trial.q / (noise_gain * op_amp.voltage_noise), (2.0, 4.0, 8.0)),
    ):
        for limit in limits:  # a limit named twice weighs twice
            penalty += measure > limit
    return penalty
