"""What the person must mind, in words."""

from __future__ import annotations

import math
import re

from synth.model.chain import Chain
from synth.model.judgement import Requirement
from synth.quantity import format_si
from synth.spec import Spec

DEFER = "follow the local code and have it done or checked by licensed personnel"
# common practice, no source: the words that show a hazard in a title or unit, and the usual caution
HAZARDS = (
    (r"\bmains\b|\bline voltage\b|\b(115|120|230|240) ?V\b", f"mains-referenced sensor: isolate it; {DEFER}"),
    (r"\bhigh[- ]voltage\b|\bkV\b|\bHV\b", f"high voltage: creepage, discharge and interlock; {DEFER}"),
    (r"\blaser\b", f"laser: eye and skin hazard, classify and enclose it; {DEFER}"),
    (r"\bpatient\b|\becg\b|\beeg\b|\bmedical\b", f"patient contact: leakage current and isolation limits; {DEFER}"),
    (r"\blithium\b|\bli-?ion\b|\blipo\b", f"lithium cells: protect against short, overcharge and heat; {DEFER}"),
)


def cautions(
    spec: Spec, chain: Chain, requirements: tuple[Requirement, ...] = (), drawn: bool = False
) -> tuple[str, ...]:
    """Hazards that the spec shows, and what the figures leave open."""
    found = [text for pattern, text in HAZARDS if re.search(pattern, spec.title, re.IGNORECASE)]
    total = _voltage_gain_db(spec)
    if total > 80 and spec.sensor.output == "voltage":
        found.append(
            f"{total:.0f} dB of gain at {format_si(chain.center_frequency, 'Hz')}: the layout is part of the circuit; "
            "keep output and input apart, give each stage its own decoupling"
        )
    for stage in chain.stages:
        f0, q = stage.target.center_frequency, stage.target.q
        if f0 is not None and q is not None:
            model = chain.models[stage.op_amp]
            shift = q * f0 / model.gain_bandwidth * model.gain_bandwidth_spread
            allowed = spec.target.center_tolerance * spec.target.bandwidth / spec.target.center_frequency
            if shift > 0.5 * allowed:
                found.append(
                    f"{stage.name}: the spread of {stage.op_amp}'s gain-bandwidth alone moves its frequency "
                    f"{100 * shift:.2g} %, of {100 * allowed:.2g} % allowed"
                )
    found += _about_level(spec, chain, requirements)
    if drawn:
        found.append(
            "builds spread output level, band, rejects and ripple; noise, delay and margins are of the nominal build"
        )
    else:
        found.append("figures are of the nominal build; tolerances are not in them")
    return tuple(found)


def _about_level(spec: Spec, chain: Chain, requirements: tuple[Requirement, ...]) -> list[str]:
    """Where the gain is trimmed, and over which range."""
    found = []
    level = next((r for r in requirements if r.name == "output at full scale"), None)
    gains = [stage for stage in chain.stages if stage.topology.startswith("non-inverting")]
    if level is not None and level.low is not None and level.high is not None and gains:
        parts = [chain.part(ref) for ref in gains[-1].parts]
        feedback = next(part for part in parts if part.role == "gain, feedback")
        wanted = spec.full_scale_output
        low, high = (100 * (wanted / x - 1) for x in (level.high, level.low))
        spread = f"{format_si(level.low, 'V')} to {format_si(level.high, 'V')}"
        found.append(
            f"gain as built spreads from {spread} at full scale: trim it, or record a factor; {feedback.ref} in "
            f"{gains[-1].name} would move by about {low:+.2g} to {high:+.2g} %"
        )
    return found


def _voltage_gain_db(spec: Spec) -> float:
    return 20 * math.log10(spec.overall_gain / spec.sensor.scale)
