"""Prototype and bandpass tables, against the pole pairs that the project designs with.

Sources are named at each check; values via the checks list, which recomputed every one of them.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from synth.approximation import PROTOTYPES, bandpass_pairs, half_power_frequency


def prototype_pairs(family: str, order: int, ripple: float = 0.5) -> list[tuple[float, float]]:
    """(frequency, Q) of a low-pass prototype by rising frequency; Q is 0 for a real pole."""
    upper = [p for p in PROTOTYPES[family](order, ripple) if p.imag > -1e-9]
    return sorted((abs(p), 0.0 if abs(p.imag) < 1e-9 else -abs(p) / (2 * p.real)) for p in upper)


# Butterworth: A. I. Zverev, Handbook of Filter Synthesis (1967); 4 printed digits
BUTTERWORTH = {
    2: [0.7071],
    3: [0.0, 1.0000],
    4: [0.5412, 1.3066],
    5: [0.0, 0.6180, 1.6180],
    6: [0.5176, 0.7071, 1.9319],
    7: [0.0, 0.5550, 0.8019, 2.2470],
    8: [0.5098, 0.6013, 0.9000, 2.5629],
}


@pytest.mark.parametrize(("order", "printed"), BUTTERWORTH.items())
def test_butterworth_pole_pairs(order: int, printed: list[float]) -> None:
    pairs = prototype_pairs("butterworth", order)
    assert [f for f, _ in pairs] == pytest.approx([1.0] * len(pairs), abs=1e-12)
    got = sorted(q for _, q in pairs if q)
    assert got == pytest.approx([q for q in printed if q], abs=5e-5)
    closed = sorted(1 / (2 * math.sin((2 * k - 1) * math.pi / (2 * order))) for k in range(1, order // 2 + 1))
    assert got == pytest.approx(closed, rel=1e-12)


# Kugelstadt, "Active Filter Design Techniques", ch. 16 of Op Amps for Everyone, Table 16.7: a_i = 1/Q, 4 decimals
@pytest.mark.parametrize(
    ("order", "a"),
    [
        (4, [1.8478, 0.7654]),
        (5, [1.6180, 0.6180]),
        (6, [1.9319, 1.4142, 0.5176]),
        (8, [1.9616, 1.6629, 1.1111, 0.3902]),
    ],
)
def test_butterworth_coefficients_of_kugelstadt(order: int, a: list[float]) -> None:
    got = sorted((1 / q for _, q in prototype_pairs("butterworth", order) if q), reverse=True)
    assert got == pytest.approx(a, abs=1e-4)


# Chebyshev, ripple edge at 1 (Van Valkenburg's normalisation; recomputed in the checks list): (f0, Q) and the
# frequency of -3.0103 dB re 0 Hz over the ripple edge
CHEBYSHEV = [
    (0.5, 2, [(1.2313, 0.8637)], 1.44794),
    (0.5, 3, [(0.6265, 0.0), (1.0689, 1.7062)], 1.16749),
    (0.5, 4, [(0.5970, 0.7051), (1.0313, 2.9406)], 1.10633),
    (0.5, 6, [(0.3962, 0.6836), (0.7681, 1.8104), (1.0114, 6.5128)], 1.04680),
    (1.0, 2, [(1.0500, 0.9565)], 1.30790),
    (1.0, 3, [(0.4942, 0.0), (0.9971, 2.0177)], 1.09487),
    (1.0, 5, [(0.2895, 0.0), (0.6552, 1.3988), (0.9941, 5.5564)], 1.03381),
    (3.0, 2, [(0.8414, 1.3047)], 1.16906),
    (3.0, 4, [(0.4427, 1.0765), (0.9503, 5.5789)], 1.04141),
]


@pytest.mark.parametrize(("ripple", "order", "pairs", "edge"), CHEBYSHEV)
def test_chebyshev_pole_pairs(ripple: float, order: int, pairs: list[tuple[float, float]], edge: float) -> None:
    got = prototype_pairs("chebyshev", order, ripple)
    assert [f for f, _ in got] == pytest.approx([f for f, _ in pairs], abs=5e-5)
    assert [q for _, q in got] == pytest.approx([q for _, q in pairs], abs=5e-5)
    assert half_power_frequency(PROTOTYPES["chebyshev"](order, ripple)) == pytest.approx(edge, abs=1.1e-5)


# Bessel, -3 dB at 1: 4 decimals recomputed in the checks list; Q list to ten digits as in a public table named there
BESSEL = {
    2: [(1.2720, 0.57735026919)],
    3: [(1.3227, 0.0), (1.4476, 0.691046625825)],
    4: [(1.4302, 0.521934581669), (1.6034, 0.805538281842)],
    5: [(1.5023, 0.0), (1.5563, 0.563535620851), (1.7554, 0.916477373948)],
    6: [(1.6039, 0.510317824749), (1.6892, 0.611194546878), (1.9047, 1.02331395383)],
}


@pytest.mark.parametrize(("order", "pairs"), BESSEL.items())
def test_bessel_pole_pairs(order: int, pairs: list[tuple[float, float]]) -> None:
    got = prototype_pairs("bessel", order)
    assert [f for f, _ in got] == pytest.approx([f for f, _ in pairs], abs=5e-5)
    assert [q for _, q in got] == pytest.approx([q for _, q in pairs], abs=1e-9)


def test_sixth_order_bandpass_of_franco() -> None:
    """Franco, 3rd ed., Example 4.5: (957.6 Hz, 20.02), (1000, 10), (1044.3, 20.02); edges recomputed."""
    pairs = bandpass_pairs("butterworth", 3, 1000.0, 100.0)
    assert sorted(p.frequency for p in pairs) == pytest.approx([957.6, 1000.0, 1044.3], abs=0.05)
    assert sorted(p.q for p in pairs) == pytest.approx([10.0, 20.02, 20.02], abs=0.005)


# Butterworth pairs at unit centre, fractional bandwidth between -3 dB points; recomputed in the checks list
EXACT = [
    (2, 0.5, [(0.83647, 2.8736), (1.19550, 2.8736)]),
    (2, 0.1, [(0.96525, 14.1510), (1.03600, 14.1510)]),
    (2, 0.05, [(0.98248, 28.2887), (1.01784, 28.2887)]),
    (2, 0.01, [(0.99647, 141.4222), (1.00354, 141.4222)]),
    (3, 0.5, [(0.80538, 4.0941), (1.00000, 2.0000), (1.24166, 4.0941)]),
    (3, 0.1, [(0.95762, 20.0188), (1.00000, 10.0000), (1.04425, 20.0188)]),
    (3, 0.05, [(0.97858, 40.0094), (1.00000, 20.0000), (1.02189, 40.0094)]),
    (3, 0.01, [(0.99568, 200.0019), (1.00000, 100.0000), (1.00434, 200.0019)]),
]
CHEBYSHEV_EXACT = [  # fractional bandwidth between the ripple edges
    (0.5, 2, 0.1, [(0.95103, 14.0466), (1.05149, 14.0466)]),
    (0.5, 3, 0.02, [(0.98983, 159.6363), (1.00000, 79.8140), (1.01027, 159.6363)]),
    (1.0, 2, 0.02, [(0.99109, 91.1004), (1.00899, 91.1004)]),
    (1.0, 3, 0.1, [(0.95286, 40.5190), (1.00000, 20.2359), (1.04947, 40.5190)]),
    (3.0, 2, 0.1, [(0.96189, 31.0360), (1.03962, 31.0360)]),
]


@pytest.mark.parametrize(("order", "fraction", "pairs"), EXACT)
def test_butterworth_bandpass_pairs(order: int, fraction: float, pairs: list[tuple[float, float]]) -> None:
    got = sorted((p.frequency, p.q) for p in bandpass_pairs("butterworth", order, 1.0, fraction))
    np.testing.assert_allclose(np.array(got)[:, 0], np.array(pairs)[:, 0], atol=6e-6)
    np.testing.assert_allclose(np.array(got)[:, 1], np.array(pairs)[:, 1], atol=6e-5)


@pytest.mark.parametrize(("ripple", "order", "fraction", "pairs"), CHEBYSHEV_EXACT)
def test_chebyshev_bandpass_pairs(
    ripple: float, order: int, fraction: float, pairs: list[tuple[float, float]]
) -> None:
    edge = half_power_frequency(PROTOTYPES["chebyshev"](order, ripple))
    got = sorted((p.frequency, p.q) for p in bandpass_pairs("chebyshev", order, 1.0, fraction * edge, ripple))
    np.testing.assert_allclose(np.array(got)[:, 0], np.array(pairs)[:, 0], atol=6e-6)
    np.testing.assert_allclose(np.array(got)[:, 1], np.array(pairs)[:, 1], rtol=1e-6, atol=6e-5)


def test_third_order_chebyshev_bandpass_of_zumbahlen() -> None:
    """Zumbahlen (ed.), Linear Circuit Design Handbook (2008) ch. 8, transformation example; 0.1 %, Q 0.01."""
    got = sorted((p.frequency, p.q) for p in bandpass_pairs("chebyshev", 3, 1000.0, 500.0, 0.5))
    assert [f for f, _ in got] == pytest.approx([804.5, 1000.0, 1243.0], rel=1e-3)
    assert [q for _, q in got] == pytest.approx([7.63, 3.73, 7.63], abs=0.01)


# Kugelstadt, Table 16-2 (printed 4 to 5 digits; recomputed): ratio of a pair's frequencies to the centre, n = 2
@pytest.mark.parametrize(
    ("family", "alphas"),
    [
        ("bessel", (1.00318, 1.03235, 1.43800)),
        ("butterworth", (1.00354, 1.03600, 1.44258)),
        ("chebyshev", (1.00333, 1.03379, 1.38997)),
    ],
)
def test_alpha_of_kugelstadt(family: str, alphas: tuple[float, ...]) -> None:
    for q, alpha in zip((100.0, 10.0, 1.0), alphas, strict=True):
        low, high = sorted(p.frequency for p in bandpass_pairs(family, 2, 1.0, 1.0 / q, 3.0))
        assert high == pytest.approx(alpha, rel=5e-5)
        assert low == pytest.approx(1 / alpha, rel=5e-5)


def test_alpha_of_a_butterworth_pair_in_closed_form() -> None:
    """n = 2, fractional bandwidth d: |s| = alpha with s + 1/s = d exp(j 3 pi/4), both Q equal (by algebra).

    With s = alpha exp(j phi): (alpha + 1/alpha) cos phi = -d/sqrt 2, (alpha - 1/alpha) sin phi = d/sqrt 2; eliminating
    phi, u = alpha^2 + alpha^-2 solves d^2/2 (1/(u + 2) + 1/(u - 2)) = 1, u^2 - d^2 u - 4 = 0; Q = 1/(-2 cos phi).
    """
    for d in (0.01, 0.05, 0.2, 0.7):
        u = (d**2 + math.sqrt(d**4 + 16)) / 2
        alpha = math.sqrt((u + math.sqrt(u**2 - 4)) / 2)
        q = (alpha + 1 / alpha) / (math.sqrt(2) * d)
        pairs = bandpass_pairs("butterworth", 2, 1.0, d)
        assert sorted(p.frequency for p in pairs) == pytest.approx([1 / alpha, alpha], rel=1e-7)
        assert [p.q for p in pairs] == pytest.approx([q, q], rel=1e-9)


@pytest.mark.parametrize("family", list(PROTOTYPES))
@pytest.mark.parametrize("order", [1, 2, 3, 4, 5])
def test_pairs_are_images_in_the_centre(family: str, order: int) -> None:
    """The transformation s/w0 + w0/s is its own image: f1 f2 = f0^2 with equal Q, exactly."""
    pairs = bandpass_pairs(family, order, 60e3, 4e3)
    assert len(pairs) == order
    frequencies = sorted(p.frequency for p in pairs)
    for low, high in zip(frequencies, reversed(frequencies), strict=True):
        assert low * high == pytest.approx(60e3**2, rel=1e-12)


# sqrt(2^(1/n) - 1), any textbook of tuned amplifiers; 6 digits
@pytest.mark.parametrize(
    ("sections", "shrinkage"), [(1, 1.0), (2, 0.643594), (3, 0.509825), (4, 0.434979), (5, 0.385614), (6, 0.349946)]
)
def test_synchronous_sections_are_wider_by_the_shrinkage(sections: int, shrinkage: float) -> None:
    pairs = bandpass_pairs("synchronous", sections, 1000.0, 50.0)
    assert [p.frequency for p in pairs] == pytest.approx([1000.0] * sections, rel=1e-12)
    assert [p.q for p in pairs] == pytest.approx([20.0 * shrinkage] * sections, abs=20 * 5.1e-7)
