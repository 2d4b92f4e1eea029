"""Requirements on a terminal: the verdict in one sentence, and the table that it stands on."""

from __future__ import annotations

from collections.abc import Sequence

from synth.model.judgement import Requirement
from synth.output.text import GAP, WIDTH, align_units, ascii_line, quantity_text, table, wrap

VERDICTS = {True: "met", False: "NOT MET", None: "not judged"}
_NAME_WIDTH = 21


def verdict_text(requirements: Sequence[Requirement]) -> str:
    """The verdict: 'meets all 9 judged requirements; 4 not judged', or what is missed and by how much.

    >>> verdict_text([Requirement("bandwidth", "Hz", met=True), Requirement("yield", "")])
    'meets the 1 judged requirement; 1 not judged'
    """
    missed = [requirement for requirement in requirements if requirement.met is False]
    judged = sum(requirement.met is not None for requirement in requirements)
    plural = "" if judged == 1 else "s"
    rest = f"; {len(requirements) - judged} not judged" if judged < len(requirements) else ""
    if not judged:
        return f"no requirement is judged{rest}"
    if not missed:
        return f"meets {'all' if judged > 1 else 'the'} {judged} judged requirement{plural}{rest}"
    shortfalls = "; ".join(_shortfall(requirement) for requirement in missed)
    return f"misses {shortfalls}; meets {judged - len(missed)} of {judged} judged requirement{plural}{rest}"


def requirement_table(requirements: Sequence[Requirement]) -> list[str]:
    """Lines of at most 80 columns: what is judged with limit, nominal, margin and verdict, then what is not judged.

    A note that is too long for the first column, and the range over builds once they are drawn, stand under the row.
    """
    judged = [requirement for requirement in requirements if requirement.met is not None]
    lines = _judged_lines(judged) if judged else []
    others = [requirement for requirement in requirements if requirement.met is None]
    if lines and others:
        lines.append("")
    width = min(max((len(requirement.name) for requirement in others), default=0), _NAME_WIDTH)
    for requirement in others:
        limit = f"{limit_text(requirement)}, " if _has_limit(requirement) else ""
        remark = f": {requirement.note}" if requirement.note else ""
        names = wrap(requirement.name, rest=" ", width=width)
        texts = wrap(f"{limit}{VERDICTS[None]}{remark}", width=WIDTH - 2 * len(GAP) - width)
        for number in range(max(len(names), len(texts))):
            name = names[number] if number < len(names) else ""
            lines.append(f"{GAP}{name:<{width}}{GAP}{texts[number] if number < len(texts) else ''}".rstrip())
    return lines


def limit_text(requirement: Requirement) -> str:
    """'4.5 to 5.5 kHz', '>= 60 dB', '<= 20 us', '-' where there is none."""
    low, high = requirement.at_least, requirement.at_most
    if low is not None and high is not None:
        return range_text(low, high, requirement.unit)
    if low is not None:
        return f">= {quantity_text(low, requirement.unit, _digits(requirement.unit))}"
    return f"<= {quantity_text(high, requirement.unit, _digits(requirement.unit))}" if high is not None else "-"


def range_text(low: float, high: float, unit: str) -> str:
    """Both ends of a range, the unit once where they share it.

    >>> range_text(4.5e3, 5.5e3, "Hz"), range_text(900.0, 1100.0, "Hz")
    ('4.5 to 5.5 kHz', '900 Hz to 1.1 kHz')
    """
    first, last = quantity_text(low, unit, _digits(unit)), quantity_text(high, unit, _digits(unit))
    number, _, first_unit = first.partition(" ")
    return f"{number if last.partition(' ')[2] == first_unit else first} to {last}"


def _judged_lines(requirements: Sequence[Requirement]) -> list[str]:
    labels = [_label(requirement) for requirement in requirements]
    columns = {
        "requirement": [name for name, _ in labels],
        "limit": align_units([limit_text(r) for r in requirements]),
        "nominal": align_units([quantity_text(r.nominal, r.unit, _digits(r.unit)) for r in requirements]),
        "margin": align_units([quantity_text(r.margin, r.unit, 3) for r in requirements]),
        "verdict": [VERDICTS[r.met] for r in requirements],
    }
    rows = list(zip(*columns.values(), strict=True))
    return table(list(columns), rows, below=[remark for _, remark in labels], flexible=_NAME_WIDTH)


def _label(requirement: Requirement) -> tuple[str, str]:
    """Name, with the note where both fit the column, and the remark under the row: a longer note, the builds' range."""
    name, remarks = ascii_line(requirement.name), []
    if requirement.note:
        both = f"{name}, {ascii_line(requirement.note)}"
        if len(both) <= _NAME_WIDTH:
            name = both
        else:
            remarks.append(requirement.note)
    if requirement.low is not None and requirement.high is not None:
        remarks.append(f"over builds {range_text(requirement.low, requirement.high, requirement.unit)}")
    return name, "; ".join(remarks)


def _shortfall(requirement: Requirement) -> str:
    nominal = quantity_text(requirement.nominal, requirement.unit, _digits(requirement.unit))
    return f"{requirement.name}: {nominal}, asked {limit_text(requirement)}"


def _has_limit(requirement: Requirement) -> bool:
    return requirement.at_least is not None or requirement.at_most is not None


def _digits(unit: str) -> int:
    return 5 if unit == "Hz" else 4
