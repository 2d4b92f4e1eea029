"""Proposes chains, has them rounded and judged, and chooses."""

from __future__ import annotations

from synth.planning.planner import Plan, plan
from synth.planning.workshop import surroundings

__all__ = ["Plan", "plan", "surroundings"]
