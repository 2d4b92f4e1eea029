"""`synth new`: what it writes can be designed as it stands, with every option filled in."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pytest

from synth.spec import load_spec
from synth.spec.starter import GIVEN
from tests.cli.running import process, refused, synth

# option: value, and where it must show up
OPTIONS = {
    "title": ("Echo of a fish finder", ("title",)),
    "center-frequency": ("40 kHz", ("target", "center_frequency")),
    "bandwidth": ("4 kHz", ("target", "bandwidth")),
    "full-scale": ("1 uA", ("target", "full_scale")),
    "smallest": ("200 nA", ("target", "smallest")),
    "output": ("0.7 V", ("target", "output")),
    "gain": ("84 dB", ("target", "gain")),
    "accuracy": ("2 %", ("target", "accuracy")),
    "signal-to-noise": ("18 dB", ("target", "signal_to_noise")),
    "scale": ("30 mV/mA", ("sensor", "scale")),
    "resistance": ("50 ohm", ("sensor", "resistance")),
    "inductance": ("3 uH", ("sensor", "inductance")),
    "capacitance": ("150 pF", ("sensor", "capacitance")),
    "corner": ("20 kHz", ("sensor", "rolloff")),
    "positive": ("6 V", ("supply", "positive")),
    "negative": ("-6 V", ("supply", "negative")),
}


def test_every_option_is_tried() -> None:
    assert {option.replace("-", "_") for option in OPTIONS} == set(GIVEN)


def arguments(option: str) -> list[str]:
    """The option alone, with what it cannot stand without."""
    given = [f"--{option}={OPTIONS[option][0]}"]
    if option == "scale":
        given.append("--full-scale=2 uA")  # of an input that is not the invented coil's
    if option == "positive":
        given.append("--negative=-6 V")
    return given


@pytest.mark.parametrize("option", OPTIONS)
def test_an_option_is_filled_in_and_the_spec_is_designed(
    option: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "mine.toml"
    outcome = synth(capsys, "new", "--out", path, *arguments(option))
    assert (outcome.status, outcome.out, outcome.err) == (0, "", "")
    value, where = OPTIONS[option]
    found = tomllib.loads(path.read_text(encoding="utf-8"))
    for key in where:
        found = found[key]
    assert found == value or found[0]["corner"] == value
    designed = synth(capsys, "design", path)
    assert designed.status in (0, 1), designed.err


def test_all_options_at_once(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "mine.toml"
    given = [f"--{option}={value}" for option, (value, _) in OPTIONS.items() if option != "gain"]
    assert synth(capsys, "new", "--out", path, *given).status == 0
    assert synth(capsys, "design", path).status in (0, 1)


def test_the_starter_meets_its_own_spec(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "mine.toml"
    assert synth(capsys, "new", "--out", path).status == 0
    assert synth(capsys, "design", path, "--out", tmp_path / "made").status == 0
    assert load_spec(tmp_path / "made" / "spec.toml") == load_spec(path)


def test_to_the_terminal_it_is_the_same_text(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "mine.toml"
    synth(capsys, "new", "--out", path, "--bandwidth", "2 kHz")
    outcome = synth(capsys, "new", "--bandwidth", "2 kHz")
    assert (outcome.status, outcome.out, outcome.err) == (0, path.read_text(encoding="utf-8"), "")


def test_a_file_that_is_there_is_kept(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "mine.toml"
    path.write_text("precious")
    refused(synth(capsys, "new", "--out", path), "mine.toml: is there already", "name another file or remove it")
    refused(synth(capsys, "new", "--out", tmp_path), "is there already")
    assert path.read_text() == "precious"


def test_a_file_that_cannot_be_written(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    refused(synth(capsys, "new", "--out", tmp_path / "none" / "mine.toml"), "cannot be written", "No such file")
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("given", "words"),
    [
        (["--center-frequency=-3 Hz"], ("center_frequency", "-3 Hz", "above zero")),
        (["--center-frequency=60 kg"], ("center_frequency", "60 kg", "expected Hz")),
        (["--bandwidth=200 kHz"], ("target.bandwidth", "200 kHz", "at most twice", "120 kHz")),
        (["--full-scale=1 nA", "--smallest=2 nA"], ("target.full_scale", "target.smallest")),
        (["--output=1 V", "--gain=60 dB"], ("target.gain", "cannot stand beside target.output")),
        (["--title=a\nb"], ("title", "one line", "U+000A")),
        (["--title="], ("title", "must not be empty")),
        (["--scale=7"], ("scale",)),
        (["--negative=5 V"], ("supply.negative", "below zero")),
        (["--accuracy=300 %"], ("target.accuracy", "below 100 %")),
        (["--smallest=nan"], ("smallest",)),
    ],
)
def test_an_option_that_cannot_be_used(
    given: list[str], words: tuple[str, ...], tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    refused(synth(capsys, "new", "--out", tmp_path / "mine.toml", *given), *words)
    assert list(tmp_path.iterdir()) == []


def test_a_title_cannot_break_out_of_its_line(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    title = '" \\ \'\'\' # [target] = µ $output ${gain_} {x}'
    path = tmp_path / "mine.toml"
    assert synth(capsys, "new", "--out", path, f"--title={title}").status == 0
    assert load_spec(path).title == title
    assert synth(capsys, "design", path).status == 0


def test_the_readme_s_three_lines(tmp_path: Path) -> None:
    new = ("new", "--center-frequency", "60kHz", "--bandwidth", "2 kHz", "--out", "mine.toml")
    assert process(*new, folder=tmp_path).status == 0
    design = process("design", "mine.toml", "--out", "mine", folder=tmp_path)
    assert design.status in (0, 1)
    assert process("check", "mine", folder=tmp_path) == design
