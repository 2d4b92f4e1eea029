"""The report on a terminal."""

from __future__ import annotations

import re
from dataclasses import replace

import pytest

from synth.model.judgement import Requirement
from synth.model.record import DesignRecord
from synth.output.bill import value_code
from synth.output.report import asked_text, report_text, requirement_table, stage_lines, verdict_text
from tests.support.records import long_record, record, spec

MET = Requirement("ripple", "dB", at_most=0.5, nominal=0.2, margin=0.3, met=True)
MISSED = Requirement("bandwidth", "Hz", 4500.0, 5500.0, 5610.0, margin=-110.0, met=False)
OPEN = Requirement("yield", "", note="share of builds")


def rows(lines: list[str], name: str) -> str:
    return next(line for line in lines if line.strip().startswith(name))


@pytest.mark.parametrize("made", [record(), long_record()], ids=["plain", "long names"])
def test_at_most_80_columns_of_printable_ascii(made: DesignRecord) -> None:
    text = report_text(made)
    for line in text.splitlines():
        assert len(line) <= 80
        assert re.fullmatch(r"[ -~]*", line)
        assert line == line.rstrip()
    assert text.endswith("\n")
    assert "\n\n\n" not in text


def test_title_cannot_break_out_of_its_line() -> None:
    assert report_text(record(r"$\frac{ \x1b =1+1")).splitlines()[0] == r"$\frac{ \x1b =1+1"


def test_every_part_is_there_with_its_value() -> None:
    text = "\n".join(stage_lines(record()))
    for part in record().chain.parts:
        assert re.search(rf"\b{part.ref} +{value_code(part)} +{part.role}", text), part.ref


def test_every_stage_with_what_was_asked_and_what_came_out() -> None:
    text = "\n".join(stage_lines(record()))
    assert "gain 1, non-inverting, AD797" in text
    assert "gain 105.9 (asked 105)" in text
    assert "pre-emphasis 1.109" in text
    assert "f0 102.08 kHz (asked 101.78 kHz)" in text
    assert "Q 25.3 (asked 28.3)" in text


def test_asked_line() -> None:
    assert asked_text(record()) == "100 kHz, bandwidth 5 kHz, full scale 2 uA -> 1 V rms, smallest 100 nA"


def test_asked_line_where_the_gain_is_given() -> None:
    asked = spec()
    target = replace(asked.target, output=None, gain=28184.0)
    assert "full scale 2 uA, gain 28184 V/V" in asked_text(replace(record(), spec=replace(asked, target=target)))


@pytest.mark.parametrize(
    ("requirements", "verdict"),
    [
        ([MET] * 9 + [OPEN] * 4, "meets all 9 judged requirements; 4 not judged"),
        ([MET, MET], "meets all 2 judged requirements"),
        ([MET], "meets the 1 judged requirement"),
        ([OPEN], "no requirement is judged; 1 not judged"),
        (
            [MISSED, MET, OPEN],
            "misses bandwidth: 5.61 kHz, asked 4.5 to 5.5 kHz; meets 1 of 2 judged requirements; 1 not judged",
        ),
    ],
)
def test_verdict(requirements: list[Requirement], verdict: str) -> None:
    assert verdict_text(requirements) == verdict


def test_requirement_rows_end_in_their_verdict() -> None:
    lines = requirement_table([MET, MISSED, OPEN])
    assert rows(lines, "ripple").split() == ["ripple", "<=", "0.5", "dB", "0.2", "dB", "0.3", "dB", "met"]
    assert rows(lines, "bandwidth").endswith("NOT MET")
    assert "-110 Hz" in rows(lines, "bandwidth")
    assert rows(lines, "yield").split("  ")[-1] == "not judged: share of builds"
    assert " met" not in rows(lines, "yield")


def test_not_judged_keeps_its_limit() -> None:
    lines = requirement_table([Requirement("accuracy", "%", at_most=3.0)])
    assert lines == ["  accuracy  <= 3 %, not judged"]


def test_range_over_builds_stands_under_its_row() -> None:
    lines = requirement_table([replace(MISSED, low=5100.0, high=6200.0)])
    assert lines[2] == "    over builds 5.1 to 6.2 kHz"


def test_no_requirement_gives_no_line() -> None:
    assert requirement_table([]) == []


def test_missed_requirements_are_named_in_the_verdict_of_the_report() -> None:
    text = " ".join(report_text(record()).split())
    assert "verdict misses bandwidth: " in text
    assert "reject 50 kHz: 54.83 dB, asked >= 56 dB" in text


def test_noise_headroom_candidates_and_cautions() -> None:
    text = report_text(record())
    assert re.search(r"sensor +42 % +1\.52 mV", text)
    assert "R5" in text
    assert "R4  " not in text.partition("largest sources")[2].partition("Headroom")[0]  # the sixth of the contributors
    assert re.search(r"bandpass 1 +504 mV +930 mV +68 deg", text)
    assert re.search(r"bandpass 2 +1\.01 V +2\.31 V +-", text)
    assert "> butterworth, 2 sections" in text
    assert "- figures are of the nominal build; tolerances are not in them" in text


def test_many_candidates_are_counted() -> None:
    assert "  and 3 more in design.json" in report_text(long_record())


def test_a_record_without_stages_candidates_or_cautions_is_written_all_the_same() -> None:
    plain = record()
    judged = replace(plain.verification, stages=(), cautions=(), requirements=())
    noise = replace(judged.noise, contributors=(), inband_rms=0.0)
    bare = replace(plain, verification=replace(judged, noise=noise), candidates=())
    text = report_text(bare)
    assert "no requirement is judged" in text
    assert "gain - (asked 105)" in text
    assert "Candidates" not in text
