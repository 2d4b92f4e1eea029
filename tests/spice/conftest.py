from __future__ import annotations

import pytest

from tests.spice.comparison import Designs

FEW = 100  # builds


@pytest.fixture(scope="session")
def designs(tmp_path_factory: pytest.TempPathFactory) -> Designs:
    """Design folders, each made once in a test session."""
    return Designs(tmp_path_factory.mktemp("designs"), FEW)
