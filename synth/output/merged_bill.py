"""One bill for several designs and several boards of each: what to order in all."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from synth.errors import FolderError
from synth.model.record import DesignRecord
from synth.output.bill import COLUMNS, BillRow, bill_rows, defused


@dataclass(frozen=True, slots=True)
class MergedBill:
    """The lines of all bills, equal parts on one line.

    Attributes:
        folders: as they are named in the references; boards: of each.
        rows: as of a single bill; references of one board each, "folder/R1" for more than one folder, quantities of
            all boards.
    """

    folders: tuple[str, ...]
    boards: int
    rows: tuple[BillRow, ...]


def merged_bill(folders: Sequence[tuple[Path, DesignRecord]], boards: int = 1) -> MergedBill:
    """Merge the bills of designs: resistors by value, then capacitors by value, then op amp packages.

    Args:
        folders: where each design lies, for its name, and the design.
        boards: how many of each are built.

    Raises:
        FolderError: no folder, the same one twice, or less than one board.
        SynthError: as `bill_rows`.
    """
    if not folders:
        raise FolderError("no design folder is named; name at least one")
    if boards < 1:
        raise FolderError(f"boards = {boards}: must be at least 1; correct it")
    names = _names([path for path, _ in folders])
    several = len(folders) > 1
    merged: dict[tuple[object, ...], BillRow] = {}
    order: dict[tuple[object, ...], tuple[int, float]] = {}
    for name, (_, record) in zip(names, folders, strict=True):
        parts = {part.ref: part for part in record.chain.parts}
        for row in bill_rows(record):
            key = (row.value, row.code, row.tolerance, row.rating, row.type)
            part = parts.get(row.references[0]) if row.code else None
            rank = 2 if part is None else int(part.kind == "capacitor")
            order.setdefault(key, (rank, 0.0 if part is None else part.number))
            merged[key] = _together(merged.get(key), row, name if several else "", boards)
    return MergedBill(names, boards, tuple(merged[key] for key in sorted(merged, key=lambda key: order[key])))


def _together(before: BillRow | None, row: BillRow, name: str, boards: int) -> BillRow:
    references = tuple(f"{name}/{ref}" for ref in row.references) if name else row.references
    note = f"{name}: {row.note}" if name and row.note else row.note
    new = replace(row, references=references, quantity=row.quantity * boards, note=note)
    if before is None:
        return new
    return replace(
        before,
        references=before.references + new.references,
        quantity=before.quantity + new.quantity,
        note="; ".join(text for text in (before.note, new.note) if text),
    )


def _names(paths: Sequence[Path]) -> tuple[str, ...]:
    """The folders by the shortest end of their paths that tells them apart, without spaces."""
    resolved = [path.resolve() for path in paths]
    for path, one in zip(paths, resolved, strict=True):
        if resolved.count(one) > 1:
            raise FolderError(f"{path}: is named twice; name it once, the number of boards says how many are built")
    for depth in range(1, max(len(path.parts) for path in resolved) + 1):
        names = ["/".join("_".join(piece.split()) for piece in path.parts[-depth:]) for path in resolved]
        if len(set(names)) == len(names):
            return tuple(names)
    return tuple(f"{number}" for number in range(1, len(paths) + 1))  # alike but for their spaces


def merged_csv(bill: MergedBill) -> str:
    """The columns of bom.csv, `\\n` line ends, no cell that a spreadsheet takes for a formula."""
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\n")
    writer.writerow(COLUMNS)
    for row in bill.rows:
        writer.writerow([defused(cell) for cell in _cells(row)])
    return buffer.getvalue()


def merged_json(bill: MergedBill) -> str:
    """The bill as an object: folders, boards, and lines by the names of the columns."""
    lines: list[dict[str, object]] = []
    for row in bill.rows:
        cells: dict[str, object] = dict(zip(COLUMNS, _cells(row), strict=True))
        lines.append(cells | {COLUMNS[0]: list(row.references), COLUMNS[1]: row.quantity})
    return json.dumps({"folders": bill.folders, "boards": bill.boards, "lines": lines}, indent=2) + "\n"


def _cells(row: BillRow) -> tuple[str, ...]:
    first = (" ".join(row.references), str(row.quantity), row.value, row.code, row.tolerance, row.rating)
    return (*first, row.type, row.note)
