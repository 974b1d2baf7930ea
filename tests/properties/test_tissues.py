"""Properties of the equations of dissolved-gas models, as the literature states them."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import gasphys as gp
from gasphys import tissues
from gasphys.constants import ATMOSPHERE
from gasphys.tissues.equations import linear_washout_time

from .coverage import covers

pressures = st.floats(20.0, 1500.0)
tensions = st.floats(0.0, 800.0)
halves = st.floats(1.0, 700.0)
minutes = st.floats(0.0, 500.0)
a_values = st.floats(0.0, 180.0)
b_values = st.floats(0.4, 1.0)


@pytest.fixture(autouse=True)
def _quiet():
    with gp.validity("ignore"):
        yield


# -- What reaches the tissue ----------------------------------------------------------------------


@covers("tissues.alveolar_inert_pressure")
@given(p=pressures, f=st.floats(0.0, 1.0), vapor=st.floats(0.0, 7.0), r=st.floats(0.7, 1.0))
def test_alveolar_gas_follows_the_fraction_and_is_dry_without_vapor(p, f, vapor, r):
    found = tissues.alveolar_inert_pressure(p, f, vapor, r)
    assert found == pytest.approx(f * tissues.alveolar_inert_pressure(p, 1.0, vapor, r), rel=1e-14, abs=1e-12)
    assert tissues.alveolar_inert_pressure(p, f, 0.0, 1.0) == f * p
    # A smaller exchange ratio leaves more inert gas in the alveoli.
    assert found >= tissues.alveolar_inert_pressure(p, f, vapor, 1.0)


@covers("tissues.loop_alveolar_inert_pressure")
@given(p=pressures, setpoint=st.floats(16.0, 160.0), share=st.floats(0.0, 1.0))
def test_a_loop_leaves_what_the_set_point_does_not_take(p, setpoint, share):
    found = tissues.loop_alveolar_inert_pressure(p, setpoint, share, 6.27)
    assert found >= 0.0
    assert found == 0.0 or found == pytest.approx((p - 6.27 - setpoint) * share, rel=1e-12)
    if p <= setpoint + 6.27:
        assert found == 0.0


@covers("tissues.arterial_inert_pressure")
@given(p=pressures, o2=st.floats(0.0, 1.0), co2=st.floats(0.5, 8.0))
def test_arterial_inert_gas_is_never_negative(p, o2, co2):
    found = tissues.arterial_inert_pressure(p, o2 * p, co2)
    assert found >= 0.0
    assert tissues.arterial_inert_pressure(p, p, co2) == 0.0
    moist = tissues.arterial_inert_pressure(p, o2 * p, co2, 6.0)
    assert moist == pytest.approx(max(found - 6.0, 0.0), abs=1e-9)
    if p * (1.0 - o2) > co2:
        assert found == pytest.approx((1.0 - o2) * p - co2, rel=1e-9, abs=1e-9)


# -- Exponential compartments ---------------------------------------------------------------------


@covers("tissues.uptake_share")
@given(n=st.integers(0, 20), half=halves)
def test_after_n_half_times_two_to_the_minus_n_is_left(n, half):
    assert 1.0 - tissues.uptake_share(n * half, half) == pytest.approx(2.0**-n, rel=1e-9)


@given(half=halves, x=st.floats(1e-14, 1e-6))
def test_the_shortest_times_lose_no_digits(half, x):
    share = tissues.uptake_share(x * half, half)
    assert share == pytest.approx(np.log(2.0) * x, rel=1e-6)
    # The ramp has followed half of that share: x/2 of the change.
    ramp = tissues.tissue_pressure(0.0, 0.0, 100.0, x * half, half)
    assert ramp == pytest.approx(100.0 * np.log(2.0) * x / 2.0, rel=1e-6)


@covers("tissues.tissue_pressure")
@given(p0=tensions, a=pressures, b=pressures, t=minutes, half=halves, part=st.floats(0.0, 1.0))
def test_splitting_a_stretch_changes_nothing(p0, a, b, t, half, part):
    f = tissues.tissue_pressure
    whole = f(p0, a, b, t, half)
    middle = a + (b - a) * part
    twice = f(f(p0, a, middle, t * part, half), middle, b, t * (1.0 - part), half)
    assert twice == pytest.approx(whole, rel=1e-12, abs=1e-10)


@given(p0=tensions, a=pressures, t=minutes, half=halves)
def test_constant_depth_and_mirror_images(p0, a, t, half):
    f = tissues.tissue_pressure
    held = f(p0, a, a, t, half)
    assert min(p0, a) - 1e-9 <= held <= max(p0, a) + 1e-9
    assert held == pytest.approx(p0 + (a - p0) * (1.0 - 2.0 ** (-t / half)), rel=1e-9, abs=1e-9)
    # Step uptake and washout are mirror images; on nothing inert the tension only decays.
    assert f(0.0, a, a, t, half) + f(a, 0.0, 0.0, t, half) == pytest.approx(a, rel=1e-12)
    assert f(p0, 0.0, 0.0, t, half) == pytest.approx(p0 * 2.0 ** (-t / half), rel=1e-9, abs=1e-12)


@given(
    p=st.tuples(tensions, tensions),
    a=st.tuples(pressures, pressures),
    t=minutes,
    half=halves,
    w=st.floats(0.0, 1.0),
)
def test_tensions_are_linear_in_what_was_breathed(p, a, t, half, w):
    f = tissues.tissue_pressure
    mixed = f(*(w * x + (1.0 - w) * y for x, y in (p, a, a[::-1])), t, half)
    apart = w * f(p[0], a[0], a[1], t, half) + (1.0 - w) * f(p[1], a[1], a[0], t, half)
    assert mixed == pytest.approx(apart, rel=1e-11, abs=1e-9)


def test_a_long_ramp_lags_by_rate_over_k():
    """1 m/min on air, 27 min: the lag is 0.079 bar/min over k, 3.0773 bar [computed]."""
    rate, half, t = 0.079, 27.0, 27.0 * 60
    end = 0.74 + rate * t
    lag = end - tissues.tissue_pressure(0.74, 0.74, end, t, half)
    assert lag == pytest.approx(3.0773, abs=5e-5)


@covers("tissues.time_to_tissue_pressure")
@given(p0=tensions, a=pressures, t=st.floats(0.01, 300.0), half=st.floats(5.0, 700.0))
def test_time_is_the_inverse_of_the_stay(p0, a, t, half):
    reached = tissues.tissue_pressure(p0, a, a, t, half)
    if abs(p0 - a) > 1.0 and t < 10.0 * half:
        assert tissues.time_to_tissue_pressure(p0, a, reached, half) == pytest.approx(t, rel=1e-6, abs=1e-6)


# -- The linear branch ----------------------------------------------------------------------------


@covers("tissues.washout_threshold")
@given(p=pressures, po2=st.floats(3.0, 10.0), pco2=st.floats(4.5, 8.0), over=st.floats(0.0, 40.0))
def test_the_threshold_moves_with_ambient_pressure(p, po2, pco2, over):
    low, high = (tissues.washout_threshold(p + d, po2, pco2, over) for d in (0.0, 10.0))
    assert high - low == pytest.approx(10.0, rel=1e-9)
    assert low == pytest.approx(tissues.washout_threshold(p, po2, pco2) + over, abs=1e-9)
    assert tissues.washout_threshold(p, po2, pco2, over, 6.0) == pytest.approx(low - 6.0, abs=1e-9)


@covers("tissues.linear_tissue_pressure")
@given(
    above=st.floats(1.0, 200.0),
    level=st.floats(80.0, 600.0),
    gap=st.floats(5.0, 80.0),
    half=halves,
    t=st.floats(0.1, 99.0),
)
def test_the_linear_branch_is_straight_continuous_in_slope_and_slower(above, level, gap, half, t):
    p0, inert = level + above, level - gap
    f = tissues.linear_tissue_pressure
    one, two = (f(p0, inert, inert, level, level, k * t, half) for k in (1.0, 2.0))
    assert p0 - two == pytest.approx(2.0 * (p0 - one), rel=1e-9, abs=1e-9)
    if one >= level:  # as long as the branch lasts it is the slower one
        assert one >= tissues.tissue_pressure(p0, inert, inert, t, half) - 1e-9
    # At the threshold both branches have the same rate.
    tiny = 1e-6 * half
    straight = (f(level, inert, inert, level, level, tiny, half) - level) / tiny
    bent = (tissues.tissue_pressure(level, inert, inert, tiny, half) - level) / tiny
    assert straight == pytest.approx(bent, rel=1e-5)
    # And it meets the threshold when it says.
    meets = linear_washout_time(p0, inert, inert, level, level, t, half)
    assert f(p0, inert, inert, level, level, meets, half) == pytest.approx(level, rel=1e-9)


@given(
    above=st.floats(1.0, 50.0),
    level=st.floats(80.0, 600.0),
    gap=st.floats(5.0, 80.0),
    fall=st.floats(0.0, 60.0),
    t=st.floats(1.0, 99.0),
)
def test_on_a_ramp_the_parabola_meets_the_moving_threshold(above, level, gap, fall, t):
    half = 20.0
    first, last = level - gap, level - gap - 0.79 * fall
    args = (level + above, first, last, level, level - fall, t, half)
    meets = linear_washout_time(*args)
    if np.isfinite(meets) and 0.0 < meets <= t:
        share = meets / t
        there = tissues.linear_tissue_pressure(
            level + above, first, first + (last - first) * share, level, level - fall * share, meets, half
        )
        assert there == pytest.approx(level - fall * share, rel=1e-9)


# -- Serial compartments --------------------------------------------------------------------------


@covers("tissues.slip_flow")
@given(p=pressures, d=st.floats(-0.01, 0.01), q=pressures)
def test_slip_flow_is_antisymmetric_and_faster_at_depth(p, d, q):
    a, b = 2.596e-5, 836.7
    f = tissues.slip_flow
    assert f(p, q, a, b) == pytest.approx(-f(q, p, a, b), rel=1e-12, abs=1e-12)
    assert f(p, p, a, b) == 0.0
    # Small differences exchange at the rate A (B + 2 P).
    assert f(p + d, p, a, b) == pytest.approx(a * (b + 2.0 * p) * d, rel=1e-4, abs=1e-12)


# -- Limits ---------------------------------------------------------------------------------------


@covers("tissues.m_value", "tissues.ceiling_pressure", "tissues.gradient_fraction", "tissues.limit_fraction")
@given(p=pressures, a=st.floats(1.0, 180.0), b=b_values, g=st.floats(0.0, 1.0))
def test_at_its_ceiling_a_compartment_uses_just_that_gradient(p, a, b, g):
    ceiling = tissues.ceiling_pressure(p, a, b, g)
    limit = tissues.m_value.raw(ceiling, a, b)
    assert p == pytest.approx(ceiling + g * (limit - ceiling), rel=1e-9)
    assert tissues.ceiling_pressure(p, a, b, 0.0) == p
    assert tissues.ceiling_pressure(p, a, b) == pytest.approx((p - a) * b, rel=1e-12)
    if ceiling > 5.0:
        assert tissues.gradient_fraction(p, ceiling, limit) == pytest.approx(g, abs=1e-7)
        assert tissues.limit_fraction(limit, limit) == 1.0
        assert (tissues.limit_fraction(p, limit) <= 1.0 + 1e-12) or g == 1.0


@given(
    p=tensions,
    more=st.floats(0.0, 100.0),
    a=a_values,
    b=b_values,
    g=st.floats(0.0, 1.0),
    less=st.floats(0.0, 1.0),
)
def test_the_ceiling_rises_with_tension_and_with_strictness(p, more, a, b, g, less):
    f = tissues.ceiling_pressure
    assert f(p + more, a, b, g) >= f(p, a, b, g) - 1e-9
    if f(p, a, b, 1.0) > 0.0:
        assert f(p, a, b, g * less) >= f(p, a, b, g) - 1e-9


@covers("tissues.intercept_from_surfacing")
@given(m0=st.floats(120.0, 350.0), slope=st.floats(1.0, 2.5), surface=st.floats(60.0, 102.0))
def test_a_surfacing_value_and_slope_go_there_and_back(m0, slope, surface):
    a = tissues.intercept_from_surfacing(m0, slope, surface)
    assert tissues.m_value(surface, a, 1.0 / slope) == pytest.approx(m0, rel=1e-12)
    # A ratio is a limit with a = 0 and b = 1/ratio.
    assert tissues.intercept_from_surfacing(slope * surface, slope, surface) == pytest.approx(0.0, abs=1e-9)


@covers("tissues.mixed_m_value_a", "tissues.mixed_m_value_b")
@given(n=tensions, h=tensions, x=a_values, y=a_values, u=b_values, v=b_values, k=st.floats(0.1, 10.0))
def test_mixed_coefficients_are_means_by_tension(n, h, x, y, u, v, k):
    a, b = tissues.mixed_m_value_a(n, h, x, y), tissues.mixed_m_value_b(n, h, u, v)
    assert min(x, y) - 1e-9 <= a <= max(x, y) + 1e-9
    assert min(u, v) - 1e-9 <= b <= max(u, v) + 1e-9
    assert tissues.mixed_m_value_a(max(n, 1.0), 0.0, x, y) == pytest.approx(x, rel=1e-12)
    assert tissues.mixed_m_value_b(0.0, max(h, 1.0), u, v) == pytest.approx(v, rel=1e-12)
    assert tissues.mixed_m_value_a(0.0, 0.0, x, y) == x
    # Only the proportion of the two matters, and gases may change places.
    assert tissues.mixed_m_value_a(k * n, k * h, x, y) == pytest.approx(a, rel=1e-9, abs=1e-9)
    if n + h > 0.0:
        assert tissues.mixed_m_value_a(h, n, y, x) == pytest.approx(a, rel=1e-9, abs=1e-9)


# -- Prebreathe, window, altitude -----------------------------------------------------------------


@covers("tissues.exercise_half_time")
@given(v=st.floats(1.0, 60.0))
def test_work_speeds_washout_up_to_a_bound(v):
    f = tissues.exercise_half_time
    assert f(v) > f(v + 1.0) > np.log(2.0) * 51.937
    assert f(3.5) == pytest.approx(360.0, abs=1.5)  # the resting model


@covers("tissues.supersaturation_ratio")
@given(p=st.floats(1.0, 100.0), suit=st.floats(10.0, 100.0))
def test_the_ratio_is_one_at_ambient_pressure(p, suit):
    assert tissues.supersaturation_ratio(suit, suit) == 1.0
    assert tissues.supersaturation_ratio(p, suit) == pytest.approx(p / suit, rel=1e-14)


@covers("tissues.oxygen_window")
@given(p=st.floats(50.0, 500.0), f=st.floats(0.15, 1.0))
def test_the_window_grows_by_the_oxygen_fraction(p, f):
    w = tissues.oxygen_window
    assert w(p + 10.0, f) - w(p, f) == pytest.approx(10.0 * f, rel=1e-9)
    assert w(p, f, 5.0, 6.0, 6.0) == pytest.approx(f * (p - 6.0) - 11.0, abs=1e-9)


@covers("tissues.sea_level_equivalent_depth", "tissues.altitude_stop_depth")
@given(d=st.floats(0.1, 100.0), p=st.floats(50.0, 101.0))
def test_equivalent_depth_is_the_depth_at_sea_level_and_deeper_above(d, p):
    f = tissues.sea_level_equivalent_depth
    assert f(d, float(ATMOSPHERE)) == pytest.approx(d, rel=1e-14)
    assert f(d, p) > d
    assert f(d, p - 1.0) > f(d, p)
    assert tissues.altitude_stop_depth(f(d, p), p) == pytest.approx(d, rel=1e-12)
