"""Parts of the catalogs on a terminal, at 80 columns, and as JSON."""

from __future__ import annotations

import json
from collections.abc import Iterable, Sequence
from dataclasses import asdict

from synth.output.text import GAP, align_units, ascii_line, flow, quantity_text, table, wrap
from synth.parts.check import CatalogReport
from synth.parts.listing import OpAmpLine, OpAmpQuery, Sheet
from synth.quantity import format_si

_COLUMNS = {  # of a list of a kind: title -> figure
    "resistors": {
        "kind": "", "tolerances and series": "classes", "temperature": "temperature_coefficients",
        "values": "useful_range", "usual case": "default_size",
    },
    "capacitors": {
        "dielectric": "", "sets f": "sets_frequency", "tolerances and series": "classes",
        "temperature": "temperature_coefficient", "values": "frequency_range", "rating": "voltage",
    },
    "crystals": {
        "crystal": "", "R1": "series_resistance", "C1": "motional_capacitance", "C0": "shunt_capacitance",
        "CL": "load_capacitance", "drive": "drive_limit", "Q": "q",
    },
}  # fmt: skip


def op_amp_table(lines: Sequence[OpAmpLine], query: OpAmpQuery) -> str:
    """Op amps, one a line, with their noise at the frequency asked for."""
    if not lines:
        return "no op amp of the catalogs fits all of that; ask less, or add your own catalog\n"
    where = "white" if query.frequency is None else f"at {format_si(query.frequency, 'Hz')}"
    order = "slowest first" if query.frequency is None else "quietest first"
    columns = {
        "type": [line.entry.op_amp.type for line in lines],
        "input": [line.entry.op_amp.technology for line in lines],
        "GBW": align_units([format_si(line.entry.op_amp.gain_bandwidth, "Hz", 3) for line in lines]),
        "en": align_units([format_si(line.voltage_noise, "V", 3) for line in lines]),
        "in": align_units([format_si(line.current_noise, "A", 3) for line in lines]),
        "slew rate": align_units([quantity_text(line.entry.op_amp.slew_rate, "V/s", 3) for line in lines]),
        "supply": align_units([_supply(line) for line in lines]),
        "current": align_units([format_si(line.entry.op_amp.supply_current, "A", 3) for line in lines]),
    }
    head = f"{len(lines)} op amp{'s' if len(lines) > 1 else ''}, {order}; en, in: noise per root hertz, {where}"
    return _text([head, *table(list(columns), list(zip(*columns.values(), strict=True)))])


def _supply(line: OpAmpLine) -> str:
    one = line.entry.op_amp
    return f"{one.supply_minimum:g}-{one.supply_maximum:g} V"


def op_amp_json(lines: Sequence[OpAmpLine], query: OpAmpQuery) -> str:
    """The same as a list of objects: SI figures, noise densities at `noise_frequency` (null: white)."""
    return _json(
        [
            {
                **asdict(line.entry.op_amp),
                "packages": {order: size for size, order in line.entry.op_amp.packages},
                "noise_frequency": query.frequency,
                "voltage_noise_density": line.voltage_noise,
                "current_noise_density": line.current_noise,
            }
            for line in lines
        ]
    )


def kind_table(kind: str, sheets: Sequence[Sheet]) -> str:
    """Resistors, capacitors or crystals, one a line."""
    columns = _COLUMNS[kind]
    rows = [[_cell(sheet, figure).partition(":")[0] for figure in columns.values()] for sheet in sheets]
    if kind == "crystals":
        rows = [list(row) for row in zip(*(align_units(column) for column in zip(*rows, strict=True)), strict=True)]
        for row, sheet in zip(rows, sheets, strict=True):
            row[0] = ascii_line(sheet.name)
    return _text(table(list(columns), rows))


def _cell(sheet: Sheet, name: str) -> str:
    if not name:
        return ascii_line(sheet.name)
    figure = next(figure for figure in sheet.figures if figure.name == name)
    return _value(figure.value, figure.unit, 3)


def _value(value: float | str | None, unit: str, digits: int = 4) -> str:
    if isinstance(value, str):
        return ascii_line(value)
    return quantity_text(value, unit, digits).strip()


def sheet_text(sheet: Sheet) -> str:
    """One part whole: each figure with where it comes from, source and note below."""
    rows = [[figure.name, _value(figure.value, figure.unit), figure.provenance] for figure in sheet.figures]
    lines = [ascii_line(f"{sheet.name}, {sheet.kind}"), *table(("figure", "value", "provenance"), rows)]
    lines += wrap(sheet.source, f"{GAP}source: ", GAP + GAP)
    lines += wrap(sheet.note, f"{GAP}note: ", GAP + GAP) if sheet.note else []
    return _text(lines)


def sheet_json(sheets: Sheet | Sequence[Sheet]) -> str:
    """One part, or a list of them: figures by name with value, unit and provenance."""
    return _json(_sheet_object(sheets) if isinstance(sheets, Sheet) else [_sheet_object(sheet) for sheet in sheets])


def _sheet_object(sheet: Sheet) -> dict[str, object]:
    figures = {
        figure.name: {"value": figure.value, "unit": figure.unit, "provenance": figure.provenance}
        for figure in sheet.figures
    }
    return {"kind": sheet.kind, "name": sheet.name, "figures": figures, "source": sheet.source, "note": sheet.note}


def report_text(report: CatalogReport) -> str:
    """What is wrong in a catalog, a line each, or what it holds."""
    if report.problems:
        count = len(report.problems)
        head = f"{report.file}: {count} problem{'s' if count > 1 else ''}"
        return _text([ascii_line(problem.text) for problem in report.problems] + [ascii_line(head)])
    lines = [ascii_line(f"{report.file}: can be used")]
    for kind, names in report.holds.items():
        lines += flow(
            [f"{name} (replaces the program's)" if name in report.replaces.get(kind, ()) else name for name in names],
            f"{GAP}{kind.replace('_', ' ')}: ",
        )
    return _text(lines if report.holds else [*lines, f"{GAP}it holds no parts"])


def report_json(report: CatalogReport) -> str:
    """The same as an object."""
    problems = [{"entry": one.entry, "key": one.key, "line": one.line, "text": one.text} for one in report.problems]
    return _json({"file": str(report.file), "problems": problems, "holds": report.holds, "replaces": report.replaces})


def _text(lines: Iterable[str]) -> str:
    return "".join(f"{line.rstrip()}\n" for line in lines)


def _json(value: object) -> str:
    return json.dumps(value, indent=2, allow_nan=False) + "\n"
