"""Mechanics of breathing: airway pressure, work for a liter, power, its cost, what it leaves room for."""

from __future__ import annotations

import functools
from typing import Any

import numpy as np

from gasphys.constants import (
    ATMOSPHERE,
    BODY_TEMPERATURE,
    BODY_VAPOR_PRESSURE,
    ENERGY_OF_O2,
    MORRISON_REIMERS_MAXIMUM,
    MORRISON_REIMERS_PREFERRED,
    MORRISON_REIMERS_REST,
    PI,
    SECONDS_PER_MINUTE,
    STANDARD_GRAVITY,
    WARKANDER_SLOPE,
    WARKANDER_SURFACE,
    ZERO_CELSIUS,
)
from gasphys.equation import Value, choice, formula, inverse
from gasphys.maths import find_root, maximum, sqrt
from gasphys.real_gas import humid_density, viscosity
from gasphys.real_gas.data import constant

__all__ = [
    "airway_pressure",
    "airway_resistance",
    "breathing_power",
    "density_ratio",
    "density_share",
    "elastance_of_least_work",
    "elastic_work",
    "external_work_limit",
    "external_work_share",
    "illustrative_arterial_pco2",
    "inspiratory_power",
    "maximum_ventilation",
    "optimum_frequency",
    "oxygen_cost_of_breathing",
    "resistive_work",
    "response_exponent",
    "static_lung_load",
    "sustainable_o2_uptake",
    "tidal_volume",
    "turbulent_coefficient",
    "ventilation_for_o2_uptake",
    "ventilatory_reserve",
    "viscosity_ratio",
    "viscous_coefficient",
    "work_of_breathing",
]

_RATIOS = {"density_ratio": "breathing_density_ratio", "viscosity_ratio": "breathing_viscosity_ratio"}
_OF_AIRWAYS = {**_RATIOS, "k1": "airway_k1", "k2": "airway_k2"}
_ROHRER = ("rohrer_1915", "mead_agostoni_1964")

# ---- The gas breathed against air at the surface ---------------------------------------------------

#: Air, 37 degC, saturated, 1 atm: the condition of K1 and K2.
_REFERENCE = {"temperature": float(BODY_TEMPERATURE) - float(ZERO_CELSIUS)}
AIR_DENSITY_BTPS = constant(
    "AIR_DENSITY_BTPS",
    humid_density(float(ATMOSPHERE), "air", **_REFERENCE, water_vapor_pressure=float(BODY_VAPOR_PRESSURE)),
    "g/L",
    r"\rho_1",
    "density of air at 37 degC, saturated, 1 atm",
    "virial_reference_equations",
    "computed",
)
AIR_VISCOSITY_BTPS = constant(
    "AIR_VISCOSITY_BTPS",
    viscosity("air", **_REFERENCE, density=float(AIR_DENSITY_BTPS)),
    "uPa*s",
    r"\mu_1",
    "viscosity of air at 37 degC, 1 atm",
    "transport_reference_correlations",
    "computed",
)


@formula(result="breathing_density_ratio", source="mead_agostoni_1964", provenance="computed")
def density_ratio(density: Value) -> Value:
    """Density of the gas breathed over that of air at the surface.

    Notes
    -----
    Both at 37 degC and saturated (:func:`gasphys.real_gas.humid_density`): the reference of K1, K2 and of
    maximum ventilation. Not the density at 0 degC that is compared with density limits.

    Examples
    --------
    >>> from gasphys.real_gas import humid_density
    >>> round(density_ratio(humid_density("4 atm", "air", 37.0, "47 mmHg")), 2)
    4.07
    """
    return density / AIR_DENSITY_BTPS


@formula(result="breathing_viscosity_ratio", source="mead_agostoni_1964", provenance="computed")
def viscosity_ratio(viscosity: Value) -> Value:
    """Viscosity of the gas breathed over that of air at the surface, both at 37 degC.

    Notes
    -----
    :func:`gasphys.real_gas.viscosity`; dry, which changes air by less than 1 %. Pressure hardly enters,
    helium raises it by up to a fifth.

    Examples
    --------
    >>> import gasphys as gp
    >>> round(viscosity_ratio(gp.real_gas.viscosity("heliox 20/80", 37.0)), 2)
    1.18
    """
    return viscosity / AIR_VISCOSITY_BTPS


@formula(
    result="ventilation_btps",
    source="ventilation_in_work",
    provenance="memory_high",
)
def ventilation_for_o2_uptake(o2_uptake_stpd: Value, ventilation_per_o2_uptake: Value = 25.0) -> Value:
    """Minute ventilation that goes with an O2 uptake.

    Notes
    -----
    20 to 25 L BTPS a liter STPD in work. Ventilation is the volume at depth: pressure does not enter. In
    dense gas people ventilate less than this and retain CO2.

    Examples
    --------
    >>> ventilation_for_o2_uptake(2.5)
    62.5
    """
    return o2_uptake_stpd * ventilation_per_o2_uptake


# ---- Rohrer --------------------------------------------------------------------------------------


@formula(result="viscous_coefficient", quantities=_OF_AIRWAYS, source=_ROHRER, provenance="memory_medium")
def viscous_coefficient(viscosity_ratio: Value, k1: Value = 0.24, tissue_share: Value = 0.0) -> Value:
    """Viscous coefficient of airway pressure in another gas.

    Notes
    -----
    K1 = K1t + K1g mu/mu1: the gas part follows viscosity, the tissue part does not. 20-40 % of K1 is
    tissue; the default counts none. Density does not enter. Reference of K1: air, 37 degC, saturated,
    1 atm.

    Examples
    --------
    >>> round(viscous_coefficient(1.18), 3)
    0.283
    """
    return k1 * (tissue_share + (1.0 - tissue_share) * viscosity_ratio)


@formula(result="turbulent_coefficient", quantities=_OF_AIRWAYS, source=_ROHRER, provenance="memory_medium")
def turbulent_coefficient(density_ratio: Value, k2: Value = 0.03) -> Value:
    """Density coefficient of airway pressure in another gas.

    Notes
    -----
    K2 in proportion to density; viscosity does not enter. K2 is the weak number: 0.03 fits resistance in
    compressed air in one study, 0.05-0.06 in another. Reference: air, 37 degC, saturated, 1 atm.

    Examples
    --------
    >>> turbulent_coefficient(4.0)
    0.12
    """
    return k2 * density_ratio


@formula(
    result="airway_resistance",
    quantities={**_OF_AIRWAYS, "flow": "airway_flow"},
    source=_ROHRER,
    provenance="memory_medium",
)
def airway_resistance(
    flow: Value,
    density_ratio: Value = 1.0,
    viscosity_ratio: Value = 1.0,
    k1: Value = 0.24,
    k2: Value = 0.03,
    tissue_share: Value = 0.0,
) -> Value:
    """Airway resistance at a flow, by Rohrer's law.

    Notes
    -----
    R = K1 + K2 abs(V). Grows little with density at low flow, much at high flow: from 1 to 4.6 atm abs of air
    19 % at rest and 75 % in exercise of 100 W were measured (Held & Pendergast 2013, abstract read); the
    default coefficients give 72 % at 2 L/s. Submersion itself lowered it, which is not modeled.

    Examples
    --------
    Air at 4.6 atm abs, 2 L/s:

    >>> round(airway_resistance(120.0, 4.6) / airway_resistance(120.0), 2)
    1.72
    """
    return (
        viscous_coefficient(viscosity_ratio, k1, tissue_share)
        + turbulent_coefficient(density_ratio, k2) * maximum(flow, -flow) / SECONDS_PER_MINUTE
    )


@formula(
    result="airway_pressure",
    quantities={**_OF_AIRWAYS, "flow": "airway_flow"},
    source=_ROHRER,
    provenance="memory_medium",
)
def airway_pressure(
    flow: Value,
    density_ratio: Value = 1.0,
    viscosity_ratio: Value = 1.0,
    k1: Value = 0.24,
    k2: Value = 0.03,
    tissue_share: Value = 0.0,
) -> Value:
    """Pressure that drives a flow through the airways, by Rohrer's law.

    Notes
    -----
    dP = K1 V + K2 V abs(V), odd in flow. In thin gas less pressure is needed for the same flow because less
    of it is turbulent (Otis & Bembower 1949, heliox and altitude).

    Examples
    --------
    >>> round(airway_pressure(60.0), 3)
    0.27
    """
    return (
        flow
        / SECONDS_PER_MINUTE
        * airway_resistance(flow, density_ratio, viscosity_ratio, k1, k2, tissue_share)
    )


@formula(
    result="density_share",
    quantities={**_OF_AIRWAYS, "flow": "airway_flow"},
    source=_ROHRER,
    provenance="memory_medium",
)
def density_share(
    flow: Value,
    density_ratio: Value = 1.0,
    viscosity_ratio: Value = 1.0,
    k1: Value = 0.24,
    k2: Value = 0.03,
    tissue_share: Value = 0.0,
) -> Value:
    """Share of airway pressure that depends on density.

    Notes
    -----
    s = K2 V/(K1 + K2 V) at one flow. Decides how much thinner gas can help.

    Examples
    --------
    >>> round(density_share(120.0, 4.6), 2)
    0.53
    """
    return 1.0 - viscous_coefficient(viscosity_ratio, k1, tissue_share) / airway_resistance(
        flow, density_ratio, viscosity_ratio, k1, k2, tissue_share
    )


# ---- Work for a liter ----------------------------------------------------------------------------

_resistive = functools.partial(
    formula,
    result="resistive_work",
    quantities=_OF_AIRWAYS,
    source=_ROHRER,
    provenance="memory_medium",
    register=False,
)


@_resistive()
def _sinusoid_both(
    ventilation_btps: Value,
    density_ratio: Value = 1.0,
    viscosity_ratio: Value = 1.0,
    k1: Value = 0.24,
    k2: Value = 0.03,
    tissue_share: Value = 0.0,
) -> Value:
    """Resistive work of inspiration and expiration, flow a sinusoid: pi^2/2 K1 V + 4 pi^2/3 K2 V^2."""
    flow = ventilation_btps / SECONDS_PER_MINUTE
    viscous = viscous_coefficient(viscosity_ratio, k1, tissue_share)
    return PI * PI / 2.0 * viscous * flow + 4.0 * PI * PI / 3.0 * turbulent_coefficient(density_ratio, k2) * (
        flow * flow
    )


@_resistive()
def _sinusoid_one(
    ventilation_btps: Value,
    density_ratio: Value = 1.0,
    viscosity_ratio: Value = 1.0,
    k1: Value = 0.24,
    k2: Value = 0.03,
    tissue_share: Value = 0.0,
) -> Value:
    """Resistive work of one phase, flow a sinusoid: half of both."""
    return _sinusoid_both(ventilation_btps, density_ratio, viscosity_ratio, k1, k2, tissue_share) / 2.0


@_resistive()
def _square_both(
    ventilation_btps: Value,
    density_ratio: Value = 1.0,
    viscosity_ratio: Value = 1.0,
    k1: Value = 0.24,
    k2: Value = 0.03,
    tissue_share: Value = 0.0,
) -> Value:
    """Resistive work of both phases at constant flow, twice minute volume: 4 K1 V + 8 K2 V^2."""
    # Constant flow F does work dP(F) for each liter, twice: in and out.
    return 2.0 * airway_pressure(2.0 * ventilation_btps, density_ratio, viscosity_ratio, k1, k2, tissue_share)


@_resistive()
def _square_one(
    ventilation_btps: Value,
    density_ratio: Value = 1.0,
    viscosity_ratio: Value = 1.0,
    k1: Value = 0.24,
    k2: Value = 0.03,
    tissue_share: Value = 0.0,
) -> Value:
    """Resistive work of one phase at constant flow: half of both."""
    return _square_both(ventilation_btps, density_ratio, viscosity_ratio, k1, k2, tissue_share) / 2.0


@choice(
    option=("phases", "wave"),
    word="phases and wave",
    registry={
        ("both", "sinusoid"): _sinusoid_both,
        ("one", "sinusoid"): _sinusoid_one,
        ("both", "square"): _square_both,
        ("one", "square"): _square_one,
    },
)
def resistive_work(
    ventilation_btps: Value,
    density_ratio: Value = 1.0,
    viscosity_ratio: Value = 1.0,
    k1: Value = 0.24,
    k2: Value = 0.03,
    phases: str = "both",
    *,
    wave: str = "sinusoid",
    tissue_share: Value = 0.0,
) -> Value:
    """Resistive work of breathing for a liter breathed.

    Notes
    -----
    Rohrer's law integrated over a breath. In sinusoidal breathing it depends on minute volume alone:
    W/VT = pi^2/2 K1 V + 4 pi^2/3 K2 V^2, V in L/s, both phases; K1 scales with viscosity, K2 with
    density, never both with one. A square wave is the lower bound. Internal work, of lungs and airways:
    published limits are for the external work of an apparatus and must not be compared with it.

    K1 and K2 are remembered values of an adult breathing by mouth, air, 37 degC, saturated, 1 atm; take
    0.03-0.06 as the range of K2 and show it.

    Examples
    --------
    Air at the surface and at 4 times its density, 62.5 L/min:

    >>> round(resistive_work(62.5), 3), round(resistive_work(62.5, 4.0), 3)
    (1.662, 2.947)
    """


@formula(result="elastic_work", source="otis_fenn_rahn_1950", provenance="memory_high")
def elastic_work(tidal_volume: Value, elastance: Value) -> Value:
    """Elastic work of inspiration for a liter breathed.

    Notes
    -----
    E VT/2, from the relaxed volume. It does not depend on the gas; in quiet breathing it pays for
    expiration.

    Examples
    --------
    >>> elastic_work(1.0, 0.8)
    0.4
    """
    return elastance * tidal_volume / 2.0


@formula(result="work_of_breathing", source="otis_fenn_rahn_1950", provenance="memory_high")
def work_of_breathing(resistive_work: Value, elastic_work: Value) -> Value:
    """Work of breathing for a liter: resistive and elastic.

    Notes
    -----
    With the resistive work of both phases it is an upper estimate: elastic energy stored in inspiration
    drives part of expiration. With that of inspiration alone it is the work of Otis, Fenn & Rahn.

    Examples
    --------
    >>> work_of_breathing(1.5, 0.5)
    2.0
    """
    return resistive_work + elastic_work


@formula(result="breathing_power", source="otis_fenn_rahn_1950", provenance="memory_high")
def breathing_power(work_of_breathing: Value, ventilation_btps: Value) -> Value:
    """Power of breathing.

    Notes
    -----
    Work for a liter times liters for a second.

    Examples
    --------
    >>> breathing_power(1.5, 60.0)
    1.5
    """
    return work_of_breathing * ventilation_btps / SECONDS_PER_MINUTE


# ---- Otis, Fenn and Rahn -------------------------------------------------------------------------


@formula(
    result="tidal_volume",
    refuse={"breathing_frequency": (0.01, 150.0)},
    source="otis_fenn_rahn_1950",
    provenance="memory_high",
)
def tidal_volume(breathing_frequency: Value, alveolar_ventilation_btps: Value, dead_space: Value) -> Value:
    """Tidal volume that gives an alveolar ventilation at a frequency.

    Notes
    -----
    VT = VA/f + VD.

    Examples
    --------
    >>> tidal_volume(15.0, 6.0, 0.2)
    0.6000000000000001
    """
    return alveolar_ventilation_btps / breathing_frequency + dead_space


@formula(
    result="breathing_power",
    quantities={"k1": "viscous_coefficient", "k2": "turbulent_coefficient"},
    source="otis_fenn_rahn_1950",
    provenance="memory_high",
)
def inspiratory_power(
    breathing_frequency: Value, tidal_volume: Value, elastance: Value, k1: Value = 0.24, k2: Value = 0.03
) -> Value:
    """Power of inspiration: elastic, viscous and turbulent, flow a sinusoid.

    Notes
    -----
    W = K f VT^2/2 + pi^2/4 K' f^2 VT^2 + 2 pi^2/3 K'' f^3 VT^3, f in 1/s; expiration is passive. `k1` and
    `k2` are those of the gas breathed: :func:`viscous_coefficient`, :func:`turbulent_coefficient`.

    Examples
    --------
    >>> round(inspiratory_power(15.0, 0.6, 0.83), 4)
    0.0513
    """
    rate = breathing_frequency / SECONDS_PER_MINUTE
    flow = rate * tidal_volume
    return (
        elastance * rate * tidal_volume * tidal_volume / 2.0
        + PI * PI / 4.0 * k1 * flow * flow
        + 2.0 * PI * PI / 3.0 * k2 * flow * flow * flow
    )


@formula(
    result="elastance",
    quantities={"k1": "viscous_coefficient", "k2": "turbulent_coefficient"},
    source="otis_fenn_rahn_1950",
    provenance="computed",
)
def elastance_of_least_work(
    breathing_frequency: Value,
    alveolar_ventilation_btps: Value,
    dead_space: Value,
    k1: Value = 0.24,
    k2: Value = 0.03,
) -> Value:
    """Elastance for which a frequency is that of least inspiratory power.

    Notes
    -----
    The derivative of the power to frequency, at one alveolar ventilation, is zero where
    K (VA - VD f) = pi^2 VD f^2 (K' + 4 K'' (VA + VD f)), f in 1/s, VA in L/s. It grows with frequency
    up to VA/VD, where dead space takes every breath's gain away.

    Examples
    --------
    >>> round(elastance_of_least_work(15.70, 6.0, 0.2, "3 cmH2O*s/L", 0.0) / 0.0980665, 1)
    8.5
    """
    rate = breathing_frequency / SECONDS_PER_MINUTE
    flow = alveolar_ventilation_btps / SECONDS_PER_MINUTE
    wasted = dead_space * rate
    return PI * PI * wasted * rate * (k1 + 4.0 * k2 * (flow + wasted)) / (flow - wasted)


def _least_work(elastance: Any, alveolar: Any, dead_space: Any, k1: Any, k2: Any) -> Any:
    """Root in frequency between zero and VA/VD, where the elastance grows from zero without bound."""
    with np.errstate(all="ignore"):
        highest = np.minimum(np.asarray(alveolar) / np.asarray(dead_space), 1e6) * (1.0 - 1e-12)

        def difference(frequency: Any) -> Any:
            found = elastance_of_least_work.raw(frequency, alveolar, dead_space, k1, k2)
            return found / (found + elastance) - 0.5

        shape = np.broadcast_shapes(*(np.shape(v) for v in (elastance, alveolar, dead_space, k1, k2)))
        return find_root(difference, np.full(shape, 1e-9), np.broadcast_to(highest, shape))


_rohrer_frequency = inverse(
    elastance_of_least_work,
    "breathing_frequency",
    name="optimum_frequency",
    module=__name__,
    kernel=_least_work,
    register=False,
    doc="""Frequency of least inspiratory power, turbulence counted.

Notes
-----
The root of :func:`elastance_of_least_work`.
""",
)


@formula(
    result="breathing_frequency",
    quantities={"k1": "viscous_coefficient"},
    refuse={"dead_space": (1e-6, 5.0), "elastance": (1e-6, 100.0), "k1": (1e-6, 1000.0)},
    source="otis_fenn_rahn_1950",
    provenance="memory_high",
    register=False,
)
def _laminar_frequency(
    elastance: Value, alveolar_ventilation_btps: Value, dead_space: Value, k1: Value = 0.24
) -> Value:
    """Frequency of least inspiratory power without turbulence, in closed form."""
    lag = k1 / elastance * 2.0 * PI * PI
    breaths = alveolar_ventilation_btps / SECONDS_PER_MINUTE / dead_space
    return SECONDS_PER_MINUTE * (sqrt(1.0 + 2.0 * lag * breaths) - 1.0) / lag


@choice(option="model", registry={"turbulent": _rohrer_frequency, "laminar": _laminar_frequency})
def optimum_frequency(
    elastance: Value,
    alveolar_ventilation_btps: Value,
    dead_space: Value,
    k1: Value = 0.24,
    k2: Value = 0.03,
    model: str = "turbulent",
) -> Value:
    """Frequency at which an alveolar ventilation takes least inspiratory power.

    Notes
    -----
    ``"laminar"``: the closed form f = (sqrt(1 + 4 pi^2 R C VA/VD) - 1)/(2 pi^2 R C). ``"turbulent"``: K2
    counted. More density slows and deepens breathing. Coefficients of the gas breathed. What people
    choose is near it at rest, not in exercise.

    Examples
    --------
    Air and four times its density, 6 L/min:

    >>> [round(optimum_frequency(0.834, 6.0, 0.2, 0.235, turbulent_coefficient(d)), 1) for d in (1.0, 4.0)]
    [16.5, 15.5]
    """


@formula(result="o2_cost_of_breathing", source="respiratory_muscle_efficiency", provenance="memory_medium")
def oxygen_cost_of_breathing(breathing_power: Value, breathing_efficiency: Value = 0.07) -> Value:
    """O2 that the respiratory muscles use.

    Notes
    -----
    Power over efficiency and 20.1 J/mL. Efficiency 5-10 % is remembered. Measured: 1.17 (SD 0.26) mL for
    a liter breathed in women, 1.21 (SD 0.42) in men at moderate ventilation; under 2 mL/L below 90 L/min,
    4 above; about 10 % of O2 uptake at maximum, 13-15 % in some (abstracts read).

    Examples
    --------
    >>> round(oxygen_cost_of_breathing(1.66 * 40.0 / 60.0), 3)
    0.047
    """
    # J/s over J/mL is mL/s.
    return breathing_power / (breathing_efficiency * ENERGY_OF_O2) * SECONDS_PER_MINUTE / 1000.0


@formula(result="static_lung_load", source="static_lung_load_texts", provenance="memory_medium")
def static_lung_load(
    gas_source_depth: Value, lung_depth: Value, immersion_water_density: Value = 1000.0
) -> Value:
    """Static lung load: the hydrostatic imbalance between gas and lungs.

    Notes
    -----
    Gas pressure at its source less water pressure at the reference point: rho g (zg - zL). Positive when
    the gas comes from below the lungs. Reference point: lung centroid, about 0.14 m below and 0.07 m
    behind the sternal notch, upright; the limits of Warkander 2007 are relative to the notch itself:
    +0.4 to +2.9 kPa vertical, -0.3 to +1.7 kPa horizontal. +-1 kPa did not change ventilation at 4.7 atm
    abs in one study (Cherry 2009).

    Examples
    --------
    Mouthpiece 0.2 m above the lung centroid:

    >>> round(static_lung_load(10.0, 10.2), 2)
    -1.96
    """
    return immersion_water_density * STANDARD_GRAVITY * (gas_source_depth - lung_depth) / 1000.0


# ---- Capacity ------------------------------------------------------------------------------------


@formula(
    result="maximum_ventilation_btps",
    quantities={
        **_RATIOS,
        "surface_maximum_ventilation": "surface_maximum_ventilation_btps",
        "exponent": "density_exponent",
    },
    refuse={"density_ratio": (1e-3, 1000.0)},
    valid={"density_ratio": (0.1, 20.0, "densities up to about 25 g/L were breathed")},
    source="dougherty_1976",
    provenance="memory_high",
)
def maximum_ventilation(
    surface_maximum_ventilation: Value, density_ratio: Value, exponent: Value = 0.45
) -> Value:
    """Maximum voluntary ventilation in a gas, from that in air at the surface.

    Notes
    -----
    MVV1 (rho/rho1)^-n. n was 0.41 at 7.06 atm abs in H2, He and N2 (abstract read), 0.4-0.5 in reviews,
    0.5 if central airways limit by wave speed: use 0.40 to 0.50 and show it. Ratios between gases are good
    to about 15 %. Densities of both at the same temperature and humidity.

    Examples
    --------
    >>> round(maximum_ventilation(150.0, 7.0), 1)
    62.5
    """
    return surface_maximum_ventilation * density_ratio**-exponent


@formula(
    result="ventilatory_reserve",
    quantities={"maximum_ventilation": "maximum_ventilation_btps"},
    refuse={"maximum_ventilation": (0.01, 2000.0)},
    source="ventilation_in_work",
    provenance="memory_medium",
)
def ventilatory_reserve(ventilation_btps: Value, maximum_ventilation: Value) -> Value:
    """Share of maximum voluntary ventilation that is not used.

    Notes
    -----
    1 - VE/MVV. Sustained work uses 60 to 80 % of maximum voluntary ventilation at most (remembered): a
    reserve of 0.4 to 0.2.

    Examples
    --------
    >>> ventilatory_reserve(45.0, 60.0)
    0.25
    """
    return 1.0 - ventilation_btps / maximum_ventilation


@formula(
    result="sustainable_o2_uptake",
    quantities={"maximum_ventilation": "maximum_ventilation_btps"},
    source="ventilation_in_work",
    provenance="memory_medium",
)
def sustainable_o2_uptake(
    maximum_ventilation: Value, sustainable_share: Value = 0.7, ventilation_per_o2_uptake: Value = 25.0
) -> Value:
    """O2 uptake that sustainable ventilation leaves room for.

    Notes
    -----
    kappa MVV over VE/VO2. Ventilation is BTPS at depth, O2 uptake STPD; 20 to 25 L a liter in work. What is
    left when gas is dense, by ventilation alone: CO2 retention, heart, heat and apparatus are not in it,
    and each may end work sooner.

    Examples
    --------
    >>> sustainable_o2_uptake(62.5)
    1.75
    """
    return sustainable_share * maximum_ventilation / ventilation_per_o2_uptake


# ---- Limits of apparatus -------------------------------------------------------------------------

_limit = functools.partial(formula, result="external_work_limit", register=False)


@_limit(
    valid={"depth_msw": (0.0, 57.0, "the study went to 57 msw")},
    refuse={"depth_msw": (0.0, 60.0)},
    source="warkander_2007",
    provenance="read",
)
def _warkander_2007(depth_msw: Value) -> Value:
    """Limit of external work at any ventilation, falling with depth."""
    # kPa is J/L.
    return WARKANDER_SURFACE - WARKANDER_SLOPE * depth_msw


@_limit(source="morrison_reimers_1982", provenance="memory_medium")
def _morrison_reimers_preferred(ventilation_btps: Value) -> Value:
    """Preferred limit of external work, rising with ventilation."""
    return MORRISON_REIMERS_REST + MORRISON_REIMERS_PREFERRED * ventilation_btps


@_limit(source="morrison_reimers_1982", provenance="memory_medium")
def _morrison_reimers_maximum(ventilation_btps: Value) -> Value:
    """Highest limit of external work, rising with ventilation."""
    return MORRISON_REIMERS_REST + MORRISON_REIMERS_MAXIMUM * ventilation_btps


@choice(
    option="model",
    registry={
        "warkander_2007": _warkander_2007,
        "morrison_reimers_1982_preferred": _morrison_reimers_preferred,
        "morrison_reimers_1982_maximum": _morrison_reimers_maximum,
    },
)
def external_work_limit(
    depth_msw: Value = 0.0, ventilation_btps: Value = 62.5, model: str = "warkander_2007"
) -> Value:
    """Published limit of the external work of breathing for a liter breathed.

    Notes
    -----
    ``"warkander_2007"``: 2.49 - 0.016 for each msw, any ventilation; studied to 57 msw, refused beyond 60.
    ``"morrison_reimers_1982_..."``: 0.5 + 0.02 and 0.5 + 0.04 for each L/min, remembered. For the external
    work of an apparatus on a breathing machine, both phases; the work of the lungs is another thing. Limits
    of one number stand in :func:`gasphys.breathing.apparatus_limits`. The equation of EN 14143 was not
    available: none is given.

    Examples
    --------
    >>> round(external_work_limit(30.0), 2)
    2.01
    """


@formula(
    result="external_work_share",
    refuse={"external_work_limit": (1e-6, 100.0)},
    source="warkander_2007",
    provenance="computed",
)
def external_work_share(external_work: Value, external_work_limit: Value) -> Value:
    """Share of a limit that an external work of breathing takes.

    Notes
    -----
    The measured work of an apparatus over the limit of an authority at the same ventilation. Not a share of
    what a diver can do: it says nothing of the work inside the lungs.

    Examples
    --------
    >>> external_work_share(1.0, 2.0)
    0.5
    """
    return external_work / external_work_limit


# ---- CO2 in dense gas: an illustration -----------------------------------------------------------


@formula(result="response_exponent", source="co2_response_illustration", provenance="computed")
def response_exponent(density_share: Value) -> Value:
    """Exponent of density in the response to CO2, from Rohrer's law at one driving pressure.

    Notes
    -----
    m = s/(1 + s), s the share of resistive pressure that depends on density: at one drive, flow falls as
    the pressure a flow needs rises. No measured value is known.

    Examples
    --------
    >>> response_exponent(1.0)
    0.5
    """
    return density_share / (1.0 + density_share)


@formula(
    result="illustrative_arterial_pco2",
    quantities={
        **_RATIOS,
        "surface_maximum_ventilation": "surface_maximum_ventilation_btps",
        "exponent": "response_exponent",
        "capacity_exponent": "density_exponent",
    },
    valid={"density_ratio": (0.1, 20.0, "no data beyond")},
    refuse={"surface_maximum_ventilation": (1.0, 500.0), "dead_space_fraction": (0.0, 0.95)},
    source="co2_response_illustration",
    provenance="memory_medium",
    labels={"illustrative": "no adequate closed predictive model of CO2 retention is known"},
)
def illustrative_arterial_pco2(
    co2_output_stpd: Value,
    density_ratio: Value,
    surface_maximum_ventilation: Value,
    inspired_pco2: Value = 0.0,
    dead_space_fraction: Value = 0.25,
    co2_response_slope: Value = 15.0,
    co2_response_threshold: Value = 4.93,
    exponent: Value = 1.0 / 3.0,
    sustainable_share: Value = 0.7,
    capacity_exponent: Value = 0.45,
) -> Value:
    """Arterial PCO2 in dense gas by an illustrative model: not a prediction.

    Notes
    -----
    Where the CO2 equation meets a line of response whose slope falls with density, or, if that asks for
    more, the sustainable ventilation; the higher of the two PCO2. VA = P0 Tb/T0 VCO2/(PaCO2 - PICO2),
    VE = VA/(1 - VD/VT), VE = S1 (rho/rho1)^-m (PaCO2 - B), VE <= kappa MVV1 (rho/rho1)^-n. m is derived
    from Rohrer's law (:func:`response_exponent`): 1/3, range 0.2-0.5; show the sensitivity. Drive is taken
    as unchanged by density.

    Evidence against it: resting PACO2 was not monotone in density up to 25 g/L (Gelfand 1983); the
    difference in density between 47 and 66 atm abs mattered little (Salzano 1984); depth and external
    resistance drive retention, from 4.2 kPa in the dry to 6.7 kPa at 4.7 atm abs with a high resistance
    (Cherry 2009). People differ by more than the model.

    Examples
    --------
    Rest in air at the surface, and moderate work at seven times the density:

    >>> [round(illustrative_arterial_pco2(co2, d, 150.0), 1) for co2, d in ((0.2, 1.0), (1.5, 7.0))]
    [5.3, 8.4]
    """
    needed = ATMOSPHERE * BODY_TEMPERATURE / ZERO_CELSIUS * co2_output_stpd / (1.0 - dead_space_fraction)
    slope = co2_response_slope * density_ratio**-exponent
    apart = co2_response_threshold - inspired_pco2
    # (P - B)(P - PI) = needed/slope, the larger root.
    driven = inspired_pco2 + apart / 2.0 + sqrt(apart * apart / 4.0 + needed / slope)
    capped = inspired_pco2 + needed / (
        sustainable_share * maximum_ventilation(surface_maximum_ventilation, density_ratio, capacity_exponent)
    )
    return maximum(driven, capped)
