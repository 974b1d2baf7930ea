"""Speed of ascent planning as ratios to a compiled planner within one run; never part of pass or fail.

Run ``python tests/benchmarks/ascent.py``; numba is needed for the compiled planner only. It is written the
obvious way, one scenario after the other, minute by minute, and finds the same stops: that is checked first.
It returns bare minutes, ours the labelled stops with their reasons and the lengthened exposure: for one plan
the ratio is that of a Dataset and some thousand calls of numpy to fifty microseconds of arithmetic.
"""

from __future__ import annotations

import math
import time
import tracemalloc
from collections.abc import Callable
from typing import Any

import numpy as np
import xarray as xr

import gasphys as gp
from gasphys import Exposure, ascent, tissues

SURFACE, VAPOR = 101.325, 6.27
RATE, SPACING, LAST = 9.0, 3.0, 3.0
LOW, HIGH = 0.4, 0.85
GASES = [("nitrox 48", 20.0), ("oxygen", 6.0)]
MODEL = "buhlmann_1995_c"


def compiled_planner() -> Callable[..., Any]:
    """Return a planner of two gases for one scenario after the other, compiled."""
    import numba

    @numba.njit
    def advance(p: Any, minutes: float, start: float, end: float, mix: Any, rate: Any) -> None:
        for c in range(p.shape[0]):
            for g in range(2):
                a, k = mix[g] * (start - VAPOR), rate[c, g]
                slope = mix[g] * (end - start) / minutes
                p[c, g] = a + slope * (minutes - 1.0 / k) - (a - p[c, g] - slope / k) * math.exp(-k * minutes)

    @numba.njit
    def allowed(p: Any, pressure: float, share: float, a: Any, b: Any) -> bool:
        for c in range(p.shape[0]):
            total = p[c, 0] + p[c, 1]
            own_a = (a[c, 0] * p[c, 0] + a[c, 1] * p[c, 1]) / total
            own_b = (b[c, 0] * p[c, 0] + b[c, 1] * p[c, 1]) / total
            limit = own_a + pressure / own_b
            if total > pressure + share * (limit * (1.0 + 1e-9) - pressure):
                return False
        return True

    @numba.njit
    def gas_at(depth: float, deepest: Any) -> int:
        best = 0
        for k in range(1, deepest.shape[0]):
            if deepest[k] >= depth - 1e-9 and (best == 0 or deepest[k] < deepest[best]):
                best = k
        return best

    @numba.njit
    def travel(p: Any, depth: float, target: float, mixes: Any, deepest: Any, rate: Any) -> None:
        while depth > target + 1e-9:
            there = target
            for k in range(1, deepest.shape[0]):
                if there < deepest[k] < depth - 1e-9:
                    there = deepest[k]
            mix = mixes[gas_at(0.5 * (depth + there), deepest)]
            advance(p, (depth - there) / RATE, SURFACE + 10.0 * depth, SURFACE + 10.0 * there, mix, rate)
            depth = there

    @numba.njit
    def may_go(
        p: Any, depth: float, target: float, share: float, mixes: Any, deepest: Any, rate: Any, a: Any, b: Any
    ) -> bool:
        there = SURFACE + 10.0 * target
        if not allowed(p, there, share, a, b):
            return False
        arrived = p.copy()
        travel(arrived, depth, target, mixes, deepest, rate)
        return allowed(arrived, there, share, a, b)

    @numba.njit
    def one(
        depth: float, minutes: float, mixes: Any, deepest: Any, rate: Any, a: Any, b: Any, stops: Any
    ) -> None:
        p = np.zeros(rate.shape)
        p[:, 0] = 0.79 * (SURFACE - VAPOR)
        deep = SURFACE + 10.0 * depth
        advance(p, depth / 20.0, SURFACE, deep, mixes[0], rate)
        advance(p, minutes, deep, deep, mixes[0], rate)
        if may_go(p, depth, 0.0, HIGH, mixes, deepest, rate, a, b):
            return
        first = -1.0
        while depth > 1e-9:
            step = math.ceil((depth - LAST) / SPACING - 1e-9)
            target = LAST + (step - 1) * SPACING if step > 0 else 0.0
            if first < 0.0 and not may_go(p, depth, target, LOW, mixes, deepest, rate, a, b):
                first = depth
            if first >= 0.0:
                share = HIGH - (HIGH - LOW) * min(target / first, 1.0)
                here = SURFACE + 10.0 * depth
                mix = mixes[gas_at(depth, deepest)]
                while not may_go(p, depth, target, share, mixes, deepest, rate, a, b):
                    advance(p, 1.0, here, here, mix, rate)
                    stops[step] += 1.0
            travel(p, depth, target, mixes, deepest, rate)
            depth = target

    @numba.njit
    def many(depths: Any, minutes: float, mixes: Any, deepest: Any, rate: Any, a: Any, b: Any) -> Any:
        stops = np.zeros((depths.shape[0], 64))
        for i in range(depths.shape[0]):
            one(depths[i], minutes, mixes, deepest, rate, a, b, stops[i])
        return stops

    return many


def inputs() -> tuple[Any, ...]:
    """Return the gases, half-times and limits of the compiled planner."""
    model = tissues.load(MODEL)
    mixes = [(0.35, 0.48), *((g.nitrogen, g.helium) for g in (gp.Gas.parse(name) for name, _ in GASES))]
    deepest = np.array([math.inf, *(d for _, d in GASES)])
    return np.array(mixes), deepest, math.log(2.0) / model.half_time, np.array(model.a), np.array(model.b)


def bottom(depth: Any) -> Exposure:
    """Return the dive up to leaving the bottom."""
    return Exposure.start("trimix 17/48").travel(depth=depth, rate=20.0).stay(25.0)


def plan(start: Exposure) -> ascent.Plan:
    """Return our plan of it."""
    return ascent.plan(start, GASES, MODEL, ascent.Rules(gradient_low=LOW, gradient_high=HIGH))


def best(*functions: Callable[[], Any], repeats: int) -> list[float]:
    """Return the shortest processor time of each function [ms], measured in turn."""
    found = [math.inf] * len(functions)
    for _ in range(repeats):
        for k, f in enumerate(functions):
            begin = time.process_time()
            f()
            found[k] = min(found[k], time.process_time() - begin)
    return [1e3 * x for x in found]


def same_stops(planner: Callable[..., Any], depths: Any) -> None:
    """Check that both find the same minutes at the same depths."""
    theirs = planner(depths, 25.0, *inputs())
    ours = plan(bottom(_labelled(depths))).stops
    found = np.zeros_like(theirs)
    for k in range(ours.sizes["stop"]):
        grid = np.where(ours.duration[:, k] > 0.0, (ours.depth[:, k] - LAST) / SPACING, 0.0)
        found[np.arange(len(depths)), np.round(grid).astype(int)] += ours.duration[:, k].values
    np.testing.assert_array_equal(found, theirs)


def _labelled(depths: Any) -> xr.DataArray:
    return xr.DataArray(depths, dims="n", attrs={"units": "msw"})


def compare(planner: Callable[..., Any], n: int, repeats: int) -> None:
    """Print the ratio for a number of scenarios."""
    depths = np.linspace(36.0, 64.0, n) if n > 1 else np.array([60.0])
    start = bottom(_labelled(depths)) if n > 1 else bottom(60.0)
    with gp.validity("ignore"):
        given = inputs()
        theirs, ours = best(lambda: planner(depths, 25.0, *given), lambda: plan(start), repeats=repeats)
    print(f"{n} plans: compiled {theirs:.3f} ms, ours {ours:.2f} ms, ratio {ours / theirs:.1f}")


def memory(n: int) -> None:
    """Print time and the most memory held while many scenarios are planned, and what the result needs."""
    start = bottom(_labelled(np.linspace(36.0, 64.0, n)))
    with gp.validity("ignore"):
        (took,) = best(lambda: plan(start), repeats=1)
        tracemalloc.start()
        result = plan(start)
        kept, peak = tracemalloc.get_traced_memory()
        tracemalloc.stop()
    assert result.stops.sizes["n"] == n
    kept, peak = kept / 2**20, peak / 2**20
    print(f"{n} plans: {1e3 * took / n:.0f} us each, result {kept:.0f} MiB, at most {peak:.0f} MiB")


if __name__ == "__main__":
    PLANNER = compiled_planner()
    with gp.validity("ignore"):
        same_stops(PLANNER, np.linspace(36.0, 64.0, 57))
    compare(PLANNER, 1, 30)
    compare(PLANNER, 1000, 5)
    for many in (1_000, 10_000, 100_000):
        memory(many)
