"""The random specs: valid, repeatable, and of every kind that the generator means to draw."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pytest

from synth.spec import parse_spec
from tests.support.specs import committed_specs, main, random_spec

SEEDS = range(500, 700)


@pytest.mark.parametrize("seed", SEEDS)
def test_every_spec_is_valid(seed: int) -> None:
    spec = parse_spec(random_spec(seed))
    assert 3e3 <= spec.target.center_frequency <= 300e3
    assert 0.019 <= spec.target.bandwidth / spec.target.center_frequency <= 0.31
    assert spec.target.smallest < spec.target.full_scale
    assert 4.9 <= (spec.sensor.resistance or 0) <= 10.1e3


def test_a_seed_gives_one_spec() -> None:
    assert random_spec(7) == random_spec(7)
    assert random_spec(7) != random_spec(8)


def test_all_is_drawn_sooner_or_later() -> None:
    tables = [tomllib.loads(random_spec(seed)) for seed in SEEDS]
    sections = {key for table in tables for key in table}
    assert sections >= {
        "interference",
        "environment",
        "parts",
        "filter",
        "detector",
        "calibration",
        "resonator",
        "choose",
    }
    keys = {key for table in tables for key in table["target"]}
    assert keys >= {"gain", "output", "reject", "settling", "load", "load_capacitance", "signal_to_noise", "yield"}
    sensors = {key for table in tables for key in table["sensor"]}
    assert sensors >= {"inductance", "capacitance", "noise", "rolloff", "scale_tolerance"}
    kinds = {one["kind"] for table in tables for one in table["sensor"].get("rolloff", ())}
    assert kinds == {"high-pass", "low-pass", "loss", "resonant"}
    disturbing = {one["kind"] for table in tables for one in table.get("interference", ())}
    assert disturbing == {"tone", "square"}
    detectors = {table["detector"]["kind"] for table in tables if "detector" in table}
    assert detectors == {"rms", "average", "peak", "synchronous", "adc", "none"}


def test_specs_are_written_once(tmp_path: Path) -> None:
    main([str(tmp_path), "--count", "3", "--seed", "9"])
    assert sorted(file.name for file in tmp_path.iterdir()) == [f"random_{k:02d}.toml" for k in (1, 2, 3)]
    with pytest.raises(FileExistsError):
        main([str(tmp_path), "--count", "3", "--seed", "9"])


def test_the_committed_specs_are_twenty() -> None:
    assert len(committed_specs()) == 20
