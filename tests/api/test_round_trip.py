"""Save, load and check: a design comes back, an edit by hand shows, and the spec is the one that was asked."""

from __future__ import annotations

import json
import math
from pathlib import Path

import numpy as np
import pytest

from synth import api
from synth.errors import FolderError, SpecError
from tests.api.made import PICKUP, changed, design_of, pickup, spec_of


@pytest.fixture(scope="session")
def saved(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder that no test changes."""
    folder = tmp_path_factory.mktemp("saved") / "demo"
    api.save_design(pickup(), folder)
    return folder


@pytest.fixture
def own(tmp_path: Path) -> Path:
    """A folder to change."""
    folder = tmp_path / "demo"
    api.save_design(pickup(), folder)
    return folder


def edit(folder: Path, ref: str, factor: float) -> None:
    path = folder / "design.json"
    document = json.loads(path.read_text())
    part = next(p for p in document["parts"] if p["ref"] == ref)
    part["value"] *= factor
    path.write_text(json.dumps(document))


def same_number(one: float | None, other: float | None, rel: float) -> bool:
    if one is None or other is None:
        return one is other
    return math.isclose(one, other, rel_tol=rel, abs_tol=1e-300)


def test_the_files_of_the_contract_are_there(saved: Path) -> None:
    names = {"spec.toml", "design.json", "bom.csv", "chain.cir", "report.txt"}
    assert names <= {file.name for file in saved.iterdir()}
    assert {file.suffix for file in saved.iterdir()} - {".svg"} == {".toml", ".json", ".csv", ".cir", ".txt"}
    assert (saved / "spec.toml").read_bytes() == PICKUP.read_bytes()
    assert (saved / "report.txt").read_text() == api.report(pickup())
    assert (saved / "design.json").read_text() == api.json_text(pickup())


def test_a_design_comes_back_to_nine_digits(saved: Path) -> None:
    made, back = pickup(), api.load_design(saved)
    assert not back.edited
    assert back.spec == made.spec
    assert [(p.ref, p.kind, p.nodes, p.role, p.stage) for p in back.chain.parts] == [
        (p.ref, p.kind, p.nodes, p.role, p.stage) for p in made.chain.parts
    ]
    for one, other in zip(made.chain.parts, back.chain.parts, strict=True):
        if isinstance(one.value, float):
            assert same_number(one.value, other.number, 5e-9), one.ref
    for want, got in zip(made.requirements, back.requirements, strict=True):
        assert (want.name, want.unit, want.met, want.note) == (got.name, got.unit, got.met, got.note)
        assert same_number(want.nominal, got.nominal, 5e-9), want.name
        assert same_number(want.margin, got.margin, 5e-9), want.name
    np.testing.assert_allclose(back.verification.response.gain, made.verification.response.gain, rtol=1e-6)
    np.testing.assert_allclose(back.verification.noise.density, made.verification.noise.density, rtol=5e-9)


def test_a_design_that_came_back_computes_the_same(saved: Path) -> None:
    f = [50e3, 97e3, 100e3, 103e3, 300e3]
    back = api.load_design(saved)
    np.testing.assert_allclose(back.response(f), pickup().response(f), rtol=1e-7)
    np.testing.assert_allclose(back.noise(f).density, pickup().noise(f).density, rtol=1e-7)


def test_check_finds_what_was_written(saved: Path) -> None:
    made, again = pickup(), api.check(saved)
    assert not again.edited
    assert again.meets_spec == made.meets_spec
    for want, got in zip(made.requirements, again.requirements, strict=True):
        assert (want.name, want.met) == (got.name, got.met)
        assert same_number(want.nominal, got.nominal, 1e-6), want.name
    assert again.verification.cautions == made.verification.cautions


def test_check_takes_a_path_as_text(saved: Path) -> None:
    assert api.check(str(saved)).meets_spec


def test_saved_again_it_is_the_same_folder(saved: Path, tmp_path: Path) -> None:
    api.save_design(api.load_design(saved), tmp_path / "again")
    for name in ("design.json", "bom.csv", "chain.cir", "report.txt"):
        assert (tmp_path / "again" / name).read_bytes() == (saved / name).read_bytes(), name
    # a record holds the spec's figures, not its text
    assert api.load_spec(tmp_path / "again" / "spec.toml") == pickup().spec


def section_resistor(role: str) -> str:
    chain = pickup().chain
    names = {stage.name for stage in chain.stages if stage.kind == "bandpass"}
    return next(p.ref for p in chain.parts if p.stage in names and p.kind == "resistor" and role in p.role)


def test_an_edited_feedback_resistor_shows_in_the_bandwidth(own: Path) -> None:
    before = api.check(own)
    edit(own, section_resistor("bandwidth"), 0.5)
    loaded, after = api.load_design(own), api.check(own)
    assert loaded.edited
    assert after.edited
    assert after.verification.realized.bandwidth > 1.2 * before.verification.realized.bandwidth
    bandwidth = next(r for r in after.requirements if r.name == "bandwidth")
    assert bandwidth.met is False
    assert not after.meets_spec


def test_an_edited_gain_resistor_moves_the_gain_by_its_share(own: Path) -> None:
    chain = pickup().chain
    gain = next(stage for stage in chain.stages if stage.kind == "gain")
    feedback = next(p for p in chain.parts if p.stage == gain.name and "feedback" in p.role)
    ground = next(p for p in chain.parts if p.stage == gain.name and "to ground" in p.role)
    before = api.check(own).verification.realized.gain_db
    edit(own, feedback.ref, 1.1)
    after = api.check(own).verification.realized.gain_db
    ideal = (1 + 1.1 * feedback.number / ground.number) / (1 + feedback.number / ground.number)
    assert after - before == pytest.approx(20 * math.log10(ideal), abs=0.05)


def test_the_record_of_an_edited_design_keeps_what_was_found_before(own: Path) -> None:
    edit(own, section_resistor("bandwidth"), 0.5)
    assert api.load_design(own).verification.realized.bandwidth == pytest.approx(
        pickup().verification.realized.bandwidth, rel=1e-8
    )


def test_a_change_that_is_none_is_no_edit(own: Path) -> None:
    path = own / "design.json"
    document = json.loads(path.read_text())
    path.write_text(json.dumps(document, indent=7))
    assert not api.load_design(own).edited


def test_an_edited_folder_is_replaced_with_force_only(own: Path) -> None:
    edit(own, section_resistor("bandwidth"), 0.5)
    before = (own / "design.json").read_bytes()
    with pytest.raises(FolderError, match=r"parts were edited by hand.*--force"):
        api.save_design(pickup(), own)
    assert (own / "design.json").read_bytes() == before
    api.save_design(pickup(), own, force=True)
    assert not api.load_design(own).edited


def test_a_spec_from_text_can_be_saved(tmp_path: Path) -> None:
    text = changed()
    api.save_design(design_of(text), tmp_path / "made")
    assert api.load_spec(tmp_path / "made" / "spec.toml") == spec_of(text)
    assert api.load_design(tmp_path / "made").spec == spec_of(text)


def test_a_spec_from_text_with_a_gain_can_be_saved(tmp_path: Path) -> None:
    text = changed(('output = "1 V"', 'gain = "80 dB"'))
    spec = spec_of(text)
    written = api.parse_spec(api.spec_text(spec))
    assert written.target.gain == pytest.approx(1e4, rel=1e-12)
    api.save_design(design_of(text), tmp_path / "made")
    assert api.load_design(tmp_path / "made").meets_spec


def test_the_starter_is_designed_and_comes_back(tmp_path: Path) -> None:
    made = design_of(api.starter_spec())
    assert made.meets_spec
    api.save_design(made, tmp_path / "made")
    assert api.check(tmp_path / "made").meets_spec


def own_spec(tmp_path: Path) -> Path:
    path = tmp_path / "mine.toml"
    path.write_text(changed())
    return path


def test_a_spec_file_changed_between_load_and_save_is_refused(tmp_path: Path) -> None:
    path = own_spec(tmp_path)
    made = api.design(api.load_spec(path), builds=0)
    path.write_text(changed(('"3 kHz"', '"4 kHz"')))
    with pytest.raises(SpecError, match=r"mine\.toml: has changed since it was read; load it again"):
        api.save_design(made, tmp_path / "made")
    assert not (tmp_path / "made").exists()


def test_a_comment_changed_between_load_and_save_changes_nothing(tmp_path: Path) -> None:
    path = own_spec(tmp_path)
    made = api.design(api.load_spec(path), builds=0)
    path.write_text("# a remark\n" + changed())
    api.save_design(made, tmp_path / "made")
    assert (tmp_path / "made" / "spec.toml").read_text().startswith("# a remark")


def test_a_spec_file_deleted_between_load_and_save_is_written_from_its_figures(tmp_path: Path) -> None:
    path = own_spec(tmp_path)
    made = api.design(api.load_spec(path), builds=0)
    path.unlink()
    api.save_design(made, tmp_path / "made")
    assert api.load_spec(tmp_path / "made" / "spec.toml") == made.spec


def test_a_spec_file_spoilt_between_load_and_save_is_refused(tmp_path: Path) -> None:
    path = own_spec(tmp_path)
    made = api.design(api.load_spec(path), builds=0)
    path.write_bytes(b"\xff\xfe")
    with pytest.raises(SpecError, match=r"mine\.toml, line 1: is not UTF-8"):
        api.save_design(made, tmp_path / "made")


@pytest.mark.parametrize("form", ["\ufeff{}", "{}\r\n# end\r\n"])
def test_a_spec_with_a_byte_order_mark_or_other_line_ends_can_be_saved(tmp_path: Path, form: str) -> None:
    path = tmp_path / "mine.toml"
    path.write_bytes(form.format(changed()).encode())
    made = api.design(api.load_spec(path), builds=0)
    api.save_design(made, tmp_path / "made")
    assert api.load_spec(tmp_path / "made" / "spec.toml") == made.spec


def test_a_spec_from_text_has_nothing_to_do_with_a_file_of_its_name(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("spec.toml").write_text("something else")
    made = api.design(api.parse_spec(changed()), builds=0)
    assert "spec.toml" not in made.record.inputs
    api.save_design(made, "made")
    assert api.load_design("made").spec == made.spec


def test_a_spec_loaded_from_the_working_folder_is_copied(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    text = "# my words\n" + changed()
    Path("mine.toml").write_text(text)
    made = api.design(api.load_spec("mine.toml"), builds=0)
    api.save_design(made, "made")
    assert Path("made/spec.toml").read_text() == text
    assert "mine.toml" in made.record.inputs


def test_a_folder_that_is_none(tmp_path: Path) -> None:
    with pytest.raises(FolderError, match="there is no such folder; name a folder that `synth design` wrote"):
        api.load_design(tmp_path / "none")
    with pytest.raises(FolderError, match=r"holds no design\.json"):
        api.check(tmp_path)


def test_errors_of_a_design_name_the_spec_and_the_key() -> None:
    for end, key in (
        ('[parts]\nop_amps = ["OPX999"]\n', "parts.op_amps: "),
        ('[parts]\nresistors = { tolerance = "7 %" }\n', "parts.resistors: "),
        ('[parts]\ncapacitors = { tolerance = "7 %" }\n', "parts.capacitors: "),
    ):
        with pytest.raises(ValueError, match=f"^given.toml: {key}"):
            api.design(spec_of(changed(end=end)), builds=0)


def test_write_text_never_overwrites(tmp_path: Path) -> None:
    path = tmp_path / "a.toml"
    api.write_text(path, "one")
    with pytest.raises(SpecError, match="is there already; name another file or remove it"):
        api.write_text(path, "two")
    assert path.read_text() == "one"
    with pytest.raises(SpecError, match="cannot be written: No such file or directory; name another file"):
        api.write_text(tmp_path / "none" / "a.toml", "two")


def test_digests_are_of_the_files_that_went_in(tmp_path: Path) -> None:
    import hashlib

    (tmp_path / "mine.toml").write_text("# no parts\n")
    path = tmp_path / "spec.toml"
    path.write_text(changed(end='[parts]\ncatalogs = ["mine.toml"]\n'))
    inputs = api.design(api.load_spec(path), builds=0).record.inputs
    for name in ("spec.toml", "mine.toml"):
        assert inputs[name] == hashlib.sha256((tmp_path / name).read_bytes()).hexdigest()
    assert design_of(changed()).record.inputs.get("given.toml") is None
