"""Reads a spec, format 1: TOML text or the dict of a design file, through one and the same set of fields."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from synth.errors import QuantityError, SpecError
from synth.quantity import parse_ratio, show
from synth.spec.choices import (
    Calibration,
    CapacitorChoice,
    Choose,
    Detector,
    FilterChoice,
    PartsChoice,
    ResistorChoice,
    Resonator,
)
from synth.spec.files import SIZE_LIMIT, read_response, read_text
from synth.spec.model import FORMAT, Environment, Interference, Reject, Settling, Spec, Supply, Target
from synth.spec.sensor import OUTPUT_UNITS, Motional, Rolloff, Sensor, points_problem
from synth.spec.table import (
    Document,
    Field,
    Place,
    build_at,
    file,
    gain,
    input_quantity,
    integer,
    items,
    open_named,
    quantity,
    read_table,
    require,
    require_table,
    table,
    text,
)
from synth.spec.toml_lines import key_lines

PART_KEYS = {"series": text(), "tolerance": quantity("%"), "temperature_coefficient": quantity("1/K")}
PARTS_KEYS = {
    "resistors": table(ResistorChoice, PART_KEYS),
    "capacitors": table(CapacitorChoice, PART_KEYS | {"dielectric": text()}),
    "op_amps": items(text()),
    "catalogs": items(file("a catalog")),
    "stock": file("a list of stocked parts"),
}
DETECTOR_KEYS = {
    "kind": require(text(), '"rms"'),
    "error": quantity("%"),
    "offset": quantity("V"),
    "bandwidth": quantity("Hz"),
    "averaging_time": quantity("s"),
    "sample_rate": quantity("Hz"),
    "bits": integer(),
    "range": quantity("V"),
    "noise": quantity("V"),
    "phase_tolerance": quantity("rad"),
}
RESONATOR_KEYS = {
    "series_resistance": quantity("ohm"),
    "motional_capacitance": quantity("F"),
    "shunt_capacitance": quantity("F"),
    "load_capacitance": quantity("F"),
    "frequency": quantity("Hz"),
    "drive_limit": quantity("W"),
    "allowed_pull": quantity("%"),
}
ROLLOFF_KEYS = {
    "kind": require(text(), '"high-pass"'),
    "corner": quantity("Hz"),
    "order": integer(),
    "frequency": quantity("Hz"),
    "q": quantity("V/V"),
    "at": quantity("Hz"),
    "loss": quantity("%"),
    "shape": text(),
    "file": text(),
    "points": Field(lambda place, value: _read_points(place, value)),
    "tolerance": quantity("%"),
}
SUPPLY_KEYS = {"positive": require(quantity("V"), '"5 V"'), "negative": quantity("V")}
ENVIRONMENT_KEYS = {"ambient": quantity("degC"), "temperature": items(quantity("degC"), count=2)}
FILTER_KEYS = {"family": text(), "sections": integer(), "topology": text()}
CHOOSE_KEYS = {"prefer": text(), "effort": text()}


def target_keys(unit: str = "A") -> dict[str, Field]:
    """Fields of [target], for a sensor's input unit."""
    settling = {"within": require(quantity("s"), '"2 ms"'), "to": require(quantity("%"), '"1 %"')}
    reject = {"frequency": require(quantity("Hz"), '"300 kHz"'), "by": require(quantity("dB"), '"60 dB"')}
    return {
        "center_frequency": require(quantity("Hz"), '"60 kHz"'),
        "bandwidth": require(quantity("Hz"), '"3 kHz"'),
        "full_scale": require(input_quantity(unit), f'"2 {unit}"'),
        "smallest": require(input_quantity(unit), f'"0.1 {unit}"'),
        "output": quantity("V"),
        "gain": gain(),
        "bandwidth_tolerance": quantity("%"),
        "center_tolerance": quantity("%"),
        "signal_tolerance": quantity("%"),
        "accuracy": quantity("%"),
        "accuracy_smallest": quantity("%"),
        "signal_to_noise": quantity("dB"),
        "ripple": quantity("dB"),
        "group_delay_variation": quantity("s"),
        "settling": table(Settling, settling),
        "reject": items(table(Reject, reject)),
        "load": quantity("ohm"),
        "load_capacitance": quantity("F"),
        "yield": quantity("%"),
    }


def sensor_keys(output: str = "voltage") -> dict[str, Field]:
    """Fields of [sensor], for the kind of its output."""
    unit = OUTPUT_UNITS.get(output, "V")
    motional = {"resistance": quantity("ohm"), "inductance": quantity("H"), "capacitance": quantity("F")}
    examples = {"resistance": '"50 kohm"', "inductance": '"8 kH"', "capacitance": '"3 fF"'}
    return {
        "output": text(),
        "scale": require(Field(lambda place, value: _read_scale(place, value, unit)), f'"20 m{unit}/mA"'),
        "scale_tolerance": quantity("%"),
        "scale_temperature_coefficient": quantity("1/K"),
        "resistance": quantity("ohm"),
        "inductance": quantity("H"),
        "capacitance": quantity("F"),
        "burden": quantity("ohm"),
        "magnetizing_inductance": quantity("H"),
        "motional": table(Motional, {key: require(motional[key], examples[key]) for key in motional}),
        "noise": quantity(f"{unit}/rtHz"),
        "rolloff": items(Field(_read_rolloff)),
    }


def interference_keys(unit: str = "A") -> dict[str, Field]:
    """Fields of one [[interference]], for a sensor's input unit."""
    return {
        "kind": require(text(), '"tone"'),
        "frequency": require(quantity("Hz"), '"50 kHz"'),
        "level": input_quantity(unit),
        "voltage": quantity("V"),
        "through": quantity("F"),
        "rise_time": quantity("s"),
    }


def calibration_keys(unit: str = "A") -> dict[str, Field]:
    """Fields of [calibration], for a sensor's input unit."""
    return {
        "voltage": quantity("V"),
        "resistor": quantity("ohm"),
        "voltage_tolerance": quantity("%"),
        "resistor_tolerance": quantity("%"),
        "level": input_quantity(unit),
        "level_tolerance": quantity("%"),
        "trim": text(),
        "correction": text(),
    }


def top_keys(unit: str = "A") -> dict[str, Field]:
    """Fields of the whole spec, for a sensor's input unit."""
    return {
        "format": require(integer(), str(FORMAT)),
        "title": require(text(), '"Pickup-coil channel"'),
        "target": table(_build_target, target_keys(unit)),
        "sensor": Field(_read_sensor),
        "interference": items(table(Interference, interference_keys(unit))),
        "supply": table(Supply, SUPPLY_KEYS),
        "environment": table(Environment, ENVIRONMENT_KEYS),
        "parts": table(PartsChoice, PARTS_KEYS),
        "filter": table(FilterChoice, FILTER_KEYS),
        "detector": table(Detector, DETECTOR_KEYS),
        "calibration": table(Calibration, calibration_keys(unit)),
        "resonator": table(Resonator, RESONATOR_KEYS),
        "choose": table(Choose, CHOOSE_KEYS),
    }


def load_spec(path: Path | str) -> Spec:
    """The spec in a file.

    Raises:
        SpecError: the file, or anything in it or in a file it names, cannot be used; one trouble at a time, with
            file, line, key, value, bound and remedy.
    """
    path = Path(path)
    return parse_spec(read_text(path, "a spec"), str(path), path.parent)


def parse_spec(content: str, source: str = "spec.toml", folder: Path | None = None) -> Spec:
    """The spec in a TOML text.

    Args:
        content: the text.
        source: its name, for messages.
        folder: what file names in it are relative to; None for the working folder.

    Raises:
        SpecError: as `load_spec`.
    """
    if len(content) > SIZE_LIMIT:
        raise SpecError(f"{source}: has {len(content)} characters, more than {SIZE_LIMIT}; name the right file")
    if not content.strip():
        raise SpecError(f"{source}: is empty; a spec is expected")
    try:
        data = tomllib.loads(content)
    except RecursionError as error:
        raise SpecError(f"{source}: its brackets are nested too deeply; a spec needs three levels") from error
    except ValueError as error:
        raise SpecError(_syntax_message(content, source, str(error))) from error
    document = Document(source, key_lines(content.replace("\r\n", "\n")), folder, open_files=True)
    return read_document(document, data)


def spec_from_dict(data: object, source: str = "design.json", folder: Path | None = None) -> Spec:
    """The spec recorded in a design file, see `spec_to_dict`; files that it names are not looked for.

    Raises:
        SpecError: as `load_spec`, without lines.
    """
    return read_document(Document(source, {}, folder, open_files=False), data)


def _syntax_message(content: str, source: str, problem: str) -> str:
    """A TOML error with its line in front."""
    match = re.search(r"\(at line (\d+), column (\d+)\)", problem)
    if match:
        place = f"line {match[1]}"
        problem = problem.replace(match[0], f"(column {match[2]})")
    else:
        place = f"line {content.count(chr(10)) + (not content.endswith(chr(10)))}"
    if len(problem) > 200:
        problem = problem[:197] + "..."
    problem = "".join(c if c.isprintable() else " " for c in problem)
    return f"{source}, {place}: is not valid TOML: {problem}; correct the line (texts stand in double quotes)"


def read_document(document: Document, data: object) -> Spec:
    """The spec in the tables of a document; raises SpecError as `load_spec`."""
    place = Place(document)
    if not isinstance(data, dict):
        raise SpecError(f"{document.source}: a spec must be a table, not {show(data)}")
    require_table(place, data, top_keys())
    if "format" not in data:
        place.missing("format", f"add it as the first line: format = {FORMAT}")
    _check_format(place.at("format"), data["format"])
    for section, remedy in (
        ("sensor", 'add a section [sensor] with scale = "20 mV/mA"'),
        ("target", "add a section [target] with center_frequency, bandwidth, full_scale, smallest and output"),
        ("supply", 'add a section [supply] with positive = "5 V"'),
    ):
        if section not in data:
            place.missing(section, remedy)
    sensor = _read_sensor(place.at("sensor"), data["sensor"])
    others = {key: known for key, known in top_keys(sensor.input_unit).items() if key not in ("sensor", "format")}
    values = read_table(place, {key: value for key, value in data.items() if key in others}, others)
    values |= {"sensor": sensor, "source": document.source, "folder": document.folder}
    return build_at(place, data, Spec, values)


def _check_format(place: Place, value: object) -> None:
    number: int = integer().read(place, value)
    if number > FORMAT:
        place.fail(value, f"the spec is of a newer format; this version reads format {FORMAT}: update the program")
    if number != FORMAT:
        place.fail(value, f"there is no such format; write format = {FORMAT}")


def _build_target(**values: Any) -> Target:
    if "yield" in values:
        values["required_yield"] = values.pop("yield")
    return Target(**values)


def _read_scale(place: Place, value: object, unit: str) -> tuple[float, str]:
    try:
        return parse_ratio(value, unit)
    except QuantityError as error:
        output = next(name for name, own in OUTPUT_UNITS.items() if own == unit)
        hint = f' (sensor.output is "{output}"; say output = "voltage", "current" or "charge" for V, A or C)'
        place.fail_shown(error.shown, error.reason + (hint if "before the slash" in error.reason else ""))


def _read_sensor(place: Place, value: object) -> Sensor:
    output = value.get("output") if isinstance(value, dict) else None
    fields = sensor_keys(output if isinstance(output, str) else "voltage")
    if isinstance(output, str) and output not in OUTPUT_UNITS:
        build_at(place, value, _output_only, {"output": output})
    values = read_table(place, value, fields)
    values["scale"], values["input_unit"] = values["scale"]
    return build_at(place, value, Sensor, values)


def _output_only(output: str) -> None:
    """Refuse an unknown kind of output before the scale is read by it."""
    Sensor(scale=1.0, input_unit="A", output=output)


def _read_rolloff(place: Place, value: object) -> Rolloff:
    values = read_table(place, value, ROLLOFF_KEYS)
    name = values.get("file")
    if values["kind"] == "table" and name is not None and place.document.open_files:
        if "points" in values:
            place.at("points").fail(values["points"], "cannot stand beside file; remove one of them")
        values["points"] = open_named(place.at("file"), name, read_response)
        if problem := points_problem(values["points"]):
            place.at("file").fail(name, problem)
    return build_at(place, value, Rolloff, values)


def _read_points(place: Place, value: object) -> tuple[tuple[float, ...], ...]:
    number = quantity("V/V")
    rows: tuple[tuple[float, ...], ...] = items(items(number)).read(place, value)
    return rows


def known_keys() -> Mapping[str, tuple[str, ...]]:
    """The keys of every table of a spec, by the table's path; "" is the top."""
    rolloff = tuple(key for key in ROLLOFF_KEYS if key != "points")
    return {
        "": tuple(top_keys()),
        "target": tuple(target_keys()),
        "target.settling": ("within", "to"),
        "target.reject": ("frequency", "by"),
        "sensor": tuple(sensor_keys()),
        "sensor.motional": ("resistance", "inductance", "capacitance"),
        "sensor.rolloff": rolloff,
        "interference": tuple(interference_keys()),
        "supply": tuple(SUPPLY_KEYS),
        "environment": tuple(ENVIRONMENT_KEYS),
        "parts": tuple(PARTS_KEYS),
        "parts.resistors": tuple(PART_KEYS),
        "parts.capacitors": (*PART_KEYS, "dielectric"),
        "filter": tuple(FILTER_KEYS),
        "detector": tuple(DETECTOR_KEYS),
        "calibration": tuple(calibration_keys()),
        "resonator": tuple(RESONATOR_KEYS),
        "choose": tuple(CHOOSE_KEYS),
    }
