"""What an import costs, and the example of the README."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import pytest

import synth
from tests.api.made import ROOT, environment

HEAVY = ("numpy", "scipy", "matplotlib", "control", "typer")


def loaded(statement: str) -> list[str]:
    code = f"import sys\n{statement}\nprint([m for m in {HEAVY} if m in sys.modules])"
    run = subprocess.run(
        [sys.executable, "-c", code], env=environment(), capture_output=True, text=True, check=True, timeout=60
    )
    return [name for name in HEAVY if f"'{name}'" in run.stdout]


def test_import_of_the_package_loads_nothing_heavy() -> None:
    assert loaded("import synth; dir(synth); synth.__version__; synth.SynthError") == []


def test_the_command_s_module_loads_nothing_that_computes() -> None:
    assert loaded("import synth.cli") == ["typer"]


def test_the_verbs_do_not_load_what_only_plots() -> None:
    assert not {"matplotlib", "control"} & set(loaded("import synth; synth.design, synth.load_spec"))


def test_every_public_name_is_there() -> None:
    assert set(synth.__all__) < set(dir(synth))
    for name in synth.__all__:
        assert getattr(synth, name) is not None


def test_a_name_that_is_not_there() -> None:
    with pytest.raises(AttributeError, match="no attribute 'nothing'"):
        _ = synth.nothing


def test_errors_are_value_errors() -> None:
    assert issubclass(synth.SynthError, ValueError)
    with pytest.raises(ValueError, match=r"no\.toml: no such file"):
        synth.load_spec("no.toml")


def python_blocks() -> list[str]:
    return re.findall(r"```python\n(.*?)```", (ROOT / "README.md").read_text(encoding="utf-8"), re.DOTALL)


def test_the_readme_has_a_python_example() -> None:
    assert python_blocks()


@pytest.mark.parametrize("block", python_blocks())
def test_the_readme_s_python_runs_and_says_what_it_shows(
    block: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Every line runs, in a folder of its own; a line that shows a value in its comment has that value."""
    (tmp_path / "designs").symlink_to(ROOT / "designs")
    monkeypatch.chdir(tmp_path)
    names: dict[str, object] = {}
    exec(compile(block, "README.md", "exec"), names)
    for line in block.splitlines():
        shown = re.fullmatch(r"(\S.*?)\s+# (True|False|[-\d.]+)", line)
        if shown:
            assert repr(eval(shown[1], names)) == shown[2], line
    if "save_design" in block:
        assert (tmp_path / "demo" / "design.json").is_file()
