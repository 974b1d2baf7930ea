"""Oxygen and the lung: doses of a constant PO2 and of a linear ramp, and what is said to follow.

PO2 is that of the dry breathing gas (fraction times ambient pressure), not the humid inspired one.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.constants import ARIELI_EXPONENT, ATMOSPHERE, BAR, UPTD_THRESHOLD
from gasphys.doses.published_tables import ROUNDING, column, no_slope, published, step
from gasphys.equation import EquationFunction, Value, choice, formula, table
from gasphys.maths import exp, maximum, mean_power, minimum
from gasphys.policy import weakest

__all__ = [
    "arieli_index_from_esot",
    "arieli_pulmonary_index",
    "arieli_pulmonary_ramp",
    "arieli_saturation_index",
    "equivalent_exposure_time",
    "esot",
    "esot_ramp",
    "harabin_vital_capacity_loss",
    "harabin_vital_capacity_ramp",
    "pulmonary_toxicity_incidence",
    "repeated_exposure_dose",
    "shykoff_incidence",
    "shykoff_residual_time",
    "uptd",
    "uptd_ramp",
    "vital_capacity_after_recovery",
    "vital_capacity_loss",
    "vital_capacity_loss_from_index",
    "vital_capacity_loss_from_uptd",
    "vital_capacity_recovery_rate",
]

Array = NDArray[np.float64]

_UPTD: dict[str, Any] = {"source": "clark_lambertsen_1971", "provenance": "memory_high"}


@formula(result="uptd", quantities={"po2": "breathing_gas_po2"}, valid={"po2": (5.0, 405.3)}, **_UPTD)
def uptd(po2: Value, duration: Value, exponent: Value = 5.0 / 6.0) -> Value:
    """Unit pulmonary toxic dose of a constant PO2.

    Notes
    -----
    UPTD = t ((P - 0.5)/0.5)^(5/6), P in atm and t in min, above 0.5 atm; nothing below. One unit is
    one minute of oxygen at 1 atm. The exponent 0.83 is a rounding in use (0.4 % low at 2 atm). There
    is no recovery term, and vital capacity does not follow the dose well at high PO2: 10 h at 2.0 atm
    and 18 h at 1.5 atm did similar harm (Clark 1987). CPTD and OTU are the same number.

    Examples
    --------
    Ninety minutes of oxygen at 2.4 atm:

    >>> round(uptd("2.4 atm", 90.0), 1)
    273.8
    """
    x = maximum(po2 - UPTD_THRESHOLD, 0.0) / UPTD_THRESHOLD
    return duration * x**exponent


@formula(result="uptd", valid={"start_po2": (5.0, 405.3), "end_po2": (5.0, 405.3)}, **_UPTD)
def uptd_ramp(start_po2: Value, end_po2: Value, duration: Value, exponent: Value = 5.0 / 6.0) -> Value:
    """Unit pulmonary toxic dose while PO2 changes linearly in time.

    Notes
    -----
    The exact integral of :func:`uptd`; the time spent below 0.5 atm counts in the slope and not in
    the dose.

    Examples
    --------
    Oxygen from 60 to 30 fsw in 30 min:

    >>> round(uptd_ramp("2.81818 atm", "1.90909 atm", 30.0), 3)
    89.676
    """
    first = (start_po2 - UPTD_THRESHOLD) / UPTD_THRESHOLD
    last = (end_po2 - UPTD_THRESHOLD) / UPTD_THRESHOLD
    return duration * mean_power(first, last, exponent)


# -- The power equation ----------------------------------------------------------------------------

#: PO2 the power equation was fitted to: from about 1 atm up; checks go to 3 atm.
POWER_FIT = (100.0, 304.0)
_FIT = (*POWER_FIT, "fitted from about 1 atm up")
_POWER: dict[str, Any] = {"valid": {"po2": _FIT}, "source": "arieli_2002", "provenance": "read"}
_POWER_RAMP: dict[str, Any] = {
    "valid": {"start_po2": _FIT, "end_po2": _FIT},
    "source": "arieli_2002",
    "provenance": "read",
}
_ESOT: dict[str, Any] = {"source": ("arieli_2002", "dmac_35"), "provenance": "memory_high"}


@formula(result="arieli_pulmonary_index", quantities={"po2": "breathing_gas_po2"}, **_POWER)
def arieli_pulmonary_index(po2: Value, duration: Value) -> Value:
    """Pulmonary oxygen index K of the power equation, constant PO2.

    Notes
    -----
    K = t^2 P^4.57, t in h and P in atm (the paper divides kPa by 101.3; with 101.325, used here, K
    is 0.1 % smaller). K does not add: add its square root, which is :func:`esot` over 60, and square
    the sum. There is no lower threshold in the formula; the fit is from about 1 atm up.

    Examples
    --------
    >>> round(arieli_pulmonary_index("2.4 atm", 90.0), 2)
    122.96
    """
    hours = duration / 60.0
    return hours * hours * (po2 / ATMOSPHERE) ** ARIELI_EXPONENT


@formula(result="arieli_pulmonary_index", **_POWER_RAMP)
def arieli_pulmonary_ramp(start_po2: Value, end_po2: Value, duration: Value) -> Value:
    """Pulmonary oxygen index K while PO2 changes linearly in time.

    Notes
    -----
    K = (integral of P^2.285 dt)^2, t in h and P in atm: the exact integral. See
    :func:`arieli_pulmonary_index`.

    Examples
    --------
    >>> round(arieli_pulmonary_ramp("2.81818 atm", "1.90909 atm", 30.0), 3)
    13.206
    """
    root = duration / 60.0 * mean_power(start_po2 / ATMOSPHERE, end_po2 / ATMOSPHERE, ARIELI_EXPONENT / 2.0)
    return root * root


@formula(
    result="esot",
    quantities={"po2": "breathing_gas_po2"},
    valid={"po2": _FIT},
    **_ESOT,
)
def esot(po2: Value, duration: Value) -> Value:
    """Equivalent surface oxygen time of a constant PO2.

    Notes
    -----
    ESOT = t P^2.285, t in min and P in atm: minutes of oxygen at 1 atm with the same K of the power
    equation, 60 sqrt(K). It adds over an exposure, unlike K. For surface-oriented diving, not for
    saturation. DMAC 35 asks for it in place of UPTD; its limits are not known here.

    Examples
    --------
    >>> round(esot("2.4 atm", 90.0), 1)
    665.3
    """
    return duration * (po2 / ATMOSPHERE) ** (ARIELI_EXPONENT / 2.0)


@formula(
    result="esot",
    valid={"start_po2": _FIT, "end_po2": _FIT},
    **_ESOT,
)
def esot_ramp(start_po2: Value, end_po2: Value, duration: Value) -> Value:
    """Equivalent surface oxygen time while PO2 changes linearly in time.

    Notes
    -----
    The exact integral of :func:`esot`.

    Examples
    --------
    >>> round(esot_ramp("2.81818 atm", "1.90909 atm", 30.0), 2)
    218.04
    """
    return duration * mean_power(start_po2 / ATMOSPHERE, end_po2 / ATMOSPHERE, ARIELI_EXPONENT / 2.0)


@formula(result="arieli_pulmonary_index", source="arieli_2002", provenance="computed")
def arieli_index_from_esot(esot: Value) -> Value:
    """Pulmonary oxygen index K of a sum of ESOT.

    Notes
    -----
    K = (ESOT/60)^2. Add ESOT over the exposure first, then square: the result does not depend on how
    the exposure is cut, nor on the order of its pieces.

    Examples
    --------
    >>> round(arieli_index_from_esot(665.3), 2)
    122.95
    """
    return (esot / 60.0) * (esot / 60.0)


@formula(
    result="vital_capacity_loss",
    valid={"arieli_pulmonary_index": (0.0, 600.0)},
    source="arieli_2002",
    provenance="read",
)
def vital_capacity_loss_from_index(arieli_pulmonary_index: Value) -> Value:
    """Loss of vital capacity at a pulmonary oxygen index K.

    Notes
    -----
    0.0082 % for each h2 atm^4.57; positive means loss. A later paper restates K = 244 for 2 %.

    Examples
    --------
    >>> round(vital_capacity_loss_from_index(244.0), 4)
    0.02
    """
    return 0.0082 * arieli_pulmonary_index / 100.0


@formula(result="vital_capacity_loss", quantities={"po2": "breathing_gas_po2"}, **_POWER)
def vital_capacity_loss(po2: Value, duration: Value) -> Value:
    """Loss of vital capacity after a constant PO2, power equation.

    Notes
    -----
    0.0082 t^2 P^4.57 percent, t in h and P in atm; positive means loss, as a fraction here. It
    neither adds nor averages over an exposure: K does not, see :func:`arieli_pulmonary_index`. The
    mean of a group; single people differ widely.

    Examples
    --------
    >>> round(100.0 * vital_capacity_loss("2.4 atm", 90.0), 3)
    1.008
    """
    return vital_capacity_loss_from_index(arieli_pulmonary_index(po2, duration))


#: PO2 at which the recovery rate is zero, 0.42/0.00379 kPa; at and below it there is no recovery to speak of.
_NO_RECOVERY = 0.42 / 0.00379 * (1.0 + 1e-9)
_RECOVERY: dict[str, Any] = {
    "quantities": {"exposure_po2": "breathing_gas_po2", "loss": "vital_capacity_loss"},
    "valid": {"exposure_po2": (1.1 * float(ATMOSPHERE), 2.5 * float(ATMOSPHERE) * (1.0 + 1e-12))},
    "refuse": {"exposure_po2": (_NO_RECOVERY, 20000.0)},
    "source": ("arieli_2002", "arieli_saturation"),
    "provenance": "read",
}


@formula(result="vital_capacity_recovery_rate", **_RECOVERY)
def vital_capacity_recovery_rate(exposure_po2: Value) -> Value:
    """Rate at which vital capacity recovers after an exposure.

    Notes
    -----
    -0.42 + 0.00379 P for an hour, P in kPa of the exposure that went *before*, not of the gas
    breathed during recovery: a higher PO2 recovers faster. Data from 1.1 to 2.5 atm; at 1.094 atm
    the rate falls to zero and below it the equation is refused. One rendering of the abstract has
    lost the signs; a later abstract settles them.

    Examples
    --------
    >>> round(60.0 * vital_capacity_recovery_rate("2.0 atm"), 4)
    0.348
    """
    return (-0.42 + 0.00379 * exposure_po2) / 60.0


@formula(result="vital_capacity_loss", **_RECOVERY)
def vital_capacity_after_recovery(loss: Value, exposure_po2: Value, duration: Value) -> Value:
    """Loss of vital capacity left after a time of recovery.

    Notes
    -----
    Exponential, with the rate of :func:`vital_capacity_recovery_rate`; ``exposure_po2`` is that of
    the exposure before.

    Examples
    --------
    >>> round(100.0 * vital_capacity_after_recovery(0.00779, "2.0 atm", 180.0), 3)
    0.274
    """
    return loss * exp(-vital_capacity_recovery_rate(exposure_po2) * duration)


@formula(
    result="residual_exposure_time",
    quantities={"po2": "breathing_gas_po2", "residual_index": "arieli_pulmonary_index"},
    valid={"po2": _FIT},
    refuse={"po2": (1.0, 20000.0)},
    source="arieli_2002",
    provenance="computed",
)
def equivalent_exposure_time(residual_index: Value, po2: Value) -> Value:
    """Time on a PO2 that would have left the same pulmonary oxygen index.

    Notes
    -----
    t = sqrt(K)/P^2.285 in h: where a second exposure starts after an incomplete recovery, with the
    residual index loss/0.0082 %.

    Examples
    --------
    >>> round(equivalent_exposure_time(50.0, "1.5 atm") / 60.0, 4)
    2.7997
    """
    return 60.0 * residual_index**0.5 / (po2 / ATMOSPHERE) ** (ARIELI_EXPONENT / 2.0)


@formula(
    result="pulmonary_toxicity_incidence",
    valid={"arieli_pulmonary_index": (0.0, 250.0)},
    source="arieli_saturation",
    provenance="read",
)
def pulmonary_toxicity_incidence(arieli_pulmonary_index: Value) -> Value:
    """Incidence of pulmonary oxygen toxicity at an index K.

    Notes
    -----
    1.85 + 0.171 K percent: 1.85 % at no exposure at all (an intercept, not subtracted), capped at
    100 %, which K = 574 reaches. One author, one data set, unverified; for K up to about 250.

    Examples
    --------
    >>> round(100.0 * pulmonary_toxicity_incidence(120.0), 2)
    22.37
    """
    return minimum((1.85 + 0.171 * arieli_pulmonary_index) / 100.0, 1.0)


@formula(
    result="arieli_saturation_index",
    quantities={"po2": "breathing_gas_po2"},
    valid={"po2": (40.0, 60.0, "one data set at about 0.5 bar")},
    refuse={"duration": (0.0, 60.0 * 2.0 / 0.0135)},
    source="arieli_saturation",
    provenance="read",
)
def arieli_saturation_index(po2: Value, duration: Value) -> Value:
    """Pulmonary oxygen index of a saturation exposure at about 0.5 bar.

    Notes
    -----
    K = t^2 P^4.57 exp(-0.0135 t), t in h and P in bar as printed. One author, one data set,
    unverified. After 148 h the formula falls while the exposure goes on: it is refused there.

    Examples
    --------
    >>> round(arieli_saturation_index("0.5 bar", "100 h"), 2)
    109.14
    """
    hours = duration / 60.0
    return hours * hours * (po2 / BAR) ** ARIELI_EXPONENT * exp(-0.0135 * hours)


# -- Harabin 1987, Shykoff 2015 --------------------------------------------------------------------

HARABIN_FIT = (0.8 * float(ATMOSPHERE), 2.5 * float(ATMOSPHERE) * (1.0 + 1e-12))


@formula(
    result="vital_capacity_loss",
    quantities={"po2": "breathing_gas_po2"},
    valid={"po2": HARABIN_FIT},
    source="harabin_1987",
    provenance="memory_medium",
)
def harabin_vital_capacity_loss(po2: Value, duration: Value) -> Value:
    """Loss of vital capacity after a constant PO2, linear form of 1987.

    Notes
    -----
    0.011 (P - 0.5) t percent, P in atm and t in min, nothing below 0.5 atm; positive means loss
    (the paper's sign is the other one). Linear in time: it orders exposures unlike the power
    equation. For continuous oxygen at about 0.8 to 2.5 atm. From memory, unverified.

    Examples
    --------
    >>> round(100.0 * harabin_vital_capacity_loss("2.4 atm", 90.0), 2)
    1.88
    """
    return 0.011 / 100.0 * duration * maximum(po2 - UPTD_THRESHOLD, 0.0) / ATMOSPHERE


@formula(
    result="vital_capacity_loss",
    valid={"start_po2": HARABIN_FIT, "end_po2": HARABIN_FIT},
    source="harabin_1987",
    provenance="memory_medium",
)
def harabin_vital_capacity_ramp(start_po2: Value, end_po2: Value, duration: Value) -> Value:
    """Loss of vital capacity while PO2 changes linearly in time, linear form of 1987.

    Notes
    -----
    The exact integral of :func:`harabin_vital_capacity_loss`.

    Examples
    --------
    >>> round(100.0 * harabin_vital_capacity_ramp("2.0 atm", "1.0 atm", 60.0), 2)
    0.66
    """
    first, last = start_po2 - UPTD_THRESHOLD, end_po2 - UPTD_THRESHOLD
    return 0.011 / 100.0 * duration * mean_power(first, last, 1.0) / ATMOSPHERE


#: What "about 130 kPa" is taken to mean.
SHYKOFF_BAND = (125.0, 135.0)


@formula(
    result="pulmonary_symptom_incidence",
    quantities={"po2": "breathing_gas_po2"},
    refuse={"po2": SHYKOFF_BAND},
    source="shykoff_2015",
    provenance="read",
)
def shykoff_incidence(po2: Value, duration: Value) -> Value:
    """Incidence of pulmonary changes or symptoms after oxygen diving at about 130 kPa.

    Notes
    -----
    100/(1 + exp(3.586 - 0.49 T)) percent, T in h, from 1352 man-dives at a PO2 of about 130 kPa;
    another PO2 (here: outside 125 to 135 kPa) is refused, for PO2 does not enter. 2.70 % at no time
    at all: an intercept. The standard deviation of the residuals was 8.5 % at rest, 18.3 % working.

    Examples
    --------
    >>> round(100.0 * shykoff_incidence(130.0, "6 h"), 2)
    34.39
    """
    # PO2 does not enter, but where it is missing the result is.
    return 1.0 / (1.0 + exp(3.586 - 0.49 * duration / 60.0)) + 0.0 * po2


_residual: Any = {
    "result": "residual_exposure_time",
    "valid": {"surface_interval": (300.0, 1e7, "the form starts 5 h after surfacing")},
    "refuse": {"duration": (1.0, 1e7)},
    "source": "shykoff_2015",
    "provenance": "memory_medium",
    "register": False,
}


@formula(**_residual)
def _rest(duration: Value, surface_interval: Value) -> Value:
    """Residual oxygen time after a resting dive."""
    late = (surface_interval - 300.0) / duration
    return duration * exp(-0.149 * late * late)


@formula(**_residual)
def _exercise(duration: Value, surface_interval: Value) -> Value:
    """Residual oxygen time after a working dive."""
    late = (surface_interval - 300.0) / duration
    return duration * exp(-0.047 * late * late)


@choice(option="activity", registry={"rest": _rest, "exercise": _exercise})
def shykoff_residual_time(duration: Value, surface_interval: Value, activity: str = "rest") -> Value:
    """Oxygen time with which the next dive at about 130 kPa begins.

    Notes
    -----
    T exp(-k ((t - 5)/T)^2), T of the dive and t since surfacing in h, t above 5 h; k 0.149 at rest,
    0.047 working. The bracket is unbalanced in print; the squared ratio is our reading, from memory:
    the other one would leave 3.35 h of a 4-h dive after a day. Unverified.

    Examples
    --------
    Four hours at rest, a day later:

    >>> round(shykoff_residual_time("4 h", "24 h") / 60.0, 2)
    0.14
    """


# -- Published tables ------------------------------------------------------------------------------


def _explain(text: str) -> Callable[..., str]:
    return lambda **inputs: text


def _repeated(header: str, last: float, name: str) -> EquationFunction:
    rows = [r for r in published("repeated_exposure_otu") if r[header] is not None]
    days = np.array([r["exposure_days"] for r in rows], dtype=float)
    values = np.array([r[header] for r in rows], dtype=float)

    def repeated(exposure_days: Value) -> Value:
        """Pulmonary oxygen dose allowed for repeated exposure, one column of the table."""

    return table(
        result="repeated_exposure_dose",
        refuse={"exposure_days": (1.0, last)},
        source="hamilton_1988",
        provenance=weakest([str(r["provenance"]) for r in rows]),
        array=step(days, values),
        slope=no_slope("repeated-exposure doses", days),
        explain=_explain(f"repeated_exposure_dose read at the next whole number of days, {name}"),
        register=False,
        name=f"doses.repeated_exposure_dose[{name}]",
    )(repeated)


@choice(
    option="total",
    registry={
        "day": _repeated("daily_average", 30.0, "day"),
        "mission": _repeated("mission_total", 14.0, "mission"),
    },
)
def repeated_exposure_dose(exposure_days: Value, total: str = "day") -> Value:
    """Pulmonary oxygen dose allowed for repeated exposure, by the number of days.

    Notes
    -----
    Hamilton and colleagues 1988: total "day" is the average a day, "mission" the sum; 300 a day from
    the 11th day, the sum not printed beyond 14 days. Made for habitat and saturation missions,
    whole-body tolerance; numerically UPTD. From memory.

    Examples
    --------
    >>> repeated_exposure_dose(5.0), repeated_exposure_dose(5.0, total="mission")
    (460.0, 2300.0)
    """


_CPTD = column("vital_capacity_cptd", "cptd")
_CPTD_LOSS = column("vital_capacity_cptd", "median_loss_percent") / 100.0


def _interpolated(uptd: Any) -> Any:
    return np.interp(uptd, _CPTD, _CPTD_LOSS)


def _cptd_slope(name: str) -> Callable[..., Any]:
    def by(uptd: Any) -> Any:
        x = np.asarray(uptd, dtype=float)
        no_slope("cumulative pulmonary toxic dose", _CPTD)("uptd")(x)
        row = np.clip(np.searchsorted(_CPTD, x) - 1, 0, len(_CPTD) - 2)
        return (_CPTD_LOSS[row + 1] - _CPTD_LOSS[row]) / (_CPTD[row + 1] - _CPTD[row])

    return by


@table(
    result="vital_capacity_loss",
    refuse={"uptd": (float(_CPTD[0]) * (1.0 - ROUNDING), float(_CPTD[-1]) * (1.0 + ROUNDING))},
    source="cptd_table",
    provenance=weakest([str(r["provenance"]) for r in published("vital_capacity_cptd")]),
    array=_interpolated,
    slope=_cptd_slope,
    explain=_explain("vital_capacity_loss interpolated between the rows of the table"),
)
def vital_capacity_loss_from_uptd(uptd: Value) -> Value:
    """Median loss of vital capacity at a cumulative pulmonary dose.

    Notes
    -----
    Rows from 615 UPTD (2 %) to 2190 (20 %), interpolated between them; outside the table there is no
    number. From memory. Half of the people lost more.

    Examples
    --------
    >>> vital_capacity_loss_from_uptd(1425.0)
    0.1
    """
