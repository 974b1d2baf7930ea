"""Integrity of the data files: every number once, known gases, words of provenance."""

from __future__ import annotations

import itertools
import re

import chemicals
import CoolProp.CoolProp as coolprop
import numpy as np
import pytest

import gasphys as gp
from gasphys import real_gas
from gasphys.constants import CONSTANTS
from gasphys.gas import FORMULAS
from gasphys.policy import PROVENANCE
from gasphys.real_gas.data import MOLAR_MASSES, data, pair
from gasphys.sources import sources

FILES = ("virial", "transport", "peng_robinson")


def rows(name: str) -> list[dict[str, object]]:
    file = data(name)
    found = [*file.get("pure", file.get("gas", {})).values(), *file.get("cross", [])]
    return [r for r in found if isinstance(r, dict)]


@pytest.mark.parametrize("name", FILES)
def test_every_row_says_how_it_is_known(name: str) -> None:
    assert rows(name)
    for row in rows(name):
        assert row["word"] in PROVENANCE
        if "quality" in row:
            assert row["provenance"]
            assert (row["quality"] == "good") is (row["word"] == "computed")


def test_seven_gases_and_thirteen_pairs() -> None:
    file = data("virial")
    assert (
        set(file["pure"])
        == set(data("transport")["gas"])
        == set(data("peng_robinson")["pure"])
        == set(FORMULAS)
    )
    listed = [frozenset(r["gases"]) for r in file["cross"]]
    assert len(listed) == len(set(listed)) == 13
    assert all(len(p) == 2 and p <= set(FORMULAS) for p in listed)
    assert sum(r["quality"] == "good" for r in file["cross"]) == 5
    assert len(data("peng_robinson")["cross"]) == 4
    assert all(pair(a, b) is pair(a, b) for a, b in itertools.combinations(FORMULAS, 2))


def test_sums_of_the_coefficients() -> None:
    """A changed digit anywhere in the files fails here: sums of the numbers as printed in the source."""
    pure, cross = data("virial")["pure"].values(), data("virial")["cross"]
    checksum = {
        "B": sum(v for r in pure for v in r["B"]),
        "cross": sum(v for r in cross for v in r["B"]),
        "C": sum(v for r in pure for v in r["C"]),
        "D": sum(r.get("D", 0.0) for r in pure),
        "E": sum(v for r in pure for v in r.get("E", [])),
        "uncertainty": sum(r["uncertainty"] for r in cross),
    }
    assert checksum == pytest.approx(
        {
            "B": -876.002,
            "cross": -475.46,
            "C": -2984.4,
            "D": 36816.0,
            "E": -2048900.0,
            "uncertainty": 23.0,
        },
        rel=1e-9,
    )
    gases = data("transport")["gas"].values()
    printed = {
        "mu0": 135.99,
        "S": 835.5,
        "k0": 475.769,
        "k1": 1.1253,
        "cp0_298": 186.842,
        "cp0_310": 187.532,
        "a": 1.56,
    }
    assert {k: sum(r.get(k, 0.0) for r in gases) for k in printed} == pytest.approx(printed, rel=1e-9)


def test_coefficients_stay_positive_where_roots_are_taken() -> None:
    xi = 298.15 / np.linspace(250.0, 673.15, 200) - 1.0
    for row in data("virial")["pure"].values():
        assert np.all(np.polynomial.polynomial.polyval(xi, row["C"]) > 0.0)
        assert row.get("D", 0.0) >= 0.0


def test_molar_masses_and_gas_constant_stand_elsewhere() -> None:
    for name in FILES:
        for row in rows(name):
            assert "M" not in row
    assert "R" not in str(sorted(data("virial").get("constants", {})))
    assert set(MOLAR_MASSES) == set(FORMULAS)


def test_constants_have_a_source() -> None:
    mine = [c for c in CONSTANTS.values() if c.name.startswith(("B_", "C_", "E_", "MU_", "PR_", "U_"))]
    assert len(mine) > 100
    for constant in mine:
        assert constant.source in sources()
        assert constant.provenance in PROVENANCE


@pytest.mark.parametrize("gas", FORMULAS)
def test_polynomials_against_the_reference_equations(gas: str) -> None:
    """B and C against the exact virial coefficients, no further off than the file says."""
    fluid = {"N2": "Nitrogen", "O2": "Oxygen", "Ar": "Argon", "He": "Helium", "H2": "Hydrogen"}
    fluid |= {"Ne": "Neon", "CO2": "CarbonDioxide"}
    row = data("virial")["pure"][gas]
    stated = [float(v) for v in re.findall(r"[BC] ([\d.]+) cm", row["largest_errors"])]
    kelvins = np.linspace(250.0, 330.0, 33)
    xi = 298.15 / kelvins - 1.0
    for letter, name, scale, error in (("B", "BVIRIAL", 1e6, stated[0]), ("C", "CVIRIAL", 1e12, stated[1])):
        # Virial coefficients do not depend on the density they are asked at.
        truth = [scale * coolprop.PropsSI(name, "T", t, "D", 1e-3, fluid[gas]) for t in kelvins]
        off = np.polynomial.polynomial.polyval(xi, row[letter]) - np.array(truth)
        assert np.max(np.abs(off)) <= 1.05 * error + 1e-4


def test_critical_constants_against_the_library() -> None:
    numbers = {"N2": "7727-37-9", "O2": "7782-44-7", "He": "7440-59-7", "Ar": "7440-37-1", "H2": "1333-74-0"}
    numbers |= {"Ne": "7440-01-9", "CO2": "124-38-9"}
    for gas, row in data("peng_robinson")["pure"].items():
        assert row["critical_temperature_K"] == chemicals.Tc(numbers[gas], method="HEOS")
        assert row["critical_pressure_kPa"] == pytest.approx(chemicals.Pc(numbers[gas], method="HEOS") / 1e3)
        # The library's acentric factors come from several tables.
        assert row["acentric_factor"] == pytest.approx(chemicals.omega(numbers[gas]), rel=1e-12)
    universal = data("peng_robinson")["universal"]
    # Peng & Robinson 1976: a and b follow from the critical point (from memory: 0.45724, 0.07780).
    x = (1.0 + (4.0 - 8.0**0.5) ** (1.0 / 3.0) + (4.0 + 8.0**0.5) ** (1.0 / 3.0)) ** -1.0
    assert universal["b"] == pytest.approx(x / (x + 3.0), abs=6e-6)
    assert universal["a"] == pytest.approx(8.0 * (5.0 * x + 1.0) / (49.0 - 37.0 * x), abs=6e-6)
    assert universal["kappa"] == [0.37464, 1.54226, -0.26992]
    assert [r["k"] for r in data("peng_robinson")["cross"]] == [-0.0159, -0.0004, 0.0089, 0.0711]


def test_handbook_densities() -> None:
    """Densities at 0 degC and 1 atm that the limits scale: the virial series agrees to the last digit."""
    row = data("virial")["density_at_0_degC_1_atm"]
    for gas in FORMULAS:
        with gp.validity("ignore"):
            pure = real_gas.density(101.325, _pure(gas), 0.0)
        assert row[gas] == pytest.approx(pure, rel=6e-4)
        assert real_gas.reference_density(101.325, _pure(gas)) == row[gas]


def _pure(gas: str) -> gp.Gas:
    return gp.Gas(oxygen=0.0) if gas == "N2" else gp.Gas(**{"oxygen": 0.0, FORMULAS[gas]: 1.0})


def test_diffusion_volumes_as_remembered() -> None:
    """Fuller, Ensley & Giddings 1969, from memory."""
    row = data("transport")["fuller"]
    remembered = {
        "He": 2.67,
        "Ne": 5.98,
        "Ar": 16.2,
        "H2": 6.12,
        "N2": 18.5,
        "O2": 16.3,
        "CO2": 26.9,
        "H2O": 13.1,
    }
    assert {k: row[k] for k in remembered} == remembered
    assert (row["factor"], row["exponent"]) == (0.00143, 1.75)


def test_ranges() -> None:
    assert data("virial")["validity"] == {
        "temperature_K": [260.0, 325.0],
        "refuse_below_K": 250.0,
        "pressure_kPa": [0.0, 30000.0],
        "carbon_dioxide": [0.0, 0.05],
    }
    assert data("virial")["tolerance"] == {
        "pressure_kPa": [7100.0, 20000.0],
        "relative": [0.0005, 0.0015, 0.0030],
    }
    assert data("transport")["validity"]["temperature_K"] == [260.0, 330.0]
    temperature = next(a for a in real_gas.viscosity.arguments if a.name == "temperature")
    assert (temperature.low, temperature.high) == pytest.approx((-13.15, 56.85))
