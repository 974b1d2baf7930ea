"""The cubic equation of state of Peng and Robinson, for comparison."""

from __future__ import annotations

from typing import Any

from gasphys.constants import GAS_CONSTANT, ZERO_CELSIUS, Constant
from gasphys.equation import Value, formula, inverse
from gasphys.maths import sqrt
from gasphys.real_gas.data import TEX, constant, data
from gasphys.real_gas.ideal import mixture_molar_mass
from gasphys.real_gas.newton import by_blocks, newton
from gasphys.real_gas.virial import PRESSURE_RANGE, REFUSE, TRACE, WARM

__all__ = ["CUBIC", "peng_robinson_density", "peng_robinson_pressure"]

CUBIC: dict[str, Any] = {"source": ("peng_robinson_1976", "critical_constants"), "provenance": "memory_high"}
_SOURCE = "critical_constants"


def _cubic(gas: str) -> tuple[Constant, Constant, Constant, Constant]:
    """Return root of a at the critical point, covolume, kappa and critical temperature of one gas."""
    universal, row = data("peng_robinson")["universal"], data("peng_robinson")["pure"][gas]
    critical, pressure = row["critical_temperature_K"], row["critical_pressure_kPa"]
    omega = row["acentric_factor"]
    k0, k1, k2 = universal["kappa"]
    r, word, tex = float(GAS_CONSTANT), row["word"], TEX[gas]
    return (
        constant(
            f"PR_ROOT_A_{gas.upper()}", universal["a"] ** 0.5 * r * critical / pressure**0.5,
            "kPa^0.5*L/mol", f"\\sqrt{{a_{{{tex}}}}}",
            f"root of the attraction of {gas} at its critical point", _SOURCE, word,
        ),
        constant(
            f"PR_B_{gas.upper()}", universal["b"] * r * critical / pressure,
            "L/mol", f"b_{{{tex}}}", f"covolume of {gas}", _SOURCE, word,
        ),
        constant(
            f"PR_KAPPA_{gas.upper()}", k0 + omega * (k1 + omega * k2),
            "1", f"\\kappa_{{{tex}}}", f"kappa of {gas}, from the acentric factor", _SOURCE, word,
        ),
        constant(
            f"CRITICAL_TEMPERATURE_{gas.upper()}", critical,
            "K", f"T_{{c,{tex}}}", f"critical temperature of {gas}", _SOURCE, word,
        ),
    )  # fmt: skip


def _binary(first: str, second: str) -> Constant:
    row = next(r for r in data("peng_robinson")["cross"] if set(r["gases"]) == {first, second})
    return constant(
        f"PR_K_{first.upper()}_{second.upper()}",
        row["k"],
        "1",
        f"k_{{{TEX[first]},{TEX[second]}}}",
        f"binary parameter of {first}-{second}",
        _SOURCE,
        row["word"],
    )


PR_ROOT_A_O2, PR_B_O2, PR_KAPPA_O2, CRITICAL_TEMPERATURE_O2 = _cubic("O2")
PR_ROOT_A_N2, PR_B_N2, PR_KAPPA_N2, CRITICAL_TEMPERATURE_N2 = _cubic("N2")
PR_ROOT_A_HE, PR_B_HE, PR_KAPPA_HE, CRITICAL_TEMPERATURE_HE = _cubic("He")
PR_ROOT_A_AR, PR_B_AR, PR_KAPPA_AR, CRITICAL_TEMPERATURE_AR = _cubic("Ar")
PR_ROOT_A_H2, PR_B_H2, PR_KAPPA_H2, CRITICAL_TEMPERATURE_H2 = _cubic("H2")
PR_ROOT_A_NE, PR_B_NE, PR_KAPPA_NE, CRITICAL_TEMPERATURE_NE = _cubic("Ne")
PR_ROOT_A_CO2, PR_B_CO2, PR_KAPPA_CO2, CRITICAL_TEMPERATURE_CO2 = _cubic("CO2")
PR_K_N2_O2 = _binary("N2", "O2")
PR_K_N2_AR = _binary("N2", "Ar")
PR_K_O2_AR = _binary("O2", "Ar")
PR_K_H2_N2 = _binary("H2", "N2")


@formula(result="attraction", register=False, stands=True, **CUBIC)
def peng_robinson_attraction(
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    temperature: Value,
) -> Value:
    """Attraction parameter of a mixture, Peng-Robinson.

    Notes
    -----
    a = sum_ij x_i x_j (a_i a_j)^(1/2) (1 - k_ij), a_i^(1/2) = a_ci^(1/2) (1 + kappa_i (1 - (T/Tc)^(1/2))).
    """
    kelvin = temperature + ZERO_CELSIUS
    o2 = PR_ROOT_A_O2 * (1.0 + PR_KAPPA_O2 * (1.0 - sqrt(kelvin / CRITICAL_TEMPERATURE_O2)))
    n2 = PR_ROOT_A_N2 * (1.0 + PR_KAPPA_N2 * (1.0 - sqrt(kelvin / CRITICAL_TEMPERATURE_N2)))
    he = PR_ROOT_A_HE * (1.0 + PR_KAPPA_HE * (1.0 - sqrt(kelvin / CRITICAL_TEMPERATURE_HE)))
    ar = PR_ROOT_A_AR * (1.0 + PR_KAPPA_AR * (1.0 - sqrt(kelvin / CRITICAL_TEMPERATURE_AR)))
    h2 = PR_ROOT_A_H2 * (1.0 + PR_KAPPA_H2 * (1.0 - sqrt(kelvin / CRITICAL_TEMPERATURE_H2)))
    ne = PR_ROOT_A_NE * (1.0 + PR_KAPPA_NE * (1.0 - sqrt(kelvin / CRITICAL_TEMPERATURE_NE)))
    co2 = PR_ROOT_A_CO2 * (1.0 + PR_KAPPA_CO2 * (1.0 - sqrt(kelvin / CRITICAL_TEMPERATURE_CO2)))
    root = (
        oxygen * o2
        + nitrogen * n2
        + helium * he
        + argon * ar
        + hydrogen * h2
        + neon * ne
        + carbon_dioxide * co2
    )
    return root * root - 2.0 * (
        nitrogen * oxygen * n2 * o2 * PR_K_N2_O2
        + nitrogen * argon * n2 * ar * PR_K_N2_AR
        + oxygen * argon * o2 * ar * PR_K_O2_AR
        + hydrogen * nitrogen * h2 * n2 * PR_K_H2_N2
    )


@formula(result="covolume", register=False, stands=True, **CUBIC)
def peng_robinson_covolume(
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
) -> Value:
    """Covolume of a mixture, Peng-Robinson: b = sum x b."""
    return (
        oxygen * PR_B_O2
        + nitrogen * PR_B_N2
        + helium * PR_B_HE
        + argon * PR_B_AR
        + hydrogen * PR_B_H2
        + neon * PR_B_NE
        + carbon_dioxide * PR_B_CO2
    )


@formula(result="gas_pressure", register=False, **CUBIC)
def peng_robinson_series(
    molar_density: Value, attraction: Value, covolume: Value, temperature: Value
) -> Value:
    """Pressure from molar density, Peng-Robinson: p = c R T/(1 - b c) - a c^2/(1 + 2 b c - b^2 c^2)."""
    filled = covolume * molar_density
    return molar_density * GAS_CONSTANT * (temperature + ZERO_CELSIUS) / (
        1.0 - filled
    ) - attraction * molar_density * molar_density / (1.0 + 2.0 * filled - filled * filled)


@formula(result="gas_pressure", register=False, **CUBIC)
def peng_robinson_stiffness(
    molar_density: Value, attraction: Value, covolume: Value, temperature: Value
) -> Value:
    """Slope of :func:`peng_robinson_series` over molar density [kPa L/mol]."""
    filled = covolume * molar_density
    free = 1.0 - filled
    spread = 1.0 + 2.0 * filled - filled * filled
    return GAS_CONSTANT * (temperature + ZERO_CELSIUS) / (free * free) - 2.0 * attraction * molar_density * (
        1.0 + filled
    ) / (spread * spread)


@formula(result="gas_pressure", valid=WARM | TRACE, refuse=REFUSE, register=False, **CUBIC)
def peng_robinson_pressure(
    density: Value,
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    temperature: Value = 20.0,
) -> Value:
    """Pressure of dry gas by the cubic equation of Peng and Robinson, explicit in density.

    Notes
    -----
    With the acentric factor. Its error has one sign for helium and hydrogen mixtures: see
    :func:`density`.

    Examples
    --------
    >>> round(peng_robinson_pressure(5.0, 0.21, 0.79, 0.0, 0.0, 0.0, 0.0, 0.0), 1)
    421.4
    """
    return peng_robinson_series(
        density / mixture_molar_mass(oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide),
        peng_robinson_attraction(
            oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide, temperature
        ),
        peng_robinson_covolume(oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide),
        temperature,
    )


@by_blocks
def _peng_robinson_root(ambient_pressure: Any, *rest: Any) -> Any:
    *fractions, temperature = rest
    a = peng_robinson_attraction.raw(*fractions, temperature)
    b = peng_robinson_covolume.raw(*fractions)
    # Without attraction: below the pole at full covolume whatever the pressure.
    start = ambient_pressure / (GAS_CONSTANT * (temperature + float(ZERO_CELSIUS)) + b * ambient_pressure)
    found = newton(
        start,
        ambient_pressure,
        lambda c: peng_robinson_series.raw(c, a, b, temperature),
        lambda c: peng_robinson_stiffness.raw(c, a, b, temperature),
    )
    return found * mixture_molar_mass.raw(*fractions)


peng_robinson_density = inverse(
    peng_robinson_pressure,
    "density",
    name="density",
    module=__name__,
    kernel=_peng_robinson_root,
    given="ambient_pressure",
    valid=PRESSURE_RANGE,
    doc="""Density of dry gas by the cubic equation of Peng and Robinson.

Notes
-----
The root of :func:`peng_robinson_pressure` in density. For comparison: air up to 4 % too dense at 300 bar,
helium mixtures 6-11 % at 200-300 bar.""",
    register=False,
)
