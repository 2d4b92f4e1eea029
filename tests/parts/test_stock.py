"""The person's drawer: reading it, stocks restricted to it, and what a chain needs beyond it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest

from synth.errors import CatalogError, SpecError
from synth.model.part import Part
from synth.output.bill import bill_rows
from synth.parts.eseries import values_between
from synth.parts.op_amps import load_op_amps
from synth.parts.passives import capacitor_stock, coupling_stock, resistor_stock
from synth.parts.stock import (
    Drawer,
    Item,
    affords,
    exhausted,
    load_drawer,
    remaining,
    restrict_capacitors,
    restrict_coupling,
    restrict_op_amps,
    restrict_resistors,
    shortages,
    usable_types,
    without,
)
from tests.support.records import op_amp, record

HEADER = "kind,value,quantity\n"


def drawer(tmp_path: Path, lines: str) -> Drawer:
    file = tmp_path / "drawer.csv"
    file.write_text(HEADER + lines, encoding="utf-8")
    return load_drawer(file)


def resistor(ref: str, value: float) -> Part:
    return Part(ref, "resistor", "feedback", "gain 1", ("a", "b"), value)


def capacitor(ref: str, value: float) -> Part:
    return Part(ref, "capacitor", "coupling", "gain 1", ("a", "b"), value)


def amplifier(ref: str, type_: str = "LM4562") -> Part:
    return Part(ref, "op-amp", "amplifier", "gain 1", ("a", "b", "c"), type_)


def full(values: str = "E12") -> str:
    """Ten of every value of a series, and op amps."""
    lines = [f"resistor,{value:g},10" for value in values_between(values, 10, 1e6)]
    lines += [f"capacitor,{value:g},10" for value in values_between(values, 100e-12, 10e-6)]
    return "\n".join([*lines, "op-amp,LM4562MA,10", "op-amp,AD797ARZ,10"])


def test_values_in_every_accepted_form_are_one_value(tmp_path: Path) -> None:
    forms = ("4k7", "4K7", "4.7k", "4.7 kohm", "4700", "4.7e3", '"4.7 k\u2126"', "4700R")
    found = drawer(tmp_path, "".join(f"resistor,{form},1\n" for form in forms))
    assert found.items == (Item("resistor", 4700.0, len(forms)),)
    forms = ("10n", "10 nF", "10nF", "0.01u", "0.01 \u00b5F", "1e-8", "10000p")
    found = drawer(tmp_path, "".join(f"C,{form},2\n" for form in forms))
    assert found.items == (Item("capacitor", 10e-9, 2 * len(forms)),)


def test_comments_blank_lines_order_of_columns_and_kinds(tmp_path: Path) -> None:
    file = tmp_path / "drawer.csv"
    text = "\ufeff# left shelf\r\n\r\n Quantity , KIND, Value\r\n3,Op-Amp,LM358 # new\r\n 2 , r , 1k\r\n1,u,lm358\r\n"
    file.write_text(text, encoding="utf-8", newline="")
    assert load_drawer(file).items == (Item("resistor", 1e3, 2), Item("op-amp", "LM358", 4))


def test_a_type_number_may_hold_a_hash(tmp_path: Path) -> None:
    assert drawer(tmp_path, "op-amp,LT1028CN8#PBF,1\n").quantity("op-amp", "LT1028CN8#PBF") == 1


@pytest.mark.parametrize(
    ("line", "complaint"),
    [
        ("resistor,=1+1,3", r'value "=1\+1": does not start with a number'),
        ("resistor,'=1+1,3", "does not start with a number"),
        ("op-amp,=cmd|' /C calc'!A0,3", "must be a type number"),
        ("op-amp,@SUM(A1),3", "must be a type number"),
        ("op-amp,,3", "must be a type number"),
        ("=kind,1k,3", 'kind "=kind": must be resistor, capacitor or op-amp'),
        ("inductor,1k,3", "must be resistor, capacitor or op-amp"),
        (",1k,3", 'kind "": must be'),
        ("resistor,1k,-3", 'quantity "-3": must be a whole number from 0'),
        ("resistor,1k,2.5", 'quantity "2.5": must be a whole number'),
        ("resistor,1k,1e3", "must be a whole number"),
        ("resistor,1k,=2", "must be a whole number"),
        ("resistor,1k,many", "must be a whole number"),
        ("resistor,1k,", 'quantity "": must be'),
        ("resistor,1k,\uff13", "must be a whole number"),
        ("resistor,1k,9999999999", "must be a whole number from 0 to 999999999"),
        ("resistor,1k,999999999\nresistor,1k,1", "line 4: quantity adds up to more"),
        ("resistor,10 nF,3", 'wrong unit "nF"'),
        ("capacitor,4k7,3", "wrong unit"),
        ("resistor,-1k,3", "must lie between 0 and 1e.12 ohm"),
        ("resistor,1e400,3", "out of range"),
        ("resistor,nan,3", "does not start with a number"),
        ("capacitor,0,3", "must lie between 1e-15 and 1 F"),
        ("capacitor,2,3", "must lie between 1e-15 and 1 F"),
        ("resistor,1k", "has 2 cells, must have 3"),
        ("resistor,4,7k,3", "has 4 cells, must have 3"),
        ("resistor;1k;3", "has 1 cells, must have 3"),
        ('resistor,"1k,3', "is not CSV"),
        ("resistor,1k\x00,3", "control character"),
        ("resistor,1k\x1b[31m,3", "control character"),
    ],
)
def test_a_line_that_cannot_be_used(tmp_path: Path, line: str, complaint: str) -> None:
    with pytest.raises(SpecError, match=rf"drawer\.csv, line (3|4).*{complaint}|drawer\.csv, {complaint}"):
        drawer(tmp_path, f"# comment\n{line}\n")


@pytest.mark.parametrize(
    ("content", "complaint"),
    [
        (b"", "is empty"),
        (b"# nothing\n", "lists no parts"),
        (b"kind,value,quantity\n", r"lists no parts; write lines such as resistor,4k7,20"),
        (b"resistor,1k,3\n", r'line 1: "resistor,1k,3" must be the header; write kind,value,quantity'),
        (b"# a\nkind;value;quantity\n", "line 2: .*separate the columns by commas"),
        (b"kind,value,quantity,type\n", "must be the header"),
        (b"kind,value,value\n", "must be the header"),
        (b"kind,value,quantity\nresistor,4\xb57,1\n", "line 2: is not UTF-8"),
        ("kind,value,quantity\n".encode("utf-16"), "line 1: is not UTF-8"),
    ],
)
def test_a_file_that_is_no_drawer(tmp_path: Path, content: bytes, complaint: str) -> None:
    file = tmp_path / "drawer.csv"
    file.write_bytes(content)
    with pytest.raises(SpecError, match=rf"drawer\.csv.*{complaint}"):
        load_drawer(file)


def test_a_drawer_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(SpecError, match="no such file; a list of stocked parts"):
        load_drawer(tmp_path / "none.csv")


def test_a_value_listed_twice_is_no_drawer() -> None:
    with pytest.raises(SpecError, match="lists a value twice; add up"):
        Drawer("d.csv", (Item("op-amp", "lm358", 1), Item("op-amp", "LM358", 1)))


def test_stocks_are_restricted_to_the_drawer(tmp_path: Path) -> None:
    held = drawer(tmp_path, "R,1k,1\nR,5k1,2\nR,2.2,9\nR,0,9\nR,10k,0\nC,1n,2\nC,120n,1\nC,100p,1\nC,10u,1\nC,47u,1\n")
    resistors = restrict_resistors(resistor_stock("E96"), held)
    assert resistors.values.tolist() == [1e3, 5.1e3]  # of any series; below the useful range and used up left out
    assert not resistors.values.flags.writeable
    assert resistors.tolerance == resistor_stock("E96").tolerance
    assert restrict_resistors(resistor_stock("E96"), held, least=2).values.tolist() == [5.1e3]
    assert restrict_capacitors(capacitor_stock(), held).values.tolist() == [100e-12, 1e-9]
    coupling = restrict_coupling(coupling_stock(), held)
    assert coupling.values.tolist() == [100e-12, 1e-9, 120e-9, 10e-6]
    assert [coupling.stock_for(value).dielectric for value in (1e-9, 120e-9)] == ["C0G", "X7R"]
    assert restrict_coupling(coupling_stock(), without(held, "capacitor", 100e-12, 1e-9)).stocks[0].dielectric == "X7R"
    for stock in coupling.stocks:
        assert all(stock.size_for(float(value)) for value in stock.values)


def test_a_drawer_without_a_usable_value_says_so(tmp_path: Path) -> None:
    held = drawer(tmp_path, "C,1n,1\nR,1R,5\n")
    with pytest.raises(CatalogError, match=r"no resistor between 10 ohm and 1 Mohm is left in the drawer \(1 other v"):
        restrict_resistors(resistor_stock(), held)
    with pytest.raises(CatalogError, match=r"with 2 pieces is left in the drawer \(1 other value\)"):
        restrict_capacitors(capacitor_stock(), held, least=2)
    with pytest.raises(CatalogError, match=r"no coupling capacitor between .*add lines capacitor,VALUE,QUANTITY"):
        restrict_coupling(coupling_stock(), without(held, "capacitor", 1e-9))


def test_op_amps_of_the_drawer(tmp_path: Path) -> None:
    known = tuple(entry.op_amp for entry in load_op_amps().values())
    held = drawer(tmp_path, "U,lm324,2\nU,MC33078,1\nU,MC33079,0\nU,741,5\n")
    assert usable_types(held) == ("741", "lm324", "MC33078")
    found = {one.type: one.packages for one in restrict_op_amps(known, held)}
    assert found == {"LM358": ((4, "lm324"),), "MC33078": ((2, "MC33078"),)}
    entry = op_amp("AD797", ((1, "AD797ARZ"),))
    assert restrict_op_amps((entry,), drawer(tmp_path, "U,AD797,1\n"))[0].packages == ((1, "AD797"),)
    with pytest.raises(CatalogError, match=r"op amps in the drawer: 741; must hold one .* allows \(AD797\)"):
        restrict_op_amps((entry,), drawer(tmp_path, "U,741,1\n"))
    with pytest.raises(CatalogError, match="in the drawer: none that is left"):
        restrict_op_amps(known, drawer(tmp_path, "U,741,0\n"))


def test_a_drawer_that_lists_no_op_amp_leaves_them_to_the_catalogs(tmp_path: Path) -> None:
    held = drawer(tmp_path, "R,1k,1\n")
    assert usable_types(held) is None
    assert restrict_op_amps((op_amp("AD797", ((1, "AD797ARZ"),)),), held)[0].type == "AD797"
    assert shortages([amplifier("U1")], held) == ()


def test_shortages_count_over_the_whole_chain(tmp_path: Path) -> None:
    held = drawer(tmp_path, "R,4k7,2\nR,4k64,3\nR,5k1,1\nR,1k,9\nC,1n,9\n")
    parts = [resistor(f"R{k}", 4700.0) for k in (1, 5, 9)] + [resistor("R2", 4640.0), capacitor("C1", 1e-9)]
    (short,) = shortages(parts, held)
    assert (short.kind, short.value, short.needed, short.available, short.missing) == ("resistor", 4700.0, 3, 2, 1)
    assert short.alternative == 4640.0
    assert str(short) == "R 4K7: 3 needed, 2 there (R1 R5 R9); 4K64 is near"
    two = shortages(parts, held, boards=2)
    assert [(one.value, one.needed, one.alternative) for one in two] == [(4700.0, 6, 1000.0)]


def test_an_alternative_has_enough_left_after_the_chain_has_taken_its_own(tmp_path: Path) -> None:
    held = drawer(tmp_path, "R,4k7,1\nR,4k64,1\nR,5k6,1\nR,9k1,1\n")
    (short,) = shortages([resistor("R1", 4700.0), resistor("R2", 4700.0), resistor("R3", 4640.0)], held)
    assert short.alternative == 5600.0
    (short,) = shortages([resistor(f"R{k}", 4700.0) for k in range(3)], held)
    assert short.alternative is None
    assert str(short).endswith("none has enough left")


def test_what_is_not_listed_is_short_too(tmp_path: Path) -> None:
    held = drawer(tmp_path, "R,1k,1\n")
    (short,) = shortages([capacitor("C1", 1e-9)], held)
    assert str(short) == "C 1n0: 1 needed, 0 there (C1); none has enough left"


def test_op_amps_count_by_package_as_the_bill_does(tmp_path: Path) -> None:
    chain = record().chain
    held = drawer(tmp_path, full() + "\nU,AD797ARZ,1\nU,LM4562MA,0\n")
    held = without(held, "op-amp", "LM4562MA")
    short = {one.value: one for one in shortages(chain.parts, held, chain.models) if one.kind == "op-amp"}
    ordered = {row.type: row for row in bill_rows(record()) if row.references[0].startswith("U")}
    assert set(short) == {"LM4562MA"} == set(ordered) - {"AD797ARZ"}
    assert short["LM4562MA"].references == ordered["LM4562MA"].references == ("U2", "U10")
    assert str(short["LM4562MA"]).startswith("U LM4562MA: 2 needed, 0 there (U2 U10)")


@pytest.mark.parametrize(
    ("refs", "order", "count"),
    [
        (("U1", "U2"), "ONE", 2),
        (("U1A", "U1B"), "TWO", 1),
        (("U1A", "U2A"), "TWO", 2),
        (("U1A", "U1B", "U1C"), "FOUR", 1),
        (("U1D",), "FOUR", 1),
    ],
)
def test_the_package_is_the_one_that_the_bill_orders(refs: tuple[str, ...], order: str, count: int) -> None:
    models = {"T": op_amp("T", ((1, "ONE"), (2, "TWO"), (4, "FOUR")))}
    parts = tuple(amplifier(ref, "T") for ref in refs)
    plain = record()
    (row,) = bill_rows(replace(plain, chain=replace(plain.chain, parts=parts, models=models)))
    held = Drawer("d.csv", (Item("op-amp", "other", 1), Item("op-amp", "FOUR", 0 if order == "FOUR" else 9)))
    (short,) = shortages(parts, held, models)
    assert (short.value, short.needed) == (row.type, row.quantity) == (order, count)
    assert short.alternative == (None if order == "FOUR" else "FOUR")  # a larger package of the same type


def test_exhausted_and_remaining(tmp_path: Path) -> None:
    held = drawer(tmp_path, "R,4k7,2\nR,4k64,3\nC,1n,9\n")
    parts = [resistor(f"R{k}", 4700.0) for k in (1, 2, 3)] + [capacitor("C1", 1e-9)]
    less = exhausted(held, shortages(parts, held))
    assert less.values("resistor") == (4640.0,)
    assert less.lists("resistor")
    assert less.quantity("resistor", 4700.0) == 0
    left = remaining(held, parts)
    assert [item.quantity for item in left.items] == [3, 0, 8]
    assert exhausted(held, ()) == held


def test_a_drawer_affords_values_as_often_as_it_holds_them(tmp_path: Path) -> None:
    held = drawer(tmp_path, "R,4k7,2\nC,1n,1\nU,LM358,1\n")
    assert affords(held, [("resistor", 4700.0), ("resistor", 4700.0), ("capacitor", 1e-9), ("op-amp", "lm358")])
    assert not affords(held, [("capacitor", 1e-9), ("capacitor", 1e-9)])
    assert not affords(held, [("resistor", 1e-9)])
    assert affords(held, [])


# Ten drawers, from rich to bare, and a chain of two parts each of 1.1 kohm and 1.2 nF and one of 12 kohm: whether it
# can be built by excluding what runs short, and by taking part after part from what is left.
SHELVES = {
    "ten of every E24 value": (full("E24"), True, True),
    "ten of every E12 value": (full("E12"), True, True),
    "ten of every E6 value": (full("E6"), True, True),
    "two of every E12 value": (full("E12").replace(",10\n", ",2\n"), True, True),
    "one of every E12 value": (full("E12").replace(",10\n", ",1\n"), False, True),
    "many of few": ("R,1k,99\nR,10k,99\nR,100R,99\nC,1n,99\nC,100n,99\nU,LM4562MA,9", True, True),
    "one resistor value": ("R,1k,99\nC,1n,99\nU,LM4562MA,9", True, True),
    "two capacitors": ("R,1k,99\nR,2k2,99\nC,1n,1\nC,2n2,1\nU,LM4562MA,9", False, True),
    "no capacitors": ("R,1k,99\nU,LM4562MA,9", False, False),
    "one empty box": ("R,1k,0", False, False),
}
WANTED = (1.1e3, 1.1e3, 12e3, 1.2e-9, 1.2e-9)


def nearest_part(number: int, value: float, held: Drawer) -> Part:
    """A part of the restricted stock, CatalogError where there is none."""
    if value < 1:
        values = restrict_capacitors(capacitor_stock(), held).values
    else:
        values = restrict_resistors(resistor_stock(), held).values
    near = float(min(values, key=lambda stocked: abs(stocked / value - 1)))
    return capacitor(f"C{number}", near) if value < 1 else resistor(f"R{number}", near)


def by_exclusion(held: Drawer) -> list[Part]:
    for _ in range(200):
        parts = [nearest_part(k, value, held) for k, value in enumerate(WANTED)]
        short = shortages(parts, held)
        if not short:
            return parts
        before, held = held, exhausted(held, short)
        assert held != before
    raise AssertionError("the loop does not end")


def by_taking(held: Drawer) -> list[Part]:
    parts: list[Part] = []
    for k, value in enumerate(WANTED):
        parts.append(nearest_part(k, value, remaining(held, parts)))
    return parts


@pytest.mark.parametrize("name", SHELVES)
@pytest.mark.parametrize("way", [by_exclusion, by_taking])
def test_a_drawer_ends_in_a_chain_that_it_holds_or_in_a_refusal(
    tmp_path: Path, name: str, way: Callable[[Drawer], list[Part]]
) -> None:
    lines, *possible = SHELVES[name]
    held = drawer(tmp_path, lines + "\n")
    if not possible[way is by_taking]:
        with pytest.raises(CatalogError, match="is left in the drawer"):
            way(held)
        return
    parts = way(held)
    assert shortages(parts, held) == ()
    assert len(parts) == len(WANTED)
