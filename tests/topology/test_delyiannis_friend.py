"""The multiple-feedback section with Q enhancement: equations, amplifier effects, rounding."""

from __future__ import annotations

import pytest

from synth.topology.delyiannis_friend import TOPOLOGY, feedback_ratio
from tests.topology import placed


@pytest.mark.parametrize("q", [1.5, 4.0, 7.5, 12.0, 20.0])
@pytest.mark.parametrize("c2", [0.3e-9, 1e-9, 3e-9])
def test_spread_is_comfortable(q: float, c2: float) -> None:
    """R2/R1 is 4 Q0^2 times (C1 + C2)^2/(4 C1 C2), Q0 = Q/1.5 and at most 5: 100 for equal capacitors."""
    parts = placed.values(TOPOLOGY, 10e3, q, 1.0, 1e-9, c2)
    r1 = parts["R1A"] * parts["R1B"] / (parts["R1A"] + parts["R1B"])
    unequal = (1e-9 + c2) ** 2 / (4 * 1e-9 * c2)
    assert parts["R2"] / r1 == pytest.approx(4 * min(q / 1.5, 5.0) ** 2 * unequal, rel=1e-9)


@pytest.mark.parametrize("q", [5.0, 10.0, 20.0])
def test_sensitivities_of_q(q: float) -> None:
    """Q moves by Q/Q0 - 1 times the change of K = RA/RB, and by 2 Q/Q0 - 1 times that of sqrt(R2/R1)."""
    plain = placed.values(TOPOLOGY, 10e3, q, 1.0, 1e-9, 1e-9)
    q0, step = min(q / 1.5, 5.0), 1e-5
    for factors, want in (
        ({"RA": 1 + step}, q / q0 - 1),
        ({"R2": 1 + step, "R1A": 1 / (1 + step), "R1B": 1 / (1 + step)}, 2 * q / q0 - 1),
    ):
        moved = {key: value * factors.get(key, 1.0) for key, value in plain.items()}
        _, got, _ = placed.realized(placed.section_network(TOPOLOGY, moved), 10e3)
        assert (got / q - 1) / step == pytest.approx(want, rel=1e-3)


def test_most_gain() -> None:
    """(1 + K) 2 Q Q0 for equal capacitors: there R1B is open, beyond it negative."""
    k = float(feedback_ratio(10.0, 1e-9, 1e-9))
    most = (1 + k) * 2 * 10 * 5
    assert placed.values(TOPOLOGY, 10e3, 10.0, 0.999 * most, 1e-9, 1e-9)["R1B"] > 100e3
    assert placed.values(TOPOLOGY, 10e3, 10.0, 1.001 * most, 1e-9, 1e-9)["R1B"] < 0


@pytest.mark.parametrize("name", ["OPA1612", "OPA1656", "LM4562", "ADA4625-1", "TL072"])
def test_margin(name: str) -> None:
    """45 degrees with types that have 60 at unity gain: RA is small against their input capacitance."""
    assert placed.margin(TOPOLOGY, name) > 45
