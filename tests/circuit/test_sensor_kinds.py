"""Every kind of source against its closed form: response, impedance, noise; and the figures asked of a sensor."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from synth import circuit
from synth.circuit.dc_path import dc_path_problem
from synth.circuit.network import Element, Network
from synth.circuit.sensor import sensor_elements, sensor_network, terminal_network
from synth.circuit.sensor_figures import (
    insertion_impedance,
    sensor_figures,
    sensor_response,
    source_impedance,
    source_noise,
    stage_gain,
    stage_gain_unit,
)
from synth.errors import CircuitError
from synth.spec import Rolloff, Sensor
from synth.spec.sensor import Motional
from tests.support.networks import amplifier, capacitor, chain_of, op_amp, resistor
from tests.support.simulators import SIMULATORS, Simulator

K, T = 1.380649e-23, 300.15  # SI 2019; 27 degC
F = np.geomspace(1e3, 1e6, 31)
S = 2j * np.pi * F
TRANSFORMER = Sensor(scale=0.1, input_unit="A", burden=100.0, magnetizing_inductance=500e-6)
# fs = 39.8 kHz, Q = 50, and a shunt capacitance ten times the motional one
RECEIVER = Sensor(
    scale=2e-3, input_unit="Pa", motional=Motional(500.0, 0.1, 160e-12), capacitance=1.6e-9
)
PHOTODIODE = Sensor(scale=0.5, input_unit="W", output="current", resistance=10e6, capacitance=70e-12)
PIEZO = Sensor(scale=12e-12, input_unit="N", output="charge", resistance=1e9, capacitance=500e-12)
SOURCES = {"transformer": TRANSFORMER, "receiver": RECEIVER, "photodiode": PHOTODIODE, "piezo": PIEZO}


def impedance(sensor: Sensor, s: np.ndarray) -> np.ndarray:
    """Impedance at the terminals, by hand."""
    shunt = s * (sensor.capacitance or 0.0)
    if sensor.motional is not None:
        m = sensor.motional
        return 1 / (shunt + 1 / (m.resistance + s * m.inductance + 1 / (s * m.capacitance)))
    if sensor.burden is not None and sensor.magnetizing_inductance is not None:
        series = 1 / (1 / sensor.burden + 1 / (s * sensor.magnetizing_inductance)) + s * (sensor.inductance or 0.0)
        return 1 / (shunt + 1 / series)
    assert sensor.resistance is not None
    return 1 / (shunt + 1 / sensor.resistance)


@pytest.mark.parametrize("name", SOURCES)
def test_impedance(name: str) -> None:
    np.testing.assert_allclose(source_impedance(SOURCES[name], F), impedance(SOURCES[name], S), rtol=1e-9)


@pytest.mark.parametrize("name", SOURCES)
def test_thermal_noise_is_the_real_part_of_the_impedance(name: str) -> None:
    """4 k T Re Z at the open terminals (H. Nyquist, Phys. Rev. 32 (1928) 110)."""
    sensor = SOURCES[name]
    want = np.sqrt(4 * K * T * impedance(sensor, S).real)
    np.testing.assert_allclose(circuit.noise(terminal_network(sensor, 27.0), F).density, want, rtol=1e-9)
    norton = {"voltage": 1.0, "current": np.abs(impedance(sensor, S)), "charge": np.abs(S * impedance(sensor, S))}
    np.testing.assert_allclose(source_noise(sensor, F, 27.0), want / norton[sensor.output], rtol=1e-9)


@pytest.mark.parametrize("name", SOURCES)
@pytest.mark.parametrize("density", [3e-9])
def test_a_given_density_stands_at_the_terminals(name: str, density: float) -> None:
    """In the unit of the output, whatever the source's impedance, and in place of its thermal noise."""
    sensor = replace(SOURCES[name], noise=density)
    np.testing.assert_allclose(source_noise(sensor, F, 27.0), density, rtol=1e-9)
    per_unit = {"voltage": 1.0, "current": np.abs(impedance(sensor, S)), "charge": np.abs(S * impedance(sensor, S))}
    opened = circuit.noise(terminal_network(sensor, 27.0), F).density
    np.testing.assert_allclose(opened, density * per_unit[sensor.output], rtol=2e-3 if name == "transformer" else 1e-5)


def test_a_transformer_is_a_high_pass_of_burden_and_magnetizing_inductance() -> None:
    """fc = R/(2 pi L) = 31.8 kHz; the scale where flat."""
    corner = 100.0 / (2 * np.pi * 500e-6)
    want = 0.1 * (1j * F / corner) / (1 + 1j * F / corner)
    np.testing.assert_allclose(sensor_response(TRANSFORMER, F), want, rtol=1e-9)
    leaking = replace(TRANSFORMER, inductance=20e-6, capacitance=1e-9)
    want = want / (1 + S * 1e-9 * (1 / (1 / 100.0 + 1 / (S * 500e-6)) + S * 20e-6))
    np.testing.assert_allclose(sensor_response(leaking, F), want, rtol=1e-9)


def test_insertion_impedance_of_a_transformer() -> None:
    """A thousand turns: 100 ohm parallel j 100 ohm at the corner are 70.7 ohm, 70.7 uohm in the primary."""
    corner = 100.0 / (2 * np.pi * 500e-6)
    assert insertion_impedance(TRANSFORMER, corner) == pytest.approx(100e-6 / math.sqrt(2), rel=1e-12)
    s = 2j * np.pi * 4e4
    loaded = 1 / 100 + 1 / (s * 500e-6) + 1 / (1 / (s * 1e-9) + s * 20e-6)
    leaking = replace(TRANSFORMER, inductance=20e-6, capacitance=1e-9)
    assert insertion_impedance(leaking, 4e4) == pytest.approx(1 / abs(loaded) / 1000**2, rel=1e-12)


def test_a_receiver_divides_its_branch_with_the_shunt_capacitance() -> None:
    m, c = RECEIVER.motional, RECEIVER.capacitance
    assert m is not None
    assert c is not None
    want = 2e-3 / (1 + S * c * (m.resistance + S * m.inductance + 1 / (S * m.capacitance)))
    np.testing.assert_allclose(sensor_response(RECEIVER, F), want, rtol=1e-8)
    series = 1 / (2 * np.pi * math.sqrt(m.inductance * m.capacitance))
    parallel = series * math.sqrt(1 + m.capacitance / c)  # Van Dyke's circuit, any text on crystals
    assert abs(sensor_response(RECEIVER, [10.0])[0]) == pytest.approx(2e-3 / 11, rel=1e-6)  # Cm/(Cm + C) well below
    assert abs(sensor_response(RECEIVER, [series])[0]) == pytest.approx(
        2e-3 / abs(1 + 2j * np.pi * series * c * m.resistance), rel=1e-6
    )
    (pair,) = circuit.resonant_pairs(np.array(sensor_figures(RECEIVER, series).poles))
    assert pair[0] == pytest.approx(parallel, rel=1e-9)


@pytest.mark.parametrize("sensor", [PHOTODIODE, PIEZO], ids=["current", "charge"])
def test_a_source_of_current_or_charge_is_its_norton_equivalent(sensor: Sensor) -> None:
    """Short-circuit output exactly scale times rolloff; at the open terminals it meets the impedance."""
    one = replace(sensor, rolloff=(Rolloff("low-pass", corner=50e3), Rolloff("high-pass", corner=5e3)))
    flanks = 1 / (1 + 1j * F / 50e3) * (1j * F / 5e3) / (1 + 1j * F / 5e3)
    np.testing.assert_allclose(sensor_response(one, F), sensor.scale * flanks, rtol=1e-10)
    current = sensor.scale * flanks * (S if sensor.output == "charge" else 1.0)
    want = current * impedance(sensor, S)
    np.testing.assert_allclose(circuit.response(terminal_network(one, 27.0), F), want, rtol=1e-9)


def test_nothing_beside_a_source_is_an_infinite_impedance() -> None:
    bare = Sensor(scale=1.0, input_unit="W", output="current")
    assert np.all(np.isinf(source_impedance(bare, F)))
    assert source_noise(bare, F, 27.0).tolist() == [0.0] * F.size


def test_figures_of_a_sensor() -> None:
    """Poles and zeros without what only carries noise, the loss at the centre, the tables' residual."""
    figures = sensor_figures(replace(PIEZO, rolloff=(Rolloff("high-pass", corner=1e4),)), 1e4)
    np.testing.assert_allclose(figures.poles, [-2 * np.pi * 1e4], rtol=1e-9)
    assert abs(figures.zeros[0]) < 1e-3
    assert figures.gain_at_center == pytest.approx(math.sqrt(0.5), rel=1e-9)
    assert figures.residual == 0.0
    gain = 1 / np.sqrt(1 + (F / 5e4) ** 2) * (1 + 0.01 * np.random.default_rng(0).standard_normal(F.size))
    table = Rolloff("table", points=tuple(zip(F.tolist(), gain.tolist(), strict=True)))
    assert 0.01 < sensor_figures(replace(PHOTODIODE, rolloff=(table,)), 1e4).residual < 0.05


@pytest.mark.parametrize("key", ["inductance", "burden", "motional"])
@pytest.mark.parametrize("output", ["current", "charge"])
def test_keys_that_do_not_belong_to_a_source(key: str, output: str) -> None:
    given: dict[str, object] = {"inductance": 1e-3}
    if key == "burden":
        given = {"burden": 10.0, "magnetizing_inductance": 1e-3}
    elif key == "motional":
        given = {"motional": Motional(1.0, 1.0, 1e-12)}
    sensor = Sensor(scale=1.0, input_unit="N", output=output, **given)  # type: ignore[arg-type]
    with pytest.raises(CircuitError, match=f"sensor.{key} does not belong to a source of {output}"):
        list(sensor_elements(sensor, "in"))
    with pytest.raises(CircuitError, match=f"sensor.{key} does not belong to a source of {output}"):
        sensor_network(sensor, 27.0)


def test_a_series_inductance_beside_a_branch() -> None:
    with pytest.raises(CircuitError, match=r"sensor.inductance has no place beside sensor.motional"):
        list(sensor_elements(replace(RECEIVER, inductance=1e-3), "in"))


@pytest.mark.parametrize("sensor", [PHOTODIODE, replace(TRANSFORMER, input_unit="V")])
def test_insertion_impedance_of_anything_else(sensor: Sensor) -> None:
    with pytest.raises(CircuitError, match="an insertion impedance belongs to a current transformer"):
        insertion_impedance(sensor, 1e3)


# ---------------------------------------------------------------------------------------------------------------
# The gain of a stage, and bias paths


def test_gain_of_a_stage_on_a_virtual_ground_is_referred_to_the_source() -> None:
    model = op_amp(gain_bandwidth=1e12, dc_gain=1e12)
    parts = [resistor("R1", "sig", "out", 10e3), amplifier("U1", "0", "sig", "out", model)]
    chain = chain_of(parts, [model], PHOTODIODE)
    network = circuit.build_network(chain)
    assert stage_gain_unit(chain, chain.stages[0]) == "V/A"
    assert stage_gain(chain, chain.stages[0], network, 1e3) == pytest.approx(-10e3, rel=1e-5)
    through = [resistor("R2", "sig", "m", 100.0), *parts]
    through[1:] = [resistor("R1", "m", "out", 10e3), amplifier("U1", "0", "m", "out", model)]
    chain = chain_of(through, [model], PHOTODIODE)
    assert stage_gain_unit(chain, chain.stages[0]) == "V/A"
    voltage = Sensor(scale=1.0, input_unit="A", resistance=100.0)
    chain = chain_of(through, [model], voltage)
    assert stage_gain_unit(chain, chain.stages[0]) == "V/V"
    assert stage_gain(chain, chain.stages[0], circuit.build_network(chain), 1e3) == pytest.approx(-100.0, rel=1e-5)


def test_gain_of_a_stage_with_a_high_input_is_a_ratio_of_voltages() -> None:
    model = op_amp()
    parts = [
        capacitor("C1", "sig", "p", 1e-6),
        resistor("R1", "p", "0", 10e3),
        resistor("R2", "m", "0", 1e3),
        resistor("R3", "m", "out", 9e3),
        amplifier("U1", "p", "m", "out", model),
    ]
    chain = chain_of(parts, [model], PHOTODIODE)
    assert stage_gain_unit(chain, chain.stages[0]) == "V/V"
    assert abs(stage_gain(chain, chain.stages[0], circuit.build_network(chain), 1e4)) == pytest.approx(10, rel=1e-3)
    assert dc_path_problem(chain) == ""
    without_bias = replace(chain, parts=(parts[0], *parts[2:]))
    assert dc_path_problem(without_bias).startswith("the (+) input of U1 at node p has no path for its bias current")


@pytest.mark.parametrize(
    ("sensor", "conducts"),
    [
        (Sensor(scale=1.0, input_unit="A", resistance=50.0), True),
        (TRANSFORMER, True),
        (RECEIVER, False),
        (PHOTODIODE, True),
        (replace(PHOTODIODE, resistance=None), False),
        (replace(PIEZO, resistance=None), False),
    ],
)
def test_a_sensor_may_be_the_path(sensor: Sensor, conducts: bool) -> None:
    """A follower straight on the terminals: its input hangs on what the sensor conducts."""
    model = op_amp()
    chain = chain_of([amplifier("U1", "sig", "out", "out", model)], [model], sensor)
    assert (dc_path_problem(chain) == "") is conducts


def test_a_capacitor_in_the_feedback_is_no_path() -> None:
    """A charge amplifier without its resistor drifts into a rail; the load at the output does not help."""
    model = op_amp()
    source = replace(PIEZO, resistance=None)
    parts = [capacitor("C1", "sig", "out", 1e-9), amplifier("U1", "0", "sig", "out", model)]
    problem = dc_path_problem(chain_of(parts, [model], source, load=1e3))
    assert problem.startswith("the (-) input of U1 at node sig has no path for its bias current; lead a resistor")
    assert dc_path_problem(chain_of([*parts, resistor("R1", "sig", "out", 1e6)], [model], source)) == ""
    assert dc_path_problem(chain_of([*parts, resistor("R1", "sig", "x", 1e6)], [model], source)) != ""
    ladder = [resistor("R1", "sig", "x", 1e6), resistor("R2", "x", "y", 1e6), resistor("R3", "y", "0", 1e6)]
    assert dc_path_problem(chain_of([*parts, *ladder], [model], source)) == ""


# ---------------------------------------------------------------------------------------------------------------
# The same in general simulators


def _loaded(sensor: Sensor) -> Network:
    """The terminals at node `out` through a noiseless follower, for the simulators."""
    network = terminal_network(sensor, 27.0)
    follower = (
        Element("gfo", "transconductance", ("0", "out", "sig", "0"), 1e-3),
        Element("gfl", "conductance", ("out", "0"), 1e-3),
    )
    return replace(network, elements=network.elements + follower, output="out")


@pytest.mark.spice
@pytest.mark.parametrize("simulator", SIMULATORS, ids=lambda s: s.name)
@pytest.mark.parametrize("name", [*SOURCES, "table", "given"])
def test_simulators_agree(simulator: Simulator, name: str) -> None:
    """Response 0.01 dB, noise 0.2 %, as for whole chains."""
    if name == "table":
        gain = 1 / np.sqrt((1 + (F / 1e5) ** 2) * (1 + (8e3 / F) ** 2))
        table = Rolloff("table", points=tuple(zip(F.tolist(), gain.tolist(), strict=True)))
        sensor = replace(PHOTODIODE, rolloff=(table,))
    else:
        sensor = SOURCES.get(name, replace(PIEZO, noise=1e-15))
    network = _loaded(sensor)
    text = circuit.netlist_text(network, name, [], 4e4)
    f = [5e3, 39.8e3, 41e3, 4e5]
    np.testing.assert_allclose(simulator.response(text, f), circuit.response(network, f), rtol=1e-3)
    np.testing.assert_allclose(simulator.noise(text, f), circuit.noise(network, f).density, rtol=2e-3)
