"""Stages on a terminal: one block a stage, what was asked beside what came out, and its parts."""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import zip_longest

from synth.model.chain import Stage
from synth.model.judgement import StageResult
from synth.model.part import Part
from synth.model.record import DesignRecord
from synth.output.bill import value_code
from synth.output.text import GAP, WIDTH, ascii_line, clip, flow, quantity_text, wrap

_INDENT = "   "
GAIN_UNITS = {"transimpedance": "ohm", "charge-amplifier": "V/C"}  # a factor for all others
_VALUE_WIDTH = 16
_COLUMN = 36


def stage_lines(record: DesignRecord) -> list[str]:
    """One block a stage, a blank line between: name, topology, op amp, realized and asked figures, parts."""
    results = {result.name: result for result in record.verification.stages}
    parts = {part.ref: part for part in record.chain.parts}
    refs = max((len(ref) for ref in parts), default=0)
    values = max((len(_code(part)) for part in parts.values()), default=0)
    lines: list[str] = []
    for number, stage in enumerate(record.chain.stages, start=1):
        if lines:
            lines.append("")
        lines += _heading(number, stage)
        lines += _figures(stage, results.get(stage.name))
        lines += _parts([parts[ref] for ref in stage.parts if ref in parts], refs, values)
    return lines


def _heading(number: int, stage: Stage) -> list[str]:
    pieces = [piece for piece in (stage.name, stage.topology, stage.op_amp) if piece]
    if stage.kind not in stage.name:
        pieces.insert(1, stage.kind)
    return wrap(", ".join(pieces), f"{number:<{len(_INDENT)}}")


def _figures(stage: Stage, result: StageResult | None) -> list[str]:
    target = stage.target
    if stage.kind == "reference":
        return [f"{_INDENT}carries {quantity_text(result.level if result else None, 'V', 3)} rms at full scale"]
    gain = result.gain if result else None
    unit = GAIN_UNITS.get(stage.topology)
    asked = math.copysign(target.gain, gain or 1.0)
    items = [_figure("gain", _gain(gain, unit), _gain(asked, unit))]
    if target.pre_emphasis != 1:
        items.append(f"pre-emphasis {_factor(target.pre_emphasis)}")
    if target.center_frequency is not None:
        realized = result.center_frequency if result else None
        items.append(_figure("f0", quantity_text(realized, "Hz", 5), quantity_text(target.center_frequency, "Hz", 5)))
    if target.q is not None:
        items.append(_figure("Q", _factor(result.q if result else None), _factor(target.q)))
    return flow(items, _INDENT)


def _figure(name: str, realized: str, asked: str) -> str:
    return f"{name} {realized} (asked {asked})"


def _gain(value: float | None, unit: str | None) -> str:
    return _factor(value) if unit is None else quantity_text(value, unit)


def _factor(value: float | None) -> str:
    return "-" if value is None else f"{value:.4g}"


def _parts(parts: Sequence[Part], refs: int, values: int) -> list[str]:
    """References, values and roles, in two columns where the roles are short enough, else one part a line."""
    heads = [f"{part.ref:<{refs}}  {_code(part):<{values}}  " for part in parts]
    cells = [head + ascii_line(part.role) for head, part in zip(heads, parts, strict=True)]
    half = (len(cells) + 1) // 2
    left = max((len(cell) for cell in cells[:half]), default=0)
    right = max((len(cell) for cell in cells[half:]), default=0)
    if len(_INDENT) + max(left, _COLUMN) + len(GAP) + right > WIDTH:
        return [line for head, part in zip(heads, parts, strict=True) for line in wrap(part.role, _INDENT + head)]
    pairs = zip_longest(cells[:half], cells[half:], fillvalue="")
    return [f"{_INDENT}{first:<{max(left, _COLUMN)}}{GAP}{second}".rstrip() for first, second in pairs]


def _code(part: Part) -> str:
    return clip(ascii_line(value_code(part)), _VALUE_WIDTH)
