"""The risk of any nervous system sign on oxygen, and the seizure rates that must stand beside it.

PO2 is that of the dry breathing gas. No number here is a probability of a seizure.
"""

from __future__ import annotations

import types
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.constants import (
    ATMOSPHERE,
    CNS_ACTIVE_EXPONENT,
    CNS_ACTIVE_MEDIAN,
    CNS_ACTIVE_SPREAD,
    CNS_DRY_EXPONENT,
    CNS_DRY_MEDIAN,
    CNS_DRY_SPREAD,
    CNS_IMMERSED_EXPONENT,
    CNS_IMMERSED_MEDIAN,
    CNS_IMMERSED_SPREAD,
    CNS_MODERATE_MEDIAN,
    CNS_MODERATE_SPREAD,
    Constant,
)
from gasphys.doses.published_tables import published
from gasphys.equation import EquationFunction, Value, choice, formula
from gasphys.maths import exp, log, mean_power, normal_cdf

__all__ = [
    "POPULATIONS",
    "clinic_seizure_rates",
    "cns_exposure",
    "cns_onset_time",
    "cns_probit",
    "cns_recovery",
    "cns_symptom_risk",
    "cns_symptom_risk_of_exposure",
    "near_clinics",
]

Array = NDArray[np.float64]

# -- The risk of any sign --------------------------------------------------------------------------

#: PO2 of oxygen dives and chamber oxygen: the data lie at and above about 1 atm.
CNS_FIT = (100.0, 304.0)
_FIT = (*CNS_FIT, "the data are oxygen dives and chamber oxygen, at and above about 1 atm")


@dataclass(frozen=True)
class Population:
    """One fit of the power equation of nervous system toxicity.

    Parameters
    ----------
    who : str
        Whom it was fitted to.
    exponent, median, spread : Constant
        Half the power of PO2; logarithm of the median exposure; standard deviation.
    source : str
        Key of ``sources.toml``.
    remark : str
        What is assumed.
    """

    who: str
    exponent: Constant
    median: Constant
    spread: Constant
    source: str
    remark: str = ""


_ATM_ASSUMED = "the abstract names no PO2 unit, atm assumed"

#: Every fit by name.
POPULATIONS: dict[str, Population] = {
    "active": Population(
        "divers immersed and working, about 4.4 times rest; 661 chamber and 2039 closed-circuit dives",
        CNS_ACTIVE_EXPONENT,
        CNS_ACTIVE_MEDIAN,
        CNS_ACTIVE_SPREAD,
        "arieli_2002",
    ),
    "active_0_9_l_min": Population(
        "divers immersed, O2 uptake 0.9 L/min",
        CNS_ACTIVE_EXPONENT,
        CNS_MODERATE_MEDIAN,
        CNS_MODERATE_SPREAD,
        "arieli_2003",
    ),
    "immersed_rest": Population(
        "people at rest in water of 33 degC, 219 exposures",
        CNS_IMMERSED_EXPONENT,
        CNS_IMMERSED_MEDIAN,
        CNS_IMMERSED_SPREAD,
        "aviner_2020",
        _ATM_ASSUMED,
    ),
    "dry_rest": Population(
        "people at rest in a dry chamber, 507 exposures",
        CNS_DRY_EXPONENT,
        CNS_DRY_MEDIAN,
        CNS_DRY_SPREAD,
        "aviner_2020",
        _ATM_ASSUMED,
    ),
}

# The bodies below are templates: EXPONENT, MEDIAN, SPREAD and the formulas they call are bound
# for each population. The names only stand here so that the file reads as code.
EXPONENT, MEDIAN, SPREAD = CNS_ACTIVE_EXPONENT, CNS_ACTIVE_MEDIAN, CNS_ACTIVE_SPREAD
PROBIT: Any = None
HELD: Any = None


def _exposure(start_po2: Value, end_po2: Value, duration: Value) -> Value:
    """Exposure X on a linear ramp of PO2: the integral of P^(c/2) dt, P in atm and t in min."""
    return duration * mean_power(start_po2 / ATMOSPHERE, end_po2 / ATMOSPHERE, EXPONENT)


def _held(po2: Value, duration: Value) -> Value:
    """Exposure X at a constant PO2."""
    return duration * (po2 / ATMOSPHERE) ** EXPONENT


def _probit(cns_exposure: Value) -> Value:
    """Normal deviate of any sign: Z = (ln X - m)/s."""
    return (log(cns_exposure) - MEDIAN) / SPREAD


def _risk_of_exposure(cns_exposure: Value) -> Value:
    """Risk of any sign of an exposure X: the normal distribution of Z."""
    return normal_cdf(PROBIT(cns_exposure))


def _risk(po2: Value, duration: Value) -> Value:
    """Risk of any sign after a constant PO2."""
    return normal_cdf(PROBIT(HELD(po2, duration)))


def _bound(body: Any, called: str, **names: Any) -> Any:
    """Return a template under a name of its own with its globals bound."""
    one = types.FunctionType(body.__code__, {**body.__globals__, **names}, called)
    one.__doc__, one.__module__ = body.__doc__, body.__module__
    return one


def _family() -> dict[str, dict[str, EquationFunction]]:
    found: dict[str, dict[str, EquationFunction]] = {"exposure": {}, "probit": {}, "of": {}, "risk": {}}
    for name, one in POPULATIONS.items():
        names: dict[str, Any] = {"EXPONENT": one.exponent, "MEDIAN": one.median, "SPREAD": one.spread}
        common: dict[str, Any] = {
            "source": one.source,
            "provenance": "read",
            "register": False,
            "labels": {
                "endpoint": "any nervous system sign, not a seizure probability",
                "population": one.who,
                **({"assumption": one.remark} if one.remark else {}),
            },
        }
        found["exposure"][name] = formula(
            result="cns_exposure", valid={"start_po2": _FIT, "end_po2": _FIT}, **common
        )(_bound(_exposure, f"cns_exposure_{name}", **names))
        found["probit"][name] = formula(result="cns_probit", **common)(
            _bound(_probit, f"cns_probit_{name}", **names)
        )
        names["PROBIT"] = found["probit"][name]
        names["HELD"] = formula(
            result="cns_exposure", quantities={"po2": "breathing_gas_po2"}, valid={"po2": _FIT}, **common
        )(_bound(_held, f"cns_exposure_held_{name}", **names))
        found["of"][name] = formula(result="cns_symptom_risk", **common)(
            _bound(_risk_of_exposure, f"cns_symptom_risk_of_exposure_{name}", **names)
        )
        found["risk"][name] = formula(
            result="cns_symptom_risk",
            quantities={"po2": "breathing_gas_po2"},
            valid={"po2": _FIT},
            **common,
        )(_bound(_risk, f"cns_symptom_risk_{name}", **names))
    return found


_FAMILY = _family()


@choice(option="population", registry=_FAMILY["risk"])
def cns_symptom_risk(po2: Value, duration: Value, population: str = "active") -> Value:
    """Risk of any nervous system sign after a constant PO2 without air breaks.

    Notes
    -----
    The normal distribution of Z = (ln X - m)/s with the exposure X = t P^(c/2), t in min and P in
    atm. The endpoint is any sign, mild ones included, never a seizure: seizure rates reported by
    clinics at 2.4 to 2.5 atm are 25 to 1500 times lower than the dry-rest figure (see
    :func:`clinic_seizure_rates`). The populations' curves cross (at 2.0 atm and 90 min: active 8.4 %,
    immersed rest 19.3 %, dry rest 0.016 %), so none may be extrapolated, and they belong side by
    side. CO2 lowers the threshold and is not in it.

    Examples
    --------
    >>> round(100.0 * cns_symptom_risk("1.6 atm", 45.0), 2)
    1.8
    >>> round(100.0 * cns_symptom_risk("2.4 atm", 90.0, population="dry_rest"), 2)
    3.79
    """


@choice(option="population", registry=_FAMILY["exposure"])
def cns_exposure(start_po2: Value, end_po2: Value, duration: Value, population: str = "active") -> Value:
    """Exposure X of the power equation of nervous system toxicity, on a linear ramp of PO2.

    Notes
    -----
    The exact integral of P^(c/2) dt, P in atm and t in min: the square root of K. It adds over an
    exposure; K does not.

    Examples
    --------
    >>> round(cns_exposure("1.6 atm", "1.6 atm", 45.0), 1)
    220.4
    """


@choice(option="population", registry=_FAMILY["probit"])
def cns_probit(cns_exposure: Value, population: str = "active") -> Value:
    """Normal deviate Z of any nervous system sign at an exposure X.

    Notes
    -----
    Z = (ln X - m)/s; zero at the median exposure.

    Examples
    --------
    >>> round(cns_probit(45.0 * 1.6**3.38), 3)
    -2.096
    """


@choice(option="population", registry=_FAMILY["of"])
def cns_symptom_risk_of_exposure(cns_exposure: Value, population: str = "active") -> Value:
    """Risk of any nervous system sign at an exposure X summed over the pieces.

    Notes
    -----
    See :func:`cns_symptom_risk`: any sign, not a seizure.

    Examples
    --------
    >>> round(100.0 * cns_symptom_risk_of_exposure(220.4), 2)
    1.8
    """


@formula(
    result="cns_index_share",
    source="arieli_2002",
    provenance="read",
)
def cns_recovery(surface_interval: Value) -> Value:
    """Share of the nervous system oxygen index K left after an interval.

    Notes
    -----
    exp(-0.079 t), t in min (half in 8.8 min): scaled from rats by body mass, not measured in people.
    It applies to K; the exposure X, its square root, decays half as fast. Never applied unless asked
    for.

    Examples
    --------
    >>> round(cns_recovery(30.0), 4)
    0.0935
    """
    return exp(-0.079 * surface_interval)


@formula(
    result="cns_onset_time",
    quantities={"po2": "breathing_gas_po2"},
    valid={
        "po2": (
            100.0,
            1.466 * float(ATMOSPHERE),
            "above it more work would delay signs, against all experience",
        ),
        "metabolic_rate": (4.0, 4.8, "anchored at 4.4 only"),
    },
    refuse={"metabolic_rate": (2.0, 5.3), "po2": (1.0, 20000.0)},
    source="arieli_2003",
    provenance="read",
)
def cns_onset_time(po2: Value, metabolic_rate: Value = 4.4) -> Value:
    """Mean time to any nervous system sign by metabolic rate, form of 2003.

    Notes
    -----
    t = (exp(-2.85 M + 31.8)/P^(-7.45 M + 39.6))^(1/2) in min, P in atm. The slopes in M are the
    rat's and the form is anchored at M = 4.4: no extrapolation in M (refused beyond 2 to 5.3 times
    rest). Above 1.466 atm it says that harder work delays signs. Unverified; for study only.

    Examples
    --------
    >>> round(cns_onset_time("1.0 atm"), 0)
    15214.0
    """
    threshold = -2.85 * metabolic_rate + 31.8
    power = -7.45 * metabolic_rate + 39.6
    return exp(threshold / 2.0) / (po2 / ATMOSPHERE) ** (power / 2.0)


def _clinic_bands() -> list[tuple[float, float]]:
    rows = published("seizure_incidence")
    return sorted({(r["pressure_low_atm"], r["pressure_high_atm"]) for r in rows if r["pressure_low_atm"]})


def _clinic_distance(po2: Any) -> Array:
    """Distance of a PO2 from each treatment pressure that a study names [atm]."""
    atm = np.asarray(po2, dtype=float) / float(ATMOSPHERE)
    return np.stack([np.maximum(np.maximum(a - atm, atm - b), 0.0) for a, b in _clinic_bands()])


#: A treatment pressure this far away still counts as near [atm].
_NEAR_CLINICS = 0.2


def near_clinics(po2: Any) -> Any:
    """Tell whether a clinic's seizure rate is known near a treatment PO2.

    Parameters
    ----------
    po2 : float or array
        Highest PO2 of the treatment [kPa].

    Returns
    -------
    array of bool
        Whether a study names a pressure within 0.2 atm.

    Examples
    --------
    >>> bool(near_clinics(243.18)), bool(near_clinics(150.0))
    (True, False)
    """
    return _clinic_distance(po2).min(axis=0) <= _NEAR_CLINICS


def clinic_seizure_rates(po2: Any) -> tuple[Any, Any]:
    """Return the lowest and highest seizure rate that clinics report near a treatment PO2.

    Parameters
    ----------
    po2 : float or array
        Highest PO2 of the treatment [kPa].

    Returns
    -------
    tuple of float or array
        Seizures per treatment [1]: the studies at the nearest treatment pressure (2.0, 2.4-2.5,
        2.8 atm); more than 0.2 atm away from all of them the studies that give all pressures
        together.

    Notes
    -----
    To stand beside any risk of *any* sign. A rate of zero is none in 16 430 treatments, not never.

    Examples
    --------
    >>> clinic_seizure_rates(243.18)
    (2.5e-05, 0.0015)
    """
    rows = published("seizure_incidence")
    distance = _clinic_distance(po2)
    nearest = distance.min(axis=0)
    whole = [r["per_10000"] for r in rows if r["pressure_low_atm"] is None]
    low, high = np.full(nearest.shape, min(whole)), np.full(nearest.shape, max(whole))
    for k, (a, b) in enumerate(_clinic_bands()):
        named = [r for r in rows if r["pressure_low_atm"] is not None]
        rates = [r["per_10000"] for r in named if r["pressure_low_atm"] <= b and r["pressure_high_atm"] >= a]
        here = (distance[k] == nearest) & (nearest <= _NEAR_CLINICS)
        low, high = np.where(here, min(rates), low), np.where(here, max(rates), high)
    low, high = low / 1e4, high / 1e4
    return (float(low), float(high)) if np.ndim(po2) == 0 else (low, high)
