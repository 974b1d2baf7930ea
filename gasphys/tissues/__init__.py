"""Dissolved inert gas: published models on the same exposure, what each holds and what each tolerates."""

from __future__ import annotations

from gasphys.tissues.equations import (
    altitude_stop_depth,
    alveolar_inert_pressure,
    arterial_inert_pressure,
    ceiling_pressure,
    exercise_half_time,
    gradient_fraction,
    intercept_from_surfacing,
    limit_fraction,
    linear_tissue_pressure,
    loop_alveolar_inert_pressure,
    m_value,
    mixed_m_value_a,
    mixed_m_value_b,
    oxygen_window,
    sea_level_equivalent_depth,
    slip_flow,
    supersaturation_ratio,
    time_to_tissue_pressure,
    tissue_pressure,
    uptake_share,
    washout_threshold,
)
from gasphys.tissues.model import tensions
from gasphys.tissues.others import counterdiffusion, prebreathe, window
from gasphys.tissues.sets import TissueSet, load, models
from gasphys.tissues.times import no_stop_time, residual_time, time_to_fly

__all__ = [
    "TissueSet",
    "altitude_stop_depth",
    "alveolar_inert_pressure",
    "arterial_inert_pressure",
    "ceiling_pressure",
    "counterdiffusion",
    "exercise_half_time",
    "gradient_fraction",
    "intercept_from_surfacing",
    "limit_fraction",
    "linear_tissue_pressure",
    "load",
    "loop_alveolar_inert_pressure",
    "m_value",
    "mixed_m_value_a",
    "mixed_m_value_b",
    "models",
    "no_stop_time",
    "oxygen_window",
    "prebreathe",
    "residual_time",
    "sea_level_equivalent_depth",
    "slip_flow",
    "supersaturation_ratio",
    "tensions",
    "time_to_fly",
    "time_to_tissue_pressure",
    "tissue_pressure",
    "uptake_share",
    "washout_threshold",
    "window",
]
