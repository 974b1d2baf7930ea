"""Oxygen in breathing loops: steady states, the way there, and what is left when a supply fails."""

from __future__ import annotations

import functools

from gasphys.constants import ATMOSPHERE, BODY_TEMPERATURE, BODY_VAPOR_PRESSURE, ZERO_CELSIUS
from gasphys.equation import Value, choice, formula
from gasphys.maths import exp, maximum, ramp_gain, where

__all__ = [
    "absorbent_duration",
    "breath_keyed_o2_fraction",
    "closed_loop_po2_rate",
    "constant_mass_ratio_o2_fraction",
    "flushed_loop_o2_fraction",
    "loop_o2_after",
    "semi_closed_o2_fraction",
    "semi_closed_time_constant",
    "shrinking_loop_o2_fraction",
    "time_to_po2",
]

_FLOW = {
    "supply_flow": "supply_flow_stpd",
    "supply_o2": "supply_o2_fraction",
    "o2_uptake": "o2_uptake_stpd",
    "loop_gas": "loop_gas_stpd",
    "initial_o2": "initial_loop_o2_fraction",
}
_loop = functools.partial(formula, quantities=_FLOW, source="loop_mass_balance", provenance="computed")


@_loop(result="loop_o2_fraction", check_result=True)
def semi_closed_o2_fraction(supply_flow: Value, supply_o2: Value, o2_uptake: Value) -> Value:
    """O2 fraction of a semi-closed loop with constant mass flow, in the steady state.

    Notes
    -----
    (Q Fs - VO2)/(Q - VO2), all flows STPD: it does not depend on depth. A flow that is not larger than the
    O2 uptake has no steady state, and one that brings less O2 than is used ends without oxygen: the result
    is then far below 0, which is reported, not clipped; :func:`loop_o2_after` tells what happens. Well
    mixed, CO2 absorbed, no uptake of inert gas, overpressure discharged.

    Examples
    --------
    >>> round(semi_closed_o2_fraction(10.0, 0.40, 1.2), 4)
    0.3182
    """
    # Without a surplus nothing is discharged and there is no steady state: the result is not a fraction.
    return (supply_flow * supply_o2 - o2_uptake) / maximum(supply_flow - o2_uptake, 1e-12)


@_loop(result="time_constant", check_result=True)
def semi_closed_time_constant(loop_gas: Value, supply_flow: Value, o2_uptake: Value) -> Value:
    """Time constant of the O2 fraction in a semi-closed loop.

    Notes
    -----
    Vn/(Q - VO2), Vn the gas of the loop STPD: it grows with pressure, so a deep loop is slow. Not defined
    for a flow that is not larger than the O2 uptake.

    Examples
    --------
    >>> round(semi_closed_time_constant(24.416, 10.0, 1.2), 3)
    2.775
    """
    return loop_gas / maximum(supply_flow - o2_uptake, 1e-12)


@formula(
    result="loop_fraction",
    quantities={"initial_fraction": "initial_loop_fraction", "loop_gas": "loop_gas_stpd"},
    source="loop_mass_balance",
    provenance="computed",
    register=False,
)
def flushed_fraction(
    duration: Value,
    initial_fraction: Value,
    net_inflow_stpd: Value,
    surplus_flow_stpd: Value,
    loop_gas: Value,
) -> Value:
    """Fraction of one gas in a loop that overflows: what came first decays, what flows in takes its place.

    Notes
    -----
    V dF/dt = net inflow of the gas - surplus F, regular where the surplus is zero. For any gas: the net
    inflow of oxygen is what O2 uptake leaves. Of a loop whose amount changes, `duration` is the integral
    of time over amount and `loop_gas` 1.

    Examples
    --------
    >>> flushed_fraction(2.0, 0.5, 0.0, 0.0, 10.0)
    0.5
    """
    turns = surplus_flow_stpd * duration / loop_gas
    return initial_fraction * exp(-turns) + net_inflow_stpd * duration / loop_gas * (1.0 - ramp_gain(turns))


@_loop(result="loop_o2_fraction", check_result=True)
def flushed_loop_o2_fraction(
    duration: Value,
    initial_o2: Value,
    supply_flow: Value,
    supply_o2: Value,
    o2_uptake: Value,
    loop_gas: Value,
) -> Value:
    """O2 fraction after some time at one depth of a loop that is kept full and overflows.

    Notes
    -----
    Fss + (F0 - Fss) exp(-t/tau), written so that it is regular where the flow equals O2 uptake. It holds
    while the flow exceeds O2 uptake; beyond that see :func:`shrinking_loop_o2_fraction`.

    Examples
    --------
    >>> round(flushed_loop_o2_fraction(2.0, 0.21, 10.0, 0.40, 1.2, 24.416), 4)
    0.2656
    """
    return flushed_fraction(
        duration, initial_o2, supply_flow * supply_o2 - o2_uptake, supply_flow - o2_uptake, loop_gas
    )


@_loop(result="loop_o2_fraction", check_result=True)
def shrinking_loop_o2_fraction(
    duration: Value,
    initial_o2: Value,
    supply_flow: Value,
    supply_o2: Value,
    o2_uptake: Value,
    loop_gas: Value,
) -> Value:
    """O2 fraction after some time at one depth of a loop whose supply does not cover O2 uptake.

    Notes
    -----
    Nothing is discharged: inert gas Vn (1 - F0) + Q (1 - Fs) t stays, the amount is Vn + (Q - VO2) t. It
    holds until the oxygen is used up (then the result is negative, which is reported) or a valve keeps the
    loop full. With no flow at all the supply has failed.

    Examples
    --------
    >>> round(shrinking_loop_o2_fraction(5.0, 0.32, 0.0, 0.40, 1.2, 24.416), 3)
    0.098
    """
    inert = loop_gas * (1.0 - initial_o2) + supply_flow * (1.0 - supply_o2) * duration
    return 1.0 - inert / (loop_gas + (supply_flow - o2_uptake) * duration)


@_loop(result="loop_o2_fraction", check_result=True)
def loop_o2_after(
    duration: Value,
    initial_o2: Value,
    supply_flow: Value,
    supply_o2: Value,
    o2_uptake: Value,
    loop_gas: Value,
) -> Value:
    """O2 fraction of a loop after some time at one depth.

    Notes
    -----
    While the flow exceeds O2 uptake the surplus is discharged and the fraction moves to its steady state
    with :func:`semi_closed_time_constant`. Otherwise the loop shrinks: an exponential with a negative time
    constant would be wrong there.

    Along changes of pressure: :func:`gasphys.breathing.loop_oxygen`.

    Examples
    --------
    >>> [round(loop_o2_after(t, 0.21, 10.0, 0.40, 1.2, 24.416), 4) for t in (2.0, 5.0)]
    [0.2656, 0.3003]
    """
    return where(
        supply_flow > o2_uptake,
        flushed_loop_o2_fraction(duration, initial_o2, supply_flow, supply_o2, o2_uptake, loop_gas),
        shrinking_loop_o2_fraction(duration, initial_o2, supply_flow, supply_o2, o2_uptake, loop_gas),
    )


_keyed = functools.partial(
    formula,
    result="loop_o2_fraction",
    quantities={"supply_o2": "supply_o2_fraction"},
    source="loop_mass_balance",
    provenance="computed",
    check_result=True,
    register=False,
)


@_keyed()
def _keyed_same(
    ambient_pressure: Value, supply_o2: Value, discharged_share: Value, ventilation_per_o2_uptake: Value
) -> Value:
    """Breath-keyed set, ventilation and O2 uptake in the same conditions."""
    return supply_o2 - (1.0 - supply_o2) * ATMOSPHERE / (
        discharged_share * ventilation_per_o2_uptake * ambient_pressure
    )


@_keyed()
def _keyed_stpd(
    ambient_pressure: Value, supply_o2: Value, discharged_share: Value, ventilation_per_o2_uptake: Value
) -> Value:
    """Breath-keyed set, ventilation BTPS and O2 uptake STPD."""
    dry = maximum(ambient_pressure - BODY_VAPOR_PRESSURE, 0.0)
    stpd = ZERO_CELSIUS / BODY_TEMPERATURE * dry / ambient_pressure
    return _keyed_same(ambient_pressure, supply_o2, discharged_share, ventilation_per_o2_uptake * stpd)


@choice(option="conditions", registry={"btps_and_stpd": _keyed_stpd, "same": _keyed_same})
def breath_keyed_o2_fraction(
    ambient_pressure: Value,
    supply_o2: Value,
    discharged_share: Value,
    ventilation_per_o2_uptake: Value = 25.0,
    conditions: str = "btps_and_stpd",
) -> Value:
    """O2 fraction of a loop that discharges a share of each breath, in the steady state.

    Notes
    -----
    F = Fs - (1 - Fs)/(K epsilon p/p0): the drop is worst shallow, and a mix that is right at depth can be
    hypoxic at the surface. Ventilation at depth over O2 uptake: ``"same"`` counts both in the same
    conditions, ``"btps_and_stpd"`` ventilation BTPS and O2 uptake STPD.

    Examples
    --------
    >>> round(breath_keyed_o2_fraction("3 atm", 0.32, 0.1, 20.0, "same"), 4)
    0.2067
    """


@formula(
    result="loop_o2_fraction",
    quantities={"supply_o2": "supply_o2_fraction"},
    source="loop_mass_balance",
    provenance="computed",
    check_result=True,
)
def constant_mass_ratio_o2_fraction(
    injection_ratio: Value, supply_o2: Value, ventilation_per_o2_uptake: Value = 25.0
) -> Value:
    """O2 fraction of a loop whose supply is in proportion to ventilation by mass, in the steady state.

    Notes
    -----
    (a epsilon Fs - 1)/(a epsilon - 1), a in L STPD for each L BTPS breathed: the constant mass flow of a
    ventilation. Depth does not enter, nor work while epsilon holds. Measured against it: within 1
    percentage point of O2 but for 2.4 at the surface with one dosage (abstract read, PMID 26742257).

    Examples
    --------
    >>> round(constant_mass_ratio_o2_fraction(0.12, 0.60, 20.0), 4)
    0.3143
    """
    return semi_closed_o2_fraction(injection_ratio * ventilation_per_o2_uptake, supply_o2, 1.0)


# ---- Closed circuit ------------------------------------------------------------------------------


@formula(
    result="po2_rate",
    quantities={
        "o2_flow": "o2_flow_stpd",
        "o2_uptake": "o2_uptake_stpd",
        "diluent_o2": "diluent_o2_fraction",
    },
    source="emergency_loop_chemistry",
    provenance="computed",
)
def closed_loop_po2_rate(
    o2_flow: Value, o2_uptake: Value, loop_volume: Value, temperature: Value = 37.0, diluent_o2: Value = 0.0
) -> Value:
    """Rate at which the PO2 of a closed loop changes at one depth.

    Notes
    -----
    (QO2 - VO2) P0/V T/T0 (1 - Fdil): the loop is kept full with diluent of the O2 fraction Fdil. It does not
    depend on depth. Without any addition the loop shrinks instead, and at first the factor is 1 less the
    loop's own O2 fraction (:func:`loop_o2_after` with no supply); the factor 1 belongs to a diluent
    without oxygen, the fastest fall. While oxygen comes in faster than it is used, gas of the loop is vented
    and its O2 fraction stands in place of Fdil. Ideal, T that of the loop.

    Examples
    --------
    A loop of 6 L, O2 uptake 1 L/min, no more oxygen, in bar/min:

    >>> round(closed_loop_po2_rate(0.0, 1.0, 6.0) / 100.0, 4)
    -0.1918
    """
    return (
        (o2_flow - o2_uptake)
        * ATMOSPHERE
        / loop_volume
        * ((temperature + ZERO_CELSIUS) / ZERO_CELSIUS)
        * (1.0 - diluent_o2)
    )


@formula(result="time_to_po2", source="emergency_loop_chemistry", provenance="computed")
def time_to_po2(initial_po2: Value, final_po2: Value, po2_rate: Value) -> Value:
    """Time until a PO2 is reached at one rate of change.

    Notes
    -----
    With :func:`closed_loop_po2_rate` the time from a set-point to hypoxia when the oxygen of a closed loop
    fails and nobody notices: minutes. An ascent meanwhile shortens it.

    Examples
    --------
    From 1.3 bar to 0.16 bar:

    >>> round(time_to_po2("1.3 bar", "0.16 bar", closed_loop_po2_rate(0.0, 1.0, 6.0)), 1)
    5.9
    """
    return (final_po2 - initial_po2) / po2_rate


@formula(
    result="absorbent_duration",
    refuse={"co2_flow": (0.001, 100.0)},
    source="soda_lime_chemistry",
    provenance="computed",
)
def absorbent_duration(absorbent_capacity: Value, absorbent_mass: Value, co2_flow: Value) -> Value:
    """Longest time an absorbent can last: an upper bound, never a duration to count on.

    Notes
    -----
    Capacity times mass over CO2 flow, all in one condition. With the stoichiometric ceiling
    (:func:`gasphys.doses.absorbent_ceiling`) nothing can last longer; with the capacity of a bench run it is
    that bench. Cold water and depth can cut it by more than half. No prediction of a real canister is made.

    Examples
    --------
    2.64 kg at the ceiling of 80 % hydroxide, 1.35 L/min of CO2:

    >>> round(absorbent_duration(242.0, 2.64, 1.35))
    473
    """
    return absorbent_capacity * absorbent_mass / co2_flow
