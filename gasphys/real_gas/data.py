"""Data files of the real-gas equations, as named constants and as pairs of gases.

The files say where each number comes from. As constants the numbers can be traced; as pairs they
let a result say what it rests on.
"""

from __future__ import annotations

import functools
import itertools
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from importlib import resources
from typing import Any

import numpy as np

from gasphys.constants import (
    CONSTANTS,
    MOLAR_MASS_AR,
    MOLAR_MASS_CO2,
    MOLAR_MASS_H2,
    MOLAR_MASS_HE,
    MOLAR_MASS_N2,
    MOLAR_MASS_NE,
    MOLAR_MASS_O2,
    Constant,
)
from gasphys.gas import FORMULAS, gas_fractions
from gasphys.policy import weakest

__all__ = ["MOLAR_MASSES", "TEX", "Pair", "constant", "data", "judged", "pair", "pairs", "present_gases"]

MOLAR_MASSES = {
    "O2": MOLAR_MASS_O2,
    "N2": MOLAR_MASS_N2,
    "He": MOLAR_MASS_HE,
    "Ar": MOLAR_MASS_AR,
    "H2": MOLAR_MASS_H2,
    "Ne": MOLAR_MASS_NE,
    "CO2": MOLAR_MASS_CO2,
}

#: LaTeX of a formula.
TEX = {"O2": "O_2", "N2": "N_2", "He": "He", "Ar": "Ar", "H2": "H_2", "Ne": "Ne", "CO2": "CO_2"}


@functools.cache
def data(name: str) -> dict[str, Any]:
    """Return one data file of this package.

    Parameters
    ----------
    name : str
        ``"virial"``, ``"transport"`` or ``"peng_robinson"``.

    Returns
    -------
    dict
        The file as it stands.

    Examples
    --------
    >>> data("virial")["pure"]["He"]["B"]
    [11.844, 1.244, -1.36]
    """
    text = resources.files("gasphys.real_gas").joinpath(f"{name}.toml").read_text(encoding="utf-8")
    return tomllib.loads(text)


@dataclass(frozen=True)
class Pair:
    """Second virial coefficient of an unlike pair: how it is known.

    Parameters
    ----------
    gases : tuple of str
        The two gases.
    quality : str
        "good" (fitted to data), "estimate", "from memory, unverified" or "mean of the pure gases".
    uncertainty : float
        Of the coefficient [cm3/mol].
    word : str
        Provenance, a word of :data:`gasphys.policy.PROVENANCE`.
    provenance : str
        How the number came about.
    """

    gases: tuple[str, str]
    quality: str
    uncertainty: float
    word: str
    provenance: str

    def __str__(self) -> str:
        return f"{'-'.join(self.gases)}: {self.quality}, +-{self.uncertainty:.3g} cm3/mol"


def _departure(row: dict[str, Any]) -> float:
    """How far a listed pair is at 298 K from the mean of the two pure gases [cm3/mol]."""
    first, second = (data("virial")["pure"][g]["B"][0] for g in row["gases"])
    return float(abs(row["B"][0] - 0.5 * (first + second)))


@functools.cache
def pair(first: str, second: str) -> Pair:
    """Return what is known of an unlike pair.

    Parameters
    ----------
    first, second : str
        Formulas of two gases.

    Returns
    -------
    Pair
        A pair that is not listed has the arithmetic mean of the pure gases; its uncertainty is
        the largest error of that rule among the listed pairs (with or without CO2).

    Examples
    --------
    >>> print(pair("O2", "He"))
    He-O2: estimate, +-1.5 cm3/mol
    """
    cross = data("virial")["cross"]
    for row in cross:
        if {first, second} == set(row["gases"]):
            return Pair(
                (row["gases"][0], row["gases"][1]),
                row["quality"],
                float(row["uncertainty"]),
                row["word"],
                row["provenance"],
            )
    with_co2 = "CO2" in (first, second)
    worst = max(_departure(row) for row in cross if ("CO2" in row["gases"]) is with_co2)
    text = "no value known: arithmetic mean of the two pure gases; uncertainty from the listed pairs"
    return Pair((first, second), "mean of the pure gases", worst, "memory_low", text)


def constant(
    name: str, value: float, unit: str, symbol: str, meaning: str, source: str, provenance: str
) -> Constant:
    """Make a constant and put it into the list of all, so that pages that name it can be found.

    Parameters
    ----------
    name, unit, symbol, meaning, source, provenance : str
        As for :class:`gasphys.constants.Constant`.
    value : float
        The number.

    Returns
    -------
    Constant
        The constant.

    Examples
    --------
    >>> constant("EXAMPLE", 1.0, "1", "x", "an example", "common_practice", "read").unit
    '1'
    >>> _ = CONSTANTS.pop("EXAMPLE")
    """
    one = Constant(name, float(value), unit, symbol, meaning, source, provenance)
    CONSTANTS[name] = one
    return one


#: An unlike pair that cannot move the density by 0.01 % at 300 bar is not worth a word [cm3/mol].
_NEGLIGIBLE = 0.01


def _largest(value: Any) -> float:
    """Return the largest fraction that may occur; lazy arrays are not computed."""
    if isinstance(value, str) or getattr(value, "chunks", None) is not None:
        return 1.0
    array = np.asarray(value, dtype=float)
    return float(np.nanmax(array)) if array.size and not np.isnan(array).all() else 0.0


def present_gases(fractions: Mapping[str, Any]) -> dict[str, float]:
    """Return the largest fraction of each gas that occurs, by formula.

    Parameters
    ----------
    fractions : mapping
        Field of :class:`~gasphys.Gas` to a fraction of any kind; other keys do not matter.

    Returns
    -------
    dict
        Formula to fraction [1], absent gases left out.

    Examples
    --------
    >>> present_gases(gas_fractions("air"))
    {'O2': 0.21, 'N2': 0.79}
    """
    found = {formula: _largest(fractions[field]) for formula, field in FORMULAS.items()}
    return {formula: value for formula, value in found.items() if value > 0.0}


def _pairs(present: Mapping[str, float]) -> list[Pair]:
    kept = []
    for one in (pair(a, b) for a, b in itertools.combinations(present, 2)):
        first, second = (present[g] for g in one.gases)
        if one.quality == "good" or 2.0 * first * second * one.uncertainty > _NEGLIGIBLE:
            kept.append(one)
    return kept


def pairs(gas: Any) -> list[Pair]:
    """Return the unlike pairs of a gas and how well each is known.

    Parameters
    ----------
    gas : Gas, str or DataArray
        Breathing gas: a :class:`~gasphys.Gas`, its name, or fractions along ``gas``.

    Returns
    -------
    list of Pair
        Gases, quality, uncertainty of the second virial coefficient [cm3/mol], provenance. Pairs
        that are not "good" and too rare to move the density by 0.01 % at 300 bar are left out.

    Examples
    --------
    >>> [str(p) for p in pairs("heliox 21/79")]
    ['He-O2: estimate, +-1.5 cm3/mol']
    """
    return _pairs(present_gases(gas_fractions(gas)))


def judged(inputs: Mapping[str, Any]) -> dict[str, str]:
    """Return the attributes of a virial result: the weakest number used, the pairs nobody has fitted.

    Parameters
    ----------
    inputs : mapping
        Mole fractions by field of :class:`~gasphys.Gas`; other keys do not matter.

    Returns
    -------
    dict of str
        ``provenance``, and ``estimated_pairs`` where there are any.

    Examples
    --------
    >>> judged(gas_fractions("heliox 21/79"))["estimated_pairs"]
    'He-O2: estimate, +-1.5 cm3/mol'
    """
    present = present_gases(inputs)
    found = _pairs(present)
    words = [*(p.word for p in found), *(MOLAR_MASSES[g].provenance for g in present), "computed"]
    attributes = {"provenance": weakest(words)}
    doubtful = [str(p) for p in found if p.quality != "good"]
    if doubtful:
        attributes["estimated_pairs"] = "; ".join(doubtful)
    return attributes
