"""What is asked of a sensor apart from its chain: impedance, noise, response, and the gain of a stage behind it."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from synth.circuit.analysis import injected_voltages, node_voltages, noise, response
from synth.circuit.linear import frequency_array
from synth.circuit.modes import poles, zeros
from synth.circuit.network import GROUND, ComplexArray, FloatArray, Network, matrices
from synth.circuit.sensor import TERMINAL, sensor_network, terminal_network
from synth.circuit.sensor_rolloff import rolloff_residual
from synth.circuit.sensor_source import source_elements
from synth.errors import CircuitError
from synth.model.chain import Chain, Stage
from synth.model.judgement import SensorModel
from synth.spec import Sensor

GAIN_UNITS = {"voltage": "V/V", "current": "V/A", "charge": "V/C"}


def sensor_response(sensor: Sensor, frequencies: ArrayLike) -> ComplexArray:
    """Output over input, shape (F,): open-circuit voltage [V], short-circuit current [A] or charge [C] per unit."""
    return response(sensor_network(sensor, 0.0), frequencies)


def source_impedance(sensor: Sensor, frequencies: ArrayLike) -> ComplexArray:
    """Impedance between the terminals, the input at rest [ohm], shape (F,).

    Infinite for a source of current or charge with nothing beside it.
    """
    f = frequency_array(frequencies)
    if not any(TERMINAL in nodes[:2] and kind != "transconductance" for _, kind, nodes, _, _ in _source(sensor)):
        return np.full(f.shape, complex(math.inf))
    network = terminal_network(sensor, 0.0)
    return injected_voltages(network, TERMINAL, f)[:, matrices(network).output]


def _source(sensor: Sensor) -> tuple[tuple[str, str, tuple[str, ...], float, bool], ...]:
    return tuple(source_elements(sensor, "sen0"))


def source_noise(sensor: Sensor, frequencies: ArrayLike, ambient: float) -> FloatArray:
    """Density at the terminals at an ambient temperature [degC], shape (F,).

    [V/rtHz] open-circuit, or [A/rtHz] or [C/rtHz] short-circuit: divided by `sensor_response` it is a density of the
    input.
    """
    return noise(sensor_network(sensor, ambient), frequencies).density


def sensor_figures(sensor: Sensor, center: float) -> SensorModel:
    """Poles, zeros and loss at the centre [Hz] of the sensor's own response, and the residual of its tables."""
    network = sensor_network(sensor, 0.0)
    if sensor.output == "charge":  # the noise's integrator is no part of the response
        network = Network(
            network.input,
            network.output,
            tuple(e for e in network.elements if "sen_n" not in e.nodes),
            (),
            (),
            network.temperature,
        )
    gain = abs(response(network, [center])[0]) / sensor.scale
    return SensorModel(
        tuple(complex(p) for p in poles(network, center)),
        tuple(complex(z) for z in zeros(network, center)),
        float(gain),
        rolloff_residual(sensor.rolloff),
    )


def insertion_impedance(sensor: Sensor, frequency: float) -> float:
    """Magnitude of the impedance [ohm] that a current transformer puts into its primary, terminals open.

    The secondary's impedance over the square of the turns ratio N; with a current I/N through the burden R the
    scale is R/N, so N = R/scale.

    Raises:
        CircuitError: the sensor is no current transformer.

    Example:
        >>> sensor = Sensor(scale=0.1, input_unit="A", burden=100.0, magnetizing_inductance=1.0)
        >>> round(insertion_impedance(sensor, 1e6) * 1e6, 3)  # 100 ohm over 1000 turns squared [uohm]
        100.0
    """
    if sensor.burden is None or sensor.magnetizing_inductance is None or sensor.input_unit != "A":
        raise CircuitError(
            "an insertion impedance belongs to a current transformer: sensor.burden, sensor.magnetizing_inductance and "
            "a scale in volt per ampere"
        )
    omega = 2 * math.pi * frequency
    admittance = 1 / sensor.burden + 1 / (1j * omega * sensor.magnetizing_inductance)
    if sensor.capacitance is not None:
        branch = 1 / (1j * omega * sensor.capacitance) + 1j * omega * (sensor.inductance or 0.0)
        admittance += 1 / branch
    turns = sensor.burden / sensor.scale
    return float(1 / (abs(admittance) * turns**2))


def on_virtual_ground(chain: Chain, stage: Stage) -> bool:
    """True where a stage takes the current of its source: its input leads to an amplifier's (-).

    It leads there directly or through one resistor of the stage.
    """
    parts = [chain.part(ref) for ref in stage.parts]
    led = {stage.input_node}
    for part in parts:
        if part.kind == "resistor" and stage.input_node in part.nodes:
            led |= set(part.nodes)
    return any(part.kind == "op-amp" and part.nodes[1] in led - {GROUND} for part in parts)


def stage_gain(chain: Chain, stage: Stage, network: Network, frequency: float) -> complex:
    """Gain of a stage in its chain at a frequency [Hz]: V/V, or V/A or V/C where it takes a current or a charge.

    A voltage across a virtual ground is an amplifier's error; there the output is referred to the short-circuit
    output of the sensor.  `stage_gain_unit` says which it is.
    """
    m = matrices(network)
    voltages = node_voltages(network, [frequency])[0]
    out = voltages[m.index(stage.output_node)]
    if stage_gain_unit(chain, stage) == "V/V":
        return complex(out / voltages[m.index(stage.input_node)])
    return complex(out / sensor_response(chain.sensor, [frequency])[0])


def stage_gain_unit(chain: Chain, stage: Stage) -> str:
    """ "V/V", or "V/A" or "V/C" for the stage on whose virtual ground such a sensor works."""
    first = stage.input_node == TERMINAL and on_virtual_ground(chain, stage)
    return GAIN_UNITS[chain.sensor.output] if first else GAIN_UNITS["voltage"]
