"""Text from outside never becomes a command: not in a netlist, not in a bill, not in a folder edited by hand."""

from __future__ import annotations

import csv
import io
import json
import os
import subprocess
from dataclasses import replace
from pathlib import Path

import pytest

from synth import api, circuit
from synth.errors import CircuitError, FolderError, SpecError
from synth.output.bill import bill_csv
from tests.spice.comparison import DEMO, Designs
from tests.support.simulators import ngspice_program, run_ngspice, trouble

MARKER = "was_executed"
HOSTILE = {
    "control": "a\n.control\nshell touch {marker}\n.endc\n*",
    "carriage return": "a\r.control\rshell touch {marker}\r.endc\r*",
    "crlf": "a\r\n.control\r\nshell touch {marker}\r\n.endc\r\n",
    "form feed": "a\x0c.control\x0cshell touch {marker}\x0c.endc",
    "line separator": "a\u2028.control\u2028shell touch {marker}\u2028.endc\u0085.end",
    "executed comment": "#shell touch {marker}",
    "executed comment on its own line": "a\n*#shell touch {marker}\n*#quit",
    "include": "a\n.include /etc/passwd",
    "library": "a\n.lib /etc/passwd tt",
    "end": "a\n.end\n.control\nshell touch {marker}\n.endc",
    "continuation": "a\n+ 1 2 3\n.control\nshell touch {marker}\n.endc",
    "formula": "=cmd|' /C touch {marker}'!A0",
    "link": '=HYPERLINK("http://example.org/","x")',
    "path": "../../../../tmp/{marker}",
    "backquotes": "`touch {marker}` $(touch {marker}); touch {marker} | touch {marker}",
    "null": "a\x00.control\x00",
    "long": "x" * 5000 + "\n.control\nshell touch {marker}\n.endc",
}
hostile = pytest.mark.parametrize("title", HOSTILE.values(), ids=list(HOSTILE))


@pytest.fixture(scope="session")
def demo(designs: Designs) -> api.Design:
    folder = designs.folder(DEMO)
    assert folder is not None
    return api.load_design(folder)


def with_title(design: api.Design, title: str) -> api.Design:
    """The design with a title that no spec can hold, past all checks."""
    spec = replace(design.spec)
    object.__setattr__(spec, "title", title)
    return replace(design, record=replace(design.record, spec=spec))


@pytest.mark.spice
def test_a_newline_would_be_executed(tmp_path: Path) -> None:
    """Else the other tests show nothing."""
    marker = tmp_path / MARKER
    run_ngspice(f"* title\n* a\n.control\nshell touch {marker}\n.endc\nR1 a 0 1\nV1 a 0 1\n.op\n.end\n")
    assert marker.exists()


@hostile
def test_a_spec_refuses_more_than_one_line(demo: api.Design, title: str) -> None:
    title = title.format(marker=MARKER)
    if title.isprintable() and len(title) <= 200:
        assert replace(demo.spec, title=title).title == title
        return
    with pytest.raises(SpecError, match="title"):
        replace(demo.spec, title=title)


@pytest.mark.spice
@hostile
def test_a_title_stays_one_comment(demo: api.Design, title: str, tmp_path: Path) -> None:
    marker = tmp_path / MARKER
    text = api.netlist(with_title(demo, title.format(marker=marker)))
    plain = api.netlist(demo).splitlines()
    lines = text.split("\n")[:-1]
    assert text.splitlines() == lines
    assert text.isascii()
    assert len(lines) == len(plain)
    assert [k for k, (a, b) in enumerate(zip(lines, plain, strict=True)) if a != b] == [1]
    assert lines[1].startswith("* ")
    run = run_ngspice(text)
    assert not trouble(run.printed)
    assert run.named("AC")
    assert not marker.exists()
    assert not Path(MARKER).exists()


@pytest.mark.spice
@hostile
def test_any_comment_stays_one_comment(demo: api.Design, title: str, tmp_path: Path) -> None:
    marker = tmp_path / MARKER
    text = circuit.netlist_text(demo.network(), "title", [title.format(marker=marker)] * 2, 1e5)
    assert all(line.startswith("* ") for line in text.split("\n")[:4])
    assert not trouble(run_ngspice(text).printed)
    assert not marker.exists()


@hostile
def test_a_bill_has_no_formula(demo: api.Design, title: str) -> None:
    title = title.format(marker=MARKER)
    record = with_title(demo, title).record
    parts = tuple(
        replace(part, note=title, technology=title, rating=title) if part.kind == "resistor" else part
        for part in record.chain.parts
    )
    text = bill_csv(replace(record, chain=replace(record.chain, parts=parts)))
    rows = list(csv.reader(io.StringIO(text, newline="")))
    assert len(rows) == len(text.splitlines()) == len(text.split("\n")) - 1
    assert {len(row) for row in rows} == {len(rows[0])}
    for row in rows:
        for cell in row:
            assert not cell.lstrip().startswith(("=", "+", "-", "@")), cell


@pytest.mark.spice
@hostile
def test_a_report_of_a_hostile_title_has_no_control_characters(demo: api.Design, title: str) -> None:
    text = api.report(with_title(demo, title.format(marker=MARKER)))
    assert all(char.isprintable() for char in text.replace("\n", ""))
    assert all(len(line) <= 80 for line in text.splitlines())


@pytest.mark.parametrize("key", ["ref", "nodes", "stage", "role", "technology", "value"])
@pytest.mark.parametrize("text", ["x\n.control\nshell touch {marker}\n.endc", "x 0 1\n.include /etc/passwd"])
def test_a_folder_edited_by_hand_holds_no_other_line(designs: Designs, tmp_path: Path, key: str, text: str) -> None:
    """What would reach the netlist as an identifier is refused when the folder is read."""
    source = designs.folder(DEMO)
    assert source is not None
    document = json.loads((source / "design.json").read_text())
    text = text.format(marker=tmp_path / MARKER)
    document["parts"][0][key] = [text, "0"] if key == "nodes" else text
    folder = tmp_path / "edited"
    folder.mkdir()
    (folder / "design.json").write_text(json.dumps(document))
    with pytest.raises(FolderError, match=r"parts\[0\]|parts"):
        api.load_design(folder)


@pytest.mark.parametrize("name", ["x 0 1", "1k", "R1;shell", "*", "R1 $", "a=b", "R{{x}}", "..", "in", "nbias", "VSIG"])
def test_an_identifier_is_no_more_than_one(designs: Designs, tmp_path: Path, name: str) -> None:
    """A reference or node of one line either is refused or leaves the netlist's other lines as they were."""
    source = designs.folder(DEMO)
    assert source is not None
    for key in ("ref", "nodes"):
        document = json.loads((source / "design.json").read_text())
        part = document["parts"][1]
        part[key] = [name, "0"] if key == "nodes" else name
        if key == "ref":
            old = json.loads((source / "design.json").read_text())["parts"][1]["ref"]
            for stage in document["stages"]:
                stage["parts"] = [name if ref == old else ref for ref in stage["parts"]]
        folder = tmp_path / f"edited_{key}"
        folder.mkdir()
        (folder / "design.json").write_text(json.dumps(document))
        try:
            text = api.netlist(api.load_design(folder))
        except (FolderError, ValueError):
            continue
        fields = [line.split() for line in text.splitlines() if line[:1] in ("R", "C", "G")]
        assert all(len(one) == (6 if one[0].startswith("G") else 4) for one in fields), (key, name)


@pytest.mark.parametrize("name", ["gnd", "GND", "nbias", "N1", "U1_end1", "IN"])
def test_a_node_that_a_simulator_joins_with_another_gives_no_netlist(
    designs: Designs, tmp_path: Path, name: str
) -> None:
    """To a simulator `gnd` is ground and N1 is n1; the engine keeps them apart, so no netlist would be the chain."""
    source = designs.folder(DEMO)
    assert source is not None
    folder = tmp_path / "edited"
    folder.mkdir()
    (folder / "design.json").write_text((source / "design.json").read_text().replace('"s1m"', f'"{name}"'))
    with pytest.raises(CircuitError, match=r"the same as .* to a simulator; rename it"):
        api.netlist(api.load_design(folder))


def test_elements_that_a_simulator_joins_give_no_netlist(demo: api.Design) -> None:
    first, *others = demo.network().elements
    network = replace(demo.network(), elements=(first, replace(first, name=first.name.upper()), *others))
    with pytest.raises(CircuitError, match=r"the same as .* to a simulator; rename one of them"):
        circuit.netlist_text(network, "title", (), 1e5)


@pytest.mark.spice
def test_start_up_files_are_off(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A start-up file in the home or working folder of the person must not change what the tests see."""
    marker = tmp_path / MARKER
    (tmp_path / ".spiceinit").write_text(f"shell touch {marker}\n")
    monkeypatch.setenv("HOME", str(tmp_path))
    monkeypatch.chdir(tmp_path)
    netlist = "* title\nV1 a 0 1\nR1 a 0 1\n.op\n.end\n"
    run_ngspice(netlist)
    assert not marker.exists()
    (tmp_path / "a.cir").write_text(netlist)
    subprocess.run([ngspice_program(), "-b", "a.cir"], cwd=tmp_path, env=os.environ, capture_output=True, check=False)
    assert marker.exists()  # it would have been run
