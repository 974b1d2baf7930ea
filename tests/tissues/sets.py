"""A set of invented numbers for tests, in the format of a user's own file."""

from __future__ import annotations

THREE_GASES = """
title = "Invented three-gas set"
edition = "for tests; no physiology in it"
source = "made up"
kinetics = "exponential"
inert_gases = ["N2", "He", "Ar"]
unit = "bar"
depth = "any"
refuses = "hydrogen, neon"
does_not_claim = "anything"

[convention]
alveolar = "schreiner"
water_vapor_pressure = 0.0627
respiratory_exchange_ratio = 0.9
arterial_pco2 = "40 mmHg"
provenance = "computed"

[start]
state = "air"

[limit]
form = "a_b"
tested = ["before_leaving"]

[compartment.fast]
N2 = { half_time = 3.0, a = 1.3, b = 0.5, provenance = "computed" }
He = { half_time = 1.2, a = 1.7, b = 0.45, provenance = "computed" }
Ar = { half_time = 4.0, a = 1.2, b = 0.52, provenance = "computed" }

[compartment.middle]
N2 = { half_time = 37.0, a = 0.6, b = 0.84, provenance = "computed" }
He = { half_time = 14.0, a = 0.8, b = 0.8, provenance = "computed" }
Ar = { half_time = 45.0, a = 0.55, b = 0.86, provenance = "computed" }

[compartment.slow]
N2 = { half_time = 600.0, a = 0.23, b = 0.96, provenance = "computed" }
He = { half_time = 230.0, a = 0.5, b = 0.92, provenance = "computed" }
Ar = { half_time = 700.0, a = 0.2, b = 0.97, provenance = "computed" }
"""
