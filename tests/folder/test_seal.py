from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from synth.errors import FolderError
from synth.folder import DESIGN_FILE, decode, encode, is_edited, to_json
from synth.folder.seal import is_edited_document
from tests.folder.records import make_record
from tests.folder.test_decode_errors import Document, document, drop, put


def test_a_design_is_not_edited_after_writing_and_reading(tmp_path: Path) -> None:
    (tmp_path / DESIGN_FILE).write_text(to_json(make_record()))
    assert not is_edited(tmp_path)
    (tmp_path / DESIGN_FILE).write_text(to_json(decode(document())))
    assert not is_edited(tmp_path)


@pytest.mark.parametrize(
    "edit",
    [
        put("parts", 1, "value", value=10100),
        put("parts", 1, "nodes", 0, value="s1_m"),
        put("parts", 1, "tolerance", value=0.02),
        put("parts", 4, "note", value="socketed"),
        put("models", "AMP1", "dc_gain", value=1e5),
        put("chain", "load_resistance", value=None),
        put("stages", 0, "parts", value=[]),
        put("stages", 0, "op_amp", value=""),
        put("stages", value=3),
        put("stages", 0, value=None),
        put("spec", "target", "full_scale", value=3e-6),
        put("spec", "supply", "positive", value=10**400),
        put("seal", value="0" * 64),
        drop("seal"),
        drop("parts"),
    ],
)
def test_an_edit_of_the_circuit_is_seen(edit: Callable[[Document], None]) -> None:
    edited = document()
    edit(edited)
    assert is_edited_document(edited)


@pytest.mark.parametrize(
    "edit",
    [
        put("parts", 1, "value", value=10000),  # the same number, written otherwise
        put("realized", "bandwidth", value=5.0),
        put("stages", 0, "gain", value=1.0),
        put("cautions", value=[]),
        put("title", value="another"),
    ],
)
def test_what_is_not_the_circuit_may_differ(edit: Callable[[Document], None]) -> None:
    edited = document()
    edit(edited)
    assert not is_edited_document(edited)


def test_the_spelling_of_the_file_does_not_matter(tmp_path: Path) -> None:
    (tmp_path / DESIGN_FILE).write_text(json.dumps(document(), sort_keys=True))
    assert not is_edited(tmp_path)


def test_a_text_does_not_pass_for_a_number() -> None:
    edited: Any = document()
    edited["parts"][1]["value"] = "10000"
    assert is_edited_document(edited)


def test_a_new_writing_seals_the_edited_parts() -> None:
    edited = document()
    edited["parts"][1]["value"] = 12000
    assert not is_edited_document(encode(decode(edited)))


def test_a_folder_that_cannot_be_judged_is_refused(tmp_path: Path) -> None:
    with pytest.raises(FolderError, match=r"holds no design\.json"):
        is_edited(tmp_path)
    (tmp_path / DESIGN_FILE).write_text('{"version": 2}')
    with pytest.raises(FolderError, match=r"design\.json: version = 2: is newer"):
        is_edited(tmp_path)


def test_a_document_that_is_nested_too_deeply_is_refused() -> None:
    deep: object = 1
    for _ in range(5000):
        deep = [deep]
    with pytest.raises(FolderError, match="is nested too deeply to be a design"):
        is_edited_document({"parts": deep})
