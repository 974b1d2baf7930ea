"""Narcosis: equivalent depths and the narcotic weight of a mixture.

Descriptive conventions: nobody's performance follows from them. Counterdiffusion is the tissues'
subject, and of the high pressure nervous syndrome only observed thresholds are kept, as data.
"""

from __future__ import annotations

import types
from typing import Any

from gasphys.constants import N2_IN_AIR, SURFACE_FSW, SURFACE_METERS, SURFACE_MSW, Constant
from gasphys.equation import EquationFunction, Value, choice, formula
from gasphys.gas import gas_fractions

__all__ = [
    "equivalent_air_depth",
    "equivalent_narcotic_depth",
    "narcotic_fraction",
    "weighted_narcotic_depth",
]

#: Depth unit to the surface pressure as a depth.
_SURFACES: dict[str, Constant] = {"msw": SURFACE_MSW, "fsw": SURFACE_FSW, "m": SURFACE_METERS}


def _quantity(name: str, unit: str) -> str:
    return name if unit == "m" else f"{name}_{unit}"


# -- Weights ---------------------------------------------------------------------------------------

_weight: dict[str, Any] = {"result": "narcotic_fraction", "register": False}


@formula(**_weight, source="equivalent_depth_practice", provenance="secondary")
def _weight_of_nitrogen(nitrogen: Value, argon: Value) -> Value:
    """Nitrogen alone counts, argon with it."""
    return nitrogen + argon


@formula(**_weight, source="equivalent_depth_practice", provenance="secondary")
def _weight_with_oxygen(helium: Value) -> Value:
    """Everything but helium counts alike, oxygen included."""
    return 1.0 - helium


@formula(**_weight, source="bennett_rostain_2003", provenance="secondary")
def _weight_reported(
    oxygen: Value, nitrogen: Value, argon: Value, hydrogen: Value, carbon_dioxide: Value
) -> Value:
    """Reported potencies: O2 1.7, Ar 2.3, H2 0.6, CO2 20, He and Ne none."""
    return nitrogen + 1.7 * oxygen + 2.3 * argon + 0.6 * hydrogen + 20.0 * carbon_dioxide


@formula(**_weight, source="oil_solubility", provenance="memory_medium")
def _weight_by_oil(
    oxygen: Value, nitrogen: Value, argon: Value, hydrogen: Value, carbon_dioxide: Value
) -> Value:
    """Solubilities in oil over that of N2, He and Ne none."""
    sum_of_oil = 0.067 * nitrogen + 0.11 * oxygen + 0.14 * argon + 0.036 * hydrogen + 1.34 * carbon_dioxide
    return sum_of_oil / 0.067


_WEIGHTS: dict[str, EquationFunction] = {
    "nitrogen": _weight_of_nitrogen,
    "oxygen_counted": _weight_with_oxygen,
    "reported": _weight_reported,
    "oil_solubility": _weight_by_oil,
}


@choice(option="weights", registry=_WEIGHTS, spread={"gas": gas_fractions})
def narcotic_fraction(gas: Value, weights: str = "nitrogen") -> Value:
    """Narcotic weight of a mixture: mole fractions times potency against nitrogen.

    Notes
    -----
    "nitrogen" counts N2 and argon, "oxygen_counted" everything but helium, "reported" uses potencies
    credited to 2003, "oil_solubility" the ratios of solubility in oil. Helium and neon count nothing
    in the last two: the rule of lipid solubility fails for them under pressure. O2 1.7 and CO2 20 are
    lipid ratios, not measured narcosis; oxygen at 142 and 284 kPa showed no nitrogen-like narcosis in
    the electroencephalogram of 12 people (2022).

    Examples
    --------
    >>> round(narcotic_fraction("trimix 18/45"), 2), round(narcotic_fraction("air", weights="reported"), 3)
    (0.37, 1.147)
    """


# -- Equivalent depths -----------------------------------------------------------------------------

# Templates: SURFACE is bound to the surface pressure as a depth in each unit.
SURFACE = SURFACE_MSW


def _narcotic_depth_by_nitrogen(depth: Value, nitrogen: Value, argon: Value) -> Value:
    """Equivalent narcotic depth, nitrogen alone."""
    return (depth + SURFACE) * _weight_of_nitrogen(nitrogen, argon) / N2_IN_AIR - SURFACE


def _narcotic_depth_with_oxygen(depth: Value, helium: Value) -> Value:
    """Equivalent narcotic depth, oxygen counted like nitrogen."""
    return (depth + SURFACE) * _weight_with_oxygen(helium) - SURFACE


def _nitrogen_depth(depth: Value, nitrogen: Value, argon: Value) -> Value:
    """Equivalent air depth: the same nitrogen pressure, argon counted with it."""
    return (depth + SURFACE) * (nitrogen + argon) / N2_IN_AIR - SURFACE


def _narcotic_depth_by_reported(
    depth: Value, oxygen: Value, nitrogen: Value, argon: Value, hydrogen: Value, carbon_dioxide: Value
) -> Value:
    """Equivalent narcotic depth with reported potencies."""
    air = _weight_reported(1.0 - N2_IN_AIR, N2_IN_AIR, 0.0, 0.0, 0.0)
    mixture = _weight_reported(oxygen, nitrogen, argon, hydrogen, carbon_dioxide)
    return (depth + SURFACE) * mixture / air - SURFACE


def _narcotic_depth_by_oil(
    depth: Value, oxygen: Value, nitrogen: Value, argon: Value, hydrogen: Value, carbon_dioxide: Value
) -> Value:
    """Equivalent narcotic depth with ratios of solubility in oil."""
    air = _weight_by_oil(1.0 - N2_IN_AIR, N2_IN_AIR, 0.0, 0.0, 0.0)
    mixture = _weight_by_oil(oxygen, nitrogen, argon, hydrogen, carbon_dioxide)
    return (depth + SURFACE) * mixture / air - SURFACE


def _depths(result: str, body: Any, source: str, provenance: str) -> dict[str, EquationFunction]:
    found = {}
    for unit, surface in _SURFACES.items():
        called = f"{body.__name__}_{unit}"
        one = types.FunctionType(body.__code__, {**body.__globals__, "SURFACE": surface}, called)
        one.__doc__, one.__module__ = body.__doc__, body.__module__
        found[unit] = formula(
            result=_quantity(result, unit),
            quantities={"depth": _quantity("depth", unit)},
            source=source,
            provenance=provenance,
            register=False,
        )(one)
    return found


_PRACTICE = ("equivalent_depth_practice", "secondary")
_COUNTED = {
    False: _depths("equivalent_narcotic_depth", _narcotic_depth_by_nitrogen, *_PRACTICE),
    True: _depths("equivalent_narcotic_depth", _narcotic_depth_with_oxygen, *_PRACTICE),
}
_WEIGHTED = {
    "reported": _depths(
        "equivalent_narcotic_depth", _narcotic_depth_by_reported, "bennett_rostain_2003", "secondary"
    ),
    "oil_solubility": _depths(
        "equivalent_narcotic_depth", _narcotic_depth_by_oil, "oil_solubility", "memory_medium"
    ),
}


@choice(
    option=("depth_unit", "o2_counted"),
    registry={(unit, counted): f for counted, row in _COUNTED.items() for unit, f in row.items()},
    spread={"gas": gas_fractions},
)
def equivalent_narcotic_depth(
    depth: Value, gas: Value, depth_unit: str = "msw", o2_counted: bool = False
) -> Value:
    """Depth on air with the same narcotic pressure.

    Notes
    -----
    (D + P) F/F_air - P, P being the surface pressure as a depth: 10 msw, 10 m or 33 fsw. With
    ``o2_counted=False`` F is nitrogen (argon with it) and F_air 0.79; with True everything but helium
    and F_air 1, so hydrogen and neon count too. Air gives its own depth in every convention. Signed:
    below zero less than air at the surface. Organizations disagree on counting oxygen; counting it is
    the more cautious way here. Other weights: :func:`weighted_narcotic_depth`. Hydrogen is narcotic
    and does not count in the nitrogen form.

    Examples
    --------
    >>> round(equivalent_narcotic_depth(60.0, "trimix 18/45"), 2)
    22.78
    >>> round(equivalent_narcotic_depth(60.0, "trimix 18/45", o2_counted=True), 2)
    28.5
    """


@choice(
    option=("depth_unit", "weights"),
    registry={(unit, name): f for name, row in _WEIGHTED.items() for unit, f in row.items()},
    spread={"gas": gas_fractions},
)
def weighted_narcotic_depth(
    depth: Value, gas: Value, depth_unit: str = "msw", weights: str = "reported"
) -> Value:
    """Depth on air with the same narcotic pressure, each gas by its own potency.

    Notes
    -----
    (D + P) N/N_air - P with the narcotic weight N of :func:`narcotic_fraction` and the same weights
    for air. Signed. Potencies are quoted or remembered figures, those of oxygen and CO2 lipid ratios.

    Examples
    --------
    >>> round(weighted_narcotic_depth(60.0, "trimix 18/45"), 2)
    31.26
    """


@choice(
    option="depth_unit",
    registry=_depths("equivalent_air_depth", _nitrogen_depth, *_PRACTICE),
    spread={"gas": gas_fractions},
)
def equivalent_air_depth(depth: Value, gas: Value, depth_unit: str = "msw") -> Value:
    """Depth on air with the same nitrogen pressure.

    Notes
    -----
    (D + P) F_N2/0.79 - P, P being the surface pressure as a depth: 10 msw, 10 m or 33 fsw; argon
    counts as nitrogen. For nitrogen-oxygen mixtures: with helium it says nothing of decompression.
    Signed.

    Examples
    --------
    >>> round(equivalent_air_depth(30.0, "nitrox 32"), 2)
    24.43
    """
