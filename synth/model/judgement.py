"""What the judges found out about a chain: every number that any output shows."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Requirement:
    """One line of the spec turned into a limit.

    Attributes:
        name: "bandwidth", "reject 300 kHz", ...
        at_least, at_most: limits in `unit`; None where that side is free; both None when not judged.
        unit: "Hz", "dB", "V", "" ...
        nominal: of the nominal build, None when not judged.
        low, high: range that holds 99 % of builds with 95 % confidence, None where builds have no figure.
        margin: distance to the nearest limit in `unit`, negative when not met, None when not judged.
        met: True, False, or None for not judged.
        note: why it is not judged, or where the figure was taken.
    """

    name: str
    unit: str
    at_least: float | None = None
    at_most: float | None = None
    nominal: float | None = None
    low: float | None = None
    high: float | None = None
    margin: float | None = None
    met: bool | None = None
    note: str = ""


@dataclass(frozen=True, slots=True)
class ResponseTable:
    """Frequency response, V out per input unit: a wide sweep f0/1000 to 1000 f0 and a close grid, merged.

    Attributes:
        frequency: [Hz] rising, shape (F,); gain: complex [V per input unit]; group_delay: [s].
        close: True where |f/f0 - f0/f| <= 10 B/f0, shape (F,).
    """

    frequency: FloatArray
    gain: NDArray[np.complex128]
    group_delay: FloatArray
    close: NDArray[np.bool_]

    @property
    def gain_db(self) -> FloatArray:
        """20 log10 |gain|."""
        decibels: FloatArray = 20 * np.log10(np.abs(self.gain))
        return decibels

    @property
    def phase_deg(self) -> FloatArray:
        """Unwrapped phase [degree]."""
        phase: FloatArray = np.degrees(np.unwrap(np.angle(self.gain)))
        return phase


@dataclass(frozen=True, slots=True)
class Contributor:
    """Share of one noise source: density at the output at the centre [V/rtHz] and rms in the chain's band [V]."""

    label: str
    density: float
    inband_rms: float


@dataclass(frozen=True, slots=True)
class NoiseTable:
    """Noise at the output.

    Attributes:
        frequency: [Hz], density: [V/rtHz], shape (F,), on the response's grid.
        output_rms: [V] over the whole wide sweep; inband_rms: [V] between the -3 dB points.
        input_density_at_center: [input unit/rtHz] the density divided by the gain, at the centre.
        smallest_reading_snr_db: smallest reading over inband_rms; contributors sorted, largest first.
    """

    frequency: FloatArray
    density: FloatArray
    output_rms: float
    inband_rms: float
    input_density_at_center: float
    smallest_reading_snr_db: float
    contributors: tuple[Contributor, ...]


@dataclass(frozen=True, slots=True)
class StageResult:
    """What a stage does in the chain at the spec's centre.

    Attributes:
        name: of the stage.
        gain: signed where the phase is within 90 degrees of 0 (plus) or 180 (minus) [V/V; V/A or V/C for a first
            stage that takes a current or a charge].
        center_frequency, q: realized pole pair in the whole chain, None for a gain stage.
        level: [V] rms at full scale at the output of its fullest amplifier.
        peak: [V] largest voltage there: full scale and interference in the worst phase.
        phase_margin: [degree] of its worst amplifier's loop, None when the loop gain never reaches one.
    """

    name: str
    gain: float
    center_frequency: float | None
    q: float | None
    level: float
    peak: float
    phase_margin: float | None


@dataclass(frozen=True, slots=True)
class Realized:
    """The chain as built: centre (geometric mean of the first -3 dB crossings outward), bandwidth [Hz], gains.

    `gain_db` is V per input unit, `voltage_gain_db` relative to the sensor's flat open-circuit output; `low_edge`
    and `high_edge` are the -3 dB crossings; `poles` in rad/s.
    """

    center_frequency: float
    bandwidth: float
    low_edge: float
    high_edge: float
    gain_db: float
    voltage_gain_db: float
    poles: tuple[complex, ...]


@dataclass(frozen=True, slots=True)
class SensorModel:
    """Poles and zeros [rad/s] of the sensor's response, its loss at the centre, and the fit's residual (0: exact)."""

    poles: tuple[complex, ...]
    zeros: tuple[complex, ...]
    gain_at_center: float
    residual: float


@dataclass(frozen=True, slots=True)
class BuildYield:
    """Share of builds that meet one requirement, and what spreads its figure.

    Attributes:
        name: of the requirement; counted: False where a trim takes care of it.
        share: of builds that meet it; low, high: its 95 % interval (Clopper-Pearson).
        causes: (what was drawn, share of the figure's variance), largest first.
    """

    name: str
    counted: bool
    share: float
    low: float
    high: float
    causes: tuple[tuple[str, float], ...]


@dataclass(frozen=True, slots=True)
class Builds:
    """What the drawn builds do.

    Attributes:
        count: builds drawn; seed: of the draws; trim: state of trim in which they are judged.
        share: of builds that meet everything counted together; low, high: its 95 % interval.
        yields: by requirement.
    """

    count: int
    seed: int
    trim: str
    share: float
    low: float
    high: float
    yields: tuple[BuildYield, ...]


@dataclass(frozen=True, slots=True)
class LayoutDemand:
    """A stray capacitance that the layout must stay below.

    Attributes:
        source: later stage; output: its output node; victim: earlier stage, or "sensor"; node: where it picks up.
        limit: [F] that changes the gain at the centre by its share of the accuracy.
        critical: [F] at which the chain oscillates, None where no capacitance there makes it.
    """

    source: str
    output: str
    victim: str
    node: str
    limit: float
    critical: float | None


@dataclass(frozen=True, slots=True)
class Verification:
    """Everything the judges say about one chain against one spec; `builds` is None where none were drawn."""

    response: ResponseTable
    noise: NoiseTable
    realized: Realized
    sensor_model: SensorModel
    stages: tuple[StageResult, ...]
    requirements: tuple[Requirement, ...]
    cautions: tuple[str, ...]
    builds: Builds | None = None
    layout: tuple[LayoutDemand, ...] = ()

    @property
    def all_met(self) -> bool:
        """True when no judged requirement is missed."""
        return all(requirement.met is not False for requirement in self.requirements)
