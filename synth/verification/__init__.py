"""Judges any chain against any spec."""

from __future__ import annotations

from synth.verification.figures import nominal_band
from synth.verification.headroom import rails
from synth.verification.judge import match_pairs, verify
from synth.verification.requirements import relative_margin

__all__ = ["match_pairs", "nominal_band", "rails", "relative_margin", "verify"]
