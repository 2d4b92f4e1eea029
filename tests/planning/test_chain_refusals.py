"""Chains that cannot be had, and why: references, first stages, DC paths, shelves, values."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

import synth
from synth import circuit
from synth.errors import CatalogError, CircuitError, InfeasibleError
from synth.model.chain import StageTarget
from synth.planning import workshop
from synth.rounding import section as rounding
from synth.rounding.trial import make_trial
from synth.topology import multiple_feedback
from tests.support.networks import op_amp, stocks

SPEC = """
format = 1
title = "Refused, an invented scenario"
[target]
center_frequency = "30 kHz"
bandwidth = "4 kHz"
full_scale = "1 mV"
smallest = "20 uV"
output = "1 V"
[sensor]
scale = "1 V/V"
resistance = "50 ohm"
[supply]
positive = "5 V"
negative = "-5 V"
"""
CURRENT = SPEC.replace('scale = "1 V/V"', 'output = "current"\nscale = "1 uA/V"')


def design(text: str) -> synth.Design:
    return synth.design(synth.parse_spec(text), builds=0)


def test_a_mid_rail_that_drives_current_through_the_sensor() -> None:
    text = CURRENT.replace('negative = "-5 V"', "").replace('"50 ohm"', '"20 kohm"')
    with pytest.raises(InfeasibleError, match=r"the mid-rail drives .* through the sensor's 20 kohm"):
        design(text)


def test_a_loop_that_no_reference_holds() -> None:
    text = SPEC.replace('negative = "-5 V"', "").replace('"1 mV"', '"10 uV"').replace('"20 uV"', '"1 uV"')
    with pytest.raises(InfeasibleError, match=r"no mid-rail reference keeps its loop within .* give a dual supply"):
        design(text.replace('output = "1 V"', 'output = "1 V"\naccuracy = "0.001 %"'))


def test_an_input_without_a_dc_path_is_never_delivered(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(workshop, "dc_path_problem", lambda _chain: "U1 has none")
    with pytest.raises(InfeasibleError, match="no DC path for an input's bias current: U1 has none"):
        design(SPEC)


def test_values_without_a_pole_pair() -> None:
    target = StageTarget(1.0, 1.0, 30e3, 8.0)
    trial = make_trial(multiple_feedback.TOPOLOGY, target, op_amp(), stocks(), 30e3, 27.0)
    values = {key: np.full(4, 1e3) for key in ("R1A", "R1B", "R2")} | {key: np.full(4, 1e-9) for key in ("C1", "C2")}
    nothing = np.full(4, np.nan)
    with pytest.raises(InfeasibleError, match=r"no stocked values near 30 kHz and Q 8 hold a pole pair"):
        rounding._ranked(values, (nothing, nothing, nothing), trial, op_amp())


def test_a_shelf_that_leaves_most_of_a_resonance_is_not_built() -> None:
    resonant = SPEC.replace("[supply]", 'rolloff = [{ kind = "resonant", frequency = "31 kHz", q = "4" }]\n[supply]')
    cautions = " ".join(design(resonant).verification.cautions)
    assert "pre-emphasis" in cautions


def test_frequencies_of_a_batch_must_rise() -> None:
    made = design(SPEC)
    network = made.network()
    for f in ([2e3, 1e3], []):
        with pytest.raises(CircuitError, match="frequencies must rise, and there must be one at least"):
            circuit.batch_response(network, network.values[:, None], f)


def test_stocks_hold_values_that_nobody_can_write() -> None:
    writable = stocks().resistors.values.copy()
    with pytest.raises(CatalogError, match="values must be read-only"):
        replace(stocks().resistors, values=writable)
