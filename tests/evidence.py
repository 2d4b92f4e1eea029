"""Recorded runs: what was measured against what was aimed at, in tests/evidence.toml.

    python -m tests.evidence              reruns all and rewrites the file (about ten minutes)
    python -m tests.evidence speed help   reruns two of them and rewrites their entries
    pytest -m long                        the same as the first, as tests

Speeds are recorded as ratios of times taken in one run, so that another machine can compare.
"""

from __future__ import annotations

import argparse
import datetime
import math
import sys
import tempfile
import tomllib
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np
import tomli_w
from numpy.typing import NDArray
from scipy.optimize import linear_sum_assignment

from synth import api, circuit
from tests.long.killed import kill_designs
from tests.spice.comparison import (
    GAIN_DB,
    LEAST_DESIGNED,
    NOISE_SHARE,
    PHASE_DEG,
    Designs,
    Differences,
    Makings,
    array_of,
    folder_differences,
    processes,
    read_json,
    with_grounded_reference,
)
from tests.support.networks import reference_response
from tests.support.simulators import SIMULATORS
from tests.support.specs import committed_specs
from tests.timing.race import drawn, run_race
from tests.timing.startup import design_time, help_seconds

EVIDENCE = Path(__file__).with_name("evidence.toml")
HEAD = """\
# Written by `python -m tests.evidence`; do not edit.
# margin: share of the target that is left (at most), or that was gained beyond it (at least).

"""
AT_MOST, AT_LEAST = "at most", "at least"
HOT = 45.0  # [degC]
BATCH_ERROR = 1e-9  # of the response, down to 80 dB below its peak
FREQUENCY_ERROR, SPREAD_SHARE = 0.05, 0.1  # [%]; of what tolerances spread
Q_ERROR, GAIN_ERROR = 0.5, 0.2  # [%]
FINE_RESISTORS, FINE_CAPACITORS = ("E96", "E192"), ("E12", "E24")
KILLS = 50
LEAST_OF_CIRCUIT, LEAST_OF_SENSOR, LEAST_SINGLE = 5, 4, 8


@dataclass(frozen=True, slots=True)
class Entry:
    """One figure.

    Attributes:
        name, run: what was measured, and in which run.
        bound: "at most" or "at least" the target.
        unit: "" for a plain number; note: how it was measured.
        date: of the run, ISO 8601.
    """

    name: str
    run: str
    bound: str
    target: float
    measured: float
    unit: str
    note: str
    date: str = ""

    @property
    def margin(self) -> float:
        """Share of the target that is left (at most), or that was gained beyond it (at least); negative: missed."""
        share = self.recorded / self.target
        return 1 - share if self.bound == AT_MOST else share - 1

    @property
    def recorded(self) -> float:
        """What was measured, with three digits."""
        return float(f"{self.measured:.3g}")

    @property
    def inside(self) -> bool:
        """Whether the target was met."""
        return self.margin >= 0

    def table(self) -> dict[str, str | float]:
        """As it stands in the file."""
        return {
            "name": self.name,
            "run": self.run,
            "bound": self.bound,
            "target": self.target,
            "measured": self.recorded,
            "unit": self.unit,
            "margin": float(f"{self.margin:.3f}"),
            "command": f"python -m tests.evidence {self.run}",
            "date": self.date,
            "note": self.note,
        }


# ------------------------------------------------------------------------------------------------- the runs


def simulators(root: Path, ambient: float | None = None) -> Iterator[Entry]:
    """design.json of the demo and the committed specs against both simulators, all frequencies."""
    folders = (Designs(root) if ambient is None else Designs(root, 0, 0)).made(ambient)
    where = f"demo and {len(folders) - 1} random specs" + ("" if ambient is None else f", ambient {ambient:g} degC")
    run = "simulators" if ambient is None else "hot"
    for simulator in SIMULATORS:
        with processes() as pool:
            found = Differences.largest(pool.map(partial(named_differences, simulator.name), folders))
        note = f"{where}; {found.points} points within 80 dB of the peak"
        title = simulator.name + ("" if ambient is None else f" at {ambient:g} degC")
        yield Entry(f"gain against {title}", run, AT_MOST, GAIN_DB, found.gain_db, "dB", note)
        yield Entry(f"phase against {title}", run, AT_MOST, PHASE_DEG, found.phase_deg, "degree", note)
        yield Entry(f"noise density against {title}", run, AT_MOST, 100 * NOISE_SHARE, 100 * found.noise, "%", note)


def named_differences(name: str, folder: Path) -> Differences:
    """A folder's design.json against the simulator of a name."""
    return folder_differences(next(one for one in SIMULATORS if one.name == name), folder)


def hot(root: Path) -> Iterator[Entry]:
    """The same at 45 degC."""
    return simulators(root, HOT)


def designed(root: Path) -> Iterator[Entry]:
    """How many of the committed specs give a design, and of what kinds."""
    designs = Designs(root)
    designs.made()
    folders = [folder for spec in committed_specs() if (folder := designs.folder(spec)) is not None]
    met = sum(all(r["met"] is not False for r in read_json(folder)["requirements"]) for folder in folders)
    note = f"of {len(committed_specs())}: {met} meet all that is judged (exit 0), {len(folders) - met} not (exit 1)"
    note += "".join(f"; {name} gives none: {message}" for name, message in sorted(designs.refused.items()))
    yield Entry("random specs designed", "designed", AT_LEAST, LEAST_DESIGNED, len(folders), "", note)
    makings = Makings.of(folders)
    for name, least, counts in (
        ("designs with the rarest section circuit", LEAST_OF_CIRCUIT, makings.topologies),
        ("designs for the rarest kind of sensor", LEAST_OF_SENSOR, makings.sensors),
    ):
        listed = ", ".join(f"{kind} {number}" for kind, number in sorted(counts.items()))
        yield Entry(name, "designed", AT_LEAST, least, min(counts.values()), "", listed)
    single = f"the other {len(folders) - makings.single} on two rails"
    yield Entry("designs on a single supply", "designed", AT_LEAST, LEAST_SINGLE, makings.single, "", single)


def batch(root: Path) -> Iterator[Entry]:
    """Interpolated responses of many builds against dense solutions in extended precision."""
    folders = Designs(root).made()
    with processes() as pool:
        worst = max(pool.map(batch_error, folders))
    note = (
        f"{len(folders)} chains, 100 builds each, every tenth solved at 262 frequencies, down to 80 dB below its peak"
    )
    yield Entry("batch against direct solution", "batch", AT_MOST, BATCH_ERROR, worst, "", note)


def batch_error(folder: Path) -> float:
    """Largest relative error of a design's builds."""
    design = api.load_design(folder)
    chain, network = design.chain, design.network()
    values = circuit.build_values(chain, drawn(chain, 100))
    center, band = chain.center_frequency, design.spec.target.bandwidth
    wide = np.geomspace(center / 1000, center * 1000, 61)
    f = np.unique(np.concatenate([np.linspace(center - band, center + band, 201), wide]))
    got = circuit.batch_response(network, values, f)[:, ::10]
    exact = reference_response(network, values[:, ::10], f)
    size = np.maximum(np.abs(exact), 1e-4 * np.abs(exact).max(axis=0))
    return float((np.abs(got - exact) / size).max())


def speed(_root: Path) -> Iterator[Entry]:
    """Builds of a six-amplifier chain against both simulators."""
    race = run_race()
    assert race.disagreement < 1e-8, race
    note = "time for one build, six amplifiers, 201 frequencies, one core; medians of interleaved rounds"
    yield Entry("builds against neospice", "speed", AT_LEAST, 10, race.neospice / race.engine, "times faster", note)
    yield Entry("builds against ngspice", "speed", AT_LEAST, 30, race.ngspice / race.engine, "times faster", note)


def start(_root: Path) -> Iterator[Entry]:
    """The command line against the imports of numpy, scipy.signal and matplotlib.pyplot."""
    found, shown = design_time(), help_seconds()
    note = "best of 3 of each, interleaved; the demo with all its files over the imports"
    yield Entry("synth design, quick", "start", AT_MOST, 3, found.ratio, "times the imports", note)
    yield Entry("synth --help", "start", AT_MOST, 0.3, shown, "s", "best of 5, on the machine of this run")


def rounding(root: Path) -> Iterator[Entry]:
    """Pole pairs and gain in the whole chain against what was asked, E96 and E12."""
    frequency, q, gain = (0.0, 0.0), 0.0, 0.0  # frequency: share of its limit, and [%]
    chains = sections = 0
    for folder in Designs(root).made():
        document = read_json(folder)
        if not _is_fine_grained(document):
            continue
        chains += 1
        for frequency_error, q_error, limit in section_errors(document, whole_chain_poles(folder)):
            sections += 1
            frequency = max(frequency, (frequency_error / limit, frequency_error))
            q = max(q, q_error)
        gain = max(gain, gain_error(document))
    note = f"{sections} sections of {chains} chains with E96 and E12 or finer; poles of the whole chain, "
    note += "mid-rails grounded, equal sections by their mean"
    bound = f"{FREQUENCY_ERROR:g} % or a tenth of the standard deviation that tolerances make, whichever is more"
    f0_note = f"{frequency[1]:.2g} % there; limit: {bound}; {note}"
    yield Entry("rounding, f0", "rounding", AT_MOST, 1, frequency[0], "of the limit", f0_note)
    yield Entry("rounding, Q", "rounding", AT_MOST, Q_ERROR, q, "%", note)
    yield Entry("rounding, gain at the centre", "rounding", AT_MOST, GAIN_ERROR, gain, "%", note)


def _is_fine_grained(document: dict[str, Any]) -> bool:
    parts = document["spec"].get("parts", {})
    resistors, capacitors = (parts.get(kind, {}).get("series") for kind in ("resistors", "capacitors"))
    return resistors in (None, *FINE_RESISTORS) and capacitors in (None, *FINE_CAPACITORS)


def whole_chain_poles(folder: Path) -> NDArray[np.complex128]:
    """Poles [rad/s] of a design folder's chain, its mid-rails tied to ground.

    What an impedance there couples is no error of rounding; it has a judge of its own.
    """
    chain = with_grounded_reference(api.load_design(folder).chain)
    return circuit.poles(circuit.build_network(chain), chain.center_frequency)


def section_errors(document: dict[str, Any], chain_poles: NDArray[np.complex128]) -> list[tuple[float, float, float]]:
    """For each section: error of f0 and of Q [%] of its pole pair in the whole chain, and the limit for f0 [%].

    What was asked is the section's own target, that is after the planner bent it.  A sensor's resonances are set
    aside first.  Sections that are asked for the same pair are taken together, by the mean of their poles: the
    slightest coupling between equal circuits parts their poles by its square root and leaves the mean.
    """
    sections = [stage for stage in document["stages"] if stage["target"]["q"] is not None]
    wanted = np.array([(one["target"]["center_frequency"], one["target"]["q"]) for one in sections])
    poles = chain_poles[chain_poles.imag > 0]
    sensor = np.array([complex(*pair) for pair in document["sensor_model"]["poles"]])
    for own in sensor[sensor.imag > 0]:
        poles = np.delete(poles, int(np.argmin(_apart(poles, float(np.abs(own)) / (2 * np.pi), float(_q(own))))))
    rows, columns = linear_sum_assignment(np.array([_apart(poles, *one) for one in wanted]))
    assert rows.tolist() == list(range(len(sections)))
    found = []
    for k, section in enumerate(sections):
        equal = np.all(np.abs(wanted / wanted[k] - 1) < 1e-6, axis=1)
        pole = poles[columns[equal]].mean()
        f0, q = wanted[k]
        limit = max(FREQUENCY_ERROR, SPREAD_SHARE * _spread(document, section["name"]))
        found.append((100 * abs(abs(pole) / (2 * np.pi * f0) - 1), 100 * abs(float(_q(pole)) / q - 1), limit))
    return found


def _q(pole: NDArray[np.complex128]) -> NDArray[np.float64]:
    return np.abs(pole) / (-2 * np.real(pole))


def _apart(poles: NDArray[np.complex128], frequency: float, q: float) -> NDArray[np.float64]:
    """How far poles [rad/s] are from a frequency [Hz] and Q, in widths of its resonance."""
    distance: NDArray[np.float64] = np.abs(np.log(np.abs(poles) / (2 * np.pi * frequency))) * q
    return distance + np.abs(np.log(np.abs(_q(poles)) / q))


def _spread(document: dict[str, Any], stage: str) -> float:
    """Standard deviation of f0 [%] of a section: f0 ~ (R R C C)^-1/2, rectangular."""
    tolerance = {
        kind: max(p["tolerance"] for p in document["parts"] if p["kind"] == kind and p["stage"] == stage)
        for kind in ("resistor", "capacitor")
    }
    return 100 * 0.5 * math.sqrt(2 * (tolerance["resistor"] ** 2 + tolerance["capacitor"] ** 2) / 3)


def gain_error(document: dict[str, Any]) -> float:
    """Error of the chain's gain at the centre [%]."""
    output = next(one for one in document["requirements"] if one["name"] == "output at full scale")
    level = array_of(document, "response", "gain_db")[
        int(np.argmin(np.abs(array_of(document, "response", "frequency") - document["chain"]["center_frequency"])))
    ]
    assert level == document["realized"]["gain_db"]
    return float(100 * abs(output["nominal"] / (0.5 * (output["at_least"] + output["at_most"])) - 1))


def killed(root: Path) -> Iterator[Entry]:
    """`synth design` killed while it replaces a folder."""
    (root / "killed").mkdir()
    outcome = kill_designs(root / "killed", KILLS)
    note = f"{outcome.kills} kills of `synth design`: {outcome.old} wholly old, {outcome.new} wholly new" + "".join(
        f"; {text}" for text in outcome.torn
    )
    assert min(outcome.old, outcome.new) > 0, outcome
    yield Entry("whole folders after a kill", "killed", AT_LEAST, outcome.kills, outcome.whole, "folders", note)


RUNS: dict[str, Callable[[Path], Iterator[Entry]]] = {
    one.__name__: one for one in (simulators, hot, designed, batch, speed, start, rounding, killed)
}


# ------------------------------------------------------------------------------------------------- the file


def read(path: Path = EVIDENCE) -> list[Entry]:
    """The entries of the file.

    Raises:
        KeyError, TypeError, ValueError: the file is not well-formed.
    """
    entries = []
    for table in tomllib.loads(path.read_text(encoding="utf-8"))["entry"]:
        given = dict(table)
        margin, command = given.pop("margin"), given.pop("command")
        entry = Entry(**given)
        if entry.table() != table:
            raise ValueError(f"{entry.name}: margin {margin!r} or command {command!r} does not follow from the rest")
        entries.append(entry)
    return entries


def write(entries: Iterable[Entry], path: Path = EVIDENCE) -> None:
    """Write the file, the entries in the order of their runs."""
    order = list(RUNS)
    tables = [entry.table() for entry in sorted(entries, key=lambda entry: order.index(entry.run))]
    path.write_text(HEAD + tomli_w.dumps({"entry": tables}), encoding="utf-8")


def record(names: Sequence[str], path: Path = EVIDENCE) -> list[Entry]:
    """Rerun some of the runs and put their entries in place of the old ones, run by run; returns the new ones."""
    today = datetime.datetime.now(tz=datetime.UTC).date().isoformat()
    kept, found = read(path) if path.exists() else [], []
    with tempfile.TemporaryDirectory(prefix="synth-evidence-") as name:
        for run in names:
            found += [replace(entry, date=today) for entry in RUNS[run](Path(name))]
            kept = [entry for entry in kept if entry.run != run]
            write([*kept, *found], path)
    return found


def main(arguments: Sequence[str] | None = None) -> int:
    """Run, write, print; 1 if a target was missed."""
    parser = argparse.ArgumentParser(description="Rerun recorded runs and rewrite tests/evidence.toml.")
    parser.add_argument("runs", nargs="*", metavar="RUN", help=f"one of {', '.join(RUNS)}; all if left out")
    names = parser.parse_args(arguments).runs or list(RUNS)
    for name in names:
        if name not in RUNS:
            parser.error(f"there is no run {name!r}; choose of {', '.join(RUNS)}")
    found = record(names)
    for entry in found:
        verdict = "inside" if entry.inside else "MISSED"
        print(f"{verdict}  {entry.name}: {entry.measured:.3g} {entry.unit}, {entry.bound} {entry.target:g}")
        print(f"        {entry.note}")
    return 0 if all(entry.inside for entry in found) else 1


if __name__ == "__main__":
    sys.exit(main())
