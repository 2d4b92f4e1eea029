"""Ranges and yields of the requirements over drawn builds."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from synth.circuit.network import FloatArray
from synth.model.chain import Chain
from synth.model.judgement import Builds, BuildYield, Requirement
from synth.quantity import format_percent
from synth.spec import Spec
from synth.verification.builds.intervals import tolerance_range, yield_interval
from synth.verification.builds.statistics import statistics

OUTPUT = "output at full scale"
TRIMMED, UNTRIMMED = "gain trimmed", "untrimmed"
MOST_CAUSES = 5


def judge_builds(
    chain: Chain, spec: Spec, requirements: tuple[Requirement, ...], count: int, seed: int
) -> tuple[tuple[Requirement, ...], Builds]:
    """Requirements with their ranges over builds and the yield among them, and the yields one by one.

    The level at the output is what calibration makes good: it counts only where the spec trims nothing and asks an
    accuracy.

    Raises:
        CircuitError: a build's circuit is singular.
    """
    drawn = statistics(chain, spec, count, seed)
    trim = trim_state(spec)
    everything: NDArray[np.bool_] = np.ones(count, dtype=bool)
    judged, yields = [], []
    for requirement in requirements:
        values = drawn.figures.get(requirement.name)
        if values is None or requirement.met is None:
            judged.append(requirement)
            continue
        good = meets(requirement, values)
        counted = requirement.name != OUTPUT or (trim == UNTRIMMED and spec.target.accuracy is not None)
        if counted:
            everything &= good
        span = tolerance_range(values) if np.isfinite(values).all() else None
        low, high = span if span is not None else (None, None)
        judged.append(replace(requirement, low=low, high=high))
        passed = int(good.sum())
        causes = drawn.shares[requirement.name][:MOST_CAUSES]
        yields.append(
            BuildYield(requirement.name, counted, passed / count, *yield_interval(passed, count), causes)
        )
    passed = int(everything.sum())
    builds = Builds(count, seed, trim, passed / count, *yield_interval(passed, count), tuple(yields))
    return (*judged, yield_requirement(spec, builds)), builds


def trim_state(spec: Spec) -> str:
    """Whether builds are judged with their gain trimmed, or recorded, as the spec's calibration does."""
    calibration = spec.calibration
    untrimmed = calibration is not None and calibration.trim == "none" and calibration.correction is None
    return UNTRIMMED if untrimmed else TRIMMED


def meets(requirement: Requirement, values: FloatArray) -> NDArray[np.bool_]:
    """Which builds lie inside a requirement's limits; a build without a figure does not."""
    good: NDArray[np.bool_] = np.isfinite(values)
    if requirement.at_least is not None:
        good &= np.where(good, values, -np.inf) >= requirement.at_least
    if requirement.at_most is not None:
        good &= np.where(good, values, np.inf) <= requirement.at_most
    return good


def yield_requirement(spec: Spec, builds: Builds) -> Requirement:
    """The share of builds that meets everything, against what the spec requires [%]."""
    asked, reached = 100 * spec.target.required_yield, 100 * builds.share
    note = f"of {builds.count} builds, {builds.trim}; {format_percent(builds.low)} to {format_percent(builds.high)}"
    return Requirement(
        "yield", "%", asked, None, reached, margin=reached - asked, met=bool(reached >= asked), note=note
    )
