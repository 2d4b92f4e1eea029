"""Proposes chains, has them rounded and judged, and chooses."""

from __future__ import annotations

from synth.planning.drawer import plan_from_drawer
from synth.planning.planner import Plan, plan
from synth.planning.workshop import surroundings

__all__ = ["Plan", "plan", "plan_from_drawer", "surroundings"]
