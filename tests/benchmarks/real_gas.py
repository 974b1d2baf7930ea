"""Density of a million different states against the same Newton compiled by numba.

Run it by hand: ``python tests/benchmarks/real_gas.py``. It prints times, their ratio and the largest
difference of the results, and decides nothing. Without numba the baseline is the bare numpy kernel.
"""

from __future__ import annotations

import math
import timeit
from typing import Any

import numpy as np
import xarray as xr

from gasphys import real_gas
from gasphys.constants import GAS_CONSTANT, ZERO_CELSIUS
from gasphys.gas import FORMULAS
from gasphys.real_gas.data import MOLAR_MASSES, data

COUNT = 1_000_000
GASES = ("O2", "N2", "He")


def compiled() -> Any:
    """Return the same series and the same Newton as one compiled loop, or None without numba."""
    try:
        import numba
    except ImportError:
        return None
    file = data("virial")
    order = list(FORMULAS)
    size = len(order)
    second = np.zeros((size, size, 4))
    for i, a in enumerate(order):
        for j, b in enumerate(order):
            for gas in (a, b):
                series = file["pure"][gas]["B"]
                second[i, j, : len(series)] += 0.5 * np.array(series)
    for row in file["cross"]:
        i, j = (order.index(g) for g in row["gases"])
        second[i, j] = second[j, i] = 0.0
        second[i, j, : len(row["B"])] = second[j, i, : len(row["B"])] = row["B"]
    third = np.array([row["C"] + [0.0] * (4 - len(row["C"])) for row in (file["pure"][g] for g in order)])
    fourth = np.array([file["pure"][g].get("D", 0.0) ** 0.25 for g in order])
    fifth = np.array([(file["pure"][g].get("E", []) + [0.0, 0.0])[:2] for g in order])
    mass = np.array([float(MOLAR_MASSES[g]) for g in order])
    gas_constant, zero = float(GAS_CONSTANT), float(ZERO_CELSIUS)

    @numba.njit
    def density(pressure: Any, fractions: Any, temperature: Any) -> Any:
        out = np.empty(pressure.size)
        for k in range(pressure.size):
            kelvin = temperature[k] + zero
            xi = 298.15 / kelvin - 1.0
            b = c = d = e = m = 0.0
            for i in range(size):
                x = fractions[i, k]
                if x == 0.0:
                    continue
                for j in range(i, size):
                    y = fractions[j, k]
                    if y == 0.0:
                        continue
                    s = second[i, j]
                    value = x * y * (s[0] + xi * (s[1] + xi * (s[2] + xi * s[3])))
                    b += value if i == j else 2.0 * value
                t = third[i]
                c += x * (t[0] + xi * (t[1] + xi * (t[2] + xi * t[3]))) ** (1.0 / 3.0)
                d += x * fourth[i]
                e += x * (fifth[i, 0] + xi * fifth[i, 1])
                m += x * mass[i]
            b, c, d, e = b * 1e-3, (c * c * c) * 1e-6, (d * d * d * d) * 1e-9, e * 1e-12
            ideal = pressure[k] / (gas_constant * kelvin)
            n = ideal
            for _ in range(40):
                level = n * (1.0 + n * (b + n * (c + n * (d + n * e))))
                slope = 1.0 + n * (2.0 * b + n * (3.0 * c + n * (4.0 * d + n * 5.0 * e)))
                step = (level - ideal) / slope
                n -= step
                if not math.fabs(step) > 1e-9 * math.fabs(n):
                    break
            out[k] = n * m
        return out

    return density


def best(run: Any, repeat: int = 7) -> float:
    """Return the shortest of several runs [ms]."""
    run()
    return 1e3 * min(timeit.repeat(run, number=1, repeat=repeat))


def main() -> None:
    """Print one line for each way to call."""
    rng = np.random.default_rng(20420303)
    pressure = rng.uniform(101.325, 30000.0, COUNT)
    temperature = rng.uniform(-10.0, 45.0, COUNT)
    fractions = rng.dirichlet(np.ones(len(GASES)), COUNT).T.copy()
    full = np.zeros((len(FORMULAS), COUNT))
    for row, gas in zip(fractions, GASES, strict=True):
        full[list(FORMULAS).index(gas)] = row

    f = real_gas.density.pick(model="virial")
    inputs = (pressure, *(fractions[GASES.index(g)] if g in GASES else 0.0 for g in FORMULAS), temperature)
    baseline = compiled()
    if baseline is None:
        print("numba is not installed: the baseline is the bare numpy kernel")
        reference, base = f.raw(*inputs), best(lambda: f.raw(*inputs))
    else:
        reference, base = (
            baseline(pressure, full, temperature),
            best(lambda: baseline(pressure, full, temperature)),
        )
    print(f"baseline                                   {base:7.1f} ms for {COUNT:.0e} different states")

    labelled = {
        "gas": xr.DataArray(
            fractions, dims=("gas", "state"), coords={"gas": list(GASES)}, attrs={"units": "1"}
        ),
        "ambient_pressure": xr.DataArray(pressure, dims="state", attrs={"units": "kPa"}),
        "temperature": xr.DataArray(temperature, dims="state", attrs={"units": "degC"}),
    }
    for name, run in (
        ("arrays, every state its own mix", lambda: f(*inputs)),
        ("DataArrays, every state its own mix", lambda: real_gas.density(**labelled).values),
        ("arrays, one mix", lambda: real_gas.density(pressure, "trimix 17/48", temperature)),
        ("arrays, Peng-Robinson", lambda: real_gas.density.pick(model="peng_robinson_1976")(*inputs)),
        ("arrays, ideal", lambda: real_gas.density.pick(model="ideal")(*inputs)),
    ):
        found = run()
        took = best(run)
        different = ""
        if "own mix" in name:
            different = f", largest relative difference {np.max(np.abs(found / reference - 1.0)):.0e}"
        print(f"{name:42s} {took:7.1f} ms, {took / base:5.2f} times the baseline{different}")


if __name__ == "__main__":
    main()
