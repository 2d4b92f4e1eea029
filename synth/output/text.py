"""Plain text for a terminal: printable ASCII, at most 80 columns, tables whose numbers and units line up."""

from __future__ import annotations

import textwrap
import unicodedata
from collections.abc import Iterable, Sequence
from itertools import zip_longest

from synth.quantity import PREFIXED_UNITS, format_si

WIDTH = 80
GAP = "  "
_NARROWEST = 6
# What compatibility decomposition leaves outside ASCII, and what stands for it.
_SPELLINGS = {
    "\u03bc": "u", "\u03a9": "ohm", "\u00b0": "deg", "\u00d7": "x", "\u2212": "-", "\u2010": "-", "\u2011": "-",
    "\u2012": "-", "\u2013": "-", "\u2014": "-", "\u2018": "'", "\u2019": "'", "\u201c": '"', "\u201d": '"',
    "\u221a": "sqrt", "\u00df": "ss", "\u00e6": "ae", "\u00f8": "o", "\u2044": "/",
    "\u2264": "<=", "\u2265": ">=", "\u00b1": "+/-", "\u2192": "->", "\u00b7": "*",
}  # fmt: skip


def ascii_line(text: str) -> str:
    """One line of printable ASCII: accents dropped, signs spelled out, anything else a question mark.

    >>> ascii_line("5 \u00b5V \u2013 Pr\u00fcfger\u00e4t")
    '5 uV - Prufgerat'
    """
    plain = []
    for char in unicodedata.normalize("NFKD", text):
        if " " <= char <= "~":
            plain.append(char)
        elif char.isspace() or unicodedata.category(char) == "Cc":
            plain.append(" ")
        elif not unicodedata.combining(char):
            plain.append(_SPELLINGS.get(char, "?"))
    return " ".join("".join(plain).split())


def clip(text: str, width: int) -> str:
    """The text, or its start and '...' where it is wider than `width` columns.

    >>> clip("bandpass", 7)
    'band...'
    """
    return text if len(text) <= width else text[: max(width - 3, 0)].rstrip() + "..."[:width]


def wrap(text: str, first: str = "", rest: str | None = None, width: int = WIDTH) -> list[str]:
    """The text in lines of at most `width` columns, the first behind `first`, the others behind `rest`.

    `rest` is by default as many spaces as `first` has characters; a word that is too long is broken.

    >>> wrap("one two three", "- ", width=9)
    ['- one two', '  three']
    """
    rest = " " * len(first) if rest is None else rest
    lines = textwrap.wrap(ascii_line(text), width, initial_indent=first, subsequent_indent=rest, break_on_hyphens=False)
    return lines or [first.rstrip()]


def flow(items: Iterable[str], indent: str = "", separator: str = GAP, width: int = WIDTH) -> list[str]:
    """Items side by side, a new line before one that would be too wide; no item is broken unless it has to be.

    >>> flow(["R1 2K49", "R2 10K", "C1 1n0"], " ", width=18)
    [' R1 2K49  R2 10K', ' C1 1n0']
    """
    lines: list[str] = []
    line = ""
    for item in items:
        longer = line + separator + item if line else indent + item
        if line and len(longer) > width:
            lines.append(line)
            longer = indent + item
        line = clip(longer, width)
    return [*lines, line] if line else lines


def align_units(cells: Sequence[str]) -> list[str]:
    """Quantities with their numbers flush right and their units flush left, so that a column of them can be read.

    >>> align_units(["4.5 kHz", "480 Hz"])
    ['4.5 kHz', '480 Hz ']
    """
    pairs = [(number, unit) for number, _, unit in (cell.rpartition(" ") if " " in cell else (cell, "", "")
                                                    for cell in cells)]  # fmt: skip
    numbers = max((len(number) for number, _ in pairs), default=0)
    units = max((len(unit) for _, unit in pairs), default=0)
    space = " " if units else ""
    return [f"{number:>{numbers}}{space}{unit:<{units}}" if number else "" for number, unit in pairs]


def table(
    header: Sequence[str], rows: Sequence[Sequence[str]], below: Sequence[str] = (), flexible: int = WIDTH
) -> list[str]:
    """Rows under a header in columns just wide enough; the widest are narrowed, their cells wrapped, until all fits.

    Args:
        header: one title a column; rows: cells, as many as titles; leading spaces of a cell stay where it fits.
        below: a remark a row, "" for none, which stands under it over the whole width.
        flexible: [columns] the first column is wrapped at this width, even where there is room for more.
    """
    widths = [max(len(row[column]) for row in (header, *rows)) for column in range(len(header))]
    widths[0] = min(widths[0], max(flexible, len(header[0])))
    while sum(widths) + len(GAP) * len(widths) > WIDTH and max(widths) > _NARROWEST:
        widths[widths.index(max(widths))] -= 1
    lines = []
    for row, remark in zip_longest((header, *rows), ("", *below), fillvalue=""):
        columns = [_cell_lines(cell, size) for cell, size in zip(row, widths, strict=True)]
        for cells in zip_longest(*columns, fillvalue=""):
            line = GAP.join(f"{cell:<{size}}" for cell, size in zip(cells, widths, strict=True))
            lines.append(clip((GAP + line).rstrip(), WIDTH))
        lines += wrap(remark, GAP + GAP) if remark else []
    return lines


def _cell_lines(cell: str, size: int) -> list[str]:
    return [cell] if len(cell) <= size else wrap(cell, rest=" ", width=size)


def heading(title: str) -> list[str]:
    """A blank line, the title of a block, and a rule under it."""
    return ["", title, "-" * len(title)]


def quantity_text(value: float | None, unit: str, digits: int = 4) -> str:
    """A figure for a cell: '480 Hz', '3.21 nV/rtHz', '12 V/us', '0.5', '-' where there is none.

    >>> quantity_text(3.21e-9, "V/rtHz"), quantity_text(1.2e7, "V/s"), quantity_text(None, "Hz")
    ('3.21 nV/rtHz', '12 V/us', '-')
    """
    if value is None:
        return "-"
    if unit == "V/s":
        value, unit = 1e-6 * value, "V/us"
    above, slash, below = unit.partition("/")
    if above in PREFIXED_UNITS and (not slash or below == "rtHz"):
        return f"{format_si(value, above, digits)}{slash}{below}"
    number = f"{value:.{digits}g}"
    if "e" in number and 1 <= abs(value) < 1e9:
        number = f"{value:.0f}"
    return ascii_line(f"{number} {unit}")


def level_text(decibels: float) -> str:
    """How far one level stands from another, in words.

    >>> level_text(20.0), level_text(-3.04)
    ('20.0 dB above', '3.0 dB below')
    """
    return f"{abs(decibels):.1f} dB {'above' if decibels >= 0 else 'below'}"


def percent_text(share: float) -> str:
    """A share of a whole as '12 %', '<1 %' where it would round to nothing.

    >>> percent_text(0.123), percent_text(0.004)
    ('12 %', '<1 %')
    """
    return f"{100 * share:.0f} %" if share >= 0.005 else "<1 %"
