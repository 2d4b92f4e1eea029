"""Mid-rail reference of a single supply: its real impedance is part of the chain's circuit.

Every stage returns its ground currents to it, so that what it does not hold still comes back into earlier stages:
a loop around the whole gain.

      divider:   vcc --RT--+-- ref      buffered: as the divider at d, then a follower d -> b,
                           |                      b --RO-- ref, CO from ref to ground
                  RB parallel CD                  (RO keeps the follower stable into CO)
                           |
                          gnd            follower: as buffered, without RO and CO

References:
    common practice, no source; the follower's isolation resistor as in S. Franco, 3rd ed., sec. 8.2 (from memory).
"""

from __future__ import annotations

from synth.topology.base import Slot, Topology

REFERENCE = "ref"
SUPPLY = "vcc"


def _divider(node: str) -> tuple[Slot, ...]:
    return (
        Slot("RT", "resistor", "divider, to the supply", (SUPPLY, node)),
        Slot("RB", "resistor", "divider, to ground", (node, "gnd")),
        Slot("CD", "capacitor", "decoupling of the divider", (node, "gnd")),
    )


def _reference(name: str, title: str, slots: tuple[Slot, ...]) -> Topology:
    return Topology(name, title, "reference", slots, sign=1, source="common practice, no source")


DIVIDER = _reference("divider-reference", "mid-rail divider", _divider("out"))
FOLLOWER = _reference(
    "follower-reference",
    "divider with a follower",
    (*_divider("d"), Slot("U", "op-amp", "follower", ("d", "out", "out"))),
)
BUFFERED = _reference(
    "buffered-reference",
    "buffered mid-rail reference",
    (
        *_divider("d"),
        Slot("U", "op-amp", "follower", ("d", "b", "b")),
        Slot("RO", "resistor", "isolates the follower", ("b", "out")),
        Slot("CO", "capacitor", "decoupling of the reference", ("out", "gnd")),
    ),
)
