"""The virial series: coefficients of a mixture, pressure explicit in density, density by Newton's method."""

from __future__ import annotations

from typing import Any

from gasphys.constants import GAS_CONSTANT, ZERO_CELSIUS, Constant
from gasphys.equation import Value, formula, inverse
from gasphys.maths import where
from gasphys.real_gas.data import TEX, constant, data, judged, pair
from gasphys.real_gas.ideal import mixture_molar_mass
from gasphys.real_gas.newton import by_blocks, newton

__all__ = [
    "PRESSURE_RANGE",
    "REFUSE",
    "TRACE",
    "VIRIAL",
    "WARM",
    "fifth_virial",
    "fourth_virial",
    "second_virial",
    "third_virial",
    "virial_density",
    "virial_pressure",
    "virial_root",
    "virial_series",
    "virial_stiffness",
    "virial_uncertainty",
]

_RANGES = data("virial")["validity"]
_LOW, _HIGH = (t - float(ZERO_CELSIUS) for t in _RANGES["temperature_K"])
#: The range of the fit; below 250 K no answer is given; carbon dioxide as a trace.
WARM = {"temperature": (_LOW, _HIGH)}
REFUSE = {"temperature": (_RANGES["refuse_below_K"] - float(ZERO_CELSIUS), 400.0)}
TRACE = {"carbon_dioxide": tuple(_RANGES["carbon_dioxide"])}
PRESSURE_RANGE = {"ambient_pressure": tuple(_RANGES["pressure_kPa"])}
VIRIAL: dict[str, Any] = {"source": ("virial_reference_equations", "unlike_pairs"), "provenance": "computed"}

# ---- Constants -----------------------------------------------------------------------------------

_SOURCE = "virial_reference_equations"
_ORDER = {"B": "second", "C": "third", "D": "fourth", "E": "fifth"}
_UNIT = {"B": "cm^3/mol", "C": "cm^6/mol^2", "D": "cm^9/mol^3", "E": "cm^12/mol^4"}


def _series(letter: str, *gases: str) -> tuple[Constant, ...]:
    """Coefficients of one virial coefficient in powers of xi: of a gas, or of a listed pair."""
    if len(gases) == 1:
        row = data("virial")["pure"][gases[0]]
    else:
        row = next(r for r in data("virial")["cross"] if set(r["gases"]) == set(gases))
    return tuple(
        constant(
            f"{letter}_{'_'.join(g.upper() for g in gases)}_{k}",
            value,
            _UNIT[letter],
            f"{letter}_{{{','.join(TEX[g] for g in gases)},{k}}}",
            f"{_ORDER[letter]} virial coefficient of {'-'.join(gases)}, factor of xi^{k}",
            _SOURCE if row["word"] == "computed" else "unlike_pairs",
            row["word"],
        )
        for k, value in enumerate(row[letter])
    )


def _fourth_root(gas: str) -> Constant:
    row = data("virial")["pure"][gas]
    return constant(
        f"ROOT_D_{gas.upper()}",
        row["D"] ** 0.25,
        "(cm^9/mol^3)^(1/4)",
        f"D_{{{TEX[gas]}}}^{{1/4}}",
        f"fourth root of the effective fourth virial coefficient of {gas}, {row['D']:g} cm^9/mol^3",
        _SOURCE,
        row["word"],
    )


REFERENCE_TEMPERATURE = constant(
    "REFERENCE_TEMPERATURE", 25.0 + float(ZERO_CELSIUS), "K", "T_r",
    "reference temperature of the gas property fits, 25 degC", _SOURCE, "computed",
)  # fmt: skip
ONE_THIRD = constant(
    "ONE_THIRD", 1.0 / 3.0, "1", r"\tfrac{1}{3}", "exponent of the mixing rule for C", _SOURCE, "computed"
)

B_O2_0, B_O2_1, B_O2_2 = _series("B", "O2")
B_N2_0, B_N2_1, B_N2_2 = _series("B", "N2")
B_HE_0, B_HE_1, B_HE_2 = _series("B", "He")
B_AR_0, B_AR_1, B_AR_2 = _series("B", "Ar")
B_H2_0, B_H2_1, B_H2_2 = _series("B", "H2")
B_NE_0, B_NE_1, B_NE_2 = _series("B", "Ne")
B_CO2_0, B_CO2_1, B_CO2_2, B_CO2_3 = _series("B", "CO2")

B_N2_O2_0, B_N2_O2_1, B_N2_O2_2 = _series("B", "N2", "O2")
B_N2_AR_0, B_N2_AR_1, B_N2_AR_2 = _series("B", "N2", "Ar")
B_O2_AR_0, B_O2_AR_1, B_O2_AR_2 = _series("B", "O2", "Ar")
B_HE_N2_0, B_HE_N2_1, B_HE_N2_2 = _series("B", "He", "N2")
B_H2_N2_0, B_H2_N2_1, B_H2_N2_2 = _series("B", "H2", "N2")
B_HE_O2_0, B_HE_O2_1 = _series("B", "He", "O2")
B_HE_AR_0, B_HE_AR_1 = _series("B", "He", "Ar")
B_H2_O2_0, B_H2_O2_1 = _series("B", "H2", "O2")
B_HE_H2_0, B_HE_H2_1 = _series("B", "He", "H2")
(B_HE_NE_0,) = _series("B", "He", "Ne")
B_N2_CO2_0, B_N2_CO2_1 = _series("B", "N2", "CO2")
B_O2_CO2_0, B_O2_CO2_1 = _series("B", "O2", "CO2")
(B_HE_CO2_0,) = _series("B", "He", "CO2")

C_O2_0, C_O2_1, C_O2_2 = _series("C", "O2")
C_N2_0, C_N2_1, C_N2_2 = _series("C", "N2")
C_HE_0, C_HE_1 = _series("C", "He")
C_AR_0, C_AR_1, C_AR_2 = _series("C", "Ar")
C_H2_0, C_H2_1 = _series("C", "H2")
C_NE_0, C_NE_1 = _series("C", "Ne")
C_CO2_0, C_CO2_1, C_CO2_2, C_CO2_3 = _series("C", "CO2")

ROOT_D_O2 = _fourth_root("O2")
ROOT_D_N2 = _fourth_root("N2")
ROOT_D_HE = _fourth_root("He")
ROOT_D_AR = _fourth_root("Ar")
ROOT_D_H2 = _fourth_root("H2")
ROOT_D_NE = _fourth_root("Ne")

E_O2_0, E_O2_1 = _series("E", "O2")
E_N2_0, E_N2_1 = _series("E", "N2")
E_AR_0, E_AR_1 = _series("E", "Ar")


def _uncertainty(first: str, second: str) -> Constant:
    one = pair(first, second)
    return constant(
        f"U_{first.upper()}_{second.upper()}",
        one.uncertainty,
        "cm^3/mol",
        f"u_{{{TEX[first]},{TEX[second]}}}",
        f"uncertainty of the second virial coefficient of {first}-{second} ({one.quality})",
        "unlike_pairs",
        one.word,
    )


U_HE_O2 = _uncertainty("He", "O2")
U_HE_AR = _uncertainty("He", "Ar")
U_H2_O2 = _uncertainty("H2", "O2")
U_HE_H2 = _uncertainty("He", "H2")
U_HE_NE = _uncertainty("He", "Ne")
U_N2_CO2 = _uncertainty("N2", "CO2")
U_O2_CO2 = _uncertainty("O2", "CO2")
U_HE_CO2 = _uncertainty("He", "CO2")
# Pairs nobody lists share two numbers: without and with carbon dioxide.
U_AR_H2 = _uncertainty("Ar", "H2")
U_AR_CO2 = _uncertainty("Ar", "CO2")


def _tolerance(column: str, row: int, unit: str) -> Constant:
    return constant(
        f"TOLERANCE_{column.upper()}_{row}",
        data("virial")["tolerance"][column][row],
        unit,
        f"{'p' if unit == 'kPa' else 'u'}_{{tol,{row}}}",
        "bound on the density error of the virial series where every unlike pair is fitted",
        _SOURCE,
        "computed",
    )


TOLERANCE_PRESSURE_KPA_0 = _tolerance("pressure_kPa", 0, "kPa")
TOLERANCE_PRESSURE_KPA_1 = _tolerance("pressure_kPa", 1, "kPa")
TOLERANCE_RELATIVE_0 = _tolerance("relative", 0, "1")
TOLERANCE_RELATIVE_1 = _tolerance("relative", 1, "1")
TOLERANCE_RELATIVE_2 = _tolerance("relative", 2, "1")


# ---- Equations -----------------------------------------------------------------------------------


@formula(result="reciprocal_temperature", register=False, **VIRIAL)
def reciprocal_temperature(temperature: Value) -> Value:
    """Variable of the temperature polynomials: xi = T_r/T - 1, T_r = 25 degC."""
    return REFERENCE_TEMPERATURE / (temperature + ZERO_CELSIUS) - 1.0


@formula(
    result="second_virial",
    valid=WARM | TRACE,
    refuse=REFUSE,
    stands=True,
    judged=judged,
    **VIRIAL,
)
def second_virial(
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    temperature: Value,
) -> Value:
    """Second virial coefficient of a mixture.

    Notes
    -----
    B = sum_ij x_i x_j B_ij, written as sum_i x_i B_i + sum_(i<j) x_i x_j (2 B_ij - B_i - B_j), which is
    the same where the fractions sum to 1; a pair without a value of its own (the mean of the two
    pure gases) falls out. B_i and B_ij are polynomials in xi = T_r/T - 1.

    A mean of the pure values for all pairs would put helium-nitrogen mixtures off by 2-3 % in density
    at 31-70 bar. B_ij of He-O2, He-Ar and H2-O2 are estimates, those of He-H2, He-Ne and of CO2 from
    memory: see :func:`pairs` and :func:`uncertainty`.

    Examples
    --------
    >>> round(second_virial(0.2096, 0.7812, 0.0, 0.0092, 0.0, 0.0, 0.0, 25.0), 2)
    -7.42
    """
    xi = reciprocal_temperature(temperature)
    o2 = B_O2_0 + xi * (B_O2_1 + xi * B_O2_2)
    n2 = B_N2_0 + xi * (B_N2_1 + xi * B_N2_2)
    he = B_HE_0 + xi * (B_HE_1 + xi * B_HE_2)
    ar = B_AR_0 + xi * (B_AR_1 + xi * B_AR_2)
    h2 = B_H2_0 + xi * (B_H2_1 + xi * B_H2_2)
    ne = B_NE_0 + xi * (B_NE_1 + xi * B_NE_2)
    co2 = B_CO2_0 + xi * (B_CO2_1 + xi * (B_CO2_2 + xi * B_CO2_3))
    n2_o2 = B_N2_O2_0 + xi * (B_N2_O2_1 + xi * B_N2_O2_2)
    n2_ar = B_N2_AR_0 + xi * (B_N2_AR_1 + xi * B_N2_AR_2)
    o2_ar = B_O2_AR_0 + xi * (B_O2_AR_1 + xi * B_O2_AR_2)
    he_n2 = B_HE_N2_0 + xi * (B_HE_N2_1 + xi * B_HE_N2_2)
    h2_n2 = B_H2_N2_0 + xi * (B_H2_N2_1 + xi * B_H2_N2_2)
    return (
        oxygen * o2
        + nitrogen * n2
        + helium * he
        + argon * ar
        + hydrogen * h2
        + neon * ne
        + carbon_dioxide * co2
        + nitrogen * oxygen * (2.0 * n2_o2 - n2 - o2)
        + nitrogen * argon * (2.0 * n2_ar - n2 - ar)
        + oxygen * argon * (2.0 * o2_ar - o2 - ar)
        + helium * nitrogen * (2.0 * he_n2 - he - n2)
        + hydrogen * nitrogen * (2.0 * h2_n2 - h2 - n2)
        + helium * oxygen * (2.0 * (B_HE_O2_0 + xi * B_HE_O2_1) - he - o2)
        + helium * argon * (2.0 * (B_HE_AR_0 + xi * B_HE_AR_1) - he - ar)
        + hydrogen * oxygen * (2.0 * (B_H2_O2_0 + xi * B_H2_O2_1) - h2 - o2)
        + helium * hydrogen * (2.0 * (B_HE_H2_0 + xi * B_HE_H2_1) - he - h2)
        + helium * neon * (2.0 * B_HE_NE_0 - he - ne)
        + nitrogen * carbon_dioxide * (2.0 * (B_N2_CO2_0 + xi * B_N2_CO2_1) - n2 - co2)
        + oxygen * carbon_dioxide * (2.0 * (B_O2_CO2_0 + xi * B_O2_CO2_1) - o2 - co2)
        + helium * carbon_dioxide * (2.0 * B_HE_CO2_0 - he - co2)
    )


@formula(result="third_virial", valid=WARM | TRACE, refuse=REFUSE, stands=True, **VIRIAL)
def third_virial(
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    temperature: Value,
) -> Value:
    """Third virial coefficient of a mixture.

    Notes
    -----
    C = (sum_i x_i C_i^(1/3))^3; C_i are polynomials in xi = T_r/T - 1.

    Examples
    --------
    >>> round(third_virial(0.2096, 0.7812, 0.0, 0.0092, 0.0, 0.0, 0.0, 25.0), 0)
    1302.0
    """
    xi = reciprocal_temperature(temperature)
    root = (
        oxygen * (C_O2_0 + xi * (C_O2_1 + xi * C_O2_2)) ** ONE_THIRD
        + nitrogen * (C_N2_0 + xi * (C_N2_1 + xi * C_N2_2)) ** ONE_THIRD
        + helium * (C_HE_0 + xi * C_HE_1) ** ONE_THIRD
        + argon * (C_AR_0 + xi * (C_AR_1 + xi * C_AR_2)) ** ONE_THIRD
        + hydrogen * (C_H2_0 + xi * C_H2_1) ** ONE_THIRD
        + neon * (C_NE_0 + xi * C_NE_1) ** ONE_THIRD
        + carbon_dioxide * (C_CO2_0 + xi * (C_CO2_1 + xi * (C_CO2_2 + xi * C_CO2_3))) ** ONE_THIRD
    )
    return root * root * root


@formula(result="fourth_virial", stands=True, **VIRIAL)
def fourth_virial(
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
) -> Value:
    """Fourth coefficient of the series, effective, of a mixture.

    Notes
    -----
    D = (sum_i x_i D_i^(1/4))^4, without dependence on temperature. Fitted together with E; not a true
    virial coefficient. Carbon dioxide, a trace, has none, nor E.

    Examples
    --------
    >>> round(fourth_virial(0.2096, 0.7812, 0.0, 0.0092, 0.0, 0.0), 0)
    5459.0
    """
    root = (
        oxygen * ROOT_D_O2
        + nitrogen * ROOT_D_N2
        + helium * ROOT_D_HE
        + argon * ROOT_D_AR
        + hydrogen * ROOT_D_H2
        + neon * ROOT_D_NE
    )
    square = root * root
    return square * square


@formula(result="fifth_virial", valid=WARM | TRACE, refuse=REFUSE, stands=True, **VIRIAL)
def fifth_virial(
    oxygen: Value,
    nitrogen: Value,
    argon: Value,
    temperature: Value,
) -> Value:
    """Fifth coefficient of the series, effective, of a mixture.

    Notes
    -----
    E = sum_i x_i E_i, linear in xi = T_r/T - 1. Only oxygen, nitrogen and argon have one.

    Examples
    --------
    >>> round(fifth_virial(0.2096, 0.7812, 0.0092, 25.0), -3)
    2007000.0
    """
    xi = reciprocal_temperature(temperature)
    return (
        oxygen * (E_O2_0 + xi * E_O2_1) + nitrogen * (E_N2_0 + xi * E_N2_1) + argon * (E_AR_0 + xi * E_AR_1)
    )


@formula(result="virial_sum", register=False, **VIRIAL)
def virial_series(
    molar_density: Value, second_virial: Value, third_virial: Value, fourth_virial: Value, fifth_virial: Value
) -> Value:
    """Compressibility factor from molar density and the coefficients of the series.

    Notes
    -----
    Z = 1 + B c + C c^2 + D c^3 + E c^4 with c in mol/cm3.
    """
    c = molar_density / 1000.0
    return 1.0 + c * (second_virial + c * (third_virial + c * (fourth_virial + c * fifth_virial)))


@formula(result="virial_slope", register=False, stands=True, **VIRIAL)
def virial_stiffness(
    molar_density: Value, second_virial: Value, third_virial: Value, fourth_virial: Value, fifth_virial: Value
) -> Value:
    """Slope of pressure over molar density at one temperature, in units of R T: d(c Z)/dc."""
    c = molar_density / 1000.0
    return 1.0 + c * (
        2.0 * second_virial + c * (3.0 * third_virial + c * (4.0 * fourth_virial + c * 5.0 * fifth_virial))
    )


@formula(result="gas_pressure", valid=WARM | TRACE, refuse=REFUSE, register=False, judged=judged, **VIRIAL)
def virial_pressure(
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
    """Pressure of dry gas by the virial series, explicit in density.

    Notes
    -----
    p = c R T (1 + B c + C c^2 + D c^3 + E c^4), c = rho/M. Valid 260-325 K to 300 bar, refused below
    250 K; carbon dioxide as a trace only.

    Examples
    --------
    >>> round(virial_pressure(5.0, 0.21, 0.79, 0.0, 0.0, 0.0, 0.0, 0.0), 1)
    421.8
    """
    molar_density = density / mixture_molar_mass(
        oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide
    )
    return (
        molar_density
        * GAS_CONSTANT
        * (temperature + ZERO_CELSIUS)
        * virial_series(
            molar_density,
            second_virial(oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide, temperature),
            third_virial(oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide, temperature),
            fourth_virial(oxygen, nitrogen, helium, argon, hydrogen, neon),
            fifth_virial(oxygen, nitrogen, argon, temperature),
        )
    )


@by_blocks
def virial_root(ambient_pressure: Any, *rest: Any) -> Any:
    *fractions, temperature = rest
    oxygen, nitrogen, _, argon, *_ = fractions
    thermal = GAS_CONSTANT * (temperature + float(ZERO_CELSIUS))
    series = (
        second_virial.raw(*fractions, temperature),
        third_virial.raw(*fractions, temperature),
        fourth_virial.raw(*fractions[:-1]),
        fifth_virial.raw(oxygen, nitrogen, argon, temperature),
    )
    ideal = ambient_pressure / thermal
    found = newton(
        ideal,
        ideal,
        lambda c: c * virial_series.raw(c, *series),
        lambda c: virial_stiffness.raw(c, *series),
    )
    return found * mixture_molar_mass.raw(*fractions)


virial_density = inverse(
    virial_pressure,
    "density",
    name="density",
    module=__name__,
    kernel=virial_root,
    given="ambient_pressure",
    valid=PRESSURE_RANGE,
    doc="""Density of dry gas by the virial series.

Notes
-----
The root of :func:`virial_pressure` in density, by Newton's method from the ideal gas. Gases and pairs
that were fitted: within 0.05 % to 71 bar, 0.15 % to 200 bar, 0.30 % to 300 bar of the reference
equations of state. Helium-oxygen, helium-argon and hydrogen-oxygen rest on an estimated pair: see
:func:`uncertainty`.""",
    register=False,
)


@formula(
    result="relative_uncertainty",
    quantities={"ambient_pressure": "gas_pressure"},
    valid=WARM | TRACE | PRESSURE_RANGE,
    refuse=REFUSE,
    register=False,
    judged=judged,
    **VIRIAL,
)
def virial_uncertainty(
    ambient_pressure: Value,
    oxygen: Value,
    nitrogen: Value,
    helium: Value,
    argon: Value,
    hydrogen: Value,
    neon: Value,
    carbon_dioxide: Value,
    temperature: Value = 20.0,
) -> Value:
    """Bound on the relative error of the density by the virial series."""
    series = where(
        ambient_pressure <= TOLERANCE_PRESSURE_KPA_0,
        TOLERANCE_RELATIVE_0,
        where(ambient_pressure <= TOLERANCE_PRESSURE_KPA_1, TOLERANCE_RELATIVE_1, TOLERANCE_RELATIVE_2),
    )
    coefficient = 2.0 * (
        helium * oxygen * U_HE_O2
        + helium * argon * U_HE_AR
        + hydrogen * oxygen * U_H2_O2
        + helium * hydrogen * U_HE_H2
        + helium * neon * U_HE_NE
        + nitrogen * carbon_dioxide * U_N2_CO2
        + oxygen * carbon_dioxide * U_O2_CO2
        + helium * carbon_dioxide * U_HE_CO2
        + (argon * hydrogen + neon * (oxygen + nitrogen + argon + hydrogen)) * U_AR_H2
        + carbon_dioxide * (argon + hydrogen + neon) * U_AR_CO2
    )
    molar_density = virial_density(
        ambient_pressure, oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide, temperature
    ) / mixture_molar_mass(oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide)
    return series + coefficient * molar_density / 1000.0 / virial_stiffness(
        molar_density,
        second_virial(oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide, temperature),
        third_virial(oxygen, nitrogen, helium, argon, hydrogen, neon, carbon_dioxide, temperature),
        fourth_virial(oxygen, nitrogen, helium, argon, hydrogen, neon),
        fifth_virial(oxygen, nitrogen, argon, temperature),
    )
