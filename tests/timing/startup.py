"""How long the command line takes, against the imports that any program of its kind pays for."""

from __future__ import annotations

import subprocess
import sys
import tempfile
import time
from dataclasses import dataclass
from pathlib import Path

from tests.spice.comparison import DEMO

HEAVY = ("numpy", "scipy", "matplotlib", "control")
COMMAND = "from synth.cli import main; main()"
IMPORTS = "import numpy, scipy.signal, matplotlib.pyplot"


@dataclass(frozen=True, slots=True)
class DesignTime:
    """Seconds, each the best of a few: `synth design` of the demo with all its files, and the imports alone."""

    design: float
    imports: float

    @property
    def ratio(self) -> float:
        """How often the imports fit into the design."""
        return self.design / self.imports


def _seconds(*arguments: object, allowed: tuple[int, ...] = (0,)) -> float:
    start = time.perf_counter()
    done = subprocess.run([sys.executable, *map(str, arguments)], capture_output=True, timeout=120, check=False)
    seconds = time.perf_counter() - start
    assert done.returncode in allowed, done.stderr
    return seconds


def help_seconds(tries: int = 5) -> float:
    """`synth --help`, best of some tries [s]."""
    return min(_seconds("-c", COMMAND, "--help") for _ in range(tries))


def heavy_imports() -> list[str]:
    """The heavy packages that are in memory once the command line is loaded and has shown its help."""
    program = (
        "import sys; sys.argv = ['synth', '--help']\n"
        "try:\n from synth.cli import main; main()\n"
        f"except SystemExit:\n sys.stderr.write(' '.join(m for m in {HEAVY!r} if m in sys.modules))"
    )
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, timeout=60, check=True)
    assert "Usage" in done.stdout
    return done.stderr.split()


def design_time(tries: int = 3) -> DesignTime:
    """`synth design` of the demo and the imports, interleaved, each the best of some tries."""
    designs, imports = [], []
    with tempfile.TemporaryDirectory(prefix="synth-timing-") as name:
        _seconds("-c", IMPORTS)  # files into the system's memory, fonts into matplotlib's cache
        for k in range(tries):
            imports.append(_seconds("-c", IMPORTS))
            designs.append(_seconds("-c", COMMAND, "design", DEMO, "--out", Path(name) / f"demo{k}", allowed=(0, 1)))
    return DesignTime(min(designs), min(imports))
