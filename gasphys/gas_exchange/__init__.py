"""From alveolar gas to arterial blood, for a person along an exposure."""

from __future__ import annotations

from gasphys.gas_exchange.equations import arterial_po2_from_ratio
from gasphys.gas_exchange.model import calibrate, oxygenation

__all__ = ["arterial_po2_from_ratio", "calibrate", "oxygenation"]
