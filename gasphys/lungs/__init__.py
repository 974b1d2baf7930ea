"""Gas on its way into the lungs, ventilation, and how much of it work takes."""

from __future__ import annotations

from gasphys.lungs.equations import (
    alveolar_pco2,
    alveolar_pn2,
    alveolar_po2,
    alveolar_ventilation,
    alveolar_ventilation_at_pco2,
    anatomical_dead_space,
    bohr_dead_space_fraction,
    enghoff_dead_space_fraction,
    inspired_pco,
    inspired_pco2,
    inspired_pn2,
    inspired_po2,
    water_vapor_pressure,
)
from gasphys.lungs.exercise import exercise_o2_uptake

__all__ = [
    "alveolar_pco2",
    "alveolar_pn2",
    "alveolar_po2",
    "alveolar_ventilation",
    "alveolar_ventilation_at_pco2",
    "anatomical_dead_space",
    "bohr_dead_space_fraction",
    "enghoff_dead_space_fraction",
    "exercise_o2_uptake",
    "inspired_pco",
    "inspired_pco2",
    "inspired_pn2",
    "inspired_po2",
    "water_vapor_pressure",
]
