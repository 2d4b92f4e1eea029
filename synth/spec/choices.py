"""The optional sections of a spec: parts, filter, detector, calibration, resonator, and what to prefer."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import ClassVar

from synth.spec import checks
from synth.spec.checks import refuse

SERIES = ("E3", "E6", "E12", "E24", "E48", "E96", "E192")
FAMILIES = ("butterworth", "synchronous", "chebyshev", "bessel", "gaussian")
TOPOLOGIES = (
    "multiple-feedback",
    "delyiannis-friend",
    "dual-amplifier",
    "tow-thomas",
    "state-variable",
    "akerberg-mossberg",
)
DETECTOR_KINDS = ("rms", "average", "peak", "synchronous", "adc", "none")
TRIMS = ("gain", "gain+frequency", "none")
CORRECTIONS = ("numeric",)
PREFERENCES = ("yield", "noise", "parts", "current")
EFFORTS = ("quick", "full")


def _check_passive(choice: ResistorChoice | CapacitorChoice) -> None:
    checks.one_of(choice, "series", SERIES)
    checks.share(choice, "tolerance", zero=True)
    checks.not_negative(choice, "temperature_coefficient")
    if (choice.temperature_coefficient or 0.0) >= 0.1:
        raise refuse(choice, "temperature_coefficient", 'must be below 10 %/K; write it as "50 ppm"')


@dataclass(frozen=True, slots=True)
class ResistorChoice:
    """Resistors to use: series, tolerance (share), temperature_coefficient [1/K]; None: the catalog decides."""

    SECTION: ClassVar[str] = "parts.resistors"
    series: str | None = None
    tolerance: float | None = None
    temperature_coefficient: float | None = None

    def __post_init__(self) -> None:
        _check_passive(self)


@dataclass(frozen=True, slots=True)
class CapacitorChoice:
    """Capacitors to use: as `ResistorChoice`, and the dielectric ("C0G")."""

    SECTION: ClassVar[str] = "parts.capacitors"
    series: str | None = None
    tolerance: float | None = None
    temperature_coefficient: float | None = None
    dielectric: str | None = None

    def __post_init__(self) -> None:
        _check_passive(self)
        checks.one_line(self, "dielectric")


@dataclass(frozen=True, slots=True)
class PartsChoice:
    """The parts drawer.

    Attributes:
        op_amps: type numbers to choose from, () for any of the catalogs.
        catalogs: files of the person's own parts; stock: CSV kind,value,quantity, the only parts to use.  Names as
            the spec gives them; `Spec.catalog_files` and `Spec.stock_file` say where they lie.
    """

    SECTION: ClassVar[str] = "parts"
    resistors: ResistorChoice = ResistorChoice()
    capacitors: CapacitorChoice = CapacitorChoice()
    op_amps: tuple[str, ...] = ()
    catalogs: tuple[str, ...] = ()
    stock: str | None = None

    def __post_init__(self) -> None:
        checks.one_line(self, "op_amps", "catalogs", "stock")


@dataclass(frozen=True, slots=True)
class FilterChoice:
    """What the person insists on: family, number of bandpass sections, topology; None: the planner decides."""

    SECTION: ClassVar[str] = "filter"
    family: str | None = None
    sections: int | None = None
    topology: str | None = None

    def __post_init__(self) -> None:
        checks.one_of(self, "family", FAMILIES)
        checks.integer(self, "sections", 1, 6)
        checks.one_of(self, "topology", TOPOLOGIES)


@dataclass(frozen=True, slots=True)
class Detector:
    """What turns the chain's output into the reading.

    Attributes:
        kind: "rms", "average", "peak", "synchronous", "adc" or "none".
        error: share of reading; offset: [V]; bandwidth: [Hz]; averaging_time: [s].
        sample_rate: [Hz], bits, range: [V] full scale, noise: [V] rms, of an "adc".
        phase_tolerance: [rad] of a "synchronous" detector's reference.
    """

    SECTION: ClassVar[str] = "detector"
    kind: str
    error: float | None = None
    offset: float | None = None
    bandwidth: float | None = None
    averaging_time: float | None = None
    sample_rate: float | None = None
    bits: int | None = None
    range: float | None = None
    noise: float | None = None
    phase_tolerance: float | None = None

    def __post_init__(self) -> None:
        checks.one_of(self, "kind", DETECTOR_KINDS)
        for kind, names in (("adc", ("sample_rate", "bits", "range", "noise")), ("synchronous", ("phase_tolerance",))):
            for name in names:
                if getattr(self, name) is not None and self.kind != kind:
                    raise refuse(self, name, f'belongs to a detector of kind "{kind}" only; remove it')
        checks.share(self, "error", zero=True)
        checks.not_negative(self, "offset", "noise", "phase_tolerance")
        checks.positive(self, "bandwidth", "averaging_time", "sample_rate", "range")
        checks.integer(self, "bits", 4, 32)
        if (self.phase_tolerance or 0.0) >= math.pi / 4:
            raise refuse(self, "phase_tolerance", 'must be below 45 degrees; write it with its unit, such as "1 deg"')


@dataclass(frozen=True, slots=True)
class Calibration:
    """The calibration that will really be done.

    Attributes:
        voltage: [V] rms through a resistor [ohm] into the sensor's terminals; or level: rms in the input unit.
        voltage_tolerance, resistor_tolerance, level_tolerance: shares.
        trim: what is adjusted: "gain", "gain+frequency" or "none".
        correction: "numeric" records a scale factor in place of the gain trim.
    """

    SECTION: ClassVar[str] = "calibration"
    voltage: float | None = None
    resistor: float | None = None
    voltage_tolerance: float | None = None
    resistor_tolerance: float | None = None
    level: float | None = None
    level_tolerance: float | None = None
    trim: str = "gain"
    correction: str | None = None

    def __post_init__(self) -> None:
        checks.positive(self, "voltage", "resistor", "level")
        checks.share(self, "voltage_tolerance", "resistor_tolerance", "level_tolerance", zero=True)
        checks.one_of(self, "trim", TRIMS)
        checks.one_of(self, "correction", CORRECTIONS)
        for name in ("voltage", "resistor"):
            if self.level is not None and getattr(self, name) is not None:
                raise refuse(self, name, "cannot stand beside calibration.level; remove one of them")
        for name, other in (("voltage", "resistor"), ("resistor", "voltage")):
            if getattr(self, name) is None and getattr(self, other) is not None:
                raise refuse(self, name, f"is missing beside calibration.{other}; give both")
        for name in ("voltage", "resistor", "level"):
            if getattr(self, f"{name}_tolerance") is not None and getattr(self, name) is None:
                raise refuse(self, f"{name}_tolerance", f"needs calibration.{name} beside it; add it")

    @property
    def trims_gain(self) -> bool:
        """A part is adjusted for the gain; a numeric correction takes its place."""
        return self.correction is None and self.trim in ("gain", "gain+frequency")

    @property
    def trims_frequency(self) -> bool:
        """A part is adjusted for the centre frequency."""
        return self.trim == "gain+frequency"


@dataclass(frozen=True, slots=True)
class Resonator:
    """A crystal in the chain.

    Attributes:
        series_resistance: [ohm]; motional_capacitance, shunt_capacitance, load_capacitance: [F].
        frequency: [Hz]; drive_limit: [W]; allowed_pull: share of the frequency.
    """

    SECTION: ClassVar[str] = "resonator"
    series_resistance: float | None = None
    motional_capacitance: float | None = None
    shunt_capacitance: float | None = None
    load_capacitance: float | None = None
    frequency: float | None = None
    drive_limit: float | None = None
    allowed_pull: float | None = None

    def __post_init__(self) -> None:
        checks.positive(self, "series_resistance", "motional_capacitance", "shunt_capacitance", "load_capacitance")
        checks.positive(self, "frequency", "drive_limit")
        checks.share(self, "allowed_pull")


@dataclass(frozen=True, slots=True)
class Choose:
    """What to prefer among chains that meet the spec, and how long to search."""

    SECTION: ClassVar[str] = "choose"
    prefer: str = "yield"
    effort: str = "quick"

    def __post_init__(self) -> None:
        checks.one_of(self, "prefer", PREFERENCES)
        checks.one_of(self, "effort", EFFORTS)
