"""From a design to its design.json."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import fields

import numpy as np

from synth.errors import FolderError, QuantityError
from synth.folder.builds import encode_builds
from synth.folder.document import DESIGN_FILE, Document, plain, to_text
from synth.folder.seal import seal_of
from synth.folder.structure import UNITS, chain_problem, line_problem
from synth.model.chain import Chain, Stage
from synth.model.judgement import NoiseTable, Realized, Requirement, ResponseTable, SensorModel, StageResult
from synth.model.part import Part
from synth.model.record import VERSION, Candidate, DesignRecord
from synth.quantity import rkm
from synth.spec import spec_to_dict

Table = dict[str, object]


def encode(record: DesignRecord) -> Document:
    """A design as the document of design.json, sealed.

    Raises:
        FolderError: a number that is not finite, a text of more than one line, or a chain that does not fit together.
    """
    _check(record)
    chain, found = record.chain, record.verification
    results = {result.name: result for result in found.stages}
    raw: Table = {
        "version": VERSION,
        "title": record.spec.title,
        "seed": record.seed,
        "spec": spec_to_dict(record.spec),
        "input_unit": record.spec.sensor.input_unit,
        "inputs": dict(sorted(record.inputs.items())),
        "family": record.family,
        "order": record.order,
        "chain": _chain(chain),
        "models": {name: _figures(chain.models[name]) for name in sorted(chain.models)},
        "sensor_model": _sensor_model(found.sensor_model),
        "stages": [_stage(stage, results[stage.name]) for stage in chain.stages],
        "parts": [_part(part) for part in chain.parts],
        "response": _response(found.response),
        "realized": _realized(found.realized),
        "noise": _noise(found.noise),
        "requirements": [_requirement(requirement) for requirement in found.requirements],
        "builds": encode_builds(found.builds),
        "layout": [_figures(demand) for demand in found.layout],
        "candidates": [_candidate(candidate) for candidate in record.candidates],
        "cautions": list(found.cautions),
    }
    document = plain(raw, DESIGN_FILE)
    if not isinstance(document, dict):  # plain keeps a mapping a mapping
        raise FolderError(f"{DESIGN_FILE}: could not be put together")
    _check_texts({key: value for key, value in document.items() if key != "spec"}, "")
    document["seal"] = seal_of(document)
    return document


def to_json(record: DesignRecord) -> str:
    """A design as the text of design.json; the same design gives the same text.

    Raises:
        FolderError: as `encode`.
    """
    return to_text(encode(record))


def _check(record: DesignRecord) -> None:
    """What is recorded must give the same design back."""
    problem = chain_problem(record.chain)
    if problem:
        raise FolderError(f"{DESIGN_FILE}: {problem}")
    if record.chain.sensor != record.spec.sensor:
        raise FolderError(f"{DESIGN_FILE}: the chain's sensor is not that of the spec; put it into the spec as well")
    stages = [stage.name for stage in record.chain.stages]
    results = [result.name for result in record.verification.stages]
    if sorted(stages) != sorted(results):
        raise FolderError(f"{DESIGN_FILE}: stages {stages} have the results of {results}; verify this chain")
    table, noise = record.verification.response, record.verification.noise
    for key, columns in (
        ("response", (table.frequency, table.gain, table.group_delay, table.close)),
        ("noise", (noise.frequency, noise.density)),
    ):
        if len({len(column) for column in columns}) != 1 or not len(columns[0]):
            raise FolderError(f"{DESIGN_FILE}: {key}: its columns are empty or differ in length; compute them anew")
    for name, model in record.chain.models.items():
        if model.type != name:
            raise FolderError(f"{DESIGN_FILE}: models: the figures of {name} are those of {model.type}; correct them")


def _check_texts(value: object, path: str) -> None:
    """Refuse text that is not one printable line: reading refuses it too."""
    if isinstance(value, str) and (problem := line_problem(value)):
        raise FolderError(f"{DESIGN_FILE}: {path}: {problem}")
    if isinstance(value, dict):
        for key, entry in value.items():
            _check_texts(key, f"{path}.{key!a}")
            _check_texts(entry, f"{path}.{key}" if path else str(key))
    if isinstance(value, list):
        for k, entry in enumerate(value):
            _check_texts(entry, f"{path}[{k}]")


def _number(value: float | None) -> float | None:
    """A figure as a float: one that happens to be whole is written as any other."""
    return None if value is None else float(value)


def _figures(record: object) -> Table:
    """The fields of a flat record in their order, whole numbers among them as floats."""
    table: Table = {}
    for field in fields(record):  # type: ignore[arg-type]  # called with dataclasses only
        value = getattr(record, field.name)
        table[field.name] = float(value) if type(value) is int else value
    return table


def _chain(chain: Chain) -> Table:
    return {
        "center_frequency": float(chain.center_frequency),
        "ambient": float(chain.ambient),
        "load_resistance": _number(chain.load_resistance),
        "load_capacitance": float(chain.load_capacitance),
    }


def _sensor_model(model: SensorModel) -> Table:
    return {
        "poles": _complexes(model.poles),
        "zeros": _complexes(model.zeros),
        "gain_at_center": float(model.gain_at_center),
        "residual": float(model.residual),
    }


def _complexes(values: tuple[complex, ...]) -> list[complex]:
    return [complex(value) for value in values]


def _stage(stage: Stage, result: StageResult) -> Table:
    return {
        "name": stage.name,
        "kind": stage.kind,
        "topology": stage.topology,
        "gain": float(result.gain),
        "center_frequency": _number(result.center_frequency),
        "q": _number(result.q),
        "target": _figures(stage.target),
        "op_amp": stage.op_amp,
        "input_node": stage.input_node,
        "test_point": stage.output_node,
        "level": float(result.level),
        "peak": float(result.peak),
        "phase_margin": _number(result.phase_margin),
        "parts": list(stage.parts),
    }


def _part(part: Part) -> Table:
    return {
        "ref": part.ref,
        "kind": part.kind,
        "role": part.role,
        "nodes": list(part.nodes),
        "value": part.value if isinstance(part.value, str) else float(part.value),
        "unit": UNITS[part.kind],
        "code": _code(part),
        "tolerance": float(part.tolerance),
        "temperature_coefficient": float(part.temperature_coefficient),
        "common_share": float(part.common_share),
        "stage": part.stage,
        "technology": part.technology,
        "stray": float(part.stray),
        "loss_tangent": float(part.loss_tangent),
        "size": part.size,
        "rating": part.rating,
        "note": part.note,
    }


def _code(part: Part) -> str:
    """IEC 60062 code of a value, or the type number of an op amp."""
    if isinstance(part.value, str) or part.kind == "op-amp":
        return str(part.value)
    try:
        return rkm(part.value, part.kind)
    except QuantityError as error:
        raise FolderError(f"{DESIGN_FILE}: {part.ref}: value = {error}") from error


def _response(table: ResponseTable) -> Table:
    with np.errstate(divide="ignore", invalid="ignore"):  # a gain of zero is refused when it is made plain
        gain_db, phase_deg = table.gain_db, table.phase_deg
    return {
        "frequency": table.frequency,
        "gain_db": gain_db,
        "phase_deg": phase_deg,
        "group_delay": table.group_delay,
        "close": table.close,
    }


def _realized(realized: Realized) -> Table:
    return _figures(realized) | {"poles": _complexes(realized.poles)}


def _noise(noise: NoiseTable) -> Table:
    return _figures(noise) | {"contributors": [_figures(contributor) for contributor in noise.contributors]}


def _requirement(requirement: Requirement) -> Table:
    """`limit` says both sides in one: a number where one is free, a pair, or nothing."""
    low, high = _number(requirement.at_least), _number(requirement.at_most)
    limit: object = low if high is None else high if low is None else [low, high]
    figures = _figures(requirement)
    head: Mapping[str, object] = {"name": figures.pop("name"), "limit": limit}
    return {**head, **figures}


def _candidate(candidate: Candidate) -> Table:
    return {
        "description": candidate.description,
        "chosen": bool(candidate.chosen),
        "lost_on": candidate.lost_on,
        "shortfall": candidate.shortfall,
    }
