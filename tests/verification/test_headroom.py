"""Largest voltages inside a chain, against what a square wave and a stage of known gain must give."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from synth import circuit
from synth.model.chain import Chain
from synth.spec import Interference, Spec, Supply
from synth.verification import rails
from synth.verification.headroom import RAMP, Excursion, dc_voltages, excursions, tones
from tests.api.made import changed, spec_of
from tests.support.networks import amplifier, capacitor, chain_of, op_amp, resistor

F0 = 60e3


def square(level: float = 1.0, frequency: float = 1e3, rise_time: float | None = None) -> Interference:
    return Interference("square", frequency, level, rise_time=rise_time)


# ------------------------------------------------------------------------------------------------ tones


def test_a_tone_is_its_peak() -> None:
    f, peak = tones(Interference("tone", 5e3, 2.0), 1e6)
    np.testing.assert_array_equal(f, [5e3])
    np.testing.assert_allclose(peak, [2 * math.sqrt(2)])


def test_a_tone_beyond_the_highest_frequency_still_counts() -> None:
    f, _ = tones(Interference("tone", 5e6, 2.0), 1e6)
    np.testing.assert_array_equal(f, [5e6])


def test_a_square_wave_has_odd_harmonics_up_to_the_highest_frequency() -> None:
    f, peak = tones(square(frequency=1e3), 100e3)
    np.testing.assert_allclose(f, 1e3 * np.arange(1, 100, 2))
    np.testing.assert_allclose(peak, 4 / np.pi / np.arange(1, 100, 2))


def test_all_harmonics_together_have_the_level() -> None:
    """Parseval: what is left out above n harmonics is about 4/(pi^2 n) of the power."""
    for level in (0.3, 1.0):
        f, peak = tones(square(level), 1e3 * 199)
        assert np.array_equal(f, 1e3 * np.arange(1.0, 199.0, 2.0))
        assert math.sqrt((peak**2 / 2).sum()) == pytest.approx(level * math.sqrt(1 - 4 / np.pi**2 / 199), rel=1e-5)


def test_high_harmonics_stand_in_bands_with_all_their_amplitude() -> None:
    """Amplitudes 4/(n pi) of all odd n, summed one by one, against the bands; far fewer frequencies."""
    f, peak = tones(square(), 1e3 * 200_001)
    n = np.arange(1.0, 200_001.0, 2.0)
    assert peak.sum() == pytest.approx((4 / (n * np.pi)).sum(), rel=2e-3)
    assert f.size < 300
    assert np.all(np.diff(f) > 0)


def test_a_fundamental_above_the_highest_frequency_still_counts() -> None:
    f, peak = tones(square(frequency=9e6), 6e6)
    assert f[0] == 9e6
    assert peak[0] == pytest.approx(4 / np.pi)


@pytest.mark.parametrize("share", [0.01, 0.1, 0.4])
def test_a_finite_rise_time_is_that_of_a_trapezoid(share: float) -> None:
    """Harmonics of a trapezoid sampled in time: the 10-90 % time is 0.8 of the whole edge."""
    rise, points = share / 1e3, 1 << 15
    edge = rise / RAMP * 1e3  # of a period
    t = np.arange(points) / points
    distance = (t + 0.25) % 1 - 0.5  # an edge upwards at 1/4 of the period from the start, one downwards half later
    wave = np.clip((0.25 - np.abs(distance)) / (edge / 2), -1, 1)
    levels = np.abs(np.fft.rfft(wave)) / points * 2
    f, peak = tones(square(rise_time=rise), 40e3)
    np.testing.assert_allclose(peak, levels[np.round(f / 1e3).astype(int)], atol=2e-6)
    between_10_and_90 = (np.abs(wave) < 0.8).mean() / 2  # both edges of a period
    assert between_10_and_90 == pytest.approx(share, abs=2 / points * 2)


def test_a_slow_edge_takes_from_the_high_harmonics_only() -> None:
    _, sharp = tones(square(), 100e3)
    _, blunt = tones(square(rise_time=20e-6), 100e3)
    assert blunt[0] == pytest.approx(sharp[0], rel=2e-3)
    assert blunt[-1] < 0.3 * sharp[-1]


def test_coupled_by_a_voltage_it_is_in_volts() -> None:
    _, peak = tones(Interference("tone", 5e3, voltage=3.3, through=1e-13), 1e6)
    np.testing.assert_allclose(peak, [3.3 * math.sqrt(2)])


# ------------------------------------------------------------------------------------------------ rails


@pytest.mark.parametrize(
    ("supply", "expected"),
    [(Supply(5.0, -5.0), (5.0, 5.0)), (Supply(12.0, -3.0), (12.0, 3.0)), (Supply(5.0), (2.5, 2.5))],
)
def test_rails(supply: Supply, expected: tuple[float, float]) -> None:
    assert rails(replace(spec_of(changed()), supply=supply)) == expected


# ------------------------------------------------------------------------------------------------ a stage of gain 11

QUIET = {"offset_voltage_max": 0.0, "bias_current": 0.0}
FAST = op_amp(gain_bandwidth=1e12, dc_gain=1e9, **QUIET)


def stage(model: object = FAST) -> Chain:
    """1 kohm and 10 kohm: a gain of 11 from an input of 1 V per unit."""
    parts = (
        resistor("R1", "m", "0", 1e3),
        resistor("R2", "m", "out", 10e3),
        amplifier("U1", "sig", "m", "out", model),  # type: ignore[arg-type]
    )
    return chain_of(parts, [model], center=F0)  # type: ignore[list-item]


def asked(*interference: Interference, supply: Supply | None = None) -> Spec:
    plain = spec_of(changed(('"20 mV/mA"', '"1 V/V"'), ('"2 uA"', '"0.1 V"'), ('"100 nA"', '"10 mV"')))
    return replace(plain, interference=interference, supply=supply or plain.supply)


def judged(chain: Chain, spec: Spec) -> Excursion:
    (found,) = excursions(chain, circuit.build_network(chain), spec)
    return found


def test_full_scale_alone() -> None:
    found = judged(stage(), asked())
    assert found.ref == "U1"
    assert found.level == pytest.approx(1.1, rel=1e-4)
    assert found.peak == pytest.approx(1.1 * math.sqrt(2), rel=1e-4)
    assert found.input_peak == pytest.approx(0.1 * math.sqrt(2), rel=1e-4)
    assert found.slew == pytest.approx(2 * math.pi * F0 * 1.1 * math.sqrt(2), rel=1e-4)
    assert found.slew_allowed == FAST.slew_rate
    assert found.dc == pytest.approx(0.0, abs=1e-9)


def test_allowed_is_the_nearer_rail_less_the_headroom() -> None:
    model = op_amp(
        gain_bandwidth=1e12,
        dc_gain=1e9,
        swing_headroom_high=1.0,
        swing_headroom_low=2.0,
        common_mode_headroom_high=3.0,
        common_mode_headroom_low=0.5,
    )
    found = judged(stage(model), asked(supply=Supply(6.0, -5.0)))
    assert (found.allowed, found.input_allowed) == (3.0, 3.0)
    single = judged(stage(model), asked(supply=Supply(12.0)))
    assert (single.allowed, single.input_allowed) == (4.0, 3.0)


def test_interference_adds_in_the_worst_phase() -> None:
    found = judged(stage(), asked(Interference("tone", 10e3, 0.05), Interference("tone", 200e3, 0.02)))
    assert found.peak == pytest.approx(11 * math.sqrt(2) * (0.1 + 0.05 + 0.02), rel=1e-4)
    rate = 11 * math.sqrt(2) * 2 * math.pi * (F0 * 0.1 + 10e3 * 0.05 + 200e3 * 0.02)
    assert found.slew == pytest.approx(rate, rel=1e-4)
    assert found.level == pytest.approx(1.1, rel=1e-4)  # of the signal alone


def test_a_square_wave_adds_the_sum_of_its_harmonics() -> None:
    wave = square(0.01, 20e3)
    found = judged(stage(), asked(wave))
    _, peaks = tones(wave, 100 * F0)
    assert found.peak == pytest.approx(11 * (0.1 * math.sqrt(2) + peaks.sum()), rel=1e-3)


def test_a_coupled_voltage_acts_through_its_capacitance_and_the_source() -> None:
    """3.3 V through 1 pF into a 1 kohm source: the current is w C V, the voltage w C V R."""
    chain = stage()
    chain = replace(chain, sensor=replace(chain.sensor, resistance=1e3))
    found = judged(chain, asked(Interference("tone", 50e3, voltage=3.3, through=1e-12)))
    added = 2 * math.pi * 50e3 * 1e-12 * 3.3 * 1e3 * math.sqrt(2)
    assert found.input_peak == pytest.approx(0.1 * math.sqrt(2) + added, rel=1e-4)


def test_an_offset_and_bias_currents_shift_the_output() -> None:
    model = op_amp(gain_bandwidth=1e12, dc_gain=1e9, offset_voltage_max=2e-3, bias_current=1e-6)
    chain = stage(model)
    chain = replace(chain, sensor=replace(chain.sensor, resistance=500.0))
    expected = 11 * 2e-3 + 1e-6 * 10e3 + 11 * 1e-6 * 500.0  # offset, inverting input, non-inverting input
    found = judged(chain, asked())
    assert found.dc == pytest.approx(expected, rel=1e-4)
    assert found.peak == pytest.approx(1.1 * math.sqrt(2) + expected, rel=1e-4)


def test_a_coupling_capacitor_stops_the_dc_of_the_stage_before() -> None:
    model = op_amp(gain_bandwidth=1e12, dc_gain=1e9, offset_voltage_max=1e-3, bias_current=0.0)
    parts = (
        resistor("R1", "m", "0", 1e3),
        resistor("R2", "m", "n", 99e3),
        amplifier("U1", "sig", "m", "n", model),
        capacitor("C1", "n", "p", 2.7e-9),  # a corner of a hundredth of the centre, as the stages have
        resistor("R3", "p", "0", 100e3),
        amplifier("U2", "p", "out", "out", model),
    )
    chain = chain_of(parts, [model], center=F0)
    first, second = excursions(chain, circuit.build_network(chain), asked())
    assert first.dc == pytest.approx(0.1, rel=1e-3)
    assert second.dc == pytest.approx(1e-3, rel=0.02)  # its own, and next to nothing through the capacitor
    assert dc_voltages(chain, circuit.build_network(chain)).min() >= 0


def test_an_amplifier_with_its_input_on_ground_has_no_input_peak() -> None:
    parts = (
        resistor("R1", "sig", "m", 1e3),
        resistor("R2", "m", "out", 10e3),
        amplifier("U1", "0", "m", "out", FAST),
    )
    found = judged(chain_of(parts, [FAST], center=F0), asked())
    assert found.input_peak == 0.0
    assert found.level == pytest.approx(1.0, rel=1e-4)
