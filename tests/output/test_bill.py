"""The bill of materials."""

from __future__ import annotations

import csv
import io
from dataclasses import replace

import pytest

from synth.errors import SynthError
from synth.model.part import OpAmp, Part
from synth.model.record import DesignRecord
from synth.output.bill import COLUMNS, bill_csv, bill_rows, natural, package_of
from synth.spec import Supply
from tests.support.records import op_amp, record


def with_parts(parts: tuple[Part, ...], models: dict[str, OpAmp] | None = None) -> DesignRecord:
    plain = record()
    return replace(plain, chain=replace(plain.chain, parts=parts, models=models or plain.chain.models))


def amplifier(ref: str, type_: str = "LM4562") -> Part:
    return Part(ref, "op-amp", "amplifier", "gain 1", ("a", "b", "c"), type_)


def resistor(ref: str, value: float = 1e3) -> Part:
    return Part(ref, "resistor", "feedback", "gain 1", ("a", "b"), value, 0.01, 50e-6, "thin film", size="0603")


def cells() -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(bill_csv(record()))))


def test_header_and_line_ends() -> None:
    text = bill_csv(record())
    assert text.splitlines()[0] == ",".join(COLUMNS)
    assert "\r" not in text
    assert text.endswith("\n")


def test_quantities_add_up_to_parts_and_packages() -> None:
    parts = record().chain.parts
    passive = sum(part.kind != "op-amp" for part in parts)
    packages = {package_of(part.ref)[0] for part in parts if part.kind == "op-amp"}
    assert sum(int(row["quantity"]) for row in cells()) == passive + len(packages) == 17


def test_every_reference_is_on_one_line_only() -> None:
    listed = [ref for row in cells() for ref in row["reference designators"].split()]
    expected = {package_of(p.ref)[0] if p.kind == "op-amp" else p.ref for p in record().chain.parts}
    assert sorted(listed) == sorted(expected)


def test_quantity_equals_the_references_of_the_line() -> None:
    for row in cells():
        assert int(row["quantity"]) == len(row["reference designators"].split())


def test_equal_parts_share_a_line_in_natural_order() -> None:
    row = next(row for row in cells() if row["IEC 60062 code"] == "88K7")
    assert row["reference designators"] == "R7 R10"
    assert (row["value"], row["tolerance"], row["rating"]) == ("88.7 kohm", "1 %", "0.1 W")
    assert row["type"] == "thin film, 0603, 50 ppm/K"


@pytest.mark.parametrize(
    "change",
    [
        {"tolerance": 0.001},
        {"technology": "thick film"},
        {"size": "0805"},
        {"temperature_coefficient": 25e-6},
        {"rating": "1 W"},
        {"value": 1001.0},
    ],
)
def test_parts_that_cannot_be_ordered_as_one_stand_apart(change: dict[str, object]) -> None:
    other = replace(resistor("R2"), **change)  # type: ignore[arg-type]
    assert len(bill_rows(with_parts((resistor("R1"), other)))) == 2
    assert len(bill_rows(with_parts((resistor("R1"), resistor("R2"))))) == 1


def test_natural_order() -> None:
    assert sorted(["R10", "R2", "C3", "U2B", "U2A", "R1"], key=natural) == ["C3", "R1", "R2", "R10", "U2A", "U2B"]


def test_op_amps_are_ordered_by_package() -> None:
    rows = {row["type"]: row for row in cells()}
    assert rows["AD797ARZ"]["reference designators"] == "U1"
    assert rows["LM4562MA"]["reference designators"] == "U2 U10"
    assert rows["LM4562MA"]["quantity"] == "2"


def test_spare_amplifier_is_named_with_what_to_do_about_it() -> None:
    note = next(row["note"] for row in cells() if row["type"] == "LM4562MA")
    assert note == "U10B is spare: tie it off as a follower at mid-supply (ground)"


def test_spare_on_a_single_supply_is_not_tied_to_ground() -> None:
    plain = with_parts((amplifier("U1A"),))
    rows = bill_rows(replace(plain, spec=replace(plain.spec, supply=Supply(positive=5.0))))
    assert rows[0].note == "U1B is spare: tie it off as a follower at mid-supply"


def test_single_of_a_type_that_comes_as_a_dual_only() -> None:
    row = bill_rows(with_parts((amplifier("U3"),)))[0]
    assert (row.references, row.quantity, row.type) == (("U3",), 1, "LM4562MA")
    assert "U3B is spare" in row.note


def test_smallest_package_that_holds_the_units() -> None:
    models = {"X1": op_amp("X1", ((1, "X1S"), (2, "X1D"), (4, "X1Q")))}
    parts = tuple(amplifier(ref, "X1") for ref in ("U1", "U2A", "U2B", "U3A", "U3C", "U4A"))
    rows = {row.references: row for row in bill_rows(with_parts(parts, models))}
    assert {refs: row.type for refs, row in rows.items()} == {("U1",): "X1S", ("U2", "U4"): "X1D", ("U3",): "X1Q"}
    assert rows[("U3",)].note.startswith("U3B U3D are spare: tie each off")


def test_amplifiers_that_no_package_holds_are_refused() -> None:
    with pytest.raises(SynthError, match=r"U1: has 3 amplifiers of type LM4562, which comes as LM4562MA with 2"):
        bill_rows(with_parts(tuple(amplifier(f"U1{letter}") for letter in "ABC")))


def test_two_types_in_one_package_are_refused() -> None:
    with pytest.raises(SynthError, match=r"U1: holds amplifiers of different types \(AD797, LM4562\)"):
        bill_rows(with_parts((amplifier("U1A"), amplifier("U1B", "AD797"))))


@pytest.mark.parametrize("text", ["=1+1", "+1", "-1", "@SUM(A1)", "\t=1", "  =1", '=HYPERLINK("x","y")'])
def test_a_cell_is_never_a_formula(text: str) -> None:
    part = replace(resistor("R1"), note=text, rating=text, technology=text)
    row = next(csv.DictReader(io.StringIO(bill_csv(with_parts((part,))))))
    assert row["note"] == "'" + text
    assert row["rating"].startswith("'")
    assert row["type"].startswith("'")


def test_a_cell_stays_on_its_line() -> None:
    text = bill_csv(with_parts((replace(resistor("R1"), note="one\ntwo\rthree"),)))
    assert len(text.splitlines()) == 2
    assert "one two three" in text
