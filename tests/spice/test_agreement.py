"""What a design folder says of its chain is what two simulators find in its netlist."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from synth import api
from synth.topology import SECTIONS
from tests.spice.comparison import (
    DEMO,
    LEAST_DESIGNED,
    THIN,
    Designs,
    Makings,
    all_specs,
    array_of,
    differences,
    folder_differences,
    name_of,
    read_json,
    some_specs,
)
from tests.support.simulators import SIMULATORS, Simulator, run_ngspice, trouble

pytestmark = pytest.mark.spice
simulators = pytest.mark.parametrize("simulator", SIMULATORS, ids=lambda simulator: simulator.name)
specs = pytest.mark.parametrize("spec", some_specs(), ids=name_of)
HOT = 45.0  # [degC]


def folder_of(designs: Designs, spec: Path, ambient: float | None = None) -> Path:
    folder = designs.folder(spec, ambient)
    if folder is None:
        pytest.skip(f"no design: {' '.join(designs.refused.values())}")
    return folder


@specs
def test_what_gives_no_design_says_why(designs: Designs, spec: Path) -> None:
    if designs.folder(spec) is None:
        message = designs.refused[name_of(spec)]
        assert message.isprintable()
        assert len(message) > 30


@simulators
@specs
def test_simulator_agrees(designs: Designs, spec: Path, simulator: Simulator) -> None:
    folder_differences(simulator, folder_of(designs, spec), THIN).check()


@simulators
@pytest.mark.parametrize("spec", some_specs()[::5], ids=name_of)
def test_simulator_agrees_when_hot(designs: Designs, spec: Path, simulator: Simulator) -> None:
    folder_differences(simulator, folder_of(designs, spec, HOT), THIN).check()


@simulators
def test_resistor_noise_follows_ambient_and_amplifier_noise_does_not(tmp_path: Path, simulator: Simulator) -> None:
    cold = api.design(api.parse_spec(DEMO.read_text(encoding="utf-8").replace('noise = "0.7 nV"', "")), builds=0)
    spec = replace(cold.spec, environment=replace(cold.spec.environment, ambient=HOT))
    hot = api.check(api.Design(replace(cold.record, spec=spec, chain=replace(cold.chain, ambient=HOT))))
    documents, measured = [], []
    for name, design in (("cold", cold), ("hot", hot)):
        api.save_design(design, tmp_path / name)
        documents.append(read_json(tmp_path / name))
        center = documents[-1]["chain"]["center_frequency"]
        measured.append(simulator.noise((tmp_path / name / "chain.cir").read_text(), [center])[0])
        differences(simulator, api.netlist(design), documents[-1]).check()
    square = {True: 0.0, False: 0.0}  # [V^2/Hz] at 27 degC: of amplifiers, of the rest
    for one in documents[0]["noise"]["contributors"]:
        square[one["label"].endswith((" voltage noise", " current noise"))] += one["density"] ** 2
    warmer = (HOT + 273.15) / (27 + 273.15)
    assert min(square.values()) > 0.05 * sum(square.values())  # else the test shows nothing
    assert measured[0] == pytest.approx(math.sqrt(sum(square.values())), rel=1e-4)
    assert measured[1] == pytest.approx(math.sqrt(square[True] + warmer * square[False]), rel=1e-4)


@specs
def test_netlist_runs_unmodified_in_batch(designs: Designs, spec: Path) -> None:
    folder = folder_of(designs, spec)
    run = run_ngspice((folder / "chain.cir").read_text(encoding="utf-8"))
    assert not trouble(run.printed)
    (response,) = run.named("AC")
    (noise,) = run.named("Noise Spectral")
    document = read_json(folder)
    center = document["chain"]["center_frequency"]
    for plot in (response, noise):
        assert plot.frequency[0] == pytest.approx(center / 1000)
        assert plot.frequency[-1] == pytest.approx(center * 1000, rel=0.05)
    peak = 20 * np.log10(np.abs(response.columns["v(out)"]).max())
    assert peak == pytest.approx(array_of(document, "response", "gain_db").max(), abs=0.5)
    assert np.all(np.real(noise.columns["onoise_spectrum"]) > 0)


def test_most_of_the_specs_give_a_design(designs: Designs) -> None:
    """All of them in tests/evidence.py."""
    assert designs.folder(DEMO) is not None
    made = [spec for spec in some_specs() if designs.folder(spec) is not None]
    assert len(made) >= len(some_specs()) * LEAST_DESIGNED / (len(all_specs()) - 1), designs.refused


def test_some_specs_are_of_every_kind(designs: Designs) -> None:
    """Those of the fast tests: each section circuit, each kind of sensor, both kinds of supply."""
    found = Makings.of([folder for spec in some_specs() if (folder := designs.folder(spec)) is not None])
    assert found.topologies.keys() == SECTIONS.keys()
    assert found.sensors.keys() == {"voltage", "transformer", "motional", "current", "charge"}
    assert found.single >= 4
