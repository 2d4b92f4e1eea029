"""Drawn builds: intervals against published values, statistics against the nominal judges build by build."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

import synth
from synth import circuit
from synth.model.chain import Chain
from synth.model.judgement import Requirement
from synth.verification.builds.draw import CHUNK, draw
from synth.verification.builds.intervals import discarded, tolerance_range, yield_interval
from synth.verification.builds.judge import meets, trim_state
from synth.verification.builds.statistics import statistics
from synth.verification.figures import realized, rejection, response_table, ripple

SPEC = """
format = 1
title = "Builds of a stagger-tuned pair, an invented scenario"
[target]
center_frequency = "20 kHz"
bandwidth = "3 kHz"
full_scale = "1 mV"
smallest = "100 uV"
output = "1 V"
ripple = "1 dB"
reject = [{ frequency = "60 kHz", by = "30 dB" }]
[sensor]
scale = "1 V/V"
resistance = "100 ohm"
[supply]
positive = "12 V"
negative = "-12 V"
[environment]
temperature = ["0 degC", "60 degC"]
[filter]
family = "butterworth"
sections = 2
"""


@pytest.fixture(scope="module")
def made() -> synth.Design:
    return synth.design(synth.parse_spec(SPEC), builds=0)


@pytest.mark.parametrize(
    ("passed", "count", "low", "high"),
    [
        # R. G. Newcombe, Stat. Med. 17 (1998) 857, method 5 (values via the checks list, from memory there)
        (81, 263, 0.2527, 0.3676),
        (15, 148, 0.0578, 0.1617),
        (0, 20, 0.0, 0.1684),
        (1, 29, 0.0009, 0.1776),
        (7, 20, 0.1539, 0.5922),
    ],
)
def test_yield_interval_of_published_examples(passed: int, count: int, low: float, high: float) -> None:
    assert yield_interval(passed, count) == pytest.approx((low, high), abs=5e-5)


def test_473_builds_are_the_least_for_a_99_95_range() -> None:
    """1 - 0.99^n - n 0.01 0.99^(n-1) >= 0.95 first at n = 473 (Wilks)."""
    assert (discarded(472), discarded(473)) == (0, 2)
    assert tolerance_range(np.arange(472.0)) is None
    assert tolerance_range(np.arange(473.0)) == (0.0, 472.0)


@pytest.mark.parametrize("count", [473, 2500])
def test_the_range_holds_99_percent_with_95_percent_confidence(count: int) -> None:
    """Coverage of uniform draws is the length of the range; 2000 repetitions, 93 to 97 % must hold 99 %."""
    random = np.random.default_rng(4)
    spans = [tolerance_range(random.uniform(size=count)) for _ in range(2000)]
    held = np.mean([span is not None and span[1] - span[0] >= 0.99 for span in spans])
    assert 0.93 <= held <= 0.97


def with_drawn_values(chain: Chain, values: dict[str, np.ndarray], build: int) -> Chain:
    """The chain with the part and amplifier figures of one build written into it; one model an amplifier."""
    parts, models = [], {}
    for part in chain.parts:
        own = {key.split(".")[1]: float(v[build]) for key, v in values.items() if key.startswith(f"{part.ref}.")}
        if part.kind == "op-amp":
            name = f"{part.value}_{part.ref}"
            models[name] = replace(chain.models[str(part.value)], type=name, **own)
            parts.append(replace(part, value=name))
        else:
            parts.append(replace(part, value=float(values[part.ref][build]), **own))
    return replace(chain, parts=tuple(parts), models=models)


def test_statistics_are_those_of_the_exact_judges_build_by_build(made: synth.Design) -> None:
    chain, spec = made.chain, made.spec
    count = 12
    found = statistics(chain, spec, count, seed=3).figures
    drawn = draw(chain, spec, 3, 0, count)
    for build in range(count):
        network = circuit.build_network(with_drawn_values(chain, drawn.values, build))
        table = response_table(network, spec.target.center_frequency, spec.target.bandwidth)
        band = realized(network, table, spec)
        assert found["bandwidth"][build] == pytest.approx(band.bandwidth, rel=1e-4)
        assert found["center frequency"][build] == pytest.approx(band.center_frequency, rel=1e-5)
        assert found["output at full scale"][build] == pytest.approx(10 ** (band.gain_db / 20) * 1e-3, rel=1e-9)
        assert found["reject 60 kHz"][build] == pytest.approx(rejection(network, 20e3, 60e3), abs=1e-9)
        assert found["ripple"][build] == pytest.approx(ripple(table, band.low_edge, band.high_edge), abs=2e-3)


def test_draws_fill_the_tolerance_and_no_more(made: synth.Design) -> None:
    drawn = draw(made.chain, made.spec, 0, 0, CHUNK)
    for part in made.chain.parts:
        if part.kind != "op-amp":
            ratio = drawn.values[part.ref] / part.number - 1
            drift = part.temperature_coefficient * np.abs(drawn.temperature - made.chain.ambient).max()
            assert np.abs(ratio).max() <= (part.tolerance + drift) * 1.01
            assert ratio.std() == pytest.approx(part.tolerance / math.sqrt(3), rel=0.06)
    assert drawn.temperature.min() >= 0
    assert drawn.temperature.max() <= 60


def test_more_builds_leave_the_first_ones_as_they_were(made: synth.Design) -> None:
    few, many = (statistics(made.chain, made.spec, n, seed=9).figures for n in (700, CHUNK + 300))
    for name, values in few.items():
        assert np.array_equal(values, many[name][:700])
    assert not np.array_equal(few["bandwidth"], statistics(made.chain, made.spec, 700, seed=10).figures["bandwidth"])


def test_shares_of_variance_add_up_and_name_the_section_parts(made: synth.Design) -> None:
    shares = dict(statistics(made.chain, made.spec, 2 * CHUNK, seed=1).shares["center frequency"])
    assert 0.5 < sum(shares.values()) <= 1.05
    section_parts = {ref for s in made.chain.stages if s.kind == "bandpass" for ref in s.parts}
    assert next(iter(shares)).split()[0] in section_parts


def test_spread_of_a_section_is_that_of_the_textbook() -> None:
    """sd(f0)/f0 = (1/2) sqrt(sum t_i^2/3), rectangular (checks list, sec. 4.4): one section dominates the centre."""
    text = SPEC.replace("sections = 2", "sections = 1").replace('reject = [{ frequency = "60 kHz", by = "30 dB" }]', "")
    single = synth.design(synth.parse_spec(text.replace('temperature = ["0 degC", "60 degC"]', "")), builds=0)
    values = statistics(single.chain, single.spec, 8 * CHUNK, seed=2).figures["center frequency"]
    linear = 0.5 * math.sqrt((2 * 0.01**2 + 2 * 0.01**2) / 3)
    # the centre of the -3 dB points re the gain at the spec's centre moves with the section's own frequency
    assert values.std() / values.mean() == pytest.approx(linear, rel=0.05)


def test_a_build_without_a_figure_does_not_pass() -> None:
    requirement = Requirement("bandwidth", "Hz", 1.0, 2.0, 1.5, margin=0.5, met=True)
    assert meets(requirement, np.array([1.5, np.nan, 0.5, 2.5, 2.0])).tolist() == [True, False, False, False, True]


def test_yield_is_judged_and_names_its_trim(made: synth.Design) -> None:
    design = synth.design(made.spec, builds=1000)
    builds = design.verification.builds
    assert builds is not None
    requirement = next(r for r in design.requirements if r.name == "yield")
    assert requirement.nominal == pytest.approx(100 * builds.share)
    assert requirement.met is (builds.share >= 0.99)
    assert builds.trim in requirement.note
    output = next(y for y in builds.yields if y.name == "output at full scale")
    assert not output.counted
    assert builds.low <= builds.share <= builds.high
    counted = [y.share for y in builds.yields if y.counted]
    assert sum(counted) - len(counted) + 1 - 1e-12 <= builds.share <= min(counted)


def test_a_chain_that_is_never_trimmed_counts_its_output() -> None:
    text = SPEC + '[calibration]\nlevel = "1 mV"\ntrim = "none"\n'
    assert trim_state(synth.parse_spec(text)) == "untrimmed"
    assert trim_state(synth.parse_spec(SPEC)) == "gain trimmed"
    design = synth.design(synth.parse_spec(text.replace("[sensor]", 'accuracy = "5 %"\n[sensor]')), builds=600)
    assert design.verification.builds is not None
    assert all(y.counted for y in design.verification.builds.yields)


@pytest.mark.parametrize(
    "rolloff",
    [
        '{ kind = "high-pass", corner = "30 kHz", tolerance = "10 %", order = 2 }',
        '{ kind = "low-pass", corner = "15 kHz", tolerance = "10 %" }',
        '{ kind = "resonant", frequency = "22 kHz", q = "3", tolerance = "5 %" }',
        '{ kind = "loss", at = "20 kHz", loss = "20 %", shape = "low-pass", tolerance = "10 %" }',
    ],
)
def test_a_sensors_corner_is_drawn_as_if_it_were_another_sensor(rolloff: str) -> None:
    text = SPEC.replace("[supply]", f"rolloff = [{rolloff}]\n[supply]")
    design = synth.design(synth.parse_spec(text), builds=0)
    chain, spec = design.chain, design.spec
    drawn = draw(chain, spec, 5, 0, 4)
    table = circuit.build_values(chain, {k: v for k, v in drawn.values.items() if k.startswith("sensor.")})
    at = [15e3, 20e3, 26e3]
    found = circuit.batch_response(circuit.build_network(chain), table, at)
    item = drawn.causes["sensor rolloff 1"]
    for build in range(4):
        (own,) = spec.sensor.rolloff
        spread = 1 + (own.tolerance or 0.0) * float(item[build])
        key = {"resonant": "frequency", "loss": "loss"}.get(own.kind, "corner")
        moved = replace(spec.sensor, rolloff=(replace(own, **{key: getattr(own, key) * spread}),))
        expected = circuit.response(circuit.build_network(replace(chain, sensor=moved)), at)
        assert found[:, build] == pytest.approx(expected, rel=1e-9)
