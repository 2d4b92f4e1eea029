"""design.json as a document: plain JSON text in and out, nine significant digits, nothing that is not finite."""

from __future__ import annotations

import json
import math
import os
import stat
from collections.abc import Mapping
from pathlib import Path
from typing import NoReturn

import numpy as np

from synth.errors import FolderError
from synth.quantity import show

DESIGN_FILE = "design.json"
SIZE_LIMIT = 64 * 1024 * 1024  # bytes
DIGITS = 9
REMEDY = "correct it, or write the folder anew with `synth design`"

Document = dict[str, object]


def rounded(number: float) -> float:
    """The number with nine significant digits.

    >>> rounded(1 / 3)
    0.333333333
    """
    return float(f"{number:.{DIGITS}g}")


def plain(value: object, source: str, path: str = "") -> object:
    """A value as JSON can hold it: numbers rounded, arrays and tuples as lists, complex numbers as [re, im].

    Raises:
        FolderError: a number that is not finite, or a value of a kind that JSON has not; names its key.
    """
    if isinstance(value, np.generic):
        value = value.item()
    if value is None or isinstance(value, bool | int | str):
        return value
    if isinstance(value, float):
        if not math.isfinite(value):
            raise FolderError(f"{source}: {path} = {value}: must be finite to be recorded; correct the figure")
        return rounded(value)
    if isinstance(value, complex):
        return [plain(value.real, source, path), plain(value.imag, source, path)]
    if isinstance(value, np.ndarray):
        value = value.tolist()
    if isinstance(value, Mapping):
        return {str(key): plain(entry, source, f"{path}.{key}" if path else str(key)) for key, entry in value.items()}
    if isinstance(value, list | tuple):
        return [plain(entry, source, f"{path}[{k}]") for k, entry in enumerate(value)]
    raise FolderError(f"{source}: {path} is a {type(value).__name__}: JSON has no such value; record a number or text")


def to_text(document: Mapping[str, object]) -> str:
    """The document as JSON text, one space of indent, newline at the end; characters beyond ASCII are escaped."""
    return json.dumps(document, indent=1, ensure_ascii=True, allow_nan=False) + "\n"


def named(path: Path) -> str:
    """A path as it can stand in a one-line message."""
    return show(str(path), 200)[1:-1]


def parse_document(data: bytes, source: str) -> Document:
    """The object in a JSON text.

    Raises:
        FolderError: too large, not UTF-8, not JSON, NaN or infinity in it, a key twice, nested too deeply, no object.
    """
    if len(data) > SIZE_LIMIT:
        raise FolderError(f"{source}: has more than {SIZE_LIMIT // 2**20} MB; name the right file")
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise FolderError(f"{source}: is not UTF-8 text (byte {error.start}); save it as UTF-8") from error
    try:
        document = json.loads(
            text,
            parse_constant=lambda word: _no_number(word, source),
            parse_float=lambda digits: _finite(digits, source),
            object_pairs_hook=lambda pairs: _object(pairs, source),
        )
    except RecursionError as error:
        raise FolderError(f"{source}: is nested too deeply to be a design; {REMEDY}") from error
    except json.JSONDecodeError as error:
        where = f"line {error.lineno}, column {error.colno}"
        raise FolderError(f"{source}: is not JSON ({where}: {error.msg}); {REMEDY}") from error
    except FolderError:
        raise
    except ValueError as error:  # an integer of thousands of digits
        raise FolderError(f"{source}: holds a number with too many digits; {REMEDY}") from error
    if not isinstance(document, dict):
        raise FolderError(f"{source}: holds {show(document)}, not an object; {REMEDY}")
    return document


def load_document(folder: Path) -> Document:
    """The object in a folder's design.json.

    Raises:
        FolderError: no folder, no such file, or as `parse_document`.
    """
    return parse_document(read_bytes(folder), named(folder / DESIGN_FILE))


def read_bytes(folder: Path) -> bytes:
    """The bytes of a folder's design.json, no more than the size limit and one.

    Raises:
        FolderError: no folder, no such file, not a regular file, or not readable.
    """
    shown = named(folder)
    if not folder.is_dir():
        problem = "is a file, not a folder" if os.path.lexists(folder) else "there is no such folder"
        raise FolderError(f"{shown}: {problem}; name a folder that `synth design` wrote")
    try:
        content = _read_regular(folder / DESIGN_FILE)
    except FileNotFoundError as error:
        raise FolderError(f"{shown}: holds no {DESIGN_FILE}; name a folder that `synth design` wrote") from error
    except OSError as error:
        raise FolderError(f"{shown}/{DESIGN_FILE}: cannot be read: {error.strerror}; make it readable") from error
    if content is None:
        raise FolderError(f"{shown}/{DESIGN_FILE}: is not a regular file; name a folder that `synth design` wrote")
    return content


def _read_regular(file: Path) -> bytes | None:
    """The content up to the size limit and one byte; None for a pipe, device or folder, which is not waited for."""
    handle = os.open(file, os.O_RDONLY | getattr(os, "O_NONBLOCK", 0))
    try:
        if not stat.S_ISREG(os.fstat(handle).st_mode):
            return None
        with os.fdopen(handle, "rb", closefd=False) as stream:
            return stream.read(SIZE_LIMIT + 1)
    finally:
        os.close(handle)


def _no_number(word: str, source: str) -> NoReturn:
    raise FolderError(f"{source}: holds {word}, which is no number; {REMEDY}")


def _finite(digits: str, source: str) -> float:
    number = float(digits)
    if not math.isfinite(number):
        raise FolderError(f"{source}: holds {show(digits)}, which is out of range; {REMEDY}")
    return number


def _object(pairs: list[tuple[str, object]], source: str) -> Document:
    document: Document = {}
    for key, value in pairs:
        if key in document:
            raise FolderError(f"{source}: the key {show(key)} stands twice in one object; remove one of them")
        document[key] = value
    return document
