"""Reading the files of a spec: every trouble with one is a SpecError that names it."""

from __future__ import annotations

import csv
from pathlib import Path

from synth.errors import SpecError

SIZE_LIMIT = 1_000_000  # [byte]


def read_text(path: Path, what: str) -> str:
    """The text of a file.

    Args:
        path: the file.
        what: what it should be ("a spec"), for the messages.

    Raises:
        SpecError: not there, a directory, unreadable, larger than 1 MB, empty, or not UTF-8.
    """
    require_file(path, what)
    try:
        size = path.stat().st_size
        data = b"" if size > SIZE_LIMIT else path.read_bytes()
    except OSError as error:
        raise SpecError(f"{path}: cannot be read ({error.strerror}); {what} is expected") from error
    if size > SIZE_LIMIT:
        raise SpecError(f"{path}: has {size} bytes, more than {SIZE_LIMIT}; {what} is expected, name the right file")
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        raise SpecError(f"{path}, line {line}: is not UTF-8 text; save it as UTF-8") from error
    if not text.strip():
        raise SpecError(f"{path}: is empty; {what} is expected")
    return text


def require_file(path: Path, what: str) -> None:
    """Refuse a path that is no readable file.

    Raises:
        SpecError: not there, a directory or a device, or not readable.
    """
    try:
        if path.is_dir():
            raise SpecError(f"{path}: is a folder; name the file in it, {what} is expected")
        if not path.exists():
            raise SpecError(f"{path}: no such file; {what} is expected, check the name")
        if not path.is_file():
            raise SpecError(f"{path}: is not a regular file; {what} is expected")
        with path.open("rb"):
            pass
    except OSError as error:
        raise SpecError(f"{path}: cannot be read ({error.strerror}); {what} is expected") from error


def read_response(path: Path) -> tuple[tuple[float, ...], ...]:
    """Rows of a measured response, CSV: Hz, gain (linear)[, degrees]; a first line of words and # lines are skipped.

    Raises:
        SpecError: the file as in `read_text`, or a cell that is not a number (names its line).
    """
    what = "a table of Hz, gain[, degrees]"
    rows: list[tuple[float, ...]] = []
    words_allowed = True
    for number, line in enumerate(read_text(path, what).splitlines(), start=1):
        if not line.strip() or line.lstrip().startswith("#"):
            continue
        try:
            cells = next(csv.reader([line], strict=True))
            rows.append(tuple(float(cell) for cell in cells))
        except (ValueError, csv.Error) as error:
            if words_allowed and not any(char.isdigit() for char in line.split(",")[0]):
                words_allowed = False
                continue
            hint = "separate the columns by commas, with decimal points" if ";" in line else f"expected {what}"
            raise SpecError(f"{path}, line {number}: a cell is not a number; {hint}") from error
        words_allowed = False
    return tuple(rows)
