"""What may be replaced, and what a refusal by the system leaves behind: nothing."""

from __future__ import annotations

import ctypes
import errno
import json
import logging
import os
import shutil
import stat
import tempfile
from pathlib import Path

import pytest

from synth.errors import FolderError
from synth.folder import DESIGN_FILE, check_target, read_design, swap, write_folder
from synth.folder.recovery import locate
from tests.folder.interrupted import contents, found, left_over

OLD, NEW = contents()


@pytest.fixture
def design(tmp_path: Path) -> Path:
    """A design folder as it was written."""
    folder = tmp_path / "design"
    write_folder(folder, OLD)
    return folder


def everything(folder: Path) -> dict[Path, bytes | None]:
    """Files with their content, and folders, below a folder."""
    return {file: file.read_bytes() if file.is_file() else None for file in folder.rglob("*")}


def refused(folder: Path, match: str, force: bool = False) -> None:
    """Neither checking nor writing goes through, and the folder stays as it is."""
    before = everything(folder)
    with pytest.raises(FolderError, match=match):
        check_target(folder, force)
    with pytest.raises(FolderError, match=match):
        write_folder(folder, NEW, force)
    assert everything(folder) == before
    assert not left_over(folder)


def test_a_folder_is_written_whole(tmp_path: Path) -> None:
    write_folder(tmp_path / "a" / "b" / "design", OLD)
    assert found(tmp_path / "a" / "b" / "design") == OLD
    assert not left_over(tmp_path / "a" / "b" / "design")
    assert read_design(tmp_path / "a" / "b" / "design").seed == 7


def test_a_design_that_was_not_edited_is_replaced(design: Path) -> None:
    check_target(design)
    write_folder(design, NEW)
    assert found(design) == NEW
    assert not left_over(design)


def test_an_empty_folder_is_taken(tmp_path: Path) -> None:
    (tmp_path / "empty").mkdir()
    check_target(tmp_path / "empty")
    write_folder(str(tmp_path / "empty"), NEW)
    assert found(tmp_path / "empty") == NEW


def test_parts_that_were_edited_by_hand_are_kept_without_force(design: Path) -> None:
    document = json.loads(OLD[DESIGN_FILE])
    document["parts"][1]["value"] = 12000
    (design / DESIGN_FILE).write_text(json.dumps(document))
    refused(design, "its parts were edited by hand; name another folder to keep them, or replace it with --force")
    check_target(design, force=True)
    write_folder(design, NEW, force=True)
    assert found(design) == NEW


def test_files_of_others_are_kept_without_force(design: Path) -> None:
    (design / "notes.txt").write_text("mine")
    refused(design, r"holds notes\.txt, not written by this program; move it elsewhere, or replace it with --force")
    for name in ("a", "b", "c", "d"):
        (design / name).write_text("mine")
    refused(design, r"holds a, b, c, \.\.\., not written by this program")
    write_folder(design, NEW, force=True)
    assert found(design) == NEW


def test_a_link_by_one_of_our_names_counts_as_of_others(design: Path, tmp_path: Path) -> None:
    (tmp_path / "spec.toml").write_text("mine")
    (design / "spec.toml").symlink_to(tmp_path / "spec.toml")
    refused(design, r"holds spec\.toml, not written by this program")
    write_folder(design, NEW, force=True)
    assert (tmp_path / "spec.toml").read_text() == "mine"


def test_a_folder_that_is_not_ours_is_kept_without_force(tmp_path: Path) -> None:
    folder = tmp_path / "foreign"
    folder.mkdir()
    (folder / "spec.toml").write_text("title")
    refused(folder, r"is not a design folder \(it holds spec\.toml\); name another folder, or replace it with --force")
    (folder / DESIGN_FILE).write_text("{")
    refused(folder, r"design\.json: is not JSON .* \(the folder is not replaced without --force\)")
    (folder / DESIGN_FILE).write_text('{"version": 2}')
    refused(folder, r"version = 2: is newer.* \(the folder is not replaced without --force\)")
    (folder / DESIGN_FILE).write_text('{"version": 1, "parts": []}')
    refused(folder, r"its design\.json is not one of ours; name another folder, or replace it with --force")
    write_folder(folder, NEW, force=True)
    assert found(folder) == NEW


def test_a_file_that_comes_out_the_same_is_not_lost(tmp_path: Path) -> None:
    """A person's spec, alone in the folder of its design, and later beside a table that it names."""
    folder = tmp_path / "mine"
    folder.mkdir()
    (folder / "spec.toml").write_bytes(b"title")
    with pytest.raises(FolderError, match="is not a design folder"):
        check_target(folder, files={"spec.toml": b"other"})
    check_target(folder, files={"spec.toml": b"title"})
    write_folder(folder, {**OLD, "spec.toml": b"title"})
    (folder / "coil.csv").write_bytes(b"1,2")
    refused(folder, r"holds coil\.csv, not written")
    write_folder(folder, {**NEW, "spec.toml": b"title", "coil.csv": b"1,2"})
    assert found(folder) == {**NEW, "spec.toml": b"title", "coil.csv": b"1,2"}


@pytest.mark.parametrize("force", [False, True])
def test_what_is_no_folder_is_never_replaced(tmp_path: Path, design: Path, force: bool) -> None:
    (tmp_path / "file").write_text("mine")
    refused(tmp_path / "file", "file: is a file, which is not replaced; name another folder", force)
    (tmp_path / "link").symlink_to(design)
    refused(tmp_path / "link", "link: is a symbolic link, which is not replaced", force)
    (tmp_path / "dangling").symlink_to(tmp_path / "nowhere")
    refused(tmp_path / "dangling", "dangling: is a symbolic link, which is not replaced", force)
    assert found(design) == OLD
    assert (tmp_path / "file").read_text() == "mine"
    os.mkfifo(tmp_path / "pipe")
    refused(tmp_path / "pipe", "pipe: is a file, which is not replaced", force)
    refused(tmp_path / "file" / "below", "file is a file, no folder fits below it; name another folder", force)


@pytest.mark.parametrize("force", [False, True])
def test_folders_that_others_depend_on_are_never_replaced(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, force: bool
) -> None:
    """All of them stand in for the real ones, so that a mistake here costs nothing."""
    for name in ("home", "work", "temporary"):
        (tmp_path / name / "inner").mkdir(parents=True)
    monkeypatch.setenv("HOME", str(tmp_path / "home" / "inner"))
    monkeypatch.setattr(tempfile, "tempdir", str(tmp_path / "temporary" / "inner"))
    monkeypatch.chdir(tmp_path / "work" / "inner")
    for name, what in (
        ("home", "the home folder"),
        ("work", "the working folder"),
        ("temporary", "the folder of temporary files"),
    ):
        refused(tmp_path / name / "inner", f"inner: is {what}, which is never replaced", force)
        refused(tmp_path / name, f"{name}: contains {what}, which is never replaced", force)
    refused(Path("."), "inner: is the working folder", force)
    refused(Path(".."), "work: contains the working folder", force)
    refused(Path("../../work/inner"), "inner: is the working folder", force)


@pytest.mark.parametrize("force", [False, True])
def test_a_folder_with_folders_below_is_never_replaced(design: Path, force: bool) -> None:
    (design / "board" / "rev A").mkdir(parents=True)
    with pytest.raises(FolderError, match="holds the folder board, a design folder has none and it is never replaced"):
        check_target(design, force)
    with pytest.raises(FolderError, match="holds the folder board"):
        write_folder(design, NEW, force)
    assert (design / "board" / "rev A").is_dir()
    assert not left_over(design)


@pytest.mark.parametrize("force", [False, True])
def test_shared_and_foreign_folders_are_never_replaced(
    design: Path, monkeypatch: pytest.MonkeyPatch, force: bool
) -> None:
    design.chmod(0o1777)
    refused(design, "is a folder that several people share, which is never replaced", force)
    design.chmod(0o755)
    monkeypatch.setattr(os, "geteuid", lambda: os.stat(design).st_uid + 1)
    refused(design, "belongs to another person, which is never replaced", force)
    monkeypatch.undo()
    monkeypatch.setattr(os.path, "ismount", lambda path: Path(path) == design)
    refused(design, "is the root of a file system, which is never replaced", force)


def test_folders_of_the_system_are_never_replaced() -> None:
    """Asked only: nothing is written here."""
    with pytest.raises(FolderError, match="which is never replaced"):
        check_target("/", force=True)
    with pytest.raises(FolderError, match="/dev: is a folder of the system, which is never replaced"):
        check_target("/dev", force=True)


def test_a_working_folder_that_was_deleted_is_no_harm(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "gone").mkdir()
    monkeypatch.chdir(tmp_path / "gone")
    (tmp_path / "gone").rmdir()
    write_folder(tmp_path / "design", OLD)
    write_folder(tmp_path / "design", NEW)
    with pytest.raises(FolderError, match=r"cannot be followed: .*No such file or directory.*; name another folder"):
        check_target("design")


@pytest.mark.parametrize("name", ["", ".", "..", "a/b", "/a", "a\nb", "a\0b"])
def test_a_name_that_is_no_plain_file_name_is_refused(tmp_path: Path, name: str) -> None:
    with pytest.raises(FolderError, match="is no plain file name; a design folder has no folders below it"):
        write_folder(tmp_path / "design", {**OLD, name: b""})
    assert os.listdir(tmp_path) == []


def test_a_folder_without_a_design_is_refused(tmp_path: Path) -> None:
    with pytest.raises(FolderError, match=r"a design folder without design\.json is none"):
        write_folder(tmp_path / "design", {"bom.csv": b""})


@pytest.mark.parametrize(
    ("name", "match"),
    [
        ("x" * 256, "the design folder cannot be written: File name too long; name another folder"),
        ("a\0b", r"a\\x00b: the design folder cannot be written: embedded null byte; name another folder"),
    ],
)
def test_a_name_that_the_system_refuses(tmp_path: Path, name: str, match: str) -> None:
    for force in (False, True):
        with pytest.raises(FolderError, match=match):
            check_target(tmp_path / name, force)
        with pytest.raises(FolderError, match=match):
            write_folder(tmp_path / name, OLD, force)


def test_the_longest_name_of_the_system_is_written(tmp_path: Path) -> None:
    for content in (OLD, NEW):
        write_folder(tmp_path / ("x" * 255), content)
    assert os.listdir(tmp_path) == ["x" * 255]


def test_a_loop_of_links_is_refused(tmp_path: Path) -> None:
    (tmp_path / "loop").symlink_to("loop")
    with pytest.raises(FolderError, match=r"loop.*; name another folder"):
        check_target(tmp_path / "loop" / "design")


@pytest.mark.parametrize("start", [None, OLD])
@pytest.mark.parametrize(
    ("call", "code", "match"),
    [
        ("write", errno.ENOSPC, r"cannot be written: No space left on device; free space on the disk"),
        ("fsync", errno.EDQUOT, r"cannot be written: Disk quota exceeded; free space on the disk"),
        ("open", errno.ENOSPC, r"cannot be written: No space left on device \(bom\.csv\); free space on the disk"),
        ("mkdir", errno.EROFS, r"cannot be written: Read-only file system"),
    ],
)
def test_what_the_system_refuses_leaves_nothing(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    start: dict[str, bytes] | None,
    call: str,
    code: int,
    match: str,
) -> None:
    target = tmp_path / "new" / "design" if start is None else tmp_path / "design"
    if start is not None:
        write_folder(target, start)
    before = sorted(tmp_path.rglob("*"))
    genuine = getattr(os, call)

    def fails(*arguments: object, **options: object) -> object:
        if call == "open" and not str(arguments[0]).endswith("bom.csv"):
            return genuine(*arguments, **options)
        raise OSError(code, os.strerror(code), arguments[0] if call == "open" else None)

    monkeypatch.setattr(os, call, fails)
    with pytest.raises(FolderError, match=rf"{target}: the design folder {match}"):
        write_folder(target, NEW)
    monkeypatch.undo()
    assert sorted(tmp_path.rglob("*")) == before
    assert start is None or found(target) == start


def test_an_interruption_from_the_keyboard_leaves_nothing(design: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def interrupted(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(os, "fsync", interrupted)
    with pytest.raises(KeyboardInterrupt):
        write_folder(design, NEW)
    assert found(design) == OLD
    assert not left_over(design)


@pytest.mark.skipif(os.geteuid() == 0, reason="the superuser may write anywhere")
def test_a_parent_that_may_not_be_written_is_named(tmp_path: Path) -> None:
    tmp_path.chmod(0o500)
    refused(tmp_path / "design", "cannot be written: permission denied; name another folder")
    tmp_path.chmod(0o700)


def test_a_parent_that_may_not_be_written_is_named_beforehand(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(os, "access", lambda *_: False)
    with pytest.raises(FolderError, match=f"{tmp_path} cannot be written: permission denied; name another folder"):
        check_target(tmp_path / "a" / "design")


@pytest.mark.skipif(not Path("/proc/self").exists(), reason="needs /proc")
def test_a_file_system_without_files_is_named() -> None:
    with pytest.raises(FolderError, match=r"/proc/.*/design: .*; name another folder"):
        write_folder("/proc/self/design", OLD)


def test_a_folder_that_cannot_be_listed_is_named(design: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    genuine = os.scandir

    def denied(path: Path) -> object:
        if Path(path) == design:
            raise PermissionError(13, "Permission denied", str(path))
        return genuine(path)

    monkeypatch.setattr(os, "scandir", denied)
    with pytest.raises(FolderError, match="design: the design folder cannot be written: Permission denied; name ano"):
        check_target(design)


def test_an_edit_while_the_new_folder_is_written_is_kept(design: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    genuine = swap._fill

    def slow(*arguments: object) -> None:
        genuine(*arguments)  # type: ignore[arg-type]
        (design / "notes.txt").write_text("mine")

    monkeypatch.setattr(swap, "_fill", slow)
    with pytest.raises(FolderError, match=r"holds notes\.txt"):
        write_folder(design, NEW)
    assert (design / "notes.txt").read_text() == "mine"
    assert not left_over(design)


def test_an_exchange_that_fails_otherwise_is_named(design: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def fails(*_: object) -> int:
        ctypes.set_errno(errno.EIO)
        return -1

    monkeypatch.setattr(swap, "_renameat2", lambda: fails)
    with pytest.raises(FolderError, match="design: the design folder cannot be written: Input/output error"):
        write_folder(design, NEW)
    assert found(design) == OLD
    assert not left_over(design)


@pytest.mark.parametrize("code", [errno.ENOSYS, errno.EINVAL])
def test_a_file_system_without_exchange_is_served(design: Path, monkeypatch: pytest.MonkeyPatch, code: int) -> None:
    def fails(*_: object) -> int:
        ctypes.set_errno(code)
        return -1

    monkeypatch.setattr(swap, "_renameat2", lambda: fails)
    write_folder(design, NEW)
    assert found(design) == NEW
    assert not left_over(design)


def test_an_old_folder_that_cannot_be_deleted_is_only_logged(
    design: Path, monkeypatch: pytest.MonkeyPatch, caplog: pytest.LogCaptureFixture
) -> None:
    def fails(*_: object) -> None:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(shutil, "rmtree", fails)
    with caplog.at_level(logging.WARNING):
        write_folder(design, NEW)
    assert found(design) == NEW
    assert "could not be removed: Permission denied; remove it by hand" in caplog.text


def test_a_private_folder_stays_private(design: Path) -> None:
    design.chmod(0o700)
    write_folder(design, NEW)
    assert stat.S_IMODE(design.stat().st_mode) == 0o700


def test_a_path_through_links_is_followed_to_its_parent(tmp_path: Path, design: Path) -> None:
    (tmp_path / "way").symlink_to(tmp_path)
    write_folder(tmp_path / "way" / "design", NEW)
    assert found(design) == NEW
    assert locate(tmp_path / "way" / "design") == design
