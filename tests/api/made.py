"""Designs that several tests look at, each made once: the specs they come from are small variations of one."""

from __future__ import annotations

import functools
import os
import sys
from pathlib import Path

import synth
from synth import api
from synth.spec import Spec

ROOT = Path(__file__).parents[2]
PICKUP = ROOT / "designs" / "pickup" / "spec.toml"
PLAIN = """\
format = 1
title = "Channel"
[target]
center_frequency = "60 kHz"
bandwidth = "3 kHz"
full_scale = "2 uA"
smallest = "100 nA"
output = "1 V"
[sensor]
scale = "20 mV/mA"
resistance = "25 ohm"
[supply]
positive = "5 V"
negative = "-5 V"
"""


def changed(*swaps: tuple[str, str], target: str = "", sensor: str = "", end: str = "") -> str:
    """The plain spec with texts exchanged and lines added to [target], [sensor] and at the end."""
    text = PLAIN
    for old, new in swaps:
        assert old in text, old
        text = text.replace(old, new)
    text = text.replace("[sensor]", f"{target}\n[sensor]" if target else "[sensor]")
    return text.replace("[supply]", f"{sensor}\n[supply]" if sensor else "[supply]") + end


def spec_of(text: str) -> Spec:
    """The spec in a text, from no file."""
    return api.parse_spec(text, "given.toml")


@functools.cache
def design_of(text: str) -> api.Design:
    """The design for a text."""
    return api.design(spec_of(text), builds=0)


@functools.cache
def pickup() -> api.Design:
    """The design of the committed example."""
    return api.design(api.load_spec(PICKUP), builds=0)


def environment(**more: str) -> dict[str, str]:
    """An environment in which another Python finds this very package."""
    path = [str(Path(synth.__file__).parents[1]), os.environ.get("PYTHONPATH", "")]
    kept = {name: value for name, value in os.environ.items() if not name.startswith(("COLUMNS", "FORCE_COLOR"))}
    return {**kept, "PYTHONPATH": os.pathsep.join(p for p in path if p), **more}


COMMAND = (sys.executable, "-c", "from synth.cli import main; main()")
