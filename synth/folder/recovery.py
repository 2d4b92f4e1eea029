"""Temporary folders beside a design folder, and what is done about those that an interruption left.

A temporary is hidden, stands in the folder's own parent, and carries in its name the folder it serves, its use and
its process: ``.synth-<digest of the folder's name>-<use>-<process>-<random>``.  The uses:

new   being written, or, after an exchange, the content that was replaced; never needed again
old   the folder that was moved aside, whole; moved back where the folder itself is missing
gone  being deleted; never needed again
"""

from __future__ import annotations

import contextlib
import hashlib
import logging
import os
import re
import secrets
import shutil
from collections.abc import Iterator
from pathlib import Path
from typing import Literal

from synth.errors import FolderError
from synth.folder.document import named

Use = Literal["new", "old", "gone"]
PREFIX = ".synth-"
_NAME = re.compile(r"\.synth-([0-9a-f]{12})-(new|old|gone)-([0-9]{1,10})-[0-9a-f]+")
_LOG = logging.getLogger(__name__)

# Names of the temporaries that this process has in use: a process may get the number of an earlier one.
_IN_USE: set[str] = set()


def locate(path: Path) -> Path:
    """Absolute path of a folder; its parents are resolved, a symbolic link at its end is not.

    Raises:
        FolderError: no path at all, or one that cannot be followed.
    """
    try:
        path = Path(path)
        if path.name in ("", ".."):
            return path.resolve()
        return path.parent.resolve() / path.name
    except (OSError, RuntimeError, ValueError) as error:  # a loop of links, a null character
        raise FolderError(f"{named(path)}: cannot be followed: {error}; name another folder") from error


def temporary_name(target: Path, use: Use) -> str:
    """A fresh name for a temporary of this process beside a target."""
    return f"{PREFIX}{_digest(target.name)}-{use}-{os.getpid()}-{secrets.token_hex(4)}"


@contextlib.contextmanager
def in_use(*names: str) -> Iterator[None]:
    """Marks temporaries of this process as in use."""
    _IN_USE.update(names)
    try:
        yield
    finally:
        _IN_USE.difference_update(names)


def recover(path: Path) -> None:
    """Puts in order what an interrupted writing left: a folder moved aside comes back, temporaries are removed.

    Temporaries of a process that still runs are left alone.

    Raises:
        FolderError: the folder is missing, was moved aside, and cannot be moved back.
    """
    target = locate(path)
    if os.path.islink(target):
        target = locate(Path(os.path.realpath(target)))
    left = _left_over(target)
    aside = [folder for use, folder in left if use == "old"]
    if aside and not os.path.lexists(target):
        _restore(aside[-1], target)
    if os.path.lexists(target):
        for use, folder in left:
            if folder.exists():
                discard(folder, target if use == "old" else None)
    else:
        for use, folder in left:
            if use != "old":
                discard(folder)


def discard(folder: Path, target: Path | None = None) -> None:
    """Deletes a temporary; with a target, renames it first, so that a half deleted one is never moved back.

    A failure is logged only: the design itself is in its place.
    """
    try:
        if target is not None:
            gone = folder.with_name(temporary_name(target, "gone"))
            os.rename(folder, gone)
            folder = gone
        shutil.rmtree(folder)
    except OSError as error:
        if folder.exists():
            _LOG.warning("%s: could not be removed: %s; remove it by hand", folder, error.strerror)


def _restore(aside: Path, target: Path) -> None:
    try:
        os.rename(aside, target)
    except OSError as error:
        if not os.path.lexists(target):  # else another process was faster
            remedy = f"move {named(aside)} back by hand"
            raise FolderError(
                f"{named(target)}: was moved aside and cannot come back: {error.strerror}; {remedy}"
            ) from error


def _left_over(target: Path) -> list[tuple[str, Path]]:
    """Temporaries of the target whose process has ended, oldest first."""
    found = []
    with contextlib.suppress(OSError), os.scandir(target.parent) as entries:
        for entry in entries:
            match = _NAME.fullmatch(entry.name)
            if not match or match[1] != _digest(target.name) or not entry.is_dir(follow_symlinks=False):
                continue
            if not _is_live(entry.name, int(match[3])):
                found.append((entry.stat(follow_symlinks=False).st_mtime_ns, match[2], Path(entry.path)))
    return [(use, folder) for _, use, folder in sorted(found)]


def _is_live(name: str, process: int) -> bool:
    """Whether the process that made a temporary still runs."""
    if process == os.getpid():
        return name in _IN_USE
    try:
        os.kill(process, 0)
    except (ProcessLookupError, OverflowError):
        return False
    except OSError:  # it is another person's
        return True
    return True


def _digest(name: str) -> str:
    return hashlib.sha256(os.fsencode(name)).hexdigest()[:12]
