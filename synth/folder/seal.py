"""The seal of a design: a digest of its circuit, by which an edit by hand is recognised.

It covers what the circuit follows from: parts, amplifier figures, stages without their findings, chain, spec.  A
number counts by its nine digits and not by its spelling, so that 4700 and 4.7e3 are the same.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from pathlib import Path

from synth.errors import FolderError
from synth.folder.document import DESIGN_FILE, DIGITS, load_document, named
from synth.folder.migrate import check_version
from synth.folder.recovery import locate, recover

SEALED = ("spec", "chain", "models", "parts")
SEALED_OF_STAGE = ("name", "kind", "topology", "target", "op_amp", "input_node", "test_point", "parts")


def seal_of(document: Mapping[str, object]) -> str:
    """sha256 over the canonical JSON of a document's circuit, in hexadecimal digits."""
    stages = document.get("stages")
    circuit: dict[str, object] = {key: document.get(key) for key in SEALED}
    circuit["stages"] = (
        [{key: stage.get(key) for key in SEALED_OF_STAGE} if isinstance(stage, dict) else stage for stage in stages]
        if isinstance(stages, list)
        else stages
    )
    text = json.dumps(_canonical(circuit), sort_keys=True, separators=(",", ":"))
    return hashlib.sha256(text.encode("ascii")).hexdigest()


def is_edited(folder: Path) -> bool:
    """Whether the circuit in a folder's design.json was changed by hand since it was written.

    Raises:
        FolderError: the folder holds no readable design.json, or one of a newer version.
    """
    folder = locate(folder)
    recover(folder)
    document = load_document(folder)
    check_version(document, named(folder / DESIGN_FILE))
    return is_edited_document(document)


def is_edited_document(document: Mapping[str, object]) -> bool:
    """Whether a document's seal is not that of its circuit; one without a seal counts as edited."""
    try:
        return document.get("seal") != seal_of(document)
    except RecursionError as error:
        raise FolderError("design.json: is nested too deeply to be a design; write the folder anew") from error


def _canonical(value: object) -> object:
    """Numbers as text of nine digits, marked so that no text can stand for one."""
    if isinstance(value, dict):
        return {key: _canonical(entry) for key, entry in value.items()}
    if isinstance(value, list):
        return [_canonical(entry) for entry in value]
    if isinstance(value, int | float) and not isinstance(value, bool):
        return {"number": _digits(value)}
    return value


def _digits(number: float) -> str:
    try:
        return f"{float(number):.{DIGITS}g}"
    except OverflowError:  # an integer beyond the range of a float
        return str(number.bit_length() if isinstance(number, int) else number)
