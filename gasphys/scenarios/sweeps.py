"""Sweeps larger than memory: a block of scenarios at a time, by dask, kept in a zarr store as they finish."""

from __future__ import annotations

import hashlib
import json
import os
import warnings
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import GasphysError, RangeError, unknown_name
from gasphys.policy import validity, validity_mode

__all__ = ["run_blocks", "sweep"]

#: Where a sweep may run, besides the address of a cluster.
PLACES = ("threads", "processes", "one")
#: Variable of a store that says which blocks are done, and the attribute that says of which sweep.
_DONE, _MARK = "block_done", "sweep"
#: Longest word kept in a store.
_WORD = 64


def sweep(
    function: Callable[[xr.Dataset], xr.Dataset],
    inputs: xr.Dataset,
    store: str | os.PathLike[str] | None = None,
    *,
    block: int = 1000,
    dim: str = "draw",
    where: str = "threads",
    workers: int | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> xr.Dataset:
    """Run a function over many scenarios, a block at a time, on threads, processes or a cluster.

    Parameters
    ----------
    function : callable
        Dataset of some scenarios to Dataset of results with the same `dim`; what a scenario gives must not
        depend on the others.
    inputs : Dataset
        Of :func:`sample`, or lazy (chunked) where the inputs themselves do not fit.
    store : path, optional
        Folder of a zarr store: every block is written as it is done, and the result is opened lazily. A sweep
        that was ended, however rudely, goes on with what is missing when it is called again.
    block : int
        Scenarios in a block: memory is that of one block a worker.
    dim : str
        Dimension that is divided.
    where : str
        ``"threads"``, ``"processes"``, ``"one"`` after the other, or the address of a running
        ``dask.distributed`` scheduler, such as ``"tcp://127.0.0.1:8786"``.
    workers : int, optional
        Threads or processes; as many as there are cores where not given.
    progress : callable, optional
        Called with blocks done and blocks in all.

    Returns
    -------
    Dataset
        All scenarios in order; with a store lazy, else in memory.

    Raises
    ------
    GasphysError
        If dask or zarr is missing, or the store holds another sweep.
    RangeError
        If the block is not a positive whole number.

    Notes
    -----
    Distribution is dask's: each block is one task. On processes the script that calls must begin with
    ``if __name__ == "__main__":``. Results are the same whatever runs them, and to rounding
    whatever the block is. Several machines need a store that all of them reach. The mode of
    :func:`gasphys.validity` goes with the tasks.

    Examples
    --------
    >>> import gasphys as gp
    >>> what = gp.scenarios.sample({"alveolar_pco2": gp.scenarios.Normal(5.3, 0.4)}, 1000, rng=1)
    >>> def alveolar(ds):
    ...     return gp.lungs.alveolar_po2(243.18, 1.0, ds.alveolar_pco2).to_dataset()
    >>> sweep(alveolar, what, block=300).sizes["draw"]
    1000
    """
    if isinstance(block, bool) or not isinstance(block, (int, np.integer)) or not block > 0:
        raise RangeError(f"block = {block!r} must be a positive whole number")
    if dim not in inputs.sizes or not inputs.sizes[dim]:
        raise GasphysError(f"the inputs have no dimension {dim!r} to divide")
    if where not in PLACES and "://" not in where:
        raise unknown_name("place to run", where, PLACES)
    size = inputs.sizes[dim]
    slices = [slice(k, min(k + block, size)) for k in range(0, size, block)]
    kept = None if store is None else _Store(Path(store), dim, block)
    if kept is not None:
        _need("zarr")
        kept.open(function, inputs, len(slices))
    todo = [k for k in range(len(slices)) if kept is None or not kept.done(k)]
    task = _Task(function, dim, None if kept is None else kept.path, validity_mode())
    if progress is not None and len(todo) < len(slices):
        progress(len(slices) - len(todo), len(slices))
    found: dict[int, xr.Dataset] = {}
    later = ((k, inputs.isel({dim: slices[k]}), slices[k]) for k in todo)
    for count, (k, result) in enumerate(run_blocks(task, later, where, workers), len(slices) - len(todo) + 1):
        if result is not None:
            found[k] = result
        if progress is not None:
            progress(count, len(slices))
    if kept is not None:
        return kept.read()
    rules: Any = {"data_vars": "minimal", "coords": "minimal", "compat": "override"}
    return xr.concat([found[k] for k in sorted(found)], dim, combine_attrs="override", **rules)


def _need(name: str) -> Any:
    import importlib

    try:
        return importlib.import_module(name)
    except ImportError:
        raise GasphysError(
            f"sweeps need {name}, which is not installed: pip install 'gasphys[distributed]'"
        ) from None


class _Task:
    """One block: computed, and where there is a store written to its place there."""

    def __init__(
        self, function: Callable[[xr.Dataset], xr.Dataset], dim: str, path: Path | None, mode: Any
    ) -> None:
        self.function, self.dim, self.path, self.mode = function, dim, path, mode

    def __call__(self, number: int, inputs: xr.Dataset, place: slice) -> tuple[int, xr.Dataset | None]:
        """Return the number of the block with its result, None where it went to the store."""
        result = _results(self.function, inputs, self.dim, self.mode)
        if self.path is None:
            return number, result
        _write(result, self.path, self.dim, number, place)
        return number, None


def _results(
    function: Callable[[xr.Dataset], xr.Dataset], inputs: xr.Dataset, dim: str, mode: Any
) -> xr.Dataset:
    if any(v.chunks is not None for v in inputs.variables.values()):
        # A task computes its own inputs: asking the scheduler that runs it might wait for ever.
        with _need("dask").config.set(scheduler="synchronous"):
            inputs = inputs.load()
    with validity(mode):
        result = function(inputs)
        if isinstance(result, xr.DataArray):
            result = result.to_dataset(name=result.name or "result")
        if not isinstance(result, xr.Dataset) or result.sizes.get(dim) != inputs.sizes[dim]:
            raise GasphysError(f"the function must return a Dataset with the {dim!r} of its inputs")
        return result.load()


def run_blocks(
    task: Callable[..., Any], blocks: Iterator[Any], where: str, workers: int | None = None
) -> Iterator[Any]:
    """Yield what a task makes of blocks, as they finish; only a few are on their way at a time.

    Parameters
    ----------
    task : callable
        Called with the parts of a block.
    blocks : iterator of tuple
        Made when they are needed.
    where, workers
        As for :func:`sweep`.

    Yields
    ------
    object
        A result a block, in any order.

    Raises
    ------
    GasphysError
        If dask is missing.
    UnknownNameError
        If the place is unknown.

    Examples
    --------
    >>> list(run_blocks(pow, iter([(2, 3), (3, 2)]), "one"))
    [8, 9]
    """
    if where not in PLACES and "://" not in where:
        raise unknown_name("place to run", where, PLACES)
    if where == "one":
        for one in blocks:
            yield task(*one)
        return
    dask: Any = _need("dask")
    if "://" in where:
        yield from _on_cluster(task, blocks, where)
        return
    count = workers or os.cpu_count() or 1
    later = dask.delayed(task, pure=False)
    with dask.config.set(scheduler=where, num_workers=count):
        while wave := [one for _, one in zip(range(4 * count), blocks, strict=False)]:
            yield from dask.compute(*(later(*one) for one in wave))


def _on_cluster(task: Callable[..., Any], blocks: Iterator[Any], address: str) -> Iterator[Any]:
    distributed: Any = _need("distributed")
    with distributed.Client(address, set_as_default=False) as client:
        ahead = 2 * max(1, sum(client.ncores().values()))
        waiting = distributed.as_completed(loop=client.loop)
        for one in blocks:
            waiting.add(client.submit(task, *one, pure=False))
            if waiting.count() >= ahead:
                yield next(waiting).result()
        for one in waiting:
            yield one.result()


# -- The store -------------------------------------------------------------------------------------


class _Store:
    """A zarr store with a place for every block, and which of them are done."""

    def __init__(self, path: Path, dim: str, block: int) -> None:
        self.path, self.dim, self.block = path.absolute(), dim, block

    def open(self, function: Callable[[xr.Dataset], xr.Dataset], inputs: xr.Dataset, blocks: int) -> None:
        """Lay the store out, or go on with the one that is there."""
        mark = _mark(function, inputs, self.block)
        if (self.path / "zarr.json").exists() or (self.path / ".zgroup").exists():
            with xr.open_zarr(self.path, consolidated=False) as there:
                held = there.attrs.get(_MARK)
                if held == mark and _DONE in there:
                    return
            if held is not None and held != mark:
                differs = [k for k, v in json.loads(mark).items() if json.loads(held).get(k) != v]
                raise GasphysError(
                    f"{self.path} holds another sweep (its {', '.join(differs) or 'layout'} differs); give "
                    "another path, or remove it"
                )
        elif self.path.exists() and any(self.path.iterdir()):
            raise GasphysError(f"{self.path} is no zarr store and is not empty; give another path")
        self._lay_out(function, inputs, blocks, mark)

    def _lay_out(
        self, function: Callable[[xr.Dataset], xr.Dataset], inputs: xr.Dataset, blocks: int, mark: str
    ) -> None:
        dask: Any = _need("dask.array")
        # One scenario tells names, kinds and the other dimensions.
        like = _results(function, inputs.isel({self.dim: slice(0, 1)}), self.dim, validity_mode())
        size = inputs.sizes[self.dim]
        made = xr.Dataset(attrs={**like.attrs, _MARK: mark})
        for name, one in like.variables.items():
            if self.dim not in one.dims or name == self.dim:
                made[name] = one if name != self.dim else inputs.variables.get(name, one)
                continue
            if one.dtype.kind not in "fiubU":
                raise GasphysError(f"{name} holds {one.dtype}; a store takes numbers, truth values and words")
            shape = tuple(size if d == self.dim else n for d, n in one.sizes.items())
            chunks = tuple(self.block if d == self.dim else max(n, 1) for d, n in one.sizes.items())
            kind = one.dtype if one.dtype.kind != "U" else f"<U{_WORD}"
            made[name] = (one.dims, dask.empty(shape, chunks=chunks, dtype=kind), one.attrs)
        made = made.set_coords([n for n in like.coords if n in made])
        made[_DONE] = ("block", dask.zeros(blocks, chunks=1, dtype=np.int8))
        with warnings.catch_warnings():
            # Words of a fixed length are no part of zarr's specification yet.
            warnings.filterwarnings("ignore", message="The data type")
            made.drop_encoding().to_zarr(self.path, mode="w", compute=False, consolidated=False)

    def done(self, number: int) -> bool:
        """Return whether a block is in the store."""
        if not hasattr(self, "_done"):
            zarr = _need("zarr")
            self._done = np.asarray(zarr.open_group(self.path, mode="r")[_DONE])
        return bool(self._done[number])

    def read(self) -> xr.Dataset:
        """Return all results, lazily."""
        ds: xr.Dataset = xr.open_zarr(self.path, consolidated=False).drop_vars(_DONE)
        del ds.attrs[_MARK]
        return ds


def _write(result: xr.Dataset, path: Path, dim: str, number: int, place: slice) -> None:
    zarr = _need("zarr")
    group = zarr.open_group(path, mode="r+")
    with_dim = [str(n) for n, v in result.variables.items() if dim in v.dims and n != dim]
    for name in with_dim:
        one = result.variables[name]
        index = tuple(place if d == dim else slice(None) for d in one.dims)
        group[name][index] = one.values.astype(group[name].dtype)
    # Last, so that a block counts only when all of it is there.
    group[_DONE][number] = 1


def _mark(function: Any, inputs: xr.Dataset, block: int) -> str:
    """Return what tells one sweep from another: function, inputs, block."""
    digest = hashlib.sha256()
    code = getattr(function, "__code__", None)
    what = str(getattr(function, "__qualname__", type(function).__qualname__))
    if code is not None:
        plain = [c for c in code.co_consts if not hasattr(c, "co_code")]
        digest.update(code.co_code + repr((plain, code.co_names)).encode())
        what = f"{what} {digest.hexdigest()[:12]}"
    lazy = any(v.chunks is not None for v in inputs.variables.values())
    # Lazy inputs may not fit: their first scenarios must do.
    seen = inputs.isel({d: slice(0, 50) for d in inputs.sizes}) if lazy else inputs
    digest = hashlib.sha256()
    for name in sorted(map(str, seen.variables)):
        values = np.ascontiguousarray(seen[name].values)
        digest.update(f"{name} {values.dtype} {values.shape}".encode() + values.tobytes())
    sizes = {str(k): int(v) for k, v in inputs.sizes.items()}
    told = {"function": what, "inputs": digest.hexdigest()[:16], "sizes": sizes, "block": int(block)}
    return json.dumps(told, sort_keys=True)
