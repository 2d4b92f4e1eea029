"""What a topology file says about its circuit: its parts, where they sit, and its limits of use."""

from __future__ import annotations

from dataclasses import dataclass

from synth.model.chain import StageKind
from synth.model.part import PartKind


@dataclass(frozen=True, slots=True)
class Slot:
    """A place for a part.

    Attributes:
        key: name of the value in the design equations ("R1A").
        kind: of the part; role: what it does there, for people.
        nodes: local names: "in", "out", "0" (ground) or an inner node; an op amp's are (plus, minus, output).
        sets_frequency: True where the value enters the pole pair.
    """

    key: str
    kind: PartKind
    role: str
    nodes: tuple[str, ...]
    sets_frequency: bool = False


@dataclass(frozen=True, slots=True)
class Topology:
    """One circuit that realizes a stage; `sign` is that of its gain at the centre."""

    name: str
    title: str
    kind: StageKind
    slots: tuple[Slot, ...]
    sign: int
    source: str
