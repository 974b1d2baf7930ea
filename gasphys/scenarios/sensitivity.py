"""Which unknown matters most: variance-based indices and elementary effects of any function."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.errors import GasphysError, RangeError
from gasphys.quantities import dataset_attributes
from gasphys.scenarios.distributions import Bounded, all_bounded
from gasphys.scenarios.drawing import labelled, points

__all__ = ["elementary_effects", "ranking_text", "sobol"]

Array = NDArray[np.float64]
#: Runs asked of the function at once: bounds the memory.
_AT_ONCE = 100_000
#: Share of an unbounded distribution left out at each end when it is walked from end to end.
_TAIL = 0.005


def sobol(
    function: Callable[..., Any],
    distributions: Mapping[str, Any],
    n: int,
    rng: np.random.Generator | int | None = None,
    *,
    resamples: int = 200,
    confidence: float = 0.95,
    at_once: int = _AT_ONCE,
) -> xr.Dataset:
    """First-order and total Sobol indices of a function, with bootstrap intervals.

    Parameters
    ----------
    function : callable
        Called with each input by name, a DataArray along ``draw`` with its unit; returns a DataArray along
        ``draw``, further dimensions are kept. An equation of this library, or a line that builds an exposure
        and picks one number of its review.
    distributions : mapping
        As for :func:`sample`; inputs are independent of one another.
    n : int
        Rows of the design; the function is evaluated (inputs + 2) times as often. Best a power of 2.
    rng : Generator or int, optional
        Source of chance, or its seed.
    resamples : int
        Bootstrap samples.
    confidence : float
        Probability of the intervals [1].
    at_once : int
        Most runs asked of the function in one call.

    Returns
    -------
    Dataset
        Along ``parameter``: ``first_order`` and ``total`` with ``_low`` and ``_high`` [1]; beside them
        ``result_mean`` and ``result_standard_deviation``. An index is NaN where the result does not vary.

    Raises
    ------
    GasphysError
        If a result is not a finite number: such as the time of a crossing that never happens.

    Notes
    -----
    The first-order index of an input is the share of variance that would be gone if it were known, the total
    index the share that would stay if all others were known: the interactions with the others are counted to
    every one of them. Estimators of Saltelli et al. (2010) and Jansen (1999) on a scrambled Sobol sequence;
    the bootstrap resamples its rows, and is wide rather than narrow for it. For a strongly skewed result
    variance is a poor measure.

    Examples
    --------
    >>> import gasphys as gp
    >>> from gasphys.scenarios import Uniform
    >>> what = {"fraction": Uniform(0.2, 0.4), "total_pressure": Uniform(200.0, 300.0)}
    >>> found = sobol(gp.laws.dalton_partial_pressure, what, 1024, rng=1)
    >>> found.first_order.round(1).values.tolist()
    [0.7, 0.3]
    """
    chosen = all_bounded(distributions)
    d, rng = len(chosen), np.random.default_rng(rng)
    if not 0.0 < confidence < 1.0:
        raise RangeError(f"confidence = {confidence} must be between 0 and 1")
    cube = points(2 * d, n, rng, "sobol")
    first, second = cube[:, :d], cube[:, d:]
    mixed = [np.where(np.arange(d) == k, second, first) for k in range(d)]
    values, dims, coords, name = _evaluated(
        function, chosen, np.concatenate([first, second, *mixed]), at_once
    )
    rows = values.reshape(d + 2, n, *values.shape[1:])
    index = np.stack(_indices(rows))
    again = np.stack([np.stack(_indices(rows[:, rng.integers(0, n, n)])) for _ in range(resamples)])
    tail = 0.5 * (1.0 - confidence)
    low, high = np.quantile(again, [tail, 1.0 - tail], axis=0)
    ds = xr.Dataset(coords={"parameter": [b.name for b in chosen], **coords})
    meanings = ("share of variance by the input alone", "share of variance with all its interactions")
    for k, (what, meaning) in enumerate(zip(("first_order", "total"), meanings, strict=True)):
        for ending, numbers in (("", index[k]), ("_low", low[k]), ("_high", high[k])):
            words = {"": meaning, "_low": f"{meaning}, lower bound", "_high": f"{meaning}, upper bound"}
            ds[what + ending] = (("parameter", *dims), numbers, {"units": "1", "long_name": words[ending]})
    both = rows[:2].reshape(2 * n, *values.shape[1:])
    ds["result_mean"] = (dims, both.mean(axis=0), {"long_name": f"mean of {name}"})
    ds["result_standard_deviation"] = (dims, both.std(axis=0), {"long_name": f"standard deviation of {name}"})
    ds.attrs = dataset_attributes(
        f"Sobol indices of {name}",
        "scenarios",
        references=("sobol_2001", "saltelli_2010", "jansen_1999"),
        rows=n,
        evaluations=n * (d + 2),
        confidence=confidence,
        distributions="; ".join(f"{b.name}: {_told(b)}" for b in chosen),
    )
    return ds


def _told(one: Bounded) -> str:
    given: Any = one.distribution
    if hasattr(given, "dist"):  # a frozen one of scipy
        return f"{given.dist.name}{given.args}"
    return repr(given)


def _evaluated(
    function: Callable[..., Any], chosen: list[Bounded], cube: Array, at_once: int
) -> tuple[Array, tuple[str, ...], dict[str, Any], str]:
    """Return the results ``(draw, ...)``, their further dimensions with labels, and what they are called."""
    found, last = [], xr.DataArray(np.nan)
    for begin in range(0, len(cube), at_once):
        inputs = labelled(chosen, cube[begin : begin + at_once])
        last = function(**{str(n): inputs[n] for n in inputs.data_vars})
        if not isinstance(last, xr.DataArray) or "draw" not in last.dims:
            raise TypeError("the function must return a DataArray along draw, one number for every run")
        last = last.transpose("draw", ...)
        found.append(np.asarray(last.values, dtype=float))
    values = np.concatenate(found)
    bad = ~np.isfinite(values)
    if bad.any():
        raise GasphysError(
            f"{int(bad.sum())} of {values.size} results are not finite numbers, and each run needs one: "
            "the time beyond a limit or its margin instead of the first crossing, or narrower inputs"
        )
    dims = tuple(str(d) for d in last.dims[1:])
    return values, dims, {d: last[d].values for d in dims if d in last.coords}, str(last.name or "the result")


def _indices(rows: Array) -> tuple[Array, Array]:
    """Return first-order and total indices from ``(matrix, row, ...)``: A, B, then A with one column of B."""
    first, second, mixed = rows[0], rows[1], rows[2:]
    whole = rows[:2].reshape(-1, *rows.shape[2:])
    variance = whole.var(axis=0)
    # Less rounding, and less variance of the estimator, about the mean.
    middle = whole.mean(axis=0)
    with np.errstate(divide="ignore", invalid="ignore"):
        alone = ((second - middle) * (mixed - first)).mean(axis=1) / variance
        total = 0.5 * ((first - mixed) ** 2).mean(axis=1) / variance
    still = variance <= (1e-14 * np.abs(middle)) ** 2
    return np.where(still, np.nan, alone), np.where(still, np.nan, total)


def elementary_effects(
    function: Callable[..., Any],
    distributions: Mapping[str, Any],
    trajectories: int,
    rng: np.random.Generator | int | None = None,
    *,
    levels: int = 4,
    resamples: int = 200,
    confidence: float = 0.95,
) -> xr.Dataset:
    """Screening of many inputs with few runs: elementary effects, one input changed at a time.

    Parameters
    ----------
    function : callable
        As for :func:`sobol`.
    distributions : mapping
        As for :func:`sobol`.
    trajectories : int
        Walks through the inputs; the function is evaluated (inputs + 1) times as often.
    rng : Generator or int, optional
        Source of chance, or its seed.
    levels : int
        Levels of each input, even.
    resamples : int
        Bootstrap samples.
    confidence : float
        Probability of the interval [1].

    Returns
    -------
    Dataset
        Along ``parameter``: ``mean_absolute_effect`` with ``_low`` and ``_high``, ``mean_effect`` and
        ``effect_deviation``, in the unit of the result for the whole range of the input.

    Raises
    ------
    RangeError
        If `levels` is odd, or there are fewer than two trajectories.
    GasphysError
        If a result is not a finite number.

    Notes
    -----
    Morris (1991), the mean of absolute effects by Campolongo et al. (2007). Steps are steps of cumulative
    probability, from end to end of a distribution; 0.5 % are left out at an end that is infinite or far from
    all else. A deviation as large as the mean tells of curvature or interaction.

    Examples
    --------
    >>> import gasphys as gp
    >>> from gasphys.scenarios import Uniform
    >>> what = {"fraction": Uniform(0.2, 0.4), "total_pressure": Uniform(200.0, 300.0)}
    >>> found = elementary_effects(gp.laws.dalton_partial_pressure, what, 50, rng=1)
    >>> found.mean_absolute_effect.round(-1).values.tolist()
    [50.0, 30.0]
    """
    if levels < 2 or levels % 2:
        raise RangeError(f"levels = {levels} must be even and at least 2")
    if trajectories < 2:
        raise RangeError(f"trajectories = {trajectories} must be at least 2")
    chosen = all_bounded(distributions)
    d, rng = len(chosen), np.random.default_rng(rng)
    step = levels / (2.0 * (levels - 1.0))
    # A start in the lower or upper half of every input, from which a step stays inside.
    base = rng.integers(0, levels // 2, (trajectories, d)) / (levels - 1.0)
    up = rng.random((trajectories, d)) < 0.5
    start = np.where(up, base, base + step)
    order = np.argsort(rng.random((trajectories, d)), axis=1)
    rank = np.argsort(order, axis=1)
    moved = np.arange(d + 1)[None, :, None] > rank[:, None, :]
    end = np.where(up, base + step, base)
    cube = np.where(moved, end[:, None, :], start[:, None, :])
    ends = np.array([_ends(b) for b in chosen])
    cube = ends[:, 0] + (ends[:, 1] - ends[:, 0]) * cube
    values, dims, coords, name = _evaluated(function, chosen, cube.reshape(-1, d), _AT_ONCE)
    walks = values.reshape(trajectories, d + 1, *values.shape[1:])
    change = np.diff(walks, axis=1)
    picked = np.take_along_axis(change, rank.reshape(trajectories, d, *(1,) * len(dims)), axis=1)
    sign = np.where(up, 1.0, -1.0).reshape(trajectories, d, *(1,) * len(dims))
    effects = picked * sign / step
    again = np.stack(
        [np.abs(effects[rng.integers(0, trajectories, trajectories)]).mean(axis=0) for _ in range(resamples)]
    )
    tail = 0.5 * (1.0 - confidence)
    low, high = np.quantile(again, [tail, 1.0 - tail], axis=0)
    ds = xr.Dataset(coords={"parameter": [b.name for b in chosen], **coords})
    for what, numbers, meaning in (
        ("mean_absolute_effect", np.abs(effects).mean(axis=0), "mean of the absolute effects"),
        ("mean_absolute_effect_low", low, "mean of the absolute effects, lower bound"),
        ("mean_absolute_effect_high", high, "mean of the absolute effects, upper bound"),
        ("mean_effect", effects.mean(axis=0), "mean of the effects"),
        ("effect_deviation", effects.std(axis=0, ddof=1), "standard deviation of the effects"),
    ):
        ds[what] = (("parameter", *dims), numbers, {"long_name": f"{meaning} on {name}"})
    ds.attrs = dataset_attributes(
        f"elementary effects on {name}",
        "scenarios",
        references=("morris_1991", "campolongo_2007"),
        trajectories=trajectories,
        levels=levels,
        evaluations=trajectories * (d + 1),
        confidence=confidence,
        distributions="; ".join(f"{b.name}: {_told(b)}" for b in chosen),
    )
    return ds


def _ends(one: Bounded) -> tuple[float, float]:
    """Return the cumulative probabilities between which an input is walked."""
    # An end far from all else, in quartile ranges, is one in name only: 0 of a log-normal, 0 K.
    ends = [float(one.distribution.ppf(p)) for p in (one.first, one.last)]
    near = one.values(np.array([_TAIL, 0.25, 0.75, 1.0 - _TAIL]))
    units = one.unit if one.quantity is not None else ""
    given = str(getattr(one.distribution, "unit", "")) or units
    if one.quantity is not None and given != units:
        ends = [float(one.quantity.from_unit(e, given)) for e in ends]
    reach = abs(near[2] - near[1])
    low = 0.0 if abs(ends[0] - near[0]) <= reach else _TAIL
    return low, 1.0 if abs(ends[1] - near[3]) <= reach else 1.0 - _TAIL


def ranking_text(ds: xr.Dataset) -> str:
    """Return the inputs by weight, as a table.

    Parameters
    ----------
    ds : Dataset
        Of :func:`sobol` or :func:`elementary_effects`, of one number.

    Returns
    -------
    str
        A line an input, the weightiest first.

    Raises
    ------
    GasphysError
        If there is more than one number for an input.

    Examples
    --------
    >>> import gasphys as gp
    >>> from gasphys.scenarios import Uniform
    >>> what = {"fraction": Uniform(0.2, 0.4), "total_pressure": Uniform(200.0, 300.0)}
    >>> text = ranking_text(sobol(gp.laws.dalton_partial_pressure, what, 1024, rng=1))
    >>> [line.split()[0] for line in text.splitlines()[2:]]
    ['fraction', 'total_pressure', 'interactions']
    """
    by_variance = "total" in ds
    key = "total" if by_variance else "mean_absolute_effect"
    if ds[key].dims != ("parameter",):
        raise GasphysError(
            f"pick one number first: the dataset has the dimensions {', '.join(map(str, ds[key].dims))}"
        )
    width = max(24, max(len(str(p)) for p in ds.parameter.values))
    order = np.argsort(-ds[key].values)
    lines = [str(ds.attrs["title"])]
    if by_variance:
        lines.append(f"{'':<{width}}{'alone':>5}  interval      with others  interval")
    else:
        lines.append(f"{'':<{width}}mean absolute effect, interval; deviation")
    for k in order:
        row = ds.isel(parameter=int(k))
        name = f"{row.parameter.values!s:<{width}}"
        if by_variance:
            parts = [
                f"{float(row[w]):5.2f}  {float(row[w + '_low']):.2f} to {float(row[w + '_high']):.2f}"
                for w in ("first_order", "total")
            ]
            lines.append(name + "   ".join(parts))
        else:
            lines.append(
                f"{name}{float(row[key]):.4g}  {float(row[key + '_low']):.4g} to "
                f"{float(row[key + '_high']):.4g}; {float(row['effect_deviation']):.4g}"
            )
    if by_variance:
        extra = 1.0 - float(ds["first_order"].sum())
        lines.append(f"{'interactions':<{width}}{extra:5.2f}  what no input does alone")
    return "\n".join(lines)
