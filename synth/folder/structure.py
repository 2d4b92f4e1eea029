"""What makes a chain whole: references, nodes, types and stages that fit together.

Names that end up in a netlist have a grammar of their own; every other text is one printable line.
"""

from __future__ import annotations

import re
from collections.abc import Iterable

from synth.model.chain import Chain, Stage
from synth.model.part import Part
from synth.quantity import show
from synth.spec.checks import text_problem

REFERENCE = re.compile(r"[A-Z]{1,3}[0-9]{1,6}[A-Z]?")  # IEEE 315 letters, a number, the unit of a package
NODE = re.compile(r"[A-Za-z0-9_]{1,40}")
NODE_COUNTS = {"resistor": 2, "capacitor": 2, "op-amp": 3}
UNITS = {"resistor": "ohm", "capacitor": "F", "op-amp": ""}
TEXT_LIMIT = 1000
_SHOWN = 5


def line_problem(text: str) -> str:
    """What keeps a text from being one printable line, "" if nothing; an empty one is allowed."""
    return text_problem(text, TEXT_LIMIT) if text else ""


def chain_problem(chain: Chain) -> str:
    """What keeps a chain from being built, as "key: bound; remedy", "" if nothing."""
    problem = _parts_problem(chain)
    return problem or _stages_problem(chain)


def _parts_problem(chain: Chain) -> str:
    seen: dict[str, int] = {}
    for k, part in enumerate(chain.parts):
        problem = _part_problem(part, chain)
        if problem:
            return f"parts[{k}]{problem}"
        if part.ref in seen:
            return f"parts[{k}].ref = {show(part.ref)}: stands at parts[{seen[part.ref]}] too; give each its own"
        seen[part.ref] = k
    return ""


def _part_problem(part: Part, chain: Chain) -> str:
    if not REFERENCE.fullmatch(part.ref):
        return f'.ref = {show(part.ref)}: is no reference designator; write letters and a number, such as "R3"'
    wanted = NODE_COUNTS[part.kind]
    if len(part.nodes) != wanted:
        return f".nodes: {part.ref} has {len(part.nodes)} nodes, its kind {part.kind} needs {wanted}; correct them"
    for node in part.nodes:
        if not NODE.fullmatch(node):
            return f".nodes: {show(node)} is no node name (1 to 40 letters, digits, underscores); correct it"
    if part.kind == "op-amp":
        if part.value not in chain.models:
            return f".value = {show(part.value)}: has no figures under models; {_known(chain.models)}"
    elif isinstance(part.value, str) or part.value <= 0:
        return f".value = {show(part.value)}: must be a number above zero [{UNITS[part.kind]}]; correct it"
    return ""


def _stages_problem(chain: Chain) -> str:
    owners = {part.ref: part.stage for part in chain.parts}
    names: set[str] = set()
    for k, stage in enumerate(chain.stages):
        problem = _stage_problem(stage, chain, owners)
        if problem:
            return f"stages[{k}]{problem}"
        if stage.name in names:
            return f"stages[{k}].name = {show(stage.name)}: another stage has it; give each its own"
        names.add(stage.name)
    for k, part in enumerate(chain.parts):
        if part.stage not in names:
            return f"parts[{k}].stage = {show(part.stage)}: no such stage among the stages; {_known(names)}"
        if not any(part.ref in stage.parts for stage in chain.stages if stage.name == part.stage):
            return f"parts[{k}].ref = {show(part.ref)}: its stage does not list it; add it there or remove the part"
    return ""


def _stage_problem(stage: Stage, chain: Chain, owners: dict[str, str]) -> str:
    for key, node in (("input_node", stage.input_node), ("test_point", stage.output_node)):
        if not NODE.fullmatch(node):
            return f".{key} = {show(node)}: is no node name (1 to 40 letters, digits, underscores); correct it"
    if stage.op_amp and stage.op_amp not in chain.models:
        return f".op_amp = {show(stage.op_amp)}: has no figures under models; {_known(chain.models)}"
    for ref in stage.parts:
        if ref not in owners:
            return f".parts: {show(ref)} is not among the parts; {_known(owners)}"
        if owners[ref] != stage.name:
            return f".parts: {ref} says that it belongs to stage {show(owners[ref])}; correct one of the two"
    if len(set(stage.parts)) != len(stage.parts):
        return ".parts: names a part twice; remove one of them"
    return ""


def _known(names: Iterable[str]) -> str:
    listed = list(names)
    more = ", ..." if len(listed) > _SHOWN else ""
    return f"known: {', '.join(show(name) for name in listed[:_SHOWN])}{more}" if listed else "there is none"
