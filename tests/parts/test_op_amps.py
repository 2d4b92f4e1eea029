"""Op amp catalog: every entry is physically consistent, every figure has its provenance, every mistake is named."""

from __future__ import annotations

import dataclasses
import math
import re
import tomllib
from pathlib import Path

import pytest

from synth.errors import CatalogError
from synth.model.part import OpAmp
from synth.parts.locate import catalog_path
from synth.parts.op_amps import (
    INDUCED_NOISE,
    OpAmpEntry,
    load_op_amps,
    phase_margin,
    read_house_catalog,
    select,
)

CATALOG = load_op_amps()
ELECTRON = 1.602176634e-19
BOLTZMANN = 1.380649e-23
EXTRAS = (
    "supply_rejection_positive",
    "supply_rejection_negative",
    "supply_rejection_corner_positive",
    "supply_rejection_corner_negative",
    "voltage_noise_spread",
    "current_noise_spread",
)
NOT_FIGURES = ("type", "technology", "packages")

OWN = """
[op_amps.{name}]
technology = "bipolar"
gain_bandwidth = 20e6
dc_gain = 1e6
second_pole = 40e6
minimum_noise_gain = 1.0
output_resistance = 50.0
input_capacitance_differential = 2e-12
input_capacitance_common = 1e-12
voltage_noise = 3e-9
voltage_noise_corner = 10.0
current_noise = 1e-12
current_noise_corner = 100.0
slew_rate = 5e6
output_current = 20e-3
swing_headroom_high = 1.0
swing_headroom_low = 1.0
common_mode_headroom_high = 1.5
common_mode_headroom_low = 1.5
offset_voltage = 0.1e-3
offset_voltage_max = 1e-3
bias_current = 0.1e-6
supply_minimum = 5.0
supply_maximum = 30.0
supply_current = 3e-3
source = "bench"
"""


def own(tmp_path: Path, text: str, name: str = "mine.toml") -> Path:
    file = tmp_path / name
    file.write_text(text, encoding="utf-8")
    return file


def changed(key: str, value: str) -> str:
    text, count = re.subn(rf"(?m)^{key} = .*$", f"{key} = {value}", OWN.format(name="X1"))
    assert count == 1
    return text


def test_thirty_types_from_every_technology() -> None:
    assert len(CATALOG) >= 30
    assert {entry.op_amp.technology for entry in CATALOG.values()} == {"bipolar", "JFET", "CMOS"}


@pytest.mark.parametrize("name", CATALOG)
def test_figures_agree_with_each_other(name: str) -> None:
    a = CATALOG[name].op_amp
    assert a.type == name
    margin = phase_margin(a.gain_bandwidth, a.dc_gain, a.second_pole, a.minimum_noise_gain)
    assert 30 < margin < 95
    first_pole = a.gain_bandwidth / a.dc_gain
    assert first_pole < 1e6
    assert a.second_pole is None or a.second_pole > 100 * first_pole
    assert a.swing_headroom_high + a.swing_headroom_low < a.supply_minimum
    assert a.common_mode_headroom_high + a.common_mode_headroom_low < a.supply_minimum
    assert 0 < a.supply_minimum < a.supply_maximum <= 44
    assert 0 < a.offset_voltage <= a.offset_voltage_max
    # slew rate over gain-bandwidth: 0.1 to 10 V for every known input stage
    assert 0.1 < a.slew_rate / a.gain_bandwidth < 10
    # the bias current's shot noise is the least current noise of an input
    assert a.current_noise >= 0.95 * math.sqrt(2 * ELECTRON * a.bias_current)
    # 1/f noise: the corner lies where the device physics puts it
    assert a.voltage_noise_corner <= 10e3
    if a.technology == "bipolar":
        assert a.current_noise > 50e-15
        assert a.bias_current > 1e-9
        assert a.current_noise_slope == 0.0
    else:
        assert a.current_noise < 50e-15
        assert a.bias_current < 1e-9
    assert a.output_current > a.supply_current
    # shot noise of an input pair, en^2 = 4 (kT)^2 / (q Ic) at least, each Ic below half of the supply current
    assert a.voltage_noise**2 >= 8 * (BOLTZMANN * 298.15) ** 2 / (ELECTRON * a.supply_current)


@pytest.mark.parametrize("name", CATALOG)
def test_supply_rejection_crosses_unity_near_the_gain_bandwidth(name: str) -> None:
    entry = CATALOG[name]
    for rail in ("positive", "negative"):
        decibel = getattr(entry, f"supply_rejection_{rail}")
        corner = getattr(entry, f"supply_rejection_corner_{rail}")
        assert 55 <= decibel <= 145
        assert 0.05 < 10 ** (decibel / 20) * corner / entry.op_amp.gain_bandwidth < 50


@pytest.mark.parametrize("name", [n for n, e in CATALOG.items() if e.op_amp.technology != "bipolar"])
def test_noise_induced_in_a_gate(name: str) -> None:
    a = CATALOG[name].op_amp
    capacitance = a.input_capacitance_differential + a.input_capacitance_common
    assert a.current_noise_slope == pytest.approx(
        INDUCED_NOISE * 2 * math.pi * capacitance * a.voltage_noise, rel=1e-9, abs=0.0
    )
    assert CATALOG[name].provenance["current_noise_slope"] == "derived"
    assert 1e-21 < a.current_noise_slope < 5e-19


# spot densities at 1 kHz as printed, recalled or simulated: sqrt(white^2 (1 + corner/f)) must return them within 1 %
# fmt: off
SPOT = {
    "LM358": (40e-9, 100e-15), "MC33078": (4.5e-9, 500e-15), "RC4558": (8e-9, 400e-15), "NE5532": (5e-9, 700e-15),
    "NE5534": (4e-9, 600e-15), "OP27": (3e-9, 400e-15), "OP37": (3e-9, 400e-15), "LM4562": (2.7e-9, 1.6e-12),
    "OPA1612": (1.1e-9, 1.7e-12), "OPA2211": (1.1e-9, 1.7e-12), "AD797": (0.9e-9, 2e-12), "OPA1656": (4.3e-9, 6e-15),
    "LM318": (14e-9, 300e-15), "TL072": (18e-9, 10e-15), "LF356": (12e-9, 10e-15), "OPA2134": (8e-9, 3e-15),
    "OPA1642": (5.1e-9, 0.8e-15), "ADA4625-1": (3.3e-9, 4.5e-15), "ADA4898-1": (0.9e-9, 2.4e-12),
    "OPA365": (11.4e-9, 4e-15), "OPA320": (8.5e-9, 0.6e-15), "AD8606": (8e-9, 10e-15), "OPA192": (5.5e-9, 1.5e-15),
    "MCP6022": (11.7e-9, 3e-15), "OPA847": (0.863e-9, 3.54e-12), "OPA657": (5.49e-9, 1.3e-15),
}
# fmt: on


@pytest.mark.parametrize("name", SPOT)
def test_noise_at_one_kilohertz(name: str) -> None:
    a = CATALOG[name].op_amp
    voltage = a.voltage_noise * math.sqrt(1 + a.voltage_noise_corner / 1e3)
    current = a.current_noise * math.sqrt(1 + a.current_noise_corner / 1e3)
    assert (voltage, current) == pytest.approx(SPOT[name], rel=0.01, abs=0.0)


@pytest.mark.parametrize("name", CATALOG)
def test_provenance_covers_every_figure(name: str) -> None:
    entry = CATALOG[name]
    figures = {f.name for f in dataclasses.fields(OpAmp)} - set(NOT_FIGURES) | set(EXTRAS)
    assert set(entry.provenance) == figures
    assert set(entry.provenance.values()) <= {"found", "macromodel", "derived", "memory", "uncertain"}
    assert len(entry.source) > 20


@pytest.mark.parametrize("name", CATALOG)
def test_packages(name: str) -> None:
    packages = CATALOG[name].op_amp.packages
    assert [count for count, _ in packages] == sorted({count for count, _ in packages})
    assert name in [order for _, order in packages]


def test_no_type_number_is_in_two_entries() -> None:
    orders = [order for entry in CATALOG.values() for _, order in entry.op_amp.packages]
    assert len(orders) == len(set(orders))


def test_decompensated_type_at_the_working_frequencies() -> None:
    assert CATALOG["OP37"].op_amp.gain_bandwidth == 40e6
    assert CATALOG["OP37"].op_amp.minimum_noise_gain == 5.0


def test_phase_margin_in_closed_form() -> None:
    # single pole: the phase at |A| = N is -atan(sqrt((A0/N)^2 - 1))
    assert phase_margin(1e6, 1e5, None, 1.0) == pytest.approx(90.0, abs=1e-3)
    assert phase_margin(1e6, 2.0, None, 1.0) == pytest.approx(180 - 60.0)
    # poles far apart: |A| = N where f sqrt(1 + (f/f2)^2) = GBW/N; f = f2 gives 45 degrees
    assert phase_margin(math.sqrt(2) * 1e7, 1e7, 1e7, 1.0) == pytest.approx(45.0, abs=1e-3)


@pytest.mark.parametrize("asked", ["OPA1612", "opa1612", "OPA1611"])
def test_select_by_entry_package_and_case(asked: str) -> None:
    (entry,) = select([asked])
    assert entry.op_amp.type == "OPA1612"


def test_select_keeps_the_order_and_drops_repeats() -> None:
    assert [e.op_amp.type for e in select(["TL074", "OP27", "TL072"])] == ["TL072", "OP27"]
    assert select([]) == ()


def test_select_an_unknown_type() -> None:
    with pytest.raises(CatalogError, match=r"op amp 'OPA1621': in no catalog; nearest: OPA\d+.*; correct the type, or"):
        select(["OPA1621"])


def test_own_catalog_adds_and_replaces(tmp_path: Path) -> None:
    first = own(tmp_path, OWN.format(name="X1") + OWN.format(name="OP27"), "first.toml")
    second = own(tmp_path, changed("gain_bandwidth", "25e6"), "second.toml")
    merged = load_op_amps([first, second])
    assert set(merged) == {*CATALOG, "X1"}
    assert merged["OP27"].op_amp.gain_bandwidth == 20e6
    assert merged["X1"].op_amp.gain_bandwidth == 25e6
    assert load_op_amps([second, first])["X1"].op_amp.gain_bandwidth == 20e6
    assert merged["LM358"] == CATALOG["LM358"]
    assert load_op_amps()["OP27"].op_amp.gain_bandwidth == 8e6
    assert select(["x1"], merged)[0].op_amp.packages == ((1, "X1"),)


def test_what_an_own_entry_may_leave_out(tmp_path: Path) -> None:
    entry: OpAmpEntry = load_op_amps([own(tmp_path, OWN.format(name="X1"))])["X1"]
    assert entry.op_amp.gain_bandwidth_spread == 0.3
    assert entry.op_amp.stray_output_to_inverting == 0.1e-12
    assert entry.op_amp.stray_inverting_to_ground == 2e-12
    assert entry.supply_rejection_positive is None
    assert entry.provenance["gain_bandwidth"] == "uncertain"
    assert entry.note == ""
    one_pole = OWN.format(name="X1").replace("second_pole = 40e6\n", "")
    assert load_op_amps([own(tmp_path, one_pole)])["X1"].op_amp.second_pole is None
    slope = OWN.format(name="X1") + "current_noise_slope = 1e-19\n"
    assert load_op_amps([own(tmp_path, slope)])["X1"].op_amp.current_noise_slope == 1e-19


@pytest.mark.parametrize(
    ("key", "value", "complaint"),
    [
        ("gain_bandwidth", "-1", "must lie between 1000 and 1e\\+11 Hz; correct the figure"),
        ("gain_bandwidth", '"20 MHz"', "must be a plain number between 1000 and 1e\\+11 Hz; write it without quotes"),
        ("voltage_noise", "3.0", "must lie between 1e-10 and 1e-06 V/rtHz"),
        ("bias_current", "nan", "must lie between"),
        ("technology", '"bipolr"', "must be one of bipolar, JFET, CMOS; nearest: bipolar"),
        ("source", '""', "must be a text"),
        ("supply_minimum", "30.0", "must be below supply_maximum = 30 V"),
        ("swing_headroom_high", "4.0", "with swing_headroom_low takes 5 V, must leave something of supply_minimum = 5"),
        ("common_mode_headroom_high", "4.0", "with common_mode_headroom_low takes 5.5 V, must leave something"),
        ("offset_voltage", "2e-3", "must not exceed offset_voltage_max = 0.001 V"),
        ("minimum_noise_gain", "1e6", "must lie between 1 and 100"),
        ("dc_gain", "5.0", "must lie between 30 and"),
        ("second_pole", "1e6", "leaves 13 degrees of phase margin at the minimum noise gain 1, must leave 15"),
    ],
)
def test_broken_figure(tmp_path: Path, key: str, value: str, complaint: str) -> None:
    file = own(tmp_path, changed(key, value))
    with pytest.raises(CatalogError, match=rf"mine\.toml: \[op_amps\.X1\] {key} = .*: {complaint}"):
        load_op_amps([file])


def test_gain_below_the_noise_gain(tmp_path: Path) -> None:
    text = changed("dc_gain", "900.0").replace("minimum_noise_gain = 1.0", "minimum_noise_gain = 100.0")
    with pytest.raises(CatalogError, match=r"dc_gain = 900\.0: must be at least ten times minimum_noise_gain = 100"):
        load_op_amps([own(tmp_path, text)])


@pytest.mark.parametrize(
    ("line", "complaint"),
    [
        ("gain_bandwith = 1e6", "gain_bandwith = .*unknown key; nearest: gain_bandwidth"),
        ("gbw = 1e6", "gbw = .*unknown key"),
        ('packages = { singel = "X1" }', "singel = .*unknown key; nearest: single"),
        ("packages = { single = 3 }", "single = 3: must be a text"),
        ("packages = {}", "must name a type to order"),
        ('packages = "X1"', "must be a table"),
        ('packages = { single = "X1 .end" }', "must match"),
        ("gain_bandwidth_spread = 30.0", "must lie between 0 and 0.95"),
        ("supply_rejection_positive = 1e6", "must lie between 0 and 200 dB"),
        ("stray_output_to_inverting = 0.1", "must lie between 0 and 2e-11 F"),
        ('note = "two\\nlines"', "must be one printable line"),
        ('provenance = { found = ["gain_bandwith"] }', "'gain_bandwith' is not a figure of the entry; nearest"),
    ],
)
def test_broken_optional_key(tmp_path: Path, line: str, complaint: str) -> None:
    with pytest.raises(CatalogError, match=rf"mine\.toml: \[op_amps\.X1.*{complaint}"):
        load_op_amps([own(tmp_path, OWN.format(name="X1") + line + "\n")])


REQUIRED = [key for key in tomllib.loads(OWN.format(name="X1"))["op_amps"]["X1"] if key != "second_pole"]


@pytest.mark.parametrize("key", REQUIRED)
def test_missing_figure(tmp_path: Path, key: str) -> None:
    text = re.sub(rf"(?m)^{key} = .*\n", "", OWN.format(name="X1"))
    with pytest.raises(CatalogError, match=rf"\[op_amps\.X1\] {key}: is missing; add it"):
        load_op_amps([own(tmp_path, text)])


@pytest.mark.parametrize(
    ("old", "new", "complaint"),
    [
        ("dc_gain_spread = 0.5\n", "", r"\[defaults\] dc_gain_spread: is missing"),
        ("[defaults]", "[default]", "unknown key; nearest: defaults"),
        ('derived = ["stray_inverting_to_ground"]', "", "says nothing of 'stray_inverting_to_ground'"),
        ('derived = ["second_pole"]\n', "", "says nothing of 'second_pole'"),
    ],
)
def test_broken_house_catalog(tmp_path: Path, old: str, new: str, complaint: str) -> None:
    text = catalog_path("op_amps.toml").read_text(encoding="utf-8")
    assert old in text
    with pytest.raises(CatalogError, match=complaint):
        read_house_catalog(own(tmp_path, text.replace(old, new, 1)))


def test_house_catalog_without_entries(tmp_path: Path) -> None:
    text = catalog_path("op_amps.toml").read_text(encoding="utf-8")
    with pytest.raises(CatalogError, match=r"holds no op amps; add a table \[op_amps\.TYPE\]"):
        read_house_catalog(own(tmp_path, text[: text.index("[op_amps.")]))
