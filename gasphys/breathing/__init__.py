"""Breathing dense gas: mechanics, what it leaves room for, breathing loops, heat."""

from __future__ import annotations

from gasphys.breathing import equations as _equations
from gasphys.breathing.along_exposure import effort, gas_effort, heat_loss
from gasphys.breathing.equations import *  # noqa: F403
from gasphys.breathing.loop_model import (
    BreathKeyed,
    ClosedCircuit,
    ConstantFlow,
    ConstantRatio,
    breathed_from,
    loop_oxygen,
)
from gasphys.breathing.pressure_volume import (
    apparatus_limits,
    compare_apparatus,
    external_work,
    read_pressure_volume,
)

__all__ = [
    "BreathKeyed",
    "ClosedCircuit",
    "ConstantFlow",
    "ConstantRatio",
    "apparatus_limits",
    "breathed_from",
    "compare_apparatus",
    "effort",
    "external_work",
    "gas_effort",
    "heat_loss",
    "loop_oxygen",
    "read_pressure_volume",
    *_equations.__all__,
]
