"""A design from Python: its figures agree with each other, by whatever way they are asked."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.signal import freqs_zpk

from synth import api, circuit
from tests.api.made import changed, design_of, pickup, spec_of

HIGH_ORDER = changed(('"3 kHz"', '"12 kHz"'), end='[filter]\nfamily = "butterworth"\nsections = 4\n')
DESIGNS = {"pickup": pickup, "four sections": lambda: design_of(HIGH_ORDER), "plain": lambda: design_of(changed())}


@pytest.fixture(params=DESIGNS)
def made(request: pytest.FixtureRequest) -> api.Design:
    return DESIGNS[request.param]()


def sweep(made: api.Design, decades: float, points: int = 801) -> np.ndarray:
    """Frequencies about the centre at which the chain passes more than -80 dB of its peak."""
    f = made.chain.center_frequency * np.geomspace(10.0**-decades, 10.0**decades, points)
    size = np.abs(made.response(f))
    return f[size > size.max() * 1e-4]


def test_control_answers_as_the_circuit_near_the_centre(made: api.Design) -> None:
    f = sweep(made, 0.5)
    system = made.to_control()
    np.testing.assert_allclose(system(2j * np.pi * f), made.response(f), rtol=1e-6)


def test_poles_and_zeros_answer_as_the_circuit_near_the_centre(made: api.Design) -> None:
    f = sweep(made, 0.5)
    zeros, poles, gain = made.to_zpk()
    np.testing.assert_allclose(freqs_zpk(zeros, poles, gain, 2 * np.pi * f)[1], made.response(f), rtol=1e-6)


def test_poles_and_zeros_answer_as_the_circuit_over_two_decades_either_side(made: api.Design) -> None:
    f = sweep(made, 2.0)
    zeros, poles, gain = made.to_zpk()
    np.testing.assert_allclose(freqs_zpk(zeros, poles, gain, 2 * np.pi * f)[1], made.response(f), rtol=2e-5)


def test_poles_are_those_of_the_transfer_function_and_of_the_record(made: api.Design) -> None:
    poles = made.poles()
    np.testing.assert_array_equal(poles, made.to_zpk()[1])
    np.testing.assert_allclose(np.array(made.verification.realized.poles), poles, rtol=1e-12)
    assert np.all(poles.real < 0)
    np.testing.assert_allclose(np.sort_complex(poles.conj()), np.sort_complex(poles), rtol=1e-9)


def test_no_more_zeros_than_poles_and_one_at_nothing_for_every_coupling(made: api.Design) -> None:
    zeros, poles, _ = made.to_zpk()
    assert zeros.size <= poles.size
    gains = sum(stage.kind == "gain" for stage in made.chain.stages)
    assert np.sum(np.abs(zeros) < 1e-3 * 2 * np.pi * made.chain.center_frequency) >= gains


def test_group_delay_is_the_slope_of_the_phase(made: api.Design) -> None:
    f0 = made.chain.center_frequency
    f = f0 * np.array([0.8, 0.97, 0.99, 1.0, 1.01, 1.03, 1.25])
    step = 1e-5
    turn = np.angle(made.response(f * (1 + step)) / made.response(f * (1 - step)))
    np.testing.assert_allclose(made.group_delay(f), -turn / (2 * np.pi * 2 * step * f), rtol=1e-5)


def test_group_delay_is_the_sum_over_poles_and_zeros(made: api.Design) -> None:
    f = made.chain.center_frequency * np.array([0.97, 1.0, 1.02])
    zeros, poles, _ = made.to_zpk()

    def delay(roots: np.ndarray) -> np.ndarray:
        w = 2 * np.pi * f[:, None]
        return np.sum(-roots.real / (roots.real**2 + (w - roots.imag) ** 2), axis=1)

    np.testing.assert_allclose(delay(poles) - delay(zeros), made.group_delay(f), rtol=1e-5)


def test_noise_is_the_root_of_the_sum_of_its_contributors_squared(made: api.Design) -> None:
    f = made.chain.center_frequency * np.array([0.5, 1.0, 2.0])
    spectrum = made.noise(f)
    np.testing.assert_allclose(np.sqrt((spectrum.contributions**2).sum(axis=0)), spectrum.density, rtol=1e-12)
    assert len(set(spectrum.labels)) == len(spectrum.labels) == spectrum.contributions.shape[0]
    parts = {part.ref for part in made.chain.parts if part.kind == "resistor"}
    assert parts <= set(spectrum.labels)


def test_noise_is_no_less_than_that_of_the_source_through_the_chain(made: api.Design) -> None:
    f0 = made.chain.center_frequency
    spectrum = made.noise([f0])
    sensor = float(spectrum.contributions[spectrum.labels.index("sensor"), 0])
    assert 0 < sensor < spectrum.density[0]


def test_the_record_holds_what_the_verbs_compute(made: api.Design) -> None:
    table, noise = made.verification.response, made.verification.noise
    some = slice(None, None, 29)
    np.testing.assert_allclose(made.response(table.frequency[some]), table.gain[some], rtol=1e-12)
    np.testing.assert_allclose(made.group_delay(table.frequency[some]), table.group_delay[some], rtol=1e-9)
    np.testing.assert_allclose(made.noise(noise.frequency[some]).density, noise.density[some], rtol=1e-12)


def test_the_realized_edges_are_3_db_below_the_centre(made: api.Design) -> None:
    found = made.verification.realized
    h = np.abs(made.response([found.low_edge, made.spec.target.center_frequency, found.high_edge]))
    np.testing.assert_allclose(h / h[1], [np.sqrt(0.5), 1, np.sqrt(0.5)], rtol=1e-6)
    assert found.high_edge - found.low_edge == pytest.approx(found.bandwidth, rel=1e-12)
    assert found.gain_db == pytest.approx(20 * np.log10(h[1]), abs=1e-9)
    assert found.voltage_gain_db == pytest.approx(found.gain_db - 20 * np.log10(made.spec.sensor.scale), abs=1e-9)


def test_stage_gains_multiply_to_the_chain_s(made: api.Design) -> None:
    product = np.prod([r.gain for r in made.verification.stages if r.gain])
    loading = made.verification.sensor_model.gain_at_center * made.spec.sensor.scale
    h = abs(made.response([made.chain.center_frequency])[0])
    assert abs(product) * loading == pytest.approx(h, rel=2e-2)  # the first stage loads the sensor a little


def test_a_sign_is_that_of_the_sections(made: api.Design) -> None:
    for stage, result in zip(made.chain.stages, made.verification.stages, strict=True):
        assert stage.name == result.name
        if stage.kind == "gain":
            assert result.gain > 0


def test_scalars_lists_and_arrays_give_the_same() -> None:
    made = pickup()
    one = made.response(1e5)
    assert one.shape == (1,)
    np.testing.assert_array_equal(one, made.response([1e5]))
    np.testing.assert_array_equal(one, made.response(np.array([1e5])))


def test_noise_at_zero_frequency_is_refused() -> None:
    with pytest.raises(ValueError, match="above 0 Hz"):
        pickup().noise([0.0, 1e5])


def test_a_design_cannot_be_changed() -> None:
    with pytest.raises(AttributeError):
        pickup().edited = True  # type: ignore[misc]


def test_the_nominal_chain_does_not_depend_on_the_seed() -> None:
    spec = spec_of(changed())
    assert api.design(spec, builds=0, seed=7).chain == api.design(spec, builds=0, seed=8).chain
    assert api.design(spec, builds=0, seed=7).record.seed == 7


def test_check_of_a_design_changes_nothing() -> None:
    made = pickup()
    again = api.check(made)
    assert again.chain is made.chain
    assert [(r.name, r.nominal, r.met) for r in again.requirements] == [
        (r.name, r.nominal, r.met) for r in made.requirements
    ]
    assert again.verification.cautions == made.verification.cautions


def test_the_network_is_that_of_the_chain() -> None:
    made = pickup()
    assert made.network() == circuit.build_network(made.chain)
