"""What was asked: read from TOML, validated, frozen; every error names its key and line."""

from synth.spec.checks import InvalidValueError
from synth.spec.choices import (
    FAMILIES,
    TOPOLOGIES,
    Calibration,
    CapacitorChoice,
    Choose,
    Detector,
    FilterChoice,
    PartsChoice,
    ResistorChoice,
    Resonator,
)
from synth.spec.model import FORMAT, Environment, Interference, Reject, Settling, Spec, Supply, Target
from synth.spec.reader import known_keys, load_spec, parse_spec, spec_from_dict
from synth.spec.record import spec_to_dict
from synth.spec.sensor import Motional, Rolloff, Sensor
from synth.spec.starter import starter_spec

__all__ = [
    "FAMILIES",
    "FORMAT",
    "TOPOLOGIES",
    "Calibration",
    "CapacitorChoice",
    "Choose",
    "Detector",
    "Environment",
    "FilterChoice",
    "Interference",
    "InvalidValueError",
    "Motional",
    "PartsChoice",
    "Reject",
    "ResistorChoice",
    "Resonator",
    "Rolloff",
    "Sensor",
    "Settling",
    "Spec",
    "Supply",
    "Target",
    "known_keys",
    "load_spec",
    "parse_spec",
    "spec_from_dict",
    "spec_to_dict",
    "starter_spec",
]
