"""Equations of decompression risk: hazard, probability, likelihood, dose-response forms.

No fitted human parameter set ships: none was found in a source that could be read. Every gain,
threshold and coefficient is the caller's own, from a fit or a file.
"""

from __future__ import annotations

from typing import Any

from gasphys.equation import Value, formula
from gasphys.maths import exp, expm1, log, log1p, maximum

__all__ = [
    "hazard",
    "hill_probability",
    "interval_log_likelihood",
    "log_logistic_hazard",
    "log_logistic_probability",
    "logistic_probability",
    "marginal_log_likelihood",
    "mild_probability",
    "modified_tissue_ratio",
    "risk_probability",
    "serious_probability",
]

_HAZARD: dict[str, Any] = {"source": "weathersby_1984", "provenance": "memory_high"}
_CENSORED: dict[str, Any] = {"source": "weathersby_1992", "provenance": "memory_high"}
_TRINOMIAL: dict[str, Any] = {"source": "howle_2017", "provenance": "memory_medium"}


@formula(result="hazard", **_HAZARD)
def hazard(
    tissue_pressure: Value,
    ambient_pressure: Value,
    hazard_gain: Value,
    hazard_threshold: Value = 0.0,
    fixed_venous_pressure: Value = 0.0,
) -> Value:
    """Hazard of decompression sickness from one tissue's relative supersaturation.

    Notes
    -----
    r = A max(0, (p - P - Thr + pFVG)/P). Sign and value of the venous gases pFVG differ between reports:
    there is no default but none. Gain and threshold belong to one fit and one convention.

    Examples
    --------
    >>> atm = 101.325
    >>> round(hazard(1.6 * atm, atm, 2e-3, 0.03 * atm), 6)
    0.00114
    """
    excess = tissue_pressure - ambient_pressure - hazard_threshold + fixed_venous_pressure
    return hazard_gain * maximum(0.0, excess) / ambient_pressure


@formula(result="risk_probability", **_HAZARD)
def risk_probability(cumulative_hazard: Value) -> Value:
    """Probability of decompression sickness from the integral of the hazard.

    Notes
    -----
    P = 1 - exp(-R), R the integral from the start of the exposure to at least 24 h after surfacing.

    Examples
    --------
    >>> round(risk_probability(0.0393984), 8)
    0.03863238
    """
    return -expm1(-cumulative_hazard)


@formula(
    result="log_likelihood",
    quantities={"hazard_before": "cumulative_hazard", "hazard_within": "cumulative_hazard"},
    refuse={"hazard_within": (1e-300, 1e6)},
    **_CENSORED,
)
def interval_log_likelihood(hazard_before: Value, hazard_within: Value) -> Value:
    """Log-likelihood of an onset known to lie in an interval.

    Notes
    -----
    ln L = -R(0, T1) + ln(1 - exp(-R(T1, T2))): T1 last known well, T2 first definite symptom. With
    R(0, T1) = 0 it is an event whose time is not used; without an event ln L is -R. Onset windows are biased
    by how closely people were watched: do not read more into a fit of times than that.

    Examples
    --------
    >>> from math import exp
    >>> round(exp(interval_log_likelihood(0.006, 0.006)), 9)
    0.005946251
    """
    return -hazard_before + log(-expm1(-hazard_within))


@formula(
    result="log_likelihood",
    quantities={"event_weight": "fraction"},
    refuse={"risk_probability": (1e-300, 1.0 - 1e-15)},
    source="weathersby_1984",
    provenance="memory_high",
)
def marginal_log_likelihood(risk_probability: Value, event_weight: Value) -> Value:
    """Log-likelihood of an outcome counted as a share of an event.

    Notes
    -----
    ln L = w ln P + (1 - w) ln(1 - P): w = 1 an event, 0 none, 0.1 the weight remembered for marginal
    events. Counting marginals as fractions of an event is a choice; a model of three outcomes fitted best.

    Examples
    --------
    >>> round(marginal_log_likelihood(0.03, 0.1), 8)
    -0.37806908
    """
    return event_weight * log(risk_probability) + (1.0 - event_weight) * log1p(-risk_probability)


@formula(result="risk_probability", quantities={"serious_hazard": "cumulative_hazard"}, **_TRINOMIAL)
def serious_probability(serious_hazard: Value) -> Value:
    """Probability of serious sickness where serious and mild have hazards of their own.

    Notes
    -----
    P = 1 - exp(-Rs): serious sickness comes first in the hierarchy, whatever mild signs go with it.

    Examples
    --------
    >>> round(serious_probability(0.001), 7)
    0.0009995
    """
    return -expm1(-serious_hazard)


@formula(
    result="risk_probability",
    quantities={"serious_hazard": "cumulative_hazard", "mild_hazard": "cumulative_hazard"},
    **_TRINOMIAL,
)
def mild_probability(serious_hazard: Value, mild_hazard: Value) -> Value:
    """Probability of mild sickness only, where serious and mild have hazards of their own.

    Notes
    -----
    P = exp(-Rs) (1 - exp(-Rm)). With :func:`serious_probability` and exp(-Rs - Rm) for none the sum is 1.

    Examples
    --------
    >>> round(mild_probability(0.001, 0.02), 6)
    0.019782
    """
    return exp(-serious_hazard) * -expm1(-mild_hazard)


@formula(
    result="risk_probability",
    quantities={"half_dose": "response_dose", "hill_exponent": "exponent"},
    source="weathersby_1984",
    provenance="computed",
)
def hill_probability(response_dose: Value, half_dose: Value, hill_exponent: Value) -> Value:
    """Hill form of a dose and its response.

    Notes
    -----
    P = x^n/(x^n + x50^n), written for x above zero. The dose is the caller's measure of decompression.

    Examples
    --------
    >>> round(hill_probability(2.0, 3.0, 4.0), 7)
    0.1649485
    """
    return 1.0 / (1.0 + exp(hill_exponent * log(half_dose / response_dose)))


@formula(result="risk_probability", source="regression_forms", provenance="computed")
def logistic_probability(response_score: Value) -> Value:
    """Logistic form of a response.

    Notes
    -----
    P = 1/(1 + exp(-z)) with z = b0 + sum of b x, the caller's regression.

    Examples
    --------
    >>> logistic_probability(0.0)
    0.5
    """
    return 1.0 / (1.0 + exp(-response_score))


@formula(
    result="risk_probability",
    quantities={"onset_shape": "exponent"},
    refuse={"time": (1e-9, 1e9)},
    source="regression_forms",
    provenance="computed",
)
def log_logistic_probability(time: Value, onset_rate: Value, onset_shape: Value) -> Value:
    """Log-logistic form of the time of onset.

    Notes
    -----
    P(t) = 1 - 1/(1 + (rho t)^kappa), for a time above zero.

    Examples
    --------
    >>> round(log_logistic_probability(240.0, 1 / 200, 1.8), 7)
    0.5813162
    """
    return 1.0 / (1.0 + exp(-onset_shape * log(onset_rate * time)))


@formula(
    result="hazard",
    quantities={"onset_shape": "exponent"},
    refuse={"time": (1e-9, 1e9)},
    source="regression_forms",
    provenance="computed",
)
def log_logistic_hazard(time: Value, onset_rate: Value, onset_shape: Value) -> Value:
    """Hazard of the log-logistic form.

    Notes
    -----
    kappa rho (rho t)^(kappa - 1)/(1 + (rho t)^kappa): for kappa above 1 it rises, then falls.

    Examples
    --------
    >>> round(log_logistic_hazard(240.0, 1 / 200, 1.8), 9)
    0.004359871
    """
    return onset_shape / time / (1.0 + exp(-onset_shape * log(onset_rate * time)))


@formula(
    result="modified_tissue_ratio",
    quantities={
        "tissue_pressure": "tissue_pressure",
        "ratio_exponent": "exponent",
    },
    source="conkin_1996",
    provenance="read",
)
def modified_tissue_ratio(
    tissue_pressure: Value, ambient_pressure: Value, ratio_offset: Value, ratio_exponent: Value
) -> Value:
    """Dose of an ascent to altitude from the nitrogen of the 360-min tissue.

    Notes
    -----
    [(P1N2 + c1)/P2 - 1]^c2; zero where the ratio is below 1. c1 and c2 are the caller's: they could not be
    read. The plain ratio P1N2/P2 is :func:`gasphys.tissues.supersaturation_ratio`; alone it is too simple,
    equal risk needs a ratio that falls with P2.

    Examples
    --------
    >>> round(modified_tissue_ratio(80.0, 40.0, 4.0, 1.5), 6)
    1.15369
    """
    excess = maximum((tissue_pressure + ratio_offset) / ambient_pressure - 1.0, 1e-12)
    return exp(ratio_exponent * log(excess))
