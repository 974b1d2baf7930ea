"""How much gas is used, how long it lasts, and where two cylinders meet."""

from __future__ import annotations

from gasphys.constants import ATMOSPHERE, GAS_CONSTANT, ZERO_CELSIUS
from gasphys.equation import Value, choice, formula
from gasphys.gas import gas_fractions
from gasphys.maths import maximum
from gasphys.real_gas.cylinders import CYLINDER_RANGE
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
)

__all__ = [
    "cylinder_duration",
    "equalized_pressure",
    "free_gas_flow",
    "loop_diluent",
    "open_circuit_use",
]


@formula(result="free_gas_flow", source="boyle_1662", provenance="computed")
def free_gas_flow(surface_rate: Value, ambient_pressure: Value) -> Value:
    """Free gas used per minute on open circuit: what is breathed, counted at 1 atm.

    Notes
    -----
    Ideal gas at one temperature: rate times ambient pressure over 101.325 kPa. The volume breathed per
    minute is taken to be the same at every pressure. Dense gas, cold and work change that.

    Examples
    --------
    >>> free_gas_flow(20.0, 405.3)
    80.0
    """
    return surface_rate * ambient_pressure / ATMOSPHERE


@formula(
    result="free_gas_volume",
    quantities={"loop_volume": "volume"},
    source="boyle_1662",
    provenance="computed",
)
def loop_diluent(loop_volume: Value, start_pressure: Value, end_pressure: Value) -> Value:
    """Free volume of diluent that keeps a breathing loop full while the pressure rises.

    Notes
    -----
    V (p2 - p1)/(1 atm), at the temperature of the loop; nothing while the pressure falls. What is vented by
    masks and lungs, and what is flushed, comes on top. A loop held at its set-point all the way down needs
    more: its oxygen stays the same, so the inert gas alone fills it, 1/(1 - O2 fraction of the diluent) times
    as much.

    Examples
    --------
    >>> round(loop_diluent(6.0, 101.325, 661.325), 1)
    33.2
    """
    return loop_volume * maximum(end_pressure - start_pressure, 0.0) / ATMOSPHERE


# -- open circuit, in moles ------------------------------------------------------------------------


@formula(
    result="gas_use",
    valid=WARM | TRACE | PRESSURE_RANGE,
    refuse=REFUSE,
    register=False,
    judged=judged,
    **VIRIAL,
)
def _virial_open_circuit_use(
    surface_rate: Value,
    ambient_pressure: Value,
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    temperature: Value = 20.0,
    water_vapor_pressure: Value = 0.0,
) -> Value:
    """Dry gas breathed per minute, by the virial series."""
    return (
        surface_rate
        * virial_density(
            ambient_pressure - water_vapor_pressure,
            oxygen,
            nitrogen,
            helium,
            argon,
            hydrogen,
            neon,
            carbon_dioxide,
            temperature,
        )
        / mixture_molar_mass(oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide)
    )


@formula(result="gas_use", source="ideal_gas", provenance="read", register=False)
def _ideal_open_circuit_use(
    surface_rate: Value,
    ambient_pressure: Value,
    temperature: Value = 20.0,
    water_vapor_pressure: Value = 0.0,
) -> Value:
    """Dry gas breathed per minute, by the ideal gas law."""
    return (
        surface_rate
        * (ambient_pressure - water_vapor_pressure)
        / (GAS_CONSTANT * (temperature + ZERO_CELSIUS))
    )


@choice(
    option="model",
    registry={"virial": _virial_open_circuit_use, "ideal": _ideal_open_circuit_use},
    spread={"gas": gas_fractions},
)
def open_circuit_use(
    surface_rate: Value,
    ambient_pressure: Value,
    gas: Value,
    temperature: Value = 20.0,
    water_vapor_pressure: Value = 0.0,
    model: str = "virial",
) -> Value:
    """Amount of gas taken from the supply per minute on open circuit.

    Notes
    -----
    Volume breathed per minute times molar density at ambient pressure. Two ways to count the volume: a
    surface rate is dry gas at the temperature given; a minute ventilation BTPS is 37 degC with 6.266 kPa of
    vapor, which does not come from the cylinder. The two differ by 6 % for one number.

    Examples
    --------
    >>> round(open_circuit_use(20.0, 401.3, "air", model="ideal"), 3)
    3.293
    >>> round(open_circuit_use(20.0, 401.3, "air", 37.0, 6.266, model="ideal"), 3)
    3.064
    """


# -- how long a cylinder lasts ---------------------------------------------------------------------

_DURATION = {"reserve_pressure": "cylinder_pressure", "ambient_temperature": "temperature"}
#: A cylinder from which nothing is breathed lasts for ever, which is no number.
_BREATHED = {"surface_rate": (0.001, 400.0)}


@formula(
    result="duration",
    quantities=_DURATION,
    valid=WARM
    | TRACE
    | PRESSURE_RANGE
    | CYLINDER_RANGE
    | {
        "reserve_pressure": CYLINDER_RANGE["cylinder_pressure"],
        "ambient_temperature": WARM["temperature"],
    },
    refuse=REFUSE | {"ambient_temperature": REFUSE["temperature"]} | _BREATHED,
    register=False,
    judged=judged,
    **VIRIAL,
)
def _virial_duration(
    cylinder_pressure: Value,
    reserve_pressure: Value,
    surface_rate: Value,
    ambient_pressure: Value,
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    water_capacity: Value = 1.0,
    temperature: Value = 20.0,
    ambient_temperature: Value = 20.0,
) -> Value:
    """Time that a cylinder lasts at one ambient pressure, by the virial series."""
    return (
        water_capacity
        * (
            virial_density(
                cylinder_pressure,
                oxygen,
                nitrogen,
                helium,
                argon,
                hydrogen,
                neon,
                carbon_dioxide,
                temperature,
            )
            - virial_density(
                reserve_pressure,
                oxygen,
                nitrogen,
                helium,
                argon,
                hydrogen,
                neon,
                carbon_dioxide,
                temperature,
            )
        )
        / (
            virial_density(
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
            * surface_rate
        )
    )


@formula(
    result="duration",
    quantities=_DURATION,
    refuse=_BREATHED,
    source="ideal_gas",
    provenance="read",
    register=False,
)
def _ideal_duration(
    cylinder_pressure: Value,
    reserve_pressure: Value,
    surface_rate: Value,
    ambient_pressure: Value,
    water_capacity: Value = 1.0,
    temperature: Value = 20.0,
    ambient_temperature: Value = 20.0,
) -> Value:
    """Time that a cylinder lasts at one ambient pressure, by the ideal gas law."""
    return (
        water_capacity
        * (cylinder_pressure - reserve_pressure)
        * (ambient_temperature + ZERO_CELSIUS)
        / ((temperature + ZERO_CELSIUS) * ambient_pressure * surface_rate)
    )


@choice(
    option="model",
    registry={"virial": _virial_duration, "ideal": _ideal_duration},
    spread={"gas": gas_fractions},
)
def cylinder_duration(
    cylinder_pressure: Value,
    reserve_pressure: Value,
    surface_rate: Value,
    ambient_pressure: Value,
    gas: Value,
    water_capacity: Value = 1.0,
    temperature: Value = 20.0,
    ambient_temperature: Value = 20.0,
    model: str = "virial",
) -> Value:
    """Time that a cylinder lasts at one ambient pressure, down to a reserve.

    Notes
    -----
    V [rho(p1, T) - rho(p2, T)]/(rho(p_amb, T_amb) rate): one temperature in the cylinder, one where the gas
    is breathed. Pressures are absolute. For a whole exposure use :func:`gasphys.supply.stock`.

    Examples
    --------
    >>> round(cylinder_duration("232 bar", "50 bar", 20.0, 401.3, "air", 24.0, model="ideal"), 1)
    54.4
    >>> round(cylinder_duration("232 bar", "50 bar", 20.0, 401.3, "air", 24.0), 1)
    50.9
    """


# -- two cylinders joined --------------------------------------------------------------------------

_TWO = {
    "first_pressure": "cylinder_pressure",
    "second_pressure": "cylinder_pressure",
    "first_capacity": "water_capacity",
    "second_capacity": "water_capacity",
}


@formula(
    result="cylinder_pressure",
    quantities=_TWO,
    valid=WARM
    | TRACE
    | dict.fromkeys(("first_pressure", "second_pressure"), CYLINDER_RANGE["cylinder_pressure"]),
    refuse=REFUSE,
    register=False,
    judged=judged,
    **VIRIAL,
)
def _virial_equalized(
    first_pressure: Value,
    second_pressure: Value,
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    first_capacity: Value = 1.0,
    second_capacity: Value = 1.0,
    temperature: Value = 20.0,
) -> Value:
    """Pressure at which two joined cylinders of one gas meet, by the virial series."""
    return virial_pressure(
        (
            first_capacity
            * virial_density(
                first_pressure, oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide, temperature
            )
            + second_capacity
            * virial_density(
                second_pressure, oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide, temperature
            )
        )
        / (first_capacity + second_capacity),
        oxygen,
        nitrogen,
        helium,
        argon,
        hydrogen,
        neon,
        carbon_dioxide,
        temperature,
    )


@formula(result="cylinder_pressure", quantities=_TWO, source="ideal_gas", provenance="read", register=False)
def _ideal_equalized(
    first_pressure: Value,
    second_pressure: Value,
    first_capacity: Value = 1.0,
    second_capacity: Value = 1.0,
) -> Value:
    """Pressure at which two joined cylinders meet, by the ideal gas law."""
    return (first_pressure * first_capacity + second_pressure * second_capacity) / (
        first_capacity + second_capacity
    )


@choice(
    option="model",
    registry={"virial": _virial_equalized, "ideal": _ideal_equalized},
    spread={"gas": gas_fractions},
)
def equalized_pressure(
    first_pressure: Value,
    second_pressure: Value,
    gas: Value,
    first_capacity: Value = 1.0,
    second_capacity: Value = 1.0,
    temperature: Value = 20.0,
    model: str = "virial",
) -> Value:
    """Pressure at which two joined cylinders of one gas meet.

    Notes
    -----
    Moles are conserved: rho(p) (V1 + V2) = rho(p1) V1 + rho(p2) V2, settled to one temperature. Different
    gases: :func:`gasphys.supply.cascade_fill`.

    Examples
    --------
    >>> equalized_pressure("200 bar", "20 bar", "air", 50.0, 10.0, model="ideal")
    17000.0
    >>> round(equalized_pressure("200 bar", "20 bar", "oxygen", 50.0, 10.0))
    16922
    """
