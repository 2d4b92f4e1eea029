"""Ten drawers from rich to bare: the design uses only what is there, never more of it, or says what is missing."""

from __future__ import annotations

import re
from collections import Counter
from pathlib import Path

import pytest

import synth
from synth.errors import SynthError
from synth.parts.eseries import values_between
from synth.parts.stock import load_drawer
from synth.spec import Spec

SPEC = """
format = 1
title = "From the drawer, an invented scenario"
[target]
center_frequency = "30 kHz"
bandwidth = "4 kHz"
full_scale = "1 mV"
smallest = "20 uV"
output = "1 V"
yield = "50 %"
[sensor]
scale = "1 V/V"
resistance = "50 ohm"
[supply]
positive = "12 V"
negative = "-12 V"
[parts]
stock = "drawer.csv"
"""


def rows(resistors: str, capacitors: str, count: int, low: float = 10.0, high: float = 1e6) -> list[str]:
    """A drawer with every value of two series, `count` of each; coupling capacitors beside them."""
    lines = [f"resistor,{value:g},{count}" for value in values_between(resistors, low, high)]
    lines += [f"capacitor,{value * 1e12:g} pF,{count}" for value in values_between(capacitors, 100e-12, 100e-9)]
    return lines


DRAWERS = {
    "rich": rows("E96", "E12", 20),
    "plenty of E24": rows("E24", "E12", 10),
    "four of each": rows("E96", "E6", 4),
    "three of each": rows("E24", "E12", 3),
    "two of each": rows("E48", "E12", 2),
    "one of each": rows("E96", "E12", 1),
    "few amplifiers": [*rows("E96", "E12", 9), "op-amp,OPA1612,4", "op-amp,OP27,6"],
    "a wrong amplifier": [*rows("E96", "E12", 9), "op-amp,LM358,4"],
    "a handful": ["resistor,1k,9", "resistor,10k,9", "capacitor,1 nF,9", "capacitor,100 nF,9"],
    "no capacitors": [line for line in rows("E96", "E12", 9) if line.startswith("resistor")],
}
MUST_DESIGN = {"rich", "plenty of E24", "four of each", "few amplifiers"}


def attempt(spec: Spec) -> tuple[synth.Design | None, str]:
    """The design, or the message that says why there is none."""
    try:
        return synth.design(spec, builds=500), ""
    except SynthError as error:
        return None, str(error)


@pytest.mark.parametrize("name", DRAWERS)
def test_a_drawer_is_never_overdrawn(name: str, tmp_path: Path) -> None:
    (tmp_path / "drawer.csv").write_text("\n".join(["kind,value,quantity", *DRAWERS[name]]) + "\n")
    (tmp_path / "spec.toml").write_text(SPEC)
    spec = synth.load_spec(tmp_path / "spec.toml")
    made, message = attempt(spec)
    if made is None:
        assert name not in MUST_DESIGN, message
        assert "drawer.csv" in message
        assert re.search(r"needed|no stocked|missing|left|add|short|largest output", message)
        return
    drawer = load_drawer(tmp_path / "drawer.csv")
    used = Counter((part.kind, part.value) for part in made.chain.parts if part.kind != "op-amp")
    for (kind, value), count in used.items():
        assert drawer.quantity(kind, value) >= count, (kind, value)
    if drawer.lists("op-amp"):
        ordered = Counter(dict_of_packages(made))
        for type_number, count in ordered.items():
            assert drawer.quantity("op-amp", type_number) >= count, type_number
    assert any("drawer" in caution for caution in made.verification.cautions)
    assert "drawer.csv" in made.record.inputs


def dict_of_packages(made: synth.Design) -> dict[str, int]:
    """Packages to take from the drawer, by the type number to order."""
    found: dict[str, set[str]] = {}
    for part in made.chain.parts:
        if part.kind == "op-amp":
            count, order = made.chain.models[str(part.value)].packages[0]
            assert count >= 1
            found.setdefault(order, set()).add(part.ref.rstrip("ABCD"))
    return {order: len(refs) for order, refs in found.items()}


def test_what_is_short_is_named_with_the_nearest_alternative(tmp_path: Path) -> None:
    text = "\n".join(["kind,value,quantity", *DRAWERS["one of each"]]) + "\n"
    (tmp_path / "drawer.csv").write_text(text)
    steep = SPEC.replace('"50 %"', '"50 %"\nreject = [{ frequency = "90 kHz", by = "60 dB" }]')
    (tmp_path / "spec.toml").write_text(steep)
    made, message = attempt(synth.load_spec(tmp_path / "spec.toml"))
    if made is None:
        assert re.search(r"\d+ needed, \d+ there", message)
    else:
        assert max(Counter(p.value for p in made.chain.parts if p.kind != "op-amp").values()) == 1
