from __future__ import annotations

import json
from dataclasses import fields, is_dataclass, replace
from pathlib import Path

import numpy as np
import pytest

from synth.errors import FolderError
from synth.folder import DESIGN_FILE, decode, encode, read_design, to_json
from synth.model.judgement import SensorModel
from tests.folder.records import make_model, make_record

NINE_DIGITS = 5.1e-9  # half a unit of the ninth digit, relative, at worst


def assert_same(one: object, other: object, path: str = "record") -> None:
    """Equal within nine digits, types and all; a phase may turn by a whole turn."""
    if is_dataclass(one):
        assert type(one) is type(other), path
        for field in fields(one):
            if field.compare:
                assert_same(getattr(one, field.name), getattr(other, field.name), f"{path}.{field.name}")
    elif isinstance(one, np.ndarray):
        # half a unit of the ninth digit of 114 dB is 5e-7 dB, 5.8e-8 of the gain; of a phase, 9e-9
        np.testing.assert_allclose(other, one, rtol=6.7e-8 if one.dtype == complex else NINE_DIGITS, err_msg=path)
        assert one.dtype == other.dtype, path
    elif isinstance(one, dict):
        assert one.keys() == other.keys(), path
        for key in one:
            assert_same(one[key], other[key], f"{path}.{key}")
    elif isinstance(one, tuple):
        assert len(one) == len(other), path
        for k, pair in enumerate(zip(one, other, strict=True)):
            assert_same(*pair, f"{path}[{k}]")
    elif isinstance(one, float | complex):
        assert other == pytest.approx(one, rel=NINE_DIGITS), path
    else:
        assert one == other, path


def test_a_design_comes_back_within_nine_digits() -> None:
    record = make_record()
    assert_same(record, decode(encode(record)))


def test_a_design_that_was_read_is_written_exactly_as_it_was() -> None:
    text = to_json(make_record())
    assert to_json(decode(json.loads(text))) == text


def test_the_circuit_that_was_read_is_the_same_object_for_object() -> None:
    once = decode(encode(make_record()))
    again = decode(encode(once))
    assert again.chain == once.chain
    assert again.spec == once.spec
    assert again.verification.requirements == once.verification.requirements


def test_the_same_design_gives_the_same_bytes_in_any_order_of_its_mappings() -> None:
    record = make_record()
    turned = replace(record, inputs=dict(reversed(record.inputs.items())))
    models = {"AMP2": make_model("AMP2"), "AMP1": make_model()}
    one = replace(record, chain=replace(record.chain, models=models))
    other = replace(record, chain=replace(record.chain, models=dict(reversed(models.items()))))
    assert to_json(turned) == to_json(record) == to_json(make_record())
    assert to_json(one) == to_json(other) != to_json(record)


def test_every_number_has_nine_digits_at_most() -> None:
    def numbers(value: object) -> list[float]:
        if isinstance(value, dict):
            value = list(value.values())
        if isinstance(value, list):
            return [number for entry in value for number in numbers(entry)]
        return [value] if isinstance(value, float) else []

    found = numbers(json.loads(to_json(make_record())))
    assert len(found) > 500
    assert all(float(f"{number:.9g}") == number for number in found)


def test_the_text_has_one_space_of_indent_and_ends_with_a_newline() -> None:
    text = to_json(make_record())
    assert text.startswith(
        '{\n "version": 1,\n "title": "Pickup-coil channel",\n "seed": 7,\n "spec": {\n  "format": 1,'
    )
    assert text.endswith('"\n}\n')
    assert text.isascii()


def test_whole_numbers_in_the_record_are_written_as_any_other() -> None:
    record = make_record()
    parts = tuple(replace(p, value=10000) if p.ref == "R1" else p for p in record.chain.parts)
    whole = replace(record, chain=replace(record.chain, parts=parts, ambient=27))
    assert to_json(whole) == to_json(record)


def test_what_the_contract_lists_is_there() -> None:
    document = encode(make_record())
    assert document["parts"][2] == {
        "ref": "R2",
        "kind": "resistor",
        "role": "gain, to ground",
        "nodes": ["s1_m", "0"],
        "value": 49.9,
        "unit": "ohm",
        "code": "49R9",
        "tolerance": 0.01,
        "temperature_coefficient": 5e-05,
        "common_share": 0.0,
        "stage": "gain 1",
        "technology": "thick film",
        "stray": 4e-14,
        "loss_tangent": 0.0,
        "size": "0603",
        "rating": "",
        "note": "",
    }
    amplifier = document["parts"][4]
    assert (amplifier["value"], amplifier["unit"], amplifier["code"]) == ("AMP1", "", "AMP1")
    capacitor = document["parts"][7]
    assert (capacitor["value"], capacitor["unit"], capacitor["code"]) == (1e-9, "F", "1n0")
    assert [r["limit"] for r in document["requirements"]] == [[4.9e5, 5.1e5], 60.0, 0.5, None]
    assert [r["met"] for r in document["requirements"]] == [True, False, True, None]
    assert document["sensor_model"]["zeros"] == [[0.0, 0.0]]
    assert document["stages"][1]["gain"] == -19.9
    assert document["stages"][1]["test_point"] == "out"
    assert document["input_unit"] == "A"


def test_an_edited_value_is_taken_and_wins_over_its_code() -> None:
    document = json.loads(to_json(make_record()))
    document["parts"][1]["value"] = 12000  # a whole number, as a person writes it
    part = decode(document).chain.part("R1")
    assert part.value == 12000.0
    assert isinstance(part.value, float)
    assert encode(decode(document))["parts"][1]["code"] == "12K"


@pytest.mark.parametrize(
    "hostile",
    [
        '"}, "version": 99, {"',
        "</script><script>alert(1)</script>",
        "=HYPERLINK(1)",
        "back\\slash \\n \\u0000",
        "Größe ½ µA 测量 😀",
        ".include /etc/passwd",
    ],
)
def test_hostile_text_is_plain_text(hostile: str) -> None:
    record = make_record(title=hostile, note=hostile)
    text = to_json(record)
    assert json.loads(text)["title"] == hostile
    assert text.count("\n") == to_json(make_record()).count("\n")
    assert decode(json.loads(text)).spec.title == hostile
    assert decode(json.loads(text)).chain.part("U1A").note == hostile


@pytest.mark.parametrize(
    ("note", "match"),
    [
        ("line\n.shell rm", r"parts\[4\]\.note: must be one line of printable text; remove the character U\+000A"),
        ("\u202etxt", r"parts\[4\]\.note: must be one line of printable text; remove the character U\+202E"),
        ("x" * 1001, r"parts\[4\]\.note: has 1001 characters, at most 1000 are allowed; shorten it"),
    ],
)
def test_text_that_could_not_be_read_is_not_written(note: str, match: str) -> None:
    with pytest.raises(FolderError, match=match):
        encode(make_record(note=note))


def test_a_hostile_name_of_an_input_is_not_written() -> None:
    with pytest.raises(FolderError, match=r"inputs\.'a\\nb': must be one line of printable text"):
        encode(replace(make_record(), inputs={"a\nb": "0"}))


def test_a_number_that_is_not_finite_is_not_written() -> None:
    record = make_record()
    found = record.verification
    broken = replace(found, sensor_model=SensorModel((), (), float("nan"), 0.0))
    with pytest.raises(FolderError, match=r"design\.json: sensor_model\.gain_at_center = nan: must be finite"):
        encode(replace(record, verification=broken))
    gain = found.response.gain.copy()
    gain[3] = 0
    broken = replace(found, response=replace(found.response, gain=gain))
    with pytest.raises(FolderError, match=r"response\.gain_db\[3\] = -inf: must be finite"):
        encode(replace(record, verification=broken))


def test_a_value_of_a_foreign_kind_is_not_written() -> None:
    with pytest.raises(FolderError, match=r"design\.json: seed is a Path: JSON has no such value"):
        encode(replace(make_record(), seed=type("Path", (), {})()))


def test_a_chain_that_does_not_fit_together_is_not_written() -> None:
    record = make_record()
    chain = record.chain
    double = replace(chain, parts=(*chain.parts, chain.parts[0]))
    with pytest.raises(FolderError, match=r'parts\[11\]\.ref = "C1": stands at parts\[0\] too'):
        encode(replace(record, chain=double))
    sensor = replace(chain.sensor, resistance=50.0)
    with pytest.raises(FolderError, match="the chain's sensor is not that of the spec; put it into the spec"):
        encode(replace(record, chain=replace(chain, sensor=sensor)))
    with pytest.raises(FolderError, match=r'parts\[5\]\.stage = "bandpass 1": no such stage among the stages'):
        encode(replace(record, chain=replace(chain, stages=chain.stages[:1])))
    short = replace(chain.stages[0], parts=chain.stages[0].parts[1:])
    with pytest.raises(FolderError, match=r"its stage does not list it; add it there or remove the part"):
        encode(replace(record, chain=replace(chain, stages=(short, *chain.stages[1:]))))
    verdict = replace(record.verification, stages=record.verification.stages[:1])
    with pytest.raises(FolderError, match=r"stages \['gain 1', 'bandpass 1'\] have the results of \['gain 1'\]"):
        encode(replace(record, verification=verdict))
    models = {"AMP1": make_model("AMP2")}
    with pytest.raises(FolderError, match="models: the figures of AMP1 are those of AMP2"):
        encode(replace(record, chain=replace(chain, models=models)))
    huge = tuple(replace(p, value=1e16) if p.ref == "R1" else p for p in chain.parts)
    with pytest.raises(FolderError, match=r"R1: value = .*is too large for the letter code of a resistor"):
        encode(replace(record, chain=replace(chain, parts=huge)))
    table = replace(record.verification.response, group_delay=np.zeros(3))
    with pytest.raises(FolderError, match="response: its columns are empty or differ in length"):
        encode(replace(record, verification=replace(record.verification, response=table)))


def test_a_folder_is_read(tmp_path: Path) -> None:
    text = to_json(make_record())
    (tmp_path / DESIGN_FILE).write_text("\ufeff" + text, encoding="utf-8")  # an editor's byte order mark is no harm
    record = read_design(tmp_path)
    assert to_json(record) == text
    assert record.spec.folder == tmp_path
    assert to_json(read_design(str(tmp_path))) == text


def test_a_link_to_a_folder_is_read(tmp_path: Path) -> None:
    (tmp_path / "real").mkdir()
    (tmp_path / "real" / DESIGN_FILE).write_text(to_json(make_record()), encoding="utf-8")
    (tmp_path / "link").symlink_to("real")
    assert read_design(tmp_path / "link").seed == 7
