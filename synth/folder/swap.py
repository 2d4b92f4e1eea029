"""Writes a design folder so that it appears whole or not at all.

The new folder is written beside, and takes the place of the old one in a single step where the system has one: a
rename, or on Linux an exchange of two names, renameat2(2) with RENAME_EXCHANGE.  Where it has none, the old folder is
moved aside first; `recover` brings it back if the writing ends in between.
"""

from __future__ import annotations

import contextlib
import ctypes
import errno
import functools
import os
import stat
from collections.abc import Callable, Iterator, Mapping
from pathlib import Path

from synth.errors import FolderError
from synth.folder.document import DESIGN_FILE
from synth.folder.recovery import discard, in_use, locate, recover, temporary_name
from synth.folder.target import check_target, refuse
from synth.quantity import show

AT_FDCWD = -100
RENAME_EXCHANGE = 2
_NO_EXCHANGE = (errno.ENOSYS, errno.EINVAL, errno.ENOTSUP, errno.EPERM)


def write_folder(path: Path | str, files: Mapping[str, bytes], force: bool = False) -> None:
    """Write a design folder, replacing the one that is there.

    Args:
        path: the folder; missing parents are made.
        files: content by plain file name, design.json among them.
        force: see `check_target`.

    Raises:
        FolderError: the folder may not be replaced, or the system refuses; nothing is changed then.
    """
    _check_names(files)
    target = locate(Path(path))
    recover(target)
    check_target(target, force, files)
    new = target.with_name(temporary_name(target, "new"))
    old = target.with_name(temporary_name(target, "old"))
    with in_use(new.name, old.name), _parents(target):
        try:
            _fill(new, files, _mode(target))
            check_target(target, force, files)  # once more: the writing took its time
            aside = _move_in(new, target, old)
        except OSError as error:
            discard(new)
            refuse(target, error)
        except BaseException:
            discard(new)
            raise
        _flush_folder(target.parent)
        if aside is not None:
            discard(aside, target)


def _check_names(files: Mapping[str, bytes]) -> None:
    for name in files:
        if name in ("", ".", "..") or "/" in name or os.sep in name or not name.isprintable():
            raise FolderError(f"{show(name)}: is no plain file name; a design folder has no folders below it")
    if DESIGN_FILE not in files:
        raise FolderError(f"a design folder without {DESIGN_FILE} is none; give its content as well")


@contextlib.contextmanager
def _parents(target: Path) -> Iterator[None]:
    """Makes the missing parents of a target; takes them away again if it does not get there."""
    missing = []
    parent = target.parent
    while not parent.exists() and parent != parent.parent:
        missing.append(parent)
        parent = parent.parent
    made: list[Path] = []
    try:
        try:
            for folder in reversed(missing):
                os.mkdir(folder)
                made.append(folder)
        except OSError as error:
            refuse(target, error)
        yield
    except BaseException:
        for folder in reversed(made):
            with contextlib.suppress(OSError):
                os.rmdir(folder)
        raise


def _mode(target: Path) -> int | None:
    """Permissions of the folder that is replaced: a private one stays private."""
    return stat.S_IMODE(os.stat(target).st_mode) if target.exists() else None


def _fill(folder: Path, files: Mapping[str, bytes], mode: int | None) -> None:
    """A folder with its files, on the disk when this returns."""
    os.mkdir(folder, 0o777 if mode is None else 0o700)
    for name, content in files.items():
        handle = os.open(folder / name, os.O_WRONLY | os.O_CREAT | os.O_EXCL | getattr(os, "O_NOFOLLOW", 0), 0o666)
        try:
            rest = memoryview(content)
            while rest:
                rest = rest[os.write(handle, rest) :]
            os.fsync(handle)
        finally:
            os.close(handle)
    if mode is not None:
        os.chmod(folder, mode)
    _flush_folder(folder)


def _flush_folder(folder: Path) -> None:
    """The names in a folder on the disk; not every file system can do that."""
    with contextlib.suppress(OSError):
        handle = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(handle)
        finally:
            os.close(handle)


def _move_in(new: Path, target: Path, old: Path) -> Path | None:
    """Puts the new folder in its place; returns where the old one is now, None if there was none."""
    if not target.exists() or not os.listdir(target):
        os.rename(new, target)  # onto an empty folder too; fails if another process filled it meanwhile
        return None
    if _exchange(new, target):
        return new
    os.rename(target, old)
    try:
        os.rename(new, target)
    except BaseException:
        os.rename(old, target)
        raise
    return old


def _exchange(one: Path, other: Path) -> bool:
    """Exchanges two names in one step; False where the system cannot."""
    call = _renameat2()
    if call is None:
        return False
    if call(AT_FDCWD, os.fsencode(one), AT_FDCWD, os.fsencode(other), RENAME_EXCHANGE) == 0:
        return True
    code = ctypes.get_errno()
    if code in _NO_EXCHANGE:
        return False
    raise OSError(code, os.strerror(code), str(other))


@functools.cache
def _renameat2() -> Callable[[int, bytes, int, bytes, int], int] | None:
    """The system call, None where the C library has none."""
    try:
        call = ctypes.CDLL(None, use_errno=True).renameat2
    except (AttributeError, OSError, TypeError):
        return None
    call.argtypes = (ctypes.c_int, ctypes.c_char_p, ctypes.c_int, ctypes.c_char_p, ctypes.c_uint)
    call.restype = ctypes.c_int
    return call
