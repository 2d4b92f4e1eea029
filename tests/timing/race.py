"""Builds of a six-amplifier chain at 201 frequencies: the batch engine against two simulators, one core each.

Every contender gets the same builds: all resistors, capacitors and gain-bandwidth products drawn.  neospice keeps one
loaded circuit whose values are changed through its API; ngspice runs all builds in one process through a script of
`alter` and `ac lin 201`, and its start is subtracted.  The rounds are interleaved, medians are compared.
"""

from __future__ import annotations

import os
import statistics
import subprocess
import tempfile
import time
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import neospice
import numpy as np
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits

from synth import api, circuit
from synth.model.chain import Chain
from tests.spice.comparison import DEMO
from tests.support.simulators import TIMEOUT, ngspice_program

POINTS = 201
AMPLIFIERS = 6
ENGINE_BUILDS, NEOSPICE_BUILDS, NGSPICE_BUILDS = 2000, 60, 60


@dataclass(frozen=True, slots=True)
class Race:
    """Seconds for one build: medians over the rounds; disagreement: largest relative difference of the responses."""

    engine: float
    neospice: float
    ngspice: float
    disagreement: float


def six_amplifiers() -> api.Design:
    """The demo with three sections."""
    text = DEMO.read_text(encoding="utf-8") + "\n[filter]\nsections = 3\n"
    design = api.design(api.parse_spec(text), builds=0)
    assert len(design.network().amplifiers) == AMPLIFIERS
    return design


def drawn(chain: Chain, builds: int, seed: int = 5) -> dict[str, NDArray[np.float64]]:
    """Parts inside their tolerance and gain-bandwidth products inside their spread, rectangular."""
    generator = np.random.default_rng(seed)
    found = {}
    for part in chain.parts:
        if part.kind == "op-amp":
            model = chain.models[str(part.value)]
            spread = generator.uniform(-1, 1, builds) * model.gain_bandwidth_spread
            found[f"{part.ref}.gain_bandwidth"] = model.gain_bandwidth * (1 + spread)
        else:
            found[part.ref] = part.number * (1 + generator.uniform(-1, 1, builds) * part.tolerance)
    return found


def changes(network: circuit.Network, values: NDArray[np.float64]) -> list[list[tuple[str, float]]]:
    """For each build the netlist's elements that differ between builds, with their values in ohm and farad."""
    moving = [k for k in range(values.shape[0]) if np.ptp(values[k]) > 0]
    found = []
    for build in range(values.shape[1]):
        one = []
        for k in moving:
            element, value = network.elements[k], float(values[k, build])
            letter, number = ("C", value) if element.kind == "capacitance" else ("R", 1 / value)
            assert element.kind == "capacitance" or element.noisy, element
            one.append((element.name if element.name.startswith(letter) else letter + element.name, number))
        found.append(one)
    return found


def run_race(rounds: int = 7, neospice_builds: int = NEOSPICE_BUILDS, ngspice_builds: int = NGSPICE_BUILDS) -> Race:
    """Race the three, interleaved."""
    design = six_amplifiers()
    network, chain = design.network(), design.chain
    netlist = api.netlist(design, with_noise=False)
    f0, band = chain.center_frequency, design.spec.target.bandwidth
    f = np.linspace(f0 - band, f0 + band, POINTS)
    values = circuit.build_values(chain, drawn(chain, ENGINE_BUILDS))
    altered = changes(network, values[:, : max(neospice_builds, ngspice_builds)])
    times: dict[str, list[float]] = {"engine": [], "neospice": [], "ngspice": []}
    with threadpool_limits(limits=1):
        for _ in range(rounds):
            start = time.perf_counter()
            responses = circuit.batch_response(network, values, f)
            times["engine"].append((time.perf_counter() - start) / values.shape[1])
            second, seconds = _neospice(netlist, altered[:neospice_builds], f)
            times["neospice"].append(seconds)
            third, seconds = _ngspice(netlist, altered[:ngspice_builds], f)
            times["ngspice"].append(seconds)
    pairs = ((second, responses[:, neospice_builds - 1]), (third, responses[:, ngspice_builds - 1]))
    disagreement = max(float(np.abs(h / engine - 1).max()) for h, engine in pairs)
    median = {name: statistics.median(found) for name, found in times.items()}
    return Race(median["engine"], median["neospice"], median["ngspice"], disagreement)


def _neospice(
    netlist: str, altered: Sequence[Sequence[tuple[str, float]]], f: NDArray[np.float64]
) -> tuple[NDArray[np.complex128], float]:
    """Response of the last build, and seconds for one."""
    simulator = neospice.Simulator()
    loaded = simulator.parse(netlist)
    low, high, mode = float(f[0]), float(f[-1]), neospice.ACMode.LIN
    simulator.run_ac(loaded, mode, f.size, low, high)
    start = time.perf_counter()
    for build in altered:
        for name, value in build:
            loaded.update_param(name, value)
        last = simulator.re_solve_ac(loaded, mode, f.size, low, high)
    seconds = (time.perf_counter() - start) / len(altered)
    return last.voltage("out"), seconds


def _ngspice(
    netlist: str, altered: Sequence[Sequence[tuple[str, float]]], f: NDArray[np.float64]
) -> tuple[NDArray[np.complex128], float]:
    """Response of the last build, and seconds for one: the time of all but that of a run of one, over the rest."""
    lines = [line for line in netlist.splitlines() if not line.startswith((".ac", ".end"))]
    analysis = f"ac lin {f.size} {float(f[0])!r} {float(f[-1])!r}"

    def script(builds: Sequence[Sequence[tuple[str, float]]]) -> str:
        commands = [".control", "save v(out)"]
        for build in builds:
            commands += ["destroy all"]
            commands += [f"alter {name} = {value!r}" for name, value in build]
            commands += [analysis]
        commands += ["set wr_singlescale", "option numdgt=15", "wrdata last.txt v(out)", "quit 0", ".endc", ".end"]
        return "\n".join(lines + commands) + "\n"

    with tempfile.TemporaryDirectory(prefix="ngspice-") as name:
        folder = Path(name)
        one, _ = _timed(folder, script(altered[-1:]))
        all_of_them, table = _timed(folder, script(altered))
    return table[:, 1] + 1j * table[:, 2], (all_of_them - one) / (len(altered) - 1)


def _timed(folder: Path, script: str) -> tuple[float, NDArray[np.float64]]:
    (folder / "race.cir").write_text(script)
    environment = os.environ | {"HOME": str(folder), "SPICE_SCRIPTS": str(folder), "OMP_NUM_THREADS": "1"}
    start = time.perf_counter()
    subprocess.run(
        [ngspice_program(), "-n", "-b", "race.cir"],
        cwd=folder,
        env=environment,
        stdin=subprocess.DEVNULL,
        capture_output=True,
        timeout=TIMEOUT,
        check=True,
    )
    return time.perf_counter() - start, np.loadtxt(folder / "last.txt")
