"""The command line's contract: exit status, what goes where, help, JSON, logging, closed pipes."""

from __future__ import annotations

import json
import logging
import re
import subprocess
import tomllib
from pathlib import Path

import jsonschema
import pytest

from synth.folder import load_schema
from synth.spec import load_spec
from tests.api.made import COMMAND, PICKUP, PLAIN, changed, environment
from tests.cli.running import Outcome, nominal, process, refused, synth

MET = changed()
MISSED = changed(target="group_delay_variation = \"1 ns\"", end='[filter]\nsections = 1\n')
COLOUR = "\x1b"


@pytest.fixture
def asked(tmp_path: Path) -> Path:
    (tmp_path / "asked.toml").write_text(MET)
    return tmp_path / "asked.toml"


def narrow(text: str) -> bool:
    return all(len(line) <= 80 for line in text.splitlines())


# ------------------------------------------------------------------------------------------------ exit status


def test_status_0_where_all_is_met(asked: Path, capsys: pytest.CaptureFixture[str]) -> None:
    outcome = synth(capsys, "design", asked)
    assert (outcome.status, outcome.err) == (0, "")
    assert "NOT MET" not in outcome.out
    assert re.search(r"^verdict   meets all \d+ judged requirements", outcome.out, re.MULTILINE)


def test_status_1_where_something_is_missed_and_all_is_written(
    asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    asked.write_text(MISSED)
    outcome = synth(capsys, "design", asked, "--out", tmp_path / "made")
    assert (outcome.status, outcome.err) == (1, "")
    assert "verdict   misses group delay variation" in outcome.out
    assert "NOT MET" in outcome.out
    names = {"spec.toml", "design.json", "bom.csv", "chain.cir", "report.txt", "response.svg"}
    assert names <= {p.name for p in (tmp_path / "made").iterdir()}
    document = json.loads((tmp_path / "made" / "design.json").read_text())
    assert [r["name"] for r in document["requirements"] if r["met"] is False] == ["group delay variation"]
    assert synth(capsys, "check", tmp_path / "made").status == 1


def test_status_2_of_a_wrong_use(asked: Path, capsys: pytest.CaptureFixture[str]) -> None:
    for arguments in (("design",), ("check",), ("desing", asked), ("design", asked, "--nothing"), ("--nothing",)):
        outcome = synth(capsys, *arguments)
        assert outcome.status == 2, arguments
        assert outcome.out == ""
        assert "Usage: synth" in outcome.err
    for seed in ("-1", "x", "1.5"):
        outcome = synth(capsys, "design", asked, "--seed", seed)
        assert (outcome.status, outcome.out) == (2, "")
        assert "--seed" in outcome.err
    for builds in ("-1", "many"):
        outcome = synth(capsys, "design", asked, "--builds", builds)
        assert (outcome.status, outcome.out) == (2, "")
        assert "--builds" in outcome.err


def test_a_process_has_the_same_status(tmp_path: Path) -> None:
    (tmp_path / "asked.toml").write_text(MISSED)
    outcome = process("design", "asked.toml", "--out", "made", folder=tmp_path)
    assert (outcome.status, outcome.err) == (1, "")
    assert (tmp_path / "made" / "report.txt").read_text() == outcome.out


# ------------------------------------------------------------------------------------------------ what is printed


def test_design_prints_the_report_that_it_writes(
    asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    outcome = synth(capsys, "design", asked, "--out", tmp_path / "made")
    assert outcome.out == (tmp_path / "made" / "report.txt").read_text()


def test_check_prints_the_report_that_was_written(
    asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    made = synth(capsys, "design", asked, "--out", tmp_path / "made")
    checked = synth(capsys, "check", tmp_path / "made")
    assert checked == made


def test_nothing_is_written_without_out(asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    synth(capsys, "design", asked)
    assert [p.name for p in tmp_path.iterdir()] == ["asked.toml"]


def test_lines_fit_80_columns_whatever_the_texts_are(
    asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    unit = "furlongsPerFortnight"
    text = changed(
        ('"Channel"', '"' + "Messkanal für Ω und µV, " * 8 + '"'),
        ('"20 mV/mA"', f'"20 V/{unit}"'),
        ('"2 uA"', f'"2e-6 {unit}"'),
        ('"100 nA"', f'"1e-7 {unit}"'),
        end='[[interference]]\nkind = "square"\nfrequency = "7 kHz"\nvoltage = "3.3 V"\nthrough = "0.1 pF"\n',
    )
    asked.write_text(text, encoding="utf-8")
    made, checked = synth(capsys, "design", asked, "--out", tmp_path / "m"), synth(capsys, "check", tmp_path / "m")
    assert made.status in (0, 1), made.err
    for outcome in (made, checked):
        assert narrow(outcome.out)
        assert outcome.out.isascii()


def test_the_committed_example_fits_80_columns(capsys: pytest.CaptureFixture[str]) -> None:
    outcome = synth(capsys, "design", PICKUP)
    assert outcome.status == 0
    assert narrow(outcome.out)


def test_no_colour_into_a_pipe(tmp_path: Path) -> None:
    (tmp_path / "asked.toml").write_text(MET)
    for arguments in (("design", "asked.toml"), ("--help",), ("design", "no.toml"), ("new",), ("design",)):
        outcome = process(*arguments, folder=tmp_path, TERM="xterm-256color", COLORTERM="truecolor")
        assert COLOUR not in outcome.out + outcome.err, arguments


def test_a_control_character_never_reaches_the_terminal(tmp_path: Path) -> None:
    (tmp_path / "asked.toml").write_text(MET.replace('"Channel"', '"a\\u001b[31mb"'))
    outcome = process("design", "asked.toml", folder=tmp_path)
    assert COLOUR not in refused(outcome)


def test_json_is_the_content_of_design_json_and_fits_its_schema(
    asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    outcome = synth(capsys, "design", asked, "--json", "--out", tmp_path / "made")
    assert (outcome.status, outcome.err) == (0, "")
    assert outcome.out == (tmp_path / "made" / "design.json").read_text()
    document = json.loads(outcome.out, parse_constant=lambda word: pytest.fail(word))
    jsonschema.Draft202012Validator(load_schema()).validate(document)
    assert document["title"] == "Channel"
    checked = synth(capsys, "check", tmp_path / "made", "--json")
    assert checked.status == 0
    jsonschema.Draft202012Validator(load_schema()).validate(json.loads(checked.out))


def test_builds_give_ranges_and_a_yield(asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    outcome = synth(capsys, "design", asked, "--json", "--builds", "500", "--seed", "3", "--out", tmp_path / "made")
    document = json.loads(outcome.out)
    jsonschema.Draft202012Validator(load_schema()).validate(document)
    found = {r["name"]: r for r in document["requirements"]}
    assert found["yield"]["met"] is (outcome.status == 0)
    assert found["bandwidth"]["low"] < found["bandwidth"]["nominal"] < found["bandwidth"]["high"]
    checked = synth(capsys, "check", tmp_path / "made", "--json")
    again = {r["name"]: r for r in json.loads(checked.out)["requirements"]}
    for name, requirement in found.items():
        for key in ("low", "high", "nominal"):
            figure = requirement[key]
            assert again[name][key] == (None if figure is None else pytest.approx(figure, rel=1e-6)), (name, key)


def test_json_of_a_missed_spec_has_status_1(asked: Path, capsys: pytest.CaptureFixture[str]) -> None:
    asked.write_text(MISSED)
    outcome = synth(capsys, "design", asked, "--json")
    assert outcome.status == 1
    assert any(r["met"] is False for r in json.loads(outcome.out)["requirements"])


def test_check_says_on_stderr_that_parts_were_edited(
    asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    synth(capsys, "design", asked, "--out", tmp_path / "made")
    path = tmp_path / "made" / "design.json"
    document = json.loads(path.read_text())
    resistor = next(p for p in document["parts"] if "bandwidth" in p["role"])
    resistor["value"] /= 2
    path.write_text(json.dumps(document))
    outcome = synth(capsys, "check", tmp_path / "made", "--json")
    assert outcome.err == "parts were edited by hand since the design was written\n"
    assert outcome.status == 1
    assert {r["name"]: r["met"] for r in json.loads(outcome.out)["requirements"]}["bandwidth"] is False
    assert json.loads(path.read_text()) == document  # check only reads


# ------------------------------------------------------------------------------------------------ help, log


@pytest.mark.parametrize("command", [(), ("new",), ("design",), ("check",)])
@pytest.mark.parametrize("option", ["--help", "-h"])
def test_help(command: tuple[str, ...], option: str, capsys: pytest.CaptureFixture[str]) -> None:
    outcome = synth(capsys, *command, option)
    assert (outcome.status, outcome.err) == (0, "")
    assert outcome.out.startswith(" ".join(("Usage: synth", *command)))
    assert narrow(outcome.out)
    design = ("--out", "--builds", "--seed", "--force", "--json")
    options = {(): ("--verbose",), ("new",): ("--title", "--out"), ("design",): design, ("check",): ("--json",)}
    for word in options[command]:
        assert word in outcome.out


def test_help_names_every_command(capsys: pytest.CaptureFixture[str]) -> None:
    outcome = synth(capsys, "--help")
    for command in ("new", "design", "check"):
        assert re.search(rf"^  {command}  ", outcome.out, re.MULTILINE)


def test_verbose_logs_to_stderr_only(tmp_path: Path) -> None:
    (tmp_path / "asked.toml").write_text(MET)
    quiet = process("design", "asked.toml", folder=tmp_path)
    loud = process("--verbose", "design", "asked.toml", folder=tmp_path)
    assert quiet.err == ""
    assert (loud.status, loud.out) == (quiet.status, quiet.out)
    assert loud.err.startswith("synth.")
    assert "chosen: " in loud.err


def test_design_logs_what_it_chose(
    asked: Path, capsys: pytest.CaptureFixture[str], caplog: pytest.LogCaptureFixture
) -> None:
    with caplog.at_level(logging.INFO, "synth"):
        synth(capsys, "design", asked)
    assert any("chosen: " in record.getMessage() for record in caplog.records)


# ------------------------------------------------------------------------------------------------ closed and full


def piped(folder: Path, *arguments: str) -> tuple[int, str]:
    """The command with a reader that has gone; its status and what it says on stderr."""
    with subprocess.Popen(
        [*COMMAND, *nominal(arguments)],
        cwd=folder,
        env=environment(),
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    ) as running:
        assert running.stdout is not None
        assert running.stderr is not None
        running.stdout.close()
        errors = running.stderr.read()
        return running.wait(120), errors


def test_a_closed_pipe_leaves_no_traceback(tmp_path: Path) -> None:
    (tmp_path / "asked.toml").write_text(MET)
    for arguments in (("design", "asked.toml"), ("design", "asked.toml", "--json"), ("new",), ("--help",)):
        status, errors = piped(tmp_path, *arguments)
        assert errors == "", arguments
        assert status != 2, arguments  # nothing was wrong with the input


def test_a_reader_that_takes_one_line(tmp_path: Path) -> None:
    (tmp_path / "asked.toml").write_text(MET)
    done = subprocess.run(
        ["sh", "-c", '"$@" | head -1', "sh", *COMMAND, "design", "asked.toml", "--json", "--builds", "0"],
        cwd=tmp_path,
        env=environment(),
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
    )
    assert (done.stdout, done.stderr) == ("{\n", "")


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="no device that is always full")
def test_a_full_device_for_the_output(tmp_path: Path) -> None:
    (tmp_path / "asked.toml").write_text(MET)
    with open("/dev/full", "w") as full:
        done = subprocess.run(
            [*COMMAND, "design", "asked.toml", "--builds", "0"],
            cwd=tmp_path,
            env=environment(),
            stdout=full,
            stderr=subprocess.PIPE,
            text=True,
            timeout=120,
            check=False,
        )
    assert refused(Outcome(done.returncode, "", done.stderr)) == "the output cannot be written: No space left on device"


def test_titles_of_other_scripts_print_where_the_terminal_is_ascii(tmp_path: Path) -> None:
    (tmp_path / "asked.toml").write_text(PLAIN.replace('"Channel"', '"Kanal für 測定 µV"'), encoding="utf-8")
    outcome = process("design", "asked.toml", "--out", "made", folder=tmp_path, PYTHONIOENCODING="ascii", LC_ALL="C")
    assert (outcome.status, outcome.err) == (0, "")
    assert load_spec(tmp_path / "made" / "spec.toml").title == "Kanal für 測定 µV"


def test_a_refusal_prints_where_the_terminal_is_ascii(tmp_path: Path) -> None:
    (tmp_path / "asked.toml").write_text(PLAIN.replace('"3 kHz"', '"3 µ測定"'), encoding="utf-8")
    outcome = process("design", "asked.toml", folder=tmp_path, PYTHONIOENCODING="ascii", LC_ALL="C")
    refused(outcome, "asked.toml, line 5: target.bandwidth = ")


def test_a_starter_with_other_scripts_prints_where_the_terminal_is_ascii(tmp_path: Path) -> None:
    outcome = process("new", "--title", "µV", folder=tmp_path, PYTHONIOENCODING="ascii", PYTHONUTF8="1")
    assert "Traceback" not in outcome.err
    if outcome.status == 0:
        assert tomllib.loads(outcome.out)["title"] == "µV"
