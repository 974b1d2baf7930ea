"""Ascents planned with published models, to be compared: no table, no advice."""

from __future__ import annotations

from gasphys.ascent.equations import gradient_at_depth
from gasphys.ascent.planner import Plan, plan
from gasphys.ascent.rules import Loop, Rules

__all__ = ["Loop", "Plan", "Rules", "gradient_at_depth", "plan"]
