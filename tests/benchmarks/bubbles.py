"""Speed of the bubble models as ratios to compiled loops within one run; never part of pass or fail.

Run ``python tests/benchmarks/bubbles.py``; numba is needed for the compiled loops only. They are written the
obvious way, one dive or one bubble after the other, and find the same stops and radii: that is checked first.
They return bare numbers, ours labelled datasets with reasons. Other work on the machine disturbs; take the
smallest ratio of several runs.
"""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from typing import Any

import numpy as np
import xarray as xr

import gasphys as gp
from gasphys import Exposure, ascent, bubbles

SURFACE, VAPOR, OTHER = 101.325, 47.0 * 0.133322387415, 102.0 * 0.133322387415
GAMMA, GAMMA_C, RADII, HEALS = 17.9, 257.0, (0.8, 0.7), 20160.0
LAMBDA = 7500.0 * 101.325 / 33.0
GASES = [("nitrox 48", 20.0), ("oxygen", 6.0)]
MIXES = np.array([[0.35, 0.48], [0.52, 0.0], [0.0, 0.0]])
DEEPEST = np.array([0.0, 20.0, 6.0])
MODEL = "yount_hoffman_1986"


def best(function: Callable[[], Any], repeats: int) -> float:
    """Return the shortest time of a function [ms]."""
    found = math.inf
    for _ in range(repeats):
        begin = time.perf_counter()
        function()
        found = min(found, time.perf_counter() - begin)
    return 1e3 * found


def compiled_planner() -> Callable[..., Any]:
    """Return a planner of one dive after the other, compiled: open skins, defaults of the model."""
    import numba

    @numba.njit
    def advance(p: Any, minutes: float, start: float, end: float, mix: Any, rate: Any) -> None:
        for c in range(p.shape[0]):
            for g in range(2):
                a, k = mix[g] * (start - VAPOR), rate[c, g]
                slope = mix[g] * (end - start) / minutes
                p[c, g] = a + slope * (minutes - 1.0 / k) - (a - p[c, g] - slope / k) * math.exp(-k * minutes)

    @numba.njit
    def allowed(p: Any, pressure: float, gradient: Any) -> bool:
        for c in range(p.shape[0]):
            total = p[c, 0] + p[c, 1]
            own = (p[c, 0] * gradient[c, 0] + p[c, 1] * gradient[c, 1]) / total
            if total + OTHER > (pressure + own) * (1.0 + 1e-9):
                return False
        return True

    @numba.njit
    def gas_at(depth: float) -> int:
        found = 0
        for k in range(1, DEEPEST.shape[0]):
            if DEEPEST[k] >= depth - 1e-9 and (found == 0 or DEEPEST[k] < DEEPEST[found]):
                found = k
        return found

    @numba.njit
    def travel(p: Any, depth: float, target: float, rate: Any) -> None:
        while depth > target + 1e-9:
            there = target
            for k in range(1, DEEPEST.shape[0]):
                if there < DEEPEST[k] < depth - 1e-9:
                    there = DEEPEST[k]
            mix = MIXES[gas_at(0.5 * (depth + there))]
            advance(p, (depth - there) / 9.0, SURFACE + 10.0 * depth, SURFACE + 10.0 * there, mix, rate)
            depth = there

    @numba.njit
    def may_go(p: Any, depth: float, target: float, gradient: Any, rate: Any) -> bool:
        arrived = p.copy()
        travel(arrived, depth, target, rate)
        return allowed(arrived, SURFACE + 10.0 * target, gradient)

    @numba.njit
    def climb(p: Any, depth: float, gradient: Any, rate: Any, stops: Any) -> float:
        minutes = depth / 9.0
        stops[:] = 0.0
        if may_go(p, depth, 0.0, gradient, rate):
            travel(p, depth, 0.0, rate)
            return minutes
        while depth > 0.0:
            target = math.ceil(depth / 3.0 - 1e-9) * 3.0 - 3.0
            while not may_go(p, depth, target, gradient, rate):
                here = SURFACE + 10.0 * depth
                advance(p, 1.0, here, here, MIXES[gas_at(depth)], rate)
                stops[round(depth / 3.0)] += 1.0
                minutes += 1.0
            travel(p, depth, target, rate)
            depth = target
        return minutes

    @numba.njit
    def zone(p: Any, depth: float, rate: Any) -> float:
        held, d = p.copy(), depth
        step = 9.0 / 60.0
        while d > 1e-9:
            new = max(d - step, 0.0)
            ahead = held.copy()
            travel(ahead, d, new, rate)
            for c in range(p.shape[0]):
                if ahead[c, 0] + ahead[c, 1] + OTHER > SURFACE + 10.0 * new:
                    low, high = new, d
                    for _ in range(40):
                        mid = 0.5 * (low + high)
                        tried = held.copy()
                        travel(tried, d, mid, rate)
                        over = False
                        for e in range(p.shape[0]):
                            over |= tried[e, 0] + tried[e, 1] + OTHER > SURFACE + 10.0 * mid
                        if over:
                            low = mid
                        else:
                            high = mid
                    return (depth - low) / 9.0
            held, d = ahead, new
        return depth / 9.0

    @numba.njit
    def one(depth: float, minutes: float, rate: Any, stops: Any) -> int:
        n = rate.shape[0]
        p = np.zeros((n, 2))
        p[:, 0] = 0.79 * (SURFACE - VAPOR)
        rest = SURFACE - p.sum(axis=1) - OTHER
        advance(p, depth / 20.0, SURFACE, SURFACE + 10.0 * depth, MIXES[0], rate)
        crush = np.empty((n, 2))
        least = np.empty((n, 2))
        skin = 2.0 * (GAMMA_C - GAMMA)
        for c in range(n):
            felt = SURFACE + 10.0 * depth - p[c].sum() - OTHER - rest[c]
            for g in range(2):
                r = 1.0 / (1.0 / RADII[g] + felt / skin)
                r = r + (RADII[g] - r) * (1.0 - math.exp(-minutes / HEALS))
                crush[c, g] = skin * (1.0 / r - 1.0 / RADII[g])
                least[c, g] = GAMMA * skin / (GAMMA_C * r)
        advance(p, minutes, SURFACE + 10.0 * depth, SURFACE + 10.0 * depth, MIXES[0], rate)
        begin = zone(p, depth, rate)
        gradient, before, share = least.copy(), np.full(stops.shape[0], -1.0), GAMMA / GAMMA_C
        for k in range(60):
            held = p.copy()
            time_up = climb(held, depth, gradient, rate, stops)
            if (stops == before).all():
                return k + 1
            before[:] = stops
            for c in range(n):
                he, over = held[c, 1], held[c, 0] - 0.79 * (SURFACE - VAPOR)
                k_n2, k_he = rate[c, 0], rate[c, 1]
                after = 0.0
                if he + over > 0.0:
                    end = 1e9
                    if over < 0.0:
                        end = math.log(he / -over) / (k_he - k_n2)
                    after = he / k_he * (1.0 - math.exp(-k_he * end))
                    after = (after + over / k_n2 * (1.0 - math.exp(-k_n2 * end))) / (he + over)
                t = max(time_up - begin + after, 1e-6)
                for g in range(2):
                    b = least[c, g] + LAMBDA * share / t
                    gradient[c, g] = 0.5 * (
                        b + math.sqrt(b * b - 4.0 * share * share * LAMBDA * crush[c, g] / t)
                    )
        return 60

    @numba.njit
    def many(depths: Any, minutes: Any, rate: Any, stops: Any) -> None:
        for k in range(depths.shape[0]):
            one(depths[k], minutes[k], rate, stops[k])

    return many


def plans(count: int) -> None:
    """Print the time of trimix plans in lockstep beside the compiled planner."""
    model = bubbles.varying_permeability()
    rate = math.log(2.0) / np.array(model.tissues.half_time)
    rng = np.random.default_rng(7)
    depth = rng.uniform(45.0, 60.0, count) if count > 1 else np.array([56.0])
    minutes = rng.uniform(12.0, 25.0, count) if count > 1 else np.array([22.0])
    stops = np.zeros((count, 40))
    many = compiled_planner()
    many(depth, minutes, rate, stops)
    deep, stay = (
        xr.DataArray(v, dims="n", attrs={"units": u}) for v, u in ((depth, "msw"), (minutes, "min"))
    )
    if count == 1:
        deep, stay = float(depth[0]), float(minutes[0])
    with gp.validity("ignore"):
        bottom = Exposure.start("trimix 17/48").travel(depth=deep, rate=20.0).stay(stay)

        def ours() -> Any:
            return ascent.plan(bottom, GASES, model)

        found = ours().stops
        total = np.atleast_1d(found.duration.sum("stop").values)
        # Where passes run in a circle ours is the longest of them, the compiled one whichever came last.
        assert (total == stops.sum(axis=1)).mean() > 0.98
        one = best(lambda: many(depth, minutes, rate, stops), 5 if count > 1 else 50)
        two = best(ours, 3 if count > 1 else 30)
    same = int((total == stops.sum(axis=1)).sum())
    print(
        f"{count} trimix plans: compiled {one:.2f} ms, ours {two:.1f} ms, ratio {two / one:.1f}; {same} alike"
    )


def compiled_growth() -> Callable[..., Any]:
    """Return the growth of one bubble after the other, compiled: a Runge-Kutta pair with own steps."""
    import numba

    @numba.njit
    def slope(u: float, total: float, p: float, rise: float, art: float, around: Any) -> Any:
        sigma, met, d, alpha, shell, per, speed = around
        r = math.sqrt(max(u, 1e-30))
        inside = p - met + 2000.0 * sigma / r
        tissue = (total - per * 4.0 / 3.0 * math.pi * r**3 * inside) / alpha
        flow = alpha * d * (tissue - inside) * (r + r * r / shell)
        du = 2.0 * (flow - r**3 * rise / 3.0) / ((p - met) * r + 4000.0 / 3.0 * sigma)
        return du, alpha * speed * (art - tissue)

    @numba.njit
    def one(
        u: float, total: float, minutes: float, p: float, art: float, around: Any, tolerance: float
    ) -> Any:
        # Bogacki and Shampine, orders 3 and 2.
        t, h, gone = 0.0, 1e-4, 1e-6 * u
        while t < minutes:
            h = min(h, minutes - t)
            a1, b1 = slope(u, total, p, 0.0, art, around)
            if a1 < 0.0:
                h = min(h, 0.5 * u / -a1)
            a2, b2 = slope(u + 0.5 * h * a1, total + 0.5 * h * b1, p, 0.0, art, around)
            a3, b3 = slope(u + 0.75 * h * a2, total + 0.75 * h * b2, p, 0.0, art, around)
            un = u + h * (2.0 * a1 + 3.0 * a2 + 4.0 * a3) / 9.0
            tn = total + h * (2.0 * b1 + 3.0 * b2 + 4.0 * b3) / 9.0
            a4, b4 = slope(un, tn, p, 0.0, art, around)
            e1 = h * (-5.0 / 72.0 * a1 + a2 / 12.0 + a3 / 9.0 - a4 / 8.0)
            e2 = h * (-5.0 / 72.0 * b1 + b2 / 12.0 + b3 / 9.0 - b4 / 8.0)
            worst = max(abs(e1) / max(un, 1e-6), abs(e2) / max(tn, 1e-6)) / tolerance
            if worst <= 1.0 and un > 0.0:
                u, total, t = un, tn, t + h
                if u < gone:
                    return 0.0, total
            h *= min(4.0, max(0.1, 0.9 * max(worst, 1e-12) ** (-1.0 / 3.0)))
        return u, total

    @numba.njit
    def many(
        radii: Any, tissue: float, minutes: float, p: float, art: float, around: Any, tolerance: float
    ) -> Any:
        out = np.empty(radii.shape[0])
        sigma, met, _, alpha, _, per, _ = around
        for k in range(radii.shape[0]):
            r = radii[k]
            total = alpha * tissue + per * 4.0 / 3.0 * math.pi * r**3 * (p - met + 2000.0 * sigma / r)
            u, _ = one(r * r, total, minutes, p, art, around, tolerance)
            out[k] = math.sqrt(max(u, 0.0))
        return out

    return many


def growths(count: int) -> None:
    """Print the time of many radii over two hours at the surface beside the compiled loop."""
    many = compiled_growth()
    saturated = (
        Exposure.start("air").travel(depth=18.0, rate=20.0).stay(600.0).travel(depth=0.0, minutes=1e-6)
    )
    surface = Exposure.start("air").stay(120.0)
    radii = np.geomspace(1.0, 50.0, count)
    settings: dict[str, Any] = {"bubbles_per_ml": 500.0, "tolerance": 1e-6}
    start = bubbles.growth(saturated, radii, since=float(saturated.duration) - 1e-6, **settings)
    start["final_radius"].values[:] = radii
    tissue = float(np.median(start["final_tissue_pressure"].values))
    start["final_tissue_pressure"].values[:] = tissue
    start["appearance_time"].values[:] = 0.0

    def ours() -> Any:
        return bubbles.growth(surface, initial=start, **settings)

    around = (0.05, 0.18 * 101.325, 1.2e5, 0.0144, 10.0, 500.0e-12, math.log(2.0) / 40.0)
    art = 0.79 * (SURFACE - VAPOR)

    def compiled() -> Any:
        return many(radii, tissue, 120.0, SURFACE, art, around, 1e-6)

    np.testing.assert_allclose(ours().final_radius, compiled(), rtol=1e-4, atol=1e-3)
    one, two = best(compiled, 3), best(ours, 3)
    print(f"{count} radii over 2 h: compiled {one:.1f} ms, ours {two:.0f} ms, ratio {two / one:.1f}")


if __name__ == "__main__":
    plans(1)
    plans(1000)
    growths(1000)
