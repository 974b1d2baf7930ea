"""What a cylinder holds."""

from __future__ import annotations

from typing import Any

from gasphys.constants import ATMOSPHERE, GAS_CONSTANT, ZERO_CELSIUS
from gasphys.equation import Value, choice, formula, inverse
from gasphys.gas import gas_fractions
from gasphys.real_gas.data import judged
from gasphys.real_gas.ideal import mixture_molar_mass
from gasphys.real_gas.virial import (
    PRESSURE_RANGE,
    REFUSE,
    TRACE,
    VIRIAL,
    WARM,
    virial_density,
    virial_pressure,
    virial_root,
)

__all__ = ["cylinder_content", "cylinder_pressure", "free_gas_volume"]

CYLINDER_RANGE = {"cylinder_pressure": PRESSURE_RANGE["ambient_pressure"]}


@formula(
    result="cylinder_pressure",
    valid=WARM | TRACE,
    refuse=REFUSE,
    register=False,
    judged=judged,
    **VIRIAL,
)
def _virial_cylinder_pressure(
    amount: Value,
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    water_capacity: Value,
    temperature: Value = 20.0,
) -> Value:
    """Pressure in a cylinder by the virial series, explicit in the amount."""
    return virial_pressure(
        amount
        * mixture_molar_mass(oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide)
        / water_capacity,
        oxygen,
        nitrogen,
        helium,
        argon,
        hydrogen,
        neon,
        carbon_dioxide,
        temperature,
    )


@formula(result="cylinder_pressure", source="ideal_gas", provenance="read", register=False)
def _ideal_cylinder_pressure(amount: Value, water_capacity: Value, temperature: Value = 20.0) -> Value:
    """Pressure in a cylinder by the ideal gas law."""
    return amount * GAS_CONSTANT * (temperature + ZERO_CELSIUS) / water_capacity


def _virial_content_root(cylinder_pressure: Any, *rest: Any) -> Any:
    *fractions, water_capacity, temperature = rest
    density = virial_root(cylinder_pressure, *fractions, temperature)
    return density * water_capacity / mixture_molar_mass.raw(*fractions)


_virial_content = inverse(
    _virial_cylinder_pressure,
    "amount",
    name="cylinder_content",
    module=__name__,
    kernel=_virial_content_root,
    valid=CYLINDER_RANGE,
    doc="""Amount of gas in a cylinder by the virial series.""",
    register=False,
)
_ideal_content = inverse(
    _ideal_cylinder_pressure,
    "amount",
    name="cylinder_content",
    module=__name__,
    kernel=lambda pressure, *rest: pressure / _ideal_cylinder_pressure.raw(1.0, *rest),
    doc="""Amount of gas in a cylinder by the ideal gas law.""",
    register=False,
)


@choice(
    option="model",
    registry={"virial": _virial_cylinder_pressure, "ideal": _ideal_cylinder_pressure},
    spread={"gas": gas_fractions},
)
def cylinder_pressure(
    amount: Value, gas: Value, water_capacity: Value = 1.0, temperature: Value = 20.0, model: str = "virial"
) -> Value:
    """Pressure of an amount of gas in a cylinder.

    Notes
    -----
    Explicit: no iteration. Absolute; a gauge reads less by the ambient pressure. The cylinder is rigid.

    Examples
    --------
    >>> round(cylinder_pressure(100.0, "air", water_capacity=12.0), 0)
    21019.0
    """


@choice(
    option="model",
    registry={"virial": _virial_content, "ideal": _ideal_content},
    spread={"gas": gas_fractions},
)
def cylinder_content(
    cylinder_pressure: Value,
    gas: Value,
    water_capacity: Value = 1.0,
    temperature: Value = 20.0,
    model: str = "virial",
) -> Value:
    """Amount of gas in a cylinder.

    Notes
    -----
    n = V rho(p, x, T)/M. The pressure is absolute: add the ambient pressure to a gauge reading.

    Examples
    --------
    >>> round(cylinder_content("232 bar", "air", water_capacity=12.0), 1)
    108.8
    """


@formula(
    result="free_gas_volume",
    quantities={"ambient_pressure": "gas_pressure", "ambient_temperature": "temperature"},
    valid=WARM | TRACE | PRESSURE_RANGE | CYLINDER_RANGE | {"ambient_temperature": WARM["temperature"]},
    refuse=REFUSE | {"ambient_temperature": REFUSE["temperature"]},
    register=False,
    judged=judged,
    **VIRIAL,
)
def _virial_free_gas(
    cylinder_pressure: Value,
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    water_capacity: Value = 1.0,
    temperature: Value = 20.0,
    ambient_pressure: Value = ATMOSPHERE,
    ambient_temperature: Value = 20.0,
) -> Value:
    """Volume of a filling let out to ambient pressure, by the virial series."""
    return (
        water_capacity
        * virial_density(
            cylinder_pressure, oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide, temperature
        )
        / virial_density(
            ambient_pressure,
            oxygen,
            nitrogen,
            helium,
            argon,
            hydrogen,
            neon,
            carbon_dioxide,
            ambient_temperature,
        )
    )


@formula(
    result="free_gas_volume",
    quantities={"ambient_pressure": "gas_pressure", "ambient_temperature": "temperature"},
    source="ideal_gas",
    provenance="read",
    register=False,
)
def _ideal_free_gas(
    cylinder_pressure: Value,
    water_capacity: Value = 1.0,
    temperature: Value = 20.0,
    ambient_pressure: Value = ATMOSPHERE,
    ambient_temperature: Value = 20.0,
) -> Value:
    """Volume of a filling let out to ambient pressure, by the ideal gas law."""
    return (
        water_capacity
        * cylinder_pressure
        / ambient_pressure
        * ((ambient_temperature + ZERO_CELSIUS) / (temperature + ZERO_CELSIUS))
    )


@choice(
    option="model",
    registry={"virial": _virial_free_gas, "ideal": _ideal_free_gas},
    spread={"gas": gas_fractions},
)
def free_gas_volume(
    cylinder_pressure: Value,
    gas: Value,
    water_capacity: Value = 1.0,
    temperature: Value = 20.0,
    ambient_pressure: Value = 101.325,
    ambient_temperature: Value = 20.0,
    model: str = "virial",
) -> Value:
    """Volume that the whole filling of a cylinder takes up at ambient pressure.

    Notes
    -----
    V rho(p, T)/rho(p_amb, T_amb). What stays behind in the cylinder at ambient pressure is included; what a
    reserve keeps is not subtracted.

    Examples
    --------
    >>> round(free_gas_volume("200 bar", "air", water_capacity=12.0))
    2303
    """
