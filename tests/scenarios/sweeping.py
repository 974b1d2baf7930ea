"""What the tests of sweeps run in other processes: a module of its own, so that they find it."""

from __future__ import annotations

import sys
import time

import numpy as np
import xarray as xr

import gasphys as gp


def inputs(n: int = 240) -> xr.Dataset:
    """Return dives that differ in depth and time."""
    what = {"depth": gp.scenarios.Normal(35.0, 5.0), "duration": gp.scenarios.Uniform(5.0, 25.0)}
    return gp.scenarios.sample(what, n, rng=1, method="sobol")


def dive(draws: xr.Dataset) -> xr.Dataset:
    """Return what limits and stops say of some dives."""
    exposure = gp.Exposure.start("nitrox 32").travel(depth=draws.depth, rate=20).stay(draws.duration)
    with gp.validity("ignore"):
        plan = gp.ascent.plan(exposure)
    found = gp.review(plan.exposure)[["worst", "first_crossing", "status"]]
    stops = plan.stops
    # A block has no stop deeper than it needs: a place for every depth of the grid.
    grid = xr.DataArray(3.0 * np.arange(1, 12), dims="stop_depth", name="stop_depth")
    minutes = stops.duration.where(stops.depth == grid, 0.0).sum("stop")
    return found.assign(minutes=minutes, ascent_time=plan.ascent_time).assign_coords(stop_depth=grid)


def slow_dive(draws: xr.Dataset) -> xr.Dataset:
    """Return the same, slowly enough to be interrupted."""
    time.sleep(0.15)
    return dive(draws)


def large(draws: xr.Dataset) -> xr.Dataset:
    """Return 8 MB for a hundred draws."""
    return xr.Dataset({"x": draws.depth * xr.DataArray(np.ones(10_000), dims="y")})


def strict(draws: xr.Dataset) -> xr.Dataset:
    """Return the mode of validity where it runs."""
    from gasphys.policy import validity_mode

    return xr.Dataset({"raises": xr.zeros_like(draws.depth) + (validity_mode() == "raise")})


if __name__ == "__main__":
    gp.scenarios.sweep(slow_dive, inputs(), sys.argv[1], block=20, where=sys.argv[2], workers=2)
