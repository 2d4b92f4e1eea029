"""Pre-emphasis: when a flat factor does, what it leaves, and whole designs with a shelf."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from synth import api
from synth.errors import InfeasibleError
from synth.parts.op_amps import load_op_amps
from synth.planning import emphasis as module
from synth.planning.bounds import sensor_gain, usable_op_amps
from synth.planning.emphasis import Emphasis, emphasis_caution, emphasis_notes, make_emphasis, sensor_slope
from synth.planning.partition import partitions
from synth.planning.workshop import surroundings
from synth.spec import Spec
from synth.topology import shelving
from tests.support.simulators import SIMULATORS, Simulator

PICKUP = Path(__file__).parents[2] / "designs" / "pickup" / "spec.toml"
TEMPLATE = """
format = 1
title = "Channel with a steep sensor"
[target]
center_frequency = "100 kHz"
bandwidth = "{bandwidth}"
full_scale = "2 uA"
smallest = "200 nA"
{level}
load = "10 kohm"
{target}
[sensor]
scale = "20 mV/mA"
resistance = "25 ohm"
{sensor}
rolloff = [{rolloff}]
[supply]
positive = "5 V"
negative = "-5 V"
"""
HIGH = '{ kind = "high-pass", corner = "200 kHz" }'
LOW = '{ kind = "low-pass", corner = "30 kHz" }'


def spec_of(rolloff: str, bandwidth: str, target: str = "", level: str = 'output = "1 V"', sensor: str = "") -> Spec:
    text = TEMPLATE.format(rolloff=rolloff, bandwidth=bandwidth, target=target, level=level, sensor=sensor)
    return api.parse_spec(text, "steep.toml")


WANTED = {
    "high-pass": spec_of(HIGH, "30 kHz", 'ripple = "0.5 dB"'),
    "low-pass": spec_of(LOW, "25 kHz", 'ripple = "0.3 dB"'),
    "shelf alone": spec_of(LOW, "30 kHz", 'ripple = "0.5 dB"', 'gain = "20 dB"', 'inductance = "100 uH"'),
}


@pytest.fixture(scope="module")
def designs() -> dict[str, api.Design]:
    return {name: api.design(spec, builds=500) for name, spec in WANTED.items()}


def emphasis_of(spec: Spec) -> Emphasis:
    stocks = api.stocks_for(spec)
    op_amps = usable_op_amps(spec, tuple(entry.op_amp for entry in load_op_amps(()).values()))
    attenuation = sensor_gain(spec)
    split = partitions(spec, op_amps, spec.overall_gain / spec.sensor.scale / attenuation, attenuation)[0]
    return make_emphasis(spec, op_amps, stocks, split, attenuation)


# ---------------------------------------------------------------------------------------------- what is decided


@pytest.mark.parametrize(("loss", "factor"), [("20 %", 1.25), ("12 %", 1.0 / 0.88)])
@pytest.mark.parametrize("shape", ["high-pass", "low-pass"])
def test_the_loss_needs_its_reciprocal(loss: str, factor: float, shape: str) -> None:
    """20 % down needs 1.25, not 1.20; 12 % down 1.136 (common practice, no source)."""
    rolloff = f'{{ kind = "loss", at = "100 kHz", loss = "{loss}", shape = "{shape}" }}'
    made = emphasis_of(spec_of(rolloff, "5 kHz"))
    assert made.shelf is None
    assert made.factor == pytest.approx(factor, rel=1e-9)


@pytest.mark.parametrize(("kind", "corner"), [("high-pass", 48e3), ("high-pass", 200e3), ("low-pass", 30e3)])
def test_slope_in_closed_form(kind: str, corner: float) -> None:
    """Both edges geometrically about the centre: |H(fh)/H(fl)| of 1/sqrt(1 + x^2), x = fc/f or f/fc."""
    spec = spec_of(f'{{ kind = "{kind}", corner = "{corner:g} Hz" }}', "20 kHz", 'signal_tolerance = "1 %"')
    low, high = (100e3 * (s * 0.1 + math.hypot(1, 0.1)) for s in (-1, 1))
    assert high - low == pytest.approx(20e3)

    def level(f: float) -> float:
        return -10 * math.log10(1 + (corner / f if kind == "high-pass" else f / corner) ** 2)

    found = sensor_slope(spec)
    assert float(found.left.tilt) == pytest.approx(level(high) - level(low), rel=1e-9)
    change = 10 ** ((level(101e3) - level(99e3)) / 20) - 1
    assert float(found.left.signal) == pytest.approx(change, rel=1e-9)
    slope = (corner / 100e3) ** 2 if kind == "high-pass" else (100e3 / corner) ** 2
    sign = 1 if kind == "high-pass" else -1
    assert float(found.left.signal) == pytest.approx(sign * 0.02 * slope / (1 + slope), rel=0.02)  # first order
    assert found.kind == ("falling" if kind == "high-pass" else "rising")


def bandwidth_at_limit(tilt: float, slope: float) -> float:
    """[Hz] at which a slope d ln H/d ln f tilts the band by so many dB: 2 asinh(B/(2 f0)) is the band in ln f."""
    return 2 * 100e3 * math.sinh(tilt * math.log(10) / 20 / slope / 2)


@pytest.mark.parametrize(("ripple", "target"), [(0.5, ""), (0.5, 'ripple = "0.5 dB"'), (0.2, 'ripple = "0.2 dB"')])
def test_flat_until_the_tilt_takes_half_of_the_ripple(ripple: float, target: str) -> None:
    """At x = 1 the slope is 1/2; 0.5 dB where the spec asks none."""
    rolloff = '{ kind = "high-pass", corner = "100 kHz" }'
    limit = bandwidth_at_limit(ripple / 2, 0.5)
    for factor, flat in ((0.98, True), (1.02, False)):
        assert sensor_slope(spec_of(rolloff, f"{factor * limit:.6g} Hz", target)).is_flat is flat


@pytest.mark.parametrize(("accuracy", "target"), [(0.03, ""), (0.01, 'accuracy = "1 %"')])
def test_flat_until_the_signal_s_wandering_takes_a_tenth_of_the_accuracy(accuracy: float, target: str) -> None:
    """The change from one end of the tolerance to the other, slope 1/2: d = 2 * tolerance/2."""
    rolloff = '{ kind = "high-pass", corner = "100 kHz" }'
    for factor, flat in ((0.98, True), (1.02, False)):
        tolerance = f'signal_tolerance = "{100 * factor * 0.1 * accuracy:.6g} %"'
        assert sensor_slope(spec_of(rolloff, "1 kHz", f"{tolerance}\n{target}")).is_flat is flat


def test_a_tight_centre_binds_before_the_ripple() -> None:
    """The centre may shift by a fifth of its tolerance: t of the bandwidth for an odd part of t neper at the edges."""
    rolloff = '{ kind = "high-pass", corner = "100 kHz" }'
    limit = bandwidth_at_limit(2 * 0.2 * 0.02 * 20 / math.log(10), 0.5)
    for factor, flat in ((0.98, True), (1.02, False)):
        target = 'center_tolerance = "2 %"'
        assert sensor_slope(spec_of(rolloff, f"{factor * limit:.6g} Hz", target)).is_flat is flat


def test_the_shift_by_a_tilt_is_no_more_than_assumed() -> None:
    """One pole pair times e^(t x), x in half bandwidths: its -3 dB points by bisection."""
    t = 0.02

    def edge(sign: int) -> float:
        low, high = 0.0, 3.0
        for _ in range(60):
            x = (low + high) / 2
            level = sign * t * x - 0.5 * math.log(1 + x * x)
            low, high = (x, high) if level > -0.5 * math.log(2) else (low, x)
        return sign * low

    shift = (edge(1) + edge(-1)) / 2 / 2  # of the bandwidth
    assert shift == pytest.approx(t, rel=0.01)


def test_the_pickup_stays_flat() -> None:
    spec = api.load_spec(PICKUP)
    made = emphasis_of(spec)
    assert made.shelf is None
    assert not made.refusal
    assert list(emphasis_notes(made, (), api.stocks_for(spec), surroundings(spec, api.stocks_for(spec)))) == [
        "flat pre-emphasis 1.109: the sensor's slope leaves 0.9 % over the band, 0.002 % over the signal tolerance"
    ]


def test_a_sensor_without_rolloff_needs_no_word() -> None:
    spec = spec_of("", "20 kHz")
    made = emphasis_of(spec)
    assert made.factor == pytest.approx(1.0)
    assert list(emphasis_notes(made, (), api.stocks_for(spec), surroundings(spec, api.stocks_for(spec)))) == []


# ---------------------------------------------------------------------------------------------- whole designs


@pytest.mark.parametrize("name", list(WANTED))
def test_whole_designs_with_a_shelf(designs: dict[str, api.Design], name: str) -> None:
    design = designs[name]
    kinds = [stage.kind for stage in design.chain.stages]
    assert kinds.count("pre-emphasis") == 1
    verdict = {r.name: r for r in design.requirements}
    for requirement in (
        *("output at full scale", "bandwidth", "center frequency"),
        *("ripple", "phase margin", "output swing"),
    ):
        assert verdict[requirement].met is True, verdict[requirement]
    level = verdict["output at full scale"].nominal
    assert level == pytest.approx(design.spec.full_scale_output, rel=2e-3)
    band = design.verification.realized
    assert band.center_frequency == pytest.approx(100e3, abs=0.01 * design.spec.target.bandwidth)
    assert band.bandwidth == pytest.approx(design.spec.target.bandwidth, rel=0.01)
    notes = [text for text in design.verification.cautions if text.startswith("shelving pre-emphasis")]
    assert len(notes) == 1
    assert "where a flat factor leaves" in notes[0]
    assert "still" not in notes[0]
    damped = [ref for ref in design.chain.parts if ref.role == "damps the source's inductance"]
    assert len(damped) == (1 if name == "shelf alone" else 0)


@pytest.mark.parametrize("name", list(WANTED))
def test_the_design_folder_keeps_the_shelf(designs: dict[str, api.Design], name: str, tmp_path: Path) -> None:
    api.save_design(designs[name], tmp_path / "made")
    again = api.load_design(tmp_path / "made")
    f = [50e3, 100e3, 200e3]
    np.testing.assert_allclose(again.response(f), designs[name].response(f), rtol=1e-7)
    assert [s.topology for s in again.chain.stages] == [s.topology for s in designs[name].chain.stages]
    assert "pre-emphasis" in (tmp_path / "made" / "report.txt").read_text(encoding="utf-8")


@pytest.mark.spice
@pytest.mark.parametrize("simulator", SIMULATORS, ids=lambda simulator: simulator.name)
@pytest.mark.parametrize("name", list(WANTED))
def test_simulators_agree(designs: dict[str, api.Design], name: str, simulator: Simulator) -> None:
    design = designs[name]
    f = np.array([10e3, 87e3, 100e3, 114e3, 600e3])
    netlist = api.netlist(design)
    np.testing.assert_allclose(simulator.response(netlist, f), design.response(f), rtol=1e-4)
    np.testing.assert_allclose(simulator.noise(netlist, f), design.noise(f).density, rtol=2e-3)


def test_the_first_stage_s_shelf_costs_noise_and_says_so(designs: dict[str, api.Design]) -> None:
    """A rising shelf that stands first has little gain where its noise is made: more than half a decibel."""
    note = next(text for text in designs["shelf alone"].verification.cautions if text.startswith("shelving"))
    cost = float(note.split("in-band noise ")[1].split(" dB above that")[0])
    assert 0.5 < cost < 3


def test_a_second_order_sensor_gets_the_best_shelf_and_the_miss_is_told() -> None:
    made = emphasis_of(spec_of('{ kind = "high-pass", corner = "200 kHz", order = 2 }', "30 kHz"))
    assert made.shelf is not None
    assert abs(made.shelf.left.tilt) < 0.5 * abs(made.slope.left.tilt)
    text = emphasis_caution(made, None)
    assert "; still a tilt of 1.6 dB over the band, 0.25 dB allowed" in text
    assert "noise" not in text


def test_gain_moves_into_a_shelf_that_needs_more() -> None:
    """A gain of 6 dB in all: the shelf takes what it needs, the sections give it back."""
    made = emphasis_of(spec_of(LOW, "30 kHz", "", 'gain = "-6 dB"'))
    assert made.shelf is not None
    wanted = 10 ** (-6 / 20) / float(sensor_gain(spec_of(LOW, "30 kHz")))
    total = math.prod(made.split.gains) * made.split.section_gain
    assert total == pytest.approx(wanted, rel=1e-9)
    assert made.split.section_gain < 1
    small = min(float(x) for x in shelving.end_gains(made.shelf.gain, made.shelf.zero / 100e3, made.shelf.pole / 100e3))
    assert small > 1


def test_where_no_shelf_can_be_built_it_stays_flat_and_says_why(monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(*_: object) -> None:
        raise InfeasibleError("the drawer is empty")

    monkeypatch.setattr(module, "round_shelf", refuse)
    spec = WANTED["high-pass"]
    made = emphasis_of(spec)
    assert made.shelf is None
    assert made.refusal == "the drawer is empty"
    (note,) = emphasis_notes(made, (), api.stocks_for(spec), surroundings(spec, api.stocks_for(spec)))
    assert note.startswith("flat pre-emphasis 2.236: the sensor's slope leaves 30 % over the band; that is a tilt of ")
    assert note.endswith("dB over the band, 0.25 dB allowed, and no shelving stage can be built: the drawer is empty")


def test_a_flat_factor_has_no_shelf_to_caution_of() -> None:
    with pytest.raises(ValueError, match="a flat pre-emphasis has no shelf to caution of"):
        emphasis_caution(emphasis_of(api.load_spec(PICKUP)), None)
