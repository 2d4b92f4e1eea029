"""Judges any chain against any spec."""

from __future__ import annotations

from synth.verification.figures import nominal_band
from synth.verification.headroom import rails
from synth.verification.judge import MARGIN_SPAN, match_pairs, verify
from synth.verification.requirements import PHASE_MARGIN, relative_margin

__all__ = ["MARGIN_SPAN", "PHASE_MARGIN", "match_pairs", "nominal_band", "rails", "relative_margin", "verify"]
