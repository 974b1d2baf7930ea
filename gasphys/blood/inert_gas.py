"""Solubility of gases in water, blood and fat; the nitrogen of the whole body and its washout."""

from __future__ import annotations

import csv
import types
from importlib import resources
from typing import TYPE_CHECKING

from gasphys.constants import (
    ATMOSPHERE,
    CO2_MOLAR_VOLUME,
    FAT_DENSITY,
    GAS_CONSTANT,
    LEAN_WATER,
    MOLAR_MASS_H2O,
    N2_SOLUBILITY_BLOOD,
    N2_SOLUBILITY_FAT,
    N2_SOLUBILITY_LEAN,
    ZERO_CELSIUS,
    Constant,
)
from gasphys.equation import EquationFunction, Value, choice, formula, inverse
from gasphys.maths import exp, log, maximum
from gasphys.quantities import CAUTION, attributes
from gasphys.sources import cite

if TYPE_CHECKING:
    import xarray as xr

__all__ = [
    "body_nitrogen",
    "body_nitrogen_washout",
    "bunsen_coefficient",
    "bunsen_from_henry",
    "bunsen_from_ostwald",
    "nitrogen_delivery",
    "ostwald_from_bunsen",
    "solubility_from_bunsen",
    "tissue_bunsen_coefficients",
    "tissue_nitrogen_washout",
    "water_density",
]

# ---------------------------------------------------------------------------------------------
# Solubility in water


def _rows(name: str) -> list[dict[str, str]]:
    text = resources.files("gasphys.blood").joinpath(name).read_text(encoding="utf-8")
    return list(csv.DictReader(text.splitlines(), strict=True))


@formula(
    result="water_density",
    valid={"temperature": (0.0, 40.0)},
    refuse={"temperature": (-20.0, 100.0)},
    source="tanaka_2001",
    provenance="memory_high",
)
def water_density(temperature: Value = 37.0) -> Value:
    """Density of pure air-free water at 1 atm.

    Notes
    -----
    999.97495 (1 - (t - 3.983035)^2 (t + 301.797)/(522528.9 (t + 69.34881))) g/L, 0 to 40 degC.

    Examples
    --------
    >>> round(water_density(37.0), 2)
    993.33
    """
    part = (temperature - 3.983035) ** 2 * (temperature + 301.797)
    return 999.97495 * (1.0 - part / (522528.9 * (temperature + 69.34881)))


#: Names the bodies below use for the coefficients of a gas: each gas binds its own from the file.
A1 = A2 = A3 = B1 = B2 = B3 = Constant("", 0.0, "1", "", "", "", "read")


def _bunsen(temperature: Value, salinity: Value = 0.0) -> Value:
    """Bunsen coefficient in water or sea water, logarithm in 100/T and ln T."""
    t = (temperature + ZERO_CELSIUS) / 100.0
    return exp(A1 + A2 / t + A3 * log(t) + salinity * (B1 + t * (B2 + B3 * t)))


def _molar(temperature: Value, salinity: Value = 0.0) -> Value:
    """Bunsen coefficient from a molar solubility of the same form, with the volume of real CO2."""
    t = (temperature + ZERO_CELSIUS) / 100.0
    return CO2_MOLAR_VOLUME * exp(A1 + A2 / t + A3 * log(t) + salinity * (B1 + t * (B2 + B3 * t)))


def _mole_fraction(temperature: Value) -> Value:
    """Bunsen coefficient from the mole fraction of gas dissolved in pure water at 1 atm."""
    t = (temperature + ZERO_CELSIUS) / 100.0
    fraction = exp(A1 + A2 / t + A3 * log(t))
    water = water_density(temperature) / MOLAR_MASS_H2O
    return fraction / (1.0 - fraction) * water * GAS_CONSTANT * ZERO_CELSIUS / ATMOSPHERE


_FORMS = {"bunsen": _bunsen, "molar": _molar, "mole_fraction": _mole_fraction}


def _of_gas(row: dict[str, str]) -> EquationFunction:
    """Make the formula of one row: the body of its form with the coefficients of the row."""
    body = _FORMS[row["form"]]
    coefficients = {
        name.upper(): Constant(
            f"{row['gas']}_{row['model']}_{name}".upper(),
            float(row[name]),
            "1",
            f"{name[0].upper()}_{name[1]}",
            f"coefficient of {row['gas']} in water",
            row["source"],
            row["provenance"],
        )
        for name in ("a1", "a2", "a3", "b1", "b2", "b3")
        if row[name]
    }
    if row["form"] != "mole_fraction" and "B1" not in coefficients:
        raise ValueError(f"water_solubility.csv: {row['gas']} {row['model']} lacks coefficients")
    own = types.FunctionType(
        body.__code__, {**body.__globals__, **coefficients}, f"{row['gas']}_{row['model']}".lower()
    )
    own.__defaults__, own.__annotations__ = body.__defaults__, body.__annotations__
    own.__module__, own.__doc__ = body.__module__, f"Bunsen coefficient of {row['gas']} in water."
    made = formula(
        result="bunsen_coefficient",
        valid={"temperature": (0.0, 40.0)},
        refuse={"temperature": (-20.0, 100.0)},
        source=row["source"],
        provenance=row["provenance"],
        register=False,
    )
    return made(own)


_WATER: dict[tuple[str, str], EquationFunction] = {
    (row["gas"], row["model"]): _of_gas(row) for row in _rows("water_solubility.csv")
}


@choice(option=("gas", "model"), registry=_WATER)
def bunsen_coefficient(
    gas: str = "N2", temperature: Value = 37.0, salinity: Value = 0.0, *, model: str = "weiss"
) -> Value:
    """Bunsen coefficient of a gas in water or sea water.

    Notes
    -----
    ``"weiss"``: ln alpha = A1 + A2 (100/T) + A3 ln(T/100) + S (B1 + B2 (T/100) + B3 (T/100)^2), made for
    0 to 40 degC; CO2 as a molar solubility of the same form. ``"iupac"``: a mole fraction in pure water.
    Salinity 9 g/kg is isotonic. For N2 the two differ by 2 %, a real spread between measurements.

    Examples
    --------
    >>> round(bunsen_coefficient("N2", 37.0), 5)
    0.01239
    """


@formula(result="ostwald_coefficient", source="henry_1803", provenance="computed")
def ostwald_from_bunsen(bunsen_coefficient: Value, temperature: Value = 37.0) -> Value:
    """Ostwald coefficient of a Bunsen coefficient.

    Notes
    -----
    lambda = alpha T/T0, 1.1355 times at 37 degC. Sources mix the two up: carry the name with the number.

    Examples
    --------
    >>> round(ostwald_from_bunsen(0.01239), 5)
    0.01407
    """
    return bunsen_coefficient * (temperature + ZERO_CELSIUS) / ZERO_CELSIUS


bunsen_from_ostwald = inverse(
    ostwald_from_bunsen,
    "bunsen_coefficient",
    name="bunsen_from_ostwald",
    module=__name__,
    doc="""Bunsen coefficient of an Ostwald coefficient.

Notes
-----
The inverse of :func:`ostwald_from_bunsen`, found from it.

Examples
--------
>>> round(bunsen_from_ostwald(0.01407), 5)
0.01239
""",
)


@formula(
    result="bunsen_coefficient",
    source="sander_2023",
    provenance="computed",
)
def bunsen_from_henry(henry_solubility: Value, henry_temperature: Value, temperature: Value = 37.0) -> Value:
    """Bunsen coefficient of a Henry solubility given at 25 degC with its temperature dependence.

    Notes
    -----
    alpha = Hcp R T0 exp(Theta (1/T - 1/298.15)), Hcp in mol/m3/Pa.

    Examples
    --------
    >>> round(bunsen_from_henry(6.4e-6, 1300.0), 4)
    0.0123
    """
    shift = 1.0 / (temperature + ZERO_CELSIUS) - 1.0 / (25.0 + ZERO_CELSIUS)
    return henry_solubility * exp(henry_temperature * shift) * GAS_CONSTANT * ZERO_CELSIUS


@formula(result="solubility", source="henry_1803", provenance="computed")
def solubility_from_bunsen(bunsen_coefficient: Value) -> Value:
    """Solubility for Henry's law from a Bunsen coefficient.

    Notes
    -----
    mL/dL for each kPa: 100 alpha/P0.

    Examples
    --------
    >>> round(solubility_from_bunsen(0.0236), 5)
    0.02329
    """
    return 100.0 * bunsen_coefficient / ATMOSPHERE


def tissue_bunsen_coefficients() -> xr.Dataset:
    """Bunsen coefficients of gases in blood, plasma, fat and oil at 37 degC, as published.

    Returns
    -------
    Dataset
        On dimension ``entry``: ``gas``, ``medium``, ``bunsen_low`` and ``bunsen_high`` [1] (equal where
        one number is printed), ``source``, ``provenance``, ``note``.

    Notes
    -----
    Sources disagree, for H2 in oil by a third; ranges are kept.

    Examples
    --------
    >>> ds = tissue_bunsen_coefficients()
    >>> [float(v) for v in ds.bunsen_high[(ds.gas == "N2") & (ds.medium == "human blood")]]
    [0.0129]
    """
    import xarray as xr

    rows = _rows("tissue_solubility.csv")
    numbers = {
        f"bunsen_{end}": ("entry", [float(r[end]) for r in rows], attributes("bunsen_coefficient"))
        for end in ("low", "high")
    }
    texts = {name: ("entry", [r[name] for r in rows]) for name in ("gas", "medium", "provenance", "note")}
    return xr.Dataset(
        {**texts, **numbers, "source": ("entry", [cite(r["source"]) for r in rows])},
        attrs={
            "title": "solubility of gases in blood, plasma, fat and oil at 37 degC",
            "references": "; ".join(dict.fromkeys(r["source"] for r in rows)),
            "comment": CAUTION,
        },
    )


# ---------------------------------------------------------------------------------------------
# Nitrogen of the whole body


@formula(
    result="body_nitrogen", source=("farhi_1963", "body_composition_texts"), provenance="computed",
    register=False,
)  # fmt: skip
def lean_nitrogen(alveolar_pn2: Value, body_mass: Value, fat_fraction: Value) -> Value:
    """N2 dissolved in the lean part of the body in equilibrium with alveolar gas."""
    water = LEAN_WATER * body_mass * (1.0 - fat_fraction)
    return N2_SOLUBILITY_LEAN * water * alveolar_pn2 / ATMOSPHERE


@formula(
    result="body_nitrogen", source=("solubility_texts", "body_composition_texts"), provenance="computed",
    register=False,
)  # fmt: skip
def fat_nitrogen(alveolar_pn2: Value, body_mass: Value, fat_fraction: Value) -> Value:
    """N2 dissolved in body fat in equilibrium with alveolar gas."""
    return N2_SOLUBILITY_FAT * body_mass * fat_fraction / FAT_DENSITY * alveolar_pn2 / ATMOSPHERE


@formula(
    result="body_nitrogen",
    source=("farhi_1963", "solubility_texts", "body_composition_texts"),
    provenance="computed",
)
def body_nitrogen(alveolar_pn2: Value, body_mass: Value = 70.0, fat_fraction: Value = 0.15) -> Value:
    """N2 dissolved in the whole body in equilibrium with alveolar gas.

    Notes
    -----
    PN2 times solubility and volume of lean water (73 % of lean mass) and of fat (0.9 kg/L): about 1 L on
    air at the surface, half of it in fat. Alveolar PN2 is 569 mmHg there.

    Examples
    --------
    >>> round(body_nitrogen("569 mmHg"), 2)
    0.94
    """
    lean = lean_nitrogen(alveolar_pn2, body_mass, fat_fraction)
    return lean + fat_nitrogen(alveolar_pn2, body_mass, fat_fraction)


@formula(result="nitrogen_delivery_stpd", source="farhi_1963", provenance="computed")
def nitrogen_delivery(pn2: Value, cardiac_output: Value) -> Value:
    """N2 that blood can bring to the lung per minute: the ceiling of a washout on oxygen.

    Notes
    -----
    Cardiac output times solubility in blood times the PN2 of venous blood.

    Examples
    --------
    In mL/min, on oxygen after air at the surface:

    >>> round(1000.0 * nitrogen_delivery("0.749 atm", 5.5), 1)
    52.3
    """
    return N2_SOLUBILITY_BLOOD * cardiac_output * pn2 / ATMOSPHERE


@formula(
    result="nitrogen_washout",
    refuse={"tissue_bunsen": (1e-4, 5.0)},
    source=("farhi_1963", "fick_1870"),
    provenance="computed",
)
def tissue_nitrogen_washout(
    duration: Value,
    start_pn2: Value,
    tissue_volume: Value,
    tissue_blood_flow: Value,
    tissue_bunsen: Value = N2_SOLUBILITY_LEAN,
    end_pn2: Value = 0.0,
) -> Value:
    """N2 that one perfusion-limited tissue gives off in a time.

    Notes
    -----
    V alpha (P1 - P2) (1 - exp(-k t)), k = Q alpha_blood/(V alpha_tissue). Negative: taken up.

    Examples
    --------
    In mL, 33 L of lean tissue with 1 L/min in 10 min of oxygen:

    >>> round(1000.0 * tissue_nitrogen_washout(10.0, "0.749 atm", 33.0, 1.0), 1)
    81.9
    """
    store = tissue_volume * tissue_bunsen
    rate = tissue_blood_flow * N2_SOLUBILITY_BLOOD / store
    return store * (start_pn2 - end_pn2) / ATMOSPHERE * (1.0 - exp(-rate * duration))


@formula(
    result="nitrogen_washout",
    source=("farhi_1963", "solubility_texts", "body_composition_texts", "fick_1870"),
    provenance="computed",
)
def body_nitrogen_washout(
    duration: Value,
    start_pn2: Value,
    fat_flow_fraction: Value,
    body_mass: Value = 70.0,
    fat_fraction: Value = 0.15,
    cardiac_output: Value = 5.5,
    end_pn2: Value = 0.0,
) -> Value:
    """N2 that the whole body gives off in a time, lean tissue and fat side by side.

    Notes
    -----
    Each part is perfusion limited, with the store of :func:`body_nitrogen` and its share of cardiac
    output: an upper bound, because real lean tissue is perfused unevenly. The share of fat is the
    caller's; about 0.5 mL/min comes from elsewhere.

    Examples
    --------
    >>> round(body_nitrogen_washout(600.0, "569 mmHg", 0.05), 2)
    0.91
    """
    fall = start_pn2 - end_pn2
    lean = lean_nitrogen(ATMOSPHERE, body_mass, fat_fraction)
    fat = fat_nitrogen(ATMOSPHERE, body_mass, fat_fraction)
    flow = N2_SOLUBILITY_BLOOD * cardiac_output * duration
    out_lean = lean * (1.0 - exp(-flow * (1.0 - fat_flow_fraction) / lean))
    out_fat = fat * (1.0 - exp(-flow * fat_flow_fraction / maximum(fat, 1e-9)))
    return fall / ATMOSPHERE * (out_lean + out_fat)
