"""What the planner chooses: no more sections than needed, what is insisted on, and nothing that is not allowed."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from synth import api
from synth.approximation import FAMILIES, bandpass_pairs
from synth.errors import InfeasibleError
from synth.parts.op_amps import load_op_amps, select
from synth.planning import plan
from synth.planning.planner import MOST_SECTIONS, ideal_rejection
from synth.topology import SECTIONS
from tests.api.made import changed, design_of, pickup, spec_of
from tests.support.specs import random_spec

SEEDS = (3, 5, 6, 10, 12, 13)
FAR = 'reject = [{{ frequency = "180 kHz", by = "{} dB" }}]'


@pytest.fixture(scope="session", params=SEEDS)
def drawn(request: pytest.FixtureRequest) -> api.Design:
    return api.design(api.parse_spec(random_spec(request.param)), builds=0)


def test_the_gain_is_met_within_two_per_mille(drawn: api.Design) -> None:
    spec = drawn.spec
    realized = abs(drawn.response([spec.target.center_frequency])[0])
    assert realized == pytest.approx(spec.overall_gain, rel=2e-3)


def test_every_amplifier_works_on_the_supply_and_is_stable_where_it_stands(drawn: api.Design) -> None:
    supply = drawn.spec.supply
    total = supply.positive - (supply.negative or 0.0)
    for stage in drawn.chain.stages:
        if not stage.op_amp:
            continue
        model = drawn.chain.models[stage.op_amp]
        assert model.supply_minimum <= total <= model.supply_maximum
        if stage.kind == "gain":
            assert model.minimum_noise_gain <= 1.02 * abs(stage.target.gain)
        if stage.kind == "bandpass":
            assert model.minimum_noise_gain <= 1


def test_candidates_say_why_they_lost(drawn: api.Design) -> None:
    candidates = drawn.record.candidates
    assert [c.chosen for c in candidates] == [True] + [False] * (len(candidates) - 1)
    assert (candidates[0].lost_on == "") == drawn.meets_spec
    for other in candidates[1:]:
        assert other.description
        if drawn.meets_spec and not other.lost_on:
            assert other.shortfall == ""
    assert len(drawn.chain.stages) >= drawn.record.order
    assert drawn.record.family in candidates[0].description


def test_poles_of_the_sections_are_where_the_family_wants_them(drawn: api.Design) -> None:
    for stage, result in zip(drawn.chain.stages, drawn.verification.stages, strict=True):
        if stage.kind == "bandpass":
            assert result.center_frequency == pytest.approx(stage.target.center_frequency, rel=5e-3)
            assert result.q == pytest.approx(stage.target.q, rel=2e-2)


# ------------------------------------------------------------------------------------------------ sections


def test_one_section_where_one_will_do() -> None:
    made = design_of(changed())
    assert made.meets_spec
    assert made.record.order == 1


@pytest.mark.parametrize(("by", "least"), [(30, 1), (60, 2), (90, 2)])
def test_a_steeper_reject_takes_more_sections_and_no_more_than_it_must(by: int, least: int) -> None:
    made = design_of(changed(target=FAR.format(by)))
    assert made.meets_spec
    order = made.record.order
    assert order >= least
    assert sum(s.kind == "bandpass" for s in made.chain.stages) == order
    if order > 1:  # no ideal chain of fewer sections would do, with what the spec allows in bandwidth
        fewer = [
            ideal_rejection(bandpass_pairs(family, order - 1, 60e3, 2.7e3), 60e3, 180e3)
            for family in FAMILIES
        ]
        assert max(fewer) < by + 3


def test_fewer_sections_win_when_more_meet_as_well() -> None:
    by = FAR.format(60)
    free = design_of(changed(target=by))
    forced = design_of(changed(target=by, end=f"[filter]\nsections = {free.record.order + 1}\n"))
    assert free.meets_spec
    assert forced.meets_spec
    assert forced.record.order == free.record.order + 1


# ------------------------------------------------------------------------------------------------ insisted on


@pytest.mark.parametrize("family", FAMILIES)
def test_a_family_insisted_on_is_kept(family: str) -> None:
    made = design_of(changed(('"3 kHz"', '"12 kHz"'), end=f'[filter]\nfamily = "{family}"\nsections = 2\n'))
    assert (made.record.family, made.record.order) == (family, 2)
    wanted = bandpass_pairs(family, 2, 60e3, 12e3)
    targets = [s.target for s in made.chain.stages if s.kind == "bandpass"]
    found = sorted((t.center_frequency or 0.0, t.q or 0.0) for t in targets)
    np.testing.assert_allclose(found, sorted((p.frequency, p.q) for p in wanted), rtol=1e-9)


@pytest.mark.parametrize("sections", [1, 3])
def test_a_number_of_sections_insisted_on_is_kept(sections: int) -> None:
    made = design_of(changed(('"3 kHz"', '"12 kHz"'), end=f"[filter]\nsections = {sections}\n"))
    assert made.record.order == sections
    assert sum(s.kind == "bandpass" for s in made.chain.stages) == sections


@pytest.mark.parametrize("topology", SECTIONS)
def test_a_topology_insisted_on_is_kept(topology: str) -> None:
    made = design_of(changed(('"3 kHz"', '"12 kHz"'), end=f'[filter]\nsections = 1\ntopology = "{topology}"\n'))
    assert {s.topology for s in made.chain.stages if s.kind == "bandpass"} == {topology}


def test_no_op_amp_but_those_allowed() -> None:
    allowed = {"LM4562", "OPA1612", "OPA192"}
    made = design_of(changed(end=f"[parts]\nop_amps = {sorted(allowed)}\n".replace("'", '"')))
    assert set(made.chain.models) <= allowed
    assert {s.op_amp for s in made.chain.stages} <= allowed


def test_plan_takes_its_op_amps_from_what_it_is_given() -> None:
    spec = spec_of(changed())
    given = tuple(entry.op_amp for entry in select(("OPA1612",), load_op_amps()))
    found = plan(spec, given, api.stocks_for(spec))
    assert set(found.chain.models) == {"OPA1612"}


def test_series_and_tolerances_insisted_on_are_kept() -> None:
    resistors, capacitors = '{ series = "E24", tolerance = "1 %" }', '{ series = "E6", tolerance = "5 %" }'
    made = design_of(changed(end=f"[parts]\nresistors = {resistors}\ncapacitors = {capacitors}\n"))
    stocks = api.stocks_for(made.spec)
    frequency = {p.ref for p in made.chain.parts if p.kind == "capacitor" and p.stage.startswith("bandpass")}
    assert frequency
    for part in made.chain.parts:
        if part.kind == "resistor":
            assert part.number in stocks.resistors.values
            assert part.tolerance == 0.01
        if part.ref in frequency:
            assert part.number in stocks.capacitors.values
            assert part.tolerance == 0.05


def test_the_load_is_part_of_the_chain() -> None:
    made = design_of(changed(target='load = "1 kohm"\nload_capacitance = "50 pF"'))
    assert (made.chain.load_resistance, made.chain.load_capacitance) == (1e3, 50e-12)
    assert made.meets_spec


# ------------------------------------------------------------------------------------------------ what misses least


def test_a_spec_that_nothing_meets_gets_the_chain_that_misses_least() -> None:
    made = design_of(changed(target='group_delay_variation = "1 ns"', end="[filter]\nsections = 2\n"))
    assert not made.meets_spec
    judged = [c for c in made.record.candidates if c.lost_on == "group delay variation"]
    assert judged[0].chosen
    values = {c.description: c.shortfall for c in judged}
    assert len(values) > 1


@pytest.mark.parametrize(
    ("text", "match"),
    [
        (changed(('"1 V"', '"50 V"')), r"target\.output of 50 V rms needs a swing"),
        (changed(('"5 V"', '"0.5 V"'), ('"-5 V"', '"-0.5 V"')), r"supply of 1 V in total"),
        (changed(target='signal_to_noise = "70 dB"'), r"target\.signal_to_noise of 70 dB"),
        (changed(('"3 kHz"', '"1 Hz"')), r"target\.bandwidth of 1 Hz needs sections of Q"),
        (changed(target='reject = [{ frequency = "61 kHz", by = "150 dB" }]'), r"target\.reject of 150 dB at 61 kHz"),
        (
            changed(('"60 kHz"', '"60 MHz"'), ('"3 kHz"', '"30 MHz"'), ('"1 V"', '"1 mV"')),
            r"target\.center_frequency|to spare at 60 MHz",
        ),
    ],
)
def test_what_cannot_be_built(text: str, match: str) -> None:
    with pytest.raises(InfeasibleError, match=f"^given.toml: .*({match})"):
        design_of(text)


def test_a_reject_at_fault_is_the_one_named() -> None:
    lines = 'reject = [{ frequency = "600 kHz", by = "20 dB" }, { frequency = "61 kHz", by = "150 dB" }]'
    with pytest.raises(InfeasibleError, match=r"150 dB at 61 kHz is beyond 1 section"):
        design_of(changed(target=lines, end="[filter]\nsections = 1\n"))


# ------------------------------------------------------------------------------------------------ ideal rejection


def test_ideal_rejection_is_that_of_the_sections() -> None:
    pairs = bandpass_pairs("synchronous", 3, 60e3, 3e3)
    assert ideal_rejection(pairs, 60e3, 60e3) == 0.0
    assert ideal_rejection(pairs, 60e3, 30e3) == pytest.approx(ideal_rejection(pairs, 60e3, 120e3), abs=1e-9)
    butterworth = bandpass_pairs("butterworth", 3, 60e3, 3e3)
    assert ideal_rejection(butterworth, 60e3, 120e3) == pytest.approx(60 * 1.4771, abs=0.1)  # (u Q)^2n, u Q = 30


def test_the_chain_rejects_about_what_its_ideal_does() -> None:
    made = pickup()
    pairs = bandpass_pairs(made.record.family, made.record.order, 100e3, 5e3)
    rejected = next(r for r in made.requirements if r.name == "reject 300 kHz")
    sensor = 1.0  # dB that the coil's high-pass still rises by
    assert rejected.nominal == pytest.approx(ideal_rejection(pairs, 100e3, 300e3) - sensor, abs=2.0)
    assert made.record.order <= MOST_SECTIONS


def test_a_spec_compares_without_its_source() -> None:
    spec = spec_of(changed())
    assert replace(spec, source="elsewhere.toml") == spec
