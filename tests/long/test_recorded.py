"""The recorded runs: `pytest -m long` reruns all and rewrites tests/evidence.toml; here too: the file as it stands."""

from __future__ import annotations

import datetime
import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from tests.evidence import AT_LEAST, AT_MOST, EVIDENCE, RUNS, Entry, read, record, section_errors, write

MISSED: dict[str, str] = {}  # name of an entry -> why it is known to miss its target


@pytest.mark.long
@pytest.mark.spice
def test_recorded_runs() -> None:
    assert {entry.name for entry in record(list(RUNS)) if not entry.inside} == set(MISSED)


def test_evidence_is_well_formed() -> None:
    entries = read()
    assert [entry.run for entry in entries] == sorted((e.run for e in entries), key=list(RUNS).index)
    assert {entry.run for entry in entries} == set(RUNS)
    assert len({entry.name for entry in entries}) == len(entries)
    for entry in entries:
        assert entry.bound in (AT_MOST, AT_LEAST)
        assert math.isfinite(entry.measured)
        assert entry.target > 0
        assert entry.note
        assert datetime.date.fromisoformat(entry.date) <= datetime.datetime.now(tz=datetime.UTC).date()


def entries() -> list[object]:
    """The entries of the file, those of which it is known that they miss marked so."""
    found = read() if EVIDENCE.exists() else []
    missed = {name: pytest.mark.xfail(strict=True, reason=reason) for name, reason in MISSED.items()}
    return [pytest.param(entry, id=entry.name, marks=missed.get(entry.name, ())) for entry in found]


@pytest.mark.parametrize("entry", entries())
def test_evidence_is_inside_its_target(entry: Entry) -> None:
    assert entry.inside, entry


def test_what_is_known_to_miss_is_recorded() -> None:
    assert {entry.name for entry in read() if not entry.inside} == set(MISSED)


def test_the_file_is_read_back_as_written(tmp_path: Path) -> None:
    at_most = Entry("a", "speed", AT_MOST, 0.5, 0.125, "dB", 'odd "note"', "2026-01-31")
    at_least = Entry("b", "batch", AT_LEAST, 10, 12.5, "", "n", "2026-01-31")
    file = tmp_path / "evidence.toml"
    write([at_most, at_least], file)
    assert read(file) == [at_least, at_most]
    assert (at_most.margin, at_least.margin) == (0.75, 0.25)
    assert not replace(at_most, measured=0.51).inside
    assert not replace(at_least, measured=9.9).inside


def test_a_margin_that_does_not_follow_is_noticed(tmp_path: Path) -> None:
    file = tmp_path / "evidence.toml"
    write([Entry("a", "speed", AT_MOST, 0.5, 0.125, "dB", "n", "2026-01-31")], file)
    file.write_text(file.read_text().replace("measured = 0.125", "measured = 0.6"))
    with pytest.raises(ValueError, match="does not follow"):
        read(file)


def test_equal_sections_are_taken_by_the_mean_of_their_poles() -> None:
    """Coupling parts the poles of equal sections to either side; a pair of its own and the sensor's stay apart."""
    pole = 2 * math.pi * 1e4 * complex(-1 / 20, math.sqrt(1 - 1 / 400))
    apart, third, own = 400 + 900j, 1.2 * pole, 2 * math.pi * 1.05e4 * complex(-1 / 8, math.sqrt(1 - 1 / 64))
    upper = np.array([pole + apart, own, third, pole - apart])
    sensor = [[own.real, own.imag], [own.real, -own.imag], [-5e4, 0.0]]
    targets = [(1e4, 10.0), (1.2e4, 10.0), (1e4, 10.0)]
    document = {
        "stages": [
            {"name": f"bandpass {k + 1}", "target": {"center_frequency": f0, "q": q}}
            for k, (f0, q) in enumerate(targets)
        ],
        "sensor_model": {"poles": sensor},
        "parts": [
            {"kind": kind, "stage": f"bandpass {k + 1}", "tolerance": 0.01}
            for kind in ("resistor", "capacitor")
            for k in range(3)
        ],
    }
    found = section_errors(document, np.concatenate([upper, upper.conj(), [-1e6]]))
    assert len(found) == 3
    for frequency_error, q_error, limit in found:
        assert frequency_error < 1e-9
        assert q_error < 1e-9
        assert limit == pytest.approx(10 * 0.5 * math.sqrt(4 / 3) * 0.01, rel=1e-9)
