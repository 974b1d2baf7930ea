"""Properties of the equations of bubbles."""

from __future__ import annotations

import math

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from gasphys import bubbles

from .coverage import covers

radii = st.floats(0.3, 2.0)
pressures = st.floats(60.0, 2000.0)
tensions = st.floats(0.01, 0.08)
minutes = st.floats(0.0, 1e5)
halves = st.floats(0.5, 800.0)


@covers("bubbles.bubble_pressure", "bubbles.critical_radius")
@given(r=st.floats(0.5, 100.0), p=pressures, sigma=tensions, met=st.floats(0.0, 20.0), m=st.floats(0.0, 1e-3))
def test_laplace(r: float, p: float, sigma: float, met: float, m: float) -> None:
    f = bubbles.bubble_pressure
    plain = f(p, r, sigma)
    assert math.isclose((plain - p) * r, 2000.0 * sigma, rel_tol=1e-9)
    assert math.isclose(f(p, 2.0 * r, sigma) - p, 0.5 * (plain - p), rel_tol=1e-9)
    assert math.isclose(f(p, r, sigma, m, met) + met, plain + m * 4.0 / 3.0 * math.pi * r**3, rel_tol=1e-9)
    # At its critical radius a bubble is in equilibrium with the liquid.
    assert math.isclose(bubbles.critical_radius(plain / p - 1.0, sigma, p), r, rel_tol=1e-6)


@covers("bubbles.crushed_radius", "bubbles.adjusted_crushing_pressure")
@given(r0=radii, p=st.floats(0.0, 2000.0), more=st.floats(1.0, 500.0))
def test_crushing(r0: float, p: float, more: float) -> None:
    r = bubbles.crushed_radius(r0, p)
    assert 0.0 < r <= r0
    assert bubbles.crushed_radius(r0, p + more) < r
    assert math.isclose(bubbles.adjusted_crushing_pressure(r, r0), p, rel_tol=1e-9, abs_tol=1e-9)
    # In two steps as in one: the second starts where the first ended.
    assert math.isclose(bubbles.crushed_radius(r, more), bubbles.crushed_radius(r0, p + more), rel_tol=1e-9)


@covers("bubbles.closed_nucleus_pressure", "bubbles.closed_nucleus_radius", "bubbles.trapped_gas_pressure")
@given(r0=radii, tension=st.floats(60.0, 500.0), more=st.floats(0.1, 5000.0))
def test_closed_skins(r0: float, tension: float, more: float) -> None:
    onset = 830.865
    star = bubbles.crushed_radius(r0, onset)
    start = tension + onset
    assert math.isclose(bubbles.closed_nucleus_radius(start, star, start, tension), star, rel_tol=1e-9)
    r = bubbles.closed_nucleus_radius(start + more, star, start, tension)
    assert r < star
    assert math.isclose(bubbles.closed_nucleus_pressure(r, star, start, tension), start + more, rel_tol=1e-9)
    inside = bubbles.trapped_gas_pressure(r, star, tension)
    assert math.isclose(inside * r**3, tension * star**3, rel_tol=1e-9)
    # The identity of the open range holds with the crushing actually felt.
    felt = start + more - inside
    assert math.isclose(bubbles.adjusted_crushing_pressure(r, r0), felt, rel_tol=1e-7)
    # The trapped gas resists: the open formula would crush more.
    assert bubbles.crushed_radius(r0, onset + more) < r


@covers("bubbles.regenerated_radius")
@given(r0=radii, share=st.floats(0.2, 1.0), one=minutes, two=minutes)
def test_healing(r0: float, share: float, one: float, two: float) -> None:
    f, r = bubbles.regenerated_radius, share * r0
    assert f(r, r0, 0.0) == r
    assert r - 1e-12 <= f(r, r0, one) <= r0 + 1e-12
    assert math.isclose(f(f(r, r0, one), r0, two), f(r, r0, one + two), rel_tol=1e-9)


@covers("bubbles.minimum_gradient")
@given(r0=radii, p=st.floats(0.0, 800.0))
def test_least_gradient_is_linear_in_crushing(r0: float, p: float) -> None:
    f = bubbles.minimum_gradient
    slope = (f(bubbles.crushed_radius(r0, p)) - f(r0)) / max(p, 1e-3)
    if p > 1.0:
        assert math.isclose(slope, 0.06964981, rel_tol=1e-6)
    assert math.isclose(f(0.5 * r0), 2.0 * f(r0), rel_tol=1e-12)


@covers("bubbles.mixed_gradient")
@given(n2=st.floats(0.0, 500.0), he=st.floats(0.0, 500.0), a=st.floats(20.0, 200.0), b=st.floats(20.0, 200.0))
def test_mixtures(n2: float, he: float, a: float, b: float) -> None:
    f = bubbles.mixed_gradient
    mixed = f(n2, he, a, b)
    assert min(a, b) - 1e-9 <= mixed <= max(a, b) + 1e-9
    assert f(n2, 0.0, a, b) == a
    if he > 1.0:
        assert math.isclose(f(0.0, he, a, b), b, rel_tol=1e-9)
        assert math.isclose(mixed, f(he, n2, b, a), rel_tol=1e-9)


@covers("bubbles.critical_volume_gradient")
@given(r0=radii, p=st.floats(0.0, 800.0), t=st.floats(0.01, 1e5), lam=st.floats(0.0, 3e4))
def test_critical_volume(r0: float, p: float, t: float, lam: float) -> None:
    f = bubbles.critical_volume_gradient
    least = bubbles.minimum_gradient(bubbles.crushed_radius(r0, p))
    g = f(r0, p, t, lam)
    assert g >= least * (1.0 - 1e-12)
    assert math.isclose(f(r0, p, t, 0.0), least, rel_tol=1e-12)
    assert f(r0, p, 10.0 * t, lam) <= g * (1.0 + 1e-12)
    # The condition it solves: G T (G - p_ss)/(G - p gamma/gamma_c) = lambda gamma/gamma_c.
    share = 17.9 / 257.0
    if lam > 1.0:
        assert math.isclose(g * t * (g - least) / (g - p * share), lam * share, rel_tol=1e-5, abs_tol=1e-3)


@covers("bubbles.boyle_pressure", "bubbles.expanded_gradient")
@given(p1=pressures, g1=st.floats(10.0, 200.0), share=st.floats(0.1, 1.5))
def test_boyle(p1: float, g1: float, share: float) -> None:
    p2 = max(share * p1, 30.0)
    g2 = bubbles.expanded_gradient(p2, g1, p1)
    assert math.isclose(bubbles.boyle_pressure(g2, g1, p1), p2, rel_tol=1e-9)
    assert (g2 <= g1 * (1.0 + 1e-12)) is (p2 <= p1 * (1.0 + 1e-12))
    # (P + G) r^3 is kept, with r = 2 gamma/G.
    assert math.isclose((p2 + g2) / g2**3, (p1 + g1) / g1**3, rel_tol=1e-8)


@covers("bubbles.surface_excess_time")
@given(he=st.floats(0.0, 300.0), n2=st.floats(0.0, 300.0), h_he=halves, h_n2=halves)
def test_surface_excess(he: float, n2: float, h_he: float, h_n2: float) -> None:
    f = bubbles.surface_excess_time
    t = f(he, n2, 75.0, h_he, h_n2)
    assert t >= 0.0
    assert t <= max(h_he, h_n2) / math.log(2.0) * (1.0 + 1e-9) or n2 < 75.0
    if he + n2 <= 75.0:
        assert t == 0.0
    # Of one gas it is the time constant.
    assert math.isclose(f(0.0, 75.0 + n2 + 1.0, 75.0, h_he, h_n2), h_n2 / math.log(2.0), rel_tol=1e-9)
    assert math.isclose(f(he + 1.0, 75.0, 75.0, h_he, h_n2), h_he / math.log(2.0), rel_tol=1e-9)


@covers("bubbles.quasi_steady_dissolution_time")
@given(r=st.floats(0.1, 1000.0), f=st.floats(0.0, 1.0), k=st.floats(1.1, 5.0))
def test_lives(r: float, f: float, k: float) -> None:
    life = bubbles.quasi_steady_dissolution_time
    t = life(r, f)
    assert t > 0.0
    assert life(k * r, f) > t
    assert life(r, 0.9 * f) <= t * (1.0 + 1e-9)
    assert math.isclose(life(r, f, 2e-9 * k), t / k, rel_tol=1e-9)
    # Lengths scale: k times the radius and the surface tension, k squared times the life.
    assert math.isclose(life(k * r, f, 2e-9, 0.02, k * 0.0729), k * k * t, rel_tol=1e-6)


@covers("bubbles.unstirred_boundary", "bubbles.perfusion_boundary")
@given(t=st.floats(1e-6, 1e4), d=st.floats(1e-10, 1e-8), q=st.floats(1e-4, 1.0), k=st.floats(1.0, 9.0))
def test_boundaries(t: float, d: float, q: float, k: float) -> None:
    assert math.isclose(
        bubbles.unstirred_boundary(t, d), k * bubbles.unstirred_boundary(k * k * t, d), rel_tol=1e-9
    )
    assert math.isclose(
        bubbles.perfusion_boundary(k * k * q, 0.01, 0.01, d),
        k * bubbles.perfusion_boundary(q, 0.01, 0.01, d),
        rel_tol=1e-9,
    )  # fmt: skip


@covers("bubbles.gas_inflow", "bubbles.squared_radius_rate", "bubbles.composition_rate")
@given(r=st.floats(0.5, 200.0), pt=st.floats(50.0, 400.0), p=pressures, term=st.floats(0.0, 1.0))
def test_growth_balances_gas(r: float, pt: float, p: float, term: float) -> None:
    inside = bubbles.bubble_pressure(p, r, 0.05)
    flow = bubbles.gas_inflow(r, pt, inside, 2e-9, 0.0144, term)
    assert math.copysign(1.0, flow) == math.copysign(1.0, pt - inside) or flow == 0.0
    rate = bubbles.squared_radius_rate(r, flow, p, 0.0, 0.05)
    # d(p_b R^3)/dt = 3 I: differentiate numerically along the rate.
    h = 1e-6 * r * r / max(abs(rate), 1e-12)
    amount = [
        bubbles.bubble_pressure(p, math.sqrt(r * r + s * h * rate), 0.05) * (r * r + s * h * rate) ** 1.5
        for s in (-1, 1)
    ]
    assert math.isclose((amount[1] - amount[0]) / (2.0 * h), 3.0 * flow, rel_tol=1e-5, abs_tol=1e-3)
    # Shares of two gases change against each other.
    one = bubbles.composition_rate(0.3, 0.7 * flow, flow, r, inside)
    two = bubbles.composition_rate(0.7, 0.3 * flow, flow, r, inside)
    assert math.isclose(one, -two, rel_tol=1e-9, abs_tol=1e-12)


@covers("bubbles.counterdiffusion_ratio")
@given(k=st.tuples(*[st.floats(0.01, 100.0)] * 4), scale=st.floats(0.1, 10.0))
def test_two_layers(k: tuple[float, float, float, float], scale: float) -> None:
    f = bubbles.counterdiffusion_ratio
    ratio = f(*k)
    assert 0.0 < ratio < 2.0
    assert math.isclose(f(*(scale * x for x in k)), ratio, rel_tol=1e-9)
    if not math.isclose(k[0] * k[3], k[1] * k[2], rel_tol=1e-6):
        assert (ratio > 1.0) is (k[0] / k[1] > k[2] / k[3])
    assert math.isclose(f(k[0], k[1], k[0], k[1]), 1.0, rel_tol=1e-9)


@covers("bubbles.counterdiffusion_tension", "bubbles.counterdiffusion_peak_time")
@given(p=pressures, leaving=halves, share=st.floats(0.1, 0.9))
def test_switches(p: float, leaving: float, share: float) -> None:
    f, arriving = bubbles.counterdiffusion_tension, share * leaving
    assert f(p, p, 0.0, leaving, arriving) == p
    assert math.isclose(f(p, p, 3.0, leaving, leaving), p, rel_tol=1e-9)
    peak = bubbles.counterdiffusion_peak_time(p, p, leaving, arriving)
    top = f(p, p, peak, leaving, arriving)
    times = np.linspace(0.0, 5.0 * leaving, 41)
    # The faster gas arrives: the sum passes through a maximum, the other way round through a minimum.
    assert (f(p, p, times, leaving, arriving) <= top * (1.0 + 1e-9)).all()
    assert top > p
    low = f(p, p, bubbles.counterdiffusion_peak_time(p, p, arriving, leaving), arriving, leaving)
    assert (f(p, p, times, arriving, leaving) >= low * (1.0 - 1e-9)).all()
