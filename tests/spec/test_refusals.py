"""Everything a spec can get wrong: one SpecError, with file, line, key, value, bound and remedy."""

from __future__ import annotations

import json
import os
import random
from pathlib import Path

import pytest

from synth.errors import SpecError
from synth.spec import load_spec, parse_spec, spec_from_dict, spec_to_dict
from tests.spec.test_contract import HERE, MINIMAL, OTHER_KEYS


def changed(old: str, new: str) -> str:
    assert old in MINIMAL
    return MINIMAL.replace(old, new)


def in_target(line: str) -> str:
    return changed('output = "1 V"', f'output = "1 V"\n{line}')


def in_sensor(line: str) -> str:
    return changed('scale = "20 mV/mA"', f'scale = "20 mV/mA"\n{line}')


def with_title(title: str) -> str:
    return changed('"Channel"', title)


def refused(text: str, match: str) -> None:
    with pytest.raises(SpecError, match=match) as caught:
        parse_spec(text)
    assert "\n" not in str(caught.value)


def test_the_form_of_a_message() -> None:
    with pytest.raises(SpecError) as caught:
        parse_spec(changed('"3 kHz"', '"130 kHz"'))
    assert str(caught.value) == (
        'spec.toml, line 5: target.bandwidth = "130 kHz": must be at most twice the center frequency (120 kHz); '
        "lower it or raise target.center_frequency"
    )


@pytest.mark.parametrize(
    ("key", "remedy"),
    [
        ("title", 'add it, such as title = "'),
        ("center_frequency", 'add it, such as center_frequency = "60 kHz"'),
        ("bandwidth", 'bandwidth = "3 kHz"'),
        ("full_scale", 'full_scale = "2 A"'),
        ("smallest", 'smallest = "0.1 A"'),
        ("output", "and gain as well"),
        ("scale", 'scale = "20 mV/mA"'),
        ("positive", 'positive = "5 V"'),
        ("format", "add it as the first line: format = 1"),
    ],
)
def test_missing_keys(key: str, remedy: str) -> None:
    lines = [line for line in MINIMAL.splitlines() if not line.startswith(f"{key} =")]
    refused("\n".join(lines), rf"{key} is missing.*{remedy}")


@pytest.mark.parametrize("section", ["target", "sensor", "supply"])
def test_missing_sections(section: str) -> None:
    data = spec_to_dict(parse_spec(MINIMAL))
    del data[section]
    with pytest.raises(SpecError, match=rf"^design\.json: {section} is missing; add a section \[{section}\]"):
        spec_from_dict(data)


@pytest.mark.parametrize(
    ("text", "match"),
    [
        (in_target('bandwith = "3 kHz"'), r"line 9: target\.bandwith is not a key of a spec; did you mean bandwidth\?"),
        (in_target('centre_tolerance = "3 %"'), r"did you mean center_tolerance\?"),
        (in_target("zzz = 1"), "target.zzz is not a key of a spec; choose one of center_frequency, bandwidth"),
        (MINIMAL + "[sensors]\nx = 1\n", r"line 13: sensors is not a key of a spec; did you mean sensor\?"),
        (in_sensor('rolloff = [\n{kind = "low-pass", corner = "1 Hz"},\n{kind = "low-pass", cornr = "1 Hz"}]'),
         r"line 13: sensor\.rolloff\[2\]\.cornr .*did you mean corner\?"),
        (MINIMAL + '[[interference]]\nkind="tone"\nfrequency="1 Hz"\nlevel="1 A"\n[[interference]]\nknd="tone"\n',
         r"line 18: interference\[2\]\.knd .*did you mean kind\?"),
        (in_target('"a\\nb" = 1'), r"line 9: target\.a\\nb is not a key"),
        (in_target('settling = { within = "2 ms", too = "1 %" }'), r"target\.settling\.too .*did you mean to\?"),
    ],
)
def test_unknown_keys(text: str, match: str) -> None:
    refused(text, match)


@pytest.mark.parametrize(
    ("text", "match"),
    [
        (changed("format = 1", "format = 2"), "line 1: format = 2: the spec is of a newer format; .*update"),
        (changed("format = 1", "format = 0"), "there is no such format; write format = 1"),
        (changed("format = 1", 'format = "1"'), "must be a whole number, without quotes"),
        (changed("format = 1", "format = true"), "format = true: must be a whole number"),
        (changed('"60 kHz"', '"60 kV"'), r'line 4: target\.center_frequency = "60 kV": wrong unit "kV"; expected Hz'),
        (changed('"60 kHz"', '"0 Hz"'), r'target\.center_frequency = "0 Hz": must be above zero'),
        (changed('"60 kHz"', '"-60 kHz"'), "must be above zero"),
        (changed('"60 kHz"', "nan"), r"target\.center_frequency = nan: is not finite"),
        (changed('"60 kHz"', "inf"), "is not finite"),
        (changed('"60 kHz"', '"nan"'), "does not start with a number"),
        (changed('"60 kHz"', '""'), 'center_frequency = "": is empty'),
        (changed('"60 kHz"', "true"), "center_frequency = true: is not a quantity"),
        (changed('"60 kHz"', "2024-01-01"), "center_frequency = 2024-01-01: is not a quantity"),
        (changed('"60 kHz"', "[1]"), "center_frequency = a list: is not a quantity"),
        (changed('"60 kHz"', "{ a = 1 }"), "center_frequency = a table: is not a quantity"),
        (changed('"60 kHz"', "9" * 400), "is not finite"),
        (changed('"3 kHz"', '"-3 kHz"'), "bandwidth.*must be above zero"),
        (changed('"2 uA"', '"2 uV"'), r'target\.full_scale = "2 uV": wrong unit "uV"; expected A.*sensor\.scale'),
        (changed('"2 uA"', '"50 nA"'), r'full_scale = "50 nA": must not be below target\.smallest \(1e-07'),
        (changed('"100 nA"', '"0 A"'), "smallest.*must be above zero"),
        (changed('output = "1 V"', ""), r"target\.output is missing, and gain as well"),
        (in_target('gain = "60 dB"'), r'line 9: target\.gain = "60 dB": cannot stand beside target\.output'),
        (changed('output = "1 V"', 'gain = "0"'), r'target\.gain = "0": must be above zero'),
        (changed('output = "1 V"', 'gain = "-5"'), "must be above zero"),
        (changed('output = "1 V"', 'gain = "99999 dB"'), "gain.*out of range"),
        (changed('output = "1 V"', 'gain = "60 V"'), 'wrong unit "V"; expected V/V, such as "89 dB"'),
        (in_target('accuracy = "0 %"'), "accuracy.*must be above 0 % and below 100 %"),
        (in_target('accuracy = 3'), "accuracy = 3: must be above 0 % and below 100 %; write it with its unit"),
        (in_target('accuracy_smallest = "-1 %"'), "must be above 0 %"),
        (in_target('bandwidth_tolerance = "100 %"'), "below 100 %"),
        (in_target('center_tolerance = "10 Hz"'), "expected a percentage"),
        (in_target('yield = "100 %"'), r'target\.yield = "100 %": must be above 0 % and below 100 %'),
        (in_target('ripple = "0 dB"'), "ripple.*above zero"),
        (in_target('signal_to_noise = "20 V"'), "expected dB"),
        (in_target('load = "0 ohm"'), "load.*above zero"),
        (in_target("settling = 2"), r"target\.settling = 2: must be a table, with keys within, to"),
        (in_target('settling = { within = "2 ms" }'), r"target\.settling\.to is missing"),
        (in_target('settling = { within = "0 s", to = "1 %" }'), r'settling\.within = "0 s": must be above zero'),
        (in_target('reject = { frequency = "1 Hz", by = "2 dB" }'), "reject = a table: must be a list"),
        (in_target('reject = [ { frequency = "1 Hz", by = "-2 dB" } ]'), r"reject\[1\]\.by .*above zero"),
        (in_target('reject = [ 3 ]'), r"target\.reject\[1\] = 3: must be a table"),
        ("target = 3\n" + MINIMAL.replace("[target]", "[choose]"), "is not a key|must be a table"),
    ],
)
def test_target_refusals(text: str, match: str) -> None:
    refused(text, match)


@pytest.mark.parametrize(
    ("text", "match"),
    [
        (changed('"20 mV/mA"', '"0 mV/mA"'), r'sensor\.scale = "0 mV/mA": must be above zero'),
        (changed('"20 mV/mA"', '"-20 mV/mA"'), "must be above zero"),
        (changed('"20 mV/mA"', '"20 mV"'), "names no input unit"),
        (changed('"20 mV/mA"', "20"), "needs its units"),
        (changed('"20 mV/mA"', '"0.6 A/W"'), r'sensor\.output is "voltage"; say output = '),
        (changed('"20 mV/mA"', '"1 V/\\n.quit"'), "control character"),
        (changed('"20 mV/mA"', '"1 V/' + "a" * 30 + '"'), "30 characters, more than 24"),
        (in_sensor('output = "curent"'), r'sensor\.output = "curent": is not known; did you mean current\?'),
        (in_sensor("output = 3"), r"sensor\.output = 3: must be a text in quotes"),
        (in_sensor('resistance = "-1 ohm"'), "resistance.*above zero"),
        (in_sensor('noise = "0.7 nA"'), 'wrong unit "nA"'),
        (in_sensor('scale_tolerance = "120 %"'), "below 100 %"),
        (in_sensor('scale_temperature_coefficient = "50 %"'), r"must be below 10 %/K"),
        (in_sensor('burden = "25 ohm"'), r"needs sensor\.magnetizing_inductance beside it"),
        (in_sensor('magnetizing_inductance = "1 mH"'), r"needs sensor\.burden beside it"),
        (in_sensor('resistance = "1 ohm"\nburden = "25 ohm"\nmagnetizing_inductance = "1 mH"'),
         r"sensor\.resistance .*cannot stand beside sensor\.burden"),
        (in_sensor('motional = { resistance = "1", inductance = "1", capacitance = "1 F" }\n'
                   'burden = "25 ohm"\nmagnetizing_inductance = "1 mH"'), r"cannot stand beside sensor\.motional"),
        (in_sensor('motional = { resistance = "50k" }'), r"sensor\.motional\.inductance is missing"),
        (in_sensor('rolloff = "high-pass"'), r"sensor\.rolloff = .*must be a list"),
        (in_sensor('rolloff = [ { corner = "1 Hz" } ]'), r"rolloff\[1\]\.kind is missing"),
        (in_sensor('rolloff = [ { kind = "highpass", corner = "1 Hz" } ]'), r"did you mean high-pass\?"),
        (in_sensor('rolloff = [ { kind = "high-pass" } ]'), r"rolloff\[1\]\.corner is missing; .* needs it"),
        (in_sensor('rolloff = [ { kind = "high-pass", corner = "1 Hz", q = 2 } ]'), r"\.q = 2: does not belong"),
        (in_sensor('rolloff = [ { kind = "resonant", frequency = "1 Hz", q = 0 } ]'), r"\.q = 0: must be above zero"),
        (in_sensor('rolloff = [ { kind = "resonant", frequency = "1 Hz", q = 1, order = 2 } ]'), r"order = 2: does"),
        (in_sensor('rolloff = [ { kind = "low-pass", corner = "1 Hz", order = 7 } ]'), "whole number from 1 to 6"),
        (in_sensor('rolloff = [ { kind = "low-pass", corner = "1 Hz", order = 1.5 } ]'), "must be a whole number"),
        (in_sensor('rolloff = [ { kind = "loss", at = "1 Hz", loss = "100 %", shape = "low-pass" } ]'), "below 100 %"),
        (in_sensor('rolloff = [ { kind = "loss", at = "1 Hz", loss = "1 %", shape = "notch" } ]'), "is not known"),
        (in_sensor('rolloff = [ { kind = "table" } ]'), r"rolloff\[1\]\.file is missing"),
        (in_sensor('rolloff = [ { kind = "table", points = 3 } ]'), r"points = 3: must be a list"),
        (in_sensor('rolloff = [ { kind = "table", points = [[1, 1], [2, 1], [2, 1]] } ]'), "does not rise above 2 Hz"),
        (in_sensor('rolloff = [ { kind = "table", points = [[1, 1], [2, 1]], file = "x" } ]'), "beside file"),
    ],
)
def test_sensor_refusals(text: str, match: str) -> None:
    refused(text, match)


TONE = MINIMAL + '[[interference]]\nkind = "tone"\nfrequency = "50 kHz"\n'


@pytest.mark.parametrize(
    ("text", "match"),
    [
        (TONE, r"line 13: interference\[1\]\.level is missing; give level, or voltage and through"),
        (TONE + 'level = "1 uA"\nvoltage = "1 V"\n', r"\.level = .*cannot stand beside voltage and through"),
        (TONE + 'voltage = "1 V"\n', r"through is missing beside voltage"),
        (TONE + 'through = "1 pF"\n', r"voltage is missing beside through"),
        (TONE + 'level = "1 V"\n', 'wrong unit "V"; expected A'),
        (TONE + 'level = "1 uA"\nrise_time = "1 us"\n', "belongs to kind = \"square\" only"),
        (TONE.replace("tone", "square") + 'level = "1 uA"\nrise_time = "11 us"\n', r"half a period \(10 us\)"),
        (TONE.replace("tone", "ton") + 'level = "1 uA"\n', r"did you mean tone\?"),
        (MINIMAL + "[interference]\n", "interference = a table: must be a list"),
        (changed('"5 V"', '"-5 V"'), r'supply\.positive = "-5 V": must be above zero'),
        (changed('positive = "5 V"', 'positive = "5 V"\nnegative = "5 V"'), r"supply\.negative .*must be below zero"),
        (changed('positive = "5 V"', 'positive = "5 V"\nnegative = "0 V"'), "must be below zero"),
        (MINIMAL + '[environment]\nambient = "-300 degC"\n', "above absolute zero"),
        (MINIMAL + '[environment]\nambient = "300 K"\n', "expected degC"),
        (MINIMAL + '[environment]\ntemperature = ["45 degC", "10 degC"]\n', "lower temperature first; swap"),
        (MINIMAL + '[environment]\ntemperature = ["45 degC"]\n', "a list of 2 values"),
        (MINIMAL + '[environment]\ntemperature = ["-280 degC", "1 degC"]\n', "above absolute zero"),
        (MINIMAL + '[environment]\ntemperature = ["-10 degC", 4, 5]\n', "a list of 2 values"),
        (MINIMAL + '[environment]\ntemperature = [\n"-10 degC",\n"1 V"]\n', r"line 16: environment\.temperature\[2\]"),
        (MINIMAL + '[parts]\nresistors = { series = "E95" }\n', r"parts\.resistors\.series .*did you mean E96\?"),
        (MINIMAL + '[parts]\nresistors = { tolerance = "-1 %" }\n', "0 % or above"),
        (MINIMAL + '[parts]\ncapacitors = { temperature_coefficient = "-1 ppm" }\n', "must not be below zero"),
        (MINIMAL + '[parts]\ncapacitors = { temperature_coefficient = "10 %" }\n', r"must be below 10 %/K"),
        (MINIMAL + '[parts]\ncapacitors = { dielectric = "C0\\u0007G" }\n', r"remove the character U\+0007"),
        (MINIMAL + '[parts]\nop_amps = ["A\\nB"]\n', r'parts\.op_amps .*remove the character U\+000A'),
        (MINIMAL + "[parts]\nop_amps = [3]\n", r"parts\.op_amps\[1\] = 3: must be a text"),
        (MINIMAL + '[parts]\nop_amps = "A"\n', "must be a list"),
        (MINIMAL + '[filter]\nfamily = "butterwort"\n', r"line 14: filter\.family .*did you mean butterworth\?"),
        (MINIMAL + "[filter]\nsections = 0\n", "whole number from 1 to 6"),
        (MINIMAL + "[filter]\nsections = 2.0\n", "must be a whole number"),
        (MINIMAL + '[filter]\ntopology = "mfb"\n', "is not known; choose one of multiple-feedback, "),
        (MINIMAL + '[detector]\nerror = "1 %"\n', r"detector\.kind is missing"),
        (MINIMAL + '[detector]\nkind = "RMS"\n', r"did you mean rms\?"),
        (MINIMAL + '[detector]\nkind = "rms"\nbits = 12\n', 'belongs to a detector of kind "adc" only'),
        (MINIMAL + '[detector]\nkind = "rms"\nphase_tolerance = "1 deg"\n', 'of kind "synchronous" only'),
        (MINIMAL + '[detector]\nkind = "adc"\nbits = 64\n', "whole number from 4 to 32"),
        (MINIMAL + '[detector]\nkind = "synchronous"\nphase_tolerance = 1\n', "below 45 degrees"),
        (MINIMAL + '[detector]\nkind = "rms"\noffset = "-1 mV"\n', "must not be below zero"),
        (MINIMAL + '[calibration]\nvoltage = "1 V"\n', r"calibration\.resistor is missing beside calibration\.voltage"),
        (MINIMAL + '[calibration]\nresistor = "1k"\n', r"calibration\.voltage is missing beside"),
        (MINIMAL + '[calibration]\nvoltage = "1 V"\nresistor = "1k"\nlevel = "1 uA"\n', "beside calibration.level"),
        (MINIMAL + '[calibration]\nlevel_tolerance = "1 %"\n', r"needs calibration\.level beside it"),
        (MINIMAL + '[calibration]\ntrim = "gian"\n', r"did you mean gain\?"),
        (MINIMAL + '[calibration]\ncorrection = "number"\n', r"did you mean numeric\?"),
        (MINIMAL + '[resonator]\nallowed_pull = "100 %"\n', "below 100 %"),
        (MINIMAL + '[resonator]\nshunt_capacitance = "0 F"\n', "above zero"),
        (MINIMAL + '[choose]\nprefer = "nois"\n', r"did you mean noise\?"),
        (MINIMAL + '[choose]\neffort = "slow"\n', "choose one of quick, full"),
    ],
)
def test_other_refusals(text: str, match: str) -> None:
    refused(text, match)


@pytest.mark.parametrize(
    ("title", "match"),
    [
        ('"a\\n.control\\nquit\\n.endc"', r'title = "a\\n\.control.*one line of printable text; remove .*U\+000A'),
        ('"""a\n.control\n"""', r"U\+000A"),
        ('"a\\r.end"', r"U\+000D"),
        ('"a\\tb"', r"U\+0009"),
        ('"a\\u0000b"', r"U\+0000"),
        ('"a\\u0085b"', r"U\+0085"),
        ('"a\\u2028.end"', r"U\+2028"),
        ('"a\\u2029.end"', r"U\+2029"),
        ('"a\\u202eb"', r"U\+202E"),
        ('"a\\u001b[2J"', r"U\+001B"),
        ('""', "must not be empty"),
        ('"   "', "must not be empty"),
        ('"' + "x" * 201 + '"', "201 characters, at most 200"),
        ("3", "title = 3: must be a text"),
        ('["a"]', "title = a list: must be a text"),
    ],
)
def test_hostile_titles(title: str, match: str) -> None:
    refused(with_title(title), match)


@pytest.mark.parametrize(
    ("text", "match"),
    [
        ('format = 1\ntitle = "x\n', r"^spec\.toml, line 2: is not valid TOML"),
        ("format = 1\nformat = 1\n", "line 2: is not valid TOML: Cannot overwrite"),
        ("format = 1\n[target\n", "line 2: is not valid TOML"),
        ("format = 1\nx = [1,", "line 2: is not valid TOML"),
        ("format = 1\nx = 60 kHz\n", "line 2: is not valid TOML"),
        ("x = \x00", "line 1: is not valid TOML"),
        ("x = " + "[" * 5000, "nested too deeply"),
        ("x = " + "9" * 5000, "is not valid TOML"),
        ("", "spec.toml: is empty"),
        (" \n", "is empty"),
        ("# " + "x" * 1_000_001, "more than 1000000"),
    ],
)
def test_broken_texts(text: str, match: str) -> None:
    refused(text, match)


@pytest.mark.parametrize("data", [None, 3, [], "x", {}, {"format": 1}, {3: 4}, {"format": 1, "title": {}}])
def test_records_that_are_none(data: object) -> None:
    with pytest.raises(SpecError, match=r"^design\.json: "):
        spec_from_dict(data)


@pytest.mark.parametrize("section", ["target", "sensor", "supply", "environment", "parts", "filter", "choose"])
@pytest.mark.parametrize("value", [None, 3, [], "x", True, [{}]])
def test_a_section_must_be_a_table(section: str, value: object) -> None:
    data = spec_to_dict(parse_spec(MINIMAL)) | {section: value}
    with pytest.raises(SpecError, match=rf"^design\.json: {section} .*must be a table"):
        spec_from_dict(data)


def test_no_value_of_any_type_at_any_key_raises_anything_else(tmp_path: Path) -> None:
    generator = random.Random(7)
    (tmp_path / "mine.toml").write_text("x")
    (tmp_path / "drawer.csv").write_text("x")
    text = (HERE / "contract.toml").read_text()
    bad = [None, True, -1, 10**500, float("nan"), "", "\n", "x" * 10_000, [], [[]], {}, {"a": {}}, ["a"], 1e308, "1e3"]
    for source in (parse_spec(text, folder=tmp_path), parse_spec(OTHER_KEYS)):
        record = json.dumps(spec_to_dict(source))
        for _ in range(1500):
            data = json.loads(record)
            node = data
            while True:
                key = generator.choice(list(node) if isinstance(node, dict) else range(len(node)))
                if isinstance(node[key], dict | list) and node[key] and generator.random() < 0.8:
                    node = node[key]
                    continue
                break
            node[key] = generator.choice(bad)
            try:
                spec_from_dict(data)
            except SpecError as error:
                assert "\n" not in str(error)  # noqa: PT017
                assert len(str(error)) < 1000  # noqa: PT017


def test_files_that_are_no_spec(tmp_path: Path) -> None:
    path = tmp_path / "spec.toml"
    with pytest.raises(SpecError, match=r"spec\.toml: no such file; a spec is expected"):
        load_spec(path)
    with pytest.raises(SpecError, match="is a folder; name the file in it"):
        load_spec(tmp_path)
    path.write_text("")
    with pytest.raises(SpecError, match=r"spec\.toml: is empty"):
        load_spec(path)
    path.write_bytes(b'format = 1\ntitle = "\xff"\n')
    with pytest.raises(SpecError, match=r"spec\.toml, line 2: is not UTF-8 text"):
        load_spec(path)
    path.write_bytes(b"#" * 1_000_001)
    with pytest.raises(SpecError, match=r"spec\.toml: has 1000001 bytes, more than 1000000"):
        load_spec(path)
    with pytest.raises(SpecError, match="is not a regular file"):
        load_spec("/dev/null")
    with pytest.raises(SpecError, match=r"cannot be read .*name too long"):
        load_spec("x" * 5000)
    with pytest.raises(SpecError, match="no such file"):
        load_spec("a\0b")


@pytest.mark.skipif(os.geteuid() == 0, reason="the superuser reads everything")
def test_a_file_that_may_not_be_read(tmp_path: Path) -> None:
    path = tmp_path / "spec.toml"
    path.write_text(MINIMAL)
    path.chmod(0)
    with pytest.raises(SpecError, match="cannot be read"):
        load_spec(path)


@pytest.mark.parametrize(
    ("line", "match"),
    [
        ('stock = "drawer.csv"', r"line 14: parts\.stock = \"drawer\.csv\": .*drawer\.csv: no such file"),
        ('catalogs = ["a.toml"]', r"line 14: parts\.catalogs\[1\] = \"a\.toml\": .*no such file"),
        ('catalogs = ["."]', "is a folder"),
        ('stock = "a\\u0000b"', r"remove the character U\+0000"),
        ('stock = ""', "must not be empty"),
        ("stock = 3", "must be a text"),
    ],
)
def test_files_named_in_parts(tmp_path: Path, line: str, match: str) -> None:
    with pytest.raises(SpecError, match=match):
        parse_spec(MINIMAL + f"[parts]\n{line}\n", folder=tmp_path)


@pytest.mark.parametrize(
    ("content", "match"),
    [
        (None, "no such file"),
        ("", "is empty"),
        ("1,1\n2,1\n", "has 2 rows; a response needs at least 3"),
        ("1,1\n2,x\n3,1\n", "line 2: a cell is not a number"),
        ("1;1\n2;1\n", "line 1: .*separate the columns by commas"),
        ("Hz,gain\nHz,gain\n1,1\n", "line 2: a cell is not a number"),
        ("1,1\n2,1\n3,1,4\n", "row 3 has 3 columns"),
        ("1\n2\n3\n", "row 1 has 1 columns"),
        ("1,1\n3,1\n2,1\n", "row 3: the frequency 2 Hz does not rise above 3 Hz"),
        ("0,1\n1,1\n2,1\n", "row 1: the frequency 0 Hz does not rise"),
        ("1,1\n2,0\n3,1\n", r"row 2: the gain 0 must be above zero"),
        ("1,1\n2,nan\n3,1\n", "row 2 holds a value that is not finite"),
        ('1,1\n2,"1\n', "line 2"),
    ],
)
def test_rolloff_tables(tmp_path: Path, content: str | None, match: str) -> None:
    if content is not None:
        (tmp_path / "coil.csv").write_text(content)
    text = in_sensor('rolloff = [ { kind = "table", file = "coil.csv" } ]')
    with pytest.raises(SpecError, match=rf'line 11: sensor\.rolloff\[1\]\.file = "coil\.csv": .*{match}'):
        parse_spec(text, folder=tmp_path)


def test_a_file_that_breaks_off_while_it_is_read(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def broken(_path: Path) -> bytes:
        raise OSError(5, "Input/output error")

    path = tmp_path / "spec.toml"
    path.write_text(MINIMAL)
    monkeypatch.setattr(Path, "read_bytes", broken)
    with pytest.raises(SpecError, match=r"spec\.toml: cannot be read \(Input/output error\)"):
        load_spec(path)
