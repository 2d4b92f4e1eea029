"""Writes a spec as plain data for a design file; `spec_from_dict` reads it back without loss."""

from __future__ import annotations

from dataclasses import fields, is_dataclass
from typing import Any

from synth.spec.model import FORMAT, Spec
from synth.spec.sensor import SHAPES, Rolloff, Sensor


def spec_to_dict(spec: Spec) -> dict[str, Any]:
    """The spec with the keys of its TOML form, ready for JSON.

    Numbers are SI, decibels for levels, fractions for shares, degC for temperatures; the gain is linear; the scale
    is text ("20 V/A"), as it names the input unit.  Keys without a value are left out.  A rolloff table carries
    its rows (`points`), so that the record does not depend on the file.
    """
    content: dict[str, Any] = {"format": FORMAT}
    content.update(_plain(spec))
    return content


def _plain(value: Any) -> Any:
    """Dataclasses to dicts, tuples to lists, everything else as it is."""
    if isinstance(value, tuple):
        return [_plain(item) for item in value]
    if not is_dataclass(value):
        return value
    content = {}
    for entry in fields(value):
        item = _plain(getattr(value, entry.name))
        left_out = item is None or item == [] or (item == {} and entry.default is not None)
        if entry.compare and not left_out:
            content[entry.name] = item
    if isinstance(value, Sensor):
        content["scale"] = f"{value.scale!r} {value.output_unit}/{content.pop('input_unit')}".replace(".0 ", " ", 1)
    if isinstance(value, Rolloff) and value.kind not in SHAPES:
        del content["order"]
    if "required_yield" in content:
        content["yield"] = content.pop("required_yield")
    return content
