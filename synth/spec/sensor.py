"""The sensor of a spec: what it gives, its source impedance, and how it rolls off."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import ClassVar

from synth.quantity import unit_problem
from synth.spec import checks
from synth.spec.checks import refuse

OUTPUT_UNITS = {"voltage": "V", "current": "A", "charge": "C"}
SENSOR_OUTPUTS = tuple(OUTPUT_UNITS)
ROLLOFF_KINDS = ("high-pass", "low-pass", "resonant", "loss", "table")
SHAPES = ("high-pass", "low-pass")


@dataclass(frozen=True, slots=True)
class Motional:
    """Motional branch of an electromechanical sensor: resistance [ohm], inductance [H], capacitance [F] in series."""

    SECTION: ClassVar[str] = "sensor.motional"
    resistance: float
    inductance: float
    capacitance: float

    def __post_init__(self) -> None:
        checks.positive(self, "resistance", "inductance", "capacitance")


@dataclass(frozen=True, slots=True)
class Rolloff:
    """One factor of the sensor's response, relative to its flat region.

    Attributes:
        kind: "high-pass", "low-pass" (corner [Hz], order), "resonant" (frequency [Hz], q), "loss" (loss, a share of
            the flat response, at [Hz], shape "high-pass" or "low-pass") or "table".
        tolerance: share of the corner or frequency (of the loss for "loss", of the gain for "table").
        file: name of the table as the spec gives it; points: its rows (Hz, gain) or (Hz, gain, degrees), rising.
    """

    SECTION: ClassVar[str] = "sensor.rolloff"
    NEEDS: ClassVar[dict[str, tuple[str, ...]]] = {
        "high-pass": ("corner",),
        "low-pass": ("corner",),
        "resonant": ("frequency", "q"),
        "loss": ("at", "loss", "shape"),
        "table": ("points",),
    }
    kind: str
    corner: float | None = None
    order: int = 1
    frequency: float | None = None
    q: float | None = None
    at: float | None = None
    loss: float | None = None
    shape: str | None = None
    file: str | None = None
    points: tuple[tuple[float, ...], ...] = ()
    tolerance: float | None = None

    def __post_init__(self) -> None:
        checks.one_of(self, "kind", ROLLOFF_KINDS)
        needed = self.NEEDS[self.kind]
        for name in ("corner", "frequency", "q", "at", "loss", "shape", "points", "file"):
            given = getattr(self, name) not in (None, ())
            if given and name not in needed and not (name == "file" and self.kind == "table"):
                remedy = f"remove it, that kind takes {', '.join(needed)}".replace("points", "file")
                raise refuse(self, name, f'does not belong to a rolloff of kind "{self.kind}"; {remedy}')
            if name in needed and not given:
                key = "file" if name == "points" else name
                raise refuse(self, key, f'is missing; a rolloff of kind "{self.kind}" needs it')
        if self.order != 1 and self.kind not in SHAPES:
            raise refuse(self, "order", f'does not belong to a rolloff of kind "{self.kind}"; remove it')
        checks.integer(self, "order", 1, 6)
        checks.positive(self, "corner", "frequency", "q", "at")
        checks.share(self, "loss")
        checks.share(self, "tolerance", zero=True)
        checks.one_of(self, "shape", SHAPES)
        checks.one_line(self, "file")
        if self.points and (problem := points_problem(self.points)):
            raise refuse(self, "points", problem)


def points_problem(points: tuple[tuple[float, ...], ...]) -> str:
    """What keeps rows (Hz, gain[, degrees]) from being a response, "" if nothing."""
    if len(points) < 3:
        return f"has {len(points)} rows; a response needs at least 3"
    columns = len(points[0])
    previous = 0.0
    for number, row in enumerate(points, start=1):
        if len(row) != columns or columns not in (2, 3):
            return f"row {number} has {len(row)} columns; write Hz, gain or Hz, gain, degrees in every row"
        if not all(math.isfinite(x) for x in row):
            return f"row {number} holds a value that is not finite; remove the row"
        if row[0] <= previous:
            return f"row {number}: the frequency {row[0]:g} Hz does not rise above {previous:g} Hz; sort the rows"
        if row[1] <= 0:
            return f"row {number}: the gain {row[1]:g} must be above zero (a linear factor, not decibels)"
        previous = row[0]
    return ""


@dataclass(frozen=True, slots=True)
class Sensor:
    """What the sensor gives and how it rolls off.

    Attributes:
        scale: [V, A or C per input unit] open-circuit output over input where the response is flat.
        input_unit: the unit of the input, any text of a unit's grammar.
        output: "voltage", "current" or "charge".
        resistance: [ohm] of the source; inductance: [H] in series; capacitance: [F] in parallel, with its cable.
        burden: [ohm] and magnetizing_inductance: [H] of a transformer, instead of the resistance.
        motional: motional branch, instead of the resistance.
        noise: [V, A or C per root hertz] at the terminals, after the rolloff; None: 4kT Re Z(f).
        rolloff: factors of the response.
        scale_tolerance: share; scale_temperature_coefficient: [1/K].
    """

    SECTION: ClassVar[str] = "sensor"
    scale: float
    input_unit: str
    output: str = "voltage"
    scale_tolerance: float | None = None
    scale_temperature_coefficient: float | None = None
    resistance: float | None = None
    inductance: float | None = None
    capacitance: float | None = None
    burden: float | None = None
    magnetizing_inductance: float | None = None
    motional: Motional | None = None
    noise: float | None = None
    rolloff: tuple[Rolloff, ...] = ()

    def __post_init__(self) -> None:
        checks.one_of(self, "output", SENSOR_OUTPUTS)
        if problem := unit_problem(self.input_unit):
            raise refuse(self, "input_unit", f"{problem}; name the unit of the sensor's input")
        checks.positive(self, "scale", "resistance", "inductance", "capacitance", "burden", "magnetizing_inductance")
        checks.positive(self, "noise")
        checks.share(self, "scale_tolerance", zero=True)
        checks.finite(self, "scale_temperature_coefficient")
        if abs(self.scale_temperature_coefficient or 0.0) >= 0.1:
            raise refuse(self, "scale_temperature_coefficient", 'must be below 10 %/K; write it as "100 ppm"')
        for name, other in (("burden", "magnetizing_inductance"), ("magnetizing_inductance", "burden")):
            if getattr(self, name) is not None and getattr(self, other) is None:
                raise refuse(self, name, f"needs sensor.{other} beside it; add it")
        for name in ("burden", "motional"):
            if getattr(self, name) is not None and self.resistance is not None:
                raise refuse(self, "resistance", f"cannot stand beside sensor.{name}; remove one of them")
        if self.burden is not None and self.motional is not None:
            raise refuse(self, "burden", "cannot stand beside sensor.motional; remove one of them")

    @property
    def output_unit(self) -> str:
        """ "V", "A" or "C"."""
        return OUTPUT_UNITS[self.output]
