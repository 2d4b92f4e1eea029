from __future__ import annotations

import json
import os
import random
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from synth.errors import FolderError
from synth.folder import DESIGN_FILE, MIGRATIONS, SIZE_LIMIT, decode, migrate, read_design, to_json
from tests.folder.records import make_record

TEXT = to_json(make_record())
Document = dict[str, Any]


def document() -> Document:
    fresh: Document = json.loads(TEXT)
    return fresh


def put(*path: str | int, value: object) -> Callable[[Document], None]:
    """An edit that sets the value at a path."""

    def edit(target: Any) -> None:
        for step in path[:-1]:
            target = target[step]
        target[path[-1]] = value

    return edit


def drop(*path: str | int) -> Callable[[Document], None]:
    """An edit that removes the value at a path."""

    def edit(target: Any) -> None:
        for step in path[:-1]:
            target = target[step]
        del target[path[-1]]

    return edit


def outcome(reading: Callable[[], object]) -> str:
    """ "read", or the message of a refusal; every other error passes through."""
    try:
        reading()
    except FolderError as error:
        return str(error)
    return "read"


# edit, message, and whether the schema sees it too (it knows no references between tables)
DEFECTS = [
    (put("version", value=2), r"version = 2: is newer, this program reads up to version 1; update", True),
    (put("version", value=0), r"version = 0: must be a whole number above zero", True),
    (put("version", value=True), r"version = true: must be a whole number above zero", False),
    (put("version", value="1"), r'version = "1": must be a whole number above zero', True),
    (drop("version"), r"version is missing", True),
    (drop("parts"), r"parts is missing", True),
    (drop("seal"), r"seal is missing", True),
    (drop("parts", 0, "nodes"), r"parts\[0\]\.nodes is missing", True),
    (drop("models", "AMP1", "dc_gain"), r"models\.AMP1\.dc_gain is missing", True),
    (put("extra", value=1), r'the key "extra" is not known; known: version, title', True),
    (put("parts", 1, "tolerence", value=1), r'parts\[1\]: the key "tolerence" is not known; did you mean tol', True),
    (put("title", value=3), r"title = 3: must be text", True),
    (put("title", value="a\nb"), r'title = "a\\nb": must be one line of printable text; .* U\+000A', True),
    (put("seed", value=-1), r"seed = -1: must be a whole number from 0", True),
    (put("seed", value=1.5), r"seed = 1.5: must be a whole number", True),
    (put("seed", value=True), r"seed = true: must be a whole number", True),
    (put("spec", value=[]), r"spec = a list: must be an object", True),
    (put("spec", "target", "bandwidth", value=-1), r"design\.json: spec.*target\.bandwidth = -1", False),
    (drop("spec", "sensor"), r"design\.json: spec.*sensor", True),
    (put("inputs", value={"a\nb": "c"}), r"inputs: the name \"a\\nb\" must be one line of printable text", False),
    (put("inputs", "spec.toml", value=1), r"inputs\.spec\.toml = 1: must be text", True),
    (put("order", value="2"), r'order = "2": must be a whole number', True),
    (put("chain", "center_frequency", value=0), r"chain\.center_frequency = 0: must be above 0", True),
    (put("chain", "center_frequency", value="1 kHz"), r'chain\.center_frequency = "1 kHz": must be a number', True),
    (put("chain", "ambient", value=-300), r"chain\.ambient = -300: must be above -273\.15", True),
    (put("chain", "load_resistance", value=0), r"chain\.load_resistance = 0: must be above 0", True),
    (put("chain", "load_capacitance", value=-1e-12), r"load_capacitance = -1e-12: must not be below 0", True),
    (put("chain", "center_frequency", value=10**400), r"center_frequency = a number of .*: must be finite", False),
    (put("models", "AMP1", "type", value="X"), r'models\.AMP1\.type = "X": must be the name it stands under', False),
    (put("models", "AMP1", "packages", value=[[0, "A"]]), r"packages = a list: must be a list of \[amplifiers", True),
    (put("models", "AMP1", "packages", value=[["A"]]), r"packages = a list: must be a list of \[amplifiers", True),
    (put("models", "AMP1", "second_pole", value=0), r"models\.AMP1\.second_pole = 0: must be above 0", True),
    (put("models", value=[]), r"models = a list: must be an object", True),
    (put("stages", value={}), r"stages = a table: must be a list", True),
    (put("stages", 0, value=1), r"stages\[0\] = 1: must be an object", True),
    (put("stages", 0, "kind", value="mixer"), r'stages\[0\]\.kind = "mixer": must be one of gain, pre-emph', True),
    (put("stages", 0, "op_amp", value="X"), r'stages\[0\]\.op_amp = "X": has no figures under models; known: ', False),
    (put("stages", 0, "parts", 0, value="R99"), r'stages\[0\]\.parts: "R99" is not among the parts; known: "C', False),
    (put("stages", 0, "parts", 0, value="R4"), r'parts: R4 says that it belongs to stage "bandpass 1"', False),
    (put("stages", 0, "parts", 0, value="R1"), r"stages\[0\]\.parts: names a part twice", True),
    (put("stages", 0, "parts", 0, value=7), r"stages\[0\]\.parts\[0\] = 7: must be text", True),
    (put("stages", 0, "test_point", value="a b"), r'stages\[0\]\.test_point = "a b": is no node name', True),
    (put("stages", 0, "phase_margin", value="x"), r'stages\[0\]\.phase_margin = "x": must be a number', True),
    (put("stages", 1, "q", value=False), r"stages\[1\]\.q = false: must be a number", True),
    (put("parts", 1, "value", value=-4700), r"parts\[1\]\.value = -4700: must be above 0", True),
    (put("parts", 1, "value", value=0), r"parts\[1\]\.value = 0: must be above 0", True),
    (put("parts", 1, "value", value="4k7"), r'parts\[1\]\.value = "4k7": must be a number', True),
    (put("parts", 4, "value", value=3), r"parts\[4\]\.value = 3: must be text", True),
    (put("parts", 4, "value", value="X"), r'parts\[4\]\.value = "X": has no figures under models; known: ', False),
    (put("parts", 1, "nodes", value=["a"]), r"parts\[1\]\.nodes: R1 has 1 nodes, its kind resistor needs 2", True),
    (put("parts", 4, "nodes", value=["a", "b"]), r"parts\[4\]\.nodes: U1A has 2 nodes, its kind op-amp needs 3", True),
    (put("parts", 1, "nodes", 0, value="a b"), r'parts\[1\]\.nodes: "a b" is no node name', True),
    (put("parts", 1, "nodes", 0, value=""), r'parts\[1\]\.nodes: "" is no node name', True),
    (put("parts", 1, "ref", value="r1\n.end"), r"parts\[1\]\.ref = \"r1\\n\.end\": must be one line", True),
    (put("parts", 1, "ref", value="resistor"), r'parts\[1\]\.ref = "resistor": is no reference designator', True),
    (put("parts", 1, "ref", value="R2"), r'parts\[2\]\.ref = "R2": stands at parts\[1\] too', False),
    (put("parts", 1, "kind", value="coil"), r'parts\[1\]\.kind = "coil": must be one of resistor, capacitor, op', True),
    (put("parts", 1, "kind", value=[]), r"parts\[1\]\.kind = a list: must be text", True),
    (put("parts", 1, "tolerance", value=1), r"parts\[1\]\.tolerance = 1: must be below 1", True),
    (put("parts", 1, "tolerance", value=None), r"parts\[1\]\.tolerance = null: must be a number", True),
    (put("parts", 1, "stray", value=-1), r"parts\[1\]\.stray = -1: must not be below 0", True),
    (put("response", "frequency", value=[]), r"response\.frequency = a list: must not be empty", True),
    (drop("response", "close", 0), r"response\.close = a list: has 100 entries and frequency 101", False),
    (put("response", "frequency", 1, value=0), r"response\.frequency = a list: must not fall", False),
    (put("response", "gain_db", 1, value=1e6), r"response\.gain_db = a list: holds a level beyond", False),
    (put("response", "gain_db", 1, value=None), r"response\.gain_db\[1\] = null: must be a number", True),
    (put("response", "close", 1, value=1), r"response\.close\[1\] = 1: must be true or false", True),
    (put("realized", "poles", 0, value=[1]), r"realized\.poles\[0\] = a list: must be a pair", True),
    (put("realized", "poles", 0, 1, value="i"), r'realized\.poles\[0\] = "i": must be a number', True),
    (put("noise", "density", 0, value=-1), r"noise\.density\[0\] = -1: must not be below 0", True),
    (put("noise", "contributors", 0, value="a"), r'noise\.contributors\[0\] = "a": must be an object', True),
    (put("requirements", 0, "met", value="yes"), r'requirements\[0\]\.met = "yes": must be true or false', True),
    (drop("requirements", 0, "limit"), r"requirements\[0\]\.limit is missing", True),
    (put("candidates", 0, "chosen", value=None), r"candidates\[0\]\.chosen = null: must be true or false", True),
    (put("cautions", 0, value="x" * 1001), r"cautions\[0\] = .*: has 1001 characters, at most 1000", True),
    (put("stages", 1, "name", value="gain 1"), r'stages\[1\]\.parts: R4 says that it belongs to stage "b', False),
    (put("stages", 1, value=document()["stages"][0]), r'stages\[1\]\.name = "gain 1": another stage has it', False),
    (put("models", value={}), r'parts\[4\]\.value = "AMP1": has no figures under models; there is none', False),
]  # fmt: skip


@pytest.mark.parametrize(("edit", "match", "_seen"), DEFECTS)
def test_a_defect_is_named(edit: Callable[[Document], None], match: str, _seen: bool) -> None:
    broken = document()
    edit(broken)
    with pytest.raises(FolderError, match=match):
        decode(broken)


@pytest.mark.parametrize("value", [None, True, 3, -1e300, "x", [], {}, [[]], [None], {"a": {}}, 10**400])
def test_any_value_anywhere_is_read_or_refused(value: object) -> None:
    """No place of the document lets an error of the language through."""

    def paths(node: object, path: tuple[str | int, ...] = ()) -> list[tuple[str | int, ...]]:
        entries: list[tuple[str | int, object]] = []
        if isinstance(node, dict):
            entries = list(node.items())
        elif isinstance(node, list):
            entries = list(enumerate(node[:2]))
        return [below for key, entry in entries for below in [(*path, key), *paths(entry, (*path, key))]]

    for path in paths(document()):
        broken = document()
        put(*path, value=value)(broken)
        assert "\n" not in outcome(lambda broken=broken: decode(broken)), path


@pytest.mark.parametrize("folder_content", [[], "text", 3, None])
def test_a_document_that_is_no_object_is_refused(folder_content: Any) -> None:
    with pytest.raises(FolderError, match=r"design\.json: holds .*, not an object"):
        decode(folder_content)


@pytest.mark.parametrize(
    ("content", "match"),
    [
        (b"", r"design\.json: is not JSON \(line 1, column 1: Expecting value\)"),
        (b'{"version": 1,', r"design\.json: is not JSON \(line 1, column"),
        (b"\xff\xfe\xfd", r"design\.json: is not UTF-8 text \(byte 0\)"),
        (b"[1]", r"design\.json: holds a list, not an object"),
        (b'{"version": NaN}', r"design\.json: holds NaN, which is no number"),
        (b'{"version": -Infinity}', r"design\.json: holds -Infinity, which is no number"),
        (b'{"version": 1e999}', r'design\.json: holds "1e999", which is out of range'),
        (b'{"version": 1, "version": 1}', r'design\.json: the key "version" stands twice'),
        (b'{"a": ' + b"9" * 5000 + b"}", r"design\.json: holds a number with too many digits"),
        (b"[" * 200000, r"design\.json: is nested too deeply"),
        (b'{"a": ' * 200000, r"design\.json: is nested too deeply"),
    ],
)
def test_a_file_that_is_no_document_is_refused(tmp_path: Path, content: bytes, match: str) -> None:
    (tmp_path / DESIGN_FILE).write_bytes(content)
    with pytest.raises(FolderError, match=match):
        read_design(tmp_path)


def test_a_spec_that_is_nested_too_deeply_is_refused() -> None:
    deep: object = 1
    for _ in range(5000):
        deep = [deep]
    broken = document()
    broken["spec"]["target"] = deep
    with pytest.raises(FolderError, match="spec"):
        decode(broken)


def test_a_file_beyond_the_size_limit_is_refused(tmp_path: Path) -> None:
    with open(tmp_path / DESIGN_FILE, "wb") as file:
        file.truncate(SIZE_LIMIT + 1)
    with pytest.raises(FolderError, match=r"design\.json: has more than 64 MB"):
        read_design(tmp_path)


def test_a_place_without_a_design_is_refused(tmp_path: Path) -> None:
    with pytest.raises(FolderError, match="nowhere: there is no such folder"):
        read_design(tmp_path / "nowhere")
    with pytest.raises(FolderError, match=r"holds no design\.json; name a folder that `synth design` wrote"):
        read_design(tmp_path)
    (tmp_path / "file").write_text("")
    with pytest.raises(FolderError, match="file: is a file, not a folder"):
        read_design(tmp_path / "file")
    (tmp_path / DESIGN_FILE).mkdir()
    with pytest.raises(FolderError, match=r"is not a regular file"):
        read_design(tmp_path)
    with pytest.raises(FolderError, match=r"a\\x00b: there is no such folder"):
        read_design(tmp_path / "a\0b")
    with pytest.raises(FolderError, match="cannot be followed: embedded null byte; name another folder"):
        read_design(tmp_path / "a\0b" / "c")


def test_a_pipe_is_not_waited_for(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / DESIGN_FILE)
    with pytest.raises(FolderError, match="is not a regular file"):
        read_design(tmp_path)


def test_a_file_that_may_not_be_read_is_named(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def denied(*_: object) -> int:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(os, "open", denied)
    with pytest.raises(FolderError, match=r"design\.json: cannot be read: Permission denied; make it readable"):
        read_design(tmp_path)


def test_random_damage_to_the_text_is_read_or_refused(tmp_path: Path) -> None:
    generator = random.Random(5)
    raw = bytearray(TEXT.encode())
    for _ in range(150):
        broken = bytearray(raw)
        for _ in range(generator.choice((1, 1, 4))):
            broken[generator.randrange(len(broken))] = generator.choice(b'0123456789"{}[],:-e \n\\x')
        (tmp_path / DESIGN_FILE).write_bytes(bytes(broken))
        assert outcome(lambda: read_design(tmp_path)).startswith(("read", str(tmp_path / DESIGN_FILE)))


def test_an_older_version_is_brought_up(monkeypatch: pytest.MonkeyPatch) -> None:
    def step(old: Document) -> Document:
        return {**{key: value for key, value in old.items() if key != "hints"}, "cautions": old["hints"]}

    monkeypatch.setattr(migrate, "VERSION", 2)
    monkeypatch.setitem(MIGRATIONS, 1, step)
    old = document()
    old["hints"] = old.pop("cautions")
    assert decode(old).verification.cautions == make_record().verification.cautions
    del old["hints"]
    with pytest.raises(FolderError, match="version = 1: is damaged, cannot be brought up"):
        decode(old)


def test_an_older_version_without_a_step_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(migrate, "VERSION", 2)
    with pytest.raises(FolderError, match="version = 1: can no longer be read"):
        decode(document())
