"""The published JSON Schema of design.json."""

from __future__ import annotations

import json
from importlib import resources

SCHEMA_FILE = "design.schema.json"


def load_schema() -> dict[str, object]:
    """The JSON Schema (draft 2020-12) of design.json in its present version."""
    text = resources.files("synth.folder").joinpath(SCHEMA_FILE).read_text(encoding="utf-8")
    schema: dict[str, object] = json.loads(text)
    return schema
