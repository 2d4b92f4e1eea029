"""Versions of design.json: a newer one is refused, an older one is brought up step by step."""

from __future__ import annotations

from collections.abc import Callable, Mapping

from synth.errors import FolderError
from synth.folder.document import REMEDY, Document
from synth.model.record import VERSION
from synth.quantity import show

# Step from each version to the next: takes the whole document of that version, returns it as the next one.
MIGRATIONS: dict[int, Callable[[Document], Document]] = {}


def check_version(document: Mapping[str, object], source: str) -> int:
    """The document's version.

    Raises:
        FolderError: no version, no whole number above zero, or newer than this program reads.
    """
    if not isinstance(document, Mapping):  # handed over by a program, not read from a file
        raise FolderError(f"{source}: holds {show(document)}, not an object; {REMEDY}")
    if "version" not in document:
        raise FolderError(f"{source}: version is missing; {REMEDY}")
    version = document["version"]
    if isinstance(version, bool) or not isinstance(version, int) or version < 1:
        raise FolderError(f"{source}: version = {show(version)}: must be a whole number above zero; {REMEDY}")
    if version > VERSION:
        newest = f"this program reads up to version {VERSION}"
        raise FolderError(f"{source}: version = {show(version)}: is newer, {newest}; update the program")
    return version


def migrate(document: Document, source: str) -> Document:
    """The document in the present version.

    Raises:
        FolderError: as `check_version`, or an older document that cannot be brought up.
    """
    version = check_version(document, source)
    while version < VERSION:
        step = MIGRATIONS.get(version)
        if step is None:
            raise FolderError(f"{source}: version = {version}: can no longer be read; {REMEDY}")
        try:
            document = step(document)
        except (LookupError, TypeError, ValueError, AttributeError, ArithmeticError, RecursionError) as error:
            raise FolderError(f"{source}: version = {version}: is damaged, cannot be brought up; {REMEDY}") from error
        version += 1
        document["version"] = version
    return document
