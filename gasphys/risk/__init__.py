"""Risk of decompression sickness: hazards, likelihoods, and the fit of a model to outcomes of your own."""

from __future__ import annotations

from gasphys.risk.ear import InnerEar, inner_ear
from gasphys.risk.equations import (
    hazard,
    hill_probability,
    interval_log_likelihood,
    log_logistic_hazard,
    log_logistic_probability,
    logistic_probability,
    marginal_log_likelihood,
    mild_probability,
    modified_tissue_ratio,
    risk_probability,
    serious_probability,
)
from gasphys.risk.fitting import (
    Fit,
    fit,
    goodness_of_fit,
    likelihood_ratio_test,
    log_likelihood,
    null_log_likelihood,
    simulate,
)
from gasphys.risk.model import Compartment, HazardModel, probability, sampled_hazard
from gasphys.risk.outcomes import Outcome, read_outcomes

__all__ = [
    "Compartment",
    "Fit",
    "HazardModel",
    "InnerEar",
    "Outcome",
    "fit",
    "goodness_of_fit",
    "hazard",
    "hill_probability",
    "inner_ear",
    "interval_log_likelihood",
    "likelihood_ratio_test",
    "log_likelihood",
    "log_logistic_hazard",
    "log_logistic_probability",
    "logistic_probability",
    "marginal_log_likelihood",
    "mild_probability",
    "modified_tissue_ratio",
    "null_log_likelihood",
    "probability",
    "read_outcomes",
    "risk_probability",
    "sampled_hazard",
    "serious_probability",
    "simulate",
]
