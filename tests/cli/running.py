"""Runs the console command, in this process for speed or in another for what only a process shows."""

from __future__ import annotations

import subprocess
from dataclasses import dataclass
from pathlib import Path

import pytest

from synth.cli import app, run
from tests.api.made import COMMAND, environment


@dataclass(frozen=True)
class Outcome:
    """Exit status, and what came out where."""

    status: int
    out: str
    err: str


def nominal(arguments: tuple[object, ...]) -> list[str]:
    """The arguments; a design draws no builds unless it is told how many, which is quick."""
    texts = [str(a) for a in arguments]
    if "design" in texts and len(texts) > texts.index("design") + 1 and "--builds" not in texts:
        texts += ["--builds", "0"]
    return texts


def synth(capsys: pytest.CaptureFixture[str], *arguments: object) -> Outcome:
    """The command in this process."""
    capsys.readouterr()
    try:
        status = run(lambda: app(nominal(arguments), prog_name="synth"))
    except SystemExit as stop:
        status = int(stop.code or 0)
    captured = capsys.readouterr()
    return Outcome(status, captured.out, captured.err)


def process(*arguments: object, folder: Path, **more: str) -> Outcome:
    """The command in a process of its own, in a folder."""
    done = subprocess.run(
        [*COMMAND, *nominal(arguments)],
        cwd=folder,
        env=environment(**more),
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
    )
    return Outcome(done.returncode, done.stdout, done.stderr)


def refused(outcome: Outcome, *words: str) -> str:
    """Asserts that the input was refused as the contract says; returns the message."""
    assert outcome.status == 2, outcome
    assert outcome.out == ""
    assert outcome.err.startswith("synth: ")
    assert outcome.err.endswith("\n")
    assert outcome.err.count("\n") == 1, outcome.err
    assert "Traceback" not in outcome.err
    assert outcome.err.removesuffix("\n").isprintable()
    for word in words:
        assert word in outcome.err, (word, outcome.err)
    return outcome.err.removeprefix("synth: ").strip()


def content(folder: Path) -> dict[str, bytes]:
    """Everything below a folder, by name."""
    return {str(p.relative_to(folder)): p.read_bytes() for p in sorted(folder.rglob("*")) if p.is_file()}


