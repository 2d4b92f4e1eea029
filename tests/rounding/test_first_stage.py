"""Stocked first stages: gain, phase margin, bias path, and what is said where none can be built."""

from __future__ import annotations

import re
from dataclasses import replace

import numpy as np
import pytest

from synth import circuit
from synth.circuit.dc_path import dc_path_problem
from synth.errors import InfeasibleError
from synth.model.chain import StageTarget
from synth.parts.op_amps import load_op_amps
from synth.rounding.first_stage import (
    PHASE_MARGIN,
    PLAIN_MARGIN,
    Site,
    charge_draft,
    compensation_values,
    first_stage_gain,
    first_stage_margin,
    first_stage_noise,
    first_stage_options,
    first_stage_problem,
    first_stage_shift,
    inverting_draft,
    largest_first_stage_gain,
    stage_chain,
    transimpedance_draft,
)
from synth.spec import Sensor
from synth.topology import non_inverting
from synth.topology.place import Draft
from tests.support.networks import K, op_amp, stocks

OPS = {name: entry.op_amp for name, entry in load_op_amps().items()}
STOCKS = stocks()
PHOTODIODE = Sensor(scale=0.5, input_unit="W", output="current", capacitance=70e-12, resistance=50e6)
PIEZO = Sensor(scale=12e-12, input_unit="N", output="charge", capacitance=500e-12)
COIL = Sensor(scale=20.0, input_unit="A", resistance=25.0)


def site(name: str, sensor: Sensor, frequency: float = 40e3) -> Site:
    """A place for a first stage with a catalog amplifier."""
    return Site(OPS[name], STOCKS, frequency, 27.0, sensor)


@pytest.mark.parametrize("name", ["OPA1656", "OPA656", "OPA657", "TL072", "NE5532"])
@pytest.mark.parametrize("gain", [47e3, 100e3])
def test_transimpedance(name: str, gain: float) -> None:
    """Gain within a step, 60 degrees over +-30 % of gain-bandwidth, and no larger CF than that takes."""
    at = site(name, PHOTODIODE, 100e3)
    draft = transimpedance_draft(StageTarget(gain), OPS[name], STOCKS, 100e3, 27.0, PHOTODIODE)
    assert first_stage_gain(draft, at) == pytest.approx(gain, rel=0.02)  # a step of CF on the way
    assert first_stage_margin(draft, at) >= PHASE_MARGIN
    assert first_stage_problem(draft, at) == ""
    chain = stage_chain(draft, at)
    assert dc_path_problem(chain) == ""
    assert circuit.is_stable(circuit.poles(circuit.build_network(chain), 40e3))
    smaller = compensation_values(STOCKS)[compensation_values(STOCKS) < draft.values["CF"]]
    if smaller.size:
        less = replace(draft, values={**draft.values, "CF": float(smaller[-1])})
        assert first_stage_margin(less, at) < PHASE_MARGIN


@pytest.mark.parametrize("name", ["OPA1656", "TL072", "NE5532"])
def test_charge_amplifier(name: str) -> None:
    """Gain within a step of E12, the corner at a thirtieth of the centre or below, bias current within its share."""
    at = site(name, PIEZO)
    draft = charge_draft(StageTarget(1e9), OPS[name], STOCKS, 40e3, 27.0, PIEZO)
    assert first_stage_gain(draft, at) == pytest.approx(1e9, rel=0.11)
    assert 1 / (2 * np.pi * draft.values["RF"] * draft.values["CF"]) <= 40e3 / 30
    assert draft.values["RF"] * OPS[name].bias_current <= 0.1
    assert first_stage_margin(draft, at) >= PLAIN_MARGIN
    assert dc_path_problem(stage_chain(draft, at)) == ""


@pytest.mark.parametrize("gain", [1.0, 5.0, 30.0])
def test_inverting(gain: float) -> None:
    draft = inverting_draft(StageTarget(gain), OPS["OPA2211"], STOCKS, 100e3, 27.0, 25.0)
    ideal = Site(OPS["OPA2211"], STOCKS, 100e3, 27.0, COIL)
    assert first_stage_gain(draft, ideal) == pytest.approx(gain, rel=6e-3)
    assert draft.values["RIN"] >= 20 * 25.0
    assert dc_path_problem(stage_chain(draft, ideal)) == ""


def test_noise_of_a_transimpedance_stage() -> None:
    """Referred to the source: 4kT/RF, in, and en w (Cin + CF) of the amplifier, within the strays' reach."""
    quiet = op_amp(voltage_noise=3e-9, voltage_noise_corner=1e-3, current_noise=1e-15, current_noise_corner=1e-3)
    sensor = replace(PHOTODIODE, resistance=None)
    at = Site(quiet, STOCKS, 40e3, 27.0, sensor)
    draft = transimpedance_draft(StageTarget(100e3), quiet, STOCKS, 40e3, 27.0, sensor)
    total = 70e-12 + draft.values["CF"]
    voltage = 3e-9 * abs(1 / draft.values["RF"] + 2j * np.pi * 40e3 * total)
    want = np.hypot(np.sqrt(4 * K * 300.15 / draft.values["RF"]), voltage)
    assert first_stage_noise(draft, at) == pytest.approx(want, rel=5e-3)


def test_shift_is_the_change_over_the_spread() -> None:
    at = site("TL072", PHOTODIODE)
    draft = transimpedance_draft(StageTarget(100e3), OPS["TL072"], STOCKS, 40e3, 27.0, PHOTODIODE)
    nominal, low = first_stage_gain(draft, at), first_stage_gain(draft, at, 0.6)  # its spread is 40 %
    assert first_stage_shift(draft, at) == pytest.approx(abs(low / nominal - 1), rel=1e-9)


@pytest.mark.parametrize(("topology", "sensor", "name"), [
    ("transimpedance", PHOTODIODE, "TL072"),
    ("charge-amplifier", PIEZO, "OPA1656"),
])
def test_largest_gain_works_and_more_does_not(topology: str, sensor: Sensor, name: str) -> None:
    draft_of = {"transimpedance": transimpedance_draft, "charge-amplifier": charge_draft}[topology]
    most = largest_first_stage_gain(topology, site(name, sensor))
    draft = draft_of(StageTarget(most), OPS[name], STOCKS, 40e3, 27.0, sensor)
    assert first_stage_gain(draft, site(name, sensor)) == pytest.approx(most, rel=1e-6)
    with pytest.raises(InfeasibleError, match=r"cannot be built: .*; the nearest that works is"):
        draft_of(StageTarget(3 * most), OPS[name], STOCKS, 40e3, 27.0, sensor)


def test_the_gain_named_in_a_refusal_works() -> None:
    """A decompensated amplifier wants a high noise gain: less feedback resistance is not more stable."""
    with pytest.raises(InfeasibleError, match=r"phase margin is .* degrees, 60 are needed; the nearest") as caught:
        transimpedance_draft(StageTarget(10e3), OPS["OPA657"], STOCKS, 100e3, 27.0, PHOTODIODE)
    kilohm = re.search(r"works is ([\d.]+) kohm", str(caught.value))
    assert kilohm is not None
    transimpedance_draft(StageTarget(float(kilohm[1]) * 1e3), OPS["OPA657"], STOCKS, 100e3, 27.0, PHOTODIODE)


@pytest.mark.parametrize("topology", ["transimpedance", "charge-amplifier", "inverting"])
def test_options_move_the_gain_as_they_say(topology: str) -> None:
    if topology == "transimpedance":
        at = site("OPA1656", PHOTODIODE)
        draft = transimpedance_draft(StageTarget(100e3), OPS["OPA1656"], STOCKS, 40e3, 27.0, PHOTODIODE)
    elif topology == "charge-amplifier":
        at = site("OPA1656", PIEZO)
        draft = charge_draft(StageTarget(1e9), OPS["OPA1656"], STOCKS, 40e3, 27.0, PIEZO)
    else:
        at = site("OPA2211", COIL)
        draft = inverting_draft(StageTarget(10.0), OPS["OPA2211"], STOCKS, 40e3, 27.0, 25.0)
    values, factors = first_stage_options(draft, STOCKS)
    assert len(values) == factors.size >= 5
    assert dict(draft.values) in [dict(v) for v in values]
    nominal = first_stage_gain(draft, at)
    for option, factor in zip(values, factors.tolist(), strict=True):
        assert first_stage_gain(replace(draft, values=option), at) / nominal == pytest.approx(factor, rel=5e-3)


def test_compensation_reaches_below_the_stock_of_filters() -> None:
    values = compensation_values(STOCKS)
    assert values[0] == pytest.approx(1e-12)
    assert np.all(np.diff(values) > 0)
    assert set(STOCKS.capacitors.values.tolist()) <= set(values.tolist())
    held = replace(STOCKS.capacitors, cases=(("0603", float(STOCKS.capacitors.values[0]), 1e-8),))
    assert compensation_values(replace(STOCKS, capacitors=held)).tolist() == STOCKS.capacitors.values.tolist()


def test_a_sensor_of_another_kind() -> None:
    with pytest.raises(InfeasibleError, match="a transimpedance stage takes a current, the sensor gives a voltage"):
        transimpedance_draft(StageTarget(1e4), op_amp(), STOCKS, 40e3, 27.0, COIL)
    with pytest.raises(InfeasibleError, match="a charge amplifier takes a charge, the sensor gives a current"):
        charge_draft(StageTarget(1e9), op_amp(), STOCKS, 40e3, 27.0, PHOTODIODE)


def test_bias_current_that_leaves_no_path() -> None:
    hungry = op_amp(bias_current=0.05)
    with pytest.raises(InfeasibleError, match="allows no stocked feedback resistor, at most 2 ohm"):
        transimpedance_draft(StageTarget(1e4), hungry, STOCKS, 40e3, 27.0, PHOTODIODE)
    with pytest.raises(InfeasibleError, match="needs a feedback capacitor of inf F at 40 kHz, beyond the stock"):
        charge_draft(StageTarget(1e9), hungry, STOCKS, 40e3, 27.0, PIEZO)
    with pytest.raises(InfeasibleError, match="a charge amplifier with OPA1656 needs a feedback capacitor of"):
        charge_draft(StageTarget(1e9), OPS["OPA1656"], STOCKS, 20.0, 27.0, PIEZO)


def test_inverting_gain_beyond_reach() -> None:
    with pytest.raises(InfeasibleError, match=r"does not reach an inverting gain of 1e\+03 at 100 kHz"):
        inverting_draft(StageTarget(1e3), OPS["OPA2211"], STOCKS, 100e3, 27.0, 25.0)
    with pytest.raises(InfeasibleError, match=r"the largest gain that works is 11$"):
        inverting_draft(StageTarget(30.0), OPS["OPA1656"], STOCKS, 1e4, 27.0, 1e3)


def test_topologies_that_are_no_first_stage() -> None:
    with pytest.raises(InfeasibleError, match='no largest gain is known for "inverting"'):
        largest_first_stage_gain("inverting", site("OPA1656", COIL))
    draft = Draft(non_inverting.TOPOLOGY, StageTarget(2.0), op_amp(), {"RF": 1e3, "RG": 1e3})
    with pytest.raises(InfeasibleError, match='"non-inverting" is no first stage'):
        first_stage_options(draft, STOCKS)


def test_an_amplifier_that_makes_no_stage_at_all() -> None:
    slow = op_amp(gain_bandwidth=30e3, dc_gain=1e3)
    with pytest.raises(InfeasibleError, match="TEST makes no transimpedance stage at 1 MHz"):
        largest_first_stage_gain("transimpedance", Site(slow, STOCKS, 1e6, 27.0, PHOTODIODE))
