"""Settling of the envelope against the exact time response of scipy.signal (a general-purpose reference library)."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import signal

from synth.circuit import Network
from synth.circuit.network import Element
from synth.errors import CircuitError
from synth.verification.settling import envelope_step, settling_time

CENTER = 1e5


def resonators(count: int, q: float) -> Network:
    """Identical resonators in a chain, each (w0/Q) s / (s^2 + (w0/Q) s + w0^2), from controlled sources."""
    g, c = 1e-3, 1e-3 / (2 * np.pi * CENTER)
    elements: list[Element] = []
    node = "in"
    for k in range(count):
        x, y = f"x{k}", f"y{k}"
        elements += [
            Element(f"a{k}", "transconductance", ("0", x, node, "0"), g / q),
            Element(f"b{k}", "conductance", (x, "0"), g / q),
            Element(f"c{k}", "capacitance", (x, "0"), c),
            Element(f"d{k}", "transconductance", (x, "0", y, "0"), g),
            Element(f"e{k}", "transconductance", ("0", y, x, "0"), g),
            Element(f"f{k}", "capacitance", (y, "0"), c),
        ]
        node = x
    return Network("in", node, tuple(elements), (), (), 300.15)


@pytest.mark.parametrize(("count", "q"), [(1, 20.0), (2, 12.8), (3, 5.0)])
def test_envelope_equals_the_exact_quadrature_response(count: int, q: float) -> None:
    w = 2 * np.pi * CENTER
    numerator, denominator = [1.0], [1.0]
    for _ in range(count):
        numerator, denominator = np.polymul(numerator, [w / q, 0]), np.polymul(denominator, [1, w / q, w**2])
    t = np.arange(0, 40 * q / w, 0.01 / CENTER)
    in_phase = signal.lsim((numerator, denominator), np.cos(w * t), t)[1]
    quadrature = signal.lsim((numerator, denominator), np.sin(w * t), t)[1]
    exact = np.hypot(in_phase, quadrature)
    time, envelope = envelope_step(resonators(count, q), CENTER, CENTER / q, 40 * q / w)
    inside = time < t[-1]
    assert envelope[inside] == pytest.approx(np.interp(time[inside], t, exact), abs=0.01)


def test_settling_of_one_resonator_is_that_of_its_exponential() -> None:
    """1 - exp(-w t / 2 Q) enters 1 % at t = (2 Q/w) ln 100 (narrow-band equivalent of one pole)."""
    q = 30.0
    expected = 2 * q / (2 * np.pi * CENTER) * np.log(100)
    found = settling_time(resonators(1, q), CENTER, CENTER / q, 2 * expected, 0.01)
    assert found == pytest.approx(expected, rel=0.03)


def test_a_time_beyond_reach_is_refused() -> None:
    with pytest.raises(CircuitError, match="too long to follow"):
        settling_time(resonators(1, 30.0), CENTER, CENTER / 30, 10.0, 0.01)
