"""Doses that accumulate along an exposure: oxygen for now."""

from __future__ import annotations

from gasphys.doses.equations import (
    noaa_cns_fraction,
    noaa_cns_ramp,
    uptd,
    uptd_ramp,
)
from gasphys.doses.model import MEASURES, oxygen

__all__ = ["MEASURES", "noaa_cns_fraction", "noaa_cns_ramp", "oxygen", "uptd", "uptd_ramp"]
