"""What is refused before a chain is built, and that no refusal is of something that can be built."""

from __future__ import annotations

import math
import random
import re
from dataclasses import replace

import numpy as np
import pytest

from synth import api
from synth.errors import InfeasibleError
from synth.model.part import OpAmp
from synth.parts.op_amps import load_op_amps
from synth.planning.amplifiers import suits_sections
from synth.planning.bounds import check_source_noise, check_supported, sensor_gain, usable_op_amps
from synth.planning.safe import at_least, at_most
from synth.quantity import parse
from synth.spec import Spec, Supply
from tests.api.made import changed, design_of, spec_of
from tests.support.networks import K, op_amp
from tests.support.specs import random_spec


def catalog() -> tuple[OpAmp, ...]:
    return tuple(entry.op_amp for entry in load_op_amps().values())


def supplied(positive: float, negative: float | None, output: float = 0.1) -> Spec:
    plain = spec_of(changed())
    return replace(plain, supply=Supply(positive, negative), target=replace(plain.target, output=output))


# ------------------------------------------------------------------------------------------------ rounding


def test_a_bound_is_rounded_to_its_safe_side() -> None:
    rng = random.Random(4)
    for _ in range(500):
        bound = rng.choice((1, -1)) * 10 ** rng.uniform(-12, 12)
        for digits in (3, 4):
            low, high = at_most(bound, digits), at_least(bound, digits)
            assert low <= bound <= high
            assert high - low <= 1.01 * abs(bound) * 10.0 ** (1 - digits)
            assert float(f"{low:.{digits}g}") == low
    assert at_most(0.0) == at_least(0.0) == 0.0


# ------------------------------------------------------------------------------------------------ amplifiers


def test_usable_amplifiers_keep_every_bound() -> None:
    rng = random.Random(11)
    found_some = 0
    for _ in range(60):
        half, output = rng.choice((2.5, 5.0, 12.0, 15.0)), 10 ** rng.uniform(-1.5, 0.8)
        spec = supplied(half, -half, output)
        spec = replace(spec, target=replace(spec.target, center_frequency=10 ** rng.uniform(4, 6.3)))
        peak = math.sqrt(2) * output
        good = {
            a.type
            for a in catalog()
            if a.supply_minimum <= 2 * half <= a.supply_maximum
            and half - max(a.swing_headroom_high, a.swing_headroom_low) >= peak
            and a.slew_rate >= 2 * math.pi * spec.target.center_frequency * peak
        }
        try:
            assert {a.type for a in usable_op_amps(spec, catalog())} == good
            found_some += 1
        except InfeasibleError:
            assert not any(suits_sections(a) for a in catalog() if a.type in good)
    assert found_some > 30


def test_the_order_of_the_catalog_is_kept() -> None:
    found = usable_op_amps(supplied(5.0, -5.0), catalog())
    assert [a for a in catalog() if a in found] == list(found)


def test_a_supply_that_suits_none() -> None:
    types = (op_amp(type="A", supply_minimum=4.5, supply_maximum=36.0), op_amp(type="B", supply_maximum=12.0))
    with pytest.raises(InfeasibleError, match=r"given.toml: supply of 2 V in.*nearest that works is 4\.5 V \(A\)"):
        usable_op_amps(supplied(1.0, -1.0), types)
    with pytest.raises(InfeasibleError, match=r"supply of 80 V in total.*nearest that works is 36 V \(A\)"):
        usable_op_amps(supplied(40.0, -40.0), types)
    with pytest.raises(InfeasibleError, match=r"supply of 1 V in total.*nearest that works is 4\.5 V"):
        usable_op_amps(supplied(1.0, None), types)


def test_a_supply_that_suits_none_is_told_one_on_which_the_output_swings_as_well() -> None:
    types = (op_amp(swing_headroom_high=1.0, swing_headroom_low=0.5),)
    with pytest.raises(InfeasibleError, match=r"nearest that works is 7\.657 V"):  # 2 (2 sqrt 2 + 1) = 7.6569
        usable_op_amps(supplied(1.0, -1.0, output=2.0), types)
    with pytest.raises(InfeasibleError, match=r"nearest that works is that of a smaller target\.output"):
        usable_op_amps(supplied(1.0, -1.0, output=20.0), types)


def test_a_supply_for_which_there_are_only_amplifiers_that_no_section_can_use() -> None:
    types = (op_amp(type="A", minimum_noise_gain=5.0, supply_minimum=2.0), op_amp(type="B", supply_minimum=4.5))
    with pytest.raises(InfeasibleError, match=r"supply of 3 V in total.*4\.5 V \(B\)"):
        usable_op_amps(supplied(1.5, -1.5, output=1e-3), types)


def test_an_output_beyond_the_swing() -> None:
    types = (op_amp(type="A"), op_amp(type="B", swing_headroom_high=0.5, swing_headroom_low=0.1))
    pattern = r"target\.output of 4 V rms needs a swing of 5\.657 V peak.*largest output.*3\.181 V rms \(B\)"
    with pytest.raises(InfeasibleError, match=pattern):  # 4.5/sqrt 2 = 3.18198
        usable_op_amps(supplied(5.0, -5.0, output=4.0), types)
    assert [a.type for a in usable_op_amps(supplied(5.0, -5.0, output=3.181), types)] == ["B"]


def test_an_output_that_slews_too_fast() -> None:
    types = (op_amp(type="A", slew_rate=1e5), op_amp(type="B", slew_rate=2e5))
    with pytest.raises(InfeasibleError, match=r"slews 5\.331e\+05 V/s; the largest output that works is 375\.1 mV rms"):
        usable_op_amps(supplied(5.0, -5.0, output=1.0), types)  # 2e5/(2 pi 60e3 sqrt 2) = 0.37513
    assert [a.type for a in usable_op_amps(supplied(5.0, -5.0, output=0.3751), types)] == ["B"]


# ------------------------------------------------------------------------------------------------ source noise


def test_the_source_s_noise_is_that_of_its_resistance() -> None:
    """Half of 4 k T R over the narrowest band allowed is the least that any chain lets through."""
    spec = spec_of(changed())
    band = 3e3 * 0.9
    noise = math.sqrt(4 * K * 300.15 * 25.0 * band / 2)
    best = 20 * math.log10(20.0 * 100e-9 / noise)
    assert best == pytest.approx(38.5, abs=0.1)
    check_source_noise(asking(spec, best - 0.01))
    with pytest.raises(InfeasibleError, match=rf"at most {at_most(best, 3):g} dB with a noiseless chain"):
        check_source_noise(asking(spec, best + 0.01))


def test_the_smallest_reading_that_would_do_does(caplog: pytest.LogCaptureFixture) -> None:
    assert not caplog.records
    for asked in (40.0, 60.0, 93.7):
        spec = asking(spec_of(changed()), asked)
        with pytest.raises(InfeasibleError, match=r"raise target\.smallest to") as caught:
            check_source_noise(spec)
        found = re.search(r"target\.smallest to ([\d.]+ \w+)", str(caught.value))
        assert found
        check_source_noise(replace(spec, target=replace(spec.target, smallest=parse(found[1], "A"), full_scale=1.0)))


def asking(spec: Spec, ratio: float) -> Spec:
    return replace(spec, target=replace(spec.target, signal_to_noise=ratio))


def test_nothing_asked_nothing_refused() -> None:
    check_source_noise(spec_of(changed(('resistance = "25 ohm"', 'noise = "1 V"'))))


def test_a_source_without_noise_bounds_nothing() -> None:
    silent = spec_of(changed(('resistance = "25 ohm"\n', "")))
    check_source_noise(asking(silent, 300.0))


QUIET_CHAINS = {
    "resistance": changed(('"25 ohm"', '"4 kohm"'), ('"1 V"', '"0.5 V"')),
    "given noise": changed(('resistance = "25 ohm"', 'resistance = "25 ohm"\nnoise = "50 nV"')),
    "sharp": changed(('"25 ohm"', '"2 kohm"'), end='[filter]\nfamily = "butterworth"\nsections = 2\n').replace(
        '"3 kHz"', '"9 kHz"'
    ),
    "wide": changed(('"25 ohm"', '"2 kohm"'), ('"3 kHz"', '"40 kHz"')),
    "rolled off": changed(('"25 ohm"', '"1 kohm"'), sensor='rolloff = [{ kind = "high-pass", corner = "90 kHz" }]'),
}


@pytest.mark.parametrize("name", QUIET_CHAINS)
def test_no_ratio_that_a_chain_reaches_is_refused(name: str) -> None:
    made = design_of(QUIET_CHAINS[name])
    reached = made.verification.noise.smallest_reading_snr_db
    check_source_noise(asking(made.spec, reached))
    with pytest.raises(InfeasibleError, match="noiseless"):
        check_source_noise(asking(made.spec, reached + 20.0))


# ------------------------------------------------------------------------------------------------ sensor, support


def test_the_sensor_s_gain_at_the_centre() -> None:
    assert sensor_gain(spec_of(changed())) == pytest.approx(1.0, rel=1e-9)
    high = spec_of(changed(sensor='rolloff = [{ kind = "high-pass", corner = "60 kHz" }]'))
    assert sensor_gain(high) == pytest.approx(math.sqrt(0.5), rel=1e-9)
    loss = spec_of(changed(sensor='rolloff = [{ kind = "loss", at = "60 kHz", loss = "20 %", shape = "low-pass" }]'))
    assert sensor_gain(loss) == pytest.approx(0.8, rel=1e-9)


def test_make_up_is_the_reciprocal_of_the_loss() -> None:
    """20 % down needs 1.25, not 1.20."""
    text = changed(sensor='rolloff = [{ kind = "loss", at = "60 kHz", loss = "20 %", shape = "low-pass" }]')
    made = design_of(text)
    product = float(np.prod([s.target.pre_emphasis for s in made.chain.stages]))
    assert product == pytest.approx(1.25, rel=1e-6)
    assert abs(made.response([60e3])[0]) == pytest.approx(made.spec.overall_gain, rel=2e-3)


def test_what_is_supported_is_let_through() -> None:
    check_supported(spec_of(changed()))
    for seed in range(4):
        check_supported(api.parse_spec(random_spec(seed)))
