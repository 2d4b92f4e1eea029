"""What would raise the yield: named only where it does, and true when it is done."""

from __future__ import annotations

import re

import pytest

import synth
from synth.planning.remedies import WORTHWHILE

SPEC = """
format = 1
title = "Coarse capacitors, an invented scenario"
[target]
center_frequency = "30 kHz"
bandwidth = "3 kHz"
full_scale = "1 mV"
smallest = "50 uV"
output = "1 V"
[sensor]
scale = "1 V/V"
resistance = "100 ohm"
[supply]
positive = "12 V"
negative = "-12 V"
[filter]
family = "synchronous"
sections = 2
[parts]
capacitors = { series = "E12", tolerance = "5 %", dielectric = "C0G" }
"""


@pytest.fixture(scope="module")
def coarse() -> synth.Design:
    return synth.design(synth.parse_spec(SPEC), builds=2500)


def line(made: synth.Design) -> str:
    return next((c for c in made.verification.cautions if "raise the yield" in c), "")


def test_the_remedy_is_named_and_true_when_redesigned(coarse: synth.Design) -> None:
    assert coarse.verification.builds is not None
    found = re.search(r"section capacitors at 1 %: ([0-9.]+) % -> ([0-9.]+) %", line(coarse))
    assert found, line(coarse)
    before, after = (float(x) / 100 for x in found.groups())
    assert before == pytest.approx(coarse.verification.builds.share, abs=1e-3)
    assert after > before + WORTHWHILE
    closer = synth.design(synth.parse_spec(SPEC.replace('tolerance = "5 %"', 'tolerance = "1 %"')), builds=2500)
    assert closer.verification.builds is not None
    assert closer.verification.builds.share == pytest.approx(after, abs=0.03)  # other values of the same quality


def test_nothing_is_said_where_the_yield_is_met_or_no_builds_are_drawn() -> None:
    easy = SPEC.replace('tolerance = "5 %"', 'tolerance = "1 %"').replace("[sensor]", 'yield = "50 %"\n[sensor]')
    assert line(synth.design(synth.parse_spec(easy), builds=2500)) == ""
    assert line(synth.design(synth.parse_spec(SPEC), builds=0)) == ""


def test_a_remedy_that_does_not_help_is_not_named() -> None:
    """Amplifiers far too slow: their spread decides, not the passive parts."""
    slow = SPEC.replace("[parts]", '[parts]\nop_amps = ["OP27"]').replace('tolerance = "5 %"', 'tolerance = "1 %"')
    text = line(synth.design(synth.parse_spec(slow.replace('"3 kHz"', '"1 kHz"')), builds=2500))
    assert text == "" or float(re.findall(r"-> ([0-9.]+) %", text + "-> 0 %")[-1]) < 99
