"""Saturation pressure of water vapor over liquid water, by named formula, and what pressure adds."""

from __future__ import annotations

import functools

from gasphys.constants import (
    ATMOSPHERE,
    GAS_CONSTANT,
    MMHG,
    WATER_CRITICAL_PRESSURE,
    WATER_CRITICAL_TEMPERATURE,
    WATER_MOLAR_VOLUME,
    ZERO_CELSIUS,
)
from gasphys.equation import EquationFunction, Value, formula
from gasphys.maths import exp, log, tanh

__all__ = ["VAPOR_FORMULAS", "enhancement_factor", "poynting_factor", "saturation_pressure"]

_vapor = functools.partial(formula, result="water_vapor_pressure", register=False)


@_vapor(valid={"temperature": (0.0, 100.0)}, source="wagner_pruss_1993", provenance="memory_high")
def saturation_pressure(temperature: Value) -> Value:
    """Saturation pressure of water vapor over liquid water.

    Notes
    -----
    Wagner & Pruss, with tau = 1 - T/Tc. Within 0.01 % of IAPWS-95 from 0 to 45 degC. Saturated
    vapor follows temperature, not ambient pressure; in compressed air the true value is about
    0.4 % higher at 1 atm, by convention ignored.

    Examples
    --------
    >>> round(saturation_pressure(37.0), 4)
    6.2824
    """
    kelvin = temperature + ZERO_CELSIUS
    tau = 1.0 - kelvin / WATER_CRITICAL_TEMPERATURE
    return WATER_CRITICAL_PRESSURE * exp(
        WATER_CRITICAL_TEMPERATURE
        / kelvin
        * (
            -7.85951783 * tau
            + 1.84408259 * tau**1.5
            - 11.7866497 * tau**3
            + 22.6807411 * tau**3.5
            - 15.9618719 * tau**4
            + 1.80122502 * tau**7.5
        )
    )


@_vapor(valid={"temperature": (0.0, 100.0)}, source="wexler_1976", provenance="memory_high")
def _wexler_1976(temperature: Value) -> Value:
    """Saturation pressure over liquid water, Wexler 1976.

    Notes
    -----
    A series in T from T^-2 to T^4 and a logarithm, made for 0 to 100 degC; 0.05 % below IAPWS-95 at
    37 degC, on an older temperature scale.
    """
    t = temperature + ZERO_CELSIUS
    series = (
        -2.9912729e3 / (t * t)
        - 6.0170128e3 / t
        + 18.87643854
        - 2.8354721e-2 * t
        + 1.7838301e-5 * t**2
        - 8.4150417e-10 * t**3
        + 4.4412543e-13 * t**4
        + 2.858487 * log(t)
    )
    return exp(series) / 1000.0


@_vapor(valid={"temperature": (-90.0, 58.85)}, source="murphy_koop_2005", provenance="memory_high")
def _murphy_koop_2005(temperature: Value) -> Value:
    """Saturation pressure over liquid and supercooled water, Murphy & Koop 2005.

    Notes
    -----
    Made for 123 to 332 K.
    """
    t = temperature + ZERO_CELSIUS
    series = (
        54.842763
        - 6763.22 / t
        - 4.210 * log(t)
        + 0.000367 * t
        + tanh(0.0415 * (t - 218.8)) * (53.878 - 1331.22 / t - 9.44523 * log(t) + 0.014025 * t)
    )
    return exp(series) / 1000.0


@_vapor(valid={"temperature": (-20.0, 50.0)}, source="buck_1981", provenance="memory_high")
def _buck_1981(temperature: Value) -> Value:
    """Saturation pressure over liquid water, Buck 1981.

    Notes
    -----
    0.61121 exp(17.502 t/(240.97 + t)) kPa; 2.2 % high at 100 degC.
    """
    return 0.61121 * exp(17.502 * temperature / (240.97 + temperature))


@_vapor(valid={"temperature": (-40.0, 100.0)}, source="buck_1996", provenance="memory_high")
def _buck_1996(temperature: Value) -> Value:
    """Saturation pressure over liquid water, Buck's revision of 1996.

    Notes
    -----
    0.61121 exp((18.678 - t/234.5) t/(257.14 + t)) kPa.
    """
    return 0.61121 * exp((18.678 - temperature / 234.5) * temperature / (257.14 + temperature))


@_vapor(valid={"temperature": (-40.0, 50.0)}, source="alduchov_eskridge_1996", provenance="memory_high")
def _alduchov_eskridge_1996(temperature: Value) -> Value:
    """Saturation pressure over liquid water, Alduchov & Eskridge 1996.

    Notes
    -----
    0.61094 exp(17.625 t/(243.04 + t)) kPa; 2.6 % high at 100 degC.
    """
    return 0.61094 * exp(17.625 * temperature / (243.04 + temperature))


@_vapor(valid={"temperature": (-35.0, 35.0)}, source="bolton_1980", provenance="memory_high")
def _bolton_1980(temperature: Value) -> Value:
    """Saturation pressure over liquid water, Bolton 1980.

    Notes
    -----
    0.6112 exp(17.67 t/(243.5 + t)) kPa, made for -35 to 35 degC: body temperature is outside.
    """
    return 0.6112 * exp(17.67 * temperature / (243.5 + temperature))


@_vapor(valid={"temperature": (0.0, 50.0)}, source="tetens_1930", provenance="memory_high")
def _tetens_1930(temperature: Value) -> Value:
    """Saturation pressure over liquid water, Tetens 1930 in Murray's form.

    Notes
    -----
    0.61078 exp(17.27 t/(237.3 + t)) kPa.
    """
    return 0.61078 * exp(17.27 * temperature / (237.3 + temperature))


@_vapor(valid={"temperature": (1.0, 100.0)}, source="antoine_water", provenance="memory_high")
def _antoine(temperature: Value) -> Value:
    """Saturation pressure over liquid water by the Antoine equation.

    Notes
    -----
    log10 p = 8.07131 - 1730.63/(233.426 + t), p in mmHg, 1 to 100 degC; 0.4 % low at 37 degC.
    """
    return MMHG * 10.0 ** (8.07131 - 1730.63 / (233.426 + temperature))


@_vapor(valid={"temperature": (0.0, 40.0)}, source="blood_gas_vapor", provenance="secondary")
def _blood_gas_form(temperature: Value) -> Value:
    """Saturation pressure of water as blood gas analyzers take it.

    Notes
    -----
    47.07 mmHg times 10^(6.36 (t - 37)/(232 + t)), 0 to 40 degC.
    """
    return 47.07 * MMHG * 10.0 ** (6.36 * (temperature - 37.0) / (232.0 + temperature))


@_vapor(valid={"temperature": (30.0, 40.0)}, source="blood_gas_vapor", provenance="secondary")
def _exponential_form(temperature: Value) -> Value:
    """Saturation pressure of water by a plain exponential, near body temperature only.

    Notes
    -----
    10^(0.0244 t + 0.7655) + 0.4 mmHg; 18.3 in place of 17.5 mmHg at 20 degC.
    """
    return MMHG * (10.0 ** (0.0244 * temperature + 0.7655) + 0.4)


#: Every formula of the saturation pressure by name.
VAPOR_FORMULAS: dict[str, EquationFunction] = {
    "wagner_pruss_1993": saturation_pressure,
    "wexler_1976": _wexler_1976,
    "murphy_koop_2005": _murphy_koop_2005,
    "buck_1981": _buck_1981,
    "buck_1996": _buck_1996,
    "alduchov_eskridge_1996": _alduchov_eskridge_1996,
    "bolton_1980": _bolton_1980,
    "tetens_1930": _tetens_1930,
    "antoine": _antoine,
    "blood_gas_form": _blood_gas_form,
    "exponential_form": _exponential_form,
}


@formula(
    result="enhancement_factor",
    valid={"ambient_pressure": (50.0, 110.0, "fitted near 1 atm, at more pressure it is an extrapolation")},
    source="buck_1981",
    provenance="memory_high",
)
def enhancement_factor(ambient_pressure: Value) -> Value:
    """Factor by which compressed air raises the saturation vapor pressure of water.

    Notes
    -----
    Buck 1981: 1.0007 + 3.46e-6 times the pressure in hPa: 0.4 % at 1 atm, about 1 % at 3 atm by
    extrapolation. Respiratory physiology ignores it; in helium the factor is closer to 1.

    Examples
    --------
    >>> round(enhancement_factor(101.325), 4)
    1.0042
    """
    return 1.0007 + 3.46e-5 * ambient_pressure


@formula(
    result="enhancement_factor",
    valid={"temperature": (0.0, 45.0)},
    source="ideal_gas",
    provenance="computed",
)
def poynting_factor(ambient_pressure: Value, temperature: Value = 37.0) -> Value:
    """Factor by which squeezing the liquid alone raises its vapor pressure, above that at 1 atm.

    Notes
    -----
    exp(V (P - P0)/(R T)) with the molar volume V of liquid water: 0.17 mmHg at 6 atm and 37 degC. The
    interaction of vapor and compressed gas adds more, see :func:`enhancement_factor`.

    Examples
    --------
    >>> round(47.12 * (poynting_factor("6 atm") - 1.0), 2)
    0.17
    """
    return exp(
        WATER_MOLAR_VOLUME * (ambient_pressure - ATMOSPHERE) / (GAS_CONSTANT * (temperature + ZERO_CELSIUS))
    )
