"""Random specs that an engineer could have written: one generator, seeded, for every test that needs many.

Each section of the spec has its own choosers, and each chooser its own stream of random numbers, so that a new one
changes no spec but by what it adds.  A chooser fills in its part of `Sketch.tables`; what the others need to know of
the whole (the signal at the terminals, the noise there) is drawn first.

The first twenty specs in tests/specs were written, into an empty folder, by

    python -m tests.support.specs tests/specs --count 20 --seed 2

when there were fewer section circuits to draw from.  Those of other sensors, circuits and supplies are written by
tests/specs/wide.py, which draws with the choosers of this file.
"""

from __future__ import annotations

import argparse
import math
import random
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import tomli_w

from synth.approximation import FAMILIES
from synth.circuit.network import BOLTZMANN, ZERO_CELSIUS
from synth.topology import SECTIONS

COMMITTED = Path(__file__).parents[1] / "specs"
SUPPLIES = (5, 12, 15)  # [V]
HEADROOM = 2.5  # [V] that an amplifier may leave to each rail
TITLES = (
    "Channel of a {unit} sensor at {center}",
    "=1+1 is no formula, {unit}",
    "`touch gone`; $(touch gone) | .control of {unit}",
    ".include /dev/null, M is milli at {center}",
    'Quote " and \\ backslash, <b>{unit}</b> & more',
    "Mesure à {center} ± 1 %, µV et Ω, 測定 {unit}",
    "@SUM(A1:A9) + -{center} 'single'",
    "{{braces}} %s %d {unit} #hash ;semicolon",
    "../../{unit}/{center} *star ~ ^caret",
    "   spaces   around {unit}   ",
)
UNITS = ("A", "T", "Pa", "m/s", "mmHg", "ppm", "lx", "furlong", "V", "m")
SPELLINGS = ((1e9, "G"), (1e6, "M"), (1e3, "k"), (1.0, ""), (1e-3, "m"), (1e-6, "u"), (1e-9, "n"), (1e-12, "p"))
CODES = {"ohm": {1e6: "M", 1e3: "k", 1.0: "R"}, "F": {1e-6: "u", 1e-9: "n", 1e-12: "p"}}
PREFIXED = ("A", "T", "Pa", "m/s", "lx", "V", "m", "Hz", "ohm", "F", "H", "s", "V/rtHz")

Table = dict[str, Any]


@dataclass(slots=True)
class Sketch:
    """What is known of a spec while it is drawn.

    Attributes:
        seed: of all its streams; tables: the spec so far; files: what it names, by name.
        unit: of the sensor's input; center, bandwidth: [Hz]; gain: [V/V] terminals to output; output: [V] rms.
        rails: [V]; scale: [V per unit]; resistance: [ohm]; loss: the sensor's gain at the centre re its flat region;
        ambient: [degC].
        output_kind: "voltage", "current" or "charge": then gain, scale and levels are in A or C instead of V.
        density: [V, A or C per root hertz] of sensor and first amplifier, None for that of the resistance.
        sections: that the spec insists on, 0 for none.
    """

    seed: int | str
    tables: Table = field(default_factory=lambda: {"format": 1})
    unit: str = "A"
    center: float = 0.0
    bandwidth: float = 0.0
    gain: float = 0.0
    output: float = 1.0
    rails: float = 5.0
    scale: float = 1.0
    resistance: float = 50.0
    loss: float = 1.0
    ambient: float = 27.0
    output_kind: str = "voltage"
    density: float | None = None
    sections: int = 0
    files: dict[str, str] = field(default_factory=dict)

    @property
    def omega(self) -> float:
        """[rad/s] at the centre."""
        return 2 * math.pi * self.center

    @property
    def full_scale(self) -> float:
        """[V] rms in the sensor's flat region."""
        return self.output / self.gain

    @property
    def noise(self) -> float:
        """[V] rms re the terminals that a good chain has in its band: source, 3 nV and 2 pA amplifier, sections.

        A section's amplifier adds its noise times about Q^2 at the output, wherever it stands.
        """
        thermal = 4 * BOLTZMANN * (self.ambient + ZERO_CELSIUS) * self.resistance
        sections = 2e-9 * (self.center / self.bandwidth) ** 2 / self.gain
        own = thermal + 3e-9**2 + (2e-12 * self.resistance) ** 2 if self.density is None else self.density**2
        return math.sqrt((own + sections**2) * 1.57 * self.bandwidth)

    def level_of(self, voltage: float, frequency: float) -> float:
        """[V, A or C] rms at the terminals for one farad to a voltage at a frequency [Hz]."""
        charge = 2 * math.pi * frequency
        return voltage * {"voltage": charge * self.resistance, "current": charge, "charge": 1.0}[self.output_kind]


def written(r: random.Random, value: float, unit: str, digits: int = 3) -> str:
    """A quantity in one of the spellings that the format allows."""
    value = float(f"{value:.{digits}g}")
    size, prefix = next(((s, p) for s, p in SPELLINGS if abs(value) >= s * 0.999999), SPELLINGS[-1])
    mantissa = f"{value / size:.{digits + 1}g}"
    style = r.random()
    if style < 0.2 and size in CODES.get(unit, {}) and "e" not in mantissa:
        letter = CODES[unit][size]
        return mantissa.replace(".", letter) if "." in mantissa else mantissa + letter
    if style < 0.3 or unit not in PREFIXED:
        return f"{value:.{digits}g} {unit}".replace("e+", "e")
    if prefix == "u":
        prefix = r.choice("uµ\u03bc")
    return f"{mantissa}{r.choice(['', ' '])}{prefix}{unit}"


def log_uniform(r: random.Random, low: float, high: float) -> float:
    """Uniform in the logarithm."""
    return low * (high / low) ** r.random()


def percent(r: random.Random, *choices: float) -> str:
    """One of some percentages."""
    return f"{r.choice(choices):g} %"


# ------------------------------------------------------------------------------------------------- the whole


def frame(r: random.Random, s: Sketch) -> None:
    """Centre, bandwidth, gain, rails and output, ambient: what every other part refers to."""
    s.unit = r.choice(UNITS)
    s.center = float(f"{log_uniform(r, 3e3, 300e3):.3g}")
    s.bandwidth = float(f"{s.center * log_uniform(r, 0.02, 0.30):.2g}")
    s.rails = float(r.choice(SUPPLIES))
    largest = (s.rails - HEADROOM) / math.sqrt(2) / 1.3
    s.output = float(f"{r.uniform(0.3, 1.0) * largest:.2g}")
    s.gain = 10 ** (round(r.uniform(30, 90), 1) / 20)
    s.ambient = float(r.choice([27, r.randint(10, 45)]))


def source(r: random.Random, s: Sketch) -> None:
    """Source resistance: its own noise stays 40 dB below full scale."""
    s.resistance = 1e4
    while s.resistance > 5 and s.noise > s.full_scale / 100:
        s.resistance *= 0.8
    s.resistance = float(f"{log_uniform(r, 5, max(s.resistance, 5.1)):.3g}")
    s.scale = float(f"{log_uniform(r, 1e-4, 1e2):.2g}")


def title(r: random.Random, s: Sketch) -> None:
    """One line with odd characters."""
    s.tables["title"] = r.choice(TITLES).format(unit=s.unit, center=written(r, s.center, "Hz"))


# ------------------------------------------------------------------------------------------------- [target]


def target(r: random.Random, s: Sketch) -> None:
    """Centre, bandwidth, full scale, output or gain."""
    table = s.tables["target"] = {
        "center_frequency": written(r, s.center, "Hz"),
        "bandwidth": written(r, s.bandwidth, "Hz"),
        "full_scale": written(r, s.full_scale / s.scale, s.unit, 6),
    }
    if r.random() < 0.5 or s.output_kind != "voltage":
        table["output"] = written(r, s.output, "V")
    else:
        table["gain"] = f"{20 * math.log10(s.gain):.1f} dB" if r.random() < 0.7 else f"{s.gain:.4g}".replace("e+", "e")


def smallest_reading(r: random.Random, s: Sketch) -> None:
    """Smallest reading, and sometimes what signal-to-noise ratio it must have: 6 dB or more of slack."""
    table = s.tables["target"]
    ratio = r.choice([10, 20, 50, 100])
    table["smallest"] = written(r, s.full_scale / s.scale / ratio, s.unit)
    reached = 20 * math.log10(s.full_scale / ratio * s.loss / s.noise)
    if r.random() < 0.6 and reached > 10:
        table["signal_to_noise"] = f"{reached - r.uniform(6, 12):.0f} dB"


def tolerances(r: random.Random, s: Sketch) -> None:
    """Tolerances, accuracies, ripple, delay, settling, yield: each sometimes."""
    table = s.tables["target"]
    optional: dict[str, Callable[[], Any]] = {
        "bandwidth_tolerance": lambda: percent(r, 5, 10, 15, 20),
        "center_tolerance": lambda: percent(r, 10, 20, 25, 30),
        "signal_tolerance": lambda: r.choice(["20 ppm", "50 ppm", "0.1 %"]),
        "accuracy": lambda: percent(r, 1, 2, 3, 5),
        "accuracy_smallest": lambda: percent(r, 5, 10, 20),
        "ripple": lambda: r.choice(["0.3 dB", "0.5 dB", "1 dB", "3 dB"]),
        "group_delay_variation": lambda: written(r, r.uniform(0.3, 1.0) / s.bandwidth, "s"),
        "settling": lambda: {"within": written(r, r.uniform(4, 20) / s.bandwidth, "s"), "to": percent(r, 0.1, 1, 5)},
        "yield": lambda: percent(r, 90, 95, 99, 99.7),
    }
    for key, value in optional.items():
        if r.random() < 0.4:
            table[key] = value()


def rejects(r: random.Random, s: Sketch) -> None:
    """Up to two frequencies that one to three synchronous sections hold off."""
    if r.random() < 0.5:
        return
    sections = r.choice([1, 2, 2, 3])
    sections = s.sections or sections
    q = s.center / s.bandwidth * math.sqrt(2 ** (1 / sections) - 1)
    found = []
    for ratio in r.sample([0.1, 0.2, 1 / 3, 0.5, 2.0, 3.0, 5.0, 10.0], r.choice([1, 2])):
        reached = sections * 10 * math.log10(1 + (q * (ratio - 1 / ratio)) ** 2)
        found.append({"frequency": written(r, s.center * ratio, "Hz"), "by": f"{r.uniform(0.5, 0.9) * reached:.0f} dB"})
    s.tables["target"]["reject"] = found


def load(r: random.Random, s: Sketch) -> None:
    """Resistance and capacitance at the output."""
    if r.random() < 0.6:
        s.tables["target"]["load"] = written(r, log_uniform(r, 1e3, 1e6), "ohm")
    if r.random() < 0.3:
        s.tables["target"]["load_capacitance"] = written(r, log_uniform(r, 5e-12, 100e-12), "F")


# ------------------------------------------------------------------------------------------------- [sensor]


def sensor(r: random.Random, s: Sketch) -> None:
    """Scale and resistance."""
    table = s.tables["sensor"] = {
        "scale": f"{s.scale:g} V/{s.unit}" if r.random() < 0.5 else f"{s.scale * 1e3:g} mV/{s.unit}",
        "resistance": written(r, s.resistance, "ohm"),
    }
    if r.random() < 0.3:
        table["output"] = "voltage"
    if r.random() < 0.4:
        table["scale_tolerance"] = percent(r, 0.5, 1, 5)
    if r.random() < 0.4:
        table["scale_temperature_coefficient"] = r.choice(["20 ppm", "100 ppm", "-50 ppm"])


def rolloffs(r: random.Random, s: Sketch) -> None:
    """None, one or two of high-pass, low-pass, loss, now and then a resonance."""
    found: list[Table] = []
    for _ in range(r.choice([0, 1, 1, 1, 2])):
        kind = r.choice(["high-pass", "low-pass", "loss", "high-pass", "low-pass", "loss", "resonant"])
        found.append(one_rolloff(r, s, kind))
    if found:
        s.tables["sensor"]["rolloff"] = found


def one_rolloff(r: random.Random, s: Sketch, kind: str) -> Table:
    """A rolloff of some kind, its loss at the centre put into the sketch."""
    if kind == "loss":
        part = r.uniform(0.05, 0.5)
        one: Table = {"at": written(r, s.center, "Hz"), "loss": f"{100 * part:.2g} %"}
        one["shape"] = r.choice(["high-pass", "low-pass"])
        s.loss *= 1 - part
    elif kind == "resonant":
        q, frequency = r.choice([0.7, 1.5, 3.0]), s.center * r.uniform(0.85, 1.2)
        one = {"frequency": written(r, frequency, "Hz"), "q": f"{q:g}"}
        detuning = s.center / frequency - frequency / s.center
        s.loss /= math.hypot(1, q * detuning)
    else:
        order = r.choice([1, 1, 1, 2])
        ratio = log_uniform(r, 0.1, 1.5)  # of the corner over the centre, or the other way round
        one = {"corner": written(r, s.center * (ratio if kind == "high-pass" else 1 / ratio), "Hz")}
        if order != 1:
            one["order"] = order
        s.loss /= math.hypot(1, ratio) ** order
    if r.random() < 0.5:
        one["tolerance"] = percent(r, 2, 5, 10)
    return {"kind": kind, **one}


def source_reactances(r: random.Random, s: Sketch) -> None:
    """Series inductance and parallel capacitance, their resonance well above the centre."""
    inductance = capacitance = 0.0
    if r.random() < 0.3:
        inductance = s.resistance * log_uniform(r, 0.05, 2.0) / s.omega
        s.tables["sensor"]["inductance"] = written(r, inductance, "H")
    if r.random() < 0.4:
        largest = min(0.3 / (s.omega * s.resistance), 2e-9)
        if inductance:
            largest = min(largest, 0.1 / (s.omega**2 * inductance))
        capacitance = log_uniform(r, largest / 20, largest)
        if capacitance > 2e-12:
            s.tables["sensor"]["capacitance"] = written(r, capacitance, "F")


def source_noise(r: random.Random, s: Sketch) -> None:
    """A density at the terminals between half and three times that of the resistance."""
    if r.random() < 0.3:
        thermal = math.sqrt(4 * BOLTZMANN * (s.ambient + ZERO_CELSIUS) * s.resistance)
        s.tables["sensor"]["noise"] = f"{thermal * log_uniform(r, 0.5, 3.0) * 1e9:.2g} nV" + r.choice(["", "/rtHz"])


# ------------------------------------------------------------------------------------------------- the rest


def interference(r: random.Random, s: Sketch) -> None:
    """Tones and square waves away from the band, some coupled through a capacitance."""
    found = []
    for _ in range(r.choice([0, 0, 1, 1, 2])):
        kind = r.choice(["tone", "tone", "square"])
        frequency = s.center * r.choice([0.05, 0.13, 0.4, 2.7, 8.0])
        one: Table = {"kind": kind, "frequency": written(r, frequency, "Hz")}
        if r.random() < 0.7:
            one["level"] = written(r, s.full_scale / s.scale * log_uniform(r, 0.1, 3.0), s.unit)
        else:
            level = s.full_scale * log_uniform(r, 0.1, 3.0)
            volts = r.choice([1.0, 3.3, 5.0])
            through = level / s.level_of(volts, frequency)
            one |= {"voltage": written(r, volts, "V"), "through": written(r, min(max(through, 1e-15), 1e-11), "F")}
        if kind == "square" and r.random() < 0.7:
            one["rise_time"] = written(r, r.uniform(0.005, 0.2) / frequency, "s")
        found.append(one)
    if found:
        s.tables["interference"] = found


def supply(r: random.Random, s: Sketch) -> None:
    """Two equal rails."""
    s.tables["supply"] = {"positive": written(r, s.rails, "V"), "negative": f"-{s.rails:g} V"}


def environment(r: random.Random, s: Sketch) -> None:
    """Ambient of nominal figures, sometimes a range around it."""
    table: Table = {}
    if s.ambient != 27 or r.random() < 0.3:
        table["ambient"] = f"{s.ambient:g} degC"
    if r.random() < 0.6:
        table["temperature"] = [f"{s.ambient - r.randint(5, 30):g} degC", f"{s.ambient + r.randint(5, 30):g} degC"]
    if table:
        s.tables["environment"] = table


def parts(r: random.Random, s: Sketch) -> None:
    """Series, tolerances and coefficients that the catalog offers."""
    table: Table = {}
    if r.random() < 0.6:
        series, tolerance = r.choice([("E96", 1.0), ("E96", 0.1), ("E24", 1.0), ("E96", 0.5), ("E192", 0.1)])
        table["resistors"] = {"series": series, "tolerance": f"{tolerance:g} %"}
        if r.random() < 0.5:
            table["resistors"]["temperature_coefficient"] = r.choice(["50 ppm", "100 ppm"])
    if r.random() < 0.6:
        series, tolerance = r.choice([("E12", 1), ("E12", 2), ("E6", 1), ("E12", 5), ("E24", 5), ("E6", 5)])
        table["capacitors"] = {"series": series, "tolerance": f"{tolerance} %"}
        if r.random() < 0.5:
            table["capacitors"] |= {"temperature_coefficient": "30 ppm", "dielectric": r.choice(["C0G", "NP0"])}
    if table:
        s.tables["parts"] = table


def filters(r: random.Random, s: Sketch) -> None:
    """A family that can be designed, now and then a topology too."""
    if r.random() < 0.25:
        table = s.tables["filter"] = {"family": r.choice(FAMILIES)}
        if r.random() < 0.3:
            table["topology"] = r.choice(list(SECTIONS))


def detector(r: random.Random, s: Sketch) -> None:
    """Any kind, with the keys that belong to it."""
    if r.random() < 0.4:
        return
    kind = r.choice(["rms", "average", "peak", "synchronous", "adc", "none"])
    table: Table = {"kind": kind}
    if kind == "adc":
        table |= {"sample_rate": written(r, 20 * s.center, "Hz"), "bits": r.choice([12, 16, 24]), "range": "5 V"}
        table["noise"] = written(r, 50e-6, "V")
    if kind == "synchronous":
        table["phase_tolerance"] = r.choice(["1 deg", "20 mrad"])
    if kind != "none":
        table |= {"error": percent(r, 0.1, 0.5, 1), "offset": written(r, log_uniform(r, 1e-5, 5e-3), "V")}
        table["averaging_time"] = written(r, 50 / s.bandwidth, "s")
    if kind in ("rms", "average", "peak"):
        table["bandwidth"] = written(r, s.center * r.choice([3, 5, 20]), "Hz")
    s.tables["detector"] = table


def calibration(r: random.Random, s: Sketch) -> None:
    """Through a resistor, or by a level in the input unit."""
    if r.random() < 0.4:
        return
    table: Table = {"trim": r.choice(["gain", "gain+frequency", "none"])}
    if r.random() < 0.5 and s.output_kind == "voltage":
        table |= {"voltage": "50 mV", "resistor": written(r, 50e-3 * s.resistance / s.full_scale, "ohm")}
        table |= {"voltage_tolerance": "0.2 %", "resistor_tolerance": percent(r, 0.1, 1)}
    else:
        table |= {"level": written(r, s.full_scale / s.scale, s.unit), "level_tolerance": percent(r, 0.2, 1)}
    if r.random() < 0.3:
        table["correction"] = "numeric"
    s.tables["calibration"] = table


def resonator(r: random.Random, s: Sketch) -> None:
    """The crystal that drives the signal."""
    if r.random() < 0.2:
        table = {"frequency": written(r, s.center, "Hz"), "series_resistance": written(r, 40e3, "ohm")}
        s.tables["resonator"] = table | {"drive_limit": "1 uW", "allowed_pull": "20 ppm", "load_capacitance": "12.5 pF"}


def choose(r: random.Random, s: Sketch) -> None:
    """What to prefer."""
    if r.random() < 0.4:
        s.tables["choose"] = {"prefer": r.choice(["yield", "noise", "parts", "current"]), "effort": "quick"}


CHOOSERS: tuple[Callable[[random.Random, Sketch], None], ...] = (
    *(frame, source, title),
    *(target, sensor, rolloffs, source_reactances, source_noise),
    *(smallest_reading, tolerances, rejects, load),
    *(supply, interference, environment, parts, filters, detector, calibration, resonator, choose),
)


def random_spec(seed: int) -> str:
    """TOML text of one spec.

    >>> random_spec(3) == random_spec(3)
    True
    """
    sketch = Sketch(seed)
    for chooser in CHOOSERS:
        chooser(random.Random(f"{seed} {chooser.__name__}"), sketch)
    return tomli_w.dumps(sketch.tables)


def committed_specs() -> list[Path]:
    """The spec files in tests/specs, by name: 20 of this file, 40 of tests/specs/wide.py."""
    return sorted(COMMITTED.glob("*.toml"))


def main(arguments: Sequence[str] | None = None) -> None:
    """Write specs into a folder."""
    parser = argparse.ArgumentParser(description="Write random specs into a folder.")
    parser.add_argument("folder", type=Path)
    parser.add_argument("--count", type=int, default=20)
    parser.add_argument("--seed", type=int, default=2)
    given = parser.parse_args(arguments)
    given.folder.mkdir(parents=True, exist_ok=True)
    for k in range(given.count):
        name = given.folder / f"random_{k + 1:02d}.toml"
        with name.open("x", encoding="utf-8") as file:
            file.write(f"# An invented scenario, drawn at random (seed {given.seed}, number {k + 1}).\n")
            file.write(random_spec(1000 * given.seed + k))


if __name__ == "__main__":
    main()
