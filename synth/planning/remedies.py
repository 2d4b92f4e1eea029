"""What would raise the yield: parts of a closer class in the same places, judged on the same builds."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

from synth.errors import CatalogError
from synth.model.chain import Chain
from synth.model.judgement import Verification
from synth.parts.passives import capacitor_stock, resistor_stock
from synth.quantity import format_percent
from synth.spec import Spec
from synth.verification.builds.judge import judge_builds

BUILDS = 2500
WORTHWHILE = 0.02  # of yield, that a remedy must bring to be named
CLOSER = (0.005, 0.001)  # tolerances of resistors and capacitors that are tried, where they can be bought


def remedies(chain: Chain, spec: Spec, verdict: Verification, seed: int) -> tuple[str, ...]:
    """One line on what closer parts would do where the yield is missed, nothing where it is met or nothing helps."""
    yields = next((r for r in verdict.requirements if r.name == "yield" and r.met is False), None)
    if yields is None or verdict.builds is None:
        return ()
    plain = tuple(r for r in verdict.requirements if r.name != "yield")
    before = judge_builds(chain, spec, plain, BUILDS, seed)[1].share
    found = []
    for label, closer in _closer(chain, spec):
        after = judge_builds(closer, spec, plain, BUILDS, seed)[1].share
        if after >= before + WORTHWHILE:
            found.append((label, after))
        if after >= spec.target.required_yield:
            break
    if not found:
        return ("closer parts in the same places do not raise the yield; a looser target, or another family, would",)
    told = "; ".join(f"{label}: {100 * before:.3g} % -> {100 * after:.3g} %" for label, after in found)
    return (f"what would raise the yield, same circuit and builds: {told}",)


def _closer(chain: Chain, spec: Spec) -> Iterator[tuple[str, Chain]]:
    """The chain with closer resistors, with closer capacitors, with both; only classes that can be bought."""
    resistors = [t for t in CLOSER if _offered_resistors(t, spec) and t < _tolerance(chain, "resistor")]
    capacitors = [t for t in (0.01, *CLOSER) if _offered_capacitors(t, spec) and t < _tolerance(chain, "capacitor")]
    for tolerance in resistors:
        yield f"resistors at {format_percent(tolerance)}", _with(chain, "resistor", tolerance)
    for tolerance in capacitors:
        yield f"section capacitors at {format_percent(tolerance)}", _with(chain, "capacitor", tolerance)
    if resistors and capacitors:
        both = _with(_with(chain, "resistor", resistors[-1]), "capacitor", capacitors[-1])
        yield f"both, {format_percent(resistors[-1])} and {format_percent(capacitors[-1])}", both


def _tolerance(chain: Chain, kind: str) -> float:
    """Tolerance of the parts of a kind in the sections."""
    sections = {stage.name for stage in chain.stages if stage.kind == "bandpass"}
    return max((part.tolerance for part in chain.parts if part.kind == kind and part.stage in sections), default=0.0)


def _with(chain: Chain, kind: str, tolerance: float) -> Chain:
    sections = {stage.name for stage in chain.stages if stage.kind == "bandpass"}
    parts = tuple(
        replace(part, tolerance=tolerance) if part.kind == kind and part.stage in sections else part
        for part in chain.parts
    )
    return replace(chain, parts=parts)


def _offered_resistors(tolerance: float, spec: Spec) -> bool:
    try:
        resistor_stock(None, tolerance, None, extra=spec.catalog_files)
    except CatalogError:
        return False
    return True


def _offered_capacitors(tolerance: float, spec: Spec) -> bool:
    try:
        capacitor_stock(None, tolerance, None, spec.parts.capacitors.dielectric, extra=spec.catalog_files)
    except CatalogError:
        return False
    return True
