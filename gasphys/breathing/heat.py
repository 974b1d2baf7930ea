"""Heat that breathing takes from the body, and how cold inspired gas may be."""

from __future__ import annotations

from gasphys.constants import (
    EXPIRED_BASE,
    EXPIRED_SLOPE,
    EXPIRED_WARMTH,
    GAS_CONSTANT,
    LATENT_HEAT,
    MOLAR_MASS_H2O,
    SECONDS_PER_MINUTE,
    ZERO_CELSIUS,
)
from gasphys.equation import Value, formula
from gasphys.vapor import saturation_pressure

__all__ = [
    "convective_heat_loss",
    "evaporative_heat_loss",
    "expired_temperature",
    "minimum_inspired_temperature",
    "vapor_density",
    "volumetric_heat_capacity",
]


@formula(result="volumetric_heat_capacity", source="ideal_gas", provenance="read")
def volumetric_heat_capacity(
    ambient_pressure: Value, molar_heat_capacity: Value, temperature: Value = 37.0
) -> Value:
    """Heat capacity of a liter of breathing gas at ambient pressure.

    Notes
    -----
    p cp/(R T), ideal, dry; cp of :func:`gasphys.real_gas.heat_capacity`. At one pressure heliox holds 28 %
    less than air: what chills a diver's lungs is the pressure, not the helium. The real gas holds more: at
    31 bar 4.5 % (air), 0 (helium).

    Examples
    --------
    >>> from gasphys.real_gas import heat_capacity
    >>> round(volumetric_heat_capacity("1 atm", heat_capacity("heliox 2/98", 37.0)), 3)
    0.824
    """
    return ambient_pressure * molar_heat_capacity / (GAS_CONSTANT * (temperature + ZERO_CELSIUS))


@formula(result="expired_temperature", source="hyperbaric_heat_work", provenance="memory_medium")
def expired_temperature(inspired_temperature: Value) -> Value:
    """Temperature of expired gas, from that of inspired gas.

    Notes
    -----
    24 + 0.32 Tin, remembered from work on heat loss at pressure. At 1 atm at rest 32.6 + 0.066 Tin and a term
    of vapor pressure whose unit is not known to us. Fits for helium at pressure exist and were not read.

    Examples
    --------
    >>> expired_temperature(20.0)
    30.4
    """
    return EXPIRED_BASE + EXPIRED_SLOPE * inspired_temperature


@formula(result="convective_heat_loss", source="respiratory_heat_texts", provenance="computed")
def convective_heat_loss(
    ventilation_btps: Value,
    volumetric_heat_capacity: Value,
    expired_temperature: Value,
    inspired_temperature: Value,
) -> Value:
    """Heat that warms the gas breathed.

    Notes
    -----
    VE rho cp (Tex - Tin): in proportion to pressure. Up to 25 % of heat production in dense mixtures (a
    report of 1966, read in abstract). Heliox of 6 degC at 31 bar and 7 degC at 16 bar lowered core
    temperature, with shortness of breath.

    Examples
    --------
    >>> round(convective_heat_loss(30.0, 25.8, 30.4, 20.0), 1)
    134.2
    """
    return (
        ventilation_btps
        / SECONDS_PER_MINUTE
        * volumetric_heat_capacity
        * (expired_temperature - inspired_temperature)
    )


@formula(
    result="vapor_density",
    source=("wagner_pruss_1993", "ideal_gas"),
    provenance="memory_high",
)
def vapor_density(temperature: Value) -> Value:
    """Mass of water vapor in a liter of saturated gas.

    Notes
    -----
    Saturation pressure as an ideal gas: follows temperature, not ambient pressure.

    Examples
    --------
    >>> round(vapor_density(34.0), 4)
    0.0376
    """
    return saturation_pressure(temperature) * MOLAR_MASS_H2O / (GAS_CONSTANT * (temperature + ZERO_CELSIUS))


@formula(result="evaporative_heat_loss", source="respiratory_heat_texts", provenance="secondary")
def evaporative_heat_loss(
    ventilation_btps: Value, expired_vapor_density: Value, inspired_vapor_density: Value = 0.0
) -> Value:
    """Heat that moistens the gas breathed.

    Notes
    -----
    VE (wex - win) hfg with 2.42 kJ/g. Does not depend on pressure.

    Examples
    --------
    >>> round(evaporative_heat_loss(30.0, 0.0376), 1)
    45.5
    """
    return (
        ventilation_btps / SECONDS_PER_MINUTE * (expired_vapor_density - inspired_vapor_density) * LATENT_HEAT
    )


@formula(
    result="minimum_inspired_temperature",
    valid={"volumetric_heat_capacity": (9.5, 38.4, "its table is for helium-oxygen, 350 to 1500 fsw")},
    refuse={"volumetric_heat_capacity": (0.1, 1e5)},
    source="piantadosi_1980",
    provenance="memory_medium",
)
def minimum_inspired_temperature(
    volumetric_heat_capacity: Value, permitted_heat_loss: Value = 363.0
) -> Value:
    """Lowest temperature of inspired gas by a remembered naval table.

    Notes
    -----
    34.8 - 363/(rho cp): the nine remembered rows for helium-oxygen, 350-1400 fsw, lie on it within 0.14 degC,
    that is, on one convective loss for a liter. The table itself was not read. Other gases by the same heat
    loss. Another offshore standard has its own requirement, whose numbers are not known to us.

    Examples
    --------
    Heliox at 1000 fsw:

    >>> from gasphys.real_gas import heat_capacity
    >>> held = volumetric_heat_capacity("31.303 atm", heat_capacity("heliox 2/98", 37.0))
    >>> round(minimum_inspired_temperature(held), 1)
    20.7
    """
    return EXPIRED_WARMTH - permitted_heat_loss / volumetric_heat_capacity
