from __future__ import annotations

import os

import pytest

from tests.spice.comparison import Designs

FEW = 100  # builds


@pytest.fixture(scope="session")
def designs(tmp_path_factory: pytest.TempPathFactory) -> Designs:
    """Design folders, each made once in a test session, by whichever worker comes first."""
    if "PYTEST_XDIST_WORKER" not in os.environ:
        return Designs(tmp_path_factory.mktemp("designs"), FEW, 0)
    root = tmp_path_factory.getbasetemp().parent / "designs"
    root.mkdir(exist_ok=True)
    return Designs(root, FEW, 0)
