"""One file per circuit: design equations with their source, elements, limits of use."""

from __future__ import annotations

from synth.topology import multiple_feedback, non_inverting
from synth.topology.base import Slot, Topology

TOPOLOGIES = {t.name: t for t in (non_inverting.TOPOLOGY, multiple_feedback.TOPOLOGY)}

__all__ = ["TOPOLOGIES", "Slot", "Topology", "multiple_feedback", "non_inverting"]
