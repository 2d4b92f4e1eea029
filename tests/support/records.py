"""A plausible finished design, made by hand: what outputs and the folder can be tried on without an engine.

A pickup coil whose response falls below 48 kHz, a pre-emphasis, two gain stages and two bandpass sections around
100 kHz, 5 kHz wide.  Some requirements are missed, some are not judged; one op amp package has a spare amplifier.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

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
from synth.spec import Reject, Rolloff, Sensor, Settling, Spec, Supply, Target

CENTER = 100e3
BANDWIDTH = 5e3
SECTIONS = ((98.05e3, 25.1), (102.08e3, 25.3))  # realized centre [Hz] and Q
GAIN = 5.03e5  # [V/A] at the centre
LONG = "a very long name that nobody would give a thing unless to see what becomes of the line that carries it "


def spec(title: str = "Pickup-coil channel of a sheet-resistance gauge") -> Spec:
    """What was asked of it."""
    target = Target(
        center_frequency=CENTER,
        bandwidth=BANDWIDTH,
        full_scale=2e-6,
        smallest=100e-9,
        output=1.0,
        accuracy=0.03,
        signal_to_noise=20.0,
        group_delay_variation=30e-6,
        settling=Settling(within=2e-3, to=0.01),
        reject=(Reject(frequency=300e3, by=60.0), Reject(frequency=50e3, by=56.0)),
    )
    sensor = Sensor(
        scale=20.0, input_unit="A", resistance=25.0, noise=0.7e-9, rolloff=(Rolloff("high-pass", corner=48e3),)
    )
    return Spec(title=title, target=target, sensor=sensor, supply=Supply(positive=5.0, negative=-5.0))


def op_amp(type_: str, packages: tuple[tuple[int, str], ...]) -> OpAmp:
    """Figures of a fast bipolar op amp under any type number."""
    return OpAmp(
        type=type_,
        technology="bipolar",
        gain_bandwidth=65e6,
        dc_gain=30e3,
        second_pole=120e6,
        output_resistance=40.0,
        input_capacitance_differential=1e-12,
        input_capacitance_common=2e-12,
        voltage_noise=0.9e-9,
        voltage_noise_corner=50.0,
        current_noise=2.4e-12,
        current_noise_corner=300.0,
        current_noise_slope=0.0,
        minimum_noise_gain=1.0,
        slew_rate=55e6,
        swing_headroom_high=1.1,
        swing_headroom_low=1.1,
        common_mode_headroom_high=1.2,
        common_mode_headroom_low=1.2,
        output_current=40e-3,
        offset_voltage=20e-6,
        offset_voltage_max=125e-6,
        bias_current=100e-9,
        supply_minimum=9.0,
        supply_maximum=33.0,
        supply_current=8e-3,
        gain_bandwidth_spread=0.3,
        dc_gain_spread=0.5,
        stray_output_to_inverting=0.1e-12,
        stray_inverting_to_ground=2e-12,
        packages=packages,
    )


def _resistor(ref: str, value: float, role: str, stage: str, nodes: tuple[str, str]) -> Part:
    return Part(ref, "resistor", role, stage, nodes, value, 0.01, 50e-6, "thin film", 0.04e-12, 0.0, "0603", "0.1 W")


def _capacitor(ref: str, value: float, role: str, stage: str, nodes: tuple[str, str]) -> Part:
    return Part(ref, "capacitor", role, stage, nodes, value, 0.01, 30e-6, "C0G", 0.0, 1e-4, "0603", "50 V")


def _amplifier(ref: str, type_: str, stage: str, nodes: tuple[str, str, str]) -> Part:
    return Part(ref, "op-amp", "amplifier", stage, nodes, type_, technology="bipolar")


def _gain_parts(stage: str, first: int, amplifier: Part, feedback: float, ground: float) -> tuple[Part, ...]:
    _, minus, out = amplifier.nodes
    return (
        _resistor(f"R{first}", feedback, "feedback resistor", stage, (out, minus)),
        _resistor(f"R{first + 1}", ground, "gain resistor", stage, (minus, "0")),
        amplifier,
    )


def _section_parts(stage: str, first: int, capacitor: int, amplifier: Part, node: str) -> tuple[Part, ...]:
    _, minus, out = amplifier.nodes
    middle = f"{stage.replace(' ', '')}_m"
    return (
        _resistor(f"R{first}", 12.4e3, "input resistor", stage, (node, middle)),
        _resistor(f"R{first + 1}", 28.7 + first, "tuning resistor, to ground", stage, (middle, "0")),
        _resistor(f"R{first + 2}", 88.7e3, "feedback resistor", stage, (out, minus)),
        _capacitor(f"C{capacitor}", 1e-9, "capacitor to output", stage, (middle, out)),
        _capacitor(f"C{capacitor + 1}", 1e-9, "capacitor to input", stage, (middle, minus)),
        amplifier,
    )


def chain(asked: Spec) -> Chain:
    """Four stages, three op amp packages: one single, one full dual, one dual with a spare."""
    amplifiers = (
        _amplifier("U1", "AD797", "gain 1", ("in", "n1", "s1")),
        _amplifier("U2A", "LM4562", "gain 2", ("s1", "n2", "s2")),
        _amplifier("U2B", "LM4562", "bandpass 1", ("0", "n3", "s3")),
        _amplifier("U10A", "LM4562", "bandpass 2", ("0", "n4", "out")),
    )
    parts = (
        _gain_parts("gain 1", 1, amplifiers[0], 3.01e3, 28.7),
        _gain_parts("gain 2", 3, amplifiers[1], 2.49e3, 38.3),
        _section_parts("bandpass 1", 5, 1, amplifiers[2], "s2"),
        _section_parts("bandpass 2", 8, 3, amplifiers[3], "s3"),
    )
    targets = (
        StageTarget(105.0),
        StageTarget(66.0, pre_emphasis=1.109),
        StageTarget(2.0, 1.0, 98.25e3, 28.3),
        StageTarget(2.0, 1.0, 101.78e3, 28.3),
    )
    names = (("gain 1", "gain"), ("gain 2", "pre-emphasis"), ("bandpass 1", "bandpass"), ("bandpass 2", "bandpass"))
    stages = tuple(
        Stage(
            name,
            kind,  # type: ignore[arg-type]
            "multiple-feedback" if kind == "bandpass" else "non-inverting",
            target,
            str(amplifier.value),
            "in",
            amplifier.nodes[2],
            tuple(part.ref for part in group),
        )
        for (name, kind), target, amplifier, group in zip(names, targets, amplifiers, parts, strict=True)
    )
    models = {
        "AD797": op_amp("AD797", ((1, "AD797ARZ"),)),
        "LM4562": op_amp("LM4562", ((2, "LM4562MA"),)),
    }
    flat = tuple(part for group in parts for part in group)
    return Chain(CENTER, 27.0, asked.sensor, None, 0.0, stages, flat, models)


def _gain(f: NDArray[np.float64]) -> NDArray[np.complex128]:
    """Sensor high-pass, two pole pairs, two amplifiers that fall at 3 MHz; V per input unit."""
    s = 1j * f
    h = s / (s + 48e3) / (1 + s / 3e6) ** 2
    for f0, q in SECTIONS:
        h = h * (s * f0 / q) / (s**2 + s * f0 / q + f0**2)
    return np.asarray(h, dtype=np.complex128)


def response() -> ResponseTable:
    """Wide and close grid, merged, the centre among them."""
    half = np.linspace(-5, 5, 601) * BANDWIDTH / CENTER
    close = CENTER * (half + np.sqrt(1 + half**2))
    f = np.unique(np.round(np.concatenate([np.geomspace(CENTER / 1e3, CENTER * 1e3, 481), close]), 6))
    scale = GAIN / abs(_gain(np.array([CENTER]))[0])
    step = 1e-5 * f
    turn = np.angle(_gain(f + step) / _gain(f - step))
    return ResponseTable(f, scale * _gain(f), -turn / (4 * np.pi * step), np.abs(f / CENTER - CENTER / f) <= 0.5)


def realized(table: ResponseTable) -> Realized:
    """First -3 dB crossings outward, interpolated between the points of the table."""
    middle = int(np.argmin(np.abs(table.frequency - CENTER)))
    level = table.gain_db - table.gain_db[middle] + 10 * math.log10(2)
    up = middle + int(np.flatnonzero(level[middle:] < 0)[0])
    down = int(np.flatnonzero(level[:middle] < 0)[-1])
    high = float(np.interp(0, [level[up], level[up - 1]], [table.frequency[up], table.frequency[up - 1]]))
    low = float(np.interp(0, [level[down], level[down + 1]], [table.frequency[down], table.frequency[down + 1]]))
    poles = tuple(
        2 * math.pi * f0 * complex(-1 / (2 * q), sign * math.sqrt(1 - 1 / (4 * q * q)))
        for f0, q in SECTIONS
        for sign in (1, -1)
    )
    gain_db = 20 * math.log10(GAIN)
    return Realized(math.sqrt(low * high), high - low, low, high, gain_db, gain_db - 20 * math.log10(20.0), poles)


def noise(table: ResponseTable) -> NoiseTable:
    """White noise through the chain on a floor of the last stage, shared out among named parts."""
    density = np.hypot(np.abs(table.gain) * 5.8e-11, 40e-9)
    labels = ("sensor", "U1 voltage noise", "R2", "U1 current noise -", "U2A voltage noise", "R4", "R5", LONG + "R8")
    powers = (0.42, 0.33, 0.11, 0.06, 0.04, 0.02, 0.019, 0.001)
    total = 2.34e-3
    sources = tuple(
        Contributor(label, math.sqrt(power) * 2.9e-5, math.sqrt(power) * total)
        for label, power in zip(labels, powers, strict=True)
    )
    return NoiseTable(table.frequency, density, 2.46e-3, total, 5.8e-11, 26.7, sources)


RESPONSE = response()
REALIZED = realized(RESPONSE)
_CENTRAL = RESPONSE.group_delay[np.abs(RESPONSE.frequency - CENTER) <= BANDWIDTH / 4]
VARIATION = float(_CENTRAL.max() - _CENTRAL.min())
REQUIREMENTS = (
    Requirement("output at full scale", "V", 0.97, 1.03, 1.006, margin=0.024, met=True),
    Requirement("bandwidth", "Hz", 4500.0, 5500.0, REALIZED.bandwidth, margin=5500 - REALIZED.bandwidth, met=False),
    Requirement(
        "center frequency",
        "Hz",
        98.75e3,
        101.25e3,
        REALIZED.center_frequency,
        margin=101.25e3 - REALIZED.center_frequency,
        met=True,
    ),
    Requirement("reject 300 kHz", "dB", at_least=60.0, nominal=71.42, margin=11.42, met=True),
    Requirement("reject 50 kHz", "dB", at_least=56.0, nominal=54.83, margin=-1.17, met=False),
    Requirement("group delay variation", "s", at_most=30e-6, nominal=VARIATION, margin=30e-6 - VARIATION, met=True),
    Requirement("signal to noise", "dB", 20.0, None, 26.7, margin=6.7, met=True, note="at the smallest reading"),
    Requirement("output swing", "V", None, 3.9, 2.31, margin=1.59, met=True, note="peak at U10A"),
    Requirement("slew rate", "V/s", None, 55e6, 1.45e6, margin=53.55e6, met=True, note="at U10A"),
    Requirement("phase margin", "deg", 45.0, None, 61.0, margin=16.0, met=True, note="of U1"),
    Requirement("accuracy", "%", at_most=3.0, note="after calibration, at full scale"),
    Requirement("yield", "", note="share of builds that meet everything"),
    Requirement("settling", "s", note="of the envelope after a step"),
)


def verification() -> Verification:
    """What the judges would say about it."""
    results = (
        StageResult("gain 1", 105.9, None, None, 3.82e-3, 8.1e-3, 74.0),
        StageResult("gain 2", 66.01, None, None, 0.252, 0.61, 61.0),
        StageResult("bandpass 1", -2.02, *SECTIONS[0], 0.504, 0.93, 68.0),
        StageResult("bandpass 2", -1.99, *SECTIONS[1], 1.006, 2.31, None),
    )
    cautions = (
        "88 dB of gain at 100 kHz: the layout is part of the circuit; keep output and input apart, give each stage "
        "its own decoupling",
        "figures are of the nominal build; tolerances are not in them",
    )
    sensor = SensorModel((complex(-2 * math.pi * 48e3),), (0j,), 0.9015, 0.0)
    return Verification(RESPONSE, noise(RESPONSE), REALIZED, sensor, results, REQUIREMENTS, cautions)


def record(title: str = "Pickup-coil channel of a sheet-resistance gauge") -> DesignRecord:
    """The finished design."""
    asked = spec(title)
    candidates = (
        Candidate("butterworth, 2 sections, AD797 + LM4562, gain 105 x 66 x 4", True, "bandwidth", "-142 Hz"),
        Candidate("synchronous, 2 sections, AD797 + LM4562, gain 105 x 66 x 4", False, "reject 50 kHz", "-3.4 dB"),
        Candidate("butterworth, 3 sections, LM4562 throughout, gain 80 x 87 x 4", False, "signal to noise", "-0.4 dB"),
    )
    inputs = {"spec.toml": "0" * 64, "op_amps.toml": "1" * 64}
    return DesignRecord(asked, 1, inputs, chain(asked), "butterworth", 2, verification(), candidates)


def long_record() -> DesignRecord:
    """The same with every text far too long for a line, and not in ASCII."""
    plain = record("\u201cPr\u00fcfger\u00e4t\u201d \u2013 " + LONG + LONG[:60])
    judged = plain.verification
    names = {stage.name: f"{stage.name} {LONG}" for stage in plain.chain.stages}
    stages = tuple(replace(s, name=names[s.name], topology=LONG, op_amp=s.op_amp) for s in plain.chain.stages)
    parts = tuple(replace(p, role=f"{p.role} {LONG}", stage=names[p.stage]) for p in plain.chain.parts)
    requirements = tuple(replace(r, name=f"{r.name} {LONG}", note=LONG.replace(" ", "_")) for r in judged.requirements)
    ranged = tuple(replace(r, low=0.9 * r.nominal, high=1.1 * r.nominal) if r.nominal else r for r in requirements)
    found = replace(
        judged,
        stages=tuple(replace(result, name=names[result.name]) for result in judged.stages),
        requirements=ranged,
        cautions=(LONG * 3, "\u26a0 5 \u00b5V \u2264 6 \u03a9"),
    )
    candidates = tuple(Candidate(LONG * 2, k == 0, LONG, "-1 dB") for k in range(9))
    chain_ = replace(plain.chain, stages=stages, parts=parts)
    return replace(plain, chain=chain_, verification=found, candidates=candidates)
