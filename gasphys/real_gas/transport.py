"""Viscosity, thermal conductivity, heat capacity, diffusivity and the Reynolds number of breathing gas."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from gasphys.constants import (
    BAR,
    MOLAR_MASS_AR,
    MOLAR_MASS_CO2,
    MOLAR_MASS_H2,
    MOLAR_MASS_H2O,
    MOLAR_MASS_HE,
    MOLAR_MASS_N2,
    MOLAR_MASS_NE,
    MOLAR_MASS_O2,
    ZERO_CELSIUS,
    Constant,
)
from gasphys.equation import Value, choice, formula
from gasphys.errors import unknown_name
from gasphys.gas import gas_fractions
from gasphys.maths import sqrt
from gasphys.policy import weakest
from gasphys.real_gas.data import MOLAR_MASSES, TEX, constant, data, present_gases
from gasphys.real_gas.ideal import mixture_molar_mass
from gasphys.real_gas.virial import ONE_THIRD, REFERENCE_TEMPERATURE, REFUSE

__all__ = [
    "diffusivity",
    "heat_capacity",
    "reynolds_number",
    "thermal_conductivity",
    "viscosity",
]

# Outside the fits a word, below the equations of state's lowest temperature no answer.
_VALID = {
    "temperature": tuple(t - float(ZERO_CELSIUS) for t in data("transport")["validity"]["temperature_K"])
}


def _judged(method: str) -> Callable[[Mapping[str, Any]], dict[str, str]]:
    """Provenance of a result from the gases that are present."""

    def judge(inputs: Mapping[str, Any]) -> dict[str, str]:
        rows = data("transport")["gas"]
        present = [g for g, x in present_gases(inputs).items() if x > 1e-4]
        return {"provenance": weakest([method, *(rows[g]["word"] for g in present)])}

    return judge


# ---- Constants -----------------------------------------------------------------------------------

_TRANSPORT = "transport_reference_correlations"


def _viscosity(gas: str) -> tuple[Constant, Constant]:
    """Return viscosity at 25 degC and Sutherland constant."""
    row = data("transport")["gas"][gas]
    return (
        constant(
            f"MU_{gas.upper()}", row["mu0"], "uPa*s", f"\\mu_{{{TEX[gas]}}}^{{25}}",
            f"viscosity of {gas} at 25 degC, low density", _TRANSPORT, row["word"],
        ),
        constant(
            f"SUTHERLAND_{gas.upper()}", row["S"], "K", f"S_{{{TEX[gas]}}}",
            f"Sutherland constant of {gas} for this reference temperature", _TRANSPORT, row["word"],
        ),
    )  # fmt: skip


def _conductivity(gas: str) -> Constant:
    row = data("transport")["gas"][gas]
    return constant(
        f"CONDUCTIVITY_{gas.upper()}", row["k0"], "mW/m/K", f"k_{{{TEX[gas]}}}^{{25}}",
        f"thermal conductivity of {gas} at 25 degC, low density", _TRANSPORT, row["word"],
    )  # fmt: skip


def _conductivity_slope(gas: str) -> Constant:
    row = data("transport")["gas"][gas]
    return constant(
        f"CONDUCTIVITY_SLOPE_{gas.upper()}", row["k1"], "mW/m/K^2", f"k'_{{{TEX[gas]}}}",
        f"slope of the thermal conductivity of {gas}", _TRANSPORT, row["word"],
    )  # fmt: skip


def _heat_capacity(gas: str) -> Constant:
    row = data("transport")["gas"][gas]
    return constant(
        f"CP_{gas.upper()}", row["cp0_298"], "J/mol/K", f"c_{{{TEX[gas]}}}^{{25}}",
        f"molar heat capacity of {gas} at 25 degC, constant pressure, low density",
        _TRANSPORT, row["word"],
    )  # fmt: skip


def _heat_capacity_slope(gas: str) -> Constant:
    """Slope of a straight line through 25 and 37 degC."""
    row = data("transport")["gas"][gas]
    return constant(
        f"CP_SLOPE_{gas.upper()}", (row["cp0_310"] - row["cp0_298"]) / 12.0, "J/mol/K^2",
        f"c'_{{{TEX[gas]}}}",
        f"slope of the molar heat capacity of {gas}, 25 to 37 degC", _TRANSPORT, row["word"],
    )  # fmt: skip


def _density_term(gas: str) -> Constant:
    row = data("transport")["gas"][gas]
    return constant(
        f"MU_SLOPE_{gas.upper()}", row["a"], "uPa*s*L/mol", f"\\mu'_{{{TEX[gas]}}}",
        f"rise of the viscosity of {gas} with molar density", _TRANSPORT, row["word"],
    )  # fmt: skip


MU_O2, SUTHERLAND_O2 = _viscosity("O2")
MU_N2, SUTHERLAND_N2 = _viscosity("N2")
MU_HE, SUTHERLAND_HE = _viscosity("He")
MU_AR, SUTHERLAND_AR = _viscosity("Ar")
MU_H2, SUTHERLAND_H2 = _viscosity("H2")
MU_NE, SUTHERLAND_NE = _viscosity("Ne")
MU_CO2, SUTHERLAND_CO2 = _viscosity("CO2")

CONDUCTIVITY_O2 = _conductivity("O2")
CONDUCTIVITY_N2 = _conductivity("N2")
CONDUCTIVITY_HE = _conductivity("He")
CONDUCTIVITY_AR = _conductivity("Ar")
CONDUCTIVITY_H2 = _conductivity("H2")
CONDUCTIVITY_NE = _conductivity("Ne")
CONDUCTIVITY_CO2 = _conductivity("CO2")
CONDUCTIVITY_SLOPE_O2 = _conductivity_slope("O2")
CONDUCTIVITY_SLOPE_N2 = _conductivity_slope("N2")
CONDUCTIVITY_SLOPE_HE = _conductivity_slope("He")
CONDUCTIVITY_SLOPE_AR = _conductivity_slope("Ar")
CONDUCTIVITY_SLOPE_H2 = _conductivity_slope("H2")
CONDUCTIVITY_SLOPE_CO2 = _conductivity_slope("CO2")

CP_O2 = _heat_capacity("O2")
CP_N2 = _heat_capacity("N2")
CP_HE = _heat_capacity("He")
CP_AR = _heat_capacity("Ar")
CP_H2 = _heat_capacity("H2")
CP_NE = _heat_capacity("Ne")
CP_CO2 = _heat_capacity("CO2")
# Monatomic gases have none.
CP_SLOPE_O2 = _heat_capacity_slope("O2")
CP_SLOPE_N2 = _heat_capacity_slope("N2")
CP_SLOPE_H2 = _heat_capacity_slope("H2")
CP_SLOPE_CO2 = _heat_capacity_slope("CO2")

MU_SLOPE_O2 = _density_term("O2")
MU_SLOPE_N2 = _density_term("N2")
MU_SLOPE_HE = _density_term("He")
MU_SLOPE_AR = _density_term("Ar")
MU_SLOPE_H2 = _density_term("H2")


def _fuller(key: str, symbol: str, meaning: str) -> Constant:
    row = data("transport")["fuller"]
    return constant(f"FULLER_{key.upper()}", row[key], "1", symbol, meaning, "fuller_1966", row["word"])


FULLER_FACTOR = _fuller("factor", "k_F", "factor of Fuller's equation, cm2/s with bar, g/mol and K")
FULLER_EXPONENT = _fuller("exponent", "n_F", "temperature exponent of Fuller's equation")


# ---- Mixing --------------------------------------------------------------------------------------


@formula(
    result="viscosity",
    quantities={"reference_viscosity": "viscosity"},
    valid=_VALID,
    source="transport_reference_correlations",
    provenance="computed",
    register=False,
    stands=True,
)
def sutherland(temperature: Value, reference_viscosity: Value, sutherland_constant: Value) -> Value:
    """Viscosity of one gas at low density, form of Sutherland.

    Notes
    -----
    mu = mu_r (T/T_r)^1.5 (T_r + S)/(T + S), T_r = 298.15 K. S belongs to this reference temperature and
    fit; it must not be taken from elsewhere.
    """
    kelvin = temperature + ZERO_CELSIUS
    return (
        reference_viscosity
        * (kelvin / REFERENCE_TEMPERATURE) ** 1.5
        * (REFERENCE_TEMPERATURE + sutherland_constant)
        / (kelvin + sutherland_constant)
    )


@formula(
    result="wilke_mean",
    quantities={
        **{f"value_{g}": "pure_gas_property" for g in ("o2", "n2", "he", "ar", "h2", "ne", "co2")},
        **{f"mu_{g}": "viscosity" for g in ("o2", "n2", "he", "ar", "h2", "ne", "co2")},
    },
    source="wilke_1950",
    provenance="memory_high",
    register=False,
    stands=True,
)
def wilke_mean(
    value_o2: Value,
    value_n2: Value,
    value_he: Value,
    value_ar: Value,
    value_h2: Value,
    value_ne: Value,
    value_co2: Value,
    mu_o2: Value,
    mu_n2: Value,
    mu_he: Value,
    mu_ar: Value,
    mu_h2: Value,
    mu_ne: Value,
    mu_co2: Value,
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
) -> Value:
    """Mean of a property of the pure gases with Wilke's weights.

    Notes
    -----
    sum_i x_i q_i/sum_j x_j phi_ij with
    phi_ij = [1 + (mu_i/mu_j)^(1/2) (M_j/M_i)^(1/4)]^2/[8 (1 + M_i/M_j)]^(1/2). The quarter power has
    M_j/M_i, the denominator M_i/M_j: inverted, air is hardly wrong, heliox 3 %. Written here with
    a = mu^(1/2)/M^(1/4) and w_j = x_j M_j/mu_j as sum_j w_j (a_i + a_j)^2/[8 (M_i + M_j)]^(1/2): the same,
    symmetric but for the weights, and regular where a gas is absent.
    """
    a_o2 = sqrt(mu_o2 / sqrt(MOLAR_MASS_O2))
    a_n2 = sqrt(mu_n2 / sqrt(MOLAR_MASS_N2))
    a_he = sqrt(mu_he / sqrt(MOLAR_MASS_HE))
    a_ar = sqrt(mu_ar / sqrt(MOLAR_MASS_AR))
    a_h2 = sqrt(mu_h2 / sqrt(MOLAR_MASS_H2))
    a_ne = sqrt(mu_ne / sqrt(MOLAR_MASS_NE))
    a_co2 = sqrt(mu_co2 / sqrt(MOLAR_MASS_CO2))
    w_o2 = oxygen * MOLAR_MASS_O2 / mu_o2
    w_n2 = nitrogen * MOLAR_MASS_N2 / mu_n2
    w_he = helium * MOLAR_MASS_HE / mu_he
    w_ar = argon * MOLAR_MASS_AR / mu_ar
    w_h2 = hydrogen * MOLAR_MASS_H2 / mu_h2
    w_ne = neon * MOLAR_MASS_NE / mu_ne
    w_co2 = carbon_dioxide * MOLAR_MASS_CO2 / mu_co2
    o2_n2 = (a_o2 + a_n2) ** 2 / sqrt(8.0 * (MOLAR_MASS_O2 + MOLAR_MASS_N2))
    o2_he = (a_o2 + a_he) ** 2 / sqrt(8.0 * (MOLAR_MASS_O2 + MOLAR_MASS_HE))
    o2_ar = (a_o2 + a_ar) ** 2 / sqrt(8.0 * (MOLAR_MASS_O2 + MOLAR_MASS_AR))
    o2_h2 = (a_o2 + a_h2) ** 2 / sqrt(8.0 * (MOLAR_MASS_O2 + MOLAR_MASS_H2))
    o2_ne = (a_o2 + a_ne) ** 2 / sqrt(8.0 * (MOLAR_MASS_O2 + MOLAR_MASS_NE))
    o2_co2 = (a_o2 + a_co2) ** 2 / sqrt(8.0 * (MOLAR_MASS_O2 + MOLAR_MASS_CO2))
    n2_he = (a_n2 + a_he) ** 2 / sqrt(8.0 * (MOLAR_MASS_N2 + MOLAR_MASS_HE))
    n2_ar = (a_n2 + a_ar) ** 2 / sqrt(8.0 * (MOLAR_MASS_N2 + MOLAR_MASS_AR))
    n2_h2 = (a_n2 + a_h2) ** 2 / sqrt(8.0 * (MOLAR_MASS_N2 + MOLAR_MASS_H2))
    n2_ne = (a_n2 + a_ne) ** 2 / sqrt(8.0 * (MOLAR_MASS_N2 + MOLAR_MASS_NE))
    n2_co2 = (a_n2 + a_co2) ** 2 / sqrt(8.0 * (MOLAR_MASS_N2 + MOLAR_MASS_CO2))
    he_ar = (a_he + a_ar) ** 2 / sqrt(8.0 * (MOLAR_MASS_HE + MOLAR_MASS_AR))
    he_h2 = (a_he + a_h2) ** 2 / sqrt(8.0 * (MOLAR_MASS_HE + MOLAR_MASS_H2))
    he_ne = (a_he + a_ne) ** 2 / sqrt(8.0 * (MOLAR_MASS_HE + MOLAR_MASS_NE))
    he_co2 = (a_he + a_co2) ** 2 / sqrt(8.0 * (MOLAR_MASS_HE + MOLAR_MASS_CO2))
    ar_h2 = (a_ar + a_h2) ** 2 / sqrt(8.0 * (MOLAR_MASS_AR + MOLAR_MASS_H2))
    ar_ne = (a_ar + a_ne) ** 2 / sqrt(8.0 * (MOLAR_MASS_AR + MOLAR_MASS_NE))
    ar_co2 = (a_ar + a_co2) ** 2 / sqrt(8.0 * (MOLAR_MASS_AR + MOLAR_MASS_CO2))
    h2_ne = (a_h2 + a_ne) ** 2 / sqrt(8.0 * (MOLAR_MASS_H2 + MOLAR_MASS_NE))
    h2_co2 = (a_h2 + a_co2) ** 2 / sqrt(8.0 * (MOLAR_MASS_H2 + MOLAR_MASS_CO2))
    ne_co2 = (a_ne + a_co2) ** 2 / sqrt(8.0 * (MOLAR_MASS_NE + MOLAR_MASS_CO2))
    return (
        oxygen
        * value_o2
        / (
            w_o2 * mu_o2 / MOLAR_MASS_O2
            + w_n2 * o2_n2
            + w_he * o2_he
            + w_ar * o2_ar
            + w_h2 * o2_h2
            + w_ne * o2_ne
            + w_co2 * o2_co2
        )
        + nitrogen
        * value_n2
        / (
            w_o2 * o2_n2
            + w_n2 * mu_n2 / MOLAR_MASS_N2
            + w_he * n2_he
            + w_ar * n2_ar
            + w_h2 * n2_h2
            + w_ne * n2_ne
            + w_co2 * n2_co2
        )
        + helium
        * value_he
        / (
            w_o2 * o2_he
            + w_n2 * n2_he
            + w_he * mu_he / MOLAR_MASS_HE
            + w_ar * he_ar
            + w_h2 * he_h2
            + w_ne * he_ne
            + w_co2 * he_co2
        )
        + argon
        * value_ar
        / (
            w_o2 * o2_ar
            + w_n2 * n2_ar
            + w_he * he_ar
            + w_ar * mu_ar / MOLAR_MASS_AR
            + w_h2 * ar_h2
            + w_ne * ar_ne
            + w_co2 * ar_co2
        )
        + hydrogen
        * value_h2
        / (
            w_o2 * o2_h2
            + w_n2 * n2_h2
            + w_he * he_h2
            + w_ar * ar_h2
            + w_h2 * mu_h2 / MOLAR_MASS_H2
            + w_ne * h2_ne
            + w_co2 * h2_co2
        )
        + neon
        * value_ne
        / (
            w_o2 * o2_ne
            + w_n2 * n2_ne
            + w_he * he_ne
            + w_ar * ar_ne
            + w_h2 * h2_ne
            + w_ne * mu_ne / MOLAR_MASS_NE
            + w_co2 * ne_co2
        )
        + carbon_dioxide
        * value_co2
        / (
            w_o2 * o2_co2
            + w_n2 * n2_co2
            + w_he * he_co2
            + w_ar * ar_co2
            + w_h2 * h2_co2
            + w_ne * ne_co2
            + w_co2 * mu_co2 / MOLAR_MASS_CO2
        )
    )


# ---- Viscosity -----------------------------------------------------------------------------------


@formula(
    result="viscosity",
    valid=_VALID | {"density": (0.0, 115.0)},
    refuse=REFUSE,
    source=("wilke_1950", "transport_reference_correlations"),
    provenance="memory_high",
    register=False,
    judged=_judged("memory_high"),
)
def _wilke_viscosity(
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    temperature: Value,
    density: Value = 0.0,
) -> Value:
    """Viscosity of a mixture by Wilke's rule, with a term for density."""
    o2 = sutherland(temperature, MU_O2, SUTHERLAND_O2)
    n2 = sutherland(temperature, MU_N2, SUTHERLAND_N2)
    he = sutherland(temperature, MU_HE, SUTHERLAND_HE)
    ar = sutherland(temperature, MU_AR, SUTHERLAND_AR)
    h2 = sutherland(temperature, MU_H2, SUTHERLAND_H2)
    ne = sutherland(temperature, MU_NE, SUTHERLAND_NE)
    co2 = sutherland(temperature, MU_CO2, SUTHERLAND_CO2)
    low = wilke_mean(
        o2,
        n2,
        he,
        ar,
        h2,
        ne,
        co2,
        o2,
        n2,
        he,
        ar,
        h2,
        ne,
        co2,
        oxygen,
        nitrogen,
        helium,
        argon,
        hydrogen,
        neon,
        carbon_dioxide,
    )
    rise = (
        oxygen * MU_SLOPE_O2
        + nitrogen * MU_SLOPE_N2
        + helium * MU_SLOPE_HE
        + argon * MU_SLOPE_AR
        + hydrogen * MU_SLOPE_H2
    )
    return low + rise * density / mixture_molar_mass(
        oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide
    )


@choice(option="model", registry={"wilke_1950": _wilke_viscosity}, spread={"gas": gas_fractions})
def viscosity(gas: Value, temperature: Value, density: Value = 0.0, model: str = "wilke_1950") -> Value:
    """Dynamic viscosity of breathing gas.

    Notes
    -----
    Pure gases by Sutherland's form, within 0.1 % of the reference correlations from 260 to 330 K;
    mixtures by Wilke's rule: air 0.15 % low, helium mixtures up to 3 % high (worst near 75 % helium).
    Viscosity is not monotone in the helium fraction.

    ``density`` (of :func:`~gasphys.real_gas.density`) adds the rise with density: within 0.06 uPa s to
    31 bar, to 60 bar 0.17 (N2) and 0.27 (Ar) too low near 0 degC; neon and carbon dioxide have no such term.
    Left at 0 the result is the low-density limit, good to 0.1 % at 1 atm.

    Examples
    --------
    >>> round(viscosity("air", 37.0), 2)
    18.94
    >>> round(viscosity("heliox 20/80", 20.0), 2)
    21.51
    """


# ---- Thermal conductivity ------------------------------------------------------------------------


@formula(
    result="thermal_conductivity",
    valid=_VALID,
    refuse=REFUSE,
    source=("mason_saxena_1958", "transport_reference_correlations"),
    provenance="memory_high",
    register=False,
    judged=_judged("memory_high"),
)
def _wassiljewa_conductivity(
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    temperature: Value,
) -> Value:
    """Thermal conductivity of a mixture by Wassiljewa's form with Wilke's factors."""
    warmth = temperature + ZERO_CELSIUS - REFERENCE_TEMPERATURE
    o2 = sutherland(temperature, MU_O2, SUTHERLAND_O2)
    n2 = sutherland(temperature, MU_N2, SUTHERLAND_N2)
    he = sutherland(temperature, MU_HE, SUTHERLAND_HE)
    ar = sutherland(temperature, MU_AR, SUTHERLAND_AR)
    h2 = sutherland(temperature, MU_H2, SUTHERLAND_H2)
    ne = sutherland(temperature, MU_NE, SUTHERLAND_NE)
    co2 = sutherland(temperature, MU_CO2, SUTHERLAND_CO2)
    return wilke_mean(
        CONDUCTIVITY_O2 + CONDUCTIVITY_SLOPE_O2 * warmth,
        CONDUCTIVITY_N2 + CONDUCTIVITY_SLOPE_N2 * warmth,
        CONDUCTIVITY_HE + CONDUCTIVITY_SLOPE_HE * warmth,
        CONDUCTIVITY_AR + CONDUCTIVITY_SLOPE_AR * warmth,
        CONDUCTIVITY_H2 + CONDUCTIVITY_SLOPE_H2 * warmth,
        CONDUCTIVITY_NE,
        CONDUCTIVITY_CO2 + CONDUCTIVITY_SLOPE_CO2 * warmth,
        o2,
        n2,
        he,
        ar,
        h2,
        ne,
        co2,
        oxygen,
        nitrogen,
        helium,
        argon,
        hydrogen,
        neon,
        carbon_dioxide,
    )


@choice(
    option="model", registry={"mason_saxena_1958": _wassiljewa_conductivity}, spread={"gas": gas_fractions}
)
def thermal_conductivity(gas: Value, temperature: Value, model: str = "mason_saxena_1958") -> Value:
    """Thermal conductivity of breathing gas at low density.

    Notes
    -----
    k = sum_i x_i k_i/sum_j x_j phi_ij with the phi of viscosity. Pure gases within 0.25 % of the reference
    correlations (two sources for hydrogen differ by 4 %); air 2 % low; helium mixtures not verified, assume
    +-8 %. At 60 bar and 37 degC nitrogen and oxygen conduct 10 % more, helium 2.5 % more.

    Examples
    --------
    >>> round(thermal_conductivity("air", 20.0), 1)
    25.5
    """


# ---- Heat capacity -------------------------------------------------------------------------------


@formula(
    result="molar_heat_capacity",
    valid=_VALID,
    refuse=REFUSE,
    source="transport_reference_correlations",
    provenance="computed",
    register=False,
)
def _ideal_heat_capacity(
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    temperature: Value,
) -> Value:
    """Molar heat capacity of a mixture: the sum of the pure gases."""
    warmth = temperature + ZERO_CELSIUS - REFERENCE_TEMPERATURE
    return (
        oxygen * (CP_O2 + CP_SLOPE_O2 * warmth)
        + nitrogen * (CP_N2 + CP_SLOPE_N2 * warmth)
        + helium * CP_HE
        + argon * CP_AR
        + hydrogen * (CP_H2 + CP_SLOPE_H2 * warmth)
        + neon * CP_NE
        + carbon_dioxide * (CP_CO2 + CP_SLOPE_CO2 * warmth)
    )


@choice(option="model", registry={"ideal_sum": _ideal_heat_capacity}, spread={"gas": gas_fractions})
def heat_capacity(gas: Value, temperature: Value, model: str = "ideal_sum") -> Value:
    """Molar heat capacity of breathing gas at constant pressure and low density.

    Notes
    -----
    cp = sum x cp_i, each a straight line through its values at 25 and 37 degC. The real gas holds more:
    at 31 bar and 37 degC nitrogen +4.4 %, oxygen +5.0 %, air +4.5 %, helium 0.0, hydrogen +0.5 %; at 60 bar
    and 27 degC nitrogen +9 %, oxygen +11 %. Times density over molar mass it is the heat capacity per
    liter, which governs respiratory heat loss.

    Examples
    --------
    >>> round(heat_capacity("heliox 2/98", 37.0), 2)
    20.96
    """


# ---- Diffusivity ---------------------------------------------------------------------------------


@formula(
    result="diffusivity",
    quantities={
        "ambient_pressure": "gas_pressure",
        "first_molar_mass": "molar_mass",
        "second_molar_mass": "molar_mass",
        "first_diffusion_volume": "diffusion_volume",
        "second_diffusion_volume": "diffusion_volume",
    },
    valid=_VALID,
    refuse=REFUSE,
    source="fuller_1966",
    provenance="memory_high",
    register=False,
)
def _fuller_diffusivity(
    ambient_pressure: Value,
    first_molar_mass: Value,
    second_molar_mass: Value,
    first_diffusion_volume: Value,
    second_diffusion_volume: Value,
    temperature: Value = 37.0,
) -> Value:
    """Diffusivity of a pair of gases, Fuller, Schettler and Giddings."""
    size = first_diffusion_volume**ONE_THIRD + second_diffusion_volume**ONE_THIRD
    return (
        FULLER_FACTOR
        * (temperature + ZERO_CELSIUS) ** FULLER_EXPONENT
        * sqrt((1.0 / first_molar_mass + 1.0 / second_molar_mass) / 2.0)
        / (ambient_pressure / BAR * size * size)
    )


def _fuller_pair(pair: str) -> dict[str, float]:
    """Spread a pair of gases into molar masses and diffusion volumes.

    Parameters
    ----------
    pair : str
        Two formulas in any order: ``"CO2-N2"``; water vapor is ``"H2O"``.
    """
    rows = data("transport")["fuller"]
    gases = pair.split("-") if isinstance(pair, str) else []
    known = {**MOLAR_MASSES, "H2O": MOLAR_MASS_H2O}
    if len(gases) != 2 or gases[0] == gases[1] or not set(gases) <= set(known):
        valid = [f"{a}-{b}" for a in known for b in known if a != b]
        raise unknown_name("pair of gases", pair, valid)
    first, second = gases
    return {
        "first_molar_mass": float(known[first]),
        "second_molar_mass": float(known[second]),
        "first_diffusion_volume": float(rows[first]),
        "second_diffusion_volume": float(rows[second]),
    }


@choice(option="model", registry={"fuller_1966": _fuller_diffusivity}, spread={"pair": _fuller_pair})
def diffusivity(
    ambient_pressure: Value, pair: Value, temperature: Value = 37.0, model: str = "fuller_1966"
) -> Value:
    """Diffusivity of one gas in another.

    Notes
    -----
    ``pair`` is two formulas, ``"CO2-N2"``, in any order; water vapor is ``"H2O"``. D = 0.00143
    T^1.75/(p M12^(1/2) (v1^(1/3) + v2^(1/3))^2), p in bar, M12 = 2/(1/M1 + 1/M2); within about 5-10 % of
    measurement. Inversely proportional to pressure: dense gas also mixes more slowly.

    Examples
    --------
    >>> round(diffusivity(101.325, "O2-N2", 25.0), 2)
    0.21
    """


# ---- Reynolds number -----------------------------------------------------------------------------


@formula(
    result="reynolds_number",
    source="reynolds_1883",
    provenance="secondary",
)
def reynolds_number(gas_flow: Value, tube_diameter: Value, density: Value, viscosity: Value) -> Value:
    """Reynolds number of gas flowing through a round tube.

    Notes
    -----
    Re = 4 rho Q/(pi d mu). In a straight smooth tube flow is laminar below about 2000 and turbulent above
    about 4000; in branching airways the change is gradual and begins earlier. At one flow dense gas is
    more turbulent in proportion to its density, viscosity hardly changing.

    Examples
    --------
    Air at 30 msw, 60 L/min through a trachea of 18 mm:

    >>> from gasphys.real_gas import density, viscosity
    >>> round(reynolds_number(60.0, 0.018, density(401.325, "air", 37.0), viscosity("air", 37.0)), -2)
    16800.0
    """
    # L/min to m3/s and uPa s to Pa s: 1e-3/60/1e-6.
    return 4.0e3 / 60.0 * density * gas_flow / (3.141592653589793 * tube_diameter * viscosity)
