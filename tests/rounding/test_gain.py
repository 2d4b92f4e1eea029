"""Gain stages on the stocked grid, and the trim of a whole chain's gain."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from synth import circuit
from synth.errors import InfeasibleError
from synth.model.chain import StageTarget
from synth.rounding import Section, chain_gain, gain_draft, round_section, trim_chain
from synth.rounding.gain import bias_resistor
from synth.spec import Rolloff, Sensor
from synth.topology.place import place
from tests.support.networks import UNIT_SENSOR, around, op_amp, stocks, stray_op_amp

STOCKS = stocks("E96", "E12")
MODEL = stray_op_amp(gain_bandwidth=150e6, second_pole=500e6, dc_gain=3e5)
SENSOR = Sensor(scale=20.0, input_unit="A", resistance=25.0, rolloff=(Rolloff("high-pass", corner=48e3),))
CENTER = 100e3


@pytest.fixture(scope="module")
def section() -> Section:
    return round_section(StageTarget(1.0, 1.0, CENTER, 10.0), MODEL, STOCKS, CENTER, 27.0)


@pytest.mark.parametrize("gain", [2.0, 7.3, 31.0, 100.0])
@pytest.mark.parametrize("frequency", [3e3, 100e3])
def test_closed_loop_gain_at_the_centre(gain: float, frequency: float) -> None:
    """Within half a step of E96, 1.2 %: ratios of a geometric series fall on the series again."""
    draft = gain_draft(StageTarget(gain), MODEL, STOCKS, frequency, 27.0, 25.0)
    model = replace(MODEL, input_capacitance_common=0.0, input_capacitance_differential=0.0)
    chain = place([replace(draft, op_amp=model)], STOCKS, around(frequency))
    network = circuit.build_network(chain)
    got = abs(circuit.response(network, [frequency])[0])
    assert got == pytest.approx(gain, rel=1.25e-2)


@pytest.mark.parametrize("gain", [2.0, 31.0, 100.0])
def test_values_are_stocked_and_sensible(gain: float) -> None:
    draft = gain_draft(StageTarget(gain), MODEL, STOCKS, CENTER, 27.0, 25.0)
    values = draft.values
    assert all(values[key] in STOCKS.resistors.values for key in ("RB", "RG", "RF"))
    assert values["CC"] in STOCKS.coupling.values
    assert values["RB"] >= 20 * 25.0
    assert values["RB"] * MODEL.bias_current * gain <= 0.1 * 1.0001
    assert 1 / (2 * np.pi * values["RB"] * values["CC"]) <= CENTER / 100 * 1.0001
    assert 10.0 <= values["RG"] <= 8e3


def test_feedback_noise_stays_below_the_amplifier_s() -> None:
    """4kT RG below en^2 where the ground leg is free to be small (within the trim window and one step)."""
    for en in (3e-9, 10e-9):
        draft = gain_draft(StageTarget(50.0), op_amp(voltage_noise=en), STOCKS, CENTER, 27.0, 25.0)
        thermal = 4 * 1.380649e-23 * 300.15 * draft.values["RG"]
        assert thermal <= en**2 * 1.7


def test_amplifier_that_does_not_reach_the_gain() -> None:
    slow = op_amp(gain_bandwidth=1e6)
    with pytest.raises(InfeasibleError, match=r"TEST does not reach a gain of 100 at 100 kHz"):
        gain_draft(StageTarget(100.0), slow, STOCKS, CENTER, 27.0, 25.0)


def test_bias_current_against_the_source() -> None:
    hungry = op_amp(bias_current=10e-6)
    with pytest.raises(InfeasibleError, match=r"the bias current of TEST \(10 uA\) allows .* take a type of less bias"):
        bias_resistor(100.0, hungry, STOCKS, 1e3)
    assert bias_resistor(10.0, op_amp(bias_current=1e-12), STOCKS, 25.0) == 100e3


def test_coupling_capacitor_out_of_stock() -> None:
    hungry = op_amp(bias_current=10e-6)
    with pytest.raises(InfeasibleError, match=r"no stocked coupling capacitor reaches .* at 1 Hz; raise target.center"):
        gain_draft(StageTarget(10.0), hungry, STOCKS, 1.0, 27.0, 0.0)


@pytest.mark.parametrize("gains", [(20.0,), (10.0, 30.0)])
@pytest.mark.parametrize("factor", [0.97, 1.0, 1.024])
def test_trimmed_chain_meets_its_gain(section: Section, gains: tuple[float, ...], factor: float) -> None:
    """Within 0.2 % at the centre, by the engine on the whole chain, sensor and load included."""
    drafts = [gain_draft(StageTarget(g), MODEL, STOCKS, CENTER, 27.0, 25.0) for g in gains]
    drafts.insert(1, section.draft)
    surroundings = around(CENTER, SENSOR, 10e3)
    wanted = factor * chain_gain(place(drafts, STOCKS, surroundings))
    trimmed = trim_chain(drafts, {1: section.variants}, STOCKS, surroundings, wanted)
    assert chain_gain(place(trimmed, STOCKS, surroundings)) == pytest.approx(wanted, rel=2e-3)
    for draft in trimmed:
        for key, value in draft.values.items():
            grid = STOCKS.resistors.values if key[0] == "R" else None
            assert grid is None or value in grid


def test_trim_never_makes_it_worse(section: Section) -> None:
    drafts = [gain_draft(StageTarget(20.0), MODEL, STOCKS, CENTER, 27.0, 25.0), section.draft]
    surroundings = around(CENTER, SENSOR)
    before = chain_gain(place(drafts, STOCKS, surroundings))
    for factor in (1.0, 1.0003, 0.999):
        wanted = before * factor
        after = chain_gain(place(trim_chain(drafts, {}, STOCKS, surroundings, wanted), STOCKS, surroundings))
        assert abs(after / wanted - 1) <= abs(before / wanted - 1) + 1e-12


def test_chain_without_a_gain_stage(section: Section) -> None:
    with pytest.raises(InfeasibleError, match="the chain has no gain stage to trim; ask for more gain"):
        trim_chain([section.draft], {}, STOCKS, around(CENTER, UNIT_SENSOR), 1.0)


def test_chain_gain_is_the_response_at_the_centre(section: Section) -> None:
    chain = place([section.draft], STOCKS, around(CENTER, SENSOR))
    assert chain_gain(chain) == pytest.approx(abs(circuit.response(circuit.build_network(chain), [CENTER])[0]))


def test_the_first_stage_keeps_its_quiet_ground_leg(section: Section) -> None:
    """The trim moves ground legs about the planned ones; the first, which is in the signal's noise, hardly upwards."""
    planned = [gain_draft(StageTarget(g), MODEL, STOCKS, CENTER, 27.0, 25.0) for g in (30.0, 30.0)]
    for factor in (0.9, 0.97, 1.0, 1.03, 1.1):
        drafts = [planned[0], planned[1], section.draft]
        surroundings = around(CENTER, SENSOR, 10e3)
        wanted = factor * 900.0 * SENSOR.scale
        trimmed = trim_chain(drafts, {2: section.variants}, STOCKS, surroundings, wanted)
        assert trimmed[0].values["RG"] <= 1.25 * planned[0].values["RG"]
        assert trimmed[1].values["RG"] <= 1.65 * planned[1].values["RG"]


def test_the_input_s_pole_stays_beyond_the_crossover() -> None:
    """2 pi (GBW/gain) (RF parallel RG) Cin below a fifth, but for what drives RF: a fast type at a low gain."""
    fast = op_amp(gain_bandwidth=100e6, voltage_noise=5e-9)
    draft = gain_draft(StageTarget(2.0), fast, STOCKS, CENTER, 27.0, 25.0)
    values = draft.values
    capacitance = fast.input_capacitance_differential + fast.input_capacitance_common + fast.stray_inverting_to_ground
    parallel = values["RF"] * values["RG"] / (values["RF"] + values["RG"])
    pole = 2 * math.pi * 100e6 / 2 * parallel * capacitance
    assert pole < 0.25 or values["RF"] < 300
