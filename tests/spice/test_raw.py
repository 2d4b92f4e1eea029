"""The reader of raw files, and the two simulators on a circuit whose answer is known."""

from __future__ import annotations

import math

import numpy as np
import pytest

from synth.circuit.network import BOLTZMANN
from tests.support.simulators import SIMULATORS, Simulator, read_raw, run_ngspice, trouble

pytestmark = pytest.mark.spice

LOW_PASS = """* resistor and capacitor
VSIG in 0 DC 0 AC 1
R1 in out 1000
C1 out 0 1e-9
.options temp=27
.ac lin 3 10000 30000
.noise v(out) VSIG lin 3 10000 30000
.end
"""
TEXT = b"""Title: * any
Date: never
Plotname: AC Analysis
Flags: complex
No. Variables: 2
No. Points: 2
Variables:
\t0\tfrequency\tfrequency grid=3
\t1\tV(out)\tvoltage
Values:
 0\t1.000000e+01,0.000000e+00
\t5.000000e-01,-2.500000e-01

 1\t2.000000e+01,0.000000e+00
\t2.500000e-01,1.000000e-01

Title: * any
Plotname: Noise Spectral Density Curves
Flags: real
No. Variables: 1
No. Points: 2
Variables:
\t0\tfrequency\tfrequency
Values:
 0\t1.0e+01
 1\t2.0e+01
"""
F = np.array([1e3, 159154.943, 3e5])


def test_text_of_two_plots() -> None:
    response, noise = read_raw(TEXT)
    assert (response.name, noise.name) == ("AC Analysis", "Noise Spectral Density Curves")
    np.testing.assert_array_equal(response.frequency, [10.0, 20.0])
    np.testing.assert_array_equal(response.columns["v(out)"], [0.5 - 0.25j, 0.25 + 0.1j])
    np.testing.assert_array_equal(noise.frequency, [10.0, 20.0])


def test_a_raw_file_cut_short_is_noticed() -> None:
    with pytest.raises(AssertionError, match="ends within a header"):
        read_raw(TEXT[:60])


def test_binary_of_two_analyses() -> None:
    run = run_ngspice(LOW_PASS)
    assert not trouble(run.printed)
    (plot,) = run.named("AC")
    np.testing.assert_allclose(plot.frequency, [1e4, 2e4, 3e4])
    np.testing.assert_allclose(plot.columns["v(out)"], 1 / (1 + 2e-6j * np.pi * plot.frequency), rtol=1e-9)
    (noise,) = run.named("Noise Spectral")
    assert noise.frequency.size == 3


def test_trouble_is_seen() -> None:
    with pytest.raises(AssertionError, match=r"[Ee]rror"):
        run_ngspice(LOW_PASS.replace("R1 in out 1000", "R1 in out\nQ1 nowhere"))


@pytest.mark.parametrize("simulator", SIMULATORS, ids=lambda simulator: simulator.name)
def test_simulator_finds_what_is_known(simulator: Simulator) -> None:
    h = 1 / (1 + 2e-6j * np.pi * F)
    np.testing.assert_allclose(simulator.response(LOW_PASS, F), h, rtol=1e-9)
    np.testing.assert_allclose(
        simulator.noise(LOW_PASS, F), math.sqrt(4 * BOLTZMANN * 300.15 * 1000) * np.abs(h), rtol=1e-5
    )
