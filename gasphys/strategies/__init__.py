"""Strategies compared: every candidate of a space by several objectives, within hard limits."""

from __future__ import annotations

from gasphys.strategies.dives import Dives, Planned
from gasphys.strategies.dominance import front, why
from gasphys.strategies.explorer import explore
from gasphys.strategies.objectives import (
    Objective,
    cost,
    gas_left,
    gas_volume,
    lost_gas,
    lost_gas_left,
    overstay_chance,
    overstay_margin,
)

__all__ = [
    "Dives",
    "Objective",
    "Planned",
    "cost",
    "explore",
    "front",
    "gas_left",
    "gas_volume",
    "lost_gas",
    "lost_gas_left",
    "overstay_chance",
    "overstay_margin",
    "why",
]
