"""Density, pressure, compressibility of breathing gas by a named equation of state.

Pressure is explicit in density for every model; density is declared as its inverse.
"""

from __future__ import annotations

import functools

from gasphys.constants import ATMOSPHERE, GAS_CONSTANT, MOLAR_MASS_H2O, ZERO_CELSIUS, Constant
from gasphys.equation import Value, choice, formula
from gasphys.gas import gas_fractions
from gasphys.real_gas.data import TEX, constant, data, judged
from gasphys.real_gas.ideal import ideal_density, ideal_pressure, mixture_molar_mass
from gasphys.real_gas.peng_robinson import CUBIC, peng_robinson_density, peng_robinson_pressure
from gasphys.real_gas.virial import (
    PRESSURE_RANGE,
    REFUSE,
    TRACE,
    VIRIAL,
    WARM,
    virial_density,
    virial_pressure,
    virial_uncertainty,
)

__all__ = [
    "compressibility",
    "density",
    "humid_density",
    "pressure_at_density",
    "reference_density",
    "uncertainty",
]


def _at_zero(gas: str) -> Constant:
    row = data("virial")["density_at_0_degC_1_atm"]
    return constant(
        f"DENSITY_0C_{gas.upper()}", row[gas], "g/L", f"\\rho_{{{TEX[gas]},0}}",
        f"density of {gas} at 0 degC and 1 atm, handbook value", "handbook_densities", row["word"],
    )  # fmt: skip


DENSITY_0C_O2 = _at_zero("O2")
DENSITY_0C_N2 = _at_zero("N2")
DENSITY_0C_HE = _at_zero("He")
DENSITY_0C_AR = _at_zero("Ar")
DENSITY_0C_H2 = _at_zero("H2")
DENSITY_0C_NE = _at_zero("Ne")
DENSITY_0C_CO2 = _at_zero("CO2")


@choice(
    option="model",
    registry={
        "virial": virial_density,
        "ideal": ideal_density,
        "peng_robinson_1976": peng_robinson_density,
    },
    spread={"gas": gas_fractions},
)
def density(ambient_pressure: Value, gas: Value, temperature: Value = 20.0, model: str = "virial") -> Value:
    """Density of dry breathing gas.

    Notes
    -----
    ``"virial"``: five coefficients, 260-325 K to 300 bar, within 0.05 % to 71 bar, 0.15 % to 200 bar and
    0.30 % to 300 bar of the reference equations of state for O2, N2, He, Ar, H2, Ne and the pairs
    N2-O2-Ar, He-N2, H2-N2. Helium with oxygen rests on an estimated pair: :func:`uncertainty`.
    ``"ideal"``: within 1 % to 10 bar, 1-3 % off at 31 bar, 10-20 % in a cylinder.
    ``"peng_robinson_1976"``: helium mixtures 6-11 % too dense at 200-300 bar; for comparison only.

    A density means nothing without its temperature and whether it is ideal or real, dry or humid.
    Published density limits for divers are stated at 0 degC: compare with :func:`reference_density`.
    Densities in the literature of deep diving are mostly ideal-gas values, at 0 degC or at BTPS.

    Examples
    --------
    >>> round(density(501.325, "air", temperature=20.0), 3)
    5.944
    >>> round(density("232 bar", "trimix 18/45", temperature=20.0), 1)
    151.7
    >>> round(density(401.325, "air", temperature=0.0, model="ideal"), 2)
    5.1

    Depth at which trimix 18/45 reaches 6 g/L at 20 degC:

    >>> from gasphys.surroundings import depth_at_pressure
    >>> round(depth_at_pressure(pressure_at_density(6.0, "trimix 18/45")), 1)
    71.7
    """


@choice(
    option="model",
    registry={
        "virial": virial_pressure,
        "ideal": ideal_pressure,
        "peng_robinson_1976": peng_robinson_pressure,
    },
    spread={"gas": gas_fractions},
)
def pressure_at_density(
    density: Value, gas: Value, temperature: Value = 20.0, model: str = "virial"
) -> Value:
    """Pressure at which dry breathing gas has a density.

    Notes
    -----
    Explicit in density for ``"virial"`` and ``"peng_robinson_1976"``: no iteration. At constant density it
    also gives the pressure of a closed cylinder at another temperature.

    Examples
    --------
    A cylinder of 232 bar at 20 degC, cooled to 5 degC, in bar:

    >>> full = density("232 bar", "air", temperature=20.0)
    >>> round(pressure_at_density(full, "air", temperature=5.0) / 100.0, 1)
    214.5
    """


_compressed = functools.partial(
    formula,
    result="compressibility",
    quantities={"ambient_pressure": "gas_pressure"},
    register=False,
)


@_compressed(valid=WARM | TRACE | PRESSURE_RANGE, refuse=REFUSE, judged=judged, **VIRIAL)
def _virial_compressibility(
    ambient_pressure: Value,
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    temperature: Value = 20.0,
) -> Value:
    """Compressibility factor of dry gas by the virial series: Z = p M/(rho R T)."""
    return (
        ambient_pressure
        * mixture_molar_mass(oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide)
        / (
            virial_density(
                ambient_pressure, oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide, temperature
            )
            * GAS_CONSTANT
            * (temperature + ZERO_CELSIUS)
        )
    )


@_compressed(valid=WARM | TRACE | PRESSURE_RANGE, refuse=REFUSE, **CUBIC)
def _peng_robinson_compressibility(
    ambient_pressure: Value,
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    temperature: Value = 20.0,
) -> Value:
    """Compressibility factor of dry gas by Peng and Robinson: Z = p M/(rho R T)."""
    return (
        ambient_pressure
        * mixture_molar_mass(oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide)
        / (
            peng_robinson_density(
                ambient_pressure, oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide, temperature
            )
            * GAS_CONSTANT
            * (temperature + ZERO_CELSIUS)
        )
    )


@_compressed(source="ideal_gas", provenance="read")
def _ideal_compressibility(ambient_pressure: Value) -> Value:
    """Compressibility factor of an ideal gas: 1 by definition."""
    return 1.0 + 0.0 * ambient_pressure


@choice(
    option="model",
    registry={
        "virial": _virial_compressibility,
        "ideal": _ideal_compressibility,
        "peng_robinson_1976": _peng_robinson_compressibility,
    },
    spread={"gas": gas_fractions},
)
def compressibility(
    ambient_pressure: Value, gas: Value, temperature: Value = 20.0, model: str = "virial"
) -> Value:
    """Compressibility factor of dry breathing gas.

    Notes
    -----
    Z = p M/(rho R T). Above 1 a cylinder holds less than the ideal gas law says.

    Examples
    --------
    >>> round(compressibility("232 bar", "air"), 3)
    1.05
    """


@choice(option="model", registry={"virial": virial_uncertainty}, spread={"gas": gas_fractions})
def uncertainty(
    ambient_pressure: Value, gas: Value, temperature: Value = 20.0, model: str = "virial"
) -> Value:
    """Bound on the relative error of :func:`density`.

    Notes
    -----
    Two parts, added. What the series was seen to miss where every pair was fitted: 0.05 % to 71 bar,
    0.15 % to 200 bar, 0.30 % to 300 bar. And what the stated uncertainty of every pair that is not
    "good" (:func:`pairs`) does to the density: the sum of 2 x_i x_j u_ij times the molar density over
    d(cZ)/dc. For heliox 21/79 the second part is 0.02 % at 10 bar, 0.06 % at 31, 0.3 % at 200 and 0.4 %
    at 300 bar; cylinder contents of heliox carry about 0.5 %, of trimix 0.3 %.

    The bound says nothing about humidity, argon counted as nitrogen (0.38 % in air), or the gauge.

    Examples
    --------
    >>> round(uncertainty("300 bar", "heliox 21/79"), 4)
    0.0069
    >>> uncertainty("10 bar", "nitrox 32")
    0.0005
    """


@formula(
    result="density",
    quantities={"ambient_pressure": "gas_pressure"},
    valid=WARM | TRACE | PRESSURE_RANGE,
    refuse=REFUSE,
    register=False,
    judged=judged,
    **VIRIAL,
)
def _virial_humid_density(
    ambient_pressure: Value,
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    temperature: Value = 37.0,
    water_vapor_pressure: Value = 0.0,
) -> Value:
    """Density of humid gas, the dry part by the virial series, vapor ideal."""
    return virial_density(
        ambient_pressure - water_vapor_pressure,
        oxygen,
        nitrogen,
        helium,
        argon,
        hydrogen,
        neon,
        carbon_dioxide,
        temperature,
    ) + water_vapor_pressure * MOLAR_MASS_H2O / (GAS_CONSTANT * (temperature + ZERO_CELSIUS))


@formula(
    result="density",
    quantities={"ambient_pressure": "gas_pressure"},
    source="ideal_gas",
    provenance="read",
    register=False,
)
def _ideal_humid_density(
    ambient_pressure: Value,
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    temperature: Value = 37.0,
    water_vapor_pressure: Value = 0.0,
) -> Value:
    """Density of humid gas by the ideal gas law."""
    return ideal_density(
        ambient_pressure - water_vapor_pressure,
        oxygen,
        nitrogen,
        helium,
        argon,
        hydrogen,
        neon,
        carbon_dioxide,
        temperature,
    ) + water_vapor_pressure * MOLAR_MASS_H2O / (GAS_CONSTANT * (temperature + ZERO_CELSIUS))


@choice(
    option="model",
    registry={"virial": _virial_humid_density, "ideal": _ideal_humid_density},
    spread={"gas": gas_fractions},
)
def humid_density(
    ambient_pressure: Value,
    gas: Value,
    temperature: Value = 37.0,
    water_vapor_pressure: Value = 0.0,
    model: str = "virial",
) -> Value:
    """Density of breathing gas with water vapor.

    Notes
    -----
    Dry gas at p - pw plus vapor as an ideal gas; wrong by less than 0.05 % at 37 degC saturation. The
    fractions are of dry gas. Vapor matters at 1 atm (0.6 % lighter), hardly at 20 atm.

    Examples
    --------
    >>> round(humid_density(405.3, "air", 37.0, water_vapor_pressure="47 mmHg"), 2)
    4.51
    """


_at_reference = functools.partial(
    formula,
    result="gas_density",
    quantities={"ambient_pressure": "gas_pressure"},
    register=False,
)


@_at_reference(source=("anthony_mitchell_2016", "handbook_densities"), provenance="secondary")
def _scaled_density(
    ambient_pressure: Value,
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
) -> Value:
    """Handbook densities at 0 degC and 1 atm, scaled with pressure."""
    return (
        ambient_pressure
        / ATMOSPHERE
        * (
            oxygen * DENSITY_0C_O2
            + nitrogen * DENSITY_0C_N2
            + helium * DENSITY_0C_HE
            + argon * DENSITY_0C_AR
            + hydrogen * DENSITY_0C_H2
            + neon * DENSITY_0C_NE
            + carbon_dioxide * DENSITY_0C_CO2
        )
    )


@_at_reference(source=("anthony_mitchell_2016", "ideal_gas"), provenance="secondary")
def _ideal_at_zero(
    ambient_pressure: Value,
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
) -> Value:
    """Density at 0 degC by the ideal gas law."""
    return ideal_density(
        ambient_pressure, oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide, 0.0
    )


@choice(
    option="rule",
    registry={"scaled_1_atm": _scaled_density, "ideal": _ideal_at_zero},
    spread={"gas": gas_fractions},
)
def reference_density(ambient_pressure: Value, gas: Value, rule: str = "scaled_1_atm") -> Value:
    """Density at 0 degC, dry: the only one to compare with the published density limits.

    Notes
    -----
    The limits 5.2 and 6.2 g/L (from memory) are quoted as air at 31 m and 39 m; air has these densities
    there at **0 degC** (30.6 and 38.4 msw), not at 20 degC (33.6 and 42.0) nor at 37 degC (36.1 and
    45.0). A density at body temperature would loosen the limit by 12 %, the unsafe direction.
    ``"scaled_1_atm"`` is the rule the limits were made with; ``"ideal"`` and the real gas at 0 degC differ
    from it by under 0.3 % (nitrox) to 2 % (deep heliox). Argon in air counts as argon here; the
    trade's air has none.

    Advisory thresholds for working divers on breathing apparatus, not constants of physiology.

    Examples
    --------
    >>> round(reference_density(401.325, "air"), 2)
    5.1
    """
