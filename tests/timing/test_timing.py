"""A light look at speed with generous bounds; the targets themselves are recorded runs, see tests/long."""

from __future__ import annotations

import pytest

from tests.timing.race import run_race
from tests.timing.startup import design_time, heavy_imports, help_seconds


@pytest.mark.spice
def test_the_batch_engine_is_ahead() -> None:
    race = run_race(rounds=3, neospice_builds=20, ngspice_builds=20)
    assert race.disagreement < 1e-8  # all three computed the same builds
    assert race.neospice / race.engine > 4
    assert race.ngspice / race.engine > 10


def test_the_command_line_loads_nothing_heavy() -> None:
    assert heavy_imports() == []


def test_help_is_quick() -> None:
    assert help_seconds(3) < 1.0


def test_a_design_is_quick() -> None:
    assert design_time(1).ratio < 8
