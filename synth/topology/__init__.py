"""One file per circuit: design equations with their source, elements, limits of use."""

from __future__ import annotations

from synth.topology import multiple_feedback, non_inverting
from synth.topology.base import SectionTopology, Slot, Topology

SECTIONS: dict[str, SectionTopology] = {t.name: t for t in (multiple_feedback.TOPOLOGY,)}
GAINS: dict[str, Topology] = {t.name: t for t in (non_inverting.TOPOLOGY, non_inverting.DAMPED)}

__all__ = ["GAINS", "SECTIONS", "SectionTopology", "Slot", "Topology", "multiple_feedback", "non_inverting"]
