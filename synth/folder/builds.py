"""The drawn builds and the demands on the layout in design.json, out and in."""

from __future__ import annotations

from synth.folder.reader import Node
from synth.model.judgement import Builds, BuildYield, LayoutDemand

BUILDS = ("count", "seed", "trim", "share", "low", "high", "yields")
YIELD = ("name", "counted", "share", "low", "high", "causes")
CAUSE = ("item", "share")
DEMAND = ("source", "output", "victim", "node", "limit", "critical")


def encode_builds(builds: Builds | None) -> dict[str, object] | None:
    """The builds as plain data, None where none were drawn."""
    if builds is None:
        return None
    return {
        "count": builds.count,
        "seed": builds.seed,
        "trim": builds.trim,
        "share": float(builds.share),
        "low": float(builds.low),
        "high": float(builds.high),
        "yields": [
            {
                "name": one.name,
                "counted": one.counted,
                "share": float(one.share),
                "low": float(one.low),
                "high": float(one.high),
                "causes": [{"item": item, "share": float(share)} for item, share in one.causes],
            }
            for one in builds.yields
        ],
    }


def decode_builds(top: Node) -> Builds | None:
    """The builds of a design, None where none were drawn.

    Raises:
        FolderError: a key is missing, or of the wrong kind.
    """
    if top.get("builds") is None:
        return None
    node = top.node("builds", BUILDS)
    return Builds(
        count=node.integer("count", least=1),
        seed=node.integer("seed"),
        trim=node.text("trim"),
        share=node.number("share", least=0),
        low=node.number("low", least=0),
        high=node.number("high", least=0),
        yields=tuple(_yield(one) for one in node.nodes("yields", YIELD)),
    )


def _yield(node: Node) -> BuildYield:
    return BuildYield(
        name=node.text("name"),
        counted=node.truth("counted"),
        share=node.number("share", least=0),
        low=node.number("low", least=0),
        high=node.number("high", least=0),
        causes=tuple((c.text("item"), c.number("share", least=0)) for c in node.nodes("causes", CAUSE)),
    )


def decode_demand(node: Node) -> LayoutDemand:
    """A demand on the layout."""
    return LayoutDemand(
        source=node.text("source"),
        output=node.text("output"),
        victim=node.text("victim"),
        node=node.text("node"),
        limit=node.number("limit", above=0),
        critical=node.optional("critical", above=0),
    )
