"""The nearest value that would work, named by a refusal, does work; and it is no farther off than it must be."""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pytest

from synth.quantity import parse
from tests.api.made import changed
from tests.cli.running import refused, synth

ONE = "[filter]\nsections = 1\n"  # enough to see what is refused, and quick


@dataclass(frozen=True)
class Case:
    """What is asked; the message's words, the value in its group; the spec with a value; its unit, and too far a one.

    `beyond` is a factor on the value, with which it is refused again; None where a value beyond may work as well.
    """

    asked: str
    pattern: str
    spec: Callable[[str], str]
    unit: str
    beyond: float | None


def with_output(value: str) -> str:
    return changed(('"1 V"', f'"{value}"'), end=ONE)


def with_gain(value: str) -> str:
    return changed(('output = "1 V"', f'gain = "{value}"'))


def with_supply(value: str, output: str = "1 V") -> str:
    half = parse(value, "V") / 2
    return changed(('"5 V"', f'"{half!r} V"'), ('"-5 V"', f'"-{half!r} V"'), ('"1 V"', f'"{output}"'), end=ONE)


def with_snr(value: str, smallest: str = "100 nA") -> str:
    return changed(('"100 nA"', f'"{smallest}"'), target=f'signal_to_noise = "{value}"', end=ONE)


def with_bandwidth(value: str, end: str = "") -> str:
    return changed(('"3 kHz"', f'"{value}"'), end=end)


def with_reject(value: str) -> str:
    reject = f'reject = [{{ frequency = "120 kHz", by = "{value}" }}]'
    return changed(target=reject, end='[filter]\nfamily = "synchronous"\n')


def tiny(value: str) -> str:
    """So small a signal that its gain is the trouble; the output is what is asked."""
    return changed(('"2 uA"', '"1 fA"'), ('"100 nA"', '"0.1 fA"'), ('"1 V"', f'"{value}"'))


def tiny_gain(value: str) -> str:
    return tiny("1 V").replace('output = "1 V"', f'gain = "{value}"')


def slow(value: str) -> str:
    large = (('"2 uA"', '"2 mA"'), ('"100 nA"', '"100 uA"'))
    quick = (*large, ('"60 kHz"', '"1.5 MHz"'), ('"3 kHz"', '"500 kHz"'), ('"1 V"', f'"{value}"'))
    return changed(*quick, end=f'[parts]\nop_amps = ["LM4562"]\n{ONE}')


def insisted(value: str) -> str:
    return with_bandwidth(value, '[filter]\nfamily = "butterworth"\nsections = 6\n')


NUMBER = r"([\d.]+ [a-zA-Zµ]*)"
CASES = {
    "output beyond the swing": Case(
        with_output("5 V"), rf"target\.output of 5 V.*largest output that works is {NUMBER} rms", with_output, "V", 1.01
    ),
    "supply too low": Case(
        with_supply("1 V"), rf"supply of 1 V in total.*nearest that works is {NUMBER} \(", with_supply, "V", 0.98
    ),
    "supply too low for a small output": Case(
        with_supply("1 V", "100 mV"),
        rf"supply of 1 V in total.*nearest that works is {NUMBER} \(",
        lambda value: with_supply(value, "100 mV"),
        "V",
        0.98,
    ),
    "supply too high": Case(
        with_supply("120 V"), rf"supply of 120 V in total.*nearest that works is {NUMBER} \(", with_supply, "V", 1.01
    ),
    "signal to noise beyond the source's": Case(
        with_snr("60 dB"), rf"target\.signal_to_noise of 60 dB.*at most {NUMBER} with", with_snr, "dB", 1.02
    ),
    "smallest reading beyond the source's": Case(
        with_snr("60 dB"),
        rf"raise target\.smallest to {NUMBER},",
        lambda value: with_snr("60 dB", value),
        "A",
        0.98,
    ),
    "Q too high": Case(
        with_bandwidth("100 Hz"),
        rf"target\.bandwidth of 100 Hz.*narrowest that works is {NUMBER}",
        with_bandwidth,
        "Hz",
        0.95,
    ),
    "Q too high for what is insisted on": Case(
        insisted("3 kHz"),
        rf"target\.bandwidth of 3 kHz.*narrowest that works is {NUMBER}",
        insisted,
        "Hz",
        0.95,
    ),
    "reject too steep": Case(
        with_reject("300 dB"),
        rf"target\.reject of 300 dB at 120 kHz.*most that works is {NUMBER},",
        with_reject,
        "dB",
        1.1,
    ),
    "too much gain for an output": Case(
        tiny("3 V"), rf"target\.output of 3 V rms needs.*largest output that works is {NUMBER} rms", tiny, "V", None
    ),
    "too much gain": Case(
        tiny_gain("284 dB"),
        rf"target\.gain of 284 dB needs.*largest gain that works is {NUMBER}$",
        tiny_gain,
        "dB",
        None,
    ),
    "slew too fast": Case(
        slow("2.5 V"),
        rf"target\.output of 2\.5 V rms at 1\.5 MHz.*largest output that works is {NUMBER} rms",
        slow,
        "V",
        1.01,
    ),
}


@pytest.mark.parametrize("name", CASES)
def test_the_nearest_value_works_and_one_beyond_does_not(
    name: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    case = CASES[name]
    path = tmp_path / "asked.toml"
    path.write_text(case.asked)
    message = refused(synth(capsys, "design", path, "--out", tmp_path / "made"), "asked.toml")
    assert not (tmp_path / "made").exists()
    found = re.search(case.pattern, message)
    assert found, message
    value = found[1].strip()
    path.write_text(case.spec(value))
    outcome = synth(capsys, "design", path)
    assert outcome.status in (0, 1), outcome.err
    if case.beyond is None:
        return
    path.write_text(case.spec(f"{case.beyond * parse(value, case.unit)!r} {case.unit}"))
    refused(synth(capsys, "design", path), "asked.toml")


def test_a_refusal_by_the_gain_speaks_of_the_gain_where_it_was_asked(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "asked.toml"
    path.write_text(with_gain("120 dB"))
    message = refused(synth(capsys, "design", path), "asked.toml: target.")
    assert "40 V" in message
