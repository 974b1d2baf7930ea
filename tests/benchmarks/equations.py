"""How much the shell costs: ratios within one run, on this machine. Not part of pass or fail.

    python -m tests.benchmarks.equations

Every baseline is the same arithmetic written by hand in good faith, and is first shown to give the
same numbers.
"""

from __future__ import annotations

import statistics
import subprocess
import sys
import timeit
from collections.abc import Callable
from typing import Any

import numpy as np

import gasphys as gp
from tests.contract.samples import LEAVES, samples

SIZE = 1_000_000


def _best(call: Callable[[], Any], repeat: int = 15) -> float:
    """Return the shortest time of one call [s]."""
    timer = timeit.Timer(call)
    number = max(1, int(2e-3 / max(timer.timeit(1), 1e-7)))
    return min(timer.repeat(repeat, number)) / number


def import_ratio() -> tuple[float, float]:
    """Return the time of `import gasphys` over that of `import xarray`, and of both over xarray alone."""

    def seconds(code: str) -> float:
        text = f"import time; t = time.perf_counter(); {code}; print(time.perf_counter() - t)"
        runs = [
            float(subprocess.run([sys.executable, "-c", text], capture_output=True, check=True).stdout)
            for _ in range(7)
        ]
        return statistics.median(runs)

    xarray = seconds("import xarray")
    used = "import xarray; import gasphys; gasphys.Exposure; gasphys.equations()"
    return seconds("import gasphys") / xarray, seconds(used) / xarray


def scalar_ratios() -> dict[str, float]:
    """Return, for every equation, the time of a call with plain numbers over its bare body."""
    found = {}
    for name, f in LEAVES.items():
        values = list(samples(name)[0].values())
        bare = f._spec.scalar
        assert f(*values) == bare(*values) or np.isclose(f(*values), bare(*values), rtol=1e-14)
        found[name] = _best(lambda f=f, v=values: f(*v), 5) / _best(lambda b=bare, v=values: b(*v), 5)
    return found


def solve_times() -> dict[str, float]:
    """Return the seconds of `solve_for` by the slowest argument of every equation, after a first call."""
    found = {}
    for name, f in LEAVES.items():
        row = samples(name)[0]
        value, slowest = f(**row), 0.0
        for argument in row:
            known = {k: v for k, v in row.items() if k != argument}
            try:
                f.solve_for(argument, **known, result=value)
            except gp.GasphysError:  # the result does not depend on it
                continue
            call = timeit.Timer(lambda f=f, a=argument, k=known, v=value: f.solve_for(a, **k, result=v))
            slowest = max(slowest, min(call.repeat(3, 1)))
        found[name] = slowest
    return found


def _bare_alveolar(pressure: Any, fio2: Any, pco2: Any, ratio: float = 0.8) -> Any:
    dry = pressure - 47.0 * 0.133322387415
    fico2 = 0.0
    o2 = ratio * fio2 * (dry - pco2) - pco2 * (1.0 - fio2) + fico2 * dry
    return o2 / (ratio * (1.0 - fico2) + fico2)


def _bare_saturation(po2: Any, ph: float = 7.4, temperature: float = 37.0) -> Any:
    mmhg = 0.133322387415
    shift = np.exp(((po2 / (26.6 * mmhg)) ** 0.184 - 2.2) * (7.4 - ph))
    x = po2 * 10.0 ** (0.024 * (37.0 - temperature)) * shift / mmhg
    cubic = x * x * x + 150.0 * x
    return cubic / (cubic + 23400.0)


def array_ratios() -> dict[str, tuple[float, float]]:
    """Return, for a million elements, the time over bare numpy and the ratio aimed at."""
    rng = np.random.default_rng(0)
    pressure, fio2 = rng.uniform(101.0, 600.0, SIZE), rng.uniform(0.21, 1.0, SIZE)
    pco2, po2 = rng.uniform(4.0, 6.0, SIZE), rng.uniform(1.0, 200.0, SIZE)
    calls: dict[str, tuple[Callable[..., Any], Callable[..., Any], tuple[Any, ...], float]] = {
        "lungs.alveolar_po2": (gp.lungs.alveolar_po2, _bare_alveolar, (pressure, fio2, pco2), 1.3),
        "blood.o2_saturation": (gp.blood.o2_saturation, _bare_saturation, (po2,), 1.3),
        "laws.dalton_partial_pressure": (
            gp.laws.dalton_partial_pressure,
            lambda f, p: f * p,
            (fio2, pressure),
            2.0,
        ),
        "laws.boyle_volume": (
            gp.laws.boyle_volume,
            lambda v, a, b: v * a / b,
            (fio2, pressure, pressure[::-1].copy()),
            2.0,
        ),
        "laws.henry_dissolved_gas": (
            gp.laws.henry_dissolved_gas,
            lambda p, s: p * s,
            (pressure, fio2),
            2.0,
        ),
    }
    found = {}
    for name, (ours, bare, arguments, aim) in calls.items():
        np.testing.assert_allclose(ours(*arguments), bare(*arguments), rtol=1e-12)
        # Turn about, so that a busy moment of the machine hits both.
        pairs = [(_best(lambda: ours(*arguments), 3), _best(lambda: bare(*arguments), 3)) for _ in range(7)]  # noqa: B023
        found[name] = (min(p[0] for p in pairs) / min(p[1] for p in pairs), aim)
    return found


def main() -> None:
    """Print every ratio beside its aim."""
    alone, used = import_ratio()
    print(
        f"import gasphys / import xarray: {alone:.3f}; with the equations and Exposure: {used:.2f} (aim 1.1)"
    )
    print(f"\none million elements against bare numpy\n{'equation':<32}{'ratio':>7}{'aim':>6}")
    for name, (ratio, aim) in array_ratios().items():
        print(f"{name:<32}{ratio:7.2f}{aim:6.1f}")
    ratios = scalar_ratios()
    over = {k: v for k, v in ratios.items() if v > 8.0}
    print(
        f"\none number against the bare body, {len(ratios)} equations: median "
        f"{statistics.median(ratios.values()):.1f}, largest {max(ratios.values()):.1f} (aim 8)"
    )
    for name, ratio in sorted(over.items(), key=lambda item: -item[1]):
        print(f"  beyond the aim: {name:<60}{ratio:6.1f}")
    times = solve_times()
    slow = {k: v for k, v in times.items() if v > 0.05}
    print(
        f"\nsolve_for after a first call: median {1e3 * statistics.median(times.values()):.2f} ms (aim 50 ms)"
    )
    for name, seconds in sorted(slow.items(), key=lambda item: -item[1]):
        print(f"  beyond the aim: {name:<60}{1e3 * seconds:6.0f} ms")


if __name__ == "__main__":
    main()
