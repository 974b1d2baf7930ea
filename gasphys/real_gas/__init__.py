"""Breathing gas as it is: density at any pressure, what a cylinder holds, viscosity and heat."""

from gasphys.real_gas.cylinders import cylinder_content, cylinder_pressure, free_gas_volume
from gasphys.real_gas.data import Pair, pairs
from gasphys.real_gas.equations import (
    compressibility,
    density,
    humid_density,
    pressure_at_density,
    reference_density,
    uncertainty,
)
from gasphys.real_gas.ideal import ideal_density, mixture_molar_mass
from gasphys.real_gas.transport import (
    diffusivity,
    heat_capacity,
    reynolds_number,
    thermal_conductivity,
    viscosity,
)
from gasphys.real_gas.virial import fifth_virial, fourth_virial, second_virial, third_virial

__all__ = [
    "Pair",
    "compressibility",
    "cylinder_content",
    "cylinder_pressure",
    "density",
    "diffusivity",
    "fifth_virial",
    "fourth_virial",
    "free_gas_volume",
    "heat_capacity",
    "humid_density",
    "ideal_density",
    "mixture_molar_mass",
    "pairs",
    "pressure_at_density",
    "reference_density",
    "reynolds_number",
    "second_virial",
    "thermal_conductivity",
    "third_virial",
    "uncertainty",
    "viscosity",
]
