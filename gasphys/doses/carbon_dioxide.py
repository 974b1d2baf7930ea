"""Carbon dioxide and contaminants under pressure, and what an absorbent takes up."""

from __future__ import annotations

from gasphys.constants import ATMOSPHERE, GAS_CONSTANT, MOLAR_MASS_HYDROXIDE, ZERO_CELSIUS
from gasphys.equation import Value, formula

__all__ = ["absorbent_capacity", "absorbent_ceiling", "surface_equivalent"]


@formula(result="surface_equivalent", source="surface_equivalent_texts", provenance="secondary")
def surface_equivalent(fraction: Value, ambient_pressure: Value) -> Value:
    """Fraction that would have the same partial pressure at 1 atm.

    Notes
    -----
    F P/P0: what published limits of contaminants are compared with. It may fail for mixtures of
    contaminants. For CO the equilibrium ratio of carboxy- to oxyhemoglobin is M PCO/PO2, which does
    not change with pressure for a fixed mixture: the surface equivalent overstates it, while dissolved
    CO and the rate of uptake do rise. It is kept as the conservative screen.

    Examples
    --------
    800 ppm of CO2 at 4 atm:

    >>> round(surface_equivalent("800 ppm", "4 atm"), 6)
    0.0032
    """
    return fraction * ambient_pressure / ATMOSPHERE


@formula(result="absorbent_capacity", source=("harvey_2016", "pollock_2018"), provenance="computed")
def absorbent_capacity(duration: Value, co2_flow: Value, absorbent_mass: Value) -> Value:
    """CO2 taken up by a kilogram of absorbent in a bench run.

    Notes
    -----
    Minutes times CO2 flow over mass. The condition of the flow (ATPS or STPD) and the end point (1
    kPa inspired, or 0.5 % surface equivalent in the US Navy) belong to the number: durations with
    different end points cannot be compared. Cold, depth and ventilation shorten the time; nothing is
    extrapolated here.

    Examples
    --------
    >>> round(absorbent_capacity(202.0, 2.0, 2.64), 1)
    153.0
    """
    return duration * co2_flow / absorbent_mass


@formula(result="absorbent_capacity", source="soda_lime_chemistry", provenance="computed")
def absorbent_ceiling(hydroxide_fraction: Value, temperature: Value = 0.0) -> Value:
    """CO2 that the calcium hydroxide of an absorbent can bind at most.

    Notes
    -----
    One mole of CO2 a mole of Ca(OH)2, as ideal gas at 1 atm and the temperature: 0 degC is STPD. Real
    beds reach half to three quarters of it.

    Examples
    --------
    >>> round(absorbent_ceiling(0.8)), round(absorbent_ceiling(0.8, 20.0))
    (242, 260)
    """
    molar_volume = GAS_CONSTANT * (ZERO_CELSIUS + temperature) / ATMOSPHERE
    return hydroxide_fraction * 1000.0 / MOLAR_MASS_HYDROXIDE * molar_volume
