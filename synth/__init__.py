"""Turns a requirement for measuring a small single-frequency signal into an analog chain of real parts, with proof.

    import synth
    chain = synth.design(synth.load_spec("spec.toml"))
    chain.meets_spec, chain.response([100e3]), chain.noise([100e3]).density

Names are loaded when first used, so that `import synth` costs nothing.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from synth.api import (
        Design,
        check,
        design,
        load_design,
        load_spec,
        netlist,
        parse_spec,
        save_design,
        starter_spec,
    )
    from synth.errors import SynthError

__version__ = "0.1.0"
__all__ = [
    "Design",
    "SynthError",
    "check",
    "design",
    "load_design",
    "load_spec",
    "netlist",
    "parse_spec",
    "save_design",
    "starter_spec",
]


def __getattr__(name: str) -> object:
    if name in __all__:
        module = importlib.import_module("synth.errors" if name == "SynthError" else "synth.api")
        return getattr(module, name)
    raise AttributeError(f"module 'synth' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted([*__all__, "__version__"])
