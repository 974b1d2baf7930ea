"""Gas laws: Boyle, Dalton, Henry, and gas volumes between STPD, BTPS and ATPS."""

from __future__ import annotations

from gasphys.constants import ATMOSPHERE, BODY_TEMPERATURE, BODY_VAPOR_PRESSURE, ZERO_CELSIUS
from gasphys.equation import Value, choice, formula
from gasphys.maths import sqrt, where
from gasphys.vapor import saturation_pressure

__all__ = [
    "boyle_volume",
    "charles_volume",
    "combined_gas_volume",
    "convert_gas_volume",
    "dalton_partial_pressure",
    "gay_lussac_pressure",
    "graham_rate_ratio",
    "henry_dissolved_gas",
]


@formula(result="final_volume", source="boyle_1662", provenance="read")
def boyle_volume(volume: Value, initial_pressure: Value, final_pressure: Value) -> Value:
    """Volume of a fixed amount of gas after a change of pressure at one temperature.

    Notes
    -----
    Boyle's law, V2 = V1 P1 / P2, both pressures absolute, dry gas. Gas in the body is saturated:
    for it use the humid form of trapped gas.

    Examples
    --------
    >>> boyle_volume(1.0, 101.325, 202.65)
    0.5
    """
    return volume * initial_pressure / final_pressure


@formula(result="final_volume", source="charles_gay_lussac", provenance="read")
def charles_volume(volume: Value, initial_temperature: Value, final_temperature: Value) -> Value:
    """Volume of a fixed amount of dry gas after a change of temperature at one pressure.

    Notes
    -----
    Charles and Gay-Lussac: V2 = V1 T2/T1, temperatures absolute (given here in degC).

    Examples
    --------
    >>> round(charles_volume(1.0, 0.0, 37.0), 4)
    1.1355
    """
    return volume * (final_temperature + ZERO_CELSIUS) / (initial_temperature + ZERO_CELSIUS)


@formula(result="final_pressure", source="charles_gay_lussac", provenance="read")
def gay_lussac_pressure(
    initial_pressure: Value, initial_temperature: Value, final_temperature: Value
) -> Value:
    """Pressure of a fixed amount of dry gas after a change of temperature at one volume.

    Notes
    -----
    Gay-Lussac: P2 = P1 T2/T1, pressure absolute, temperatures absolute (given here in degC). Ideal
    gas: at cylinder pressures the real gas differs by several percent.

    Examples
    --------
    >>> round(gay_lussac_pressure(20000.0, 40.0, 10.0), 0)
    18084.0
    """
    return initial_pressure * (final_temperature + ZERO_CELSIUS) / (initial_temperature + ZERO_CELSIUS)


@formula(result="final_volume", source="ideal_gas", provenance="read")
def combined_gas_volume(
    volume: Value,
    initial_pressure: Value,
    final_pressure: Value,
    initial_temperature: Value,
    final_temperature: Value,
) -> Value:
    """Volume of a fixed amount of dry gas after a change of pressure and temperature.

    Notes
    -----
    The combined law, V2 = V1 (P1/P2) (T2/T1), pressures and temperatures absolute.

    Examples
    --------
    >>> round(combined_gas_volume(10.0, 202.65, 101.325, 10.0, 20.0), 3)
    20.706
    """
    return (
        volume
        * (initial_pressure / final_pressure)
        * (final_temperature + ZERO_CELSIUS)
        / (initial_temperature + ZERO_CELSIUS)
    )


@formula(result="rate_ratio", source="graham_1846", provenance="read")
def graham_rate_ratio(molar_mass: Value, molar_mass_of_other: Value) -> Value:
    """Ratio of the rates at which two gases effuse.

    Notes
    -----
    Graham: r1/r2 = sqrt(M2/M1). Diffusion through tissue follows solubility as well: per unit of
    partial pressure CO2 passes about 20 times as fast as O2 for its solubility, not its mass.

    Examples
    --------
    >>> round(graham_rate_ratio(4.0026, 28.0134), 3)
    2.646
    """
    return sqrt(molar_mass_of_other / molar_mass)


@formula(result="partial_pressure", source="dalton_1802", provenance="read")
def dalton_partial_pressure(fraction: Value, total_pressure: Value) -> Value:
    """Partial pressure of one gas in a mixture.

    Notes
    -----
    Dalton's law. Fraction and pressure must both be of dry gas or both of humid gas.

    Examples
    --------
    >>> dalton_partial_pressure(0.5, 200.0)
    100.0
    """
    return fraction * total_pressure


@formula(result="dissolved_gas", source="henry_1803", provenance="read")
def henry_dissolved_gas(partial_pressure: Value, solubility: Value) -> Value:
    """Gas in physical solution at equilibrium.

    Notes
    -----
    Henry's law: content = solubility times partial pressure, at one temperature. Not for gas
    bound by hemoglobin.

    Examples
    --------
    >>> henry_dissolved_gas(100.0, 0.02)
    2.0
    """
    return partial_pressure * solubility


@formula(
    result="water_vapor_pressure",
    source=("gas_volume_states", "wagner_pruss_1993"),
    provenance="secondary",
    register=False,
)
def room_vapor(temperature: Value, relative_humidity: Value) -> Value:
    """Vapor pressure of room gas: 47 mmHg at 37 degC by convention, the saturation formula otherwise.

    Examples
    --------
    >>> round(room_vapor(20.0, 1.0), 4)
    2.3392
    """
    return relative_humidity * where(
        (temperature < 37.0) | (temperature > 37.0),
        saturation_pressure(temperature),
        BODY_VAPOR_PRESSURE,
    )


_state = {"result": "final_volume", "source": "gas_volume_states", "provenance": "secondary"}


@formula(**_state, register=False)  # type: ignore[arg-type]
def _same(volume: Value) -> Value:
    """The volume unchanged: source and target are the same state."""
    return volume * 1.0


@formula(**_state, register=False)  # type: ignore[arg-type]
def _btps_to_stpd(
    volume: Value, ambient_pressure: Value, body_vapor_pressure: Value = BODY_VAPOR_PRESSURE
) -> Value:
    """Volume at STPD of gas given at BTPS."""
    return volume * (ambient_pressure - body_vapor_pressure) / ATMOSPHERE * (ZERO_CELSIUS / BODY_TEMPERATURE)


@formula(**_state, register=False)  # type: ignore[arg-type]
def _stpd_to_btps(
    volume: Value, ambient_pressure: Value, body_vapor_pressure: Value = BODY_VAPOR_PRESSURE
) -> Value:
    """Volume at BTPS of gas given at STPD."""
    return volume * ATMOSPHERE / (ambient_pressure - body_vapor_pressure) * (BODY_TEMPERATURE / ZERO_CELSIUS)


@formula(**_state, register=False)  # type: ignore[arg-type]
def _atps_to_stpd(
    volume: Value, ambient_pressure: Value, temperature: Value, relative_humidity: Value
) -> Value:
    """Volume at STPD of gas given at room temperature and ambient pressure."""
    return (
        volume
        * (ambient_pressure - room_vapor(temperature, relative_humidity))
        / ATMOSPHERE
        * (ZERO_CELSIUS / (temperature + ZERO_CELSIUS))
    )


@formula(**_state, register=False)  # type: ignore[arg-type]
def _stpd_to_atps(
    volume: Value, ambient_pressure: Value, temperature: Value, relative_humidity: Value
) -> Value:
    """Volume at room temperature and ambient pressure of gas given at STPD."""
    return (
        volume
        * ATMOSPHERE
        / (ambient_pressure - room_vapor(temperature, relative_humidity))
        * ((temperature + ZERO_CELSIUS) / ZERO_CELSIUS)
    )


@formula(**_state, register=False)  # type: ignore[arg-type]
def _atps_to_btps(
    volume: Value,
    ambient_pressure: Value,
    temperature: Value,
    relative_humidity: Value,
    body_vapor_pressure: Value = BODY_VAPOR_PRESSURE,
) -> Value:
    """Volume at BTPS of gas given at room temperature and ambient pressure."""
    return (
        volume
        * (ambient_pressure - room_vapor(temperature, relative_humidity))
        / (ambient_pressure - body_vapor_pressure)
        * (BODY_TEMPERATURE / (temperature + ZERO_CELSIUS))
    )


@formula(**_state, register=False)  # type: ignore[arg-type]
def _btps_to_atps(
    volume: Value,
    ambient_pressure: Value,
    temperature: Value,
    relative_humidity: Value,
    body_vapor_pressure: Value = BODY_VAPOR_PRESSURE,
) -> Value:
    """Volume at room temperature and ambient pressure of gas given at BTPS."""
    return (
        volume
        * (ambient_pressure - body_vapor_pressure)
        / (ambient_pressure - room_vapor(temperature, relative_humidity))
        * ((temperature + ZERO_CELSIUS) / BODY_TEMPERATURE)
    )


@choice(
    option=("source", "target"),
    word="gas volume state",
    registry={
        ("btps", "stpd"): _btps_to_stpd,
        ("stpd", "btps"): _stpd_to_btps,
        ("atps", "stpd"): _atps_to_stpd,
        ("stpd", "atps"): _stpd_to_atps,
        ("atps", "btps"): _atps_to_btps,
        ("btps", "atps"): _btps_to_atps,
        ("stpd", "stpd"): _same,
        ("btps", "btps"): _same,
        ("atps", "atps"): _same,
    },
)
def convert_gas_volume(
    volume: Value,
    source: str = "btps",
    target: str = "stpd",
    ambient_pressure: Value = 101.325,
    temperature: Value = 20.0,
    relative_humidity: Value = 1.0,
    *,
    body_vapor_pressure: Value = float(BODY_VAPOR_PRESSURE),
) -> Value:
    """Volume (or flow) of gas at another state: STPD, BTPS or ATPS.

    Notes
    -----
    V2 = V1 (T2/T1) (P1 - Pw1) / (P2 - Pw2). STPD: 0 degC, 101.325 kPa, dry. BTPS: 37 degC, ambient
    pressure, saturated (47 mmHg by convention). ATPS: the given temperature, ambient pressure and
    humidity. Away from 37 degC the saturation formula of IAPWS is used.

    Examples
    --------
    >>> round(convert_gas_volume(1.0, "btps", "stpd"), 4)
    0.8262
    """
