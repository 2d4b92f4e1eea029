"""Plain text for a terminal."""

from __future__ import annotations

import pytest

from synth.output.text import align_units, ascii_line, clip, flow, quantity_text, table, wrap


@pytest.mark.parametrize(
    ("text", "plain"),
    [
        ("5 \u00b5V \u2264 6 \u2126", "5 uV <= 6 ohm"),
        ("Pr\u00fcfger\u00e4t", "Prufgerat"),
        ("a\tb\x1b[31mc\x7f", "a b [31mc"),
        ("\u6f22", "?"),
        ("25 \u00b0C \u00b1 1", "25 degC +/- 1"),
    ],
)
def test_any_text_becomes_one_printable_ascii_line(text: str, plain: str) -> None:
    assert ascii_line(text) == plain


def test_clip_never_exceeds_the_width() -> None:
    assert [clip("abcdefgh", width) for width in (8, 7, 4, 2, 0)] == ["abcdefgh", "abcd...", "a...", "..", ""]


def test_wrap_breaks_a_word_that_is_too_long() -> None:
    lines = wrap("x" * 200, "- ")
    assert all(len(line) <= 80 for line in lines)
    assert "".join(line[2:] for line in lines) == "x" * 200


def test_empty_text_still_gives_its_line() -> None:
    assert wrap("", "- ") == ["-"]


def test_flow_starts_a_new_line_instead_of_breaking_an_item() -> None:
    assert flow(["one two", "three four"], width=12) == ["one two", "three four"]


def test_units_line_up() -> None:
    cells = align_units(["4.5 kHz", "480 Hz", "-", ">= 60 dB"])
    assert len({len(cell) for cell in cells}) == 1
    assert [cell.find(unit) for cell, unit in zip(cells, ("kHz", "Hz", "dB"), strict=False)][:2] == [6, 6]


def test_table_fits_and_keeps_every_word() -> None:
    row = ("alpha " * 20, "beta " * 20, "gamma")
    lines = table(["a", "b", "c"], [row], below=["remark " * 30])
    assert all(len(line) <= 80 for line in lines)
    text = " ".join(lines)
    assert [text.count(word) for word in ("alpha", "beta", "gamma", "remark")] == [20, 20, 1, 30]


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [
        (3.2e-9, "V/rtHz", "3.2 nV/rtHz"),
        (5.8e-11, "A/rtHz", "58 pA/rtHz"),
        (5.5e7, "V/s", "55 V/us"),
        (15710.0, "1/s", "15710 1/s"),
        (0.97, "", "0.97"),
        (61.03, "deg", "61.03 deg"),
        (None, "Hz", "-"),
    ],
)
def test_figures(value: float | None, unit: str, text: str) -> None:
    assert quantity_text(value, unit) == text
