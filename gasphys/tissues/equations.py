"""Equations of dissolved-gas models: what reaches a tissue, what it holds, what a model tolerates.

An M-value is valid only with the convention it was fitted with (vapor, CO2, exchange ratio, nitrogen
of air): the sets bring theirs, see :func:`gasphys.tissues.load`.
"""

from __future__ import annotations

from typing import Any

from gasphys.constants import (
    ATMOSPHERE,
    BODY_VAPOR_PRESSURE,
    EVA_HALF_TIME,
    EXERCISE_WASHOUT_RISE,
    EXERCISE_WASHOUT_SCALE,
    LN2,
    MMHG,
)
from gasphys.equation import Value, formula, inverse
from gasphys.maths import exp, expm1, log, maximum, ramp_gain, sqrt

__all__ = [
    "altitude_stop_depth",
    "alveolar_inert_pressure",
    "arterial_inert_pressure",
    "ceiling_pressure",
    "exercise_half_time",
    "gradient_fraction",
    "intercept_from_surfacing",
    "limit_fraction",
    "linear_tissue_pressure",
    "linear_washout_time",
    "loop_alveolar_inert_pressure",
    "m_value",
    "mixed_m_value_a",
    "mixed_m_value_b",
    "oxygen_window",
    "sea_level_equivalent_depth",
    "slip_flow",
    "supersaturation_ratio",
    "time_to_tissue_pressure",
    "tissue_pressure",
    "uptake_share",
    "washout_threshold",
]

_SCHREINER: dict[str, Any] = {"source": "schreiner_kelley_1971", "provenance": "memory_high"}
_THALMANN: dict[str, Any] = {
    "source": ("thalmann_1984", "gerth_doolette_2007"),
    "provenance": "memory_medium",
}
_BAKER: dict[str, Any] = {"source": "baker_1998", "provenance": "memory_high"}

# -- What reaches the tissue ----------------------------------------------------------------------


@formula(result="alveolar_inert_pressure", quantities={"inert_fraction": "fraction"}, **_SCHREINER)
def alveolar_inert_pressure(
    ambient_pressure: Value,
    inert_fraction: Value,
    water_vapor_pressure: Value = BODY_VAPOR_PRESSURE,
    respiratory_exchange_ratio: Value = 1.0,
    arterial_pco2: Value = 40.0 * MMHG,
) -> Value:
    """Alveolar (arterial) pressure of an inert gas on open circuit.

    Notes
    -----
    PA = (P - PH2O + (1 - R)/R PCO2) F, never below zero. With R = 1 the CO2 drops out; with R = 1 and no
    vapor it is the dry convention, F P. Each parameter set names its own convention.

    Examples
    --------
    Air at 1 bar, vapor 0.0627 bar:

    >>> round(alveolar_inert_pressure(100.0, 0.79, 6.27), 4)
    74.0467
    """
    surplus = (1.0 - respiratory_exchange_ratio) / respiratory_exchange_ratio * arterial_pco2
    return maximum(ambient_pressure - water_vapor_pressure + surplus, 0.0) * inert_fraction


@formula(result="alveolar_inert_pressure", quantities={"inert_share": "fraction"}, **_SCHREINER)
def loop_alveolar_inert_pressure(
    ambient_pressure: Value,
    setpoint: Value,
    inert_share: Value = 1.0,
    water_vapor_pressure: Value = BODY_VAPOR_PRESSURE,
) -> Value:
    """Alveolar pressure of an inert gas on a loop held at a PO2.

    Notes
    -----
    PA = (P - PH2O - set-point) times the gas's share of what is not oxygen in the diluent; zero where the
    set-point leaves no room for inert gas.

    Examples
    --------
    >>> round(loop_alveolar_inert_pressure(400.0, 130.0, 0.5, 6.27), 3)
    131.865
    """
    return maximum(ambient_pressure - water_vapor_pressure - setpoint, 0.0) * inert_share


@formula(result="alveolar_inert_pressure", **_THALMANN)
def arterial_inert_pressure(
    ambient_pressure: Value,
    breathing_gas_po2: Value,
    arterial_pco2: Value,
    water_vapor_pressure: Value = 0.0,
) -> Value:
    """Arterial inert gas pressure by the convention of the exponential-linear model.

    Notes
    -----
    Pa = P - PO2 - PaCO2 - PH2O with the PO2 of the dry breathing gas (fraction times ambient pressure, or
    the set-point): CO2 is taken off after the oxygen share. On pure oxygen the remainder would be
    negative; it is held at zero, a choice of this library.

    Examples
    --------
    Air at the surface, 33 fsw: 24.57 fsw.

    >>> fsw = 101.325 / 33.0
    >>> round(arterial_inert_pressure(33.0 * fsw, 0.21 * 33.0 * fsw, 1.5 * fsw) / fsw, 2)
    24.57
    """
    return maximum(ambient_pressure - breathing_gas_po2 - arterial_pco2 - water_vapor_pressure, 0.0)


# -- What a tissue holds --------------------------------------------------------------------------


@formula(result="uptake_share", source="boycott_damant_haldane_1908", provenance="memory_high")
def uptake_share(duration: Value, half_time: Value) -> Value:
    """Share of a pressure difference that a compartment has taken up after some time.

    Notes
    -----
    1 - 2^(-t/t_half), evaluated without loss for the shortest times.

    Examples
    --------
    >>> uptake_share(20.0, 10.0)
    0.75
    """
    return -expm1(-LN2 * duration / half_time)


@formula(result="tissue_pressure", **_SCHREINER)
def tissue_pressure(
    initial_tissue_pressure: Value,
    start_inert_pressure: Value,
    end_inert_pressure: Value,
    duration: Value,
    half_time: Value,
) -> Value:
    """Tissue inert gas pressure after a stretch in which the alveolar pressure changes linearly.

    Notes
    -----
    The exact solution of dp/dt = k (PA - p), k = ln 2/t_half, for PA linear in time (Schreiner); with equal
    ends it is the constant-depth form of Haldane. Written with the change of PA instead of its rate, so
    that neither a stretch of no length nor one much shorter than the half-time loses digits. For any inert
    gas with a half-time. A straight line in pressure on one gas only: split at switches.

    Examples
    --------
    Ten minutes at 100 fsw on air, dry, 10-min tissue: 26.07 fsw plus half of 79.

    >>> round(tissue_pressure(26.07, 105.07, 105.07, 10.0, 10.0), 2)
    65.57
    """
    x = LN2 * duration / half_time
    step = (start_inert_pressure - initial_tissue_pressure) * uptake_share(duration, half_time)
    return initial_tissue_pressure + step + (end_inert_pressure - start_inert_pressure) * ramp_gain(x)


@formula(
    result="duration",
    quantities={"inert_pressure": "alveolar_inert_pressure"},
    source="boycott_damant_haldane_1908",
    provenance="computed",
    check_result=True,
)
def time_to_tissue_pressure(
    initial_tissue_pressure: Value, inert_pressure: Value, tissue_pressure: Value, half_time: Value
) -> Value:
    """Time at constant alveolar pressure until a compartment reaches a given inert gas pressure.

    Notes
    -----
    t = t_half log2((PA - p0)/(PA - p)): :func:`tissue_pressure` at constant depth, solved for time. With
    p = M0 it is the no-stop time of one compartment, with the M-value of a cabin the wait before flying,
    with a residual pressure the time that residue stands for. Negative where p was passed that long ago, not
    a number where the course never meets it; both are reported.

    Examples
    --------
    A 40-min tissue with M0 56 fsw at 60 fsw on air, dry:

    >>> round(time_to_tissue_pressure(26.07, 73.47, 56.0, 40.0), 2)
    57.6
    """
    ratio = (inert_pressure - initial_tissue_pressure) / (inert_pressure - tissue_pressure)
    return half_time * log(ratio) / LN2


@formula(result="washout_threshold", **_THALMANN)
def washout_threshold(
    ambient_pressure: Value,
    venous_po2: Value,
    venous_pco2: Value,
    gas_phase_overpressure: Value = 0.0,
    water_vapor_pressure: Value = 0.0,
) -> Value:
    """Tissue inert gas pressure above which the exponential-linear model assumes a gas phase.

    Notes
    -----
    L = P - PvO2 - PvCO2 - PH2O + PBOVP. Above it washout is linear, below it exponential.

    Examples
    --------
    43 fsw absolute, PvO2 2.0, PvCO2 2.3 fsw: 38.7 fsw.

    >>> fsw = 101.325 / 33.0
    >>> round(washout_threshold(43.0 * fsw, 2.0 * fsw, 2.3 * fsw) / fsw, 2)
    38.7
    """
    return ambient_pressure - venous_po2 - venous_pco2 - water_vapor_pressure + gas_phase_overpressure


@formula(result="tissue_pressure", **_THALMANN)
def linear_tissue_pressure(
    initial_tissue_pressure: Value,
    start_inert_pressure: Value,
    end_inert_pressure: Value,
    start_threshold: Value,
    end_threshold: Value,
    duration: Value,
    half_time: Value,
) -> Value:
    """Tissue inert gas pressure after a stretch on the linear branch of the exponential-linear model.

    Notes
    -----
    dp/dt = k (Pa - L) while p > L: a straight line at constant pressure, a parabola where pressure changes
    linearly. Holds until p meets L, see :func:`linear_washout_time`. The rate multiplier of the model is 1
    in every published set and is left out.

    Examples
    --------
    >>> round(linear_tissue_pressure(50.0, 32.47, 32.47, 38.7, 38.7, 60.0, 40.0), 4)
    43.5225
    """
    start = start_inert_pressure - start_threshold
    end = end_inert_pressure - end_threshold
    return initial_tissue_pressure + LN2 * duration / half_time * 0.5 * (start + end)


@formula(result="duration", register=False, **_THALMANN)
def linear_washout_time(
    initial_tissue_pressure: Value,
    start_inert_pressure: Value,
    end_inert_pressure: Value,
    start_threshold: Value,
    end_threshold: Value,
    segment_duration: Value,
    half_time: Value,
) -> Value:
    """Time after which a compartment on the linear branch meets the threshold again.

    Notes
    -----
    The first root of p(t) = L(t) when Pa and L go on as straight as in the given stretch;
    the root may lie beyond it. At constant pressure (p0 - L)/(k (L - Pa)), whatever the duration.

    Examples
    --------
    >>> round(linear_washout_time(50.0, 32.47, 32.47, 38.7, 38.7, 1.0, 40.0), 3)
    104.671
    """
    x = LN2 * segment_duration / half_time
    change = end_threshold - start_threshold
    fall = x * (start_threshold - start_inert_pressure) + change
    end_fall = x * (end_threshold - end_inert_pressure) + change
    above = initial_tissue_pressure - start_threshold
    root = sqrt(maximum(fall * fall + 2.0 * above * (end_fall - fall), 0.0))
    return segment_duration * 2.0 * above / (fall + root)


@formula(
    result="pressure_rate",
    source="kidd_stubbs",
    provenance="memory_medium",
)
def slip_flow(
    upstream_pressure: Value,
    downstream_pressure: Value,
    flow_coefficient: Value,
    flow_offset: Value,
) -> Value:
    """Rate at which a compartment of the serial model gains from its neighbor.

    Notes
    -----
    A (B + P1 + P2)(P1 - P2): small differences exchange at the rate A (B + 2 P), so that exchange is
    faster at depth, uptake and washout are not mirror images and exposures do not add.

    Examples
    --------
    >>> round(slip_flow(400.0, 300.0, 2.6e-5, 836.7), 4)
    3.9954
    """
    total = flow_offset + upstream_pressure + downstream_pressure
    return flow_coefficient * total * (upstream_pressure - downstream_pressure)


# -- What a model tolerates -----------------------------------------------------------------------


@formula(result="m_value", **_BAKER)
def m_value(ambient_pressure: Value, m_value_a: Value, m_value_b: Value) -> Value:
    """Highest inert gas pressure a model tolerates in a compartment at an ambient pressure.

    Notes
    -----
    M = a + P/b. A ratio model has a = 0 and b = 1/ratio; a slope per depth dM is 1/b.

    Examples
    --------
    >>> round(m_value(100.0, 59.33, 0.8434), 2)
    177.9
    """
    return m_value_a + ambient_pressure / m_value_b


@formula(
    result="m_value_a",
    source="workman_1965",
    provenance="memory_high",
)
def intercept_from_surfacing(
    surfacing_m_value: Value, m_value_slope: Value, surface_pressure: Value = ATMOSPHERE
) -> Value:
    """Coefficient a of a limit printed as a surfacing value and a slope per depth.

    Notes
    -----
    a = M0 - dM Ps with the surface pressure of the printed table. Coefficients a and b stay when the
    surface pressure is another one; M0 does not.

    Examples
    --------
    A 40-min tissue, 56 fsw and 1.4: 9.8 fsw.

    >>> round(intercept_from_surfacing(56.0, 1.4, 33.0), 3)
    9.8
    """
    return surfacing_m_value - m_value_slope * surface_pressure


@formula(
    result="mixed_coefficient",
    quantities={
        "one": "nitrogen_pressure",
        "other": "helium_pressure",
        "of_one": "nitrogen_coefficient",
        "of_other": "helium_coefficient",
    },
    register=False,
    **_BAKER,
)
def _weighted(one: Value, other: Value, of_one: Value, of_other: Value) -> Value:
    """Mean of two numbers by the pressures they belong to; the first where there is no gas at all."""
    # The tiny pressure stands for no gas at all: 0/tiny is 0.
    return of_one + (of_other - of_one) * (other / maximum(one + other, 1e-300))


@formula(result="m_value_a", **_BAKER)
def mixed_m_value_a(
    nitrogen_pressure: Value, helium_pressure: Value, nitrogen_a: Value, helium_a: Value
) -> Value:
    """Coefficient a of a compartment that holds two inert gases.

    Notes
    -----
    The mean weighted by the pressures in the tissue, not by the breathing gas. Without any gas it is that
    of nitrogen.

    Examples
    --------
    >>> round(mixed_m_value_a(120.0, 80.0, 75.62, 104.58), 3)
    87.204
    """
    return _weighted(nitrogen_pressure, helium_pressure, nitrogen_a, helium_a)


@formula(result="m_value_b", **_BAKER)
def mixed_m_value_b(
    nitrogen_pressure: Value, helium_pressure: Value, nitrogen_b: Value, helium_b: Value
) -> Value:
    """Coefficient b of a compartment that holds two inert gases.

    Notes
    -----
    The mean weighted by the pressures in the tissue, as for :func:`mixed_m_value_a`.

    Examples
    --------
    >>> round(mixed_m_value_b(120.0, 80.0, 0.7825, 0.7223), 5)
    0.75842
    """
    return _weighted(nitrogen_pressure, helium_pressure, nitrogen_b, helium_b)


@formula(result="ceiling_pressure", **_BAKER)
def ceiling_pressure(
    tissue_pressure: Value, m_value_a: Value, m_value_b: Value, gradient: Value = 1.0
) -> Value:
    """Lowest ambient pressure that one compartment tolerates.

    Notes
    -----
    P = (p - g a)/(g/b + 1 - g), from p <= P + g (M(P) - P). With g = 1 the model as published, (p - a) b;
    with g = 0 no supersaturation at all, P = p. No trial supports a particular g.

    Examples
    --------
    >>> round(ceiling_pressure(240.0, 59.33, 0.8434), 4)
    152.3771
    """
    return (tissue_pressure - gradient * m_value_a) / (gradient / m_value_b + 1.0 - gradient)


@formula(result="limit_fraction", **_BAKER)
def limit_fraction(tissue_pressure: Value, m_value: Value) -> Value:
    """Inert gas pressure of a compartment as a share of its M-value.

    Notes
    -----
    p/M. Shares of different models are not comparable in risk.

    Examples
    --------
    >>> limit_fraction(150.0, 200.0)
    0.75
    """
    return tissue_pressure / m_value


@formula(result="gradient_fraction", **_BAKER)
def gradient_fraction(tissue_pressure: Value, ambient_pressure: Value, m_value: Value) -> Value:
    """Supersaturation of a compartment as a share of what its model tolerates.

    Notes
    -----
    (p - P)/(M - P): 0 at ambient pressure, 1 at the M-value, negative below ambient pressure.

    Examples
    --------
    >>> gradient_fraction(150.0, 100.0, 200.0)
    0.5
    """
    return (tissue_pressure - ambient_pressure) / (m_value - ambient_pressure)


# -- Before a suit, at altitude, and the window ----------------------------------------------------


@formula(result="half_time", source="conkin_2004", provenance="memory_medium")
def exercise_half_time(o2_uptake_per_mass: Value) -> Value:
    """Half-time of nitrogen washout in prebreathe with exercise.

    Notes
    -----
    k = (1 - exp(-0.03 VO2))/51.937 per minute with VO2 in mL/kg/min; rest at 3.5 gives about the 360 min
    of the resting model. Where the uptake changes, k is integrated, not averaged.

    Examples
    --------
    >>> round(exercise_half_time(20.0), 1)
    79.8
    """
    return LN2 * EXERCISE_WASHOUT_SCALE / (1.0 - exp(-EXERCISE_WASHOUT_RISE * o2_uptake_per_mass))


@formula(result="supersaturation_ratio", source="waligora_1984", provenance="memory_high")
def supersaturation_ratio(tissue_pressure: Value, suit_pressure: Value) -> Value:
    """Inert gas pressure of the tissue over the final pressure.

    Notes
    -----
    R = p/P, dry. An index, not a limit: in the trials of 1984 55 % had bubbles and 26 % symptoms.

    Examples
    --------
    Four hours of oxygen from 11.6 psi, suit 4.3 psi:

    >>> round(supersaturation_ratio(tissue_pressure("11.6 psi", 0.0, 0.0, 240.0, 360.0), "4.3 psi"), 2)
    1.7
    """
    return tissue_pressure / suit_pressure


@formula(
    result="oxygen_window",
    quantities={"venous_po2": "mixed_venous_po2"},
    source="kot_2015",
    provenance="computed",
)
def oxygen_window(
    ambient_pressure: Value,
    fio2: Value,
    venous_po2: Value = 40.0 * MMHG,
    venous_pco2: Value = 46.0 * MMHG,
    water_vapor_pressure: Value = BODY_VAPOR_PRESSURE,
) -> Value:
    """Oxygen window of venous blood in steady state, exchange ratio 1.

    Notes
    -----
    U = FIO2 (P - PH2O) - PvO2 - PvCO2: what the sum of the venous gas pressures lacks to ambient pressure
    once inert gas is in equilibrium; vapor is counted, the arterial end point is not. Holds while
    hemoglobin keeps the venous PO2 low: above about 3 atm of inspired O2 it rises and the window flattens.
    Sources give 50 to 100 mmHg for air at the surface, depending on what they count.

    Examples
    --------
    >>> round(oxygen_window(101.325, 0.21) / 0.133322387415, 1)
    63.7
    """
    return fio2 * (ambient_pressure - water_vapor_pressure) - venous_po2 - venous_pco2


@formula(result="depth", quantities={"actual_depth": "depth"}, source="cross_1970", provenance="read")
def sea_level_equivalent_depth(actual_depth: Value, surface_pressure: Value) -> Value:
    """Depth at sea level with the same ratio of pressures as a depth at altitude.

    Notes
    -----
    D P0/Ps, in whatever unit the depth is; printed tables are then entered at the next deeper row. Not for
    loops of constant PO2. No correction is made below about 90 m of altitude.

    Examples
    --------
    >>> round(sea_level_equivalent_depth(45.0, "0.8 bar"), 3)
    56.995
    """
    return actual_depth * ATMOSPHERE / surface_pressure


altitude_stop_depth = inverse(
    sea_level_equivalent_depth,
    "actual_depth",
    name="altitude_stop_depth",
    module=__name__,
    given="stop_depth",
    kernel=lambda stop_depth, surface_pressure: stop_depth * surface_pressure / float(ATMOSPHERE),
    doc="""Depth at altitude of a stop printed for sea level.

Notes
-----
The inverse of :func:`sea_level_equivalent_depth`.

Examples
--------
>>> round(altitude_stop_depth(10.0, "0.8 bar"), 3)
7.895
""",
)

#: Half-time of the resting prebreathe model [min].
RESTING_HALF_TIME = float(EVA_HALF_TIME)
