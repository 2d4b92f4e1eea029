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

DIVIDER = Topology(
    name="divider-reference",
    title="mid-rail divider",
    kind="reference",
    slots=(
        Slot("RT", "resistor", "divider, to the supply", (SUPPLY, "out")),
        Slot("RB", "resistor", "divider, to ground", ("out", "gnd")),
        Slot("CD", "capacitor", "decoupling", ("out", "gnd")),
    ),
    sign=1,
    source="common practice, no source",
)

FOLLOWER = Topology(
    name="follower-reference",
    title="divider with a follower",
    kind="reference",
    slots=(
        Slot("RT", "resistor", "divider, to the supply", (SUPPLY, "d")),
        Slot("RB", "resistor", "divider, to ground", ("d", "gnd")),
        Slot("CD", "capacitor", "decoupling of the divider", ("d", "gnd")),
        Slot("U", "op-amp", "follower", ("d", "out", "out")),
    ),
    sign=1,
    source="common practice, no source",
)

BUFFERED = Topology(
    name="buffered-reference",
    title="buffered mid-rail reference",
    kind="reference",
    slots=(
        Slot("RT", "resistor", "divider, to the supply", (SUPPLY, "d")),
        Slot("RB", "resistor", "divider, to ground", ("d", "gnd")),
        Slot("CD", "capacitor", "decoupling of the divider", ("d", "gnd")),
        Slot("U", "op-amp", "follower", ("d", "b", "b")),
        Slot("RO", "resistor", "isolates the follower", ("b", "out")),
        Slot("CO", "capacitor", "decoupling of the reference", ("out", "gnd")),
    ),
    sign=1,
    source="common practice, no source",
)
