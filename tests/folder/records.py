"""A small but complete design, made by hand: a gain stage and a bandpass section behind a pickup coil."""

from __future__ import annotations

import numpy as np

from synth.model.chain import Chain, Stage, StageTarget
from synth.model.judgement import (
    Contributor,
    NoiseTable,
    Realized,
    Requirement,
    ResponseTable,
    SensorModel,
    StageResult,
    Verification,
)
from synth.model.part import OpAmp, Part
from synth.model.record import Candidate, DesignRecord
from synth.spec import Spec, parse_spec

CENTER, BANDWIDTH = 100e3, 5e3

SPEC = """
format = 1
title = "Pickup-coil channel"
[target]
center_frequency = "100 kHz"
bandwidth = "5 kHz"
full_scale = "2 uA"
smallest = "100 nA"
output = "1 V"
settling = { within = "2 ms", to = "1 %" }
reject = [ { frequency = "300 kHz", by = "60 dB" } ]
load = "10 kohm"
[sensor]
scale = "20 mV/mA"
resistance = "25 ohm"
rolloff = [ { kind = "high-pass", corner = "48 kHz", tolerance = "10 %" } ]
[[interference]]
kind = "tone"
frequency = "50 kHz"
level = "10 uA"
[supply]
positive = "5 V"
negative = "-5 V"
[environment]
temperature = ["10 degC", "45 degC"]
[filter]
sections = 1
[detector]
kind = "rms"
error = "0.5 %"
"""


def make_spec(title: str = "Pickup-coil channel") -> Spec:
    """The spec above."""
    escaped = title.replace("\\", "\\\\").replace('"', '\\"')
    return parse_spec(SPEC.replace('"Pickup-coil channel"', f'"{escaped}"'))


def make_model(name: str = "AMP1") -> OpAmp:
    """Figures of an amplifier that does not exist."""
    return OpAmp(
        type=name,
        technology="bipolar",
        gain_bandwidth=80e6,
        dc_gain=1e6 / 3,
        second_pole=None,
        output_resistance=30.0,
        input_capacitance_differential=8e-12,
        input_capacitance_common=2e-12,
        voltage_noise=1.1e-9,
        voltage_noise_corner=30.0,
        current_noise=1.7e-12,
        current_noise_corner=200.0,
        current_noise_slope=0.0,
        minimum_noise_gain=1.0,
        slew_rate=27e6,
        swing_headroom_high=0.6,
        swing_headroom_low=0.6,
        common_mode_headroom_high=2.0,
        common_mode_headroom_low=-0.1,
        output_current=30e-3,
        offset_voltage=100e-6,
        offset_voltage_max=500e-6,
        bias_current=60e-9,
        supply_minimum=4.5,
        supply_maximum=36.0,
        supply_current=3.6e-3,
        gain_bandwidth_spread=0.3,
        dc_gain_spread=0.5,
        stray_output_to_inverting=0.1e-12,
        stray_inverting_to_ground=2e-12,
        packages=((1, f"{name}S"), (2, f"{name}D")),
    )


def make_parts(note: str = "") -> tuple[Part, ...]:
    """Parts of both stages."""
    gain, section = "gain 1", "bandpass 1"

    def resistor(ref: str, stage: str, role: str, nodes: tuple[str, str], value: float) -> Part:
        return Part(ref, "resistor", role, stage, nodes, value, 0.01, 50e-6, "thick film", 0.04e-12, size="0603")

    def capacitor(ref: str, stage: str, role: str, nodes: tuple[str, str], value: float) -> Part:
        return Part(ref, "capacitor", role, stage, nodes, value, 0.01, 30e-6, "C0G", loss_tangent=1e-3, rating="50 V")

    return (
        capacitor("C1", gain, "input coupling", ("sig", "s1_p"), 100e-9),
        resistor("R1", gain, "bias path", ("s1_p", "0"), 10e3),
        resistor("R2", gain, "gain, to ground", ("s1_m", "0"), 49.9),
        resistor("R3", gain, "gain, feedback", ("s1_m", "s1_out"), 4.99e3),
        Part("U1A", "op-amp", "amplifier", gain, ("s1_p", "s1_m", "s1_out"), "AMP1", technology="bipolar", note=note),
        resistor("R4", section, "input resistor", ("s1_out", "s2_a"), 1.58e3),
        resistor("R5", section, "input shunt", ("s2_a", "0"), 40.2),
        capacitor("C2", section, "feedback to the input node", ("s2_a", "out"), 1e-9),
        capacitor("C3", section, "to the inverting input", ("s2_a", "s2_m"), 1e-9),
        resistor("R6", section, "feedback", ("s2_m", "out"), 63.4e3),
        Part("U1B", "op-amp", "amplifier", section, ("0", "s2_m", "out"), "AMP1", technology="bipolar"),
    )


def make_chain(spec: Spec, note: str = "") -> Chain:
    """The circuit."""
    parts = make_parts(note)
    refs = {name: tuple(p.ref for p in parts if p.stage == name) for name in ("gain 1", "bandpass 1")}
    return Chain(
        center_frequency=CENTER,
        ambient=27.0,
        sensor=spec.sensor,
        load_resistance=10e3,
        load_capacitance=0.0,
        stages=(
            Stage(
                "gain 1", "gain", "non-inverting", StageTarget(100.0, 1.109), "AMP1", "sig", "s1_out", refs["gain 1"]
            ),
            Stage(
                "bandpass 1",
                "bandpass",
                "multiple-feedback",
                StageTarget(20.0, 1.0, CENTER, 20.0),
                "AMP1",
                "s1_out",
                "out",
                refs["bandpass 1"],
            ),
        ),
        parts=parts,
        models={"AMP1": make_model()},
    )


def make_response() -> ResponseTable:
    """A resonance with a gain of 5e5, on a wide and a close grid."""
    wide = np.geomspace(CENTER / 1000, CENTER * 1000, 60)
    close = CENTER * np.linspace(0.8, 1.2, 41)
    frequency = np.union1d(wide, close)
    s, omega = 2j * np.pi * frequency, 2 * np.pi * CENTER
    damping = 2 * np.pi * BANDWIDTH
    gain = -5e5 * damping * s / (s**2 + damping * s + omega**2)
    detuning = np.abs(frequency / CENTER - CENTER / frequency)
    return ResponseTable(frequency, gain, 1 / (damping / 2 + frequency), detuning <= 10 * BANDWIDTH / CENTER)


def make_verification(cautions: tuple[str, ...] = ("keep the input away from the output",)) -> Verification:
    """Findings on it."""
    response = make_response()
    return Verification(
        response=response,
        noise=NoiseTable(
            frequency=response.frequency,
            density=1e-6 / np.sqrt(1 + (response.frequency / CENTER) ** 2),
            output_rms=1 / 3e3,
            inband_rms=1 / 7e3,
            input_density_at_center=7e-13 / 3,
            smallest_reading_snr_db=31.4159265358979,
            contributors=(Contributor("R_sensor", 1e-6 / 3, 1e-4 / 3), Contributor("U1A voltage noise", 1e-7, 1e-5)),
        ),
        realized=Realized(
            center_frequency=100.0123456789e3,
            bandwidth=5.0123e3,
            low_edge=97.5e3,
            high_edge=102.6e3,
            gain_db=113.97,
            voltage_gain_db=87.95,
            poles=(complex(-15e3 / 7, 628e3), complex(-15e3 / 7, -628e3), complex(-6283.0, 0.0)),
        ),
        sensor_model=SensorModel((complex(-301592.894745, 0.0),), (0j,), 0.9015, 0.0),
        stages=(
            StageResult("gain 1", 100.8, None, None, 0.036, 0.21, 71.3),
            StageResult("bandpass 1", -19.9, 100.01e3, 19.95, 1.0, 1.41421356237, None),
        ),
        requirements=(
            Requirement("gain", "V/A", 4.9e5, 5.1e5, 5.0e5, 4.95e5, 5.05e5, 5e3, True),
            Requirement("reject 300 kHz", "dB", at_least=60.0, nominal=57.0, margin=-3.0, met=False, note="by it"),
            Requirement("ripple", "dB", at_most=0.5, nominal=0.1, margin=0.4, met=True),
            Requirement("settling", "s", note="not judged yet"),
        ),
        cautions=cautions,
    )


def make_record(title: str = "Pickup-coil channel", note: str = "") -> DesignRecord:
    """The whole."""
    spec = make_spec(title)
    return DesignRecord(
        spec=spec,
        seed=7,
        inputs={"spec.toml": "b" * 64, "op_amps.toml": "a" * 64},
        chain=make_chain(spec, note),
        family="synchronous",
        order=1,
        verification=make_verification(),
        candidates=(
            Candidate("synchronous, order 1, AMP1", True),
            Candidate("butterworth, order 2, AMP1", False, "bandwidth", "-200 Hz"),
        ),
    )
