"""Joint choice of E-series values against the real amplifier."""

from __future__ import annotations

from synth.rounding.gain import chain_gain, damped, gain_draft, trim_chain
from synth.rounding.section import Section, round_section

__all__ = ["Section", "chain_gain", "damped", "gain_draft", "round_section", "trim_chain"]
