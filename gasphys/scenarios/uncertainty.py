"""How sure a result is: bands, chances of crossing a limit, exact propagation, and whose doing it is."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.errors import GasphysError, RangeError, unknown_name
from gasphys.limits import Limit
from gasphys.policy import weakest
from gasphys.quantities import attributes, dataset_attributes
from gasphys.scenarios.drawing import correlation_matrix
from gasphys.tissues.sets import load as tissue_set

__all__ = ["bands", "crossing_chance", "propagate", "tissue_limits", "variance_split"]

Array = NDArray[np.float64]
#: Quantile of the normal distribution of the interval of a counted chance: 95 of 100.
_Z = 1.959963984540054


def bands(
    values: xr.DataArray | xr.Dataset, levels: Sequence[float] = (0.05, 0.5, 0.95), dim: str = "draw"
) -> Any:
    """Quantiles of a result over its draws.

    Parameters
    ----------
    values : DataArray or Dataset
        A result along `dim`; of a Dataset every numeric variable that has it.
    levels : sequence of float
        Cumulative probabilities [1].
    dim : str
        Dimension of the draws.

    Returns
    -------
    DataArray or Dataset
        Along ``quantile`` instead.

    Raises
    ------
    GasphysError
        If nothing has the dimension.
    RangeError
        If a level is not within 0 to 1.

    Notes
    -----
    A draw is one of the values: no interpolation. The time of a crossing that never happens counts as later
    than every other, so that a quantile of it is NaN where that share of the draws does not cross.

    Examples
    --------
    >>> numbers = xr.DataArray([1.0, 2.0, 3.0, 4.0, 5.0], dims="draw")
    >>> bands(numbers, [0.2, 0.5]).values.tolist()
    [1.0, 3.0]
    """
    if not all(0.0 <= q <= 1.0 for q in levels):
        raise RangeError(f"levels {list(levels)} must be within 0 to 1")
    if isinstance(values, xr.Dataset):
        numeric = [n for n, v in values.data_vars.items() if dim in v.dims and v.dtype.kind in "fiub"]
        if not numeric:
            raise GasphysError(f"no variable has the dimension {dim!r}")
        ds = xr.Dataset({n: bands(values[n], levels, dim) for n in numeric})
        ds.attrs = dict(values.attrs)
        return ds
    if dim not in values.dims:
        raise GasphysError(f"the result has no dimension {dim!r}; it has {', '.join(map(str, values.dims))}")
    never = values.name == "first_crossing"
    known = values.astype(float)
    known = known.fillna(np.inf) if never else known
    found = known.quantile(list(levels), dim, method="inverted_cdf", skipna=False, keep_attrs=True)
    if never:
        found = found.where(np.isfinite(found))
    found["quantile"].attrs = {"units": "1", "long_name": "cumulative probability"}
    return found


def propagate(
    equation: Any,
    values: Mapping[str, Any],
    uncertainties: Mapping[str, Any],
    *,
    correlation: Mapping[tuple[str, str], float] | None = None,
) -> xr.Dataset:
    """Standard uncertainty of an equation by its exact derivatives.

    Parameters
    ----------
    equation : EquationFunction
        An equation of this library (of a choice one member: ``f.pick(model=...)``).
    values : mapping
        Arguments by name, numbers or DataArrays.
    uncertainties : mapping
        Standard uncertainty of the arguments that have one, in their canonical unit.
    correlation : mapping, optional
        Pair of names to their correlation.

    Returns
    -------
    Dataset
        ``value``, ``standard_uncertainty``; along ``parameter``: ``slope``, the derivative, and
        ``variance_share``, what the input contributes [1], correlations left aside.

    Raises
    ------
    UnknownNameError
        If an uncertainty is given for what is no argument.
    RangeError
        If one is negative.

    Notes
    -----
    The law of propagation of uncertainty, first order: u^2 = sum of c_i c_j u_i u_j r_ij with the derivatives
    c. Right where the equation is nearly straight over the uncertainties; a sample tells whether it is.

    Examples
    --------
    >>> import gasphys as gp
    >>> given = {"ambient_pressure": 243.18, "fio2": 1.0, "alveolar_pco2": 5.33}
    >>> found = propagate(gp.lungs.alveolar_po2, given, {"alveolar_pco2": 0.4, "ambient_pressure": 1.0})
    >>> round(float(found.standard_uncertainty), 4)
    1.077
    """
    names = list(uncertainties)
    known = [a.name for a in equation.arguments]
    for name in names:
        if name not in known:
            raise unknown_name(f"argument of {equation.name}", name, known)
        if not np.all(np.asarray(uncertainties[name]) >= 0.0):
            raise RangeError(f"uncertainty of {name} must not be negative")
    if not names:
        raise RangeError("name at least one argument with its uncertainty")
    parts, slopes = [], []
    for name in names:
        slope = xr.DataArray(equation.derivative(name)(**values))
        slope.attrs = {}  # each has another unit
        slopes.append(slope)
        parts.append(slope * uncertainties[name])
    matrix = correlation_matrix(names, correlation or {})
    variance: Any = 0.0
    for i in range(len(names)):
        for j in range(len(names)):
            if matrix[i, j]:
                variance = variance + matrix[i, j] * parts[i] * parts[j]
    own = sum((p**2 for p in parts), xr.DataArray(0.0))
    index = xr.DataArray(names, dims="parameter", name="parameter")
    rules: Any = {"coords": "minimal", "compat": "override"}
    ds = xr.Dataset(
        {
            "value": xr.DataArray(equation(**values)),
            "standard_uncertainty": np.sqrt(np.maximum(variance, 0.0)),
            "slope": xr.concat(slopes, index, **rules),
            "variance_share": xr.concat([p**2 / own for p in parts], index, **rules),
        }
    )
    one = equation.result
    ds["value"].attrs = attributes(one.name)
    ds["standard_uncertainty"].attrs = {
        "units": attributes(one.name)["units"],
        "long_name": f"standard uncertainty of {one.long_name}",
    }
    ds["slope"].attrs = {"long_name": f"derivative of {one.long_name}, unit of it over that of the input"}
    ds["variance_share"].attrs = {"units": "1", "long_name": "share of the variance, inputs independent"}
    ds.attrs = dataset_attributes(
        f"uncertainty of {one.long_name}", f"scenarios, {equation.name}", references=("jcgm_100_2008",)
    )
    return ds


def variance_split(values: xr.DataArray, across: str = "model", dim: str = "draw") -> xr.Dataset:
    """Split the variance of a result between its parameters and its models.

    Parameters
    ----------
    values : DataArray
        Every draw of the parameters in every model: along `dim` and `across`.
    across : str
        Dimension of the models.
    dim : str
        Dimension of the draws.

    Returns
    -------
    Dataset
        ``total_variance``; ``parameter_share``: of the mean over models, ``model_share``: of the mean over
        draws, ``joint_share``: the rest, parameters that matter differently in different models [1]. NaN
        where nothing varies.

    Raises
    ------
    GasphysError
        If a dimension is missing.

    Notes
    -----
    A two-way analysis of variance, every model with one weight: which models are asked decides what their
    share is. The three add up to one.

    Examples
    --------
    >>> both = xr.DataArray([[1.0, 2.0], [3.0, 4.0]], dims=("model", "draw"))
    >>> found = variance_split(both)
    >>> float(found.model_share), float(found.parameter_share)
    (0.8, 0.2)
    """
    for one in (across, dim):
        if one not in values.dims:
            raise GasphysError(
                f"the result has no dimension {one!r}; it has {', '.join(map(str, values.dims))}"
            )
    total = values.var((across, dim))
    # Below it everything is rounding.
    still = total <= (1e-14 * abs(values).max((across, dim))) ** 2
    parameters, models = values.mean(across).var(dim), values.mean(dim).var(across)
    ds = xr.Dataset({"total_variance": total})
    for name, part, meaning in (
        ("parameter_share", parameters, "share of variance by the parameters, in the mean of the models"),
        ("model_share", models, "share of variance by the choice of the model, in the mean of the draws"),
        ("joint_share", total - parameters - models, "share of variance by both together"),
    ):
        ds[name] = (part / total).where(~still)
        ds[name].attrs = {"units": "1", "long_name": meaning}
    ds["total_variance"].attrs = {"long_name": "variance over all draws and models"}
    return ds


def crossing_chance(
    found: xr.Dataset | xr.DataArray, at: Any = None, *, across: str = "model", dim: str = "draw"
) -> xr.Dataset:
    """Chance that a limit has been crossed, rising in time, and what it rests on.

    Parameters
    ----------
    found : Dataset or DataArray
        A review along `dim`, or its ``first_crossing``; along `across` too where several models judge.
    at : array_like, optional
        Times [min]; 101 from the start to the longest exposure where not given.
    across : str
        Dimension of the models, if there is one.
    dim : str
        Dimension of the draws.

    Returns
    -------
    Dataset
        Along ``time``: ``chance`` with ``chance_low`` and ``chance_high``, 95 of 100 intervals of the
        counting alone [1]; ``crossing_time`` along ``quantile`` [min, NaN where that share never crosses];
        ``judged_share``: draws that could be judged. With models: ``chance_by_model``, and the
        ``parameter_share``, ``model_share`` and ``joint_share`` of the variance of crossed or not.

    Raises
    ------
    GasphysError
        If there are no draws.

    Notes
    -----
    What is uncertain is what was drawn: a chance of crossing is no risk of injury, and models or inputs that
    were not varied have no share in it. Draws that could not be judged are left out of the count.

    Examples
    --------
    >>> times = xr.DataArray([5.0, 10.0, np.nan, 20.0], dims="draw", name="first_crossing")
    >>> crossing_chance(times, at=[0.0, 10.0, 30.0]).chance.values.tolist()
    [0.0, 0.5, 0.75]
    """
    ending, judged = np.nan, None
    if isinstance(found, xr.Dataset):
        ending = float(found["duration"].max())
        judged = found["status"].isin(["beyond", "within"])
        first = found["first_crossing"]
    else:
        first = found
    if dim not in first.dims:
        raise GasphysError(f"there are no draws: no dimension {dim!r}")
    judged = xr.ones_like(first, dtype=bool) if judged is None else judged
    if at is None:
        last = ending if np.isfinite(ending) else float(first.max())
        at = np.linspace(0.0, last if np.isfinite(last) and last > 0.0 else 1.0, 101)
    time = xr.DataArray(np.asarray(at, dtype=float), dims="time", attrs=attributes("time"))
    moments = first.fillna(np.inf)
    over = [d for d in (dim, across) if d in first.dims]
    # A moment at a time: every draw at every time would not fit.
    chance = xr.concat([_share(moments <= float(t), judged, over) for t in time.values], "time")
    counted = judged.sum(over)
    if across in over:  # models share their draws: no more independent draws than one has
        counted = judged.sum(dim).max(across)
    ds = xr.Dataset(coords={"time": time})
    ds["chance"] = chance
    ds["chance_low"], ds["chance_high"] = _wilson(chance, counted)
    ds["judged_share"] = judged.mean(over)
    known = moments.where(judged)
    levels = [0.05, 0.25, 0.5, 0.75, 0.95]
    ds["crossing_time"] = _quantiles(known, levels, over)
    words = "that the limit has been crossed by this time"
    for name, text in (
        ("chance", f"chance {words}"),
        ("chance_low", f"chance {words}, lower bound of the counting"),
        ("chance_high", f"chance {words}, upper bound of the counting"),
        ("judged_share", "share of the draws that could be judged"),
    ):
        ds[name].attrs = {"units": "1", "long_name": text}
    ds["crossing_time"].attrs = attributes(
        "time", long_name="time by which this share has crossed; nan: never"
    )
    if across in first.dims:
        rows = [(moments <= float(t)).where(judged).astype(float) for t in time.values]
        ds["chance_by_model"] = xr.concat([r.mean(dim) for r in rows], "time").transpose("time", ...)
        ds["chance_by_model"].attrs = {"units": "1", "long_name": f"chance {words}, by each model"}
        split = xr.concat([variance_split(r.fillna(r.mean(dim)), across, dim) for r in rows], "time")
        for name in ("parameter_share", "model_share", "joint_share"):
            ds[name] = split[name]
            ds[name].attrs = split[name].attrs
    ds.attrs = dataset_attributes(
        "chance of crossing a limit",
        "scenarios",
        comment="A chance over the draws made, not a risk of injury.",
        draws=int(first.sizes[dim]),
    )
    for name in ("title", "published", "authority", "edition", "unit", "limit"):
        texts = (
            set(np.ravel(found[name].values)) if isinstance(found, xr.Dataset) and name in found else set()
        )
        if len(texts) == 1:
            ds.attrs["limit" if name == "limit" else f"limit_{name}"] = str(texts.pop())
    return ds


def tissue_limits(models: Sequence[Any], share: float = 1.0) -> list[Limit]:
    """Return one limit for each tissue model, to be reviewed side by side.

    Parameters
    ----------
    models : sequence of str
        Names of :func:`gasphys.tissues.models`.
    share : float
        Share of the tolerated pressure that is the limit [1].

    Returns
    -------
    list of Limit
        The id of each is the model's name: ``crossing_chance(review(...), across="limit")``.

    Raises
    ------
    UnknownNameError
        If there is no such model.

    Examples
    --------
    >>> [x.id for x in tissue_limits(["us_navy_1957", "buhlmann_1995_c"])]
    ['us_navy_1957', 'buhlmann_1995_c']
    """
    found = []
    for model in models:
        one = tissue_set(model)
        found.append(
            Limit(
                id=one.name,
                title="Inert gas in the tissues, share of the M-value",
                quantity="limit_fraction",
                comparison="<=",
                value=float(share),
                unit="1",
                published_value=float(share),
                authority=one.title,
                edition=one.edition,
                roles=("diver", "patient", "attendant"),
                conditions="tissues saturated with air at the start; a model, no table",
                provenance=weakest(list(one.provenance_of.values())),
                source=one.source,
                model=one.name,
            )
        )
    return found


def _share(crossed: xr.DataArray, judged: xr.DataArray, over: list[str]) -> xr.DataArray:
    return (crossed & judged).sum(over) / judged.sum(over).where(judged.sum(over) > 0)


def _wilson(chance: xr.DataArray, n: xr.DataArray) -> tuple[xr.DataArray, xr.DataArray]:
    """Return the score interval of a share counted in n draws."""
    middle = (chance + _Z**2 / (2.0 * n)) / (1.0 + _Z**2 / n)
    half = _Z / (1.0 + _Z**2 / n) * np.sqrt(chance * (1.0 - chance) / n + _Z**2 / (4.0 * n**2))
    # At none and at all the bound is exact.
    return (middle - half).where(chance > 0.0, chance), (middle + half).where(chance < 1.0, chance)


def _quantiles(moments: xr.DataArray, levels: list[float], over: list[str]) -> xr.DataArray:
    """Return quantiles of times, infinite ones among them, of those that are not NaN."""
    rest = [d for d in moments.dims if d not in over]
    plain = moments.transpose(*rest, *over).values.reshape(*(moments.sizes[d] for d in rest), -1)
    plain = np.sort(plain, axis=-1)  # NaN stand last
    counted = (~np.isnan(plain)).sum(axis=-1)
    found = []
    for q in levels:
        place = np.clip(np.ceil(q * counted).astype(int) - 1, 0, None)
        one = np.take_along_axis(plain, place[..., None], axis=-1)[..., 0]
        found.append(np.where(np.isfinite(one), one, np.nan))
    coords: Any = {d: moments[d] for d in rest if d in moments.coords}
    return xr.DataArray(np.stack(found), dims=("quantile", *rest), coords={"quantile": levels, **coords})
