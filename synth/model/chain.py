"""The chain: sensor, stages in order, load; one linear circuit up to the detector."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from synth.model.part import OpAmp, Part
from synth.spec import Sensor

StageKind = Literal["gain", "pre-emphasis", "bandpass", "reference"]


@dataclass(frozen=True, slots=True)
class StageTarget:
    """What a stage was asked to be.

    Attributes:
        gain: magnitude of its voltage gain at the chain's centre [V/V].
        pre_emphasis: factor inside `gain` that makes good the sensor's rolloff; 1 where it has none.
        center_frequency: [Hz] of its pole pair, None for a gain stage.
        q: quality factor of its pole pair, None for a gain stage.
    """

    gain: float
    pre_emphasis: float = 1.0
    center_frequency: float | None = None
    q: float | None = None


@dataclass(frozen=True, slots=True)
class Stage:
    """One stage of the chain; its parts are found by their references.

    Attributes:
        name: unique in the chain ("gain 1", "bandpass 2").
        kind: gain, pre-emphasis or bandpass; reference for the mid-rail of a single supply, which stands first and
            has no signal path.
        topology: name of the circuit that realizes it, as in synth.topology.
        target: what was asked of it.
        op_amp: type number of its amplifier, "" where it has none.
        input_node, output_node: node names; the output node is its test point.
        parts: references of its parts, in reading order.
    """

    name: str
    kind: StageKind
    topology: str
    target: StageTarget
    op_amp: str
    input_node: str
    output_node: str
    parts: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Chain:
    """Everything the engine needs to build the circuit.

    Attributes:
        center_frequency: [Hz] the spec's centre, at which loss tangents and gains are referred.
        ambient: [degC] of nominal figures.
        sensor: the sensor as asked.
        load_resistance: [ohm] at the output, None for none; load_capacitance: [F], 0 for none.
        stages: in signal order.
        parts: every part, in stage order.
        models: op amp figures by type number.
    """

    center_frequency: float
    ambient: float
    sensor: Sensor
    load_resistance: float | None
    load_capacitance: float
    stages: tuple[Stage, ...]
    parts: tuple[Part, ...]
    models: Mapping[str, OpAmp]

    def part(self, ref: str) -> Part:
        """The part with reference `ref`; KeyError when there is none."""
        for part in self.parts:
            if part.ref == ref:
                return part
        raise KeyError(ref)
