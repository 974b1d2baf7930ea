"""Properties of the equations of decompression risk."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

import gasphys as gp
from gasphys import risk

from .coverage import covers

hazards = st.floats(0.0, 20.0)
some = st.floats(1e-6, 20.0)
pressures = st.floats(20.0, 1000.0)


@pytest.fixture(autouse=True)
def _quiet():
    with gp.validity("ignore"):
        yield


@covers("risk.hazard")
@given(p=pressures, ambient=pressures, gain=st.floats(1e-5, 1e-2), threshold=st.floats(0.0, 50.0))
def test_hazard_is_zero_up_to_the_threshold_and_linear_above(p, ambient, gain, threshold):
    found = risk.hazard(p, ambient, gain, threshold)
    assert (found > 0.0) == (p - ambient - threshold > 0.0)
    assert risk.hazard(p, ambient, 2.0 * gain, threshold) == pytest.approx(2.0 * found, rel=1e-14)
    # Only relative supersaturation counts: everything twice is the same hazard.
    assert risk.hazard(2.0 * p, 2.0 * ambient, gain, 2.0 * threshold) == pytest.approx(
        found, rel=1e-12, abs=1e-18
    )
    # Venous gases count as a lower threshold.
    venous = risk.hazard(p, ambient, gain, threshold, 5.0)
    assert venous == pytest.approx(risk.hazard(p, ambient, gain, threshold - 5.0), rel=1e-12, abs=1e-18)


@covers("risk.risk_probability")
@given(a=hazards, b=hazards)
def test_survivals_multiply(a, b):
    p = risk.risk_probability
    assert 1.0 - p(a + b) == pytest.approx((1.0 - p(a)) * (1.0 - p(b)), rel=1e-12, abs=1e-15)
    assert p(min(a, b)) <= p(max(a, b)) <= 1.0


@covers("risk.interval_log_likelihood")
@given(a=hazards, b=some, c=some)
def test_two_intervals_in_a_row_are_one(a, b, c):
    def chance(*values):
        return math.exp(risk.interval_log_likelihood(*values))

    assert chance(a, b) + chance(a + b, c) == pytest.approx(chance(a, b + c), rel=1e-9)
    assert chance(0.0, b) == pytest.approx(risk.risk_probability(b), rel=1e-12)


@covers("risk.marginal_log_likelihood")
@given(p=st.floats(1e-6, 0.999), w=st.floats(0.0, 1.0))
def test_a_marginal_event_lies_between_none_and_an_event(p, w):
    none, event = (risk.marginal_log_likelihood(p, x) for x in (0.0, 1.0))
    assert none == pytest.approx(math.log(1.0 - p), rel=1e-9)
    assert event == pytest.approx(math.log(p), rel=1e-12)
    assert min(none, event) - 1e-12 <= risk.marginal_log_likelihood(p, w) <= max(none, event) + 1e-12
    # Seen over many exposures it is greatest where P is the share of events.
    if 1e-3 < w < 0.99:
        best = risk.marginal_log_likelihood(w, w)
        assert best >= risk.marginal_log_likelihood(p, w) - 1e-12


@covers("risk.serious_probability", "risk.mild_probability")
@given(s=hazards, m=hazards)
def test_three_outcomes_sum_to_one(s, m):
    total = risk.serious_probability(s) + risk.mild_probability(s, m) + math.exp(-s - m)
    assert total == pytest.approx(1.0, rel=1e-14)
    assert risk.mild_probability(0.0, m) == risk.risk_probability(m)


@covers("risk.hill_probability")
@given(x=st.floats(0.01, 100.0), half=st.floats(0.01, 100.0), n=st.floats(0.1, 8.0))
def test_hill_is_half_at_the_half_dose_and_symmetric(x, half, n):
    assert risk.hill_probability(half, half, n) == 0.5
    other = risk.hill_probability(half * half / x, half, n)
    assert risk.hill_probability(x, half, n) == pytest.approx(1.0 - other, rel=1e-9, abs=1e-12)
    assert risk.hill_probability(x, half, n) == pytest.approx(
        risk.logistic_probability(n * math.log(x / half)), rel=1e-9
    )


@covers("risk.logistic_probability")
@given(z=st.floats(-30.0, 30.0))
def test_log_odds_come_back(z):
    p = risk.logistic_probability(z)
    assert p + risk.logistic_probability(-z) == pytest.approx(1.0, rel=1e-14)
    assert math.log(p) - math.log(risk.logistic_probability(-z)) == pytest.approx(z, rel=1e-9, abs=1e-12)


@covers("risk.log_logistic_probability", "risk.log_logistic_hazard")
@given(t=st.floats(1.0, 2000.0), rate=st.floats(1e-4, 1e-1), shape=st.floats(0.5, 5.0))
def test_log_logistic_hazard_is_the_slope_of_minus_log_survival(t, rate, shape):
    assert risk.log_logistic_probability(1.0 / rate, rate, shape) == pytest.approx(0.5, rel=1e-12)
    step = 1e-4 * t
    alive = [1.0 - risk.log_logistic_probability(x, rate, shape) for x in (t - step, t + step)]
    if alive[1] > 1e-4:
        slope = (math.log(alive[0]) - math.log(alive[1])) / (2.0 * step)
        assert risk.log_logistic_hazard(t, rate, shape) == pytest.approx(slope, rel=1e-5)


@covers("risk.modified_tissue_ratio")
@given(p=st.floats(20.0, 90.0), ambient=st.floats(15.0, 100.0), c2=st.floats(0.5, 4.0))
def test_modified_ratio_rises_with_nitrogen_and_is_nothing_below_one(p, ambient, c2):
    found = risk.modified_tissue_ratio(p, ambient, 0.0, c2)
    assert risk.modified_tissue_ratio(p + 1.0, ambient, 0.0, c2) >= found
    if p <= ambient:
        assert found < 2e-6
    else:
        assert found == pytest.approx((p / ambient - 1.0) ** c2, rel=1e-9, abs=1e-6)
