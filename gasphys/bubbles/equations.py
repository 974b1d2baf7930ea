"""Equations of bubbles: pressure inside, skins that are crushed and heal, growth, counterdiffusion.

Radii in um, tensions of surfaces in N/m: 1 N/m over 1 um is 1000 kPa. Every parameter of the
varying-permeability model is from memory; it was fitted to bubbles in gelatin and to tables, not to outcomes
in people, and in the one large human trial of stops redistributed by a bubble model the deeper stops did
worse (:data:`gasphys.bubbles.EVIDENCE`).
"""

from __future__ import annotations

from typing import Any

import numpy as np

from gasphys.constants import (
    LN2,
    PI,
    VPM_CRITICAL_VOLUME,
    VPM_REGENERATION_TIME,
    VPM_SKIN_COMPRESSION,
    VPM_SURFACE_TENSION,
)
from gasphys.equation import Value, formula, inverse
from gasphys.maths import exp, expm1, find_root, log, maximum, sqrt, where

__all__ = [
    "adjusted_crushing_pressure",
    "boyle_pressure",
    "bubble_pressure",
    "closed_nucleus_pressure",
    "closed_nucleus_radius",
    "composition_rate",
    "counterdiffusion_peak_time",
    "counterdiffusion_ratio",
    "counterdiffusion_tension",
    "critical_radius",
    "critical_volume_gradient",
    "crushed_radius",
    "expanded_gradient",
    "gas_inflow",
    "minimum_gradient",
    "mixed_gradient",
    "perfusion_boundary",
    "quasi_steady_dissolution_time",
    "regenerated_radius",
    "squared_radius_rate",
    "surface_excess_time",
    "trapped_gas_pressure",
    "unstirred_boundary",
]

_VPM: dict[str, Any] = {
    "source": ("yount_1979", "yount_1982", "yount_hoffman_1986"),
    "provenance": "memory_high",
}
_TISSUE: dict[str, Any] = {"source": ("srinivasan_1999", "gernhardt_1991"), "provenance": "memory_high"}
_RADIUS = {"radius": "bubble_radius"}

# -- Pressure inside ------------------------------------------------------------------------------


@formula(
    result="bubble_pressure",
    quantities={**_RADIUS, "metabolic_pressure": "metabolic_gas_pressure"},
    source="laplace",
    provenance="computed",
)
def bubble_pressure(
    ambient_pressure: Value,
    radius: Value,
    surface_tension: Value = 0.05,
    tissue_modulus: Value = 0.0,
    metabolic_pressure: Value = 0.0,
) -> Value:
    """Pressure of the inert gas in a bubble.

    Notes
    -----
    Laplace, with the radius and not the diameter: p_b = P + 2 sigma/R, plus 4/3 pi R^3 M of a tissue that
    confines, less the gases of metabolism, whose sum is held constant. Another published model of elastic
    tissue has the opposite sign; the documentation tells of both.

    Examples
    --------
    Diameter 4 um, 0.0728 N/m, 1 atm outside: 1.71848 atm.

    >>> round(bubble_pressure(101.325, 2.0, 0.0728) / 101.325, 5)
    1.71848
    """
    elastic = tissue_modulus * (4.0 / 3.0) * PI * radius * radius * radius
    return ambient_pressure - metabolic_pressure + 2000.0 * surface_tension / radius + elastic


@formula(
    result="bubble_radius",
    quantities={"supersaturation": "gas_supersaturation"},
    source="epstein_plesset_1950",
    provenance="memory_high",
)
def critical_radius(
    supersaturation: Value, surface_tension: Value = 0.0729, ambient_pressure: Value = 101.325
) -> Value:
    """Radius of the bubble that neither grows nor shrinks in a supersaturated liquid.

    Notes
    -----
    R_c = 2 sigma/(P (f - 1)), f - 1 the supersaturation. The balance is unstable: a smaller bubble dissolves,
    a larger one grows. Without supersaturation there is none.

    Examples
    --------
    >>> round(critical_radius(0.5), 3)
    2.878
    """
    return 2000.0 * surface_tension / (ambient_pressure * supersaturation)


# -- Skins that are crushed and heal ---------------------------------------------------------------


@formula(result="nucleus_radius", quantities={"initial_radius": "initial_nucleus_radius"}, **_VPM)
def crushed_radius(
    initial_radius: Value,
    crushing_pressure: Value,
    surface_tension: Value = VPM_SURFACE_TENSION,
    skin_compression: Value = VPM_SKIN_COMPRESSION,
) -> Value:
    """Critical radius of a nucleus after crushing, while gas still passes its skin.

    Notes
    -----
    2 (gamma_c - gamma)(1/r_m - 1/r_0) = p_crush, with p_crush the greatest rise of ambient pressure over
    tissue tension. Up to the onset of impermeability, 8.2 atm in gelatin; beyond it use
    :func:`closed_nucleus_radius`.

    Examples
    --------
    Crushed by 3 atm:

    >>> round(crushed_radius(0.8, 303.975), 4)
    0.5303
    """
    skin = 2000.0 * (skin_compression - surface_tension)
    return skin * initial_radius / (skin + crushing_pressure * initial_radius)


adjusted_crushing_pressure = inverse(
    crushed_radius,
    "crushing_pressure",
    name="adjusted_crushing_pressure",
    module=__name__,
    given="radius",
    kernel=lambda radius, initial_radius, surface_tension, skin_compression: (
        2000.0 * (skin_compression - surface_tension) * (1.0 / radius - 1.0 / initial_radius)
    ),
    doc="""Crushing pressure that a radius stands for.

Notes
-----
Of a healing nucleus it is the adjusted crushing pressure: the radius relaxes exponentially, this does not.

Examples
--------
A week after 3 atm of crushing 1.516 atm are left:

>>> healed = regenerated_radius(crushed_radius(0.8, "3 atm"), 0.8, "7 d")
>>> round(adjusted_crushing_pressure(healed, 0.8) / 101.325, 4)
1.5162
""",
)


@formula(
    result="trapped_gas_pressure",
    quantities={"radius": "nucleus_radius", "onset_radius": "closed_onset_radius"},
    **_VPM,
)
def trapped_gas_pressure(radius: Value, onset_radius: Value, onset_tension: Value) -> Value:
    """Pressure of the gas in a nucleus whose skin no longer lets gas pass.

    Notes
    -----
    Boyle's law from the onset of impermeability: p_in = tau* (r*/r)^3.

    Examples
    --------
    >>> round(trapped_gas_pressure(0.2537, 0.33473, 101.325) / 101.325, 3)
    2.297
    """
    share = onset_radius / radius
    return onset_tension * share * share * share


@formula(
    result="ambient_pressure",
    quantities={"radius": "nucleus_radius", "onset_radius": "closed_onset_radius"},
    **_VPM,
)
def closed_nucleus_pressure(
    radius: Value,
    onset_radius: Value,
    onset_pressure: Value,
    onset_tension: Value,
    surface_tension: Value = VPM_SURFACE_TENSION,
    skin_compression: Value = VPM_SKIN_COMPRESSION,
) -> Value:
    """Ambient pressure that crushes a closed nucleus to a radius.

    Notes
    -----
    p - p* = 2 (gamma_c - gamma)(1/r - 1/r*) + tau* ((r*/r)^3 - 1): the trapped gas resists. The cubic of the
    model, solved for the pressure.

    Examples
    --------
    >>> round(closed_nucleus_pressure(0.2537, 0.33473, "9.2 atm", "1 atm") / 101.325, 2)
    15.0
    """
    trapped = trapped_gas_pressure(radius, onset_radius, onset_tension) - onset_tension
    skin = 2000.0 * (skin_compression - surface_tension)
    return onset_pressure + skin * (1.0 / radius - 1.0 / onset_radius) + trapped


def _closed_radius(
    pressure: Any, onset_radius: Any, onset_pressure: Any, onset_tension: Any, tension: Any, compression: Any
) -> Any:
    """Return the one positive root of the cubic, bracketed by B/A and the radius at onset."""
    skin = 2000.0 * (np.asarray(compression, dtype=float) - tension)
    # In x = r/r*: A = p - p* + tau* + B, B = skin/r*, C = tau*; f(B/A) = -C, f(1) = p - p*.
    # A rounding above 1: at the onset itself the root is 1.
    b = skin / onset_radius
    a = pressure - onset_pressure + onset_tension + b
    x = find_root(lambda x: (a * x - b) * x * x - onset_tension, b / a, np.full_like(b / a, 1.0 + 1e-9))
    return x * onset_radius


closed_nucleus_radius = inverse(
    closed_nucleus_pressure,
    "radius",
    name="closed_nucleus_radius",
    module=__name__,
    kernel=_closed_radius,
    doc="""Critical radius of a nucleus crushed beyond the onset of impermeability.

Notes
-----
The one positive root of the cubic :func:`closed_nucleus_pressure`. The formula for an open skin, misused
here, would give a radius too small and allow too large a gradient.

Examples
--------
>>> round(closed_nucleus_radius("15 atm", 0.33473, "9.2 atm", "1 atm"), 4)
0.2537
""",
)


@formula(
    result="nucleus_radius",
    quantities={"crushed_radius": "nucleus_radius", "initial_radius": "initial_nucleus_radius"},
    source="yount_hoffman_1986",
    provenance="memory_high",
)
def regenerated_radius(
    crushed_radius: Value,
    initial_radius: Value,
    duration: Value,
    regeneration_time: Value = VPM_REGENERATION_TIME,
) -> Value:
    """Critical radius of a nucleus that heals.

    Notes
    -----
    The radius returns exponentially to the initial one, with a time constant (not a half-time) of 14 days.

    Examples
    --------
    >>> round(regenerated_radius(0.53032, 0.8, "1 d"), 5)
    0.54891
    """
    return crushed_radius - (initial_radius - crushed_radius) * expm1(-duration / regeneration_time)


@formula(
    result="bubble_gradient",
    quantities={"radius": "nucleus_radius"},
    source="yount_hoffman_1986",
    provenance="memory_high",
)
def minimum_gradient(
    radius: Value,
    surface_tension: Value = VPM_SURFACE_TENSION,
    skin_compression: Value = VPM_SKIN_COMPRESSION,
) -> Value:
    """Least supersaturation that makes a bubble of a nucleus.

    Notes
    -----
    p_ss = 2 gamma (gamma_c - gamma)/(gamma_c r). A level that never exceeds it activates no larger number of
    nuclei than the model allows for ever; the tension it is compared with includes the other gases.

    Examples
    --------
    Without crushing, nitrogen: 41.633 kPa.

    >>> round(minimum_gradient(0.8), 3)
    41.633
    """
    skin = 2000.0 * (skin_compression - surface_tension)
    return surface_tension * skin / (skin_compression * radius)


@formula(
    result="bubble_gradient",
    quantities={"nitrogen_gradient": "bubble_gradient", "helium_gradient": "bubble_gradient"},
    source="common_practice",
    provenance="memory_medium",
)
def mixed_gradient(
    nitrogen_pressure: Value, helium_pressure: Value, nitrogen_gradient: Value, helium_gradient: Value
) -> Value:
    """Gradient of a compartment that holds two inert gases: the mean weighted by their tensions.

    Notes
    -----
    Own reading, no primary source seen: each gas has its own family of nuclei, and the gradients are
    weighted by the pressures in the tissue. Without any gas it is that of nitrogen.

    Examples
    --------
    >>> round(mixed_gradient(100.0, 50.0, 60.0, 66.0), 6)
    62.0
    """
    share = helium_pressure / maximum(nitrogen_pressure + helium_pressure, 1e-9)
    return nitrogen_gradient + (helium_gradient - nitrogen_gradient) * share


@formula(
    result="bubble_gradient",
    quantities={"initial_radius": "initial_nucleus_radius"},
    source="yount_hoffman_1986",
    provenance="memory_high",
)
def critical_volume_gradient(
    initial_radius: Value,
    crushing_pressure: Value,
    gas_phase_time: Value,
    critical_volume: Value = VPM_CRITICAL_VOLUME,
    surface_tension: Value = VPM_SURFACE_TENSION,
    skin_compression: Value = VPM_SKIN_COMPRESSION,
) -> Value:
    """Supersaturation allowed for a time so that the excess of free gas stays below the critical volume.

    Notes
    -----
    The larger root of G^2 - b G + c = 0, b = p_ss + lambda gamma/(gamma_c T), c = (gamma/gamma_c)^2 lambda
    p_crush/T; T is the decompression time and the surface phase together. One crushing pressure, the
    adjusted one, serves both terms: with two the root may be complex. For long T it is the least gradient,
    and so it is for lambda 0. lambda is a pressure times a time: 7500 fsw min are 23 028 kPa min.

    Examples
    --------
    Crushed by 100 fsw, half-time 20 min, decompression time 30 min: 27.121 fsw.

    >>> round(critical_volume_gradient(0.8, 100.0 * 101.325 / 33, 58.8539) * 33 / 101.325, 3)
    27.121
    """
    crushed = crushed_radius(initial_radius, crushing_pressure, surface_tension, skin_compression)
    share = surface_tension / skin_compression
    volume = share * critical_volume / gas_phase_time
    b = minimum_gradient(crushed, surface_tension, skin_compression) + volume
    return 0.5 * (b + sqrt(b * b - 4.0 * share * volume * crushing_pressure))


@formula(
    result="ambient_pressure",
    quantities={"gradient": "bubble_gradient", "initial_gradient": "bubble_gradient"},
    source="common_practice",
    provenance="memory_high",
)
def boyle_pressure(gradient: Value, initial_gradient: Value, initial_pressure: Value) -> Value:
    """Ambient pressure at which an expanding bubble balances a gradient.

    Notes
    -----
    A critical bubble at the first stop has G_1 = 2 gamma/r_1 and holds P_1 + G_1; without exchange
    (P_2 + G_2) r_2^3 = (P_1 + G_1) r_1^3, so P_2 = (P_1 + G_1)(G_2/G_1)^3 - G_2.

    Examples
    --------
    >>> round(boyle_pressure(0.403972 * 101.325, 0.6 * 101.325, 4 * 101.325) / 101.325, 4)
    1.0
    """
    share = gradient / initial_gradient
    return (initial_pressure + initial_gradient) * share * share * share - gradient


def _expanded(pressure: Any, initial_gradient: Any, initial_pressure: Any) -> Any:
    """Return the one positive root of the cubic; at G_1 max(1, P_2/P_1) it is not negative."""
    high = initial_gradient * np.maximum(1.0, np.asarray(pressure, dtype=float) / initial_pressure)
    return find_root(
        lambda g: boyle_pressure.raw(g, initial_gradient, initial_pressure) - pressure,
        np.zeros_like(high),
        high,
    )


expanded_gradient = inverse(
    boyle_pressure,
    "gradient",
    name="expanded_gradient",
    module=__name__,
    kernel=_expanded,
    given="ambient_pressure",
    doc="""Gradient left to a bubble that has expanded by Boyle's law since the first stop.

Notes
-----
The one positive root of :func:`boyle_pressure`. Only the allowed gradient is scaled, never the tissue.

Examples
--------
>>> round(expanded_gradient(101.325, 0.6 * 101.325, 4 * 101.325) / 101.325, 6)
0.403972
""",
)


@formula(
    result="duration",
    quantities={
        "inspired_nitrogen_pressure": "alveolar_inert_pressure",
        "nitrogen_half_time": "half_time",
        "helium_half_time": "half_time",
    },
    source="yount_hoffman_1986",
    provenance="memory_high",
)
def surface_excess_time(
    helium_pressure: Value,
    nitrogen_pressure: Value,
    inspired_nitrogen_pressure: Value,
    helium_half_time: Value,
    nitrogen_half_time: Value,
) -> Value:
    """Time at the surface for which the excess of inert gas counts, as if it stayed as on surfacing.

    Notes
    -----
    The integral of the excess over the inspired nitrogen, from surfacing to its end, divided by its value on
    surfacing. Of nitrogen alone it is the time constant, half-time/ln 2. Where nitrogen is below the inspired
    the sum reaches zero, and the integral ends there. The published simplification counts the excess over
    inspired gas, not over ambient pressure.

    Examples
    --------
    >>> round(surface_excess_time(30.0, 40.0, 26.07, 10.2, 27.0), 3)
    22.401
    >>> round(surface_excess_time(30.0, 20.0, 26.07, 10.2, 27.0), 4)
    10.8979
    """
    excess = nitrogen_pressure - inspired_nitrogen_pressure
    total = helium_pressure + excess
    helium_rate = LN2 / helium_half_time
    nitrogen_rate = LN2 / nitrogen_half_time
    faster = helium_rate - nitrogen_rate
    # Negative excess of nitrogen: the sum is zero after ln(p_He/-excess)/(k_He - k_N2), if helium is faster.
    ratio = maximum(helium_pressure, 1e-9) / maximum(-excess, 1e-9)
    ends = where(faster > 0.0, log(maximum(ratio, 1.0)) / where(faster > 0.0, faster, 1.0), 1e9)
    end = where(excess < 0.0, ends, 1e9)
    helium = helium_pressure / helium_rate * -expm1(-helium_rate * end)
    nitrogen = excess / nitrogen_rate * -expm1(-nitrogen_rate * end)
    return where(
        total <= 0.0, 0.0 * (helium + nitrogen), (helium + nitrogen) / where(total <= 0.0, 1.0, total)
    )


# -- Growing and dissolving -----------------------------------------------------------------------


@formula(
    result="duration",
    quantities={
        **_RADIUS,
        "saturation": "dissolved_gas_saturation",
        "diffusivity": "dissolved_gas_diffusivity",
        "solubility": "ostwald_coefficient",
    },
    source=("epstein_plesset_1950", "duncan_needham_2004"),
    provenance="memory_high",
)
def quasi_steady_dissolution_time(
    radius: Value,
    saturation: Value = 1.0,
    diffusivity: Value = 2e-9,
    solubility: Value = 0.02,
    surface_tension: Value = 0.0729,
    ambient_pressure: Value = 101.325,
) -> Value:
    """Life of a dissolving bubble, the start of diffusion left out.

    Notes
    -----
    The integral of R (R + 2 delta/3)/((1 - f) R + delta) from 0 to R_0 over kappa d, delta = 2 sigma/P, in
    closed form: an isolated sphere of one gas, without skin, flow or vapor. Holds where the bubble dissolves:
    in a supersaturated liquid only below the critical radius. Experiments agree to about 10 %.

    Examples
    --------
    >>> round(quasi_steady_dissolution_time(10.0, 0.5) * 60, 3)
    1.954
    """
    delta = maximum(2000.0 * surface_tension / ambient_pressure, 1e-12 * radius)
    x = (1.0 - saturation) * radius / delta
    # Integrals of s^2/(1 + x s) and s/(1 + x s) over 0..1: their series where x is small.
    near = x * x < 1e-4
    y = where(near, 1.0, x)
    z = where(near, x, 0.0)
    rest = log(maximum(1.0 + y, 1e-300))
    square = where(
        near,
        1 / 3 - z * (1 / 4 - z * (1 / 5 - z * (1 / 6 - z * (1 / 7 - z / 8)))),
        (0.5 * y * y - y + rest) / (y * y * y),
    )
    single = where(
        near,
        1 / 2 - z * (1 / 3 - z * (1 / 4 - z * (1 / 5 - z * (1 / 6 - z / 7)))),
        (y - rest) / (y * y),
    )
    # m2/s are 6e13 um2/min.
    speed = 6e13 * diffusivity * solubility
    return radius * radius * (radius / delta * square + (2.0 / 3.0) * single) / speed


@formula(
    result="boundary_term",
    quantities={"diffusivity": "dissolved_gas_diffusivity"},
    source="epstein_plesset_1950",
    provenance="memory_high",
)
def unstirred_boundary(duration: Value, diffusivity: Value) -> Value:
    """What the start of diffusion adds to 1/R in a liquid that nothing stirs or perfuses.

    Notes
    -----
    1/sqrt(pi D t). It fades; left out, the flux is the quasi-steady one.

    Examples
    --------
    >>> round(unstirred_boundary(1.0, 2e-9), 6)
    0.001629
    """
    return 1.0 / sqrt(PI * 6e13 * diffusivity * duration)


@formula(
    result="boundary_term",
    quantities={
        "blood_solubility": "ostwald_coefficient",
        "tissue_solubility": "ostwald_coefficient",
        "diffusivity": "dissolved_gas_diffusivity",
    },
    source=("van_liew_hlastala_1969", "van_liew_burkard_1993"),
    provenance="memory_high",
)
def perfusion_boundary(
    perfusion: Value, blood_solubility: Value, tissue_solubility: Value, diffusivity: Value
) -> Value:
    """What perfusion adds to 1/R around a bubble in endless, unstirred tissue: the two-region model.

    Notes
    -----
    sqrt(alpha_b Q/(alpha_t D)), Q the flow per volume of tissue. For one bubble in endless tissue; it must
    not be coupled back to the tension of a tissue, nor serve several bubbles.

    Examples
    --------
    >>> round(perfusion_boundary(0.01, 0.0144, 0.0144, 2e-9), 7)
    0.0002887
    """
    return sqrt(blood_solubility * perfusion / (tissue_solubility * 6e13 * diffusivity))


@formula(
    result="bubble_inflow",
    quantities={
        **_RADIUS,
        "tissue_gas_pressure": "partial_pressure",
        "bubble_gas_pressure": "partial_pressure",
        "diffusivity": "dissolved_gas_diffusivity",
        "solubility": "ostwald_coefficient",
    },
    **_TISSUE,
)
def gas_inflow(
    radius: Value,
    tissue_gas_pressure: Value,
    bubble_gas_pressure: Value,
    diffusivity: Value,
    solubility: Value,
    boundary_term: Value = 0.0,
) -> Value:
    """Flow of one gas into a bubble, as pressure times volume and divided by 4 pi.

    Notes
    -----
    alpha D (p_t - p_b)(lambda + 1/R) R^2. The boundary term lambda is 0 (quasi-steady),
    :func:`unstirred_boundary`, :func:`perfusion_boundary` (two regions), or one over the thickness of a shell
    in stirred tissue (three regions).

    Examples
    --------
    >>> round(gas_inflow(10.0, 200.0, 120.0, 2e-9, 0.0144), 1)
    1382400.0
    """
    flow = 6e13 * diffusivity * solubility * (tissue_gas_pressure - bubble_gas_pressure)
    return flow * radius * (1.0 + boundary_term * radius)


@formula(
    result="squared_radius_rate",
    quantities={**_RADIUS, "metabolic_pressure": "metabolic_gas_pressure", "ambient_rate": "pressure_rate"},
    **_TISSUE,
)
def squared_radius_rate(
    radius: Value,
    bubble_inflow: Value,
    ambient_pressure: Value,
    ambient_rate: Value = 0.0,
    surface_tension: Value = 0.05,
    tissue_modulus: Value = 0.0,
    metabolic_pressure: Value = 0.0,
) -> Value:
    """Rate of the square of a bubble's radius.

    Notes
    -----
    From the balance of gas and pressure: dR/dt = (J - R/3 dP/dt)/(P - p_met + 4 sigma/(3 R) + 8/3 pi R^3 M),
    J the inflow of all gases over R^2; written for R^2, which vanishes at a finite rate where R itself drops
    with a vertical slope.

    Examples
    --------
    Boyle alone: at 100 kPa, 10 kPa/min up, R^2 falls by 2/3 of a tenth a minute.

    >>> round(squared_radius_rate(10.0, 0.0, 100.0, 10.0, 0.0), 6)
    -6.666667
    """
    volume = radius * radius * radius
    held = (ambient_pressure - metabolic_pressure) * radius + (4000.0 / 3.0) * surface_tension
    elastic = tissue_modulus * (8.0 / 3.0) * PI * volume * radius
    return 2.0 * (bubble_inflow - volume * ambient_rate / 3.0) / (held + elastic)


@formula(
    result="composition_rate",
    quantities={
        **_RADIUS,
        "bubble_fraction": "fraction",
        "own_inflow": "bubble_inflow",
        "all_inflow": "bubble_inflow",
        "bubble_pressure": "bubble_pressure",
    },
    source="common_practice",
    provenance="computed",
)
def composition_rate(
    bubble_fraction: Value, own_inflow: Value, all_inflow: Value, radius: Value, bubble_pressure: Value
) -> Value:
    """Rate of one inert gas's share of a bubble that holds several.

    Notes
    -----
    dx/dt = 3 (I - x sum I)/(R^3 p_b), I the inflow of :func:`gas_inflow`: own derivation, written out in the
    documentation. With one gas x = 1 and the rate is zero.

    Examples
    --------
    >>> composition_rate(1.0, 500.0, 500.0, 10.0, 120.0)
    0.0
    """
    volume = radius * radius * radius
    return 3.0 * (own_inflow - bubble_fraction * all_inflow) / (volume * bubble_pressure)


# -- Counterdiffusion -----------------------------------------------------------------------------


@formula(
    result="counterdiffusion_ratio",
    quantities=dict.fromkeys(
        ("inner_permeance_a", "inner_permeance_b", "outer_permeance_a", "outer_permeance_b"),
        "layer_permeance",
    ),
    source=("graves_1973", "lambertsen_idicula_1975"),
    provenance="computed",
)
def counterdiffusion_ratio(
    inner_permeance_a: Value, inner_permeance_b: Value, outer_permeance_a: Value, outer_permeance_b: Value
) -> Value:
    """Sum of two gases between two layers, over the ambient pressure, when each comes from its own side.

    Notes
    -----
    The first gas enters through layer A, the other through B; K of gas and layer is solubility times
    diffusivity over thickness. In the steady state K_1A/(K_1A + K_1B) + K_2B/(K_2A + K_2B): above one exactly
    if K_1A/K_1B exceeds K_2A/K_2B, never two. The first index is the gas of the arguments' first word.

    Examples
    --------
    >>> counterdiffusion_ratio(4.0, 1.0, 1.0, 1.0)
    1.3
    """
    inner = inner_permeance_a / (inner_permeance_a + inner_permeance_b)
    return inner + outer_permeance_b / (outer_permeance_a + outer_permeance_b)


@formula(
    result="tissue_pressure",
    quantities={
        "leaving_pressure": "partial_pressure",
        "arriving_pressure": "partial_pressure",
        "leaving_half_time": "half_time",
        "arriving_half_time": "half_time",
    },
    source="daoust_1977",
    provenance="computed",
)
def counterdiffusion_tension(
    leaving_pressure: Value,
    arriving_pressure: Value,
    duration: Value,
    leaving_half_time: Value,
    arriving_half_time: Value,
) -> Value:
    """Sum of two inert gases in perfused tissue after a switch from one to the other.

    Notes
    -----
    p_1 e^(-k_1 t) + p_2 (1 - e^(-k_2 t)), at constant pressure, tissue saturated with the first. It passes
    through a maximum if the arriving gas is the faster one. Of diffusion between tissues it knows nothing.

    Examples
    --------
    >>> round(counterdiffusion_tension(400.0, 400.0, 5.0, 27.0, 10.2), 1)
    467.0
    """
    left = leaving_pressure * exp(-LN2 * duration / leaving_half_time)
    return left - arriving_pressure * expm1(-LN2 * duration / arriving_half_time)


@formula(
    result="duration",
    quantities={
        "leaving_pressure": "partial_pressure",
        "arriving_pressure": "partial_pressure",
        "leaving_half_time": "half_time",
        "arriving_half_time": "half_time",
    },
    source="daoust_1977",
    provenance="computed",
    check_result=True,
)
def counterdiffusion_peak_time(
    leaving_pressure: Value,
    arriving_pressure: Value,
    leaving_half_time: Value,
    arriving_half_time: Value,
) -> Value:
    """When :func:`counterdiffusion_tension` is highest, or lowest.

    Notes
    -----
    ln(k_2 p_2/(k_1 p_1))/(k_2 - k_1): a maximum when the arriving gas is the faster one. A negative time says
    that the sum only moves away from what it was at the switch.

    Examples
    --------
    >>> round(counterdiffusion_peak_time(400.0, 400.0, 27.0, 10.2), 3)
    23.022
    """
    arriving = LN2 / arriving_half_time
    leaving = LN2 / leaving_half_time
    return log(arriving * arriving_pressure / (leaving * leaving_pressure)) / (arriving - leaving)
