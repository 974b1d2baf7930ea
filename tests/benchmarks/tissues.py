"""Speed of the tissue kernels as ratios within one run; never part of pass or fail.

Run ``python tests/benchmarks/tissues.py``; numba is needed for the compiled loop only, which makes its own
result as ours does. Processor time, the shortest of many turns.
"""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from typing import Any

import numpy as np
import xarray as xr

import gasphys as gp
from gasphys import Exposure, tissues
from gasphys.exposure import Pieces
from gasphys.tissues.kinetics import KERNELS, along, equilibrium, stretches


def best(*functions: Callable[[], Any], repeats: int = 200) -> list[float]:
    """Return the shortest processor time of each function [ms], measured in turn."""
    found = [math.inf] * len(functions)
    for _ in range(repeats):
        for k, f in enumerate(functions):
            begin = time.process_time()
            f()
            found[k] = min(found[k], time.process_time() - begin)
    return [1e3 * x for x in found]


def log_of(n: int, regular: bool) -> Pieces:
    """Return a log of n stretches on trimix, ten seconds each or irregular."""
    rng = np.random.default_rng(1)
    duration = np.full(n, 1.0 / 6.0) if regular else rng.uniform(0.05, 1.0, n)
    pressure = 101.325 + np.abs(np.cumsum(rng.normal(0.0, 5.0, n + 1)))
    return Pieces(
        duration=duration,
        start_pressure=pressure[:-1],
        end_pressure=pressure[1:],
        start_po2=0.17 * pressure[:-1],
        end_po2=0.17 * pressure[1:],
        fractions={"O2": np.full(n, 0.17), "N2": np.full(n, 0.35), "He": np.full(n, 0.48)},
        setpoint=np.full(n, np.nan),
        times=np.append(0.0, np.cumsum(duration)),
    )


def compiled_loop() -> Callable[..., Any]:
    """Return the obvious loop, compiled."""
    import numba

    @numba.njit
    def loop(state: Any, duration: Any, first: Any, last: Any, half_time: Any) -> Any:
        out = np.empty((*half_time.shape, duration.shape[0] + 1))
        for c in range(half_time.shape[0]):
            for g in range(half_time.shape[1]):
                p, k = state[c, g], math.log(2.0) / half_time[c, g]
                out[c, g, 0] = p
                for i in range(duration.shape[0]):
                    t = duration[i]
                    if t > 0.0:
                        share = -math.expm1(-k * t)
                        rate = (last[i, g] - first[i, g]) / t
                        p = p + (first[i, g] - p) * share + rate * (t - share / k)
                    out[c, g, i + 1] = p
        return out

    return loop


def long_log(loop: Callable[..., Any], regular: bool) -> None:
    """Print the time of a 10 000-point log, 16 compartments, 2 gases."""
    model = tissues.load("buhlmann_1995_c")
    row, _ = stretches(model, log_of(10_000, regular))
    state, half_time = equilibrium(model, 101.325), np.array(model.half_time)

    def compiled() -> Any:
        return loop(state, row.duration, row.start_inert, row.end_inert, half_time)

    def ours() -> Any:
        return along(model, state, row)

    np.testing.assert_allclose(ours(), compiled(), rtol=1e-9)
    one, other = best(compiled, ours)
    kind = "regular" if regular else "irregular"
    print(f"10 000 {kind} points: compiled {one:.2f} ms, ours {other:.2f} ms, ratio {other / one:.2f}")


def other_kinetics(name: str) -> None:
    """Print the time of a 10 000-point log of a dive on air by a set without a closed form for all of it."""
    n = 10_000
    rng = np.random.default_rng(1)
    times = np.arange(n + 1) / 6.0
    shape = np.interp(times / times[-1], [0.0, 0.02, 0.4, 0.5, 1.0], [0.0, 250.0, 200.0, 60.0, 0.0])
    pressure = 101.325 + np.abs(shape + np.cumsum(rng.normal(0.0, 0.3, n + 1)))
    gas = {"O2": np.full(n, 0.21), "N2": np.full(n, 0.79)}
    ends = (pressure[:-1], pressure[1:], 0.21 * pressure[:-1], 0.21 * pressure[1:])
    model = tissues.load(name)
    row, _ = stretches(model, Pieces(np.full(n, 1.0 / 6.0), *ends, gas, np.full(n, np.nan), times))
    state = equilibrium(model, 101.325)

    def one_by_one() -> Any:
        p = state
        for k in range(n):
            p = KERNELS[model.kinetics](model, p, *row.at(k))
        return p

    np.testing.assert_allclose(along(model, state, row)[..., -1], one_by_one(), rtol=1e-10)
    single, whole = (
        best(f, repeats=r)[0] for f, r in ((one_by_one, 1), (lambda: along(model, state, row), 5))
    )
    print(f"{name}: 10 000 points {whole:.0f} ms, one stretch after the other {single:.0f} ms")


def scenarios(model: str, n: int) -> None:
    """Print the time for many dives at once, and the cost of one of them."""
    depth = xr.DataArray(np.linspace(10.0, 40.0, n), dims="n", attrs={"units": "msw"})
    dive = Exposure.start("air").travel(depth=depth, minutes=2).stay(20)
    dive = dive.travel(depth=0, minutes=4).stay(60)
    with gp.validity("ignore"):
        (ms,) = best(lambda: tissues.tensions(dive, model), repeats=5)
    print(f"{model}: {n} scenarios {ms:.1f} ms, {1e3 * ms / n:.1f} us each")


if __name__ == "__main__":
    LOOP = compiled_loop()
    for evenly in (True, False):
        long_log(LOOP, evenly)
    for name in ("thalmann_vval18", "kidd_stubbs_1983"):
        other_kinetics(name)
    for name in ("buhlmann_1995_c", "thalmann_vval18"):
        for many in (1, 100, 10_000):
            scenarios(name, many)
