"""Gas on its way into the lungs: moist inspired gas, the alveolar gas equation, ventilation."""

from __future__ import annotations

from gasphys.constants import (
    ATMOSPHERE,
    BODY_TEMPERATURE,
    BODY_VAPOR_PRESSURE,
    DEAD_SPACE_PER_MASS,
    ZERO_CELSIUS,
)
from gasphys.equation import Value, choice, formula, inverse
from gasphys.vapor import VAPOR_FORMULAS

__all__ = [
    "alveolar_pco2",
    "alveolar_pn2",
    "alveolar_po2",
    "alveolar_ventilation",
    "alveolar_ventilation_at_pco2",
    "anatomical_dead_space",
    "bohr_dead_space_fraction",
    "enghoff_dead_space_fraction",
    "inspired_pco",
    "inspired_pco2",
    "inspired_pn2",
    "inspired_po2",
    "water_vapor_pressure",
]


@choice(option="model", registry=VAPOR_FORMULAS)
def water_vapor_pressure(temperature: Value, model: str = "wagner_pruss_1993") -> Value:
    """Water vapor pressure of saturated gas.

    Notes
    -----
    At body temperature the trade uses 47 mmHg (6.266 kPa) by convention; the default formula gives
    47.12 mmHg at 37 degC, the others 46.95 to 47.16. The equations of the lung therefore take the
    vapor pressure as an argument with the conventional value as default. Vapor pressure follows
    temperature, not chamber pressure; for what compressed gas adds see
    :func:`gasphys.vapor.enhancement_factor`.

    Examples
    --------
    >>> round(water_vapor_pressure(20.0), 3)
    2.339
    """


@formula(result="inspired_po2", source="alveolar_ventilation_texts", provenance="secondary")
def inspired_po2(
    ambient_pressure: Value, fio2: Value, water_vapor_pressure: Value = BODY_VAPOR_PRESSURE
) -> Value:
    """Inspired PO2 of gas moistened at body temperature (tracheal).

    Notes
    -----
    PIO2 = FIO2 (PB - PH2O), the fraction being of dry gas. Doses and PO2 limits use the dry
    ``breathing_gas_po2`` instead.

    Examples
    --------
    >>> round(inspired_po2(101.325, 0.2093), 2)
    19.9
    """
    return fio2 * (ambient_pressure - water_vapor_pressure)


@formula(result="inspired_pco2", source="alveolar_ventilation_texts", provenance="secondary")
def inspired_pco2(
    ambient_pressure: Value, fico2: Value, water_vapor_pressure: Value = BODY_VAPOR_PRESSURE
) -> Value:
    """Inspired PCO2 of gas moistened at body temperature.

    Notes
    -----
    PICO2 = FICO2 (PB - PH2O). It grows with pressure: a fraction harmless at the surface need not
    be harmless at depth.

    Examples
    --------
    >>> round(inspired_pco2(405.3, 0.01), 2)
    3.99
    """
    return fico2 * (ambient_pressure - water_vapor_pressure)


@formula(
    result="inspired_pco",
    source="coburn_forster_kane_1965",
    provenance="secondary",
)
def inspired_pco(
    ambient_pressure: Value, carbon_monoxide: Value, water_vapor_pressure: Value = BODY_VAPOR_PRESSURE
) -> Value:
    """Inspired PCO of gas moistened at body temperature.

    Notes
    -----
    PICO = FICO (PB - PH2O), the fraction being of dry gas. At one PO2 it is this partial pressure,
    not the fraction, that harms: in rodents the lethal PCO did not change up to 100 psi (Rose 1970).

    Examples
    --------
    >>> round(inspired_pco(101.325, "35 ppm"), 6)
    0.003327
    """
    return carbon_monoxide * (ambient_pressure - water_vapor_pressure)


@formula(
    result="inspired_pn2",
    quantities={"nitrogen": "nitrogen"},
    source="alveolar_ventilation_texts",
    provenance="secondary",
)
def inspired_pn2(
    ambient_pressure: Value, nitrogen: Value, water_vapor_pressure: Value = BODY_VAPOR_PRESSURE
) -> Value:
    """Inspired PN2 of gas moistened at body temperature.

    Notes
    -----
    PIN2 = FN2 (PB - PH2O), the fraction being of dry gas.

    Examples
    --------
    >>> round(inspired_pn2(101.325, 0.7808), 2)
    74.22
    """
    return nitrogen * (ambient_pressure - water_vapor_pressure)


@formula(
    result="alveolar_po2",
    source="fenn_rahn_otis_1946",
    provenance="computed",
    check_result=True,
)
def alveolar_po2(
    ambient_pressure: Value,
    fio2: Value,
    alveolar_pco2: Value,
    respiratory_exchange_ratio: Value = 0.8,
    fico2: Value = 0.0,
    water_vapor_pressure: Value = BODY_VAPOR_PRESSURE,
) -> Value:
    """Alveolar PO2 by the alveolar gas equation in full, inspired CO2 included.

    Notes
    -----
    From the balance of inert gas: as much leaves as enters, and R = VCO2/VO2. With FIO2 = 1 the
    result is PB - PH2O - PACO2 whatever R. Steady state only: not during the wash-in or wash-out
    of an inert gas, never in breath-hold. A gas that cannot sustain life gives a negative result,
    which is reported, not clipped. The short form PIO2 - PACO2/R is 10 mmHg too low on O2.

    Examples
    --------
    Oxygen at 2.4 atm, PACO2 40 mmHg:

    >>> round(alveolar_po2(243.18, 1.0, 5.3329), 2)
    231.58
    """
    dry = ambient_pressure - water_vapor_pressure
    o2 = (
        respiratory_exchange_ratio * fio2 * (dry - alveolar_pco2) - alveolar_pco2 * (1.0 - fio2) + fico2 * dry
    )
    return o2 / (respiratory_exchange_ratio * (1.0 - fico2) + fico2)


@formula(result="alveolar_pco2", source="alveolar_ventilation_texts", provenance="computed")
def alveolar_pco2(co2_output_stpd: Value, alveolar_ventilation_btps: Value) -> Value:
    """Alveolar PCO2 by the alveolar ventilation equation, no CO2 inspired.

    Notes
    -----
    PACO2 = P0 (Tb/T0) VCO2/VA = 115.05 kPa (863 mmHg) times VCO2 STPD over VA BTPS. Chamber
    pressure does not enter.

    Examples
    --------
    >>> round(alveolar_pco2(0.2, 4.3), 2)
    5.35
    """
    return ATMOSPHERE * BODY_TEMPERATURE / ZERO_CELSIUS * co2_output_stpd / alveolar_ventilation_btps


@formula(result="alveolar_pn2", source="dalton_1802", provenance="read", check_result=True)
def alveolar_pn2(
    ambient_pressure: Value,
    alveolar_po2: Value,
    alveolar_pco2: Value,
    water_vapor_pressure: Value = BODY_VAPOR_PRESSURE,
) -> Value:
    """Alveolar inert gas pressure on an oxygen-nitrogen mixture: what O2, CO2 and vapor leave.

    Notes
    -----
    Dalton: PAN2 = PB - PH2O - PAO2 - PACO2, argon counted as nitrogen.

    Examples
    --------
    >>> round(alveolar_pn2(101.325, 13.5, 5.33), 2)
    76.23
    """
    return ambient_pressure - water_vapor_pressure - alveolar_po2 - alveolar_pco2


alveolar_ventilation_at_pco2 = inverse(
    alveolar_pco2,
    "alveolar_ventilation_btps",
    name="alveolar_ventilation_at_pco2",
    module=__name__,
    doc="""Alveolar ventilation that keeps an alveolar PCO2 at a CO2 output.

Notes
-----
The inverse of :func:`alveolar_pco2`, found from it: the ventilation counted at BTPS is the same at
every chamber pressure.

Examples
--------
>>> round(alveolar_ventilation_at_pco2("40 mmHg", 0.2), 2)
4.31
""",
)


@formula(
    result="alveolar_ventilation_btps",
    source="alveolar_ventilation_texts",
    provenance="secondary",
    check_result=True,
)
def alveolar_ventilation(ventilation_btps: Value, breathing_frequency: Value, dead_space: Value) -> Value:
    """Alveolar ventilation: what dead space leaves of minute ventilation.

    Notes
    -----
    VA = VE - f VD. The dead space of a breath hardly changes with its size, so ventilation that rises
    by deeper breaths alone raises VA by more than by faster ones: say which of the two is scaled.

    Examples
    --------
    >>> alveolar_ventilation(7.5, 15.0, 0.15)
    5.25
    """
    return ventilation_btps - breathing_frequency * dead_space


@formula(
    result="dead_space_fraction",
    refuse={"alveolar_pco2": (0.01, 30.0)},
    source="bohr_1891",
    provenance="secondary",
    check_result=True,
)
def bohr_dead_space_fraction(alveolar_pco2: Value, mixed_expired_pco2: Value) -> Value:
    """Dead space as a share of tidal volume, from alveolar and mixed expired PCO2.

    Notes
    -----
    Bohr: VD/VT = (PACO2 - PECO2)/PACO2, no CO2 inspired. About 0.30-0.35 at rest and 0.2 in exercise
    at 1 atm [from memory]; it rises with gas density.

    Examples
    --------
    >>> round(bohr_dead_space_fraction("40 mmHg", "28 mmHg"), 2)
    0.3
    """
    return (alveolar_pco2 - mixed_expired_pco2) / alveolar_pco2


@formula(
    result="dead_space_fraction",
    source=("enghoff_1938", "bohr_1891"),
    provenance="secondary",
    check_result=True,
)
def enghoff_dead_space_fraction(arterial_pco2: Value, mixed_expired_pco2: Value) -> Value:
    """Dead space as a share of tidal volume, with arterial for alveolar PCO2.

    Notes
    -----
    Enghoff: Bohr's equation with PaCO2. Shunt and uneven ventilation raise it: it is a measure of
    wasted breath, not a volume of airways.

    Examples
    --------
    >>> round(enghoff_dead_space_fraction("44 mmHg", "28 mmHg"), 2)
    0.36
    """
    return bohr_dead_space_fraction(arterial_pco2, mixed_expired_pco2)


@formula(result="dead_space", source="alveolar_ventilation_texts", provenance="memory_high")
def anatomical_dead_space(body_mass: Value) -> Value:
    """Anatomical dead space by body mass.

    Notes
    -----
    About 2.2 mL/kg [from memory]. Apparatus adds its own.

    Examples
    --------
    >>> round(anatomical_dead_space(70.0), 3)
    0.154
    """
    return DEAD_SPACE_PER_MASS * body_mass
