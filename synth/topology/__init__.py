"""One file per circuit: design equations with their source, elements, limits of use."""

from __future__ import annotations

from synth.topology import (
    akerberg_mossberg,
    charge_amplifier,
    delyiannis_friend,
    dual_amplifier,
    inverting,
    multiple_feedback,
    non_inverting,
    shelving,
    state_variable,
    tow_thomas,
    transimpedance,
)
from synth.topology.base import SectionTopology, Slot, Topology

SECTIONS: dict[str, SectionTopology] = {
    t.name: t
    for t in (
        multiple_feedback.TOPOLOGY,
        delyiannis_friend.TOPOLOGY,
        dual_amplifier.TOPOLOGY,
        tow_thomas.TOPOLOGY,
        state_variable.TOPOLOGY,
        akerberg_mossberg.TOPOLOGY,
    )
}
FIRST_STAGES: dict[str, Topology] = {
    t.name: t for t in (inverting.TOPOLOGY, transimpedance.TOPOLOGY, charge_amplifier.TOPOLOGY)
}
GAINS: dict[str, Topology] = {
    t.name: t for t in (non_inverting.TOPOLOGY, non_inverting.DAMPED, *shelving.TOPOLOGIES, *FIRST_STAGES.values())
}

__all__ = [
    "FIRST_STAGES",
    "GAINS",
    "SECTIONS",
    "SectionTopology",
    "Slot",
    "Topology",
    "charge_amplifier",
    "inverting",
    "multiple_feedback",
    "non_inverting",
    "shelving",
    "transimpedance",
]
