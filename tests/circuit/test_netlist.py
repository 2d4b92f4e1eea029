"""The netlist as text: what may stand in it, and that it is the circuit."""

from __future__ import annotations

import re

import numpy as np
import pytest

from synth import circuit
from synth.circuit.network import NoiseSource
from synth.spec import Rolloff, Sensor
from tests.support.networks import (
    NUMBER,
    Board,
    check_netlist_is_the_network,
    gain_chain,
    random_chain,
    section_chain,
    stray_op_amp,
)

NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]*\Z|0\Z")
NODES = {"R": 2, "C": 2, "V": 2, "D": 2, "G": 4, "F": 2}


def netlist(title: str = "title", comments: tuple[str, ...] = (), with_noise: bool = True, slope: float = 0.0) -> str:
    model = stray_op_amp(current_noise_slope=slope)
    sensor = Sensor(
        scale=20.0, input_unit="A", resistance=25.0, inductance=1e-4, rolloff=(Rolloff("high-pass", corner=48e3),)
    )
    network = circuit.build_network(gain_chain(20.0, model, 100e3, sensor))
    return circuit.netlist_text(network, title, comments, 100e3, with_noise=with_noise)


@pytest.mark.parametrize("seed", range(4))
def test_read_back_it_is_the_circuit(seed: int) -> None:
    check_netlist_is_the_network(random_chain(seed, 100e3), 100e3)


def test_chains_read_back_are_their_circuits() -> None:
    check_netlist_is_the_network(circuit.build_network(gain_chain(20.0, stray_op_amp(), 10e3)), 10e3)
    section = section_chain(model=stray_op_amp(), resistor_stray=4e-14, loss_tangent=1e-3)
    check_netlist_is_the_network(circuit.build_network(section), 10e3)


@pytest.mark.parametrize("slope", [0.0, 1e-20])
def test_elements_hold_identifiers_and_plain_numbers_only(slope: float) -> None:
    names = set()
    for line in netlist(slope=slope).splitlines():
        if not line or line[0] in "*.":
            continue
        name, *rest = line.split()
        assert NAME.match(name)
        assert name.upper() not in names
        names.add(name.upper())
        count = NODES[name[0].upper()]
        nodes, rest = rest[:count], rest[count:]
        assert all(NAME.match(node) for node in nodes)
        if name[0].upper() == "V":
            assert rest[0] == "DC"
            rest = [word for word in rest if word not in ("DC", "AC")]
        elif name[0].upper() == "F":
            assert rest.pop(0).upper() in names or rest
        elif name[0].upper() == "D":
            assert re.fullmatch(r"DN\d+", rest.pop(0))
            rest = [rest[0].removeprefix("temp=")]
        assert rest
        assert all(NUMBER.match(word) for word in rest), line


def test_controlled_sources_name_existing_sources() -> None:
    lines = [line.split() for line in netlist(slope=1e-20).splitlines() if line and line[0] not in "*."]
    sources = {line[0] for line in lines if line[0].startswith("V")}
    senses = {line[3] for line in lines if line[0].startswith("F")}
    assert senses
    assert senses <= sources


def test_dot_lines() -> None:
    lines = [line for line in netlist().splitlines() if line.startswith(".")]
    assert [line.split()[0] for line in lines] == [".model", ".model", ".options", ".ac", ".noise", ".end"]
    assert lines[3] == ".ac dec 60 100 100000000"
    assert lines[4] == ".noise v(out) VSIG dec 60 100 100000000"
    assert "temp=27" in lines[2].split()
    for line in lines[:2]:
        found = re.fullmatch(r"\.model DN\d+ D\(IS=(\S+) N=1 KF=(\S+) AF=1\)", line)
        assert found
        assert NUMBER.match(found[1])
        assert NUMBER.match(found[2])


def test_the_source_is_one_input_unit() -> None:
    assert "VSIG in 0 DC 0 AC 1" in netlist().splitlines()


def test_every_part_appears() -> None:
    words = set(netlist().split())
    assert {"C1", "R1", "R2", "R3"} <= words
    assert any(word.startswith("GU1_gm") for word in words)


def test_noise_generators_only_where_wanted() -> None:
    with_noise, without = netlist(), netlist(with_noise=False)
    for mark in ("VNOISE", ".noise", ".model", "DU1_en1", "FU1_ip1"):
        assert mark in with_noise
        assert mark not in without
    assert set(without.splitlines()) - set(with_noise.splitlines()) == set()


def test_only_noisy_conductances_are_resistors() -> None:
    """A resistor makes noise in a simulator; the inside of an amplifier must not."""
    board = Board()
    board.resistor("R1", "in", "out", 1e3)
    board.resistor("R2", "out", "0", 1e3, noisy=False)
    text = circuit.netlist_text(board.network(), "t", (), 1e3)
    assert [line for line in text.splitlines() if line[:1] == "R"] == ["R1 in out 1000"]
    assert "GR2 out 0 out 0 0.001" in text


def test_noise_sources_scale_the_diodes() -> None:
    """Two diodes give 4 q I; the current-controlled gain is white over its root, KF = 2 q fc (design guidance)."""
    from synth.circuit.netlist import PAIR_DENSITY

    board = Board()
    board.resistor("R1", "in", "out", 1e3)
    board.noise.append(NoiseSource("x", ("0", "out"), 2e-12, 300.0))
    lines = circuit.netlist_text(board.network(), "t", (), 1e3).splitlines()
    gains = {line.split()[0]: line.split() for line in lines if line.startswith("F")}
    assert gains["Fx1"][1:3] == ["0", "out"]
    assert gains["Fx2"][1:3] == ["out", "0"]
    assert float(gains["Fx1"][4]) == pytest.approx(2e-12 / PAIR_DENSITY, rel=1e-9)
    flicker = next(re.search(r"KF=(\S+)", line) for line in lines if line.startswith(".model"))
    assert flicker
    assert float(flicker[1]) == pytest.approx(2 * 1.602176634e-19 * 300.0, rel=1e-9)


@pytest.mark.parametrize(
    "title",
    [
        "line\n.control\nshell rm\n.endc",
        "carriage\r\nreturn",
        "tab\tand\x00null\x1b[31m",
        "Messgerät µ 測定",
        "\u2028.end\x85.end\v.end",
        "",
        "x" * 500,
    ],
)
def test_a_title_is_one_comment_line(title: str) -> None:
    plain, got = netlist("title", ("note",)), netlist(title, (title,))
    assert got.isascii()
    assert len(got.split("\n")) == len(plain.split("\n")) == len(got.splitlines()) + 1
    assert got.splitlines()[1].startswith("* ")
    changed = [line for line, other in zip(got.split("\n"), plain.split("\n"), strict=True) if line != other]
    assert len(changed) == 2
    assert all(line.startswith("* ") and len(line) <= 102 for line in changed)
    assert re.fullmatch(r"[ -~]*", circuit.comment_text(title))


def test_numbers_keep_twelve_digits() -> None:
    board = Board()
    board.resistor("R1", "in", "out", 1 / 3)
    board.capacitor("C1", "out", "0", 1.234567890123e-13)
    text = circuit.netlist_text(board.network(), "t", (), 1e3)
    values = [float(line.split()[-1]) for line in text.splitlines() if line[:2] in ("R1", "C1")]
    np.testing.assert_allclose(values, [1 / 3, 1.234567890123e-13], rtol=1e-11)
