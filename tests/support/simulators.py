"""Two general circuit simulators as judges from outside: ngspice as a program, neospice as a package.

Both take a netlist as text and give the response or the noise density of its node `out` at exactly the frequencies
asked for: one `lin 1 f f` analysis for each, so that nothing is interpolated.
"""

from __future__ import annotations

import os
import re
import shutil
import subprocess
import tempfile
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from pathlib import Path

import neospice
import numpy as np
import pytest
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

SOURCE, OUTPUT = "VSIG", "out"
TIMEOUT = 120  # s
ANALYSES = (".ac", ".noise", ".end")
TROUBLE = re.compile(r"error|warning|fatal|singular|unknown|aborted|can't|cannot", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class Plot:
    """One analysis of a raw file: its name and its columns by lower-case variable name, frequency real."""

    name: str
    columns: Mapping[str, NDArray[np.complexfloating] | NDArray[np.floating]]

    @property
    def frequency(self) -> FloatArray:
        """[Hz]."""
        return np.real(self.columns["frequency"])


@dataclass(frozen=True, slots=True)
class Run:
    """What one run of ngspice gave: its plots, the last analysis asked for first, and all it printed."""

    plots: tuple[Plot, ...]
    printed: str

    def named(self, start: str) -> tuple[Plot, ...]:
        """Plots whose name starts so."""
        return tuple(plot for plot in self.plots if plot.name.startswith(start))


def ngspice_program() -> str:
    """Path of ngspice; without it the test fails in continuous integration and is skipped elsewhere."""
    found = shutil.which("ngspice")
    if found is None:
        reason = "the program ngspice is not installed (Debian: apt install ngspice)"
        if os.environ.get("CI"):
            pytest.fail(f"{reason}; continuous integration must have it")
        pytest.skip(reason)
    return found


def run_ngspice(netlist: str) -> Run:
    """Run a netlist in batch as it stands, in an empty folder, without any start-up file.

    Raises:
        AssertionError: the program ended with an error.
    """
    program = ngspice_program()
    with tempfile.TemporaryDirectory(prefix="ngspice-") as name:
        folder = Path(name)
        home = folder / "home"
        home.mkdir()
        (folder / "chain.cir").write_text(netlist, encoding="utf-8")
        kept = {key: os.environ[key] for key in ("PATH", "LANG", "LD_LIBRARY_PATH") if key in os.environ}
        done = subprocess.run(
            [program, "-n", "-b", "-r", "chain.raw", "chain.cir"],
            cwd=folder,
            env=kept | {"HOME": str(home), "SPICE_SCRIPTS": str(home), "OMP_NUM_THREADS": "1"},
            stdin=subprocess.DEVNULL,
            capture_output=True,
            encoding="utf-8",
            errors="replace",
            timeout=TIMEOUT,
            check=False,
        )
        printed = done.stdout + done.stderr
        assert done.returncode == 0, printed
        raw = folder / "chain.raw"
        return Run(read_raw(raw.read_bytes()) if raw.exists() else (), printed)


def trouble(printed: str) -> list[str]:
    """Lines of a simulator's output that speak of an error or a warning; a note that a start-up file is off is none."""
    return [line for line in printed.splitlines() if TROUBLE.search(line) and not line.startswith("Note: ")]


def read_raw(data: bytes) -> tuple[Plot, ...]:
    """The plots of a raw file of the SPICE3 class, binary or text, one after the other."""
    plots = []
    place = 0
    while place < len(data):
        plot, place = _read_plot(data, place)
        plots.append(plot)
    return tuple(plots)


def _read_plot(data: bytes, place: int) -> tuple[Plot, int]:
    header: dict[str, str] = {}
    names: list[str] = []
    while True:
        line, place = _line(data, place)
        key, _, value = line.partition(":")
        if key in ("Binary", "Values"):
            break
        if line.startswith("\t"):
            names.append(line.split()[1].lower())
        else:
            header[key] = value.strip()
    points, complex_values = int(header["No. Points"]), "complex" in header["Flags"]
    assert len(names) == int(header["No. Variables"]), header
    if key == "Binary":
        size = points * len(names) * (2 if complex_values else 1)
        values = np.frombuffer(data, dtype="<f8", count=size, offset=place)
        place += 8 * size
        table = values.view(np.complex128) if complex_values else values
    else:
        numbers: list[complex] = []
        while len(numbers) < points * len(names):
            line, place = _line(data, place)
            if fields := line.split():
                real, _, imaginary = fields[-1].partition(",")  # the point's number stands before its first value
                numbers.append(complex(float(real), float(imaginary or 0.0)))
        table = np.array(numbers) if complex_values else np.real(numbers)
    columns = table.reshape(points, len(names)).T
    return Plot(header["Plotname"], dict(zip(names, columns, strict=True))), place


def _line(data: bytes, place: int) -> tuple[str, int]:
    end = data.find(b"\n", place)
    assert end >= 0, "the raw file ends within a header"
    return data[place:end].decode("ascii", errors="replace"), end + 1


def _with_analyses(netlist: str, analyses: Iterable[str]) -> str:
    """The netlist with other analyses in place of its own."""
    kept = [line for line in netlist.splitlines() if not line.lower().startswith(ANALYSES)]
    return "\n".join([*kept, *analyses, ".end"]) + "\n"


def _point(frequency: float) -> str:
    return f"lin 1 {frequency!r} {frequency!r}"


def _in_order(plots: Iterable[Plot], variable: str, frequencies: FloatArray) -> NDArray[np.complexfloating]:
    """Values of one variable at the frequencies asked for, whatever order the analyses ran in."""
    found = [(float(plot.frequency[0]), plot.columns[variable][0]) for plot in plots]
    assert len(found) == frequencies.size, f"{len(found)} analyses instead of {frequencies.size}"
    found.sort(key=lambda pair: pair[0])
    at = np.array([frequency for frequency, _ in found])
    np.testing.assert_allclose(at, frequencies, rtol=1e-12)
    return np.array([value for _, value in found])


def ngspice_response(netlist: str, frequencies: ArrayLike) -> ComplexArray:
    """Voltage at `out` [V] at rising frequencies [Hz]."""
    f = _rising(frequencies)
    analyses = [f".ac {_point(x)}" for x in f.tolist()]
    run = run_ngspice(_with_analyses(netlist, [".save v(out)", *analyses]))
    return _in_order(run.named("AC"), f"v({OUTPUT})", f)


def ngspice_noise(netlist: str, frequencies: ArrayLike) -> FloatArray:
    """Noise density at `out` [V/rtHz] at rising frequencies [Hz]."""
    f = _rising(frequencies)
    run = run_ngspice(_with_analyses(netlist, [f".noise v({OUTPUT}) {SOURCE} {_point(x)}" for x in f.tolist()]))
    return np.real(_in_order(run.named("Noise Spectral"), "onoise_spectrum", f))


def neospice_response(netlist: str, frequencies: ArrayLike) -> ComplexArray:
    """As `ngspice_response`."""
    simulator = neospice.Simulator()
    circuit = simulator.parse(netlist)
    mode = neospice.ACMode.LIN
    runs = [simulator.run_ac(circuit, mode, 1, x, x).voltage(OUTPUT) for x in _rising(frequencies).tolist()]
    return np.array([voltage[0] for voltage in runs])


def neospice_noise(netlist: str, frequencies: ArrayLike) -> FloatArray:
    """As `ngspice_noise`."""
    simulator = neospice.Simulator()
    circuit = simulator.parse(netlist)
    mode = neospice.ACMode.LIN
    runs = [simulator.run_noise(circuit, OUTPUT, SOURCE, mode, 1, x, x) for x in _rising(frequencies).tolist()]
    return np.array([run.output_noise_sqrt()[0] for run in runs])


def _rising(frequencies: ArrayLike) -> FloatArray:
    f = np.atleast_1d(np.asarray(frequencies, dtype=np.float64))
    assert np.all(np.diff(f) > 0), "frequencies must rise"
    return f


@dataclass(frozen=True, slots=True)
class Simulator:
    """One judge: response [V] and noise density [V/rtHz] of node `out` of a netlist at frequencies [Hz]."""

    name: str
    response: Callable[[str, ArrayLike], ComplexArray]
    noise: Callable[[str, ArrayLike], FloatArray]


SIMULATORS = (
    Simulator("ngspice", ngspice_response, ngspice_noise),
    Simulator("neospice", neospice_response, neospice_noise),
)
