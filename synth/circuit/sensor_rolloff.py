"""The rolloff of a sensor as noiseless blocks, each a factor of the response.

A block is driven from the node before it and leaves its answer at its own node, both in the unit of the sensor's
output for one input unit; no block loads the one before.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from functools import partial

from synth.circuit.network import GROUND, ElementKind
from synth.circuit.rational import RationalFit, fit_table
from synth.errors import CircuitError
from synth.spec import Rolloff

UNIT = 1e-3  # [S] scale of the noiseless inside; no effect at the terminals

Row = tuple[str, ElementKind, tuple[str, ...], float, bool]
Block = Callable[[str, str, str], Iterator[Row]]  # (name, node before, its own node) -> its elements


def first_order_corner(rolloff: Rolloff) -> float:
    """Corner [Hz] of the first-order response that loses `loss` at the frequency `at`.

    |H| = 1/sqrt(1 + (fc/f)^2) for a high-pass; the reciprocal ratio for a low-pass.

    Raises:
        CircuitError: the rolloff has no corner, or a loss without its figures.
    """
    if rolloff.kind != "loss":
        if rolloff.corner is None:
            raise CircuitError(f"a rolloff of kind {rolloff.kind} has no corner")
        return rolloff.corner
    if rolloff.at is None or rolloff.loss is None:
        raise CircuitError("a rolloff of kind loss needs both `at` and `loss`")
    ratio = math.sqrt(1 / (1 - rolloff.loss) ** 2 - 1)
    return rolloff.at * ratio if rolloff.shape == "high-pass" else rolloff.at / ratio


def rolloff_residual(rolloffs: tuple[Rolloff, ...]) -> float:
    """Largest relative error of the rolloffs' circuit against what was measured: the tables' residuals, added."""
    return math.fsum(fit_table(rolloff.points).residual for rolloff in rolloffs if rolloff.kind == "table")


def rolloff_elements(rolloffs: tuple[Rolloff, ...], node: str) -> tuple[tuple[Row, ...], str]:
    """All blocks in order, and the node where their product stands.

    Raises:
        CircuitError: a kind of rolloff that the circuit cannot hold.
    """
    rows: list[Row] = []
    count = 0
    for rolloff in rolloffs:
        for block in _blocks(rolloff):
            count += 1
            previous, node = node, f"sen{count}"
            rows += block(f"sen{count}", previous, node)
    return tuple(rows), node


def corner_elements(rolloffs: tuple[Rolloff, ...]) -> tuple[tuple[Rolloff, tuple[str, ...]], ...]:
    """For each rolloff the names of its capacitances: dividing them by a factor multiplies its corner by it."""
    found, count = [], 0
    for rolloff in rolloffs:
        names = []
        for block in _blocks(rolloff):
            count += 1
            names += [row[0] for row in block(f"sen{count}", "in", f"sen{count}") if row[1] == "capacitance"]
        found.append((rolloff, tuple(names)))
    return tuple(found)


def _blocks(rolloff: Rolloff) -> list[Block]:
    shape = rolloff.shape if rolloff.kind == "loss" else rolloff.kind
    if shape == "table":
        return [partial(_section, section) for section in sections(fit_table(rolloff.points))]
    if shape == "resonant":
        return [partial(_resonance, rolloff)]
    if shape not in ("low-pass", "high-pass"):
        raise CircuitError(f"a rolloff of kind {rolloff.kind} has no circuit")
    order = rolloff.order if rolloff.kind != "loss" else 1
    return [partial(_first_order, first_order_corner(rolloff), shape)] * order


def _first_order(corner: float, shape: str, name: str, before: str, node: str) -> Iterator[Row]:
    low = node if shape == "low-pass" else f"{node}_lp"
    yield f"{name}_gm", "transconductance", (GROUND, low, before, GROUND), UNIT, False
    yield f"{name}_g", "conductance", (low, GROUND), UNIT, False
    yield f"{name}_c", "capacitance", (low, GROUND), UNIT / (2 * math.pi * corner), False
    if shape == "high-pass":  # what the low-pass leaves
        yield f"{name}_gd", "transconductance", (GROUND, node, before, low), UNIT, False
        yield f"{name}_gh", "conductance", (node, GROUND), UNIT, False


def _resonance(rolloff: Rolloff, name: str, before: str, node: str) -> Iterator[Row]:
    """(w0/Q) s / (s^2 + (w0/Q) s + w0^2): one at the resonance."""
    if rolloff.frequency is None or rolloff.q is None:
        raise CircuitError("a rolloff of kind resonant needs both `frequency` and `q`")
    capacitance = UNIT / (2 * math.pi * rolloff.frequency)
    inner = f"{node}_i"
    yield f"{name}_gm", "transconductance", (GROUND, node, before, GROUND), UNIT / rolloff.q, False
    yield f"{name}_g", "conductance", (node, GROUND), UNIT / rolloff.q, False
    yield f"{name}_c", "capacitance", (node, GROUND), capacitance, False
    yield f"{name}_gb", "transconductance", (node, GROUND, inner, GROUND), UNIT, False
    yield f"{name}_gf", "transconductance", (GROUND, inner, node, GROUND), UNIT, False
    yield f"{name}_ci", "capacitance", (inner, GROUND), capacitance, False


@dataclass(frozen=True, slots=True)
class Section:
    """A factor c0 + c1 p + c2 p^2 over 1 + p, or over 1 + damping p + p^2, with p = s / corner.

    Attributes:
        corner: [rad/s], 0 for a factor without poles.
        damping: None for first order.
        numerator: (c0, c1, c2).
    """

    corner: float
    damping: float | None
    numerator: tuple[float, float, float]


def sections(fit: RationalFit) -> tuple[Section, ...]:
    """The fit as factors of first and second order, their product exactly the fit.

    Poles and zeros of like size go together; each factor is one in magnitude at the poles' mean frequency, but for
    the first, which carries the gain.
    """
    poles, zeros = _paired(fit.poles), _paired(fit.zeros)
    if not poles:
        return (Section(0.0, None, (fit.gain, 0.0, 0.0)),)
    at = 1j * _mean_size(fit.poles)
    found = []
    level = fit.gain
    for pair in poles:
        corner = _mean_size(pair)
        chosen = next((z for z in zeros if len(z) == len(pair)), next((z for z in zeros if len(z) < len(pair)), ()))
        if chosen:
            zeros.remove(chosen)
        size = abs(math.prod(at - z for z in chosen) / math.prod(at - p for p in pair))
        level *= size
        scale = 1 / (size * corner ** (len(pair) - len(chosen)))
        found.append(Section(corner, _damping(pair, corner), _numerator(chosen, corner, scale)))
    c0, c1, c2 = found[0].numerator
    return (replace(found[0], numerator=(level * c0, level * c1, level * c2)), *found[1:])


def _mean_size(roots: tuple[complex, ...]) -> float:
    return math.exp(sum(math.log(abs(root)) for root in roots) / len(roots))


def _damping(pair: tuple[complex, ...], corner: float) -> float | None:
    return -sum(pair).real / corner if len(pair) == 2 else None


def _numerator(zeros: tuple[complex, ...], corner: float, scale: float) -> tuple[float, float, float]:
    """scale * prod(p - zero/corner) as coefficients of 1, p, p^2."""
    coefficients = [scale, 0.0, 0.0]
    if len(zeros) == 1:
        coefficients = [-scale * zeros[0].real / corner, scale, 0.0]
    elif len(zeros) == 2:
        total, product = sum(zeros).real / corner, (zeros[0] * zeros[1]).real / corner**2
        coefficients = [scale * product, -scale * total, scale]
    return coefficients[0], coefficients[1], coefficients[2]


def _paired(roots: tuple[complex, ...]) -> list[tuple[complex, ...]]:
    """Conjugates together, real roots in pairs by size, one left over last where their number is odd."""
    pairs: list[tuple[complex, ...]] = [(r, r.conjugate()) for r in roots if r.imag > 0]
    real = sorted((r for r in roots if r.imag == 0), key=abs)
    pairs += [(real[k], real[k + 1]) for k in range(0, len(real) - 1, 2)]
    pairs.sort(key=lambda pair: abs(pair[0] * pair[1]))
    return pairs + [(r,) for r in real[len(real) - len(real) % 2 :]]


def _section(section: Section, name: str, before: str, node: str) -> Iterator[Row]:
    """Integrators, and a sum of what they hold; low is 1/D, band p/D, and input - low - damping band is p^2/D."""
    c0, c1, c2 = section.numerator
    yield f"{name}_g", "conductance", (node, GROUND), UNIT, False
    if section.corner == 0:
        yield f"{name}_gm", "transconductance", (GROUND, node, before, GROUND), UNIT * c0, False
        return
    low, band, capacitance = f"{node}_l", f"{node}_b", UNIT / section.corner
    yield f"{name}_cl", "capacitance", (low, GROUND), capacitance, False
    yield f"{name}_c0", "transconductance", (GROUND, node, low, GROUND), UNIT * c0, False
    if section.damping is None:
        yield f"{name}_gi", "transconductance", (GROUND, low, before, low), UNIT, False
        yield f"{name}_c1", "transconductance", (GROUND, node, before, low), UNIT * c1, False
        return
    yield f"{name}_gl", "transconductance", (GROUND, low, band, GROUND), UNIT, False
    yield f"{name}_cb", "capacitance", (band, GROUND), capacitance, False
    yield f"{name}_gb", "conductance", (band, GROUND), UNIT * section.damping, False
    yield f"{name}_gi", "transconductance", (GROUND, band, before, low), UNIT, False
    yield f"{name}_c1", "transconductance", (GROUND, node, band, GROUND), UNIT * (c1 - c2 * section.damping), False
    if c2 != 0:
        yield f"{name}_c2", "transconductance", (GROUND, node, before, low), UNIT * c2, False
