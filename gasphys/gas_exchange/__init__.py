"""From alveolar gas to arterial and venous blood, for a person along an exposure."""

from __future__ import annotations

from gasphys.blood.circulation import arterial_po2_from_shunt, shunt_at_arterial_po2
from gasphys.gas_exchange.carbon_monoxide import carboxyhemoglobin
from gasphys.gas_exchange.equations import (
    alveolar_gas_pressure,
    arterial_po2_from_ratio,
    gas_transfer,
    lung_gas,
    lung_volume_of_gas,
    squeeze_pressure,
)
from gasphys.gas_exchange.held_breath import breath_hold
from gasphys.gas_exchange.model import calibrate, oxygenation
from gasphys.gas_exchange.targets import fio2_for, pressure_for

__all__ = [
    "alveolar_gas_pressure",
    "arterial_po2_from_ratio",
    "arterial_po2_from_shunt",
    "breath_hold",
    "calibrate",
    "carboxyhemoglobin",
    "fio2_for",
    "gas_transfer",
    "lung_gas",
    "lung_volume_of_gas",
    "oxygenation",
    "pressure_for",
    "shunt_at_arterial_po2",
    "squeeze_pressure",
]
