"""What design.json says against what a simulator makes of the chain.cir beside it.

design.json is read with plain json: nothing of the package stands between the file and the comparison.
"""

from __future__ import annotations

import json
import multiprocessing
import time
import tomllib
from collections import Counter
from collections.abc import Iterable, Iterator
from concurrent.futures import ProcessPoolExecutor
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np
import tomli_w
from numpy.typing import NDArray

from synth import api
from synth.errors import SynthError
from synth.model.chain import Chain
from tests.specs.wide import sensor_kind
from tests.support.simulators import Simulator
from tests.support.specs import committed_specs

ROOT = Path(__file__).parents[2]
DEMO = ROOT / "designs" / "pickup" / "spec.toml"
GAIN_DB, PHASE_DEG, NOISE_SHARE = 0.01, 0.1, 0.002  # what the two may differ by
DEPTH_DB = 80.0  # below its peak a response is compared no more
LEAST_DESIGNED = 54  # of the committed specs
THIN = 8  # every eighth frequency is enough for the fast tests
PATIENCE = 300.0  # [s] for another process that makes the same design


def all_specs() -> list[Path]:
    """The demo and the committed random specs."""
    return [DEMO, *committed_specs()]


def some_specs() -> list[Path]:
    """The demo and every third of the others, for the fast tests."""
    return all_specs()[::3]


def name_of(spec: Path) -> str:
    """Short name of a spec file."""
    return spec.parent.name if spec.name == "spec.toml" else spec.stem


@dataclass(slots=True)
class Designs:
    """Design folders made on demand below a folder, each once.

    Attributes:
        root: where they go; other processes may make theirs there, too.
        builds: how many are drawn for the demo; others: for the rest, none in tests that look at nominal figures.
        refused: message by name of what could not be designed.
    """

    root: Path
    builds: int = api.BUILDS
    others: int = api.BUILDS
    refused: dict[str, str] = field(default_factory=dict)

    def folder(self, spec: Path, ambient: float | None = None) -> Path | None:
        """The design folder of a spec, None where the program names a reason why there is none.

        Args:
            ambient: [degC] in place of the spec's own.
        """
        name = name_of(spec) if ambient is None else f"{name_of(spec)}_{ambient:g}_degC"
        target, refusal = self.root / name, self.root / f"{name}.refused"
        with _alone(self.root / f"{name}.lock"):
            if not target.exists() and not refusal.exists():
                try:
                    self._design(spec, ambient, name, target)
                except SynthError as error:
                    refusal.write_text(str(error), encoding="utf-8")
        if refusal.exists():
            self.refused[name] = refusal.read_text(encoding="utf-8")
            return None
        return target

    def _design(self, spec: Path, ambient: float | None, name: str, target: Path) -> None:
        asked = api.load_spec(spec)
        if ambient is not None:
            asked = api.parse_spec(_at_ambient(spec, ambient), f"{name}.toml", spec.parent)
        api.save_design(api.design(asked, self.builds if spec == DEMO else self.others), target)

    def made(self, ambient: float | None = None) -> list[Path]:
        """The folders of all specs that give a design, made by as many processes as there are processors."""
        with processes() as pool:
            list(pool.map(partial(self.folder, ambient=ambient), all_specs()))
        return [folder for spec in all_specs() if (folder := self.folder(spec, ambient)) is not None]


def processes() -> ProcessPoolExecutor:
    """Processes that share the work of a long run."""
    return ProcessPoolExecutor(mp_context=multiprocessing.get_context("spawn"))


@contextmanager
def _alone(lock: Path) -> Iterator[None]:
    """One process at a time."""
    began = time.perf_counter()
    while True:
        try:
            lock.mkdir()
            break
        except FileExistsError:
            assert time.perf_counter() - began < PATIENCE, f"{lock} is held by another process"
            time.sleep(0.02)
    try:
        yield
    finally:
        lock.rmdir()


def _at_ambient(spec: Path, ambient: float) -> str:
    tables = tomllib.loads(spec.read_text(encoding="utf-8"))
    tables.setdefault("environment", {})["ambient"] = f"{ambient:g} degC"
    return tomli_w.dumps(tables)


def read_json(folder: Path) -> dict[str, Any]:
    """design.json as it stands."""
    document: dict[str, Any] = json.loads((folder / "design.json").read_text(encoding="utf-8"))
    return document


@dataclass(frozen=True, slots=True)
class Differences:
    """Largest differences: gain [dB], phase [degree], noise density [share]; points: how many were compared."""

    gain_db: float
    phase_deg: float
    noise: float
    points: int

    @staticmethod
    def largest(found: Iterable[Differences]) -> Differences:
        """The largest of each, the points of all."""
        each = list(found)
        return Differences(
            max(d.gain_db for d in each),
            max(d.phase_deg for d in each),
            max(d.noise for d in each),
            sum(d.points for d in each),
        )

    def check(self) -> None:
        """Fail where one is beyond what is allowed."""
        assert self.points >= 30, self
        assert self.gain_db <= GAIN_DB, self
        assert self.phase_deg <= PHASE_DEG, self
        assert self.noise <= NOISE_SHARE, self


def differences(simulator: Simulator, netlist: str, document: dict[str, Any], thin: int = 1) -> Differences:
    """The figures of a design.json against a simulator's on a netlist, within 80 dB of the peak of the response.

    Args:
        thin: take every so many of the frequencies, and the centre.
    """
    table, noise = document["response"], document["noise"]
    level = np.array(table["gain_db"])
    kept = level > level.max() - DEPTH_DB
    every, center = np.array(table["frequency"]), document["chain"]["center_frequency"]
    assert center in every[kept]
    kept = np.flatnonzero(kept)
    kept = kept[(np.arange(kept.size) % thin == 0) | (every[kept] == center)]
    f = every[kept]
    got = simulator.response(netlist, f)
    turn = np.exp(-1j * np.radians(np.array(table["phase_deg"])[kept]))
    assert noise["frequency"] == table["frequency"]
    density = np.array(noise["density"])[kept]
    return Differences(
        float(np.abs(20 * np.log10(np.abs(got)) - level[kept]).max()),
        float(np.abs(np.degrees(np.angle(got * turn))).max()),
        float(np.abs(simulator.noise(netlist, f) / density - 1).max()),
        int(f.size),
    )


def folder_differences(simulator: Simulator, folder: Path, thin: int = 1) -> Differences:
    """A folder's design.json against a simulator on its chain.cir."""
    return differences(simulator, (folder / "chain.cir").read_text(encoding="utf-8"), read_json(folder), thin)


@dataclass(frozen=True, slots=True)
class Makings:
    """What designs are made of: how many have each section circuit, each kind of sensor, and a single supply."""

    topologies: Counter[str]
    sensors: Counter[str]
    single: int

    @staticmethod
    def of(folders: Iterable[Path]) -> Makings:
        """Those of some folders."""
        topologies: Counter[str] = Counter()
        sensors: Counter[str] = Counter()
        single = 0
        for folder in folders:
            topologies.update({s["topology"] for s in read_json(folder)["stages"] if s["kind"] == "bandpass"})
            spec = api.load_design(folder).spec
            sensors[sensor_kind(spec.sensor)] += 1
            single += spec.supply.negative is None
        return Makings(topologies, sensors, single)


def with_grounded_reference(chain: Chain) -> Chain:
    """The same chain with every mid-rail tied to ground: the ideal reference."""
    kept = tuple(s for s in chain.stages if s.kind != "reference")
    refs = {ref for s in kept for ref in s.parts}
    parts = tuple(
        replace(p, nodes=tuple("0" if n.startswith("ref") else n for n in p.nodes))
        for p in chain.parts
        if p.ref in refs
    )
    return replace(chain, stages=kept, parts=parts)


def numbers(document: object, path: str = "") -> dict[str, float]:
    """Every number of a JSON document by its path."""
    if isinstance(document, dict):
        pairs = [(f"{path}.{key}", value) for key, value in document.items()]
    elif isinstance(document, list):
        pairs = [(f"{path}[{k}]", value) for k, value in enumerate(document)]
    elif isinstance(document, int | float) and not isinstance(document, bool):
        return {path: float(document)}
    else:
        return {}
    found: dict[str, float] = {}
    for name, value in pairs:
        found |= numbers(value, name)
    return found


def array_of(document: dict[str, Any], *keys: str) -> NDArray[np.float64]:
    """A list of numbers below some keys."""
    value: Any = document
    for key in keys:
        value = value[key]
    return np.array(value, dtype=np.float64)
