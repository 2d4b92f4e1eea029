"""`synth parts` and `synth bom`: tables, JSON, checks and merged bills from the command line."""

from __future__ import annotations

import csv
import io
import json
from pathlib import Path

import pytest

from synth import folder
from synth.output.bill import bill_csv
from tests.cli.running import refused, synth
from tests.support.records import record

Capture = pytest.CaptureFixture[str]
MINE = """\
[crystals."57.600 kHz"]
frequency = 57.6e3
series_resistance = 40e3
motional_capacitance = 2.5e-15
shunt_capacitance = 1.2e-12
load_capacitance = 12.5e-12
drive_limit = 500e-9
source = "Measured"
"""


def made(path: Path) -> Path:
    """A design folder written by hand."""
    files = {"spec.toml": b"", "design.json": folder.to_json(record()).encode()}
    folder.write_folder(path, files, False)
    return path


def fits(text: str) -> bool:
    return text.isascii() and all(len(line) <= 80 for line in text.splitlines())


@pytest.mark.parametrize(
    "arguments",
    [
        (),
        ("--min-gbw", "10MHz"),
        ("--max-noise-at", "100kHz"),
        ("--min-gbw", "10MHz", "--noise-at", "100 kHz", "--max-noise", "5nV", "--supply", "10V"),
        ("--technology", "cmos"),
        ("--kind", "resistors"),
        ("--kind", "capacitors"),
        ("--kind", "crystals"),
        ("--kind", "op-amps"),
        ("LM358",),
        ("opa211",),
        ("C0G",),
        ("thick film",),
        ("32.768 kHz",),
        ("--technology", "jfet", "--min-gbw", "100 GHz"),
    ],
)
def test_parts_fit_a_terminal(capsys: Capture, arguments: tuple[str, ...]) -> None:
    shown = synth(capsys, "parts", *arguments)
    assert (shown.status, shown.err) == (0, "")
    assert fits(shown.out)


def test_parts_sorted_by_noise_at_a_frequency(capsys: Capture) -> None:
    both = [synth(capsys, "parts", option, "100kHz").out for option in ("--max-noise-at", "--noise-at")]
    assert both[0] == both[1]
    assert both[0].splitlines()[0].endswith("quietest first; en, in: noise per root hertz, at 100 kHz")
    listed = json.loads(synth(capsys, "parts", "--max-noise-at", "100kHz", "--json").out)
    types = [line.split()[0] for line in both[0].splitlines()[2:]]
    assert types == [one["type"] for one in listed]
    noise = [one["voltage_noise_density"] for one in listed]
    assert noise == sorted(noise)
    assert {one["noise_frequency"] for one in listed} == {100e3}


def test_parts_that_fit_are_what_was_asked(capsys: Capture) -> None:
    asked = ("--min-gbw", "10MHz", "--supply", "5V", "--max-noise", "5nV", "--technology", "bipolar", "--json")
    listed = json.loads(synth(capsys, "parts", *asked).out)
    assert listed
    for one in listed:
        assert one["gain_bandwidth"] >= 10e6
        assert one["supply_minimum"] <= 5 <= one["supply_maximum"]
        assert one["voltage_noise"] <= 5e-9
        assert one["technology"] == "bipolar"
    assert json.loads(synth(capsys, "parts", "--min-gbw", "100 GHz", "--json").out) == []
    assert "no op amp of the catalogs fits all" in synth(capsys, "parts", "--min-gbw", "100 GHz").out


def test_a_part_whole(capsys: Capture) -> None:
    shown = synth(capsys, "parts", "lm324").out
    assert shown.startswith("LM358, op amp\n")
    for line in ("gain_bandwidth                    1 MHz", "macromodel", "uncertain", "memory", "derived"):
        assert line in shown
    content = json.loads(synth(capsys, "parts", "LM358", "--json").out)
    assert content["figures"]["gain_bandwidth"] == {"value": 1e6, "unit": "Hz", "provenance": "found"}


def test_a_catalog_of_ones_own(capsys: Capture, tmp_path: Path) -> None:
    mine = tmp_path / "mine.toml"
    mine.write_text(MINE, encoding="utf-8")
    shown = synth(capsys, "parts", "57.600 kHz", "--catalog", mine)
    assert "frequency" in shown.out
    assert "uncertain" in shown.out
    assert "57.600 kHz" in synth(capsys, "parts", "--kind", "crystals", "--catalog", mine).out
    listed = json.loads(synth(capsys, "parts", "--kind", "crystals", "--catalog", mine, "--json").out)
    assert listed[-1]["name"] == "57.600 kHz"
    good = synth(capsys, "parts", "--check", mine)
    assert (good.status, good.err) == (0, "")
    assert good.out == f"{mine}: can be used\n  crystals: 57.600 kHz\n"


def test_a_catalog_with_mistakes_tells_all_of_them(capsys: Capture, tmp_path: Path) -> None:
    mine = tmp_path / "mine.toml"
    mine.write_text(MINE.replace("40e3", '"40 kohm"').replace("2.5e-15", "2.5") + "colour = 3\n", encoding="utf-8")
    bad = synth(capsys, "parts", "--check", mine)
    assert (bad.status, bad.out) == (2, "")
    lines = bad.err.splitlines()
    assert [line.partition(": ")[0] for line in lines] == [f"{mine}, line {k}" for k in (3, 4, 9)] + [str(mine)]
    assert lines[0].endswith("must be a plain number between 0.1 and 1e+07 ohm; write it without quotes and unit")
    assert lines[-1].endswith("3 problems")
    as_json = synth(capsys, "parts", "--check", mine, "--json")
    assert (as_json.status, as_json.err) == (2, "")
    assert [one["key"] for one in json.loads(as_json.out)["problems"]] == [
        "series_resistance",
        "motional_capacitance",
        "colour",
    ]


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("NE5543",), ('"NE5543"', "nearest: NE5534")),
        (("--min-gbw", "10 kV"), ("min-gbw", "expected Hz")),
        (("--technology", "valve"), ("technology", "bipolar, JFET, CMOS")),
        (("--kind", "valves"), ("valves", "op-amps, resistors")),
        (("--kind", "crystals", "--supply", "5V"), ("only op amps are chosen by their figures",)),
        (("--catalog", "none.toml"), ("none.toml", "cannot be read")),
    ],
)
def test_parts_that_cannot_be_shown(capsys: Capture, arguments: tuple[str, ...], words: tuple[str, ...]) -> None:
    refused(synth(capsys, "parts", *arguments), *words)


def test_bom_of_one_folder_is_its_bill(capsys: Capture, tmp_path: Path) -> None:
    shown = synth(capsys, "bom", made(tmp_path / "demo"))
    assert (shown.status, shown.err) == (0, "")
    assert shown.out == bill_csv(record())


def test_bom_of_two_folders_and_ten_boards(capsys: Capture, tmp_path: Path) -> None:
    folders = [made(tmp_path / name) for name in ("one", "two")]
    rows = list(csv.DictReader(io.StringIO(synth(capsys, "bom", *folders, "--boards", 10).out)))
    for row in rows:
        refs = row["reference designators"].split()
        assert {ref.partition("/")[0] for ref in refs} == {"one", "two"}
        assert int(row["quantity"]) == 10 * len(refs)
    content = json.loads(synth(capsys, "bom", *folders, "--boards", 10, "--json").out)
    assert (content["folders"], content["boards"]) == (["one", "two"], 10)
    assert [line["quantity"] for line in content["lines"]] == [int(row["quantity"]) for row in rows]


def test_bom_takes_values_as_they_were_edited(capsys: Capture, tmp_path: Path) -> None:
    path = made(tmp_path / "demo") / "design.json"
    content = json.loads(path.read_text(encoding="utf-8"))
    part = next(part for part in content["parts"] if part["ref"] == "R1")
    part["value"], part["code"] = 4700.0, "4K7"
    path.write_text(json.dumps(content), encoding="utf-8")
    rows = csv.DictReader(io.StringIO(synth(capsys, "bom", path.parent).out))
    assert next(row["value"] for row in rows if "R1" in row["reference designators"].split()) == "4.7 kohm"


def test_bom_that_cannot_be_made(capsys: Capture, tmp_path: Path) -> None:
    demo = made(tmp_path / "demo")
    refused(synth(capsys, "bom", tmp_path / "none"), "none")
    refused(synth(capsys, "bom", demo, demo), "is named twice")
    assert synth(capsys, "bom", demo, "--boards", 0).status == 2
    assert synth(capsys, "bom").status == 2
