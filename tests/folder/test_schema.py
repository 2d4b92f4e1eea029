from __future__ import annotations

from collections.abc import Callable
from dataclasses import fields
from typing import Any

import jsonschema
import pytest

from synth.folder import decode, encode, load_schema
from synth.folder.decode import MODEL
from synth.model.part import OpAmp, Part
from tests.folder.records import make_record
from tests.folder.test_decode_errors import DEFECTS, Document, document

SCHEMA: Any = load_schema()
VALIDATOR = jsonschema.Draft202012Validator(SCHEMA)


def test_the_schema_is_one() -> None:
    jsonschema.Draft202012Validator.check_schema(SCHEMA)
    assert SCHEMA["$schema"] == "https://json-schema.org/draft/2020-12/schema"


def test_a_design_follows_the_schema() -> None:
    VALIDATOR.validate(encode(make_record()))
    VALIDATOR.validate(encode(decode(document())))


@pytest.mark.parametrize("edit", [edit for edit, _, seen in DEFECTS if seen])
def test_the_schema_rejects_what_the_reader_refuses(edit: Callable[[Document], None]) -> None:
    broken = document()
    edit(broken)
    assert not VALIDATOR.is_valid(broken)


def test_the_schema_asks_for_every_key_that_is_written() -> None:
    """Each object of the document has just the keys of its schema, all of them required."""

    def compare(node: Any, schema: Any, path: str) -> None:
        if "$ref" in schema:
            schema = SCHEMA["$defs"][schema["$ref"].rsplit("/", 1)[1]]
        if isinstance(node, dict) and "properties" in schema:
            assert list(node) == list(schema["properties"]) == schema["required"] or path == "models", path
            assert set(node) == set(schema["properties"]) == set(schema["required"]), path
            for key, entry in node.items():
                compare(entry, schema["properties"][key], f"{path}.{key}")
        elif isinstance(node, dict) and isinstance(schema.get("additionalProperties"), dict):
            for entry in node.values():
                compare(entry, schema["additionalProperties"], "models")
        elif isinstance(node, list) and isinstance(schema.get("items"), dict):
            for entry in node:
                compare(entry, schema["items"], f"{path}[]")

    compare(document(), SCHEMA, "")


def test_the_schema_and_the_reader_know_the_fields_of_the_model() -> None:
    assert {field.name for field in fields(OpAmp)} == set(SCHEMA["$defs"]["model"]["properties"]) == set(MODEL)
    assert {field.name for field in fields(Part)} | {"unit", "code"} == set(SCHEMA["$defs"]["part"]["properties"])
