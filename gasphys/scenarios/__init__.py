"""What if: many inputs at once, how sure the answers are, and which unknown matters most."""

from __future__ import annotations

from gasphys.scenarios.distributions import Choice, LogNormal, Normal, Triangular, Uniform
from gasphys.scenarios.drawing import each, grid, sample
from gasphys.scenarios.sensitivity import elementary_effects, ranking_text, sobol
from gasphys.scenarios.sweeps import sweep
from gasphys.scenarios.uncertainty import bands, crossing_chance, propagate, tissue_limits, variance_split

__all__ = [
    "Choice",
    "LogNormal",
    "Normal",
    "Triangular",
    "Uniform",
    "bands",
    "crossing_chance",
    "each",
    "elementary_effects",
    "grid",
    "propagate",
    "ranking_text",
    "sample",
    "sobol",
    "sweep",
    "tissue_limits",
    "variance_split",
]
