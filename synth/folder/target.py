"""What may be replaced: a folder of ours that nobody edited, and with force whatever is not protected."""

from __future__ import annotations

import contextlib
import errno
import os
import stat
import tempfile
from collections.abc import Mapping
from pathlib import Path
from typing import NoReturn

from synth.errors import FolderError
from synth.folder.document import DESIGN_FILE, load_document, named
from synth.folder.migrate import check_version
from synth.folder.recovery import PREFIX, locate, recover
from synth.folder.seal import is_edited_document
from synth.quantity import show

OWN_FILES = frozenset(["spec.toml", DESIGN_FILE, "bom.csv", "chain.cir", "report.txt", "report.html"])
OWN_ENDING = ".svg"
OWN_KEYS = frozenset(["version", "parts", "stages", "seal"])
_SHOWN = 3


def check_target(path: Path | str, force: bool = False, files: Mapping[str, bytes] | None = None) -> None:
    """Refuse a folder that may not be written, before anything is computed.

    Args:
        path: the folder.
        force: True replaces a folder that is not ours, was edited by hand, or holds files of others.
        files: what is known already of what will be written: a file that stands in the folder with just that
            content is not lost by the replacement, and needs no force.

    Raises:
        FolderError: says what stands in the way and what to do.
    """
    target = locate(Path(path))
    recover(target)
    try:
        found = os.lstat(target)
    except (FileNotFoundError, NotADirectoryError):
        _check_parent(target)
        return
    except (OSError, ValueError) as error:
        refuse(target, error)
    if stat.S_ISLNK(found.st_mode):
        raise FolderError(f"{named(target)}: is a symbolic link, which is not replaced; name the folder it leads to")
    if not stat.S_ISDIR(found.st_mode):
        raise FolderError(f"{named(target)}: is a file, which is not replaced; name another folder")
    _check_protected(target)
    try:
        lost = _lost(target, files or {})
        empty = not os.listdir(target)
    except OSError as error:
        refuse(target, error)
    _check_parent(target)
    if not force and not empty:
        _check_content(target, lost)


def refuse(target: Path, error: OSError | ValueError) -> NoReturn:
    """The error for what the system says about a folder."""
    reason = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
    where = error.filename if isinstance(error, OSError) and isinstance(error.filename, str | Path) else target
    name = Path(where).name
    at = "" if name == target.name or name.startswith(PREFIX) else f" ({show(name)[1:-1]})"
    remedy = "free space on the disk" if isinstance(error, OSError) and error.errno in _FULL else "name another folder"
    raise FolderError(f"{named(target)}: the design folder cannot be written: {reason}{at}; {remedy}") from error


_FULL = (errno.ENOSPC, errno.EDQUOT)


def _check_protected(target: Path) -> None:
    """Folders whose loss would be a disaster are never replaced, with force or without.

    A design folder is flat: whatever has folders below it holds more than a design.
    """
    remedy = "which is never replaced; name a folder of its own for the design"
    for name, around in _places():
        if target == around:
            raise FolderError(f"{named(target)}: is {name}, {remedy}")
        if target in around.parents:
            raise FolderError(f"{named(target)}: contains {name}, {remedy}")
    if target.parent in (target, target.parent.parent):
        raise FolderError(f"{named(target)}: is a folder of the system, {remedy}")
    if os.path.ismount(target):
        raise FolderError(f"{named(target)}: is the root of a file system, {remedy}")
    found = os.stat(target)
    if found.st_mode & stat.S_ISVTX:
        raise FolderError(f"{named(target)}: is a folder that several people share, {remedy}")
    if hasattr(os, "geteuid") and found.st_uid != os.geteuid():
        raise FolderError(f"{named(target)}: belongs to another person, {remedy}")
    try:
        below = sorted(entry.name for entry in os.scandir(target) if entry.is_dir(follow_symlinks=False))
    except OSError as error:
        refuse(target, error)
    if below:
        remedy = "a design folder has none and it is never replaced; name another, or remove them by hand"
        raise FolderError(f"{named(target)}: holds the folder {show(below[0])[1:-1]}, {remedy}")


def _places() -> list[tuple[str, Path]]:
    """The folders that everything else depends on."""
    named = (
        ("the working folder", os.curdir),
        ("the home folder", os.path.expanduser("~")),
        ("the folder of temporary files", tempfile.gettempdir()),
        ("this program", os.path.dirname(__file__)),
    )
    places = []
    for name, path in named:
        with contextlib.suppress(OSError, RuntimeError):  # a working folder that was deleted
            places.append((name, Path(path).resolve()))
    return places


def _check_parent(target: Path) -> None:
    """The nearest parent that exists must be a folder that can be written."""
    parent = target.parent
    while not os.path.lexists(parent) and parent != parent.parent:
        parent = parent.parent
    if not parent.is_dir():
        raise FolderError(f"{named(target)}: {named(parent)} is a file, no folder fits below it; name another folder")
    if not os.access(parent, os.W_OK | os.X_OK):
        reason = "the file system is read-only" if os.statvfs(parent).f_flag & os.ST_RDONLY else "permission denied"
        raise FolderError(f"{named(target)}: {named(parent)} cannot be written: {reason}; name another folder")


def _check_content(target: Path, lost: list[str]) -> None:
    """Without force, only a folder of ours is replaced, as it was written, or one that loses nothing."""
    force = "or replace it with --force"
    if not (target / DESIGN_FILE).is_file():
        if lost:
            held = f"it holds {_listed(lost)}"
            raise FolderError(f"{named(target)}: is not a design folder ({held}); name another folder, {force}")
        return
    try:
        document = load_document(target)
        check_version(document, named(target / DESIGN_FILE))
    except FolderError as error:
        raise FolderError(f"{error} (the folder is not replaced without --force)") from error
    if not document.keys() >= OWN_KEYS:
        raise FolderError(f"{named(target)}: its {DESIGN_FILE} is not one of ours; name another folder, {force}")
    if is_edited_document(document):
        raise FolderError(f"{named(target)}: its parts were edited by hand; name another folder to keep them, {force}")
    foreign = [name for name in lost if not _is_own(target, name)]
    if foreign:
        held = _listed(foreign)
        raise FolderError(f"{named(target)}: holds {held}, not written by this program; move it elsewhere, {force}")


def _listed(names: list[str]) -> str:
    return ", ".join(show(name)[1:-1] for name in names[:_SHOWN]) + (", ..." if len(names) > _SHOWN else "")


def _lost(target: Path, files: Mapping[str, bytes]) -> list[str]:
    """Names in the folder that the replacement would not leave as they are."""
    return sorted(name for name in os.listdir(target) if not _is_kept(target / name, files.get(name)))


def _is_kept(file: Path, content: bytes | None) -> bool:
    if content is None or not stat.S_ISREG(os.lstat(file).st_mode):
        return False
    return os.path.getsize(file) == len(content) and file.read_bytes() == content


def _is_own(target: Path, name: str) -> bool:
    """A regular file by a name that a design folder has."""
    return (name in OWN_FILES or name.endswith(OWN_ENDING)) and stat.S_ISREG(os.lstat(target / name).st_mode)
