"""How gain is shared out, which amplifier gets which, and in what order stages may stand."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

from synth.errors import InfeasibleError
from synth.model.part import OpAmp
from synth.parts.op_amps import load_op_amps
from synth.planning.amplifiers import (
    GAIN_CEILING,
    LARGEST_LOSS,
    LARGEST_SHIFT,
    NOISE_SLACK,
    SECTION_MARGIN,
    allowed_topologies,
    choose_section_circuits,
    gain_candidates,
    input_noise,
    largest_q,
    section_circuits,
    section_margin,
    suits_sections,
)
from synth.planning.partition import MOST_GAIN_STAGES, noise_allowance, orders, partitions
from synth.spec import Spec
from synth.topology import SECTIONS, non_inverting
from tests.api.made import changed, spec_of
from tests.support.networks import K, op_amp

FRUGAL = {"supply_current": 1e-3}


@pytest.fixture(scope="module")
def catalog() -> tuple[OpAmp, ...]:
    return tuple(entry.op_amp for entry in load_op_amps().values())


@pytest.fixture(scope="module")
def spec() -> Spec:
    return spec_of(changed())


# ------------------------------------------------------------------------------------------------ orders


@pytest.mark.parametrize("gains", range(5))
@pytest.mark.parametrize("sections", range(1, 6))
def test_every_order_once(gains: int, sections: int) -> None:
    found = list(orders(gains, sections))
    assert len(found) == len(set(found)) == math.comb(gains + sections, gains)
    for order in found:
        assert (order.count("gain"), order.count("bandpass")) == (gains, sections)
    assert found[0] == ("gain",) * gains + ("bandpass",) * sections


# ------------------------------------------------------------------------------------------------ gain stages


@pytest.mark.parametrize("gain", [2.0, 30.0, 1e3, 5e4, 3e7])
def test_equal_gains_make_the_whole(gain: float, spec: Spec, catalog: tuple[OpAmp, ...]) -> None:
    found = partitions(spec, catalog, gain, 1.0)
    counts = [len(split.gains) for split in found]
    assert list(dict.fromkeys(counts)) == sorted(set(counts))  # fewest first, other amplifiers after
    assert len({(len(s.gains), s.op_amps[0].type) for s in found}) == len(found)
    for split in found:
        assert math.prod(split.gains) * split.section_gain == pytest.approx(gain, rel=1e-12)
        assert len(split.gains) == len(split.op_amps) <= MOST_GAIN_STAGES
        for each, chosen in zip(split.gains, split.op_amps, strict=True):
            assert chosen in catalog
            assert chosen.minimum_noise_gain <= each <= GAIN_CEILING


def test_a_gain_below_two_is_taken_back_in_the_sections(spec: Spec, catalog: tuple[OpAmp, ...]) -> None:
    (split,) = partitions(spec, catalog, 0.1, 1.0)
    assert math.prod(split.gains) * split.section_gain == pytest.approx(0.1)
    assert all(a.minimum_noise_gain <= g for g, a in zip(split.gains, split.op_amps, strict=True))


def test_more_gain_than_five_stages_carry(spec: Spec) -> None:
    only = (op_amp(gain_bandwidth=1e9, bias_current=1e-12),)
    (fit,) = gain_candidates(spec, only, 25.0)
    most = fit.largest_gain**5
    assert partitions(spec, only, most * 0.999, 1.0)
    with pytest.raises(InfeasibleError, match=r"target\.output of 1 V rms needs .* dB .* more than 5 stages carry"):
        partitions(spec, only, most * 1.001, 1.0)
    asked = spec_of(changed(('output = "1 V"', 'gain = "90 dB"')))
    with pytest.raises(InfeasibleError, match=r"target\.gain of 90 dB needs .* largest gain that works is .* dB"):
        partitions(asked, only, most * 1.001, 1.0)


def test_no_amplifier_with_gain_to_spare(spec: Spec) -> None:
    slow = (op_amp(gain_bandwidth=60e3),)
    with pytest.raises(InfeasibleError, match=r"no amplifier allowed has gain to spare at 60 kHz; .*parts\.op_amps"):
        partitions(spec, slow, 1e3, 1.0)


def test_an_attenuating_chain_needs_an_amplifier_stable_at_little_gain(spec: Spec) -> None:
    only = (op_amp(gain_bandwidth=1e9, minimum_noise_gain=5.0),)
    with pytest.raises(InfeasibleError, match="no amplifier allowed is stable at a gain of 2"):
        partitions(spec, only, 0.5, 1.0)


def test_a_minimum_noise_gain_is_kept_by_taking_fewer_stages(spec: Spec) -> None:
    only = (op_amp(gain_bandwidth=1e10, bias_current=1e-12, minimum_noise_gain=10.0),)
    counts = [len(split.gains) for split in partitions(spec, only, 200.0, 1.0)]
    assert counts == [1, 2]  # three would be 5.8 each


def test_noise_allowed_is_what_the_ratio_leaves_after_the_source(spec: Spec) -> None:
    asked = replace(spec, target=replace(spec.target, signal_to_noise=20.0))
    allowed = noise_allowance(asked, 1.0, 1e-9)
    signal = 20.0 * 100e-9
    total = math.hypot(allowed, math.sqrt(4 * K * 300.15 * 25.0)) * math.sqrt(3e3)
    assert 20 * math.log10(signal / total) == pytest.approx(22.0, abs=1e-6)  # 20 dB and the reserve
    assert noise_allowance(replace(asked, target=replace(asked.target, signal_to_noise=90.0)), 1.0, 1e-9) == 1e-9
    assert noise_allowance(spec, 1.0, 1e-9) == 2e-9


def test_half_the_signal_leaves_less_noise(spec: Spec) -> None:
    asked = replace(spec, target=replace(spec.target, signal_to_noise=20.0))
    assert noise_allowance(asked, 0.5, 1e-12) < noise_allowance(asked, 1.0, 1e-12)


# ------------------------------------------------------------------------------------------------ gain amplifiers


def test_gain_candidates_keep_their_spread_in_the_accuracy(spec: Spec, catalog: tuple[OpAmp, ...]) -> None:
    for accuracy in (0.003, 0.03):
        asked = replace(spec, target=replace(spec.target, accuracy=accuracy))
        for fit in gain_candidates(asked, catalog, 25.0):
            a = fit.op_amp
            assert a.minimum_noise_gain <= fit.largest_gain <= GAIN_CEILING
            moved = non_inverting.spread(fit.largest_gain, 60e3, a.gain_bandwidth, a.dc_gain, a.gain_bandwidth_spread)
            assert moved <= 0.2 * accuracy * (1 + 1e-9)


def test_a_tighter_accuracy_allows_less_gain(spec: Spec, catalog: tuple[OpAmp, ...]) -> None:
    def most(accuracy: float) -> dict[str, float]:
        asked = replace(spec, target=replace(spec.target, accuracy=accuracy))
        return {fit.op_amp.type: fit.largest_gain for fit in gain_candidates(asked, catalog, 25.0)}

    loose, tight = most(0.05), most(0.005)
    assert set(tight) <= set(loose)
    assert all(tight[name] <= loose[name] for name in tight)


def test_the_quiet_come_first_and_of_equals_the_frugal(spec: Spec, catalog: tuple[OpAmp, ...]) -> None:
    for source in (25.0, 3e3):
        found = gain_candidates(spec, catalog, source)
        best = min(fit.noise for fit in found)
        steps = [math.floor(math.log(fit.noise / best) / math.log(NOISE_SLACK) + 1e-9) for fit in found]
        assert steps == sorted(steps)
        for k in range(len(found) - 1):
            if steps[k] == steps[k + 1]:
                assert found[k].op_amp.supply_current <= found[k + 1].op_amp.supply_current


def test_the_order_of_the_catalog_does_not_matter(spec: Spec, catalog: tuple[OpAmp, ...]) -> None:
    assert gain_candidates(spec, catalog, 25.0) == gain_candidates(spec, catalog[::-1], 25.0)
    topologies = allowed_topologies(spec)
    assert section_circuits(spec, catalog, 10.0, topologies) == section_circuits(
        spec, catalog[::-1], 10.0, topologies[::-1]
    )


def test_a_source_of_high_resistance_prefers_little_current_noise(spec: Spec) -> None:
    bipolar = op_amp(type="B", voltage_noise=1e-9, current_noise=3e-12, bias_current=1e-9, gain_bandwidth=1e9)
    fet = op_amp(type="F", voltage_noise=5e-9, current_noise=1e-15, bias_current=1e-12, gain_bandwidth=1e9)
    assert gain_candidates(spec, (bipolar, fet), 25.0)[0].op_amp is bipolar
    assert gain_candidates(spec, (bipolar, fet), 4e3)[0].op_amp is fet


def test_input_noise_adds_what_current_makes_of_the_source() -> None:
    model = op_amp(
        voltage_noise=3e-9,
        voltage_noise_corner=1e3,
        current_noise=1e-12,
        current_noise_corner=2e3,
        current_noise_slope=1e-17,
    )
    expected = 9e-18 * 1.1 + (1e-24 * 1.2 + (1e-17 * 1e4) ** 2) * 1e6
    assert input_noise(model, 1e4, 1e3) == pytest.approx(math.sqrt(expected), rel=1e-12)


# ------------------------------------------------------------------------------------------------ section amplifiers


def test_section_amplifiers_are_stable_at_unity_gain(spec: Spec, catalog: tuple[OpAmp, ...]) -> None:
    assert {a.type for a in catalog if a.minimum_noise_gain > 1}  # there are such
    for q in (2.0, 10.0, 20.0):
        found = section_circuits(spec, catalog, q, allowed_topologies(spec))
        assert found
        assert suits_sections(found[0].op_amp)
        assert section_margin(found[0].op_amp, found[0].topology) >= SECTION_MARGIN
        for one in found:
            assert one.op_amp in catalog
            assert one.op_amp.minimum_noise_gain <= 1
            assert q <= one.topology.largest_q
            shift, stretch = one.topology.shift(q, 60e3 / one.op_amp.gain_bandwidth)
            assert max(abs(shift), abs(stretch)) <= LARGEST_SHIFT
            assert abs(one.topology.loss(q, one.op_amp.dc_gain)) <= LARGEST_LOSS


def test_a_decompensated_type_suits_no_section() -> None:
    assert suits_sections(op_amp())
    assert not suits_sections(op_amp(minimum_noise_gain=5.0))
    assert not suits_sections(op_amp(gain_bandwidth=80e6, second_pole=40e6))


def test_the_faster_of_two_wins_where_it_matters(spec: Spec) -> None:
    fast, slow = op_amp(type="FAST", gain_bandwidth=300e6), op_amp(type="SLOW", gain_bandwidth=20e6, **FRUGAL)
    assert choose_section_circuits(spec, (slow, fast), 20.0)[0].op_amp is fast


def test_the_frugal_of_two_wins_where_speed_does_not_matter() -> None:
    low = spec_of(changed(('"60 kHz"', '"1 kHz"'), ('"3 kHz"', '"500 Hz"')))
    fast, slow = op_amp(type="FAST", gain_bandwidth=300e6), op_amp(type="SLOW", gain_bandwidth=20e6, **FRUGAL)
    assert choose_section_circuits(low, (fast, slow), 2.0)[0].op_amp is slow


def test_no_section_without_an_amplifier_stable_at_unity_gain(spec: Spec) -> None:
    with pytest.raises(InfeasibleError, match=r"parts\.op_amps: a bandpass section needs .* stable at unity gain"):
        choose_section_circuits(spec, (op_amp(minimum_noise_gain=5.0),), 10.0)


def test_a_q_too_much_for_the_amplifiers_names_a_bandwidth_that_is_not(spec: Spec) -> None:
    slow = (op_amp(gain_bandwidth=3e6),)
    one = replace(spec, filter=replace(spec.filter, topology="multiple-feedback"))
    with pytest.raises(InfeasibleError, match=r"section of Q 20 at 60 kHz.*widen target\.bandwidth to") as caught:
        choose_section_circuits(one, slow, 20.0)
    reachable = float(str(caught.value).split("; Q ")[1].split()[0])
    assert choose_section_circuits(one, slow, 0.99 * reachable)[0].op_amp is slow[0]


def test_a_centre_too_high_for_a_section_of_any_q(spec: Spec) -> None:
    with pytest.raises(InfeasibleError, match=r"target\.center_frequency of 60 kHz is too high.*lower it"):
        choose_section_circuits(spec, (op_amp(gain_bandwidth=200e3),), 20.0)


@pytest.mark.parametrize("name", SECTIONS)
def test_a_topology_insisted_on_is_the_only_one_allowed(name: str, spec: Spec) -> None:
    asked = replace(spec, filter=replace(spec.filter, topology=name))
    assert [t.name for t in allowed_topologies(asked)] == [name]
    assert largest_q(asked) == SECTIONS[name].largest_q
    assert largest_q(spec) >= largest_q(asked)
