"""One bill for several designs and boards."""

from __future__ import annotations

import csv
import io
import json
from dataclasses import replace
from pathlib import Path

import pytest

from synth.errors import FolderError
from synth.model.part import Part
from synth.model.record import DesignRecord
from synth.output.bill import COLUMNS, bill_csv, bill_rows
from synth.output.merged_bill import merged_bill, merged_csv, merged_json
from tests.support.records import record


def with_parts(*parts: Part) -> DesignRecord:
    plain = record()
    return replace(plain, chain=replace(plain.chain, parts=parts))


def resistor(ref: str, value: float, note: str = "") -> Part:
    return Part(ref, "resistor", "feedback", "gain 1", ("a", "b"), value, 0.01, 50e-6, "thin film", note=note)


def capacitor(ref: str, value: float) -> Part:
    return Part(ref, "capacitor", "coupling", "gain 1", ("a", "b"), value, 0.01, 30e-6, "C0G")


def amplifier(ref: str) -> Part:
    return Part(ref, "op-amp", "amplifier", "gain 1", ("a", "b", "c"), "LM4562")


def test_one_folder_and_one_board_is_its_own_bill() -> None:
    assert merged_csv(merged_bill([(Path("demo"), record())])) == bill_csv(record())


def test_boards_multiply_quantities_and_leave_references() -> None:
    bill = merged_bill([(Path("demo"), record())], boards=7)
    for row, single in zip(bill.rows, bill_rows(record()), strict=True):
        assert row == replace(single, quantity=7 * single.quantity)


def test_equal_parts_of_several_folders_share_a_line_with_the_folder_named() -> None:
    first = with_parts(resistor("R1", 1e3), resistor("R2", 10.0), capacitor("C1", 1e-9), amplifier("U1A"))
    second = with_parts(resistor("R1", 1e3), capacitor("C1", 10e-12), amplifier("U1A"), amplifier("U1B"))
    bill = merged_bill([(Path("a/near"), first), (Path("a/far side"), second)], boards=3)
    found = [(row.references, row.quantity, row.value) for row in bill.rows]
    assert found == [
        (("near/R2",), 3, "10 ohm"),
        (("near/R1", "far_side/R1"), 6, "1 kohm"),
        (("far_side/C1",), 3, "10 pF"),
        (("near/C1",), 3, "1 nF"),
        (("near/U1", "far_side/U1"), 6, "dual op amp"),
    ]
    note = bill.rows[-1].note
    assert note.startswith("near: U1B is spare")
    assert "far_side" not in note


def test_quantities_are_those_of_the_single_bills() -> None:
    bill = merged_bill([(Path("a"), record()), (Path("b"), record())], boards=5)
    single = sum(row.quantity for row in bill_rows(record()))
    assert sum(row.quantity for row in bill.rows) == 10 * single
    assert len(bill.rows) == len(bill_rows(record()))


def test_folders_of_one_name_are_told_apart_by_their_paths(tmp_path: Path) -> None:
    paths = [tmp_path / "x" / "demo", tmp_path / "y" / "demo", tmp_path / "z"]
    bill = merged_bill([(path, with_parts(resistor("R1", 1e3))) for path in paths])
    assert bill.folders == ("x/demo", "y/demo", f"{tmp_path.name}/z")
    assert bill.rows[0].references == ("x/demo/R1", "y/demo/R1", f"{tmp_path.name}/z/R1")
    alike = merged_bill([(Path("/a b"), record()), (Path("/a_b"), record())])
    assert alike.folders == ("1", "2")


def test_notes_say_which_folder_they_are_of() -> None:
    parts = (Path("a"), with_parts(resistor("R1", 1e3, "trim"))), (Path("b"), with_parts(resistor("R1", 1e3)))
    assert merged_bill(parts).rows[0].note == "a: trim"
    assert merged_bill(parts[:1]).rows[0].note == "trim"


@pytest.mark.parametrize(
    ("folders", "boards", "complaint"),
    [
        ((), 1, "no design folder is named; name at least one"),
        (("demo", "./demo"), 1, "demo: is named twice; name it once"),
        (("demo",), 0, "boards = 0: must be at least 1"),
    ],
)
def test_what_cannot_be_merged(folders: tuple[str, ...], boards: int, complaint: str) -> None:
    with pytest.raises(FolderError, match=complaint):
        merged_bill([(Path(name), record()) for name in folders], boards)


def test_csv_has_no_formulas() -> None:
    text = merged_csv(merged_bill([(Path("=demo"), record()), (Path("+x"), with_parts(resistor("R1", 1e3, "=1+1")))]))
    assert "\r" not in text
    rows = list(csv.reader(io.StringIO(text)))
    assert rows[0] == list(COLUMNS)
    assert all(not cell.startswith(("=", "+", "-", "@")) for row in rows for cell in row)


def test_json_has_the_columns_of_the_csv() -> None:
    bill = merged_bill([(Path("a"), record()), (Path("b"), record())], boards=2)
    content = json.loads(merged_json(bill))
    assert content["folders"] == ["a", "b"]
    assert content["boards"] == 2
    rows = list(csv.DictReader(io.StringIO(merged_csv(bill))))
    for line, row in zip(content["lines"], rows, strict=True):
        assert " ".join(line["reference designators"]) == row["reference designators"]
        assert line["quantity"] == int(row["quantity"])
        assert [line[key] for key in COLUMNS[2:]] == [row[key] for key in COLUMNS[2:]]
