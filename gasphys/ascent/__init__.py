"""Ascents planned with published models, to be compared: no table, no advice."""

from __future__ import annotations

from gasphys.ascent.comparing import Comparison, compare_ascents
from gasphys.ascent.equations import gradient_at_depth
from gasphys.ascent.following import allowed_from, control_path
from gasphys.ascent.planner import Plan, plan
from gasphys.ascent.rules import Breaks, Loop, Rules
from gasphys.ascent.sheet import ascent_sheet
from gasphys.ascent.texts import comparison_text, leave_at_list, plan_csv, save_plan

__all__ = [
    "Breaks",
    "Comparison",
    "Loop",
    "Plan",
    "Rules",
    "allowed_from",
    "ascent_sheet",
    "compare_ascents",
    "comparison_text",
    "control_path",
    "gradient_at_depth",
    "leave_at_list",
    "plan",
    "plan_csv",
    "save_plan",
]
