"""Kills `synth design` while it replaces a design folder by that of another spec, and looks at what is there.

Half of the kills are spread evenly over the whole run; the other half fall between the moment at which the new folder
begins to appear beside the old one and twice the time that it took, in a run left alone, to take its place.
"""

from __future__ import annotations

import hashlib
import random
import signal
import subprocess
import sys
import time
from dataclasses import dataclass
from pathlib import Path

from tests.spice.comparison import DEMO

COMMAND = "from synth.cli import main; main()"
TEMPORARY = ".synth-"
BUILDS = 200  # few, to come to the writing soon
PATIENCE = 60.0  # [s]

Hashes = dict[str, str]


@dataclass(frozen=True, slots=True)
class Outcome:
    """Of some kills: folders that were wholly old or wholly new, and runs that ended before they were killed."""

    kills: int
    old: int
    new: int
    torn: tuple[str, ...]
    too_late: int

    @property
    def whole(self) -> int:
        """Folders that were wholly one or the other."""
        return self.old + self.new


def hashes(folder: Path) -> Hashes:
    """sha256 of every file of a folder, by name."""
    return {file.name: hashlib.sha256(file.read_bytes()).hexdigest() for file in folder.iterdir()}


def two_specs(root: Path) -> list[Path]:
    """Two spec files of one name whose designs differ in every file."""
    text = DEMO.read_text(encoding="utf-8")
    other = text.replace('center_frequency = "100 kHz"', 'center_frequency = "80 kHz"').replace("Pickup", "Another")
    assert other.count("80 kHz") == 1
    specs = []
    for name, content in (("one", text), ("other", other)):
        (root / name).mkdir()
        specs.append(root / name / "spec.toml")
        specs[-1].write_text(content, encoding="utf-8")
    return specs


def start(spec: Path, folder: Path) -> subprocess.Popen[bytes]:
    """`synth design SPEC --out FOLDER` in a process of its own."""
    command = [sys.executable, "-c", COMMAND, "design", str(spec), "--out", str(folder), "--builds", str(BUILDS)]
    return subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE)


def kill_designs(root: Path, kills: int, seed: int = 20) -> Outcome:
    """Kill some replacements of one folder and compare it, file by file, with what either spec gives."""
    generator = random.Random(seed)
    specs, folder = two_specs(root), root / "design"
    wanted, seconds = [], []
    for spec in specs:
        began = time.perf_counter()
        process = start(spec, folder)
        near = _seconds_to_swap(folder, process)
        error = process.communicate(timeout=PATIENCE)[1]
        seconds.append(time.perf_counter() - began)
        assert process.returncode in (0, 1), error
        wanted.append(hashes(folder))
    assert wanted[0].keys() == wanted[1].keys()
    assert all(wanted[0][name] != wanted[1][name] for name in wanted[0])
    now, counts, torn, too_late = 1, {"old": 0, "new": 0}, [], 0
    for k in range(kills):
        began = time.perf_counter()
        process = start(specs[1 - now], folder)
        if k % 2:
            _wait_until(began + generator.uniform(0, 1.1 * max(seconds)))
        else:
            _wait_for_temporary(root, process)
            _wait_until(time.perf_counter() + generator.uniform(0, 2 * near))
        process.send_signal(signal.SIGKILL)
        process.communicate(timeout=PATIENCE)
        too_late += process.returncode != -signal.SIGKILL
        found = hashes(folder) if folder.is_dir() else {}
        if found in wanted:
            is_new = found == wanted[1 - now]
            counts["new" if is_new else "old"] += 1
            now = 1 - now if is_new else now
        else:
            strange = sorted(name for name in found if found[name] not in (wanted[0].get(name), wanted[1].get(name)))
            torn.append(f"kill {k}: {len(found)} files, neither old nor new: {strange}")
    _check_that_the_next_run_tidies_up(specs[1 - now], folder, wanted[1 - now])
    return Outcome(kills, counts["old"], counts["new"], tuple(torn), too_late)


def _seconds_to_swap(folder: Path, process: subprocess.Popen[bytes]) -> float:
    """From the first sign of the new folder until it stands in its place."""
    before = folder.stat().st_ino if folder.exists() else None
    _wait_for_temporary(folder.parent, process)
    began = time.perf_counter()
    while process.poll() is None and (not folder.exists() or folder.stat().st_ino == before):
        time.sleep(1e-4)
    return time.perf_counter() - began


def _check_that_the_next_run_tidies_up(spec: Path, folder: Path, wanted: Hashes) -> None:
    process = start(spec, folder)
    error = process.communicate(timeout=PATIENCE)[1]
    assert process.returncode in (0, 1), error
    found = hashes(folder)
    assert found == wanted, sorted(name for name in found if found[name] != wanted.get(name))
    left = [entry.name for entry in folder.parent.iterdir() if entry.name.startswith(TEMPORARY)]
    assert left == []


def _wait_until(moment: float) -> None:
    time.sleep(max(moment - time.perf_counter(), 0.0))


def _wait_for_temporary(root: Path, process: subprocess.Popen[bytes]) -> None:
    """Until a temporary of this process stands beside the folder, or it has ended."""
    while process.poll() is None:
        if any(f"-{process.pid}-" in entry.name for entry in root.iterdir() if entry.name.startswith(TEMPORARY)):
            return
