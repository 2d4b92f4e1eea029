"""A first spec for a person to edit: every key of the format, with a word on each."""

from __future__ import annotations

import json
import tomllib
from string import Template

from synth.errors import QuantityError, SpecError
from synth.quantity import format_si, parse_input, parse_ratio, show
from synth.spec.checks import suggestion, text_problem
from synth.spec.reader import read_document
from synth.spec.sensor import OUTPUT_UNITS
from synth.spec.table import Document

GIVEN = (
    *("title", "center_frequency", "bandwidth", "full_scale", "smallest", "output", "gain", "accuracy"),
    *("signal_to_noise", "scale", "resistance", "inductance", "capacitance", "corner", "positive", "negative"),
)
_EXAMPLES = {
    "output": "1 V",
    "gain": "88 dB",
    "accuracy": "3 %",
    "signal_to_noise": "20 dB",
    "scale": "20 mV/mA",
    "resistance": "25 ohm",
    "inductance": "10 uH",
    "capacitance": "100 pF",
    "positive": "5 V",
    "negative": "-5 V",
}

_TEMPLATE = Template("""\
# What the chain must do. Quantities are text with SI units: "60 kHz", "4k7", "2 uA", "3 %", "50 ppm", "40 dB".
# Lines that start with '# ' and hold a key are optional: remove the '# ' to use them.
format = 1
title = $title   # one line

[target]
center_frequency = $center_frequency   # of the signal
bandwidth = $bandwidth   # of the whole chain, between its -3 dB points
full_scale = $full_scale   # rms, in the sensor's input unit
smallest = $smallest   # smallest reading that must still be useful
${output_}output = $output   # rms at full scale and centre; or a gain instead:
${gain_}gain = $gain   # from the sensor's terminals (flat region) to the output
# bandwidth_tolerance = "10 %"   # how far the bandwidth may be off
# center_tolerance = "25 %"   # how far the centre may be off, share of the bandwidth
# signal_tolerance = "50 ppm"   # how far the signal may lie from the centre
${accuracy_}accuracy = $accuracy   # of reading at full scale, expanded (k = 2), after calibration
# accuracy_smallest = "10 %"   # the same at the smallest reading
${signal_to_noise_}signal_to_noise = $signal_to_noise   # at the smallest reading, before the detector
# ripple = "0.5 dB"   # within the bandwidth
# group_delay_variation = "20 us"   # over the central half of the bandwidth
# settling = { within = "2 ms", to = "1 %" }   # of the envelope after a step of the signal
# reject = [ { frequency = $far, by = "40 dB" } ]   # relative to the centre
# load = "10 kohm"   # at the output
# load_capacitance = "100 pF"
# yield = "99 %"   # share of builds that must meet everything

[sensor]
$output_kind = $kind   # what the scale gives: "voltage", "current" (photodiode), "charge" (piezo)
scale = $scale   # open-circuit output over input where flat; what stands below the slash is the input unit
# scale_tolerance = "5 %"
# scale_temperature_coefficient = "100 ppm"   # per kelvin
${resistance_}resistance = $resistance   # of the source
${inductance_}inductance = $inductance   # in series
${capacitance_}capacitance = $capacitance   # in parallel, with the cable
# burden = "25 ohm"   # of a transformer, with its magnetizing_inductance, instead of the resistance
# magnetizing_inductance = "100 uH"
# motional = { resistance = "50 kohm", inductance = "8 kH", capacitance = "3 fF" }   # instead of the resistance
# noise = "0.7 n$unit"   # density at the terminals, after the rolloff; left out: thermal noise of the source
# rolloff: high-pass, low-pass (corner, order), resonant (frequency, q), loss (at, loss, shape: high-pass or
# low-pass), table (file: CSV of Hz, gain, degrees); a tolerance for each
${rolloff_}rolloff = [ { kind = "high-pass", corner = $corner, tolerance = "10 %" } ]

# [[interference]]   # any number of these
# kind = "tone"   # or "square": odd harmonics of a square wave, with a rise_time
# frequency = $near
# level = $full_scale   # rms, in the input unit; or voltage and through instead:
# voltage = "3.3 V"
# through = "0.1 pF"   # couples the voltage to the input node
# rise_time = "20 ns"   # 10-90 %, of a square wave

[supply]
positive = $positive
${negative_}negative = $negative   # left out: single supply with a mid-rail reference

# [environment]
# ambient = "27 degC"   # of nominal figures
# temperature = ["10 degC", "45 degC"]

# [parts]
# resistors = { series = "E96", tolerance = "1 %", temperature_coefficient = "50 ppm" }
# capacitors = { series = "E12", tolerance = "1 %", temperature_coefficient = "30 ppm", dielectric = "C0G" }
# op_amps = ["type number"]   # choose among these
# catalogs = ["mine.toml"]   # your own parts
# stock = "drawer.csv"   # kind,value,quantity: use only these

# [filter]   # what you insist on
# family = "butterworth"   # butterworth, synchronous, chebyshev, bessel, gaussian
# sections = 2
# topology = "multiple-feedback"

# [detector]
# kind = "rms"   # rms, average, peak, synchronous, adc, none
# error = "0.5 %"
# offset = "1 mV"
# bandwidth = "500 kHz"
# averaging_time = "10 ms"
# phase_tolerance = "1 deg"   # synchronous
# sample_rate = "1 MHz"   # adc
# bits = 12   # adc
# range = "2 V"   # adc
# noise = "100 uV"   # adc

# [calibration]
# voltage = "50 mV"   # through the resistor into the sensor's terminals; or level, in the input unit
# resistor = "24.9 kohm"
# voltage_tolerance = "0.2 %"
# resistor_tolerance = "0.1 %"
# level = $full_scale
# level_tolerance = "0.3 %"
# trim = "gain"   # gain, gain+frequency, none
# correction = "numeric"   # record a scale factor instead

# [resonator]   # a crystal in the chain
# series_resistance = "30 kohm"
# motional_capacitance = "3 fF"
# shunt_capacitance = "1.5 pF"
# load_capacitance = "12.5 pF"
# frequency = $center_frequency
# drive_limit = "1 uW"
# allowed_pull = "20 ppm"

# [choose]
# prefer = "yield"   # yield, noise, parts, current
# effort = "quick"   # or "full"
""")


def starter_spec(**given: str | None) -> str:
    """The TOML text of a valid spec to edit, filled with what is given.

    Args:
        given: texts by key, see `GIVEN`; None or left out: an invented pickup-coil channel, fitted to what is
            given (bandwidth 5 % of the centre, a full scale of one input unit, ...).  A positive supply without a
            negative one is a single supply.  corner: of the sensor's high-pass.

    Raises:
        SpecError: a key that is not one of `GIVEN`, or a value that cannot be used.
    """
    values = {}
    for key, value in given.items():
        if key not in GIVEN:
            raise SpecError(f"{show(key)} cannot be given for a new spec; {suggestion(key, GIVEN)}")
        if value is None:
            continue
        if not isinstance(value, str):
            raise SpecError(f"{key} = {show(value)}: must be a text with its unit")
        if problem := text_problem(value):
            raise SpecError(f"{key} = {show(value)}: {problem}")
        values[key] = value
    content = _TEMPLATE.substitute(_substitutes(values))
    read_document(Document("the values given", {}, None, open_files=False), tomllib.loads(content))
    return content


def _substitutes(given: dict[str, str]) -> dict[str, str]:
    """What the template's names stand for: quoted values, and "# " before the keys that stay optional."""
    values = dict(given)
    kind, unit = _input_of(values)
    _complete(values, unit)
    center = _read(values, "center_frequency", "Hz")
    shown = set(given)
    if "scale" not in given:
        shown |= {"resistance", "rolloff"}
    if "gain" not in given:
        shown.add("output")
    if "positive" not in given:
        shown.add("negative")
    if "corner" in given:
        shown.add("rolloff")
    optional = ("output", "gain", "accuracy", "signal_to_noise", "resistance", "inductance", "capacitance", "negative")
    marks = {f"{key}_": "" if key in shown else "# " for key in (*optional, "rolloff")}
    near = {"far": format_si(3 * center, "Hz"), "near": format_si(center / 2, "Hz"), "kind": kind}
    quoted = {key: json.dumps(value, ensure_ascii=False) for key, value in (values | near).items()}
    return quoted | marks | {"output_kind": "# output" if kind == "voltage" else "output", "unit": OUTPUT_UNITS[kind]}


def _complete(values: dict[str, str], unit: str) -> None:
    """Fill what was not given, fitted to what was."""
    invented = "scale" not in values
    values.setdefault("title", "Pickup-coil channel" if invented else "Measuring channel")
    values.setdefault("center_frequency", "60 kHz")
    center = _read(values, "center_frequency", "Hz")
    values.setdefault("bandwidth", format_si(0.05 * center, "Hz", 6))
    values.setdefault("corner", format_si(0.5 * center, "Hz"))
    if "full_scale" not in values and "smallest" in values:
        values["full_scale"] = format_si(20 * _read(values, "smallest", unit), unit, 6)
    values.setdefault("full_scale", "2 uA" if invented else f"1 {unit}")
    values.setdefault("smallest", format_si(_read(values, "full_scale", unit) / 20, unit, 6))
    for key, value in _EXAMPLES.items():
        values.setdefault(key, value)


def _input_of(values: dict[str, str]) -> tuple[str, str]:
    """Kind of the sensor's output, and its input unit."""
    scale = values.get("scale", _EXAMPLES["scale"])
    problems = []
    for kind, numerator in OUTPUT_UNITS.items():
        try:
            return kind, parse_ratio(scale, numerator)[1]
        except QuantityError as error:
            problems.append(error)
    raise SpecError(f"scale = {problems[0]}") from problems[0]


def _read(values: dict[str, str], key: str, unit: str) -> float:
    """The value of a key, above zero; "Hz" or the sensor's input unit."""
    try:
        number = parse_input(values[key], unit)
    except QuantityError as error:
        raise SpecError(f"{key} = {error}") from error
    if number <= 0:
        raise SpecError(f"{key} = {show(values[key])}: must be above zero")
    return number
