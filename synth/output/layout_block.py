"""Demands on the layout on a terminal: the strays that must stay small, the smallest first."""

from __future__ import annotations

from synth.model.record import DesignRecord
from synth.output.text import GAP, table, wrap

_SHOWN = 6


def layout_lines(record: DesignRecord) -> list[str]:
    """Nothing where no demand was worked out."""
    demands = record.verification.layout
    if not demands:
        return []
    shown = demands[:_SHOWN]
    columns = {
        "stray from output of": [demand.source for demand in shown],
        "to": [f"{demand.victim}, node {demand.node}" for demand in shown],
        "keep below": [_femto(demand.limit) for demand in shown],
        "oscillates at": ["-" if demand.critical is None else _femto(demand.critical) for demand in shown],
    }
    lines = table(list(columns), list(zip(*columns.values(), strict=True)))
    if len(demands) > len(shown):
        lines += wrap(f"and {len(demands) - len(shown)} more in design.json", GAP)
    rule = "rule of thumb, no source: two small nodes 5 mm apart over a plane have about 1 fF, adjacent pins 100 fF"
    return lines + wrap(rule, GAP)


def _femto(capacitance: float) -> str:
    """A stray in femtofarad, whole from ten on, right under each other."""
    value = capacitance * 1e15
    return f"{value:>7.0f}    fF" if value >= 10 else f"{value:>10.2f} fF"
