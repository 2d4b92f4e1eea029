"""From design.json to a design.

A part's `value` is what counts: `code`, `unit`, `title`, `input_unit` and `limit` repeat what stands elsewhere, for
people and scripts, and are not read.
"""

from __future__ import annotations

from pathlib import Path
from typing import get_args

import numpy as np

from synth.errors import FolderError, SpecError
from synth.folder.builds import DEMAND, decode_builds, decode_demand
from synth.folder.document import DESIGN_FILE, Document, load_document, named
from synth.folder.migrate import migrate
from synth.folder.reader import Node
from synth.folder.recovery import locate, recover
from synth.folder.structure import NODE_COUNTS, chain_problem, line_problem
from synth.model.chain import Chain, Stage, StageKind, StageTarget
from synth.model.judgement import (
    Contributor,
    FloatArray,
    NoiseTable,
    Realized,
    Requirement,
    ResponseTable,
    SensorModel,
    StageResult,
    Verification,
)
from synth.model.part import OpAmp, Part, PartKind
from synth.model.record import Candidate, DesignRecord
from synth.quantity import show
from synth.spec import Spec, spec_from_dict

ABSOLUTE_ZERO = -273.15  # [degC]
STAGE_KINDS: dict[str, StageKind] = {kind: kind for kind in get_args(StageKind)}
PART_KINDS: dict[str, PartKind] = {"resistor": "resistor", "capacitor": "capacitor", "op-amp": "op-amp"}

TOP = (
    "version", "title", "seed", "spec", "input_unit", "inputs", "family", "order", "chain", "models", "sensor_model",
    "stages", "parts", "response", "realized", "noise", "requirements", "builds", "layout",
    "candidates", "cautions", "seal",
)  # fmt: skip
CHAIN = ("center_frequency", "ambient", "load_resistance", "load_capacitance")
MODEL_ABOVE_ZERO = ("gain_bandwidth", "dc_gain", "output_resistance")
MODEL_NOT_BELOW_ZERO = (
    "input_capacitance_differential", "input_capacitance_common", "voltage_noise", "voltage_noise_corner",
    "current_noise", "current_noise_corner", "current_noise_slope", "minimum_noise_gain", "slew_rate",
    "gain_bandwidth_spread", "dc_gain_spread", "stray_output_to_inverting", "stray_inverting_to_ground",
)  # fmt: skip
MODEL_ANY = (
    "swing_headroom_high", "swing_headroom_low", "common_mode_headroom_high", "common_mode_headroom_low",
    "output_current", "offset_voltage", "offset_voltage_max", "bias_current", "supply_minimum", "supply_maximum",
    "supply_current",
)  # fmt: skip
MODEL = ("type", "technology", "second_pole", "packages", *MODEL_ABOVE_ZERO, *MODEL_NOT_BELOW_ZERO, *MODEL_ANY)
SENSOR_MODEL = ("poles", "zeros", "gain_at_center", "residual")
STAGE = (
    "name", "kind", "topology", "gain", "center_frequency", "q", "target", "op_amp", "input_node", "test_point",
    "level", "peak", "phase_margin", "parts",
)  # fmt: skip
TARGET = ("gain", "pre_emphasis", "center_frequency", "q")
PART = (
    "ref", "kind", "role", "nodes", "value", "unit", "code", "tolerance", "temperature_coefficient",
    "common_share", "stage",
    "technology", "stray", "loss_tangent", "size", "rating", "note",
)  # fmt: skip
RESPONSE = ("frequency", "gain_db", "phase_deg", "group_delay", "close")
REALIZED = ("center_frequency", "bandwidth", "low_edge", "high_edge", "gain_db", "voltage_gain_db", "poles")
NOISE = (
    "frequency", "density", "output_rms", "inband_rms", "input_density_at_center", "smallest_reading_snr_db",
    "contributors",
)  # fmt: skip
CONTRIBUTOR = ("label", "density", "inband_rms")
REQUIREMENT = (
    "name", "limit", "unit", "at_least", "at_most", "nominal", "low", "high", "margin", "met", "note",
)  # fmt: skip
CANDIDATE = ("description", "chosen", "lost_on", "shortfall")


def read_design(folder: Path | str) -> DesignRecord:
    """The design in a folder; what an interrupted writing left beside it is put in order first.

    Raises:
        FolderError: the folder holds no design that can be used; names file, key, value, bound and remedy.
    """
    place = locate(Path(folder))
    recover(place)
    return decode(load_document(place), named(place / DESIGN_FILE), place)


def decode(document: Document, source: str = DESIGN_FILE, folder: Path | None = None) -> DesignRecord:
    """The design in a document of design.json, of this version or an older one.

    Args:
        document: as `encode` makes it, or as it was read from JSON; edited part values are taken as they stand.
        source: the file, for messages.
        folder: what file names in the spec are relative to; None for the working folder.

    Raises:
        FolderError: anything in it that cannot be used.
    """
    top = Node(source, "", migrate(document, source))
    top.expect(TOP)
    for key in ("title", "input_unit", "seal"):
        top.text(key)
    spec = _spec(top, folder)
    chain = _chain(top, spec)
    problem = chain_problem(chain)
    if problem:
        raise FolderError(f"{source}: {problem}")
    return DesignRecord(
        spec=spec,
        seed=top.integer("seed"),
        inputs=_inputs(top.node("inputs")),
        chain=chain,
        family=top.text("family"),
        order=top.integer("order"),
        verification=_verification(top),
        candidates=tuple(_candidate(node) for node in top.nodes("candidates", CANDIDATE)),
    )


def _spec(top: Node, folder: Path | None) -> Spec:
    try:
        return spec_from_dict(dict(top.node("spec").table), f"{top.source}: spec", folder)
    except SpecError as error:
        raise FolderError(str(error)) from error


def _inputs(node: Node) -> dict[str, str]:
    for name in node.table:
        if problem := line_problem(name):
            raise FolderError(f"{node.source}: {node.path}: the name {show(name)} {problem}")
    return {name: node.text(name) for name in node.table}


def _chain(top: Node, spec: Spec) -> Chain:
    node = top.node("chain", CHAIN)
    models = top.node("models")
    return Chain(
        center_frequency=node.number("center_frequency", above=0),
        ambient=node.number("ambient", above=ABSOLUTE_ZERO),
        sensor=spec.sensor,
        load_resistance=node.optional("load_resistance", above=0),
        load_capacitance=node.number("load_capacitance", least=0),
        stages=tuple(_stage(stage) for stage in top.nodes("stages", STAGE)),
        parts=tuple(_part(part) for part in top.nodes("parts", PART)),
        models={name: _model(models, name) for name in models.table},
    )


def _model(models: Node, name: str) -> OpAmp:
    node = models.node(name, MODEL)
    if node.text("type") != name:
        node.fail("type", node.get("type"), f"must be the name it stands under, {name!a}")
    packages = node.get("packages")
    if not isinstance(packages, list) or not all(_is_package(entry) for entry in packages):
        node.fail("packages", packages, "must be a list of [amplifiers, type number]")
    above = {key: node.number(key, above=0) for key in MODEL_ABOVE_ZERO}
    least = {key: node.number(key, least=0) for key in MODEL_NOT_BELOW_ZERO}
    figures = above | least | {key: node.number(key) for key in MODEL_ANY}
    return OpAmp(
        type=name,
        technology=node.text("technology"),
        second_pole=node.optional("second_pole", above=0),
        packages=tuple((count, order) for count, order in packages),
        **figures,
    )


def _is_package(entry: object) -> bool:
    if not isinstance(entry, list) or len(entry) != 2:
        return False
    count, order = entry
    return isinstance(count, int) and not isinstance(count, bool) and count > 0 and isinstance(order, str)


def _stage(node: Node) -> Stage:
    target = node.node("target", TARGET)
    return Stage(
        name=node.text("name"),
        kind=STAGE_KINDS[node.text("kind", STAGE_KINDS)],
        topology=node.text("topology"),
        target=StageTarget(
            gain=target.number("gain"),
            pre_emphasis=target.number("pre_emphasis"),
            center_frequency=target.optional("center_frequency", above=0),
            q=target.optional("q", above=0),
        ),
        op_amp=node.text("op_amp"),
        input_node=node.text("input_node"),
        output_node=node.text("test_point"),
        parts=node.texts("parts"),
    )


def _part(node: Node) -> Part:
    kind = PART_KINDS[node.text("kind", NODE_COUNTS)]
    for key in ("unit", "code"):
        node.text(key)
    return Part(
        ref=node.text("ref"),
        kind=kind,
        role=node.text("role"),
        stage=node.text("stage"),
        nodes=node.texts("nodes"),
        value=node.text("value") if kind == "op-amp" else node.number("value", above=0),
        tolerance=node.number("tolerance", least=0, below=1),
        temperature_coefficient=node.number("temperature_coefficient"),
        common_share=node.number("common_share", least=0),
        technology=node.text("technology"),
        stray=node.number("stray", least=0),
        loss_tangent=node.number("loss_tangent", least=0),
        size=node.text("size"),
        rating=node.text("rating"),
        note=node.text("note"),
    )


def _verification(top: Node) -> Verification:
    model = top.node("sensor_model", SENSOR_MODEL)
    realized = top.node("realized", REALIZED)
    return Verification(
        response=_response(top.node("response", RESPONSE)),
        noise=_noise(top.node("noise", NOISE)),
        realized=Realized(
            center_frequency=realized.number("center_frequency", above=0),
            bandwidth=realized.number("bandwidth", least=0),
            low_edge=realized.number("low_edge", least=0),
            high_edge=realized.number("high_edge", least=0),
            gain_db=realized.number("gain_db"),
            voltage_gain_db=realized.number("voltage_gain_db"),
            poles=realized.complexes("poles"),
        ),
        sensor_model=SensorModel(
            poles=model.complexes("poles"),
            zeros=model.complexes("zeros"),
            gain_at_center=model.number("gain_at_center"),
            residual=model.number("residual", least=0),
        ),
        stages=tuple(_stage_result(stage) for stage in top.nodes("stages", STAGE)),
        requirements=tuple(_requirement(node) for node in top.nodes("requirements", REQUIREMENT)),
        cautions=top.texts("cautions"),
        builds=decode_builds(top),
        layout=tuple(decode_demand(node) for node in top.nodes("layout", DEMAND)),
    )


def _stage_result(node: Node) -> StageResult:
    return StageResult(
        name=node.text("name"),
        gain=node.number("gain"),
        center_frequency=node.optional("center_frequency", above=0),
        q=node.optional("q"),
        level=node.number("level", least=0),
        peak=node.number("peak", least=0),
        phase_margin=node.optional("phase_margin"),
    )


def _response(node: Node) -> ResponseTable:
    """The complex gain from decibels and phase: 10^(dB/20) e^(j phase)."""
    frequency = node.numbers("frequency", least=0)
    columns = {key: node.numbers(key) for key in ("gain_db", "phase_deg", "group_delay")}
    close = node.truths("close")
    _check_columns(node, frequency, {key: len(column) for key, column in columns.items()} | {"close": len(close)})
    with np.errstate(over="ignore", invalid="ignore"):
        phase = 1j * np.radians(columns["phase_deg"])
        gain = (10 ** (columns["gain_db"] / 20) * np.exp(phase)).astype(np.complex128)
    if not np.all(np.isfinite(gain) & (gain != 0)):
        node.fail("gain_db", node.get("gain_db"), "holds a level beyond what a number can hold")
    return ResponseTable(frequency=frequency, gain=gain, group_delay=columns["group_delay"], close=close)


def _noise(node: Node) -> NoiseTable:
    frequency, density = node.numbers("frequency", least=0), node.numbers("density", least=0)
    _check_columns(node, frequency, {"density": len(density)})
    contributors = node.nodes("contributors", CONTRIBUTOR)
    return NoiseTable(
        frequency=frequency,
        density=density,
        output_rms=node.number("output_rms", least=0),
        inband_rms=node.number("inband_rms", least=0),
        input_density_at_center=node.number("input_density_at_center", least=0),
        smallest_reading_snr_db=node.number("smallest_reading_snr_db"),
        contributors=tuple(
            Contributor(one.text("label"), one.number("density", least=0), one.number("inband_rms", least=0))
            for one in contributors
        ),
    )


def _check_columns(node: Node, frequency: FloatArray, lengths: dict[str, int]) -> None:
    """Every column as long as the frequencies, and these in order."""
    if not len(frequency):
        node.fail("frequency", [], "must not be empty")
    for key, length in lengths.items():
        if length != len(frequency):
            node.fail(key, node.get(key), f"has {length} entries and frequency {len(frequency)}, they must be as many")
    if np.any(np.diff(frequency) < 0):
        node.fail("frequency", node.get("frequency"), "must not fall")


def _requirement(node: Node) -> Requirement:
    node.get("limit")
    return Requirement(
        name=node.text("name"),
        unit=node.text("unit"),
        at_least=node.optional("at_least"),
        at_most=node.optional("at_most"),
        nominal=node.optional("nominal"),
        low=node.optional("low"),
        high=node.optional("high"),
        margin=node.optional("margin"),
        met=node.optional_truth("met"),
        note=node.text("note"),
    )


def _candidate(node: Node) -> Candidate:
    return Candidate(
        description=node.text("description"),
        chosen=node.truth("chosen"),
        lost_on=node.text("lost_on"),
        shortfall=node.text("shortfall"),
    )
