"""Properties of the doses: additive where they add, zero where nothing counts, monotone, bounded."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.stats import norm

import gasphys as gp
from gasphys import doses
from gasphys.constants import ATMOSPHERE
from gasphys.doses.cns import POPULATIONS
from gasphys.errors import RangeError

from .coverage import covers, members

ATM = float(ATMOSPHERE)
pressures = st.floats(5.0, 400.0)
table_pressures = st.floats(5.0, 1.6 * ATM)
minutes = st.floats(0.1, 600.0)
shares = st.floats(0.05, 0.95)
populations = pytest.mark.parametrize("population", POPULATIONS)


@pytest.fixture(autouse=True)
def _quiet():
    with gp.validity("ignore"):
        yield


#: Ramps that add, and the rate they integrate [1/min].
RAMPS = {
    "uptd": (doses.uptd_ramp, lambda p: max(p / ATM - 0.5, 0.0) ** (5 / 6) / 0.5 ** (5 / 6), 0.5 * ATM),
    "esot": (doses.esot_ramp, lambda p: (p / ATM) ** 2.285, 0.0),
    "harabin": (doses.harabin_vital_capacity_ramp, lambda p: 0.00011 * max(p / ATM - 0.5, 0.0), 0.5 * ATM),
    **{
        f"cns_{name}": (
            doses.cns_exposure.pick(population=name),
            lambda p, n=n: (p / ATM) ** n,
            0.0,
        )
        for name, n in (
            ("active", 3.38),
            ("active_0_9_l_min", 3.38),
            ("immersed_rest", 5.465),
            ("dry_rest", 6.495),
        )
    },
}


@covers(
    "doses.uptd_ramp", "doses.esot_ramp", "doses.harabin_vital_capacity_ramp", *members("doses.cns_exposure")
)
@pytest.mark.parametrize("name", RAMPS)
@given(start=pressures, end=pressures, duration=minutes, share=shares)
def test_ramps_are_integrals_that_add(name, start, end, duration, share):
    f, rate, knee = RAMPS[name]
    whole = f(start, end, duration)
    place = [(knee - start) / (end - start)] if min(start, end) < knee < max(start, end) else None
    integral = quad(
        lambda s: rate(start + (end - start) * s), 0, 1, points=place, epsabs=0, epsrel=1e-12, limit=200
    )
    # Of the order of the integrand's own size, where a ramp only touches the threshold.
    assert whole == pytest.approx(duration * integral[0], rel=1e-10, abs=1e-13 * duration)
    middle = start + (end - start) * share
    parts = f(start, middle, duration * share) + f(middle, end, duration * (1.0 - share))
    assert parts == pytest.approx(whole, rel=1e-11, abs=1e-11)
    assert f(end, start, duration) == pytest.approx(whole, rel=1e-12, abs=1e-12)
    assert f(start, start, duration) == pytest.approx(duration * rate(start), rel=1e-12, abs=1e-15)


@covers(*members("doses.noaa_cns_ramp"), *members("doses.noaa_cns_fraction"))
@pytest.mark.parametrize("rule", ["step", "linear"])
@pytest.mark.parametrize("total", ["single", "day"])
@given(start=table_pressures, end=table_pressures, duration=minutes, share=shares)
def test_noaa_ramps_are_integrals_that_add(rule, total, start, end, duration, share):
    def f(a, b, t):
        return doses.noaa_cns_ramp(a, b, t, rule=rule, total=total)

    nodes = np.arange(6, 17) / 10.0 * ATM
    low, high = min(start, end), max(start, end)
    cuts = [low, *nodes[(nodes > low) & (nodes < high)], high]
    expected = 0.0
    for a, b in itertools.pairwise(cuts):
        if b <= a:
            continue
        inner = 0.5 * (a + b)

        def rate(p, inner=inner):
            # The step rule reads one row for all of the interval.
            return doses.noaa_cns_fraction(inner if rule == "step" else p, 1.0, rule=rule, total=total)

        expected += quad(rate, a, b, epsabs=0, epsrel=1e-12)[0]
    if high > low:
        expected *= duration / (high - low)
        assert f(start, end, duration) == pytest.approx(expected, rel=1e-10, abs=1e-14)
    middle = start + (end - start) * share
    parts = f(start, middle, duration * share) + f(middle, end, duration * (1.0 - share))
    assert parts == pytest.approx(f(start, end, duration), rel=1e-10, abs=1e-13)


@covers(
    "doses.uptd",
    "doses.esot",
    "doses.arieli_pulmonary_index",
    "doses.arieli_pulmonary_ramp",
    "doses.vital_capacity_loss",
    "doses.harabin_vital_capacity_loss",
    *members("doses.cns_symptom_risk"),
)
@given(po2=pressures, duration=minutes, factor=st.floats(1.01, 2.0))
def test_doses_grow_with_po2_and_time(po2, duration, factor):
    constant = [doses.uptd, doses.esot, doses.arieli_pulmonary_index, doses.vital_capacity_loss]
    constant += [doses.harabin_vital_capacity_loss]
    constant += [doses.cns_symptom_risk.pick(population=p) for p in POPULATIONS]
    for f in constant:
        now = f(po2, duration)
        assert now >= 0.0
        assert f(po2 * factor, duration) >= now
        assert f(po2, duration * factor) >= now
        assert f(po2, 0.0) == 0.0
    for f in (doses.uptd, doses.harabin_vital_capacity_loss):
        assert f(min(po2, 0.5 * ATM), duration) == 0.0
        assert f(po2 + 0.51 * ATM, duration * factor) > f(po2 + 0.51 * ATM, duration)
    assert doses.noaa_cns_fraction(min(po2, 0.59 * ATM), duration) == 0.0
    root = doses.arieli_pulmonary_ramp(po2, po2 * factor, duration) ** 0.5
    assert root == pytest.approx(doses.esot_ramp(po2, po2 * factor, duration) / 60.0, rel=1e-12)


@covers(
    "doses.arieli_index_from_esot", "doses.vital_capacity_loss_from_index", "doses.equivalent_exposure_time"
)
@given(po2=st.floats(50.0, 300.0), first=minutes, second=minutes)
def test_the_index_does_not_add_but_its_root_does(po2, first, second):
    parts = [doses.arieli_pulmonary_index(po2, t) for t in (first, second)]
    whole = doses.arieli_pulmonary_index(po2, first + second)
    assert whole > sum(parts)
    assert whole == pytest.approx(sum(math.sqrt(k) for k in parts) ** 2, rel=1e-12)
    minutes_at_one = doses.esot(po2, first) + doses.esot(po2, second)
    assert doses.arieli_index_from_esot(minutes_at_one) == pytest.approx(whole, rel=1e-12)
    assert doses.vital_capacity_loss_from_index(whole) == pytest.approx(
        doses.vital_capacity_loss(po2, first + second), rel=1e-12
    )
    # A second exposure that begins where the first left off goes on as one.
    begun = doses.equivalent_exposure_time(parts[0], po2)
    assert begun == pytest.approx(first, rel=1e-9)


@covers("doses.vital_capacity_recovery_rate", "doses.vital_capacity_after_recovery")
@given(
    loss=st.floats(0.0, 0.3),
    po2=st.floats(1.1, 3.0),
    first=st.floats(0.0, 600.0),
    second=st.floats(0.0, 600.0),
)
def test_recovery_is_exponential_and_faster_after_more(loss, po2, first, second):
    def after(x, t, p=po2):
        return doses.vital_capacity_after_recovery(x, p * ATM, t)

    assert after(after(loss, first), second) == pytest.approx(
        after(loss, first + second), rel=1e-9, abs=1e-15
    )
    assert 0.0 <= after(loss, first) <= loss
    assert after(loss, first, po2 * 1.1) <= after(loss, first)
    assert doses.vital_capacity_recovery_rate(po2 * ATM) > 0.0
    for below in (1.09 * ATM, 50.0):
        with pytest.raises(RangeError, match="not extrapolated"):
            doses.vital_capacity_recovery_rate(below)
        with pytest.raises(RangeError, match="not extrapolated"):
            doses.vital_capacity_after_recovery(loss, below, first)


@covers("doses.pulmonary_toxicity_incidence", "doses.arieli_saturation_index", "doses.shykoff_incidence")
@given(index=st.floats(0.0, 2000.0), hours=st.floats(0.0, 140.0), more=st.floats(0.1, 8.0))
def test_incidences_rise_and_stay_shares(index, hours, more):
    low, high = (doses.pulmonary_toxicity_incidence(k) for k in (index, index + more))
    assert 0.0185 <= low <= high <= 1.0
    low, high = (doses.arieli_saturation_index(50.0, 60.0 * h) for h in (hours, hours + more))
    assert 0.0 <= low <= high
    with pytest.raises(RangeError, match="not extrapolated"):
        doses.arieli_saturation_index(50.0, 60.0 * 149.0)
    low, high = (doses.shykoff_incidence(130.0, 60.0 * h) for h in (hours, hours + more))
    assert 0.0269 < low < high or high > 0.999999
    for other in (100.0, 124.0, 136.0, 160.0):
        with pytest.raises(RangeError, match="not extrapolated"):
            doses.shykoff_incidence(other, 60.0)


@covers(*members("doses.shykoff_residual_time"))
@given(dive=st.floats(30.0, 480.0), interval=st.floats(300.0, 3000.0), more=st.floats(1.0, 600.0))
def test_residual_time_shrinks(dive, interval, more):
    for activity in ("rest", "exercise"):
        one = doses.shykoff_residual_time(dive, interval, activity)
        assert 0.0 <= doses.shykoff_residual_time(dive, interval + more, activity) <= one <= dive
    rest, exercise = (doses.shykoff_residual_time(dive, interval, a) for a in ("rest", "exercise"))
    assert exercise >= rest


@covers(*members("doses.repeated_exposure_dose"), "doses.vital_capacity_loss_from_uptd")
@given(day=st.floats(1.0, 14.0), dose=st.floats(615.0, 2190.0), more=st.floats(0.0, 100.0))
def test_tables_of_the_lung_are_monotone(day, dose, more):
    whole = math.ceil(day - 1e-9)
    assert doses.repeated_exposure_dose(day) == doses.repeated_exposure_dose(float(whole))
    average, total = doses.repeated_exposure_dose(day), doses.repeated_exposure_dose(day, "mission")
    assert total == pytest.approx(average * whole, rel=0.005)
    if whole < 14:
        assert doses.repeated_exposure_dose(whole + 1.0) <= average
        assert doses.repeated_exposure_dose(whole + 1.0, "mission") > total
    with pytest.raises(RangeError):
        doses.repeated_exposure_dose(15.0, "mission")
    low, high = (doses.vital_capacity_loss_from_uptd(min(d, 2190.0)) for d in (dose, dose + more))
    assert 0.02 <= low <= high <= 0.20
    for outside in (614.0, 2191.0):
        with pytest.raises(RangeError, match="not extrapolated"):
            doses.vital_capacity_loss_from_uptd(outside)


@covers(*members("doses.noaa_cns_after_interval"), "doses.cns_recovery")
@given(fraction=st.floats(0.0, 3.0), interval=st.floats(0.0, 3000.0), more=st.floats(0.0, 600.0))
def test_intervals_take_off_and_never_add(fraction, interval, more):
    for rule in doses.noaa_cns_after_interval.registry:
        now = doses.noaa_cns_after_interval(fraction, interval, rule)
        assert 0.0 <= now <= fraction
        assert doses.noaa_cns_after_interval(fraction, interval + more, rule) <= now
        assert doses.noaa_cns_after_interval(fraction, 0.0, rule) == fraction
    for rule in ("half_time_90_min", "half_time_120_min"):
        twice = doses.noaa_cns_after_interval(
            doses.noaa_cns_after_interval(fraction, interval, rule), more, rule
        )
        assert twice == pytest.approx(
            doses.noaa_cns_after_interval(fraction, interval + more, rule), abs=1e-12
        )
    assert doses.cns_recovery(interval) * doses.cns_recovery(more) == pytest.approx(
        doses.cns_recovery(interval + more), rel=1e-9
    )


@covers(*members("doses.oxygen_time_limit"))
@pytest.mark.parametrize("limits", doses.oxygen_time_limit.registry)
@given(share=st.floats(0.0, 1.0), more=st.floats(0.0, 1.0))
def test_permitted_times_fall_with_po2_and_end_with_the_table(limits, share, more):
    argument = doses.oxygen_time_limit.pick(limits=limits).arguments[0]
    low, high = argument.possible
    one, other = (low + (high - low) * s for s in (share * (1.0 - more), share))
    assert doses.oxygen_time_limit(other, limits) <= doses.oxygen_time_limit(one, limits)
    for outside in (low * 0.999, high * 1.001):
        with pytest.raises(RangeError, match="not extrapolated"):
            doses.oxygen_time_limit(outside, limits)


@covers(*members("doses.usn_closed_circuit_o2_limit"), "doses.usn_remaining_o2_time")
@given(
    depth=st.floats(20.0, 50.0),
    more=st.floats(0.0, 10.0),
    earlier=st.floats(0.0, 60.0),
    gap=st.floats(0.0, 300.0),
)
def test_closed_circuit_times_fall_with_depth(depth, more, earlier, gap):
    for rule in ("single_depth", "one_excursion"):
        limit = doses.usn_closed_circuit_o2_limit(depth, rule)
        assert doses.usn_closed_circuit_o2_limit(min(depth + more, 50.0), rule) <= limit
        left = doses.usn_remaining_o2_time(limit, earlier, gap)
        assert left == pytest.approx(limit - earlier if gap < 120.0 else limit)
        with pytest.raises(RangeError, match="not extrapolated"):
            doses.usn_closed_circuit_o2_limit(50.01, rule)


@covers(*members("doses.cns_probit"), *members("doses.cns_symptom_risk_of_exposure"))
@populations
@given(po2=st.floats(50.0, 300.0), duration=minutes)
def test_risk_is_the_normal_distribution_of_the_deviate(population, po2, duration):
    exposure = doses.cns_exposure(po2, po2, duration, population)
    z = doses.cns_probit(exposure, population)
    risk = doses.cns_symptom_risk_of_exposure(exposure, population)
    assert risk == pytest.approx(norm.cdf(z), rel=1e-10, abs=1e-300)
    assert risk == pytest.approx(doses.cns_symptom_risk(po2, duration, population), rel=1e-8, abs=1e-300)
    one = POPULATIONS[population]
    expected = (math.log(duration) + one.exponent * math.log(po2 / ATM) - one.median) / one.spread
    assert z == pytest.approx(expected, rel=1e-9, abs=1e-9)


@covers("doses.cns_onset_time")
@given(po2=st.floats(100.0, 148.0), rate=st.floats(4.0, 4.8), factor=st.floats(1.01, 1.2))
def test_onset_comes_sooner_with_more_oxygen_and_work(po2, rate, factor):
    assert doses.cns_onset_time(po2 * factor, rate) < doses.cns_onset_time(po2, rate)
    if po2 * factor < 1.466 * ATM:
        assert doses.cns_onset_time(po2, rate + 0.2) < doses.cns_onset_time(po2, rate)
    # Above 1.466 atm the form turns round; it is flagged there, and refused far from its anchor.
    assert doses.cns_onset_time(1.6 * ATM, rate + 0.2) > doses.cns_onset_time(1.6 * ATM, rate)
    with gp.validity("raise"), pytest.raises(gp.GasphysError, match="against all experience"):
        doses.cns_onset_time(1.6 * ATM, rate)
    for far in (1.0, 5.4):
        with pytest.raises(RangeError, match="not extrapolated"):
            doses.cns_onset_time(po2, far)


@covers(
    *members("doses.equivalent_narcotic_depth"),
    *members("doses.weighted_narcotic_depth"),
    *members("doses.equivalent_air_depth"),
    *members("doses.narcotic_fraction"),
)
@given(depth=st.floats(0.0, 100.0), oxygen=st.floats(0.0, 1.0), helium=st.floats(0.0, 1.0))
def test_equivalent_depths(depth, oxygen, helium):
    helium = helium * (1.0 - oxygen)
    gas, air = gp.Gas(oxygen=oxygen, helium=helium), gp.Gas.parse("air")
    for unit, surface in (("msw", 10.0), ("fsw", 33.0), ("m", 10.0)):
        found = {
            "nitrogen": doses.equivalent_narcotic_depth(depth, gas, unit),
            "oxygen_counted": doses.equivalent_narcotic_depth(depth, gas, unit, o2_counted=True),
            **{
                w: doses.weighted_narcotic_depth(depth, gas, unit, weights=w)
                for w in ("reported", "oil_solubility")
            },
        }
        for weights, value in found.items():
            share = doses.narcotic_fraction(gas, weights=weights) / doses.narcotic_fraction(
                air, weights=weights
            )
            assert value == pytest.approx((depth + surface) * share - surface, rel=1e-9, abs=1e-9)
            assert -surface - 1e-9 <= value
        assert found["nitrogen"] == pytest.approx(doses.equivalent_air_depth(depth, gas, unit), abs=1e-9)
        for counted in (False, True):
            assert doses.equivalent_narcotic_depth(depth, air, unit, counted) == pytest.approx(
                depth, abs=1e-9
            )
    # Helium counts nothing in any convention, argon in place of nitrogen is no less.
    for weights in ("nitrogen", "oxygen_counted", "reported", "oil_solubility"):
        assert doses.narcotic_fraction(gp.Gas(oxygen=0.0, helium=1.0), weights=weights) == 0.0
    argon = gp.Gas(oxygen=0.2, argon=0.8)
    assert doses.equivalent_narcotic_depth(depth, argon) == pytest.approx((depth + 10.0) * 0.8 / 0.79 - 10.0)


@covers("doses.surface_equivalent", "doses.absorbent_capacity", "doses.absorbent_ceiling")
@given(fraction=st.floats(0.0, 0.1), pressure=st.floats(50.0, 2000.0), factor=st.floats(1.0, 3.0))
def test_surface_equivalent_and_absorbents_are_proportional(fraction, pressure, factor):
    one = doses.surface_equivalent(fraction, pressure)
    assert doses.surface_equivalent(fraction, pressure * factor) == pytest.approx(one * factor)
    assert doses.surface_equivalent(fraction, ATM) == pytest.approx(fraction)
    capacity = doses.absorbent_capacity(100.0, 2.0, 2.5)
    assert doses.absorbent_capacity(100.0 * factor, 2.0, 2.5 * factor) == pytest.approx(capacity)
    (minutes_left,) = doses.absorbent_capacity.solve_for(
        "duration", absorbent_capacity=capacity, co2_flow=2.0, absorbent_mass=2.5
    )
    assert minutes_left == pytest.approx(100.0)
    warm, cold = doses.absorbent_ceiling(0.8, 20.0), doses.absorbent_ceiling(0.8, 0.0)
    assert warm / cold == pytest.approx(293.15 / 273.15)
