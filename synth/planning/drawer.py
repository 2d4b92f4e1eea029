"""Planning from the person's drawer: only what is there, and no more of it than there is."""

from __future__ import annotations

from dataclasses import replace

from synth.errors import CatalogError, InfeasibleError
from synth.model.part import OpAmp
from synth.parts.stock import (
    Drawer,
    Shortage,
    exhausted,
    restrict_capacitors,
    restrict_coupling,
    restrict_op_amps,
    restrict_resistors,
    shortages,
)
from synth.planning.planner import Plan, plan
from synth.spec import Spec
from synth.topology.place import Stocks

ROUNDS = 8  # of leaving out what ran short


def plan_from_drawer(
    spec: Spec, op_amps: tuple[OpAmp, ...], stocks: Stocks, drawer: Drawer, builds: int = 0, seed: int = 0
) -> Plan:
    """As `plan`, from the drawer alone: a value that runs short is left out and the chain planned anew.

    Raises:
        InfeasibleError: the drawer makes no chain; names what is short, and the nearest alternative.
    """
    short: tuple[Shortage, ...] = ()
    for _ in range(ROUNDS):
        try:
            restricted = Stocks(
                restrict_resistors(stocks.resistors, drawer),
                restrict_capacitors(stocks.capacitors, drawer),
                restrict_coupling(stocks.coupling, drawer),
            )
            found = plan(spec, restrict_op_amps(op_amps, drawer), restricted, builds, seed)
        except (CatalogError, InfeasibleError) as error:
            raise InfeasibleError(_refusal(drawer, short, str(error))) from error
        short = shortages(found.chain.parts, drawer, found.chain.models)
        if not short:
            note = f"every part is from the drawer {drawer.source}"
            verdict = replace(found.verification, cautions=(note, *found.verification.cautions))
            return replace(found, verification=verdict)
        drawer = exhausted(drawer, short)
    raise InfeasibleError(_refusal(drawer, short, "no choice of values stays within its quantities"))


def _refusal(drawer: Drawer, short: tuple[Shortage, ...], reason: str) -> str:
    missing = f"; short: {'; '.join(str(shortage) for shortage in short)}" if short else ""
    return f"{drawer.source}: parts.stock: the drawer makes no chain: {reason}{missing}; add parts, or leave it out"
