"""`synth design` leaves a folder wholly old or wholly new, whenever it is killed."""

from __future__ import annotations

import os
from pathlib import Path

import pytest

from tests.long.killed import kill_designs

pytestmark = pytest.mark.skipif(not hasattr(os, "fork"), reason="needs POSIX signals")


def test_a_killed_design_leaves_a_whole_folder(tmp_path: Path) -> None:
    outcome = kill_designs(tmp_path, 6)
    assert outcome.torn == ()
    assert outcome.whole == 6
