"""Random specs over every kind of sensor, rolloff, section circuit, family and supply of the contract.

What must come up often enough is dealt from shuffled decks instead of thrown with dice; all else is drawn by the
choosers of tests/support/specs.py.  The committed ones were written, into a folder without them, by

    python -m tests.specs.wide tests/specs --count 40 --seed 3 --first 21
"""

from __future__ import annotations

import argparse
import cmath
import math
import random
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TypeVar

import tomli_w

from synth.circuit.network import BOLTZMANN, ZERO_CELSIUS
from synth.spec import Sensor
from tests.support import specs
from tests.support.specs import HEADROOM, Sketch, Table, log_uniform, percent, written

T = TypeVar("T")


@dataclass(frozen=True, slots=True)
class Reach:
    """What a section circuit is asked for: centres up to one [Hz], Q of a whole chain in one section, its limit."""

    highest: float
    q: tuple[float, float]
    largest_q: float


ANY = "any"
TOPOLOGIES = {
    "multiple-feedback": Reach(250e3, (3.0, 12.0), 25.0),
    "delyiannis-friend": Reach(150e3, (4.0, 15.0), 20.0),
    "dual-amplifier": Reach(200e3, (5.0, 40.0), 50.0),
    "tow-thomas": Reach(80e3, (5.0, 40.0), 50.0),
    "state-variable": Reach(80e3, (5.0, 40.0), 50.0),
    "akerberg-mossberg": Reach(120e3, (5.0, 40.0), 50.0),
    ANY: Reach(300e3, (3.0, 50.0), 50.0),
}
FAMILIES = ("synchronous", "gaussian", "bessel", "butterworth", "chebyshev")
HIGHEST_Q = {"synchronous": 1.0, "gaussian": 1.6, "bessel": 1.6, "butterworth": 2.2, "chebyshev": 4.0}  # of a section
SINGLE = (5, 9, 12, 24)  # [V]
SINGLE_HEADROOM = 1.3  # [V] to each rail, of the amplifiers that suit a low supply
LEAST_RATIO = 100.0  # of full scale to noise


def dealt(seed: int, deck: str, cards: Sequence[T], number: int) -> T:
    """One card for a spec: a deck is shuffled, dealt to the end, and shuffled anew."""
    shuffled = random.Random(f"{seed} {deck} {number // len(cards)}").sample(cards, len(cards))
    return shuffled[number % len(cards)]


# ------------------------------------------------------------------------------------------------- sensors


def _scale(r: random.Random, s: Sketch, kind: str) -> Table:
    """The table [sensor] with what every kind has."""
    s.output_kind = kind
    unit, prefix, factor = {"voltage": ("V", "m", 1e3), "current": ("A", "m", 1e3), "charge": ("C", "p", 1e12)}[kind]
    plain = r.random() < 0.5
    table = s.tables["sensor"] = {
        "scale": f"{s.scale:g} {unit}/{s.unit}" if plain else f"{s.scale * factor:g} {prefix}{unit}/{s.unit}"
    }
    if kind != "voltage" or r.random() < 0.3:
        table["output"] = kind
    if r.random() < 0.4:
        table["scale_tolerance"] = percent(r, 0.5, 1, 5)
    if r.random() < 0.4:
        table["scale_temperature_coefficient"] = r.choice(["20 ppm", "100 ppm", "-50 ppm"])
    return table


def _resistive(r: random.Random, s: Sketch, reactances: str) -> None:
    """A resistance, with a series inductance (l), a parallel capacitance (c), both or none."""
    specs.source(r, s)
    table = _scale(r, s, "voltage")
    table["resistance"] = written(r, s.resistance, "ohm")
    inductance = s.resistance * log_uniform(r, 0.05, 2.0) / s.omega
    largest = min(0.3 / (s.omega * s.resistance), 5e-9)
    if "l" in reactances:
        table["inductance"] = written(r, inductance, "H")
        largest = min(largest, 0.1 / (s.omega**2 * inductance))  # their resonance well above the centre
    if "c" in reactances:
        table["capacitance"] = written(r, log_uniform(r, largest / 20, largest), "F")


def _transformer(r: random.Random, s: Sketch) -> None:
    """A current transformer: burden, magnetizing inductance, sometimes its leakage and capacitance."""
    s.unit, turns = "A", r.choice([50, 100, 500, 1000])
    s.resistance = float(f"{log_uniform(r, 5, 300):.3g}")
    s.scale = float(f"{s.resistance / turns:.3g}")
    corner = s.center * log_uniform(r, 0.03, 1.0)
    s.loss /= math.hypot(1, corner / s.center)
    table = _scale(r, s, "voltage")
    table["burden"] = written(r, s.resistance, "ohm")
    table["magnetizing_inductance"] = written(r, s.resistance / (2 * math.pi * corner), "H")
    if r.random() < 0.5:
        table["inductance"] = written(r, s.resistance * r.uniform(0.02, 0.2) / s.omega, "H")
    if r.random() < 0.5:
        table["capacitance"] = written(r, min(r.uniform(0.01, 0.05) / (s.omega * s.resistance), 2e-9), "F")


def _motional(r: random.Random, s: Sketch) -> None:
    """A receiver whose resonances, of moderate Q, take the centre between them."""
    shunt = 1 / (s.omega * log_uniform(r, 200, 5e3))
    coupling = r.uniform(0.05, 0.25)
    apart = math.sqrt(1 + coupling)  # parallel over series resonance
    series = s.omega / apart ** r.uniform(0.2, 1.0)  # [rad/s]
    q = log_uniform(r, 2.0, max(2.5, min(20.0, 0.4 * s.center / s.bandwidth)))
    capacitance = coupling * shunt
    inductance, resistance = 1 / (series**2 * capacitance), 1 / (series * capacitance * q)
    branch = resistance + 1j * (s.omega * inductance - 1 / (s.omega * capacitance))
    divided = 1 / (1 + 1j * s.omega * shunt * branch)
    s.loss *= abs(divided)
    s.resistance = (branch * divided).real
    s.scale = float(f"{log_uniform(r, 1e-4, 1.0):.2g}")
    table = _scale(r, s, "voltage")
    table["motional"] = {
        "resistance": written(r, resistance, "ohm"),
        "inductance": written(r, inductance, "H"),
        "capacitance": written(r, capacitance, "F"),
    }
    table["capacitance"] = written(r, shunt, "F")


def _generator(r: random.Random, s: Sketch, kind: str, leaky: bool) -> None:
    """A source of current or charge: a capacitance, and a resistance where it leaks."""
    current = kind == "current"
    capacitance = log_uniform(r, 5e-12, 300e-12) if current else log_uniform(r, 50e-12, 2e-9)
    resistance = log_uniform(r, 3e6, 300e6) if current else log_uniform(r, 50e6, 5e9)
    s.scale = float(f"{log_uniform(r, 1e-3, 1.0) * (1.0 if current else 1e-11):.2g}")
    full_scale = log_uniform(r, 20e-9, 20e-6) if current else log_uniform(r, 0.3e-12, 100e-12)
    s.gain = s.output / full_scale
    thermal = math.sqrt(4 * BOLTZMANN * (s.ambient + ZERO_CELSIUS) / resistance) if leaky else 0.0
    per_charge = 1.0 if current else 1 / s.omega
    s.density = math.hypot(6e-9 * s.omega * (capacitance + 20e-12), 0.7e-12, thermal) * per_charge
    s.unit = r.choice(["W", "lx", "rad/s"] if current else ["N", "Pa", "m/s2"])
    table = _scale(r, s, kind)
    table["capacitance"] = written(r, capacitance, "F")
    if leaky:
        table["resistance"] = written(r, resistance, "ohm")


SENSORS: dict[str, Callable[[random.Random, Sketch], None]] = {
    "resistance": lambda r, s: _resistive(r, s, ""),
    "resistance and inductance": lambda r, s: _resistive(r, s, "l"),
    "resistance and capacitance": lambda r, s: _resistive(r, s, "c"),
    "resistance, inductance and capacitance": lambda r, s: _resistive(r, s, "lc"),
    "transformer": _transformer,
    "motional branch": _motional,
    "current": lambda r, s: _generator(r, s, "current", leaky=False),
    "current with resistance": lambda r, s: _generator(r, s, "current", leaky=True),
    "charge": lambda r, s: _generator(r, s, "charge", leaky=False),
    "charge with resistance": lambda r, s: _generator(r, s, "charge", leaky=True),
}


def sensor_kind(sensor: Sensor) -> str:
    """ "voltage", "transformer", "motional", "current" or "charge"."""
    if sensor.output != "voltage":
        return sensor.output
    return "transformer" if sensor.burden is not None else "motional" if sensor.motional is not None else "voltage"


def source_noise(r: random.Random, s: Sketch) -> None:
    """A density at the terminals, of the size that the source would have by itself."""
    if r.random() < 0.8:
        return
    thermal = math.sqrt(4 * BOLTZMANN * (s.ambient + ZERO_CELSIUS) * s.resistance)
    unit = {"voltage": "V", "current": "A", "charge": "C"}[s.output_kind]
    density = (thermal if s.density is None else 0.5 * s.density) * log_uniform(r, 0.5, 2.0)
    s.tables["sensor"]["noise"] = f"{density:.2g} {unit}" + r.choice(["", "/rtHz"])


# ------------------------------------------------------------------------------------------------- rolloffs


def resonant(r: random.Random, s: Sketch) -> Table:
    """A resonance near the centre, no narrower than two and a half bands."""
    q = log_uniform(r, 0.7, max(0.8, min(8.0, 0.4 * s.center / s.bandwidth)))
    frequency = s.center * (1 + r.uniform(-0.4, 0.4) / q / 2)
    s.loss /= math.hypot(1, q * (s.center / frequency - frequency / s.center))
    one: Table = {"kind": "resonant", "frequency": written(r, frequency, "Hz"), "q": f"{q:.2g}"}
    return one | ({"tolerance": percent(r, 1, 2, 5)} if r.random() < 0.5 else {})


def measured(r: random.Random, s: Sketch, name: str) -> Table:
    """A table of a minimum-phase response as one would measure it: four digits, sometimes phases."""
    low, high = s.center / log_uniform(r, 1.5, 10), s.center * log_uniform(r, 0.7, 5)
    peak, q, lift = s.center * r.uniform(2.0, 4.0), r.uniform(0.7, 2.0), r.choice([0.0, 0.0, 0.3])
    rows, phases = ["Hz,gain,degrees"] if (with_phase := r.random() < 0.5) else ["Hz,gain"], []
    count = r.choice([25, 41, 61])

    def response(f: float) -> complex:
        flanks = 1j * f / low / (1 + 1j * f / low) / (1 + 1j * f / high)
        return flanks * (1 + lift * (1j * f / peak / q) / (1 + 1j * f / peak / q - (f / peak) ** 2))

    for k in range(count):
        f = float(f"{s.center / 20 * 400 ** (k / (count - 1)):.5g}")
        h = response(f)
        phases.append(math.degrees(cmath.phase(h)))
        cells = [f"{f:g}", f"{abs(h):.4g}", f"{phases[-1]:.2f}"]
        rows.append(",".join(cells if with_phase else cells[:2]))
    s.files[name] = "\n".join(rows) + "\n"
    s.loss *= abs(response(s.center))
    return {"kind": "table", "file": name}


def rolloffs(r: random.Random, s: Sketch, kinds: Sequence[str], name: str) -> None:
    """Those of some kinds."""
    found = []
    for kind in kinds:
        if kind == "table":
            found.append(measured(r, s, name))
        else:
            found.append(resonant(r, s) if kind == "resonant" else specs.one_rolloff(r, s, kind))
    if found:
        s.tables["sensor"]["rolloff"] = found


# ------------------------------------------------------------------------------------------------- the whole

DECKS: dict[str, tuple[tuple[str, ...], ...]] = {
    "topology": (*((name,) for name in TOPOLOGIES if name != ANY for _ in range(3)), (ANY,), (ANY,)),
    "sensor": (
        *((name,) for name in SENSORS),
        *(("transformer",), ("transformer",), ("motional branch",), ("motional branch",), ("current",), ("charge",)),
        *(("resistance and capacitance",), ("resistance and inductance",)),
        *(("current with resistance",), ("charge with resistance",)),
    ),
    "rolloff": (
        *((), (), (), ("high-pass",), ("low-pass",), ("loss",), ("high-pass", "low-pass"), ("loss", "high-pass")),
        *(("resonant",), ("resonant",), ("resonant", "low-pass"), ("high-pass", "resonant")),
        *(("table",), ("table",), ("table",), ("table", "loss")),
    ),
    "family": (*((name,) for name in FAMILIES for _ in range(2)), *((ANY,),) * 6),
    "supply": (*(("single",),) * 6, *(("dual",),) * 10),
}


def frame(r: random.Random, s: Sketch, topology: str, family: str, supply: str) -> None:
    """Circuit and family, and a centre, bandwidth, gain and output that they suit; supply; ambient."""
    reach = TOPOLOGIES[topology]
    s.unit = r.choice(specs.UNITS)
    s.center = float(f"{log_uniform(r, 3e3, reach.highest):.3g}")
    s.sections = 0 if family == ANY else r.choice([0, 2, 2, 3])
    low, high = reach.q
    if family != ANY:
        high = min(high, reach.largest_q / HIGHEST_Q[family])
    s.bandwidth = float(f"{s.center / log_uniform(r, low, max(high, 1.2 * low)):.2g}")
    single = supply == "single"
    s.rails = r.choice(SINGLE) / 2 if single else float(r.choice(specs.SUPPLIES))
    largest = (s.rails - (SINGLE_HEADROOM if single else HEADROOM)) / math.sqrt(2) / 1.3
    s.output = float(f"{r.uniform(0.3, 0.9) * largest:.2g}")
    s.gain = 10 ** (round(r.uniform(30, 85), 1) / 20)
    s.ambient = float(r.choice([27, r.randint(10, 45)]))
    wanted: Table = {"topology": topology, "family": family, "sections": s.sections}
    if wanted := {key: value for key, value in wanted.items() if value not in (ANY, 0)}:
        s.tables["filter"] = wanted
    s.tables["supply"] = {"positive": written(r, 2 * s.rails if single else s.rails, "V")}
    if not single:
        s.tables["supply"]["negative"] = f"-{s.rails:g} V"


AFTER = (
    *(specs.title, specs.target, specs.smallest_reading, specs.tolerances, specs.rejects, specs.load),
    *(specs.interference, specs.environment, specs.parts, specs.detector, specs.calibration, specs.choose),
)


def wide_spec(seed: int, number: int, table_file: str = "response.csv") -> tuple[str, dict[str, str]]:
    """TOML text of one spec, and the files it names, by name.

    Args:
        number: from 0; table_file: how to name the table of its rolloff, if it has one.

    >>> wide_spec(1, 2) == wide_spec(1, 2)
    True
    """
    sketch = Sketch(f"wide {seed} {number}")
    topology, sensor, rolloff, family, supply = (dealt(seed, deck, DECKS[deck], number) for deck in DECKS)

    def stream(name: str) -> random.Random:
        return random.Random(f"{sketch.seed} {name}")

    frame(stream("frame"), sketch, topology[0], family[0], supply[0])
    SENSORS[sensor[0]](stream("sensor"), sketch)
    rolloffs(stream("rolloffs"), sketch, rolloff, table_file)
    while sketch.noise > sketch.full_scale * sketch.loss / LEAST_RATIO:
        sketch.gain *= 0.8  # more full scale
    source_noise(stream("source_noise"), sketch)
    for chooser in AFTER:
        chooser(stream(chooser.__name__), sketch)
    return tomli_w.dumps(sketch.tables), sketch.files


def main(arguments: Sequence[str] | None = None) -> None:
    """Write specs into a folder."""
    parser = argparse.ArgumentParser(description="Write random specs of every kind into a folder.")
    parser.add_argument("folder", type=Path)
    parser.add_argument("--count", type=int, default=40)
    parser.add_argument("--seed", type=int, default=3)
    parser.add_argument("--first", type=int, default=21, help="number in the first file's name")
    given = parser.parse_args(arguments)
    given.folder.mkdir(parents=True, exist_ok=True)
    for k in range(given.count):
        stem = f"random_{given.first + k:02d}"
        text, files = wide_spec(given.seed, k, f"{stem}.csv")
        head = f"# An invented scenario, drawn at random (wide, seed {given.seed}, number {k + 1}).\n"
        for name, content in ((f"{stem}.toml", head + text), *files.items()):
            with (given.folder / name).open("x", encoding="utf-8") as file:
                file.write(content)


if __name__ == "__main__":
    main()
