"""The search: candidates of a space, evaluated in blocks, all of them kept."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.errors import (
    ExposureError,
    GasphysError,
    NotReachableError,
    RangeError,
    ValidityError,
    unknown_name,
)
from gasphys.exposure import Exposure
from gasphys.limits import Limit, load
from gasphys.policy import validity
from gasphys.quantities import QUANTITIES, attributes, dataset_attributes
from gasphys.reviews import review
from gasphys.scenarios.distributions import bounded
from gasphys.scenarios.drawing import points
from gasphys.scenarios.sweeps import run_blocks
from gasphys.strategies.dives import Dives
from gasphys.strategies.dominance import front
from gasphys.strategies.objectives import Objective, as_array, objective

__all__ = ["explore"]

Array = NDArray[np.float64]


def explore(
    space: Mapping[str, Any],
    objectives: Mapping[str, Any] | Sequence[Any],
    constraints: Mapping[str, Callable[[Any], Any]] | Sequence[Any] = (),
    rng: np.random.Generator | int | None = None,
    *,
    n: int | None = None,
    build: Dives | Callable[[xr.Dataset], Any] | None = None,
    only: Callable[[xr.Dataset], Any] | None = None,
    role: str = "diver",
    block: int = 500,
    where: str = "one",
    workers: int | None = None,
    progress: Callable[[int, int], None] | None = None,
    cancel: Callable[[], bool] | None = None,
) -> xr.Dataset:
    """Evaluate candidates of a space, and find those that no other is better than.

    Parameters
    ----------
    space : mapping
        Name to its choices (a row of numbers) or its distribution of :mod:`gasphys.scenarios`.
    objectives : mapping or sequence
        Names or :class:`Objective` (``"ascent_time"``, ``"uptd"``, ``"gas_density"``, ...); or name to a
        callable that is given what was built and returns a number a candidate, smaller is better.
    constraints : sequence or mapping
        Hard limits: ids of the limits data, or :class:`gasphys.limits.Limit`; callables, or name to callable,
        that return a margin a candidate, negative beyond.
    rng : Generator or int, optional
        Source of chance, or its seed.
    n : int, optional
        Number of candidates drawn; every combination where not given and all of the space are choices.
    build : Dives or callable, optional
        What is built of candidates, for objectives and limits: :class:`Dives`, or a callable that makes an
        exposure or anything else of a Dataset along ``candidate``; the Dataset itself where not given.
    only : callable, optional
        Which candidates make sense: Dataset to true or false each; others are not evaluated.
    role : {"diver", "patient", "attendant"}
        Whose limits hold.
    block : int
        Candidates evaluated together: bounds the memory.
    where, workers
        Where blocks are evaluated, as for :func:`gasphys.scenarios.sweep`.
    progress : callable, optional
        Called with candidates done and in all.
    cancel : callable, optional
        Asked after each block; true ends the search with what is done.

    Returns
    -------
    Dataset
        Along ``candidate``, all that were evaluated: the space, the objectives, ``kept`` (all hard limits),
        ``front`` (not dominated among these), ``reason`` where there is no answer; along ``limit`` too
        ``status`` and ``margin``.

    Raises
    ------
    GasphysError
        If the space, an objective or a limit is not understood.

    Notes
    -----
    A hard limit is kept where its status is "within": what is not judged or not applicable does not count as
    kept. Every objective counts alike; nothing is weighed. The front is that of these candidates, by these
    models and these limits: it is no advice, and keeping the limits is no promise of anything.

    Examples
    --------
    >>> squares = {"near": lambda c: c.x**2, "far": lambda c: (c.x - 2.0) ** 2}
    >>> found = explore({"x": [-1.0, 0.0, 1.0, 2.0, 3.0]}, squares)
    >>> found.x.values[found.front.values].tolist()
    [0.0, 1.0, 2.0]
    """
    asked = _objectives(objectives)
    limits, others = _constraints(constraints)
    seed = str(rng) if isinstance(rng, (int, np.integer)) else ("none" if rng is None else "a generator")
    if isinstance(build, Dives):
        build.check([str(k) for k in space])
    candidates = _candidates(space, n, np.random.default_rng(rng))
    if only is not None:
        sensible = np.broadcast_to(np.asarray(only(candidates), dtype=bool), candidates.sizes["candidate"])
        candidates = candidates.isel(candidate=np.flatnonzero(sensible))
    total = candidates.sizes["candidate"]
    if not total:
        raise RangeError("no candidate is left: the space or only= leaves none")
    task = _Task(build, asked, limits, others, role)
    blocks = list(_blocks(candidates, build, block))
    later = ((k, candidates.isel(candidate=rows)) for k, rows in enumerate(blocks))
    results: dict[int, dict[str, Any]] = {}
    done, cancelled = 0, False
    for number, result in run_blocks(task, later, where, workers):
        results[number] = result
        done += len(blocks[number])
        if progress is not None:
            progress(done, total)
        if cancel is not None and done < total and cancel():
            cancelled = True
            break
    numbers = sorted(results)
    rows = np.concatenate([blocks[k] for k in numbers])
    order = np.argsort(rows, kind="stable")
    ds = candidates.isel(candidate=rows[order])
    for one in asked:
        values = np.concatenate([results[k][one.name] for k in numbers])[order]
        attrs = {"units": one.unit, "long_name": one.meaning or one.name}
        ds[one.name] = ("candidate", values, attrs | {"better": "larger" if one.larger else "smaller"})
    _judge(ds, [results[k] for k in numbers], order, [*(x.id for x in limits), *others])
    signs = np.array([-1.0 if one.larger else 1.0 for one in asked])
    values = np.stack([ds[one.name].values for one in asked], axis=-1) * signs
    on = front(np.where(ds["kept"].values[:, None], values, np.nan))
    ds["front"] = ("candidate", on, {"long_name": "kept and not dominated by another candidate that is"})
    ds.attrs = dataset_attributes(
        "strategies explored",
        "strategies",
        references=(x.source for x in limits),
        comment="The front of these candidates by these models: no advice, no promise.",
        objectives=", ".join(one.name for one in asked),
        constraints=", ".join([*(x.id for x in limits), *others]) or "none",
        role=role,
        seed=seed,
        candidates=total,
        evaluated=len(rows),
        cancelled="yes" if cancelled else "no",
        **({"model": str(build.model)} if isinstance(build, Dives) else {}),
    )
    return ds


def _objectives(given: Mapping[str, Any] | Sequence[Any]) -> list[Objective]:
    if isinstance(given, Mapping):
        found = [
            v if isinstance(v, Objective) else Objective(str(k), v) if callable(v) else objective(v)
            for k, v in given.items()
        ]
    else:
        found = [objective(v) for v in ([given] if isinstance(given, (str, Objective)) else given)]
    if not found:
        raise RangeError("name at least one objective")
    names = [one.name for one in found]
    if len(set(names)) < len(names):
        raise RangeError(f"two objectives are called {max(names, key=names.count)!r}")
    return found


def _constraints(given: Any) -> tuple[list[Limit], dict[str, Callable[[Any], Any]]]:
    limits: list[Limit] = []
    others: dict[str, Callable[[Any], Any]] = {}
    if isinstance(given, Mapping):
        return limits, {str(k): v for k, v in given.items()}
    known = {x.id: x for x in load("default")}
    for one in [given] if isinstance(given, (str, Limit)) else given:
        if isinstance(one, Limit):
            limits.append(one)
        elif callable(one):
            others[getattr(one, "__name__", f"limit {len(others) + 1}").strip("<>")] = one
        elif isinstance(one, Mapping):
            others |= {str(k): v for k, v in one.items()}
        elif str(one) in known:
            limits.append(known[str(one)])
        else:
            raise unknown_name("limit", str(one), known)
    return limits, others


def _candidates(space: Mapping[str, Any], n: int | None, rng: np.random.Generator) -> xr.Dataset:
    """Return the candidates: every combination of choices, or draws."""
    if not space:
        raise RangeError("name at least one thing that differs between candidates")
    choices: dict[str, Array | None] = {}
    for name, given in space.items():
        if hasattr(given, "ppf"):
            choices[str(name)] = None
            continue
        row = np.atleast_1d(np.asarray(given, dtype=float))
        if row.ndim != 1 or not row.size or not np.isfinite(row).all():
            raise RangeError(f"{name}: give a row of finite numbers or a distribution")
        choices[str(name)] = row
    columns: dict[str, Array] = {}
    if n is None:
        if any(row is None for row in choices.values()):
            raise RangeError("n, the number of candidates, is needed where a distribution is drawn from")
        mesh = np.meshgrid(*[r for r in choices.values() if r is not None], indexing="ij")
        columns = {name: m.ravel() for name, m in zip(choices, mesh, strict=True)}
    else:
        cube = points(len(choices), n, rng, "sobol")
        for k, (name, some) in enumerate(choices.items()):
            if some is None:
                columns[name] = bounded(name, space[name]).values(cube[:, k])
            else:
                columns[name] = some[np.minimum((cube[:, k] * len(some)).astype(int), len(some) - 1)]
    size = len(next(iter(columns.values())))
    ds = xr.Dataset(coords={"candidate": np.arange(size)})
    for name, values in columns.items():
        ds[name] = ("candidate", values, attributes(name) if name in QUANTITIES else {})
    return ds


def _blocks(candidates: xr.Dataset, build: Any, block: int) -> Iterator[NDArray[np.int64]]:
    """Yield places of candidates that are evaluated together."""
    if isinstance(block, bool) or not isinstance(block, (int, np.integer)) or not block > 0:
        raise RangeError(f"block = {block!r} must be a positive whole number")
    names = [n for n in (build.apart() if isinstance(build, Dives) else ()) if n in candidates]
    size = candidates.sizes["candidate"]
    if names:
        table = np.stack([candidates[n].values for n in names], axis=-1)
        _, which = np.unique(table, axis=0, return_inverse=True)
        order = np.argsort(which.ravel(), kind="stable")
        edges = np.flatnonzero(np.diff(which.ravel()[order])) + 1
        groups = np.split(order, edges)
    else:
        groups = [np.arange(size)]
    for rows in groups:
        for k in range(0, len(rows), block):
            yield rows[k : k + block]


class _Task:
    """Builds a block of candidates and asks every objective and limit."""

    def __init__(
        self,
        build: Any,
        asked: list[Objective],
        limits: list[Limit],
        others: dict[str, Callable[[Any], Any]],
        role: str,
    ) -> None:
        self.build, self.asked, self.limits, self.others, self.role = build, asked, limits, others, role

    def __call__(self, number: int, candidates: xr.Dataset) -> tuple[int, dict[str, Any]]:
        """Return the number of the block and what was found."""
        size = candidates.sizes["candidate"]
        # What is outside a model's validity is told by its limits, not a hundred thousand times.
        with validity("ignore"):
            try:
                built = self._built(candidates)
            except (NotReachableError, ValidityError) as error:
                return number, self._nothing(size, str(error))
            found: dict[str, Any] = {"reason": np.full(size, "", dtype=object)}
            status, margin = self._limits(built, size)
            found |= {"status": status, "margin": margin}
            failed = np.zeros(size, dtype=bool)
            for one in self.asked:
                more = (self._kept,) if one.needs_limits else ()
                found[one.name] = as_array(one.of(built, *more), size, one.name)
                failed |= np.isnan(found[one.name])
            found["reason"][failed] = "no answer: an objective is not defined or the ascent cannot be planned"
        return number, found

    def _built(self, candidates: xr.Dataset) -> Any:
        if isinstance(self.build, Dives):
            return self.build.build(candidates)
        return candidates if self.build is None else self.build(candidates)

    def _nothing(self, size: int, why: str) -> dict[str, Any]:
        count = len(self.limits) + len(self.others)
        found: dict[str, Any] = {one.name: np.full(size, np.nan) for one in self.asked}
        return found | {
            "reason": np.full(size, why, dtype=object),
            "status": np.full((count, size), "not judged"),
            "margin": np.full((count, size), np.nan),
        }

    def _limits(self, built: Any, size: int) -> tuple[Any, Array]:
        status, margin = [], []
        if self.limits:
            exposure = built if isinstance(built, Exposure) else getattr(built, "exposure", None)
            if exposure is None:
                raise ExposureError("limits judge exposures: build= must make one of the candidates")
            judged = review(exposure, role=self.role, limits=self.limits)
            for limit in self.limits:
                row = judged.sel(limit=limit.id)
                status.append(np.broadcast_to(row["status"].values, (size,)))
                margin.append(np.broadcast_to(row["margin"].values, (size,)))
        for name, one in self.others.items():
            values = as_array(one(built), size, name)
            words = np.where(np.isnan(values), "not judged", np.where(values >= 0.0, "within", "beyond"))
            status.append(words)
            margin.append(values)
        if not status:
            return np.empty((0, size), dtype="<U14"), np.empty((0, size))
        return np.stack(status), np.stack(margin)

    def _kept(self, built: Any) -> NDArray[np.bool_]:
        """Return which candidates keep every hard limit."""
        if not (self.limits or self.others):
            raise GasphysError("an overstay margin needs at least one hard limit that it uses up")
        status, _ = self._limits(built, built.candidates.sizes["candidate"])
        kept: NDArray[np.bool_] = (status == "within").all(axis=0)
        return kept


def _judge(ds: xr.Dataset, results: list[dict[str, Any]], order: NDArray[np.int64], names: list[str]) -> None:
    """Add status, margin and whether all is kept."""
    status = np.concatenate([r["status"] for r in results], axis=1)[:, order]
    margin = np.concatenate([r["margin"] for r in results], axis=1)[:, order]
    if names:
        ds.coords["limit"] = np.array(names, dtype=str)
        words = {"long_name": "beyond, within, not applicable or not judged"}
        ds["status"] = (("limit", "candidate"), status.astype(str), words)
        ds["margin"] = (
            ("limit", "candidate"),
            margin,
            {"long_name": "distance to the limit, positive inside"},
        )
    reason = np.concatenate([r["reason"] for r in results])[order].astype(str)
    ds["reason"] = ("candidate", reason, {"long_name": "why there is no answer"})
    kept = (status == "within").all(axis=0) & (reason == "")
    ds["kept"] = ("candidate", kept, {"long_name": "whether every hard limit is kept"})
