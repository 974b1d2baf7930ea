"""Bubbles: nuclei of varying permeability, growth, counterdiffusion, grades, rates out of saturation.

Of ascents planned with a bubble model, :data:`EVIDENCE` tells what the one large human trial found.
"""

from __future__ import annotations

from gasphys.bubbles.dissolution import dissolution_time
from gasphys.bubbles.equations import (
    adjusted_crushing_pressure,
    boyle_pressure,
    bubble_pressure,
    closed_nucleus_pressure,
    closed_nucleus_radius,
    composition_rate,
    counterdiffusion_peak_time,
    counterdiffusion_ratio,
    counterdiffusion_tension,
    critical_radius,
    critical_volume_gradient,
    crushed_radius,
    expanded_gradient,
    gas_inflow,
    minimum_gradient,
    mixed_gradient,
    perfusion_boundary,
    quasi_steady_dissolution_time,
    regenerated_radius,
    squared_radius_rate,
    surface_excess_time,
    trapped_gas_pressure,
    unstirred_boundary,
)
from gasphys.bubbles.gas_nuclei import first_supersaturated_depth, nuclei
from gasphys.bubbles.grades import (
    KISMAN_MASUREL,
    Grade,
    bubble_grades,
    kisman_masurel_grade,
    median_grade,
)
from gasphys.bubbles.growing_bubble import TissueGas, growth
from gasphys.bubbles.model_choices import (
    EVIDENCE,
    VaryingPermeability,
    bubble_model,
    models,
    varying_permeability,
)
from gasphys.bubbles.saturation import saturation_travel

__all__ = [
    "EVIDENCE",
    "KISMAN_MASUREL",
    "Grade",
    "TissueGas",
    "VaryingPermeability",
    "adjusted_crushing_pressure",
    "boyle_pressure",
    "bubble_grades",
    "bubble_model",
    "bubble_pressure",
    "closed_nucleus_pressure",
    "closed_nucleus_radius",
    "composition_rate",
    "counterdiffusion_peak_time",
    "counterdiffusion_ratio",
    "counterdiffusion_tension",
    "critical_radius",
    "critical_volume_gradient",
    "crushed_radius",
    "dissolution_time",
    "expanded_gradient",
    "first_supersaturated_depth",
    "gas_inflow",
    "growth",
    "kisman_masurel_grade",
    "median_grade",
    "minimum_gradient",
    "mixed_gradient",
    "models",
    "nuclei",
    "perfusion_boundary",
    "quasi_steady_dissolution_time",
    "regenerated_radius",
    "saturation_travel",
    "squared_radius_rate",
    "surface_excess_time",
    "trapped_gas_pressure",
    "unstirred_boundary",
    "varying_permeability",
]
