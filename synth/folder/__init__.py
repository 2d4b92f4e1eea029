"""Reads and writes the design folder: design.json, its seal, and the replacement of one folder by another."""

from __future__ import annotations

from synth.folder.decode import decode, read_design
from synth.folder.document import DESIGN_FILE, SIZE_LIMIT
from synth.folder.encode import encode, to_json
from synth.folder.migrate import MIGRATIONS
from synth.folder.recovery import recover
from synth.folder.schema import load_schema
from synth.folder.seal import is_edited
from synth.folder.swap import write_folder
from synth.folder.target import check_target

__all__ = [
    "DESIGN_FILE",
    "MIGRATIONS",
    "SIZE_LIMIT",
    "check_target",
    "decode",
    "encode",
    "is_edited",
    "load_schema",
    "read_design",
    "recover",
    "to_json",
    "write_folder",
]
