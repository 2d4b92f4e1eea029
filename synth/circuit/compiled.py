"""Elimination order found once, run elementwise over arrays of builds and frequencies.

A nodal matrix of a chain is sparse (four or five entries a row), so Gaussian elimination in an order of least
fill [1]_ takes a few dozen multiply-adds.  The order and the list of operations depend on the structure alone
and are compiled once; each operation then runs on whole arrays.  Pivots are chosen at the nominal values with a
threshold against small ones; a build far from nominal is caught by the residual check of the caller.

The output is kept for last: after forward elimination the numerator is the last right-hand side times all
earlier pivots, the determinant the product of all pivots, and no back substitution is needed.

References:
    .. [1] H. M. Markowitz, "The elimination form of the inverse and its application to linear programming",
       Management Science 3 (1957) 255 (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from synth.circuit.network import ComplexArray, FloatArray, Network, Stamps, stamps
from synth.errors import CircuitError

_NOTHING: ComplexArray = np.zeros((1, 1), dtype=complex)
PIVOT_THRESHOLD = 0.05  # of the largest entry in its row


@dataclass(frozen=True, slots=True)
class Step:
    """One pivot: `pivot` slot, then for each row (its slot in the pivot column, [(source, target, fresh)])."""

    pivot: int
    scale: float
    rows: tuple[tuple[int, tuple[tuple[int, int, bool], ...]], ...]


@dataclass(frozen=True, slots=True)
class Program:
    """A compiled circuit; slots are the nonzero entries of the matrix and of the right-hand side.

    Attributes:
        stamps: where element values enter.
        slot: slot of each stamp, shape (stamps,).
        initial: number of slots that the stamps fill.
        slots: number of slots with fill.
        steps: elimination steps, all but the last pivot.
        last: slots of the last pivot and of the last right-hand side (-1 where it stays zero).
        sign: sign of the permutation, so that numerator and determinant are those of the circuit.
    """

    stamps: Stamps
    slot: np.ndarray[tuple[int], np.dtype[np.intp]]
    initial: int
    slots: int
    steps: tuple[Step, ...]
    last: tuple[int, int, float]


def compile_network(network: Network, frequency: float) -> Program:
    """Compile a circuit's elimination, pivots judged at one frequency [Hz].

    Raises:
        CircuitError: the circuit is singular there.
    """
    s = stamps(network)
    n = len(s.nodes)
    value = s.sign * network.values[s.element] * np.where(s.reactive, 2j * np.pi * frequency, 1.0)
    slots: dict[tuple[int, int], int] = {}
    slot = np.empty(s.row.size, dtype=np.intp)
    entries: list[complex] = []
    for k in range(s.row.size):
        column = int(s.column[k]) if s.column[k] >= 0 else n
        slot[k] = slots.setdefault((int(s.row[k]), column), len(slots))
        if slot[k] == len(entries):
            entries.append(0j)
        entries[slot[k]] += value[k]
    initial = len(slots)
    rows: list[dict[int, complex]] = [{} for _ in range(n)]
    for (r, c), k in slots.items():
        rows[r][c] = entries[k]
    steps = _eliminate(rows, slots, s.output, n)
    left = next((r for r in range(n) if s.output in rows[r]), None)
    if left is None or rows[left][s.output] == 0:
        raise CircuitError("the circuit is singular: its output node has no path to ground")
    last = (slots[left, s.output], slots.get((left, n), -1), abs(rows[left][s.output]))
    return Program(s, slot, initial, len(slots), tuple(steps), last)


def _eliminate(rows: list[dict[int, complex]], slots: dict[tuple[int, int], int], output: int, n: int) -> list[Step]:
    """Choose pivots of least fill, record the operations, and carry the nominal numbers along."""
    active_rows, active_columns = set(range(n)), set(range(n)) - {output}
    steps: list[Step] = []
    while active_columns:
        r, c = _choose_pivot(rows, active_rows, active_columns)
        active_rows.discard(r)
        active_columns.discard(c)
        pivot_row = rows[r]
        operations = []
        for other in sorted(active_rows):
            if c not in rows[other]:
                continue
            factor = rows[other].pop(c) / pivot_row[c]
            updates = []
            for column, entry in pivot_row.items():
                if column == c:
                    continue
                fresh = column not in rows[other]
                target = slots.setdefault((other, column), len(slots))
                updates.append((slots[r, column], target, fresh))
                rows[other][column] = rows[other].get(column, 0j) - factor * entry
            operations.append((slots[other, c], tuple(updates)))
        steps.append(Step(slots[r, c], abs(pivot_row[c]), tuple(operations)))
        rows[r] = {}
    return steps


def _choose_pivot(rows: list[dict[int, complex]], active_rows: set[int], columns: set[int]) -> tuple[int, int]:
    in_column = {c: sum(1 for r in active_rows if c in rows[r]) for c in columns}
    best: tuple[tuple[bool, int, float, int, int], int, int] | None = None
    for r in sorted(active_rows):
        largest = max((abs(v) for c, v in rows[r].items() if c < len(rows)), default=0.0)
        width = len(rows[r]) - 1
        for c, v in rows[r].items():
            if c not in columns or v == 0:
                continue
            small = abs(v) < PIVOT_THRESHOLD * largest  # taken only where a column has nothing larger to offer
            key = (small, width * (in_column[c] - 1), -abs(v) / largest, r, c)
            if best is None or key < best[0]:
                best = (key, r, c)
    if best is None:
        raise CircuitError("the circuit is singular: a node has no path to ground")
    return best[1], best[2]


def run(program: Program, values: FloatArray, s: ComplexArray) -> tuple[ComplexArray, ComplexArray]:
    """Numerator and determinant at each complex frequency and build, up to one common real factor.

    Args:
        values: element values, shape (elements, builds).
        s: complex frequency [rad/s], shape (F, 1), or (F, builds) where each build has its own.

    Returns:
        two arrays of shape (F, builds); the response is their quotient.
    """
    slots = _fill(program, values, s)  # fill-in slots are set before they are read; used-up ones keep stale values
    determinant: ComplexArray = np.ones((1, 1), dtype=complex)
    for step in program.steps:
        pivot = slots[step.pivot]
        determinant = determinant * (pivot * (1.0 / step.scale))
        inverse = 1.0 / pivot
        for column_slot, updates in step.rows:
            factor = slots[column_slot] * inverse
            for source, target, fresh in updates:
                product = factor * slots[source]
                slots[target] = -product if fresh else slots[target] - product
    shape = (s.shape[0], values.shape[1])
    pivot_slot, rhs_slot, scale = program.last
    rhs = slots[rhs_slot] if rhs_slot >= 0 else np.zeros((1, 1))
    numerator = np.broadcast_to(determinant * rhs * (1.0 / scale), shape)
    return numerator, np.broadcast_to(determinant * slots[pivot_slot] * (1.0 / scale), shape)


def _fill(program: Program, values: FloatArray, frequency: ComplexArray) -> list[ComplexArray]:
    """Initial slots, conductance + s capacitance; of shape (1, 1) where nothing varies."""
    s = program.stamps
    order = np.argsort(program.slot, kind="stable")
    bounds = np.searchsorted(program.slot[order], np.arange(program.initial + 1))
    varies = np.any(values != values[:, :1], axis=1)
    slots: list[ComplexArray] = [_NOTHING] * program.slots
    for k in range(program.initial):
        members = order[bounds[k] : bounds[k + 1]]
        moving = bool(varies[s.element[members]].any())
        chosen = values if moving else values[:, :1]
        terms = s.sign[members, None] * chosen[s.element[members]]
        reactive = s.reactive[members]
        static = terms[~reactive].sum(axis=0)[None, :]
        if reactive.any():
            slots[k] = static + frequency * terms[reactive].sum(axis=0)[None, :]
        else:
            slots[k] = static.astype(complex)
    return slots
