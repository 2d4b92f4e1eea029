"""A finished design: what was asked, the chain, and what the judges found."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from synth.model.chain import Chain
from synth.model.judgement import Verification
from synth.spec import Spec

VERSION = 1


@dataclass(frozen=True, slots=True)
class Candidate:
    """A chain that was considered.

    Attributes:
        description: family, order, amplifiers, split of the gain, in one line.
        chosen: True for the one that was taken.
        lost_on: name of the requirement it fell on, "" when it met all.
        shortfall: its margin there as text with unit, "" when it met all.
    """

    description: str
    chosen: bool
    lost_on: str = ""
    shortfall: str = ""


@dataclass(frozen=True, slots=True)
class DesignRecord:
    """All that design.json holds, as data.

    Attributes:
        spec: what was asked.
        seed: of every random draw.
        inputs: sha256 by file name, of the spec and each catalog.
        chain: the circuit as designed.
        family: of the filter; order: number of bandpass sections.
        verification: the judges' findings on it.
        candidates: what was considered, the chosen one first.
    """

    spec: Spec
    seed: int
    inputs: Mapping[str, str]
    chain: Chain
    family: str
    order: int
    verification: Verification
    candidates: tuple[Candidate, ...]
