"""Sweeps: the same numbers whatever runs them, bounded memory, and nothing lost by a kill."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
import tracemalloc
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
import zarr

import gasphys as gp
from gasphys import GasphysError, scenarios
from gasphys.errors import RangeError, UnknownNameError
from tests.scenarios.sweeping import dive, inputs, large, slow_dive, strict

ROOT = Path(__file__).resolve().parents[2]
NUMBERS = ("worst", "first_crossing", "minutes", "ascent_time")


def same(one: xr.Dataset, other: xr.Dataset) -> None:
    """Numbers to 1e-12, stops and words exactly."""
    assert one.draw.values.tolist() == other.draw.values.tolist()
    for name in NUMBERS:
        np.testing.assert_allclose(
            one[name].transpose("draw", ...), other[name].transpose("draw", ...), rtol=1e-12, err_msg=name
        )
    np.testing.assert_array_equal(one.minutes, other.minutes)
    np.testing.assert_array_equal(one.status, other.status)


@pytest.fixture(scope="module")
def whole() -> xr.Dataset:
    return dive(inputs())


@pytest.mark.parametrize("block", [7, 100, 1000])
def test_blocks_change_nothing(whole: xr.Dataset, block: int) -> None:
    same(scenarios.sweep(dive, inputs(), block=block, where="one"), whole)


def test_threads_and_a_store(whole: xr.Dataset, tmp_path: Path) -> None:
    seen = []
    found = scenarios.sweep(
        dive, inputs(), tmp_path / "a.zarr", block=50, progress=lambda done, of: seen.append((done, of))
    )
    assert seen == [(k, 5) for k in range(1, 6)]
    assert found.worst.chunks is not None
    same(found.load(), whole)
    assert found.attrs["comment"].startswith(gp.quantities.CAUTION)
    again = scenarios.sweep(dive, inputs(), tmp_path / "a.zarr", block=50, progress=lambda *x: seen.append(x))
    assert seen[-1] == (5, 5)
    same(again.load(), whole)


def test_processes(whole: xr.Dataset, tmp_path: Path) -> None:
    same(scenarios.sweep(dive, inputs(), block=60, where="processes", workers=2), whole)


def test_single_scenarios_give_the_rows(whole: xr.Dataset) -> None:
    for k in (0, 17, 100):
        one = dive(inputs().isel(draw=[k]))
        same(one, whole.isel(draw=[k]))


def test_a_cluster_of_two_workers_by_its_address(whole: xr.Dataset, tmp_path: Path) -> None:
    from distributed import LocalCluster

    with LocalCluster(
        n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None, silence_logs=50
    ) as cluster:
        found = scenarios.sweep(dive, inputs(), block=40, where=cluster.scheduler_address)
        same(found, whole)
        lazy = inputs().chunk(draw=40)
        stored = scenarios.sweep(dive, lazy, tmp_path / "b.zarr", block=40, where=cluster.scheduler_address)
        same(stored.load(), whole)


@pytest.mark.parametrize("where", ["threads", "processes"])
def test_a_killed_sweep_goes_on_where_it_was(whole: xr.Dataset, tmp_path: Path, where: str) -> None:
    store = tmp_path / "killed.zarr"
    run = subprocess.Popen(
        [sys.executable, "-m", "tests.scenarios.sweeping", str(store), where],
        cwd=ROOT,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
        start_new_session=True,
    )
    done = 0
    try:
        for _ in range(1200):
            time.sleep(0.05)
            try:
                done = int(np.sum(np.asarray(zarr.open_group(store, mode="r")["block_done"])))
            except (FileNotFoundError, KeyError, OSError):
                continue
            if done >= 3:
                break
            assert run.poll() is None
    finally:
        os.killpg(run.pid, signal.SIGKILL)
        run.wait()
    assert 3 <= done < 12
    seen = []
    found = scenarios.sweep(
        slow_dive, inputs(), store, block=20, where="threads", progress=lambda *x: seen.append(x)
    )
    # What was done is not done again.
    assert seen[0][0] >= 3
    assert seen[-1] == (12, 12)
    same(found.load(), whole)


def test_a_torn_block_is_done_again(whole: xr.Dataset, tmp_path: Path) -> None:
    store = tmp_path / "torn.zarr"
    scenarios.sweep(dive, inputs(), store, block=60)
    group = zarr.open_group(store, mode="r+")
    group["block_done"][2] = 0
    group["worst"][:, 120:180] = -1.0
    same(scenarios.sweep(dive, inputs(), store, block=60).load(), whole)


def test_another_sweep_is_refused(tmp_path: Path) -> None:
    store = tmp_path / "a.zarr"
    scenarios.sweep(large, inputs(20), store, block=10)
    for call in (
        lambda: scenarios.sweep(large, inputs(20), store, block=5),
        lambda: scenarios.sweep(dive, inputs(20), store, block=10),
        lambda: scenarios.sweep(large, inputs(20) + 1.0, store, block=10),
    ):
        with pytest.raises(GasphysError, match="another sweep"):
            call()
    (tmp_path / "mine").mkdir()
    (tmp_path / "mine" / "notes.txt").write_text("mine")
    with pytest.raises(GasphysError, match="no zarr store"):
        scenarios.sweep(large, inputs(20), tmp_path / "mine", block=10)


def test_memory_is_that_of_a_few_blocks(tmp_path: Path) -> None:
    """60 blocks of 8 MB: 480 MB pass, a tenth of it is held at a time."""
    what = inputs(6000)
    tracemalloc.start()
    try:
        found = scenarios.sweep(large, what, tmp_path / "large.zarr", block=100, workers=2)
        peak = tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()
    assert found.x.nbytes == 480_000_000
    assert peak < 100_000_000


def test_validity_goes_with_the_tasks() -> None:
    with gp.validity("raise"):
        for where in ("one", "threads", "processes"):
            assert scenarios.sweep(strict, inputs(8), block=4, where=where, workers=2).raises.all()


def test_refusals(tmp_path: Path) -> None:
    for call, error in (
        (lambda: scenarios.sweep(dive, inputs(4), block=0), RangeError),
        (lambda: scenarios.sweep(dive, inputs(4), where="thread"), UnknownNameError),
        (lambda: scenarios.sweep(dive, inputs(4), dim="candidate"), GasphysError),
        (lambda: scenarios.sweep(lambda ds: ds.isel(draw=0), inputs(4)), GasphysError),
    ):
        with pytest.raises(error):
            call()
