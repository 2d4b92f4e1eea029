"""What was asked: the spec as frozen dataclasses, valid by construction.

Numbers are SI (hertz, ohm, farad, henry, volt, ampere, second), rms unless a name says peak; shares are fractions
(0.03 for 3 %), levels in decibels where the docstring says dB, temperatures degrees Celsius.  A key that was left
out is None where the contract names no default.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from typing import ClassVar

from synth.quantity import format_si
from synth.spec import checks
from synth.spec.checks import refuse
from synth.spec.choices import Calibration, Choose, Detector, FilterChoice, PartsChoice, Resonator
from synth.spec.sensor import Sensor

FORMAT = 1
INTERFERENCE_KINDS = ("tone", "square")


@dataclass(frozen=True, slots=True)
class Settling:
    """The envelope after a step of the signal stays inside the share `to` after `within` [s]."""

    SECTION: ClassVar[str] = "target.settling"
    within: float
    to: float

    def __post_init__(self) -> None:
        checks.positive(self, "within")
        checks.share(self, "to")


@dataclass(frozen=True, slots=True)
class Reject:
    """A `frequency` [Hz] has to lie `by` [dB] below the centre."""

    SECTION: ClassVar[str] = "target.reject"
    frequency: float
    by: float

    def __post_init__(self) -> None:
        checks.positive(self, "frequency", "by")


@dataclass(frozen=True, slots=True)
class Target:
    """What the whole chain must do.

    Attributes:
        center_frequency, bandwidth: [Hz], the bandwidth between the -3 dB points of the whole chain.
        full_scale, smallest: rms, in the sensor's input unit.
        output: [V] rms at full scale and centre, or None; gain: [V/V] linear, sensor terminals (flat region) to
            output, or None.  Exactly one is given.
        bandwidth_tolerance: share of the bandwidth; center_tolerance: share of the bandwidth, too.
        signal_tolerance: how far the signal may lie from the centre, share of the centre frequency.
        accuracy, accuracy_smallest: share of reading, expanded (k = 2), after calibration.
        signal_to_noise: [dB] at the smallest reading; ripple: [dB].
        group_delay_variation: [s] over the central half of the bandwidth.
        load: [ohm], load_capacitance: [F], at the output.
        required_yield: share of builds that must meet everything (key `yield`).
    """

    SECTION: ClassVar[str] = "target"
    center_frequency: float
    bandwidth: float
    full_scale: float
    smallest: float
    output: float | None = None
    gain: float | None = None
    bandwidth_tolerance: float = 0.10
    center_tolerance: float = 0.25
    signal_tolerance: float | None = None
    accuracy: float | None = None
    accuracy_smallest: float | None = None
    signal_to_noise: float | None = None
    ripple: float | None = None
    group_delay_variation: float | None = None
    settling: Settling | None = None
    reject: tuple[Reject, ...] = ()
    load: float | None = None
    load_capacitance: float | None = None
    required_yield: float = 0.99

    def __post_init__(self) -> None:
        checks.positive(self, "center_frequency", "bandwidth", "full_scale", "smallest", "output", "gain", "ripple")
        checks.positive(self, "group_delay_variation", "load", "load_capacitance")
        checks.share(self, "bandwidth_tolerance", "center_tolerance", "signal_tolerance", "accuracy")
        checks.share(self, "accuracy_smallest", "required_yield")
        checks.finite(self, "signal_to_noise")
        if self.bandwidth > 2 * self.center_frequency:
            bound = format_si(2 * self.center_frequency, "Hz")
            remedy = "lower it or raise target.center_frequency"
            raise refuse(self, "bandwidth", f"must be at most twice the center frequency ({bound}); {remedy}")
        if self.full_scale < self.smallest:
            remedy = "raise it or lower target.smallest"
            bound = f"target.smallest ({self.smallest:.6g} in the input unit)"
            raise refuse(self, "full_scale", f"must not be below {bound}; {remedy}")
        if self.output is None and self.gain is None:
            remedy = 'give output = "1 V" (at full scale) or gain = "60 dB"'
            raise refuse(self, "output", f"is missing, and gain as well: {remedy}")
        if self.output is not None and self.gain is not None:
            raise refuse(self, "gain", "cannot stand beside target.output, they say the same; remove one of them")


@dataclass(frozen=True, slots=True)
class Interference:
    """A disturbing signal: a tone, or the odd harmonics of a square wave.

    Attributes:
        kind: "tone" or "square"; frequency: [Hz] of the tone or fundamental.
        level: rms (all harmonics together), in the input unit; or voltage: [V] rms, coupled to the input node
            through a capacitance [F].
        rise_time: [s] 10-90 %, of a square wave.
    """

    SECTION: ClassVar[str] = "interference"
    kind: str
    frequency: float
    level: float | None = None
    voltage: float | None = None
    through: float | None = None
    rise_time: float | None = None

    def __post_init__(self) -> None:
        checks.one_of(self, "kind", INTERFERENCE_KINDS)
        checks.positive(self, "frequency", "level", "voltage", "through", "rise_time")
        coupled = self.voltage is not None or self.through is not None
        if self.level is not None and coupled:
            remedy = "remove it, or voltage and through"
            raise refuse(self, "level", f"cannot stand beside voltage and through, they say the same; {remedy}")
        if self.level is None and not coupled:
            raise refuse(self, "level", "is missing; give level, or voltage and through")
        for name, other in (("voltage", "through"), ("through", "voltage")):
            if self.level is None and getattr(self, name) is None:
                raise refuse(self, name, f"is missing beside {other}; give both")
        if self.rise_time is not None and self.kind != "square":
            raise refuse(self, "rise_time", 'belongs to kind = "square" only; remove it')
        if self.rise_time is not None and self.rise_time * self.frequency >= 0.5:
            bound = format_si(0.5 / self.frequency, "s")
            raise refuse(self, "rise_time", f"must be below half a period ({bound}); shorten it")


@dataclass(frozen=True, slots=True)
class Supply:
    """Rails [V]; negative is None for a single supply with its mid-rail reference."""

    SECTION: ClassVar[str] = "supply"
    positive: float
    negative: float | None = None

    def __post_init__(self) -> None:
        checks.positive(self, "positive")
        checks.finite(self, "negative")
        if self.negative is not None and self.negative >= 0:
            raise refuse(self, "negative", 'must be below zero, such as "-5 V"; leave it out for a single supply')


@dataclass(frozen=True, slots=True)
class Environment:
    """ambient: [degC] of nominal figures; temperature: (lowest, highest) [degC] the unit works at, or None."""

    SECTION: ClassVar[str] = "environment"
    ambient: float = 27.0
    temperature: tuple[float, float] | None = None

    def __post_init__(self) -> None:
        checks.above_absolute_zero(self, "ambient", (self.ambient,))
        if self.temperature is not None:
            checks.above_absolute_zero(self, "temperature", self.temperature)
            if self.temperature[0] >= self.temperature[1]:
                raise refuse(self, "temperature", "must name the lower temperature first; swap the two")


@dataclass(frozen=True, slots=True)
class Spec:
    """Everything the person wrote, in SI.

    Attributes:
        title: one line; the sections; interference: any number of disturbing signals.
        source: name of the file it came from, for messages; folder: what the file names in it are relative to
            (None: the working folder).  Neither takes part in comparison.
    """

    title: str
    target: Target
    sensor: Sensor
    supply: Supply
    interference: tuple[Interference, ...] = ()
    environment: Environment = field(default_factory=Environment)
    parts: PartsChoice = field(default_factory=PartsChoice)
    filter: FilterChoice = field(default_factory=FilterChoice)
    detector: Detector | None = None
    calibration: Calibration | None = None
    resonator: Resonator | None = None
    choose: Choose = field(default_factory=Choose)
    source: str = field(default="spec.toml", compare=False)
    folder: Path | None = field(default=None, compare=False)

    def __post_init__(self) -> None:
        checks.one_line(self, "title")

    @property
    def input_unit(self) -> str:
        """Unit of the sensor's input, of full scale and smallest reading."""
        return self.sensor.input_unit

    @property
    def full_scale_output(self) -> float:
        """[V] rms at the output for a full-scale input at the centre."""
        if self.target.output is not None:
            return self.target.output
        return (self.target.gain or 0.0) * self.sensor.scale * self.target.full_scale

    @property
    def overall_gain(self) -> float:
        """[V per input unit] the whole chain has to have at the centre, sensor included."""
        return self.full_scale_output / self.target.full_scale

    @property
    def catalog_files(self) -> tuple[Path, ...]:
        """The person's own catalogs."""
        return tuple(self.path_of(name) for name in self.parts.catalogs)

    @property
    def stock_file(self) -> Path | None:
        """The parts drawer, None if any part may be used."""
        return None if self.parts.stock is None else self.path_of(self.parts.stock)

    def path_of(self, name: str) -> Path:
        """Where a file that the spec names lies: relative to the spec's folder."""
        return Path(name) if self.folder is None else self.folder / name
