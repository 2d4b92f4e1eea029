"""Cautions: a hazard that the title shows, and no other; a spread that matters; much gain."""

from __future__ import annotations

from dataclasses import replace

import pytest

from synth.verification.cautions import DEFER, cautions
from tests.api.made import changed, design_of, pickup

HAZARDS = {
    "mains": ("Rogowski coil on the mains", "Current of a 230 V line", "Line voltage monitor", "120V outlet"),
    "high voltage": ("High-voltage divider", "Partial discharge, 5 kV cable", "HV probe", "high voltage arc"),
    "laser": ("Laser intensity", "Light of a LASER diode"),
    "patient": ("ECG amplifier", "Patient monitor", "Medical ultrasound", "EEG"),
    "lithium": ("Impedance of a lithium cell", "Li-ion pack", "LiIon ageing", "LiPo impedance"),
}
HARMLESS = (
    "Pickup-coil channel of a sheet-resistance gauge",
    "Remains of an echo",  # mains
    "Blaser's gauge",  # laser
    "An impatient channel",  # patient
    "Liponics",  # lipo
    "The HVAC fan",  # HV
    "Channel of a 5 kV/m field meter at 1230 Vs",
    "Domains in iron",
)


def said(title: str) -> list[str]:
    made = design_of(changed())
    return list(cautions(replace(made.spec, title=title), made.chain))


def hazards(title: str) -> set[str]:
    return {text for text in said(title) if DEFER in text}


@pytest.mark.parametrize(("word", "title"), [(word, title) for word, titles in HAZARDS.items() for title in titles])
def test_a_hazard_in_a_title_brings_its_caution(word: str, title: str) -> None:
    found = hazards(title)
    assert len(found) == 1, found
    assert word in found.pop().lower()


@pytest.mark.parametrize("title", [t for t in HARMLESS if "kV" not in t])
def test_a_harmless_title_brings_none(title: str) -> None:
    assert hazards(title) == set()


def test_several_hazards_bring_several_cautions() -> None:
    assert len(hazards("Laser on the mains near a lithium cell")) == 3


def test_every_caution_of_a_hazard_leaves_it_to_licensed_hands() -> None:
    for titles in HAZARDS.values():
        assert all("licensed" in text for text in hazards(titles[0]))


def test_much_gain_brings_a_caution_with_its_figure() -> None:
    assert any("88 dB of gain at 100 kHz" in text for text in pickup().verification.cautions)
    little = design_of(changed(('output = "1 V"', 'gain = "40 dB"')))
    assert not any("dB of gain at" in text for text in little.verification.cautions)


def test_a_spread_that_moves_a_section_out_of_its_tolerance_is_said() -> None:
    made = design_of(changed())
    stage = next(s for s in made.chain.stages if s.kind == "bandpass")
    model = made.chain.models[stage.op_amp]
    slow = replace(model, gain_bandwidth=stage.target.q * stage.target.center_frequency * 20)  # type: ignore[operator]
    chain = replace(made.chain, models={**made.chain.models, stage.op_amp: slow})
    assert any(stage.name in text and "spread" in text for text in cautions(made.spec, chain))
    fast = replace(model, gain_bandwidth=1e12)
    chain = replace(made.chain, models={**made.chain.models, stage.op_amp: fast})
    assert not any("spread" in text for text in cautions(made.spec, chain))


def test_cautions_are_one_line_each() -> None:
    for text in said("Laser on the mains near a lithium cell"):
        assert text.isprintable()
        assert text
