"""What the first stage sees of the sensor, from the exact circuit."""

from __future__ import annotations

import math

from synth.circuit.sensor_figures import insertion_impedance, source_impedance, source_noise
from synth.quantity import format_si
from synth.spec import Spec


def stage_source(spec: Spec) -> float:
    """Magnitude of the source's impedance at the centre that a voltage stage sees [ohm].

    0 where the first stage takes a current or a charge: what follows it sees an amplifier's output.
    """
    if spec.sensor.output != "voltage":
        return 0.0
    impedance = abs(source_impedance(spec.sensor, [spec.target.center_frequency])[0])
    return float(impedance) if math.isfinite(impedance) else 0.0


def own_noise(spec: Spec) -> float:
    """Density of the source's own noise at the centre [V, A or C per root hertz]."""
    return float(source_noise(spec.sensor, [spec.target.center_frequency], spec.environment.ambient)[0])


def insertion_note(spec: Spec) -> str:
    """What a current transformer puts into its primary, "" for other sensors."""
    if spec.sensor.burden is None or spec.input_unit != "A":
        return ""
    inserted = insertion_impedance(spec.sensor, spec.target.center_frequency)
    return f"the transformer inserts {format_si(inserted, 'ohm', 3)} into its primary at the centre"
