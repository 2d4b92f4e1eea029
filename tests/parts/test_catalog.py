"""The reader of catalog files: every mistake is a CatalogError that says where and what to do, never a traceback."""

from __future__ import annotations

import random
import re
from collections.abc import Callable
from pathlib import Path

import pytest

from synth.errors import CatalogError
from synth.parts.catalog import PART_TABLES, Bound, Entry, entries, nearest_name, provenance, read_catalog
from synth.parts.crystals import load_crystals, read_house_crystals
from synth.parts.kinds import dielectrics, read_house_capacitors, read_house_resistors, resistor_kinds
from synth.parts.locate import catalog_path
from synth.parts.op_amps import load_op_amps, read_house_catalog

BOUND = Bound(1.0, 10.0, "V")


def entry(**table: object) -> Entry:
    return Entry(Path("mine.toml"), "op_amps.X", table)


def test_file_that_cannot_be_read(tmp_path: Path) -> None:
    with pytest.raises(CatalogError, match=r"none\.toml: cannot be read \(No such file"):
        read_catalog(tmp_path / "none.toml", PART_TABLES)
    with pytest.raises(CatalogError, match="cannot be read"):
        read_catalog(tmp_path, PART_TABLES)


@pytest.mark.parametrize(
    ("content", "complaint"),
    [
        (b"[op_amps.X\n", r"is not TOML: .*line 1"),
        (b"a = " + b"[" * 5000, "is not TOML"),
        (b"a = 1" + b"0" * 5000, "is not TOML"),
        (b'\xff\xfe = "x"', "is not UTF-8"),
        (b"[op_amps.X]\na = 1\n[op_amps.X]\n", "is not TOML"),
        (b"[opamps.X]\n", "opamps = .*unknown key; nearest: op_amps"),
        (b"format = 2\n", "format = 2: is not the format this program reads"),
        (b'format = "1"\n', "format = '1': must be a plain number"),
    ],
)
def test_file_that_is_no_catalog(tmp_path: Path, content: bytes, complaint: str) -> None:
    file = tmp_path / "mine.toml"
    file.write_bytes(content)
    with pytest.raises(CatalogError, match=rf"mine\.toml: .*{complaint}"):
        read_catalog(file, PART_TABLES)


@pytest.mark.parametrize(
    ("content", "complaint"),
    [
        ("op_amps = 3", r"op_amps = 3: must be a table; write \[op_amps\]"),
        ("[op_amps]\nX = 3", r"\[op_amps\] X = 3: must be a table; write \[op_amps\.X\]"),
        ('[op_amps."A\\nB"]', r"\[op_amps\] entry name 'A\\nB' must match"),
        ('[op_amps."=1+1"]', "entry name '=1\\+1' must match"),
    ],
)
def test_entries_that_are_none(tmp_path: Path, content: str, complaint: str) -> None:
    file = tmp_path / "mine.toml"
    file.write_text(content)
    with pytest.raises(CatalogError, match=complaint):
        load_op_amps([file])


@pytest.mark.parametrize(
    ("value", "complaint"),
    [
        ("3", "must be a plain number between 1 and 10 V"),
        (True, "must be a plain number"),
        ([3], "must be a plain number"),
        (0.99, "must lie between 1 and 10 V; correct the figure"),
        (float("nan"), "must lie between"),
        (float("inf"), "must lie between"),
        (10**400, "must lie between"),
    ],
)
def test_numbers_refused(value: object, complaint: str) -> None:
    with pytest.raises(CatalogError, match=rf"mine\.toml: \[op_amps\.X\] level = .*: {complaint}"):
        entry(level=value).number("level", BOUND)


def test_figures_accepted() -> None:
    read = entry(a=1, b=[1, 2.5], c=True, d="text", e=[[1, 2], [3, 4]], f={"x": 3}, g=["u", "v"], h=[{"x": 4}])
    assert read.number("a", BOUND) == 1.0
    assert read.optional_number("z", BOUND) is None
    assert read.numbers("b", BOUND) == (1.0, 2.5)
    assert read.flag("c")
    assert read.text("d") == "text"
    assert read.optional_text("z") == ""
    assert read.pairs("e", BOUND, BOUND) == ((1.0, 2.0), (3.0, 4.0))
    assert read.sub_table("f").number("x", BOUND) == 3.0
    assert read.texts("g") == ("u", "v")
    assert [row.number("x", BOUND) for row in read.rows("h")] == [4.0]
    assert read.rows("h")[0].name == "op_amps.X.h 1"


@pytest.mark.parametrize(
    ("call", "value", "complaint"),
    [
        (lambda e: e.number("b", BOUND), 1, r"\[op_amps\.X\] b: is missing; add it"),
        (lambda e: e.numbers("a", BOUND), [], "must be a list with at least one item"),
        (lambda e: e.numbers("a", BOUND), 3, "must be a list"),
        (lambda e: e.pairs("a", BOUND, BOUND), [1, 2], r"must be a list of pairs \[x, y\]"),
        (lambda e: e.pairs("a", BOUND, BOUND), [[2, 2], [1, 1]], "the first figures must rise"),
        (lambda e: e.flag("a"), 1, "must be true or false"),
        (lambda e: e.text("a"), 1, "must be a text"),
        (lambda e: e.text("a"), " ", "must be a text"),
        (lambda e: e.text("a"), "x\n.end", "must be one printable line"),
        (lambda e: e.text("a"), "x" * 1001, "must be one printable line of at most 1000"),
        (lambda e: e.text("a", "[a-z]+"), "A1", r"must match \[a-z\]\+"),
        (lambda e: e.choice("a", ("bipolar", "JFET")), "jfet", "must be one of bipolar, JFET; nearest: JFET"),
        (lambda e: e.sub_table("a"), 1, r"must be a table; write \[op_amps\.X\.a\]"),
        (lambda e: e.rows("a"), [1], r"must be an array of tables; write \[\[op_amps\.X\.a\]\]"),
        (lambda e: e.check_keys(("alpha",)), 1, "unknown key; known: alpha; correct or remove it"),
    ],
)
def test_keys_refused(call: Callable[[Entry], object], value: object, complaint: str) -> None:
    with pytest.raises(CatalogError, match=complaint):
        call(entry(a=value))


@pytest.mark.parametrize(
    ("table", "complaint"),
    [
        ({}, r"\[op_amps\.X\] provenance: is missing"),
        ({"provenance": {"found": ["a"]}}, "says nothing of 'b'; add it to one of found"),
        ({"provenance": {"found": ["a", "b"], "memory": ["a"]}}, "lists 'a', already listed as found"),
        ({"provenance": {"found": ["a", "b", "c"]}}, "'c' is not a figure of the entry; known: a, b"),
        ({"provenance": {"guessed": ["a", "b"]}}, "unknown key"),
        ({"provenance": {"found": "a"}}, "must be a list"),
    ],
)
def test_provenance_refused(table: dict[str, object], complaint: str) -> None:
    with pytest.raises(CatalogError, match=complaint):
        provenance(entry(**table), ("a", "b"), complete=True)


def test_provenance_of_a_persons_own_entry_may_be_left_out() -> None:
    assert provenance(entry(), ("a", "b"), complete=False) == {"a": "uncertain", "b": "uncertain"}
    table = {"provenance": {"found": ["a"]}}
    assert provenance(entry(**table), ("a", "b"), complete=False) == {"a": "found", "b": "uncertain"}


def test_nearest_name() -> None:
    assert nearest_name("opa1612a", ("OPA1611", "OPA1612", "LM358")).startswith("nearest: OPA1612")
    assert nearest_name("xyz", ("LM358",)) == "known: LM358"
    assert nearest_name("xyz", ()) == "none is known"


def test_an_own_catalog_may_hold_parts_of_every_kind(tmp_path: Path) -> None:
    file = tmp_path / "mine.toml"
    file.write_text("format = 1\n")
    assert entries(read_catalog(file, PART_TABLES), "op_amps", ".+") == {}
    assert load_op_amps([file]) == load_op_amps()
    assert resistor_kinds([file]) == resistor_kinds()
    assert dielectrics([file]) == dielectrics()
    assert load_crystals([file]) == load_crystals()


READERS: dict[str, Callable[[Path], object]] = {
    "op_amps.toml": read_house_catalog,
    "resistors.toml": read_house_resistors,
    "capacitors.toml": read_house_capacitors,
    "crystals.toml": read_house_crystals,
}
NONSENSE = ("-1", "0", "nan", "inf", '"text"', "true", "[]", "[1]", "{}", "1e99", "[[1, 2]]", '""', "1979-05-27")


def refusal(reader: Callable[[Path], object], file: Path) -> str | None:
    """The text of the CatalogError that reading ends in, None when the file can be read."""
    try:
        reader(file)
    except CatalogError as error:
        return str(error)
    return None


@pytest.mark.parametrize("name", READERS)
def test_hand_broken_catalogs_never_end_in_a_traceback(name: str, tmp_path: Path) -> None:
    lines = catalog_path(name).read_text(encoding="utf-8").splitlines()
    draw = random.Random(f"broken {name}")
    file = tmp_path / name
    refused = 0
    for _ in range(150):
        broken = list(lines)
        at = draw.choice([i for i, line in enumerate(lines) if re.match(r"\w+ = ", line)])
        key = lines[at].split(" = ")[0]
        change = draw.randrange(4)
        if change == 0:
            broken[at] = f"{key} = {draw.choice(NONSENSE)}"
        elif change == 1:
            del broken[at]
        elif change == 2:
            broken[at] = lines[at].replace(key, key + "x", 1)
        else:
            at = draw.randrange(len(lines))
            broken[at] = broken[at][: draw.randrange(len(broken[at]) + 1)]
        file.write_text("\n".join(broken), encoding="utf-8")
        message = refusal(READERS[name], file)
        if message is not None:
            refused += 1
            assert message.startswith(f"{file}:")
            assert "\n" not in message
    assert refused > 75
