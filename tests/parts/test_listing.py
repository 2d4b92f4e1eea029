"""Parts looked up, catalogs checked whole, and the examples of the catalogs' document."""

from __future__ import annotations

import copy
import random
import re
import tomllib
from pathlib import Path

import pytest
import tomli_w

from synth.errors import CatalogError
from synth.parts import op_amps
from synth.parts.catalog import PROVENANCE
from synth.parts.check import CatalogReport, check_catalog
from synth.parts.crystals import load_crystals
from synth.parts.kinds import dielectrics, resistor_kinds
from synth.parts.listing import (
    KINDS,
    OP_AMP_FIGURES,
    OpAmpQuery,
    find_sheet,
    list_op_amps,
    op_amp_query,
    sheets,
)
from synth.parts.locate import catalog_path
from synth.parts.stock import load_drawer

DOCUMENT = Path(__file__).resolve().parents[2] / "catalogs" / "CATALOGS.md"
BLOCKS = re.findall(r"^```(toml|csv)\n(.*?)^```$", DOCUMENT.read_text(encoding="utf-8"), re.DOTALL | re.MULTILINE)
EXAMPLES = [text for language, text in BLOCKS if language == "toml"]


def checked(tmp_path: Path, text: str) -> CatalogReport:
    file = tmp_path / "mine.toml"
    file.write_text(text, encoding="utf-8")
    return check_catalog(file)


def op_amp_example(**changes: object) -> dict[str, object]:
    entry: dict[str, object] = tomllib.loads(EXAMPLES[0])["op_amps"]["MYOPAMP"]
    return {key: value for key, value in {**entry, **changes}.items() if value is not None}


def test_query_from_texts() -> None:
    query = op_amp_query("10MHz", "100 kHz", "5nV", "5V", "jfet")
    assert query == OpAmpQuery(10e6, 100e3, 5e-9, 5.0, "JFET")
    assert op_amp_query() == OpAmpQuery()


@pytest.mark.parametrize(
    ("asked", "complaint"),
    [
        ({"min_gbw": "10 V"}, 'min-gbw "10 V": wrong unit "V"; expected Hz'),
        ({"noise_at": "0 Hz"}, 'noise-at "0 Hz": must be above 0 Hz'),
        ({"max_noise": "-5 nV"}, "max-noise .*must be above 0"),
        ({"supply": "five"}, 'supply "five": does not start with a number'),
        ({"technology": "cmoss"}, 'technology "cmoss": must be one of bipolar, JFET, CMOS; nearest: CMOS'),
    ],
)
def test_query_that_cannot_be_used(asked: dict[str, str], complaint: str) -> None:
    with pytest.raises(CatalogError, match=complaint):
        op_amp_query(**asked)


def test_op_amps_by_what_is_asked() -> None:
    catalog = op_amps.load_op_amps()
    assert len(list_op_amps(OpAmpQuery())) == len(catalog)
    found = list_op_amps(OpAmpQuery(10e6, 1e3, 5e-9, 10.0, "bipolar"))
    types = {line.entry.op_amp.type for line in found}
    for name, entry in catalog.items():
        one = entry.op_amp
        quiet = one.voltage_noise**2 * (1 + one.voltage_noise_corner / 1e3) <= (5e-9) ** 2
        fits = one.gain_bandwidth >= 10e6 and one.supply_minimum <= 10 <= one.supply_maximum
        assert (name in types) == (quiet and fits and one.technology == "bipolar")
    densities = [line.voltage_noise for line in found]
    assert densities == sorted(densities)
    assert all(line.voltage_noise > line.entry.op_amp.voltage_noise for line in found)
    slowest = [line.entry.op_amp.gain_bandwidth for line in list_op_amps(OpAmpQuery())]
    assert slowest == sorted(slowest)


def test_noise_at_a_frequency_is_twice_the_power_at_the_corner() -> None:
    one = find_entry("LM4562")
    (line,) = list_op_amps(OpAmpQuery(frequency=one.op_amp.voltage_noise_corner), {"LM4562": one})
    assert line.voltage_noise == pytest.approx(2**0.5 * one.op_amp.voltage_noise, rel=1e-12)


def test_current_noise_of_a_fet_input_grows_with_frequency() -> None:
    one = find_entry("OPA657")
    (low,), (high,) = (list_op_amps(OpAmpQuery(frequency=f), {"OPA657": one}) for f in (1e4, 1e8))
    assert high.current_noise == pytest.approx(one.op_amp.current_noise_slope * 1e8, rel=1e-3)
    assert high.current_noise > 10 * low.current_noise


def find_entry(name: str) -> op_amps.OpAmpEntry:
    return op_amps.load_op_amps()[name]


def test_every_figure_of_a_part_has_a_value_and_a_provenance() -> None:
    with catalog_path("op_amps.toml").open("rb") as stream:
        entry = tomllib.load(stream)["op_amps"]["LM358"]
    sheet = find_sheet("lm324")  # a package of it
    assert sheet.name == "LM358"
    figures = {figure.name: figure for figure in sheet.figures}
    for key in set(entry) - {"packages", "technology", "provenance", "source", "note"}:
        assert figures[key].value == entry[key]
        tag = next(tag for tag in PROVENANCE if key in entry["provenance"].get(tag, ()))
        assert figures[key].provenance == tag
    assert figures["packages"].value == "single LM321, dual LM358, quad LM324"
    assert figures["dc_gain_spread"].provenance == "uncertain"  # a default of the catalog
    assert set(op_amps._FIGURES) == set(OP_AMP_FIGURES)


@pytest.mark.parametrize("kind", KINDS)
def test_sheets_of_every_kind(kind: str) -> None:
    catalogs = (op_amps.load_op_amps(), resistor_kinds(), dielectrics(), load_crystals())
    listed = sheets(kind)
    assert [sheet.name for sheet in listed] == list(catalogs[KINDS.index(kind)])
    for sheet in listed:
        assert sheet.source
        for figure in sheet.figures:
            assert figure.provenance in (*PROVENANCE, "not given", "")
        assert find_sheet(sheet.name.upper(), kind) == find_sheet(sheet.name) == sheet


def test_a_part_that_no_catalog_has() -> None:
    with pytest.raises(CatalogError, match=r'part "OPA1621": in no catalog; nearest: .*OPA1612; correct the name'):
        find_sheet("OPA1621")
    with pytest.raises(CatalogError, match='part "C0G": in no catalog'):
        find_sheet("C0G", "resistors")
    with pytest.raises(CatalogError, match=r'kind "resistor": must be one of .*; nearest: resistors'):
        sheets("resistor")


@pytest.mark.parametrize("text", EXAMPLES)
def test_every_example_of_the_document_can_be_used(tmp_path: Path, text: str) -> None:
    report = checked(tmp_path, text)
    assert report.problems == ()
    ((table, (name,)),) = report.holds.items()
    assert report.replaces == {table: ()}
    assert find_sheet(name, extra=[tmp_path / "mine.toml"]).name == name


def test_the_document_has_an_example_and_every_key_of_each_kind(tmp_path: Path) -> None:
    text = DOCUMENT.read_text(encoding="utf-8")
    assert [next(iter(set(tomllib.loads(one)) - {"format"})) for one in EXAMPLES] == [
        "op_amps",
        "resistors",
        "capacitors",
        "crystals",
    ]
    explained = set(re.findall(r"`([a-z_]+)`", text))
    for name in ("op_amps", "resistors", "capacitors", "crystals"):
        content = tomllib.loads(catalog_path(f"{name}.toml").read_text(encoding="utf-8"))
        keys = {key for entry in content[name].values() for key in entry}
        assert keys - explained - {"provenance"} == set()
    assert set(op_amps._FIGURES) - explained == set()
    assert set(PROVENANCE) - explained == set()
    (drawer,) = (block for language, block in BLOCKS if language == "csv")
    file = tmp_path / "drawer.csv"
    file.write_text(drawer, encoding="utf-8")
    assert len(load_drawer(file).items) == 5


def test_the_second_pole_of_the_example_is_what_its_comment_says() -> None:
    margin = op_amps.phase_margin(20e6, 500e3, 40e6, 1.0)
    assert f"phase margin of {margin:.0f} degrees" in EXAMPLES[0]


@pytest.mark.parametrize("name", ["op_amps", "resistors", "capacitors", "crystals"])
def test_the_programs_own_catalogs_have_no_problems(name: str) -> None:
    report = check_catalog(catalog_path(f"{name}.toml"))
    assert report.problems == ()
    assert report.holds[name]


WRONG = """\
format = 1
colour = 3
[op_amps.X1]
technology = "bipolr"
dc_gain = -3
minimum_noise_gain = 1
output_resistance = "40 ohm"
input_capacitance_differential = 1e-12
input_capacitance_common = 2e-12
voltage_noise = 1e-9
voltage_noise_corner = 50
current_noise = 1e-12
current_noise_corner = 50
slew_rate = 20e6
output_current = 0.02
swing_headroom_high = 4
swing_headroom_low = 4
common_mode_headroom_high = 3
common_mode_headroom_low = 3
offset_voltage = 2e-3
offset_voltage_max = 1e-3
bias_current = 1e-9
supply_minimum = 5
supply_maximum = 36
supply_current = 1e-3
packages = { dul = "X1D" }
[op_amps.X1.provenance]
found = ["slew_rate", "dc_gain", "nonsense",
   "dc_gain"]
memori = ["bias_current"]
[resistors.mine]
default_tolerance = 0.02
default_series = "E96"
temperature_coefficients = [1e-4, 5]
useful_range = [1e6, 10]
default_size = "0603"
excess_noise = [[1e4, 1e-7], [1e3, 1e-7]]
source = ""
[[resistors.mine.classes]]
tolerance = 0.01
series = ["E24", "E95"]
highest = { 0805 = 1e6 }
[[resistors.mine.sizes]]
size = "0402"
power = 0.1
range = [10, 1e6]
parallel_capacitance = 1
[capacitors]
Y = 3
[crystals."=1+1"]
frequency = 32e3
series_resistance = 1
motional_capacitance = 3e-15
shunt_capacitance = 1.4e-12
load_capacitance = 12.5e-12
drive_limit = 1e-6
source = "none"
"""


def test_every_problem_of_a_file_is_told_once_with_its_line(tmp_path: Path) -> None:
    report = checked(tmp_path, WRONG)
    found = [(one.line, one.entry, one.key) for one in report.problems]
    amp, kind, crystal = "op_amps.X1", "resistors.mine", "crystals.=1+1"
    assert found == [
        (2, "", "colour"),
        (3, amp, "gain_bandwidth"),
        (3, amp, "source"),
        (4, amp, "technology"),
        (5, amp, "dc_gain"),
        (7, amp, "output_resistance"),
        (16, amp, "swing_headroom_high"),
        (18, amp, "common_mode_headroom_high"),
        (20, amp, "offset_voltage"),
        (26, amp, "dul"),
        (28, amp, "found"),
        (28, amp, "found"),
        (30, amp, "memori"),
        (31, kind, "temperature_coefficient_common_share"),
        (32, kind, "default_tolerance"),
        (34, kind, "temperature_coefficients"),
        (35, kind, "useful_range"),
        (36, kind, "default_size"),
        (37, kind, "excess_noise"),
        (38, kind, "source"),
        (41, kind, "series"),
        (42, kind, "0805"),
        (47, kind, "parallel_capacitance"),
        (49, "capacitors", "Y"),
        (50, "crystals", None),
        (52, crystal, "series_resistance"),
    ]
    for one in report.problems:
        assert one.text.startswith(f"{tmp_path / 'mine.toml'}, line {one.line}: ")
        assert one.text.isprintable()


@pytest.mark.parametrize(
    ("content", "line", "complaint"),
    [
        (b"[op_amps.X\n", 1, "is not TOML"),
        (b"format = 1\n\nformat = 1\n", 3, "is not TOML"),
        (b"\xff", None, "is not UTF-8"),
        (b"format = 2\n", 1, "is not the format this program reads"),
        (b'format = "1"\n', 1, "must be a plain number"),
        (b"op_amps = 3\n", 1, r"op_amps = 3: must be a table; write \[op_amps\]"),
        (b"a = " + b"[" * 5000, None, "is not TOML"),
    ],
)
def test_a_file_that_is_no_catalog_has_one_problem(
    tmp_path: Path, content: bytes, line: int | None, complaint: str
) -> None:
    file = tmp_path / "mine.toml"
    file.write_bytes(content)
    (problem,) = check_catalog(file).problems
    assert re.search(complaint, problem.text)
    assert problem.line == line


def test_a_file_that_is_not_there(tmp_path: Path) -> None:
    (problem,) = check_catalog(tmp_path / "none.toml").problems
    assert "cannot be read (No such file" in problem.text


def test_an_entry_that_takes_the_place_of_one_of_the_program(tmp_path: Path) -> None:
    report = checked(tmp_path, tomli_w.dumps({"op_amps": {"LM358": op_amp_example(), "NEW": op_amp_example()}}))
    assert report.problems == ()
    assert report.holds == {"op_amps": ("LM358", "NEW")}
    assert report.replaces == {"op_amps": ("LM358",)}
    assert checked(tmp_path, "format = 1\n").holds == {}


def test_what_follows_from_another_mistake_is_not_told(tmp_path: Path) -> None:
    text = EXAMPLES[1].replace("tolerance = 0.01\nseries", 'tolerance = "1 %"\nseries')
    (problem,) = checked(tmp_path, text).problems
    assert (problem.entry, problem.key) == ("resistors.metal film", "tolerance")
    (problem,) = checked(tmp_path, EXAMPLES[1].replace('size = "0207"\npower', 'size = ""\npower')).problems
    assert problem.key == "size"
    (problem,) = checked(tmp_path, EXAMPLES[3].replace("2.5e-15", "2.5")).problems
    assert problem.key == "motional_capacitance"


def test_the_check_agrees_with_the_readers_on_files_spoilt_at_random(tmp_path: Path) -> None:
    """A file has problems exactly where the program refuses it, and the first that the reader tells is among them."""
    chance = random.Random(7)
    rubbish: tuple[object, ...] = (-1, 0, 3, 1e30, "", "x", "5 V", [], [1, 2], ["x"], {}, {"a": 1}, True, float("nan"))
    tables = [tomllib.loads(text) for text in EXAMPLES]
    refused = 0
    for _ in range(400):
        content = copy.deepcopy(chance.choice(tables))
        ((table, section),) = ((key, value) for key, value in content.items() if key != "format")
        (entry,) = section.values()
        for _ in range(chance.randint(0, 3)):
            place = entry
            key = chance.choice([*entry])
            if (
                isinstance(entry[key], list)
                and entry[key]
                and isinstance(entry[key][0], dict)
                and chance.random() < 0.7
            ):
                place = entry[key][0]
                key = chance.choice([*place])
            if chance.random() < 0.3 and len(place) > 1:
                del place[key]
            else:
                place[key] = chance.choice(rubbish)
        report = checked(tmp_path, tomli_w.dumps(content))
        read = {
            "op_amps": op_amps.load_op_amps,
            "resistors": resistor_kinds,
            "capacitors": dielectrics,
            "crystals": load_crystals,
        }[table]
        if report.problems:
            refused += 1
            with pytest.raises(CatalogError) as caught:
                read([tmp_path / "mine.toml"])
            first = str(caught.value).removeprefix(f"{tmp_path / 'mine.toml'}: ")
            assert any(one.text.endswith(first) for one in report.problems), (first, report.problems)
        else:
            read([tmp_path / "mine.toml"])
    assert 200 < refused < 380
