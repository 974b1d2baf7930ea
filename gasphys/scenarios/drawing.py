"""Inputs of many runs: every combination of values, or draws from distributions."""

from __future__ import annotations

import inspect
from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.errors import RangeError, UnknownNameError, unknown_name
from gasphys.quantities import QUANTITIES, attributes, dataset_attributes
from gasphys.scenarios.distributions import Bounded, all_bounded

__all__ = ["each", "grid", "points", "sample"]

Array = NDArray[np.float64]


def grid(values: Mapping[str, Any]) -> xr.Dataset:
    """Every combination of some values: a dimension for each input.

    Parameters
    ----------
    values : mapping
        Name of the input to its values: numbers in the canonical unit of the quantity of that name, or a
        DataArray of one dimension with ``units``; words, such as gases, stay words.

    Returns
    -------
    Dataset
        A coordinate for each name; ``ds["fio2"]`` stands wherever the input is asked for, and what is
        computed has all their dimensions.

    Raises
    ------
    RangeError
        If a value is not possible or there is none.

    Examples
    --------
    >>> import gasphys as gp
    >>> what = grid({"ambient_pressure": [101.325, 243.18], "fio2": [0.21, 0.4, 1.0]})
    >>> gp.lungs.alveolar_po2(what.ambient_pressure, what.fio2, 5.33).shape
    (2, 3)
    """
    if not values:
        raise RangeError("name at least one input with its values")
    coords = {}
    for name, given in values.items():
        units = given.attrs.get("units", "") if isinstance(given, xr.DataArray) else ""
        plain = np.atleast_1d(np.asarray(given))
        if plain.ndim != 1 or not plain.size:
            raise RangeError(f"{name}: give at least one value, in a row")
        one = QUANTITIES.get(str(name))
        attrs: dict[str, Any] = {} if plain.dtype.kind not in "fiu" else {"units": units or "1"}
        if one is not None and plain.dtype.kind in "fiu":
            plain = plain.astype(float)
            if units and units not in (one.unit, attributes(one.name)["units"]):
                plain = np.asarray(one.from_unit(plain, units))
            low, high = one.possible
            wrong = ~((plain >= low) & (plain <= high))
            if wrong.any():
                raise one.range_error(float(plain[wrong][0]))
            attrs = attributes(one.name)
        coords[str(name)] = (str(name), plain, attrs)
    ds = xr.Dataset(coords=coords)
    ds.attrs = dataset_attributes("every combination of some inputs", "scenarios")
    return ds


def sample(
    distributions: Mapping[str, Any],
    n: int,
    rng: np.random.Generator | int | None = None,
    method: str = "random",
    *,
    correlation: Mapping[tuple[str, str], float] | None = None,
) -> xr.Dataset:
    """Draws of several inputs from their distributions.

    Parameters
    ----------
    distributions : mapping
        Name of the input to its distribution: one of this package (:class:`Normal`, ...) or a frozen one of
        ``scipy.stats``. Where the name is a quantity, its unit holds and values that are not possible are
        not drawn.
    n : int
        Number of draws.
    rng : Generator or int, optional
        Source of chance, or its seed; every run differs where none is given.
    method : {"random", "latin_hypercube", "sobol"}
        Independent draws; one in each of `n` layers of every input; a scrambled Sobol sequence, best with
        `n` a power of 2.
    correlation : mapping, optional
        Pair of names to the correlation of their normal scores (a Gaussian copula).

    Returns
    -------
    Dataset
        A variable for each name along ``draw``, with its unit; the attribute ``left_out`` is the probability
        of values that are not possible.

    Raises
    ------
    UnknownNameError
        If the method or a correlated name is unknown.
    RangeError
        If the correlations contradict one another, or a distribution is mostly impossible.

    Notes
    -----
    The rank correlation of a pair is 6/pi asin(r/2), r the correlation of its normal scores.

    Examples
    --------
    >>> import gasphys as gp
    >>> what = sample({"alveolar_pco2": gp.scenarios.Normal(5.3, 0.4)}, 1000, rng=1)
    >>> float(gp.lungs.alveolar_po2(243.18, 1.0, what.alveolar_pco2).std().round(1))
    0.4
    """
    chosen = all_bounded(distributions)
    rng = np.random.default_rng(rng)
    cube = points(len(chosen), n, rng, method)
    if correlation:
        cube = _correlated(cube, [b.name for b in chosen], correlation)
    ds = labelled(chosen, cube)
    told = ", ".join(f"{a} with {b} {r:g}" for (a, b), r in (correlation or {}).items())
    ds.attrs = dataset_attributes(
        f"{n} draws of {', '.join(b.name for b in chosen)}",
        "scenarios",
        method=method,
        correlation=told or "none",
    )
    return ds


def labelled(chosen: list[Bounded], cube: Array) -> xr.Dataset:
    """Return draws of inputs from points of the unit cube.

    Parameters
    ----------
    chosen : list of Bounded
        The inputs.
    cube : array
        ``(draw, input)`` between 0 and 1.

    Returns
    -------
    Dataset
        Along ``draw``.

    Examples
    --------
    >>> from gasphys.scenarios import Uniform
    >>> labelled(all_bounded({"fio2": Uniform(0.2, 0.4)}), np.array([[0.5]])).fio2.values.round(3)
    array([0.3])
    """
    ds = xr.Dataset(coords={"draw": np.arange(len(cube))})
    for k, one in enumerate(chosen):
        attrs: dict[str, Any] = {"units": one.unit} if one.quantity is None else attributes(one.name)
        attrs |= {"distribution": repr(one.distribution)} if not hasattr(one.distribution, "dist") else {}
        if one.left_out > 1e-12:
            attrs["left_out"] = one.left_out
        ds[one.name] = ("draw", one.values(cube[:, k]), attrs)
    return ds


def points(dimensions: int, n: int, rng: np.random.Generator, method: str) -> Array:
    """Return points of the unit cube.

    Parameters
    ----------
    dimensions : int
        Number of inputs.
    n : int
        Number of points.
    rng : Generator
        Source of chance.
    method : str
        As for :func:`sample`.

    Returns
    -------
    array
        ``(n, dimensions)``.

    Raises
    ------
    UnknownNameError
        If the method is unknown.
    RangeError
        If `n` is not a positive whole number.

    Examples
    --------
    >>> points(2, 3, np.random.default_rng(1), "latin_hypercube").shape
    (3, 2)
    """
    if isinstance(n, bool) or not isinstance(n, (int, np.integer)) or not n > 0:
        raise RangeError(f"n = {n!r} must be a positive whole number")
    if method not in METHODS:
        raise unknown_name("sampling method", method, METHODS)
    return METHODS[method](dimensions, int(n), rng)


def _random(dimensions: int, n: int, rng: np.random.Generator) -> Array:
    return rng.random((n, dimensions))


def _source(engine: Any, rng: np.random.Generator) -> dict[str, Any]:
    """Return the argument that takes the source of chance: its name changed with scipy 1.15."""
    known = inspect.signature(engine.__init__).parameters
    return {"rng" if "rng" in known else "seed": rng}


def _latin_hypercube(dimensions: int, n: int, rng: np.random.Generator) -> Array:
    from scipy.stats import qmc

    return np.asarray(qmc.LatinHypercube(dimensions, **_source(qmc.LatinHypercube, rng)).random(n))


def _sobol(dimensions: int, n: int, rng: np.random.Generator) -> Array:
    from scipy.stats import qmc

    power = max(0, int(n - 1).bit_length())
    return np.asarray(qmc.Sobol(dimensions, **_source(qmc.Sobol, rng)).random_base2(power))[:n]


#: How points of the unit cube are chosen.
METHODS: dict[str, Callable[[int, int, np.random.Generator], Array]] = {
    "random": _random,
    "latin_hypercube": _latin_hypercube,
    "sobol": _sobol,
}


def correlation_matrix(names: list[str], correlation: Mapping[tuple[str, str], float]) -> Array:
    """Return correlations of pairs as a matrix.

    Parameters
    ----------
    names : list of str
        Inputs, in order.
    correlation : mapping
        Pair of names to their correlation.

    Returns
    -------
    array
        Symmetric, ones on its diagonal.

    Raises
    ------
    UnknownNameError
        If a name is unknown, or a pair is given twice.
    RangeError
        If a correlation is not within -1 to 1, or they contradict one another.

    Examples
    --------
    >>> correlation_matrix(["a", "b"], {("a", "b"): 0.5}).tolist()
    [[1.0, 0.5], [0.5, 1.0]]
    """
    matrix = np.eye(len(names))
    seen = set()
    for (a, b), value in correlation.items():
        for name in (a, b):
            if name not in names:
                raise unknown_name("correlated input", name, names)
        if a == b or frozenset((a, b)) in seen:
            raise UnknownNameError(f"correlation: the pair {a!r}, {b!r} is the same input or given twice")
        if not -1.0 <= value <= 1.0:
            raise RangeError(f"correlation of {a} with {b} = {value} must be within -1 to 1")
        seen.add(frozenset((a, b)))
        i, j = names.index(a), names.index(b)
        matrix[i, j] = matrix[j, i] = value
    if not np.linalg.eigvalsh(matrix)[0] >= -1e-12:
        raise RangeError("the correlations contradict one another: no set of inputs can have them all")
    return matrix


def _correlated(cube: Array, names: list[str], correlation: Mapping[tuple[str, str], float]) -> Array:
    """Give points of the unit cube correlated normal scores."""
    from scipy.special import ndtr, ndtri

    values, vectors = np.linalg.eigh(correlation_matrix(names, correlation))
    inside = np.clip(cube, np.nextafter(0.0, 1.0), np.nextafter(1.0, 0.0))
    # The symmetric root, so that no input is preferred to another.
    root = vectors @ np.diag(np.sqrt(np.maximum(values, 0.0))) @ vectors.T
    return np.asarray(ndtr(ndtri(inside) @ root))


def each(function: Callable[..., Any], inputs: xr.Dataset) -> Any:
    """Run a function of single values once for every scenario.

    Parameters
    ----------
    function : callable
        Called with each variable by name, one number or word; returns a number, DataArray or Dataset.
    inputs : Dataset
        Of :func:`grid` or :func:`sample`.

    Returns
    -------
    DataArray or Dataset
        With the dimensions of the inputs before its own.

    Notes
    -----
    For what takes one value at a time: names of gases or models, files. All else takes labelled arrays as
    they are, some hundred times faster.

    Examples
    --------
    >>> import gasphys as gp
    >>> what = grid({"gas": ["air", "trimix 17/48"], "ambient_pressure": [400.0, 700.0]})
    >>> each(lambda gas, ambient_pressure: gp.real_gas.density(ambient_pressure, gas), what).shape
    (2, 2)
    """
    names = [str(n) for n in inputs.variables if n != "draw"]
    if not names:
        raise RangeError("the inputs hold no variable")
    arrays = xr.broadcast(*(inputs[n] for n in names))
    dims = [str(d) for d in arrays[0].dims]
    labels = [arrays[0][d] if d in arrays[0].coords else _numbers(d, arrays[0].sizes[d]) for d in dims]

    def along(index: tuple[int, ...]) -> Any:
        if len(index) == len(dims):
            picked = zip(names, arrays, strict=True)
            return _boxed(function(**{n: _plain(a.values[index]) for n, a in picked}))
        here = labels[len(index)]
        parts = [along((*index, k)) for k in range(here.size)]
        rules: Any = {"coords": "minimal", "compat": "override", "join": "outer", "data_vars": "all"}
        if not isinstance(parts[0], xr.Dataset):
            del rules["data_vars"]
        return xr.concat(parts, here, combine_attrs="override", **rules)

    return along(())


def _numbers(dim: str, size: int) -> xr.DataArray:
    return xr.DataArray(np.arange(size), dims=dim, name=dim)


def _boxed(value: Any) -> Any:
    return value if isinstance(value, (xr.DataArray, xr.Dataset)) else xr.DataArray(value)


def _plain(value: Any) -> Any:
    return value.item() if hasattr(value, "item") else value
