"""A section on its own, compiled, so that thousands of values can be tried on the real amplifier at once."""

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
from synth.spec import Sensor
from synth.topology import SectionTopology
from synth.topology.place import Draft, Stocks, Surroundings, place

PREDISTORTIONS = 12
FITTED = 1e-4  # of frequency and Q: a fit no better than this has failed


@dataclass(frozen=True, slots=True)
class Trial:
    """A compiled section between an ideal source and nothing.

    Attributes:
        topology, target, stocks: what is tried, and from what.
        chain: the section as a chain of one stage; refs: reference of each passive slot.
        center: [Hz] of the chain it is for.
    """

    topology: SectionTopology
    target: StageTarget
    stocks: Stocks
    chain: Chain
    program: Program
    refs: Mapping[str, str]
    center: float

    @property
    def frequency(self) -> float:
        """Wanted natural frequency [Hz]."""
        assert self.target.center_frequency is not None
        return self.target.center_frequency

    @property
    def q(self) -> float:
        """Wanted quality factor."""
        assert self.target.q is not None
        return self.target.q

    def evaluate(
        self, values: Mapping[str, FloatArray], start: ComplexArray
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Realized frequency [Hz], Q and gain magnitude at the chain's centre; NaN where no pole was found."""
        table = circuit.build_values(self.chain, {ref: values[key] for key, ref in self.refs.items()})
        pole, found = track_pole(self.program, table, start)
        numerator, determinant = run(self.program, table, np.array([[2j * np.pi * self.center]]))
        gain = np.abs(numerator[0] / determinant[0])
        good = found & (pole.imag > 0) & (pole.real < 0)
        frequency = np.where(good, np.abs(pole) / (2 * np.pi), np.nan)
        with np.errstate(divide="ignore", invalid="ignore"):
            q = np.where(good, -np.abs(pole) / (2 * pole.real), np.nan)
        return frequency, q, np.where(good, gain, np.nan)

    def fit(
        self, capacitors: Mapping[str, FloatArray], rank: int = 0
    ) -> tuple[dict[str, FloatArray], NDArray[np.bool_]]:
        """Resistors that realize the target with the real amplifier, and for which sets they were found.

        The resistors that are not tuned are taken from stock first; then the target given to the ideal equations is
        bent until the realized pole pair and gain are the wanted ones.

        Args:
            rank: 0 takes the nearest stocked value for each resistor that is not tuned, 1 the next nearest.
        """
        count = next(iter(capacitors.values())).shape
        wanted = (self.frequency, self.q, self.target.gain)
        peak = self.target.gain * math.hypot(1, self.q * (self.frequency / self.center - self.center / self.frequency))
        f, q, gain = (np.full(count, x) for x in (self.frequency, self.q, peak))
        fixed = self.topology.fixed(f, q, gain, capacitors)
        given = {**capacitors, **{key: _nearest(value, self.stocks, rank) for key, value in fixed.items()}}
        error, values = np.full(count, np.inf), dict(given)
        for _ in range(PREDISTORTIONS):
            with np.errstate(all="ignore"):  # what the section cannot do is marked, not warned of
                tuned = self.topology.solve(f, q, gain, given)
                possible = np.all([np.isfinite(v) & (v > 0) for v in tuned.values()], axis=0)
                values = {**given, **{key: np.where(possible, v, 1e3) for key, v in tuned.items()}}
                got = self.evaluate(values, self.start(count))
                steps = [np.where(possible, want / x, np.nan) for want, x in zip(wanted, got, strict=True)]
                error = np.maximum(np.abs(steps[0] - 1), np.abs(steps[1] - 1))
                factors = [np.where(np.isfinite(s), np.clip(s, 0.5, 2), 1.0) for s in steps]
            f, q, gain = f * factors[0], q * factors[1], gain * factors[2]
        return values, np.isfinite(error) & (np.nan_to_num(error, nan=np.inf) < FITTED)

    def start(self, shape: tuple[int, ...]) -> ComplexArray:
        """The wanted pole [rad/s], where the search for the realized one starts."""
        pole = 2 * np.pi * self.frequency * complex(-0.5 / self.q, math.sqrt(max(1 - 0.25 / self.q**2, 1e-6)))
        return np.full(shape, pole)


def _nearest(values: FloatArray, stocks: Stocks, rank: int) -> FloatArray:
    grid: FloatArray = stocks.resistors.values
    distance = np.abs(np.log(grid[None, :] / values[:, None]))
    chosen: FloatArray = grid[np.argsort(distance, axis=1, kind="stable")[:, min(rank, grid.size - 1)]]
    return chosen


def make_trial(
    topology: SectionTopology, target: StageTarget, op_amp: OpAmp, stocks: Stocks, center: float, ambient: float
) -> Trial:
    """Compile a section.

    Raises:
        InfeasibleError: the target has no pole pair.
    """
    if target.center_frequency is None or target.q is None:
        raise InfeasibleError("a section needs a center frequency and a Q")
    typical = {key: np.array([float(np.median(stocks.capacitors.values))]) for key in topology.capacitors}
    f, q, gain = np.array([target.center_frequency]), np.array([target.q]), np.array([target.gain])
    values = {**typical, **topology.fixed(f, q, gain, typical)}
    values.update({key: np.where(v > 0, v, 1e3) for key, v in topology.solve(f, q, gain, values).items()})
    source = Surroundings(center, ambient, Sensor(scale=1.0, input_unit="V"), None, 0.0)
    draft = Draft(topology, target, op_amp, {key: float(v[0]) for key, v in values.items()})
    chain = place([draft], stocks, source)
    passive = [
        (slot.key, ref)
        for slot, ref in zip(topology.slots, chain.stages[0].parts, strict=True)
        if slot.kind != "op-amp"
    ]
    program = compile_network(circuit.build_network(chain), center)
    return Trial(topology, target, stocks, chain, program, dict(passive), center)
