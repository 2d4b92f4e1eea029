"""The report: a finished design on a terminal, at most 80 columns of printable ASCII."""

from __future__ import annotations

from synth.model.judgement import Realized
from synth.model.record import Candidate, DesignRecord
from synth.output.builds_block import build_lines
from synth.output.layout_block import layout_lines
from synth.output.requirement_table import requirement_table, verdict_text
from synth.output.stage_blocks import stage_lines
from synth.output.text import (
    GAP,
    align_units,
    ascii_line,
    heading,
    level_text,
    percent_text,
    quantity_text,
    table,
    wrap,
)
from synth.spec import Target

__all__ = ["asked_text", "report_text", "requirement_table", "stage_lines", "verdict_text"]

_CONTRIBUTORS = 5
_CANDIDATES = 6
_LABEL_WIDTH = 40


def report_text(record: DesignRecord) -> str:
    """The whole report, a newline at its end; no line is longer than 80 columns, whatever the names are."""
    verification = record.verification
    lines = wrap(record.spec.title)
    lines += ["=" * max(len(line) for line in lines), ""]
    lines += wrap(asked_text(record), "asked     ")
    lines += wrap(verdict_text(verification.requirements), "verdict   ")
    lines += wrap(_chain_text(record), "chain     ")
    lines += heading("Stages") + stage_lines(record)
    lines += heading("Requirements") + requirement_table(verification.requirements)
    if verification.builds is not None:
        lines += heading("Builds") + build_lines(record)
    lines += heading("Realized") + _realized_lines(record)
    lines += heading("Noise") + _noise_lines(record)
    lines += heading("Headroom at full scale") + _headroom_lines(record)
    if verification.layout:
        lines += heading("Layout demands") + layout_lines(record)
    if record.candidates:
        lines += heading("Candidates") + _candidate_lines(record.candidates)
    if verification.cautions:
        lines += heading("Cautions")
        for caution in verification.cautions:
            lines += wrap(caution, "- ")
    return "\n".join(lines) + "\n"


def asked_text(record: DesignRecord) -> str:
    """What was asked, in one line: '60 kHz, bandwidth 3 kHz, full scale 2 uA -> 1 V rms, smallest 100 nA'."""
    target, unit = record.spec.target, record.spec.sensor.input_unit
    pieces = [quantity_text(target.center_frequency, "Hz", 6), f"bandwidth {quantity_text(target.bandwidth, 'Hz')}"]
    pieces.append(f"full scale {quantity_text(target.full_scale, unit)}{_output_text(target)}")
    return ", ".join((*pieces, f"smallest {quantity_text(target.smallest, unit)}"))


def _output_text(target: Target) -> str:
    if target.output is not None:
        return f" -> {quantity_text(target.output, 'V')} rms"
    return f", gain {target.gain:.5g} V/V" if target.gain is not None else ""


def _chain_text(record: DesignRecord) -> str:
    count = len(record.chain.parts)
    sections = f"{record.order} bandpass section{'' if record.order == 1 else 's'}"
    return f"{record.family}, {sections} in {len(record.chain.stages)} stages, {count} parts"


def _realized_lines(record: DesignRecord) -> list[str]:
    found: Realized = record.verification.realized
    center = quantity_text(found.center_frequency, "Hz", 6)
    edges = f"{quantity_text(found.low_edge, 'Hz', 5)} to {quantity_text(found.high_edge, 'Hz', 5)}"
    unit = record.spec.sensor.input_unit
    lines = wrap(f"centre {center}, bandwidth {quantity_text(found.bandwidth, 'Hz')} (-3 dB at {edges})", GAP)
    taken = {"current": " re 1 V/A", "charge": " re 1 V/C"}.get(record.spec.sensor.output, "")
    gains = f"gain {found.gain_db:.2f} dB re 1 V per {unit}, {found.voltage_gain_db:.2f} dB{taken} from its terminals"
    return lines + wrap(gains, GAP)


def _noise_lines(record: DesignRecord) -> list[str]:
    noise, unit = record.verification.noise, record.spec.sensor.input_unit
    density = quantity_text(noise.input_density_at_center, f"{unit}/rtHz", 3)
    inband, overall = quantity_text(noise.inband_rms, "V", 3), quantity_text(noise.output_rms, "V", 3)
    output = f"output {inband} rms in band, {overall} overall"
    ratio = f"smallest reading {level_text(noise.smallest_reading_snr_db)} it"
    lines = wrap(f"{output}; input {density} at the centre; {ratio}", GAP)
    top = noise.contributors[:_CONTRIBUTORS]
    if not top:
        return lines
    total = noise.inband_rms**2
    rows = zip(
        [ascii_line(contributor.label) for contributor in top],
        align_units([percent_text(contributor.inband_rms**2 / total) if total else "-" for contributor in top]),
        align_units([quantity_text(contributor.inband_rms, "V", 3) for contributor in top]),
        strict=True,
    )
    return lines + table(["largest sources", "power", "in band, rms"], list(rows), flexible=_LABEL_WIDTH)


def _headroom_lines(record: DesignRecord) -> list[str]:
    results = record.verification.stages
    if not results:
        return [f"{GAP}no stage is judged"]
    margins = ["-" if r.phase_margin is None else f"{r.phase_margin:.0f} deg" for r in results]
    rows = zip(
        [ascii_line(result.name) for result in results],
        align_units([quantity_text(result.level, "V", 3) for result in results]),
        align_units([quantity_text(result.peak, "V", 3) for result in results]),
        align_units(margins),
        strict=True,
    )
    header = ["stage output", "level, rms", "peak with interference", "phase margin"]
    return table(header, list(rows), flexible=_LABEL_WIDTH)


def _candidate_lines(candidates: tuple[Candidate, ...]) -> list[str]:
    lines = []
    for candidate in candidates[:_CANDIDATES]:
        shortfall = f" by {candidate.shortfall.removeprefix('-')}" if candidate.shortfall else ""
        lost = f": misses {candidate.lost_on}{shortfall}" if candidate.lost_on else ""
        lines += wrap(candidate.description + lost, "> " if candidate.chosen else GAP, GAP + GAP)
    more = len(candidates) - _CANDIDATES
    return [*lines, f"{GAP}and {more} more in design.json"] if more > 0 else lines
