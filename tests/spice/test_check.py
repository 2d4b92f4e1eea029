"""`synth check` rebuilds the circuit from the parts alone: the same figures, and others once a part is changed."""

from __future__ import annotations

import json
import shutil
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from synth import api
from tests.spice.comparison import DEMO, Designs, differences, name_of, numbers, read_json, some_specs
from tests.support.simulators import SIMULATORS, Simulator

NINE_DIGITS = 1e-8  # one in the ninth digit of 1.00000000: the spec, too, is read back with nine digits
POLE_DIGITS = 1e-6  # of poles far above the band, and of two that nearly meet, which move by the root of it
SMALL = 1e-12  # of the largest in its list: where a figure is the difference of larger ones

specs = pytest.mark.parametrize("spec", some_specs(), ids=name_of)


def synth(*arguments: object) -> subprocess.CompletedProcess[str]:
    """Run the command line in a process of its own."""
    command = [sys.executable, "-c", "from synth.cli import main; main()", *map(str, arguments)]
    return subprocess.run(command, capture_output=True, text=True, timeout=120, check=False)


def checked(folder: Path) -> dict[str, Any]:
    """What `synth check --json` prints, computed in this process."""
    document: dict[str, Any] = json.loads(api.json_text(api.check(folder)))
    return document


def edited(designs: Designs, spec: Path, to: Path, role: str, factor: float) -> tuple[Path, str]:
    """A copy of a folder with one part of a role changed by hand in design.json; the part's reference."""
    source = designs.folder(spec)
    assert source is not None
    shutil.copytree(source, to)
    document = read_json(to)
    part = next(part for part in document["parts"] if role in part["role"])
    part["value"] *= factor
    (to / "design.json").write_text(json.dumps(document), encoding="utf-8")
    return to, part["ref"]


@specs
def test_check_gives_the_figures_of_the_design(designs: Designs, spec: Path) -> None:
    folder = designs.folder(spec)
    if folder is None:
        pytest.skip(f"no design: {designs.refused[name_of(spec)]}")
    before, after = read_json(folder), checked(folder)
    old, new = numbers(before), numbers(after)
    assert old.keys() == new.keys()
    largest = dict.fromkeys({name.rpartition("[")[0] for name in old}, 0.0)
    for name, value in old.items():
        largest[name.rpartition("[")[0]] = max(largest[name.rpartition("[")[0]], abs(value))
    for name, value in old.items():
        digits = POLE_DIGITS if name.startswith(".realized.poles[") else NINE_DIGITS
        slack = digits * abs(value) + (SMALL * largest[name.rpartition("[")[0]] if "[" in name else SMALL)
        assert abs(new[name] - value) <= slack, (name, value, new[name])
    for key in ("requirements", "candidates", "cautions", "seal"):
        if key != "requirements":
            assert before[key] == after[key]
        else:
            assert [(r["name"], r["met"], r["note"]) for r in before[key]] == [
                (r["name"], r["met"], r["note"]) for r in after[key]
            ]


def test_the_command_says_the_same(designs: Designs) -> None:
    folder = designs.folder(DEMO)
    assert folder is not None
    done = synth("check", folder, "--json")
    document = read_json(folder)
    met = all(r["met"] is not False for r in document["requirements"])
    assert done.returncode == (0 if met else 1)
    assert done.stderr == ""
    assert json.loads(done.stdout) == checked(folder)
    assert synth("check", folder).stdout == (folder / "report.txt").read_text()


def test_an_edit_shows_in_the_report(designs: Designs, tmp_path: Path) -> None:
    folder, ref = edited(designs, DEMO, tmp_path / "edited", "gain, feedback", 2.0)
    before = read_json(folder)
    done = synth("check", folder)
    assert done.returncode == 1
    assert done.stderr == "parts were edited by hand since the design was written\n"
    source = designs.folder(DEMO)
    assert source is not None
    old, new = (source / "report.txt").read_text().splitlines(), done.stdout.splitlines()
    assert any("misses output at full scale" in line for line in new)
    changed = [line for line in new if line not in old]
    assert any(f"{ref} " in line for line in changed)
    after = checked(folder)
    assert after["realized"]["gain_db"] - before["realized"]["gain_db"] == pytest.approx(6.0, abs=0.3)
    stage = next(part["stage"] for part in before["parts"] if part["ref"] == ref)
    pairs = zip(after["stages"], before["stages"], strict=True)
    assert {a["name"] for a, b in pairs if abs(a["gain"] / b["gain"] - 1) > 0.1} == {stage}


@pytest.mark.spice
@pytest.mark.parametrize("simulator", SIMULATORS, ids=lambda simulator: simulator.name)
@pytest.mark.parametrize(
    ("role", "factor"), [("gain, feedback", 1.1), ("frequency", 1.05), ("inverting input", 0.9), ("coupling", 0.2)]
)
def test_simulators_agree_on_an_edited_folder(
    designs: Designs, tmp_path: Path, role: str, factor: float, simulator: Simulator
) -> None:
    folder, _ = edited(designs, DEMO, tmp_path / "edited", role, factor)
    again = api.check(folder)
    document = json.loads(api.json_text(again))
    assert np.abs(np.array(document["response"]["gain_db"]) - read_json(folder)["response"]["gain_db"]).max() > 0.05
    differences(simulator, api.netlist(again), document).check()
    api.save_design(again, folder, force=True)
    differences(simulator, (folder / "chain.cir").read_text(), read_json(folder)).check()


def test_an_edited_folder_is_not_replaced(designs: Designs, tmp_path: Path) -> None:
    folder, _ = edited(designs, DEMO, tmp_path / "edited", "gain, feedback", 1.1)
    before = (folder / "design.json").read_bytes()
    done = synth("design", DEMO, "--out", folder)
    assert done.returncode == 2
    assert "--force" in done.stderr
    assert (folder / "design.json").read_bytes() == before
