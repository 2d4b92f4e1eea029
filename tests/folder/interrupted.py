"""Writes a design folder again and again, kills the writer, and looks at what is there; run by test_interruption.

Arguments: a fresh folder to work in, "exchange" or "fallback", and the scenario: "random" or "steps".
"""

from __future__ import annotations

import os
import random
import signal
import sys
import time
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from types import FrameType

from synth.folder import read_design, recover, swap, to_json, write_folder
from synth.folder.recovery import PREFIX
from tests.folder.records import make_record

KILLS = 50
LONGEST_WAIT = 0.02  # s
STEP_EVENTS = ("os.", "open", "shutil.")


def contents() -> tuple[dict[str, bytes], dict[str, bytes]]:
    """Two designs that differ in every file and in the names of their files."""
    record = make_record()
    old = {"design.json": to_json(record).encode(), "bom.csv": b"old" * 20000, "old.svg": b"<svg/>"}
    new = {"design.json": to_json(replace(record, seed=8)).encode(), "bom.csv": b"new" * 30000, "new.svg": b"<svg/>"}
    return old, new


def found(folder: Path) -> dict[str, bytes] | None:
    """What is there, None for no folder."""
    if not folder.exists():
        return None
    return {file.name: file.read_bytes() for file in folder.iterdir()}


def left_over(folder: Path) -> list[str]:
    """Temporaries beside a folder."""
    if not folder.parent.is_dir():
        return []
    return [name for name in os.listdir(folder.parent) if name.startswith(PREFIX)]


def check(folder: Path, allowed: tuple[Mapping[str, bytes] | None, ...], what: str) -> None:
    """The folder is wholly one of the allowed, and nothing is left beside it."""
    recover(folder)
    content = found(folder)
    assert content in allowed, f"{what}: {None if content is None else {k: len(v) for k, v in content.items()}}"
    assert not left_over(folder), f"{what}: {left_over(folder)}"
    if content is not None:
        read_design(folder)


def kill_at_random(folder: Path) -> int:
    """Kills a writer at random instants; returns how often both designs were seen at all."""
    generator = random.Random(11)
    designs = contents()
    write_folder(folder, designs[0])
    seen = set()
    for k in range(KILLS):
        ready, done = os.pipe()
        child = os.fork()
        if child == 0:
            turn = 0
            while True:
                turn += 1
                write_folder(folder, designs[turn % 2])
                if turn == 1:
                    os.write(done, b"x")
        os.read(ready, 1)
        time.sleep(generator.uniform(0, LONGEST_WAIT))
        os.kill(child, signal.SIGKILL)
        assert os.waitstatus_to_exitcode(os.waitpid(child, 0)[1]) == -signal.SIGKILL
        os.close(ready)
        os.close(done)
        check(folder, designs, f"kill {k}")
        seen.add((folder / "bom.csv").read_bytes()[:3])
    return len(seen)


def kill_at_every_step(folder: Path, start: Mapping[str, bytes] | None, always_whole: bool) -> int:
    """Kills a writer before its first, second, ... step on the file system; returns the number of steps."""
    new = contents()[1]
    for step in range(1, 1000):
        if start is not None:
            write_folder(folder, start)
        elif folder.exists():
            os.rename(folder, folder.with_name(f"{folder.name}-{step}"))
        child = os.fork()
        if child == 0:
            die_at(step)
            write_folder(folder, new)
            os._exit(0)
        code = os.waitstatus_to_exitcode(os.waitpid(child, 0)[1])
        if always_whole:  # a reader that knows nothing of recovery
            assert found(folder) in (start, new), f"step {step}"
        check(folder, (start, new), f"step {step}")
        if code == 0:
            assert found(folder) == new
            return step
        assert code == -signal.SIGKILL, f"step {step}: {code}"
    raise AssertionError("the writing does not end")


def die_at(step: int) -> None:
    """Kills this process at its n-th step."""
    count = 0

    def event(name: str, _arguments: object) -> None:
        nonlocal count
        if name.startswith(STEP_EVENTS):
            count += 1
            if count == step:
                os.kill(os.getpid(), signal.SIGKILL)

    sys.addaudithook(event)
    for name in ("write", "fsync"):  # these raise no event of their own
        call = getattr(os, name)
        setattr(
            os, name, lambda *arguments, call=call, name=name: (event(f"os.{name}", arguments), call(*arguments))[1]
        )


def main() -> None:
    """Runs the scenario."""
    root, mode, scenario = Path(sys.argv[1]), sys.argv[2], sys.argv[3]
    if mode == "fallback":
        swap._renameat2 = lambda: None
    if scenario == "random":
        assert kill_at_random(root / "design") == 2
        print("kills", KILLS)
    else:
        print("replaced", kill_at_every_step(root / "design", contents()[0], mode == "exchange"))
        print("first", kill_at_every_step(root / "first", None, True))


def ended(_signal: int, _frame: FrameType | None) -> None:
    """A writer must not outlive this process."""
    os._exit(1)


if __name__ == "__main__":
    signal.signal(signal.SIGALRM, ended)
    signal.alarm(120)
    main()
