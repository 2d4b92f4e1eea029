"""A folder is wholly old or wholly new, whenever its writer dies."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

from synth.folder import DESIGN_FILE, recover, swap, write_folder
from synth.folder.recovery import temporary_name
from tests.folder.interrupted import KILLS, contents, found, left_over

ROOT = Path(__file__).parents[2]
DEAD = 2**22 + 1  # beyond the largest process number of Linux

pytestmark = pytest.mark.skipif(not hasattr(os, "fork"), reason="needs fork")


def run(folder: Path, mode: str, scenario: str) -> dict[str, int]:
    command = [sys.executable, "-m", "tests.folder.interrupted", str(folder), mode, scenario]
    environment = os.environ | {"PYTHONPATH": str(ROOT), "OPENBLAS_NUM_THREADS": "1"}
    done = subprocess.run(command, cwd=ROOT, env=environment, capture_output=True, text=True, timeout=150, check=False)
    assert done.returncode == 0, done.stderr
    return {name: int(count) for name, count in (line.split() for line in done.stdout.splitlines())}


@pytest.mark.parametrize("mode", ["exchange", "fallback"])
def test_killed_at_random_instants(tmp_path: Path, mode: str) -> None:
    assert run(tmp_path, mode, "random") == {"kills": KILLS}


@pytest.mark.parametrize("mode", ["exchange", "fallback"])
def test_killed_at_every_step(tmp_path: Path, mode: str) -> None:
    steps = run(tmp_path, mode, "steps")
    assert steps["replaced"] > 20
    assert steps["first"] > 10


def dead(target: Path, use: str) -> Path:
    """A temporary's name of a process that has ended."""
    name = temporary_name(target, use)  # type: ignore[arg-type]
    return target.with_name(name.replace(f"-{os.getpid()}-", f"-{DEAD}-"))


def test_a_folder_that_was_moved_aside_comes_back(tmp_path: Path) -> None:
    target = tmp_path / "design"
    write_folder(target, contents()[0])
    target.rename(dead(target, "old"))
    dead(target, "new").mkdir()
    recover(target)
    assert found(target) == contents()[0]
    assert not left_over(target)


def test_a_folder_that_is_half_deleted_does_not_come_back(tmp_path: Path) -> None:
    target = tmp_path / "design"
    write_folder(target, contents()[0])
    target.rename(dead(target, "gone"))
    recover(target)
    assert not target.exists()
    assert not left_over(target)


def test_a_folder_moved_aside_comes_back_before_it_is_replaced(tmp_path: Path) -> None:
    target = tmp_path / "design"
    write_folder(target, contents()[0])
    (target / "notes.txt").write_text("mine")
    target.rename(dead(target, "old"))
    with pytest.raises(ValueError, match=r"holds notes\.txt, not written by this program"):
        write_folder(target, contents()[1])
    assert (target / "notes.txt").read_text() == "mine"


def test_temporaries_of_a_living_process_and_of_other_folders_are_left_alone(tmp_path: Path) -> None:
    target, other = tmp_path / "design", tmp_path / "other"
    write_folder(target, contents()[0])
    living = target.with_name(temporary_name(target, "new").replace(f"-{os.getpid()}-", "-1-"))
    kept = [living, dead(other, "new"), tmp_path / ".synth-notes", tmp_path / "design-old"]
    for folder in kept:
        folder.mkdir()
    link = dead(target, "new")
    link.symlink_to(tmp_path / "other")
    recover(target)
    assert all(folder.is_dir() for folder in kept)
    assert link.is_symlink()


def test_a_temporary_that_an_earlier_process_of_the_same_number_left_is_removed(tmp_path: Path) -> None:
    target = tmp_path / "design"
    write_folder(target, contents()[0])
    target.with_name(temporary_name(target, "new")).mkdir()
    recover(target)
    assert not left_over(target)


def test_a_folder_that_cannot_come_back_is_named(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    target = tmp_path / "design"
    dead(target, "old").mkdir()

    def refused(*_: object) -> None:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(os, "rename", refused)
    match = "was moved aside and cannot come back: Permission denied; move .* back by hand"
    with pytest.raises(ValueError, match=match):
        recover(target)


def test_the_fallback_puts_the_old_folder_back_if_the_new_one_cannot_move_in(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    target = tmp_path / "design"
    write_folder(target, contents()[0])
    rename, moves = os.rename, []

    def second_fails(source: Path, destination: Path) -> None:
        moves.append(destination)
        if len(moves) == 2:
            raise OSError(5, "Input/output error")
        rename(source, destination)

    monkeypatch.setattr(swap, "_renameat2", lambda: None)
    monkeypatch.setattr(os, "rename", second_fails)
    with pytest.raises(ValueError, match="the design folder cannot be written: Input/output error"):
        write_folder(target, contents()[1])
    assert len(moves) == 3
    assert found(target) == contents()[0]
    assert not left_over(target)


def test_a_recovery_needs_no_parent(tmp_path: Path) -> None:
    recover(tmp_path / "nowhere" / DESIGN_FILE)
