"""The random specs: valid, repeatable, and of every kind that the generator means to draw."""

from __future__ import annotations

import tomllib
from collections import Counter
from pathlib import Path
from typing import Any

import pytest
import tomli_w

from synth.approximation import FAMILIES
from synth.spec import load_spec, parse_spec
from synth.spec.sensor import ROLLOFF_KINDS, Sensor
from synth.topology import SECTIONS
from tests.specs.wide import DECKS, SENSORS, dealt, sensor_kind, wide_spec
from tests.specs.wide import main as write_wide
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


def test_the_committed_specs_are_sixty() -> None:
    names = [f"random_{k:02d}.toml" for k in range(1, 61)]
    assert [spec.name for spec in committed_specs()] == names
    for spec in committed_specs():
        load_spec(spec)


# ------------------------------------------------------------------------------------------------- the wide ones


@pytest.mark.parametrize("number", range(80))
def test_every_wide_spec_is_valid(number: int, tmp_path: Path) -> None:
    text, files = wide_spec(7, number)
    for name, content in files.items():
        (tmp_path / name).write_text(content, encoding="utf-8")
    spec = parse_spec(text, "spec.toml", tmp_path)
    resonances = [one.q for one in spec.sensor.rolloff if one.kind == "resonant" and one.q is not None]
    assert max(resonances, default=0.0) <= max(0.8, 0.41 * spec.target.center_frequency / spec.target.bandwidth)
    assert spec.target.smallest < spec.target.full_scale


def test_a_seed_and_a_number_give_one_wide_spec() -> None:
    assert wide_spec(1, 2) == wide_spec(1, 2)
    assert wide_spec(1, 2) != wide_spec(1, 3)
    assert wide_spec(1, 2) != wide_spec(2, 2)


def test_a_deck_is_dealt_to_the_end() -> None:
    for deck, cards in DECKS.items():
        hand = [dealt(1, deck, cards, number) for number in range(2 * len(cards))]
        assert sorted(hand[: len(cards)]) == sorted(cards)
        assert sorted(hand[len(cards) :]) == sorted(cards)


def test_wide_specs_are_of_every_kind() -> None:
    """Of forty in a row: each kind of sensor, rolloff, circuit, family and supply, more than once."""
    tables = [tomllib.loads(wide_spec(5, number)[0]) for number in range(40)]
    assert Counter(table.get("filter", {}).get("topology") for table in tables).keys() == {None, *SECTIONS}
    assert Counter(table.get("filter", {}).get("family") for table in tables).keys() == {None, *FAMILIES}
    kinds = Counter(one["kind"] for table in tables for one in table["sensor"].get("rolloff", ()))
    assert kinds.keys() == set(ROLLOFF_KINDS)
    assert min(kinds.values()) >= 3
    assert set(SENSORS) == {name for cards in DECKS["sensor"] for name in cards}
    rarest = Counter(sensor_kind(parse_sensor(table)) for table in tables)
    assert len(rarest) == 5
    assert min(rarest.values()) >= 6
    assert sum("negative" not in table["supply"] for table in tables) >= 12


def parse_sensor(tables: dict[str, Any]) -> Sensor:
    """The sensor without its rolloff, which may stand in a file."""
    sensor = {key: value for key, value in tables["sensor"].items() if key != "rolloff"}
    return parse_spec(tomli_w.dumps(tables | {"sensor": sensor})).sensor


def test_wide_specs_are_written_once(tmp_path: Path) -> None:
    arguments = [str(tmp_path), "--count", "12", "--seed", "9", "--first", "4"]
    write_wide(arguments)
    written = sorted(tmp_path.glob("*.toml"))
    assert [file.name for file in written] == [f"random_{k:02d}.toml" for k in range(4, 16)]
    tables = [one.file for file in written for one in load_spec(file).sensor.rolloff if one.file is not None]
    assert tables
    assert sorted(file.name for file in tmp_path.glob("*.csv")) == sorted(tables)
    with pytest.raises(FileExistsError):
        write_wide(arguments)
