"""Ratios against good-faith baselines, and curves of scaling, in one run; never part of pass or fail.

    python -m tests.benchmarks [--quick] [--exploration]

Baselines are the same work written the obvious way: compiled (numba, where it is installed), numpy, scipy,
plain Python; each is first shown to give the same numbers. Ours checks units and ranges and returns labelled
results with their history, the baselines bare numbers. Times are wall clock, the shortest of some turns:
other work on the machine disturbs them, ratios less. The files beside this one go deeper into one subject.
"""

from __future__ import annotations

import csv
import math
import os
import platform
import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from scipy.optimize import brentq

import gasphys as gp
from gasphys import Exposure, blood, lungs, real_gas, review, scenarios, strategies, tissues
from gasphys.supply import Demand
from tests.benchmarks import ascent as planning
from tests.benchmarks import equations as bodies
from tests.benchmarks import real_gas as densities

QUICK = "--quick" in sys.argv
ROOT = Path(__file__).resolve().parents[2]
MMHG = 0.133322387415


def best(call: Callable[[], Any], repeats: int = 5) -> float:
    """Return the shortest time of a call [s]."""
    found = math.inf
    for _ in range(1 if QUICK else repeats):
        begin = time.perf_counter()
        call()
        found = min(found, time.perf_counter() - begin)
    return found


def line(what: str, ours: float, baseline: str, theirs: float) -> None:
    """Print one ratio."""
    print(
        f"  {what:<44}{1e3 * ours:10.2f} ms   {baseline:<30}{1e3 * theirs:10.2f} ms   "
        f"ratio {ours / theirs:8.3g}"
    )


def curve(what: str, rows: list[tuple[int, float]], unit: str) -> None:
    """Print how time grows."""
    shown = "   ".join(f"{n:g}: {1e3 * t:.3g} ms" for n, t in rows)
    last = rows[-1]
    print(f"  {what}, {unit}:\n    {shown}\n    at the end {1e6 * last[1] / last[0]:.3g} us each")


# -- Loading -----------------------------------------------------------------------------------------


def loading() -> None:
    """A log of 10 000 rows."""
    print("loading a log of 10 000 rows")
    rng = np.random.default_rng(1)
    depth = np.abs(np.cumsum(rng.normal(0.0, 0.4, 10_000)))
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "log.csv"
        rows = ["time_min,depth_msw,gas"]
        rows += [f"{k / 6.0:.4f},{d:.2f},{'air' if k < 6000 else 'nitrox 48'}" for k, d in enumerate(depth)]
        path.write_text("\n".join(rows) + "\n", encoding="utf-8")

        def plain() -> list[tuple[float, float, str]]:
            with path.open(encoding="utf-8", newline="") as file:
                found = list(csv.DictReader(file))
            return [(float(r["time_min"]), 101.325 + 10.0 * float(r["depth_msw"]), r["gas"]) for r in found]

        ours = Exposure.from_csv(path)
        theirs = plain()
        assert math.isclose(ours.duration, theirs[-1][0] - theirs[0][0], rel_tol=1e-9)
        line("Exposure.from_csv", best(lambda: Exposure.from_csv(path)), "csv.DictReader", best(plain))


# -- Planning ----------------------------------------------------------------------------------------


def plans() -> None:
    """Ascents with two gases and gradients, one and a thousand."""
    print("planning an ascent, two gases, two gradients")
    many = 1000
    depths = np.linspace(36.0, 64.0, many)
    with gp.validity("ignore"):
        one = planning.bottom(60.0)
        batch = planning.bottom(planning._labelled(depths))
        ours = best(lambda: planning.plan(one), 20), best(lambda: planning.plan(batch), 3)
        try:
            planner = planning.compiled_planner()
            planning.same_stops(planner, np.linspace(36.0, 64.0, 29))
        except ImportError:
            print("  numba is not installed: no compiled baseline")
        else:
            args = planning.inputs()
            line("one plan", ours[0], "compiled", best(lambda: planner(np.array([60.0]), 25.0, *args), 20))
            line("1000 plans", ours[1], "compiled", best(lambda: planner(depths, 25.0, *args), 3))
            took = float(_without_compiling())
            line("one plan", ours[0], "the same in plain Python", took)
            line("1000 plans", ours[1], "plain Python, 1000 times one", took * many)


def _without_compiling() -> str:
    code = (
        "import time, numpy as np\nfrom tests.benchmarks import ascent\n"
        "f, a = ascent.compiled_planner(), ascent.inputs()\n"
        "b = time.perf_counter(); f(np.array([60.0]), 25.0, *a); print(time.perf_counter() - b)"
    )
    run = subprocess.run(
        [sys.executable, "-c", code],
        capture_output=True,
        text=True,
        cwd=ROOT,
        env={**os.environ, "NUMBA_DISABLE_JIT": "1", "PYTHONPATH": str(ROOT)},
        check=True,
    )
    return run.stdout.splitlines()[-1]


# -- Inversion, density, equations -------------------------------------------------------------------


def inversion() -> None:
    """PO2 of an O2 content."""
    n, looped = 100_000, 1000
    print(f"PO2 of an O2 content, {n} values")
    forward = blood.o2_content.pick(model="severinghaus_1979")
    po2 = np.random.default_rng(7).uniform(2.0, 200.0, n)
    rest = [float(a.default) for a in forward.arguments[1:]]
    content = forward.raw(po2, *rest)
    bare = forward._spec.scalar

    def loop() -> list[float]:
        return [brentq(lambda x, c=c: bare(x, *rest) - c, 1e-3, 1000.0, xtol=1e-12) for c in content[:looped]]

    with gp.validity("ignore"):
        found = blood.po2_at_content(content)
        np.testing.assert_allclose(found[:looped], loop(), rtol=1e-8)
        ours = best(lambda: blood.po2_at_content(content))
    line("blood.po2_at_content", ours, "scipy brentq, a loop", best(loop, 3) * n / looped)


def density() -> None:
    """Density by the virial series of a million different states."""
    n = 100_000 if QUICK else 1_000_000
    print(f"gas density by the virial series, {n} different states")
    rng = np.random.default_rng(3)
    pressure, temperature = rng.uniform(100.0, 1500.0, n), rng.uniform(5.0, 37.0, n)
    helium = rng.uniform(0.2, 0.6, n)
    mix = np.stack([np.full(n, 0.18), 0.82 - helium, helium], axis=-1)
    gas = xr.DataArray(mix, dims=("n", "gas"), coords={"gas": ["O2", "N2", "He"]}, attrs={"units": "1"})
    p = xr.DataArray(pressure, dims="n", attrs={"units": "kPa"})
    t = xr.DataArray(temperature, dims="n", attrs={"units": "degC"})
    ours = best(lambda: real_gas.density(p, gas, t), 3)
    compiled = densities.compiled()
    if compiled is None:
        print(f"  ours {1e3 * ours:.0f} ms; numba is not installed: no compiled baseline")
        return
    fractions = np.zeros((7, n))
    fractions[:3] = mix.T
    from gasphys.gas import FORMULAS

    order = list(FORMULAS)
    full = np.zeros((len(order), n))
    for k, name in enumerate(("O2", "N2", "He")):
        full[order.index(name)] = mix[:, k]
    compiled(pressure[:2], full[:, :2].copy(), temperature[:2])
    theirs = compiled(pressure, full, temperature)
    np.testing.assert_allclose(np.ravel(theirs), real_gas.density(p, gas, t).values, rtol=1e-6)
    line("real_gas.density", ours, "compiled", best(lambda: compiled(pressure, full, temperature), 3))


def alveolar_to_content() -> None:
    """A million scenarios from ambient pressure to arterial O2 content."""
    n = 1_000_000
    print("alveolar PO2, saturation and O2 content of a million scenarios")
    rng = np.random.default_rng(0)
    pressure, fio2, pco2 = rng.uniform(101.0, 304.0, n), rng.uniform(0.21, 1.0, n), rng.uniform(4.0, 6.0, n)
    labels = [
        xr.DataArray(v, dims="draw", attrs={"units": u})
        for v, u in ((pressure, "kPa"), (fio2, "1"), (pco2, "kPa"))
    ]

    def numpy_way() -> Any:
        alveolar = bodies._bare_alveolar(pressure, fio2, pco2)
        # At pH 7.4 and 37 degC the shifts are 1: left out, as one would by hand.
        x = alveolar / MMHG
        cubic = x * x * x + 150.0 * x
        return 1.34 * 15.0 * (cubic / (cubic + 23400.0)) + 0.0031 * x

    def same_work() -> Any:
        alveolar = bodies._bare_alveolar(pressure, fio2, pco2)
        return 1.34 * 15.0 * bodies._bare_saturation(alveolar) + 0.0031 * alveolar / MMHG

    def ours(inputs: list[Any]) -> Any:
        return blood.o2_content(lungs.alveolar_po2(*inputs))

    np.testing.assert_allclose(ours(labels), numpy_way(), rtol=1e-9)
    np.testing.assert_allclose(ours(labels), same_work(), rtol=1e-9)
    times = [
        best(f, 7) for f in (numpy_way, same_work, lambda: ours([pressure, fio2, pco2]), lambda: ours(labels))
    ]
    line("arrays", times[2], "bare numpy, same equations", times[1])
    line("labelled arrays", times[3], "bare numpy, same equations", times[1])
    line("labelled arrays", times[3], "bare numpy at 37 degC, pH 7.4", times[0])


# -- Review ------------------------------------------------------------------------------------------


def dives(n: int) -> Exposure:
    """Return dives with two switches that differ in depth and time."""
    what = scenarios.sample(
        {"depth": scenarios.Uniform(30.0, 60.0), "duration": scenarios.Uniform(10.0, 30.0)}, n, rng=1
    )
    start = Exposure.start("trimix 17/48").travel(depth=what.depth, rate=20).stay(what.duration)
    start = start.travel(depth=20, rate=9).switch("nitrox 48").stay(5).travel(depth=6, rate=9)
    return start.switch("oxygen").stay(20).travel(depth=0, minutes=2)


def reviews() -> None:
    """Reviews of many scenarios against as many single ones."""
    print("review by every limit there is")
    whole = dives(1000)
    singles = [whole.pick(draw=k) for k in range(0, 1000, 50)]
    review(singles[0])
    one = best(lambda: [review(x) for x in singles], 3) / len(singles)
    line("1000 scenarios", best(lambda: review(whole), 5), "1000 single reviews", 1000.0 * one)


# -- Scaling -----------------------------------------------------------------------------------------


def scaling() -> None:
    """How time grows with scenarios, segments and workers."""
    print("scaling")
    sizes = (1, 10, 100, 1000, 10_000, 100_000, 1_000_000)
    rows = []
    for n in sizes:
        pco2 = scenarios.sample({"alveolar_pco2": scenarios.Normal(5.3, 0.4)}, n, rng=1).alveolar_pco2
        rows.append((n, best(lambda x=pco2: blood.o2_content(lungs.alveolar_po2(243.18, 1.0, x)), 3)))
    curve("alveolar PO2 to content", rows, "scenarios")
    rows = []
    for n in sizes[: 5 if QUICK else 6]:
        whole = dives(n)
        rows.append((n, best(lambda x=whole: review(x), 2)))
    curve("review", rows, "scenarios")
    rows = []
    for n in (10, 100, 1000, 10_000):
        rng = np.random.default_rng(2)
        log = Exposure.start("air")
        depth = np.abs(np.cumsum(rng.normal(0.0, 0.3, n)))
        with tempfile.TemporaryDirectory() as folder:
            path = Path(folder) / "log.csv"
            text = "\n".join(f"{k / 6.0:.4f},{d:.2f},air" for k, d in enumerate(depth))
            path.write_text(f"time_min,depth_msw,gas\n{text}\n", encoding="utf-8")
            log = Exposure.from_csv(path)
        rows.append((n, best(lambda x=log: tissues.tensions(x), 3)))
    curve("tensions of one log", rows, "segments")
    n = 2000 if QUICK else 40_000
    what = scenarios.sample(
        {"depth": scenarios.Uniform(30.0, 60.0), "duration": scenarios.Uniform(10.0, 30.0)}, n, rng=1
    )
    alone = 0.0
    for where, workers in (("one", 1), ("threads", 1), ("threads", 2), ("processes", 2)):
        begin = time.perf_counter()
        scenarios.sweep(planned, what, block=2000, where=where, workers=workers)
        took = time.perf_counter() - begin
        alone = alone or took
        print(f"  sweep of {n} plans, {where}, {workers}: {took:.1f} s, {alone / took:.2f} times one alone")


def planned(draws: xr.Dataset) -> xr.Dataset:
    """Return what a sweep keeps of plans."""
    start = Exposure.start("trimix 17/48").travel(depth=draws.depth, rate=20).stay(draws.duration)
    return planning.plan(start).ascent_time.to_dataset(name="ascent_time")


def exploration() -> None:
    """A hundred thousand plans explored."""
    n = 2000 if QUICK else 100_000
    space = {
        "depth": [45.0, 50.0, 56.0],
        "bottom_time": scenarios.Uniform(15.0, 30.0),
        "bottom_o2": scenarios.Uniform(0.14, 0.20),
        "bottom_helium": scenarios.Uniform(0.3, 0.6),
        "gradient_low": [0.4, 0.7],
        "gradient_high": [0.7, 0.85, 1.0],
        "switch_depth_1": [18.0, 21.0],
    }
    asked = ["ascent_time", "uptd", "gas_density", strategies.gas_volume(Demand(surface_rate=18.0))]
    dives = strategies.Dives(gas="trimix 17/48", gases=[("nitrox 48", 20.0), ("oxygen", 6.0)])
    hard = ["po2_noaa_2015_decompression", "density_maximum"]
    begin = time.perf_counter()
    found = strategies.explore(space, asked, hard, 1, n=n, build=dives, where="threads", workers=2)
    took = time.perf_counter() - begin
    peak = _most_memory()
    print(
        f"exploration of {found.sizes['candidate']} plans, 2 threads: {took:.0f} s, "
        f"{1e3 * took / n:.2f} ms each; "
        f"the whole process held at most {peak:.0f} MiB; front of {int(found.front.sum())}"
    )


def _most_memory() -> float:
    """Return the most memory this process has held [MiB]; what getrusage says may be its parent's."""
    status = Path("/proc/self/status")
    if status.exists():
        row = next(x for x in status.read_text(encoding="utf-8").splitlines() if x.startswith("VmHWM"))
        return float(row.split()[1]) / 1024.0
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0


def main() -> None:
    """Print everything."""
    print(
        f"{platform.machine()}, {os.cpu_count()} cores, Python {platform.python_version()}, "
        f"numpy {np.__version__}"
    )
    print(f"load of the machine at the start: {os.getloadavg()[0]:.1f}\n")
    for part in (loading, plans, inversion, density, alveolar_to_content, reviews, scaling):
        part()
        print(flush=True)
    # In a process of its own, so that the memory is its alone.
    sys.exit(
        subprocess.run(
            [sys.executable, "-m", "tests.benchmarks", "--exploration", *sys.argv[1:]], cwd=ROOT
        ).returncode
    )


if __name__ == "__main__":
    exploration() if "--exploration" in sys.argv else main()
