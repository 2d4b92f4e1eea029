"""The rational fit against functions that are known."""

from __future__ import annotations

import math

import numpy as np
import pytest

from synth.circuit.rational import RationalFit, fit_table
from synth.circuit.sensor_figures import sensor_response
from synth.circuit.sensor_rolloff import sections
from synth.errors import CircuitError
from synth.spec import Rolloff, Sensor

F = np.geomspace(1e3, 3e5, 160)
COUNT = 20  # random functions of each kind


def random_function(seed: int) -> RationalFit:
    """Three to six poles and no more zeros, real or in pairs down to a damping of 0.06, one at mid-table."""
    rng = np.random.default_rng(seed)
    count = int(rng.integers(3, 7))

    def roots(wanted: int) -> tuple[complex, ...]:
        found: list[complex] = []
        while len(found) < wanted:
            w = 2 * np.pi * 10 ** rng.uniform(3.2, 5.3)
            if wanted - len(found) >= 2 and rng.random() < 0.5:
                zeta = 10 ** rng.uniform(-1.2, -0.05)
                pole = w * complex(-zeta, math.sqrt(1 - zeta**2))
                found += [pole, pole.conjugate()]
            else:
                found.append(complex(-w))
        return tuple(found)

    poles, zeros = roots(count), roots(int(rng.integers(0, count + 1)))
    size = abs(RationalFit(poles, zeros, 1.0, 0.0).response(F)[F.size // 2])
    return RationalFit(poles, zeros, 1 / size, 0.0)


def rows(f: np.ndarray, gain: np.ndarray, degrees: np.ndarray | None = None) -> tuple[tuple[float, ...], ...]:
    """A table as the spec holds it."""
    columns = [f.tolist(), gain.tolist()] + ([degrees.tolist()] if degrees is not None else [])
    return tuple(zip(*columns, strict=True))


@pytest.mark.parametrize("seed", range(COUNT))
def test_a_rational_table_is_recovered(seed: int) -> None:
    """From the magnitude alone: the phase of a minimum-phase function follows from it."""
    truth = random_function(seed)
    want = truth.response(F)
    fit = fit_table(rows(F, np.abs(want)))
    np.testing.assert_allclose(fit.response(F), want, rtol=1e-6)
    assert fit.residual < 1e-6
    assert len(fit.poles) <= len(truth.poles)
    assert max(p.real for p in fit.poles) < 0
    assert max((z.real for z in fit.zeros), default=0.0) <= 0


@pytest.mark.parametrize("noise", [1e-3, 1e-2])
@pytest.mark.parametrize("seed", range(6))
def test_a_noisy_table_is_followed_to_its_noise(seed: int, noise: float) -> None:
    """The fit lies closer to the truth than the rows do: the noise is not fitted."""
    truth = np.abs(random_function(seed).response(F))
    measured = truth * (1 + noise * np.random.default_rng(seed + 1000).standard_normal(F.size))
    fit = fit_table(rows(F, measured))
    error = np.abs(fit.response(F)) / truth - 1
    assert float(np.sqrt(np.mean(error**2))) < 0.6 * noise
    assert 1.5 * noise < fit.residual < 6 * noise  # the largest of 160 normal deviates
    assert len(fit.poles) <= 7


@pytest.mark.parametrize(
    ("gain", "poles", "zeros"),
    [
        (lambda f: 1 / np.sqrt(1 + (f / 2e4) ** 2), [-2e4], []),
        (lambda f: 1 / np.sqrt(1 + (2e4 / f) ** 2), [-2e4], [0.0]),
        (lambda f: np.full(f.shape, 0.7), [], []),
        (lambda f: np.sqrt((1 + (f / 1e4) ** 2) / (1 + (f / 5e4) ** 2)), [-5e4], [-1e4]),
    ],
)
def test_plain_flanks(gain: object, poles: list[float], zeros: list[float]) -> None:
    """Of few rows the least order is taken, its zeros at the origin or at infinity where they belong."""
    assert callable(gain)
    f = np.geomspace(2e3, 2e5, 9)
    fit = fit_table(rows(f, gain(f)))
    np.testing.assert_allclose(np.real(fit.poles) / (2 * np.pi), poles, rtol=1e-6)
    np.testing.assert_allclose(np.real(fit.zeros) / (2 * np.pi), zeros, rtol=1e-6)


def test_three_rows_make_a_corner() -> None:
    f = np.array([5e3, 2e4, 8e4])
    fit = fit_table(rows(f, 1 / np.sqrt(1 + (f / 2e4) ** 2)))
    assert len(fit.poles) == 1
    assert abs(fit.poles[0]) == pytest.approx(2 * np.pi * 2e4, rel=1e-6)


def test_a_measured_phase_says_the_sign() -> None:
    truth = random_function(3)
    want = -truth.response(F)
    fit = fit_table(rows(F, np.abs(want), np.degrees(np.angle(want))))
    assert fit.gain < 0
    np.testing.assert_allclose(fit.response(F), want, rtol=1e-6)
    assert fit.phase_residual < 1e-4


def test_a_delay_is_no_part_of_the_fit_and_is_reported() -> None:
    """1 us is 108 degrees at 300 kHz; the magnitude is fitted all the same."""
    want = random_function(3).response(F)
    degrees = np.degrees(np.angle(want)) - 360 * F * 1e-6
    fit = fit_table(rows(F, np.abs(want), degrees))
    np.testing.assert_allclose(np.abs(fit.response(F)), np.abs(want), rtol=1e-6)
    assert fit.phase_residual == pytest.approx(108.0, abs=0.1)


def test_noise_of_the_phase_is_averaged() -> None:
    truth = random_function(5)
    rng = np.random.default_rng(5)
    want = truth.response(F)
    gain = np.abs(want) * (1 + 1e-2 * rng.standard_normal(F.size))
    fit = fit_table(rows(F, gain, np.degrees(np.angle(want)) + 0.5 * rng.standard_normal(F.size)))
    assert float(np.sqrt(np.mean(np.abs(fit.response(F) / want - 1) ** 2))) < 5e-3
    assert 0.5 < fit.phase_residual < 3.0


@pytest.mark.parametrize("seed", range(COUNT))
def test_the_circuit_of_a_table_is_its_fit(seed: int) -> None:
    """Blocks of first and second order, their product exact far outside the table, too."""
    truth = random_function(seed)
    table = Rolloff("table", points=rows(F, np.abs(truth.response(F))))
    sensor = Sensor(scale=2.0, input_unit="A", resistance=10.0, rolloff=(table,))
    far = np.geomspace(10.0, 1e7, 41)
    np.testing.assert_allclose(sensor_response(sensor, far), 2 * fit_table(table.points).response(far), rtol=1e-8)
    assert len(sections(fit_table(table.points))) == math.ceil(len(truth.poles) / 2)


def test_a_constant_has_a_circuit() -> None:
    table = Rolloff("table", points=rows(F, np.full(F.shape, 0.7)))
    got = sensor_response(Sensor(scale=2.0, input_unit="A", rolloff=(table,)), [1e2, 1e6])
    np.testing.assert_allclose(got, 1.4, rtol=1e-9)


@pytest.mark.parametrize(
    ("points", "message"),
    [
        (((1.0, 1.0), (2.0, 0.9)), "a table of 2 rows has no response; give at least 3"),
        (((2.0, 1.0), (1.0, 0.9), (3.0, 0.8)), "frequencies must rise and its gains be positive"),
        (((1.0, 1.0), (2.0, 0.0), (3.0, 0.8)), "frequencies must rise and its gains be positive"),
    ],
)
def test_rows_that_are_no_response(points: tuple[tuple[float, ...], ...], message: str) -> None:
    with pytest.raises(CircuitError, match=message):
        fit_table(points)


def test_rows_that_no_function_follows() -> None:
    gain = 10.0 ** np.random.default_rng(1).uniform(-1, 1, 40)
    with pytest.raises(CircuitError, match=r"no response of up to 8 poles follows the table: .* \d+ % off"):
        fit_table(rows(np.geomspace(1e3, 1e5, 40), gain))
