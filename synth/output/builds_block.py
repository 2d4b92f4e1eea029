"""Drawn builds on a terminal: the yield, and for each requirement who meets it and what spreads it."""

from __future__ import annotations

from synth.model.judgement import Builds
from synth.model.record import DesignRecord
from synth.output.text import GAP, ascii_line, percent_text, quantity_text, wrap

_CAUSES = 3
_LEAST_SHARE = 0.01


def build_lines(record: DesignRecord) -> list[str]:
    """Nothing where no builds were drawn."""
    builds = record.verification.builds
    if builds is None:
        return []
    lines = wrap(_head(record, builds), GAP)
    width = max(len(one.name) for one in builds.yields)
    for one in builds.yields:
        causes = [f"{ascii_line(item)} {percent_text(share)}" for item, share in one.causes if share >= _LEAST_SHARE]
        spread = f", spread by {', '.join(causes[:_CAUSES])}" if causes else ""
        untold = "trimmed later" if builds.trim == "gain trimmed" else "not counted: no accuracy is asked"
        trimmed = "" if one.counted else f" as built, {untold}"
        lines += wrap(f"{100 * one.share:.4g} %{trimmed}{spread}", f"{GAP}{one.name:<{width}}{GAP}")
    return lines


def _head(record: DesignRecord, builds: Builds) -> str:
    limits = record.spec.environment.temperature
    ambient = quantity_text(record.chain.ambient, "degC")
    at = f"at {ambient}" if limits is None else f"at {limits[0]:g} to {limits[1]:g} degC"
    interval = f"{100 * builds.low:.4g} to {100 * builds.high:.4g} % with 95 % confidence"
    return f"{builds.count} builds {at}, {builds.trim}: {100 * builds.share:.4g} % meet everything ({interval})"
