"""Input that cannot be used: one message on stderr, exit status 2, nothing on stdout, nothing written."""

from __future__ import annotations

import errno
import os
from pathlib import Path

import pytest

from tests.api.made import PLAIN, changed
from tests.cli.running import content, process, refused, synth

KEYS = ("center_frequency", "bandwidth", "full_scale", "smallest", "scale", "positive")
PARTS = '[parts]\nop_amps = ["OPX999"]\n'
FAMILY = '[filter]\nfamily = "butterwoth"\n'
TOPOLOGY = '[filter]\ntopology = "multiple feedback"\n'

# name: (spec, words of the message: key, value, bound, remedy)
SPECS: dict[str, tuple[str, tuple[str, ...]]] = {
    **{
        f"no {key}": ("\n".join(r for r in PLAIN.splitlines() if not r.startswith(key)), (f"{key} is missing", "add"))
        for key in KEYS
    },
    "no title": (changed(('title = "Channel"\n', "")), ("title is missing", "add it")),
    "no format": (changed(("format = 1\n", "")), ("format is missing", "format = 1")),
    "newer format": (changed(("format = 1", "format = 9")), ("format = 9", "newer", "reads format 1", "update")),
    "no sensor": (changed(('[sensor]\nscale = "20 mV/mA"\nresistance = "25 ohm"\n', "")), ("sensor is missing",)),
    "misspelt key": (
        changed(("bandwidth", "bandwith")),
        ("line 5", "target.bandwith is not a key", "did you mean bandwidth?"),
    ),
    "misspelt section": (changed(("[supply]", "[suply]")), ("suply is not a key", "did you mean supply?")),
    "wrong unit": (changed(('"3 kHz"', '"3 kohm"')), ("line 5", 'target.bandwidth = "3 kohm"', "expected Hz")),
    "no unit's prefix": (changed(('"5 V"', '"5 kg"')), ('supply.positive = "5 kg"', "expected V")),
    "input unit": (changed(('"2 uA"', '"2 uT"')), ('target.full_scale = "2 uT"', "input unit of sensor.scale")),
    "zero": (changed(('"3 kHz"', '"0 Hz"')), ('target.bandwidth = "0 Hz"', "must be above zero")),
    "negative": (changed(('"60 kHz"', '"-60 kHz"')), ('target.center_frequency = "-60 kHz"', "must be above zero")),
    "NaN": (changed(('"3 kHz"', '"NaN Hz"')), ('target.bandwidth = "NaN Hz"', "expected Hz")),
    "nan of TOML": (changed(('"3 kHz"', "nan")), ("target.bandwidth = nan", "expected Hz", "such as")),
    "infinite": (changed(('"5 V"', "inf")), ("supply.positive = inf",)),
    "too large": (changed(('"3 kHz"', '"1e400 Hz"')), ('target.bandwidth = "1e400 Hz"',)),
    "bandwidth": (
        changed(('"3 kHz"', '"130 kHz"')),
        ('target.bandwidth = "130 kHz"', "at most twice", "120 kHz", "lower it"),
    ),
    "full scale below smallest": (
        changed(('"2 uA"', '"20 nA"')),
        ('target.full_scale = "20 nA"', "must not be below target.smallest", "raise it or lower"),
    ),
    "both": (changed(target='gain = "80 dB"'), ('target.gain = "80 dB"', "cannot stand beside", "remove")),
    "neither": (changed(('output = "1 V"\n', "")), ("target.output is missing", "gain", 'output = "1 V"')),
    "unknown op amp": (changed(end=PARTS), ("parts.op_amps", "OPX999", "in no catalog", "nearest", "correct")),
    "unknown family": (changed(end=FAMILY), ('filter.family = "butterwoth"', "did you mean butterworth?")),
    "unknown topology": (changed(end=TOPOLOGY), ("filter.topology", "did you mean multiple-feedback?")),
    "positive negative supply": (changed(('"-5 V"', '"5 V"')), ('supply.negative = "5 V"', "must be below zero")),
    "newline in title": (changed(('"Channel"', '"a\\n.include /etc/passwd"')), ("title = ", "one line", "U+000A")),
    "control character in title": (changed(('"Channel"', '"a\\u001b[31mb"')), ("title = ", "U+001B", "remove")),
    "reading direction in title": (changed(('"Channel"', '"a\\u202eb"')), ("title = ", "U+202E")),
    "raw control character": (changed(('"Channel"', '"a\x07b"')), ("line 2", "not valid TOML")),
    "empty title": (changed(('"Channel"', '" "')), ("title = ", "must not be empty")),
    "long title": (changed(('"Channel"', f'"{"x" * 201}"')), ("title = ", "201 characters", "at most 200", "shorten")),
    "number for a text": (changed(('"Channel"', "7")), ("title = 7", "must be a text in quotes")),
    "text for a table": (changed(target='settling = "2 ms"'), ("target.settling = ", "must be a table", "within, to")),
    "not TOML": (changed(('"3 kHz"', "3 kHz")), ("line 5", "not valid TOML", "double quotes")),
    "catalog that is not there": (
        changed(end='[parts]\ncatalogs = ["no.toml"]\n'),
        ("parts.catalogs", "no.toml", "no such file"),
    ),
    "tolerance nobody sells": (
        changed(end='[parts]\nresistors = { tolerance = "7 %" }\n'),
        ("parts.resistors", "no tolerance 7 %", "offered are"),
    ),
    "dielectric nobody sells": (
        changed(end='[parts]\ncapacitors = { dielectric = "X9Z" }\n'),
        ("parts.capacitors", "X9Z", "offered are"),
    ),
    "current of a voltage sensor": (
        changed(('"20 mV/mA"', '"20 mA/mA"')),
        ("sensor.scale", "20 mA/mA", "sensor.output"),
    ),
}


@pytest.mark.parametrize("case", SPECS)
def test_a_spec_that_cannot_be_used(case: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    text, words = SPECS[case]
    spec = tmp_path / "asked.toml"
    spec.write_text(text)
    refused(synth(capsys, "design", spec, "--out", tmp_path / "made"), "asked.toml", *words)
    assert [p.name for p in tmp_path.iterdir()] == ["asked.toml"]


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (b"", ("is empty", "a spec is expected")),
        (b" \n\t", ("is empty",)),
        (b"format = 1\ntitle = \"\xff\"\n", ("line 2", "not UTF-8", "save it as UTF-8")),
        (b"\x00\x01\x02", ("not valid TOML",)),
        (b"#" * 2_000_000, ("2000000 bytes", "more than 1000000", "name the right file")),
        (b"a = " + b"[" * 5000, ("nested too deeply",)),
        (PLAIN.encode("utf-16"), ("not UTF-8",)),
    ],
    ids=["empty", "blank", "not UTF-8", "zeros", "huge", "deep", "UTF-16"],
)
def test_a_file_that_is_no_spec(
    data: bytes, words: tuple[str, ...], tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    spec = tmp_path / "asked.toml"
    spec.write_bytes(data)
    refused(synth(capsys, "design", spec, "--out", tmp_path / "made"), "asked.toml", *words)
    assert not (tmp_path / "made").exists()


def test_a_spec_that_is_not_there(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    refused(synth(capsys, "design", tmp_path / "no.toml"), "no.toml: no such file", "check the name")


def test_a_folder_for_a_spec(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    refused(synth(capsys, "design", tmp_path), "is a folder", "name the file in it")


def test_a_pipe_for_a_spec(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    os.mkfifo(tmp_path / "asked.toml")
    refused(synth(capsys, "design", tmp_path / "asked.toml"), "not a regular file")


def test_a_spec_that_may_not_be_read(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    spec = tmp_path / "asked.toml"
    spec.write_text(PLAIN)
    monkeypatch.setattr(os, "access", lambda *_: False)
    assert synth(capsys, "design", spec).status == 0  # the reading itself decides


def test_a_spec_that_cannot_be_read(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    spec = tmp_path / "asked.toml"
    spec.write_text(PLAIN)

    def denied(*_: object, **__: object) -> None:
        raise PermissionError(errno.EACCES, "Permission denied", str(spec))

    monkeypatch.setattr(Path, "open", denied)
    refused(synth(capsys, "design", spec), "asked.toml: cannot be read (Permission denied)")


# ------------------------------------------------------------------------------------------------ where to write


@pytest.fixture
def asked(tmp_path: Path) -> Path:
    (tmp_path / "asked.toml").write_text(PLAIN)
    return tmp_path / "asked.toml"


def test_a_folder_that_is_not_ours(asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    other = tmp_path / "photos"
    other.mkdir()
    (other / "cat.jpg").write_bytes(b"cat")
    refused(synth(capsys, "design", asked, "--out", other), "photos: is not a design folder", "cat.jpg", "--force")
    assert content(other) == {"cat.jpg": b"cat"}


def test_a_file_for_a_folder(asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "file").write_text("mine")
    for force in ((), ("--force",)):
        refused(synth(capsys, "design", asked, "--out", tmp_path / "file", *force), "is a file", "name another folder")
    assert (tmp_path / "file").read_text() == "mine"


def test_a_folder_below_a_file(asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "file").write_text("mine")
    refused(synth(capsys, "design", asked, "--out", tmp_path / "file" / "made"), "is a file", "name another folder")


def test_the_working_folder(
    asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    refused(synth(capsys, "design", asked, "--out", ".", "--force"), "is the working folder", "never replaced")
    assert [p.name for p in tmp_path.iterdir()] == ["asked.toml"]


def test_what_cannot_be_written_is_refused_before_anything_is_computed(
    asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    (tmp_path / "file").write_text("mine")
    monkeypatch.setattr("synth.api.plan", lambda *_: pytest.fail("computed"))
    refused(synth(capsys, "design", asked, "--out", tmp_path / "file"), "is a file")


def test_a_read_only_place(
    asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    real = os.access
    monkeypatch.setattr(os, "access", lambda path, mode: not mode & os.W_OK and real(path, mode))
    refused(synth(capsys, "design", asked, "--out", tmp_path / "made"), "cannot be written", "name another folder")
    assert not (tmp_path / "made").exists()


@pytest.mark.parametrize(
    ("code", "words"),
    [(errno.ENOSPC, ("No space left", "free space")), (errno.EROFS, ("Read-only", "name another folder"))],
)
@pytest.mark.parametrize("there_before", [False, True])
def test_a_disk_that_refuses(
    code: int,
    words: tuple[str, ...],
    there_before: bool,
    asked: Path,
    tmp_path: Path,
    capsys: pytest.CaptureFixture[str],
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    made = tmp_path / "made"
    if there_before:
        assert synth(capsys, "design", asked, "--out", made).status == 0
    before = content(made) if there_before else {}

    def full(_handle: int, _data: object) -> int:
        raise OSError(code, os.strerror(code))

    with monkeypatch.context() as patched:
        patched.setattr(os, "write", full)
        outcome = synth(capsys, "design", asked, "--out", made)
    refused(outcome, "made: the design folder cannot be written", *words)
    assert made.exists() == there_before
    assert content(made) == before
    assert sorted(p.name for p in tmp_path.iterdir()) == (["asked.toml", "made"] if there_before else ["asked.toml"])


def edit(made: Path) -> bytes:
    path = made / "design.json"
    text = path.read_text()
    start = text.index('"value": ', text.index('"parts"', text.index('"models"')))
    end = text.index(",", start)
    path.write_text(text[:start] + '"value": 1234.5' + text[end:])
    return path.read_bytes()


def test_a_folder_edited_by_hand_is_kept_unless_forced(
    asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    made = tmp_path / "made"
    assert synth(capsys, "design", asked, "--out", made).status == 0
    edited = edit(made)
    before = content(made)
    refused(synth(capsys, "design", asked, "--out", made), "made: its parts were edited by hand", "--force")
    assert content(made) == before
    assert synth(capsys, "design", asked, "--out", made, "--force").status == 0
    assert (made / "design.json").read_bytes() != edited
    assert synth(capsys, "design", asked, "--out", made).status == 0


def test_a_spec_refused_leaves_the_folder_of_an_earlier_one(
    asked: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    made = tmp_path / "made"
    assert synth(capsys, "design", asked, "--out", made).status == 0
    before = content(made)
    for text in (changed(('"1 V"', '"50 V"')), changed(('"3 kHz"', '"3 kohm"')), ""):
        asked.write_text(text)
        refused(synth(capsys, "design", asked, "--out", made, "--force"))
        assert content(made) == before


def test_check_of_what_is_no_design(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    refused(synth(capsys, "check", tmp_path / "none"), "there is no such folder", "`synth design`")
    refused(synth(capsys, "check", tmp_path), "holds no design.json")
    (tmp_path / "design.json").write_text("{}")
    refused(synth(capsys, "check", tmp_path), "design.json")
    (tmp_path / "design.json").write_text('{"version": 99}')
    refused(synth(capsys, "check", tmp_path), "version = 99: is newer", "update the program")
    (tmp_path / "design.json").write_bytes(b"\xff")
    refused(synth(capsys, "check", tmp_path), "not UTF-8")


def test_no_traceback_from_a_process_of_its_own(tmp_path: Path) -> None:
    (tmp_path / "asked.toml").write_text(changed(('"3 kHz"', '"130 kHz"')))
    outcome = process("design", "asked.toml", "--out", "made", folder=tmp_path)
    assert refused(outcome) == (
        'asked.toml, line 5: target.bandwidth = "130 kHz": must be at most twice the center frequency (120 kHz); '
        "lower it or raise target.center_frequency"
    )
    assert [p.name for p in tmp_path.iterdir()] == ["asked.toml"]
