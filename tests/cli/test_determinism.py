"""The same spec gives the same bytes, in whatever process; and the same choices with whatever number of threads."""

from __future__ import annotations

import json
import shutil
from pathlib import Path
from typing import Any

import pytest

from tests.api.made import PICKUP
from tests.cli.running import content, process

THREADS = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS")


def folder_of(place: Path, name: str, **more: str) -> dict[str, bytes]:
    """The design folder of the committed example, from a process of its own."""
    (place / name).mkdir()
    shutil.copy(PICKUP, place / name / "spec.toml")
    outcome = process("design", "spec.toml", "--out", "made", "--builds", "300", folder=place / name, **more)
    assert outcome.status in (0, 1)
    assert outcome.err == ""
    return {**content(place / name / "made"), "stdout": outcome.out.encode()}


@pytest.fixture(scope="session")
def first(tmp_path_factory: pytest.TempPathFactory) -> dict[str, bytes]:
    return folder_of(tmp_path_factory.mktemp("first"), "a", PYTHONHASHSEED="0", **dict.fromkeys(THREADS, "1"))


@pytest.mark.parametrize("seed", ["1", "4242"])
def test_two_runs_give_the_same_bytes(first: dict[str, bytes], seed: str, tmp_path: Path) -> None:
    again = folder_of(tmp_path, "b", PYTHONHASHSEED=seed, **dict.fromkeys(THREADS, "1"))
    assert again.keys() == first.keys()
    assert [name for name in first if first[name] != again[name]] == []


def test_places_times_and_languages_leave_no_trace(first: dict[str, bytes], tmp_path: Path) -> None:
    other = {"TZ": "Pacific/Auckland", "LC_ALL": "C.UTF-8", "SOURCE_DATE_EPOCH": "1", "HOME": str(tmp_path)}
    again = folder_of(tmp_path, "a longer name", **other, **dict.fromkeys(THREADS, "1"))
    assert [name for name in first if first[name] != again[name]] == []


def discrete(document: dict[str, Any]) -> object:
    """What is chosen, without what is computed."""
    parts = [(p["ref"], p["kind"], p["value"], p["nodes"], p["tolerance"]) for p in document["parts"]]
    stages = [(s["name"], s["topology"], s["op_amp"], s["parts"]) for s in document["stages"]]
    verdicts = [(r["name"], r["met"]) for r in document["requirements"]]
    return parts, stages, verdicts, [(c["description"], c["chosen"], c["lost_on"]) for c in document["candidates"]]


def test_another_number_of_threads_chooses_the_same(first: dict[str, bytes], tmp_path: Path) -> None:
    again = folder_of(tmp_path, "c", **dict.fromkeys(THREADS, "2"))
    assert discrete(json.loads(again["design.json"])) == discrete(json.loads(first["design.json"]))
    assert again["bom.csv"] == first["bom.csv"]
