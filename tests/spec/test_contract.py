"""The example of the contract, key by key, and the record of a spec."""

from __future__ import annotations

import json
import shutil
from dataclasses import replace
from pathlib import Path

import pytest

from synth.errors import SpecError
from synth.spec import InvalidValueError, Spec, load_spec, parse_spec, spec_from_dict, spec_to_dict
from synth.spec.choices import Calibration, CapacitorChoice, Choose, Detector, FilterChoice, ResistorChoice
from synth.spec.model import Environment, Interference, Reject, Settling, Supply
from synth.spec.sensor import Motional, Rolloff

HERE = Path(__file__).parent
MINIMAL = """\
format = 1
title = "Channel"
[target]
center_frequency = "60 kHz"
bandwidth = "3 kHz"
full_scale = "2 uA"
smallest = "100 nA"
output = "1 V"
[sensor]
scale = "20 mV/mA"
[supply]
positive = "5 V"
"""


@pytest.fixture
def contract(tmp_path: Path) -> Spec:
    shutil.copy(HERE / "contract.toml", tmp_path / "spec.toml")
    (tmp_path / "mine.toml").write_text("# no parts\n")
    (tmp_path / "drawer.csv").write_text("kind,value,quantity\n")
    return load_spec(tmp_path / "spec.toml")


def round_trip(spec: Spec) -> Spec:
    return spec_from_dict(json.loads(json.dumps(spec_to_dict(spec))))


def test_the_contract_s_example_target(contract: Spec) -> None:
    assert contract.title == "Pickup-coil channel of a sheet-resistance gauge"
    target = contract.target
    assert (target.center_frequency, target.bandwidth, target.full_scale, target.smallest) == (1e5, 5e3, 2e-6, 1e-7)
    assert (target.output, target.gain) == (1.0, None)
    assert (target.bandwidth_tolerance, target.center_tolerance, target.signal_tolerance) == (0.1, 0.25, 5e-5)
    assert (target.accuracy, target.accuracy_smallest, target.signal_to_noise) == (0.03, 0.1, 20.0)
    assert (target.ripple, target.group_delay_variation, target.load) == (0.5, 2e-5, 1e4)
    assert target.settling == Settling(within=2e-3, to=0.01)
    assert target.reject == (Reject(frequency=3e5, by=60.0),)
    assert target.required_yield == 0.99
    assert contract.full_scale_output == 1.0
    assert contract.overall_gain == pytest.approx(5e5)


def test_the_contract_s_example_sensor(contract: Spec) -> None:
    sensor = contract.sensor
    assert (sensor.output, sensor.output_unit, sensor.scale, sensor.input_unit) == ("voltage", "V", 20.0, "A")
    assert (sensor.scale_tolerance, sensor.scale_temperature_coefficient) == (0.05, 1e-4)
    assert (sensor.resistance, sensor.noise) == (25.0, 0.7e-9)
    assert sensor.rolloff == (Rolloff(kind="high-pass", corner=48e3, tolerance=0.1),)
    assert contract.interference == (Interference(kind="tone", frequency=5e4, level=1e-5),)
    assert contract.supply == Supply(positive=5.0, negative=-5.0)
    assert contract.environment == Environment(ambient=27.0, temperature=(10.0, 45.0))


def test_the_contract_s_example_choices(contract: Spec, tmp_path: Path) -> None:
    parts = contract.parts
    assert parts.resistors == ResistorChoice("E96", 0.01, 5e-5)
    assert parts.capacitors == CapacitorChoice("E12", 0.01, 3e-5, "C0G")
    assert (parts.op_amps, parts.catalogs, parts.stock) == (("...",), ("mine.toml",), "drawer.csv")
    assert contract.catalog_files == (tmp_path / "mine.toml",)
    assert contract.stock_file == tmp_path / "drawer.csv"
    assert contract.filter == FilterChoice("butterworth", 2, "multiple-feedback")
    assert contract.detector == Detector("rms", error=5e-3, offset=1e-3, bandwidth=5e5, averaging_time=1e-2)
    expected = Calibration(0.05, 24.9e3, voltage_tolerance=2e-3, resistor_tolerance=1e-3, trim="gain")
    assert contract.calibration == expected
    assert contract.choose == Choose("yield", "quick")


def test_the_contract_s_example_is_recorded_without_loss(contract: Spec) -> None:
    assert round_trip(contract) == contract
    record = spec_to_dict(contract)
    assert record["format"] == 1
    assert record["sensor"]["scale"] == "20 V/A"
    assert record["target"]["yield"] == 0.99
    assert not {"source", "folder"} & set(record)


def test_defaults() -> None:
    spec = parse_spec(MINIMAL)
    target = spec.target
    assert (target.bandwidth_tolerance, target.center_tolerance, target.required_yield) == (0.1, 0.25, 0.99)
    assert (spec.sensor.output, spec.environment.ambient, spec.supply.negative) == ("voltage", 27.0, None)
    assert (spec.choose.prefer, spec.choose.effort) == ("yield", "quick")
    assert (spec.detector, spec.calibration, spec.resonator, spec.interference) == (None, None, None, ())
    assert spec.stock_file is None
    assert round_trip(spec) == spec
    assert hash(spec) == hash(round_trip(spec))


OTHER_KEYS = """
format = 1
title = "µ \\"quoted\\" Größe"
[target]
center_frequency = 32768
bandwidth = "50 Hz"
full_scale = "3 mm/s^2"
smallest = "30 um/s^2"
gain = "40 dB"
load_capacitance = "100 pF"
settling.within = "1 s"
settling.to = 0.01
[[target.reject]]
frequency = "50 Hz"
by = 60
[[target.reject]]
frequency = "100 Hz"
by = "50 dB"
[sensor]
output = "charge"
scale = "12.3 pC/m/s^2"
inductance = "1 mH"
capacitance = "1 nF"
noise = "1 fC/rtHz"
motional = { resistance = "50k", inductance = "8 kH", capacitance = "3 fF" }
rolloff = [
  { kind = "low-pass", corner = "100 kHz", order = 2 },
  { kind = "resonant", frequency = "40 kHz", q = 25 },
  { kind = "loss", at = "32 kHz", loss = "20 %", shape = "high-pass", tolerance = "0 %" },
  { kind = "table", points = [[1, 1.0, 0], [10, 0.9, -5], [100.5, 0.5, -45]] },
]
[[interference]]
kind = "square"
frequency = "1 kHz"
voltage = "3.3 V"
through = "0.1 pF"
rise_time = "20 ns"
[supply]
positive = "3V3"
[detector]
kind = "adc"
sample_rate = "1 MHz"
bits = 12
range = "2.5 V"
noise = "100 uV"
[calibration]
level = "1 mm/s^2"
level_tolerance = "0.3 %"
trim = "gain+frequency"
correction = "numeric"
[resonator]
series_resistance = "30 kohm"
motional_capacitance = "3 fF"
shunt_capacitance = "1.5 pF"
load_capacitance = "12.5 pF"
frequency = "32.768 kHz"
drive_limit = "1 uW"
allowed_pull = "20 ppm"
[choose]
prefer = "noise"
effort = "full"
"""


def test_the_other_keys_of_the_contract() -> None:
    spec = parse_spec(OTHER_KEYS)
    assert (spec.target.gain, spec.target.output) == (100.0, None)
    assert spec.target.reject == (Reject(50.0, 60.0), Reject(100.0, 50.0))
    assert spec.target.settling == Settling(1.0, 0.01)
    assert (spec.sensor.scale, spec.sensor.input_unit, spec.sensor.output_unit) == (12.3e-12, "m/s^2", "C")
    assert spec.sensor.noise == 1e-15
    assert spec.sensor.motional == Motional(50e3, 8e3, 3e-15)
    assert [factor.kind for factor in spec.sensor.rolloff] == ["low-pass", "resonant", "loss", "table"]
    assert spec.sensor.rolloff[3].points == ((1.0, 1.0, 0.0), (10.0, 0.9, -5.0), (100.5, 0.5, -45.0))
    assert spec.interference == (Interference("square", 1e3, voltage=3.3, through=1e-13, rise_time=2e-8),)
    assert spec.detector == Detector("adc", sample_rate=1e6, bits=12, range=2.5, noise=1e-4)
    assert spec.calibration is not None
    assert spec.calibration.level == 1e-3
    assert (spec.calibration.trims_gain, spec.calibration.trims_frequency) == (False, True)
    assert spec.resonator is not None
    assert (spec.resonator.drive_limit, spec.resonator.allowed_pull) == (1e-6, 2e-5)
    assert spec.full_scale_output == pytest.approx(100 * 12.3e-12 * 3e-3)
    assert round_trip(spec) == spec


def test_gain_as_a_factor_and_transformer() -> None:
    text = MINIMAL.replace('output = "1 V"', 'gain = "28000"').replace(
        'scale = "20 mV/mA"', 'scale = "20 mV/mA"\nburden = "25 ohm"\nmagnetizing_inductance = "100 uH"'
    )
    spec = parse_spec(text)
    assert spec.target.gain == 28000.0
    assert spec.full_scale_output == pytest.approx(28000 * 20 * 2e-6)
    assert (spec.sensor.burden, spec.sensor.magnetizing_inductance) == (25.0, 1e-4)
    assert round_trip(spec) == spec
    assert parse_spec(text.replace('"28000"', "28000")) == spec


def test_a_photodiode_and_a_synchronous_detector() -> None:
    text = MINIMAL.replace('"20 mV/mA"', '"0.6 A/W"\noutput = "current"').replace("uA", "uW").replace("nA", "nW")
    spec = parse_spec(text + '[detector]\nkind = "synchronous"\nphase_tolerance = "1 deg"\n')
    assert (spec.sensor.scale, spec.sensor.input_unit, spec.sensor.output_unit) == (0.6, "W", "A")
    assert spec.detector is not None
    assert spec.detector.phase_tolerance == pytest.approx(0.0174533, abs=1e-7)
    assert round_trip(spec) == spec


def test_an_unlisted_input_unit_and_a_percentage_as_one() -> None:
    spec = parse_spec(MINIMAL.replace("mV/mA", "mV/%").replace("2 uA", "80 %").replace("100 nA", "2 %"))
    assert (spec.sensor.scale, spec.target.full_scale, spec.target.smallest) == (0.02, 80.0, 2.0)
    assert round_trip(spec) == spec


def test_a_table_is_read_from_beside_the_spec_and_recorded_with_it(tmp_path: Path) -> None:
    (tmp_path / "coil.csv").write_text("Hz,gain,degrees\n# measured\n1e3,1.0,0\n\n1e4,0.95,-8\n6e4,0.7,-45\n")
    path = tmp_path / "spec.toml"
    path.write_text(MINIMAL.replace('"20 mV/mA"', '"20 mV/mA"\nrolloff = [{ kind = "table", file = "coil.csv" }]'))
    spec = load_spec(path)
    factor = spec.sensor.rolloff[0]
    assert (factor.file, factor.points) == ("coil.csv", ((1e3, 1.0, 0.0), (1e4, 0.95, -8.0), (6e4, 0.7, -45.0)))
    (tmp_path / "coil.csv").unlink()
    assert round_trip(spec) == spec


def test_a_changed_copy_is_validated_too() -> None:
    target = parse_spec(MINIMAL).target
    with pytest.raises(InvalidValueError, match=r"^target\.bandwidth = 130000\.0: must be at most twice .*120 kHz"):
        replace(target, bandwidth=130e3)
    with pytest.raises(SpecError, match=r"^target\.center_frequency = nan: must be a finite number"):
        replace(target, center_frequency=float("nan"))
    with pytest.raises(SpecError, match=r'^sensor\.input_unit = "A\\n\.end": .*name the unit of the sensor'):
        replace(parse_spec(MINIMAL).sensor, input_unit="A\n.end")
    with pytest.raises(SpecError, match=r"^target\.yield = 1\.5: must be above 0 % and below 100 %"):
        replace(target, required_yield=1.5)


def test_a_byte_order_mark_and_other_line_ends_are_read(tmp_path: Path) -> None:
    path = tmp_path / "spec.toml"
    path.write_bytes(b"\xef\xbb\xbf" + MINIMAL.replace("\n", "\r\n").encode())
    assert load_spec(str(path)) == parse_spec(MINIMAL)
    path.write_bytes(MINIMAL.replace('"3 kHz"', '"3 V"').replace("\n", "\r\n").encode())
    with pytest.raises(SpecError, match=r"line 5: target\.bandwidth"):
        load_spec(path)
