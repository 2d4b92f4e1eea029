"""Sections on the stocked grid: design targets on random requests, realized values recomputed, brute force."""

from __future__ import annotations

import itertools
import math
from dataclasses import replace

import numpy as np
import pytest

from synth import circuit
from synth.errors import InfeasibleError
from synth.model.chain import StageTarget
from synth.rounding import Section, round_section
from synth.rounding.section import free_errors
from synth.topology import multiple_feedback
from synth.topology.place import Draft, Stocks, place
from tests.support.networks import FloatArray, around, dense, pole_pair, stocks, stray_op_amp

FINE, COARSE = stocks("E96", "E12"), stocks("E24", "E6")
MODEL = stray_op_amp(gain_bandwidth=150e6, second_pole=500e6, dc_gain=3e5)
KEYS = ("R1A", "R1B", "R2", "C1", "C2")


def tolerance_spread(stock: Stocks) -> float:
    """Standard deviation of f0 by tolerance alone, rectangular: half the root of the sum of t^2/3 of R R C C."""
    return 0.5 * math.sqrt(2 * (stock.resistors.tolerance**2 + stock.capacitors.tolerance**2) / 3)


def realized(section: Section, stock: Stocks, center: float) -> tuple[float, float, float]:
    """Frequency, Q and gain at the centre, from the poles and the response of the placed section's circuit."""
    network = circuit.build_network(place([section.draft], stock, around(center)))
    frequency, q = pole_pair(network, section.frequency)
    return frequency, q, float(abs(circuit.response(network, [center])[0]))


def random_target(seed: int) -> StageTarget:
    rng = np.random.default_rng(seed)
    frequency, q = 10 ** rng.uniform(math.log10(3e3), math.log10(300e3)), rng.uniform(2, 20)
    return StageTarget(float(rng.uniform(0.5, 3)), 1.0, float(frequency), float(q))


@pytest.mark.parametrize("seed", range(24))
def test_random_targets_are_met(seed: int) -> None:
    """f0 within 0.05 % or a tenth of what tolerance spreads, Q within 0.5 %, with E96 and E12."""
    target = random_target(seed)
    assert target.center_frequency is not None
    assert target.q is not None
    section = round_section(target, MODEL, FINE, target.center_frequency, 27.0)
    frequency, q, gain = realized(section, FINE, target.center_frequency)
    assert (section.frequency, section.q, section.gain) == pytest.approx((frequency, q, gain), rel=1e-7)
    assert abs(frequency / target.center_frequency - 1) <= max(5e-4, 0.1 * tolerance_spread(FINE)) * (1 + 1e-6)
    assert abs(q / target.q - 1) <= 5e-3 * (1 + 1e-6)
    assert gain == pytest.approx(target.gain, rel=0.06)


@pytest.mark.parametrize("seed", range(4))
def test_values_are_stocked(seed: int) -> None:
    target = random_target(seed)
    assert target.center_frequency is not None
    values = round_section(target, MODEL, FINE, target.center_frequency, 27.0).draft.values
    assert set(values) == set(KEYS)
    for key, value in values.items():
        grid = FINE.resistors.values if key[0] == "R" else FINE.capacitors.values
        assert value in grid


@pytest.mark.parametrize("offset", [-0.02, 0.03])
def test_gain_is_asked_for_at_the_centre_of_the_chain(offset: float) -> None:
    """A pair off the chain's centre, as in a staggered filter."""
    target = StageTarget(1.0, 1.0, 100e3 * (1 + offset), 15.0)
    section = round_section(target, MODEL, FINE, 100e3, 27.0)
    frequency, q, gain = realized(section, FINE, 100e3)
    assert frequency == pytest.approx(100e3 * (1 + offset), rel=6e-4)
    assert q == pytest.approx(15.0, rel=5e-3)
    assert gain == pytest.approx(1.0, rel=0.06)


def test_variants_realize_the_section_as_well() -> None:
    target = random_target(3)
    assert target.center_frequency is not None
    assert target.q is not None
    section = round_section(target, MODEL, FINE, target.center_frequency, 27.0)
    assert section.variants[0].values == section.draft.values
    for variant in section.variants[:20]:
        draft = replace(section.draft, values=variant.values)
        other = replace(section, draft=draft)
        frequency, q, gain = realized(other, FINE, target.center_frequency)
        assert gain == pytest.approx(variant.gain, rel=1e-7)
        assert abs(frequency / target.center_frequency - 1) <= 1e-3
        assert abs(q / target.q - 1) <= 6e-3


def test_the_same_request_gives_the_same_parts() -> None:
    target = random_target(5)
    assert target.center_frequency is not None
    first, second = (round_section(target, MODEL, FINE, target.center_frequency, 27.0) for _ in range(2))
    assert first == second


def pole_pairs(section_values: list[dict[str, float]], stock: Stocks, center: float) -> FloatArray:
    """(frequency, Q, gain at the centre) of many value sets, by dense eigenvalues of each circuit; NaN: no pair."""
    draft = Draft(multiple_feedback.TOPOLOGY, StageTarget(1.0, 1.0, center, 5.0), MODEL, section_values[0])
    chain = place([draft], stock, around(center))
    slots = [slot.key for slot in multiple_feedback.TOPOLOGY.slots]
    refs = dict(zip(slots, chain.stages[0].parts, strict=True))
    drawn = {refs[key]: np.array([values[key] for values in section_values]) for key in KEYS}
    network, table = circuit.build_network(chain), circuit.build_values(chain, drawn)
    G = dense(network, table, 0.0)[0].real.astype(float)
    at_one = dense(network, table, 1.0)[0].real.astype(float)
    omega = 2 * np.pi * center
    C, shift = (at_one - G) * omega, 0.7
    spectrum = np.linalg.eigvals(np.linalg.solve(G + shift * C, C))
    with np.errstate(all="ignore"):
        s = shift - 1 / spectrum
        s = np.where((s.imag > 0) & np.isfinite(s), s, np.nan)
        index = np.nanargmin(np.abs(np.log(np.abs(s))), axis=1)
    pole = s[np.arange(len(section_values)), index]
    Y, b = dense(network, table, 1j * omega)
    x = np.linalg.solve(Y.astype(complex), b.astype(complex)[:, :, None])[:, network.unknowns.index("out"), 0]
    return np.stack([np.abs(pole) * center, -np.abs(pole) / (2 * pole.real), np.abs(x)], axis=1)


@pytest.mark.parametrize(("frequency", "q", "gain"), [(20e3, 4.0, 1.0), (47e3, 8.0, 2.0), (100e3, 12.0, 1.0)])
def test_no_better_error_class_in_a_brute_force_search(frequency: float, q: float, gain: float) -> None:
    """E24 and E6: every capacitor pair of a ratio up to 4.7, five resistors around each ideal one of its equations.

    The class is 0 where frequency, Q and gain errors cost nothing, then a step for each half octave of the largest.
    """
    target = StageTarget(gain, 1.0, frequency, q)
    section = round_section(target, MODEL, COARSE, frequency, 27.0)
    free_frequency, free_q = free_errors(COARSE)

    def grade(found: FloatArray) -> FloatArray:
        errors = np.abs(found / [frequency, q, gain] - 1) / [free_frequency, free_q, 0.06]
        measure = errors.max(axis=1)
        grades: FloatArray = np.where(measure <= 1, 0, np.ceil(np.log2(np.maximum(measure, 1.0)) * 2))
        return np.where(np.isfinite(measure), grades, np.inf)

    grid, sets = COARSE.resistors.values, []
    for c1, c2 in itertools.product(COARSE.capacitors.values, repeat=2):
        ideal = [float(r) for r in multiple_feedback.resistors(frequency, q, gain, c1, c2)]
        if max(c1 / c2, c2 / c1) > 4.75 or not all(grid[0] <= r <= grid[-1] for r in ideal):
            continue
        nearest = [grid[np.argsort(np.abs(np.log(grid / r)))[:5]] for r in ideal]
        for r1a, r1b, r2 in itertools.product(*nearest):
            sets.append({"R1A": r1a, "R1B": r1b, "R2": r2, "C1": c1, "C2": c2})
    assert len(sets) > 1000
    best = float(grade(pole_pairs(sets, COARSE, frequency)).min())
    got = float(grade(np.array([realized(section, COARSE, frequency)]))[0])
    assert got <= best


def test_a_pair_that_no_capacitors_make() -> None:
    with pytest.raises(InfeasibleError, match=r"no stocked capacitors make 1 Hz at Q 20 .* allow a wider band"):
        round_section(StageTarget(1.0, 1.0, 1.0, 20.0), MODEL, FINE, 1.0, 27.0)


def test_an_amplifier_that_is_too_slow() -> None:
    slow = stray_op_amp(gain_bandwidth=1e6, second_pole=None, dc_gain=1e5)
    with pytest.raises(InfeasibleError, match=r"no stocked parts make 300 kHz at Q 15 with TEST .* a faster amplifier"):
        round_section(StageTarget(1.0, 1.0, 300e3, 15.0), slow, FINE, 300e3, 27.0)


@pytest.mark.parametrize(("frequency", "q"), [(None, 5.0), (1e4, None)])
def test_a_section_without_a_pole_pair(frequency: float | None, q: float | None) -> None:
    with pytest.raises(InfeasibleError, match="a section needs a center frequency and a Q"):
        round_section(StageTarget(1.0, 1.0, frequency, q), MODEL, FINE, 1e4, 27.0)


def test_free_errors_are_the_floor_or_a_tenth_of_the_spread() -> None:
    assert free_errors(FINE)[0] == pytest.approx(max(5e-4, 0.1 * tolerance_spread(FINE)))
    assert free_errors(COARSE)[0] == pytest.approx(max(5e-4, 0.1 * tolerance_spread(COARSE)))
    assert free_errors(FINE)[1] == pytest.approx(5e-3)
