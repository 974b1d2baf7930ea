"""Integrity of the data files: every number once, known gases, words of provenance."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

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
