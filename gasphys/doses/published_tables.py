"""The data files beside this module: published tables, each row with its source and provenance."""

from __future__ import annotations

import csv
import functools
from collections.abc import Callable
from importlib import resources
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.errors import NotTraceable, unknown_name

__all__ = ["published", "tables"]

Array = NDArray[np.float64]


@functools.cache
def tables() -> tuple[str, ...]:
    """Return the names of the published tables.

    Returns
    -------
    tuple of str
        Names for :func:`published`.

    Examples
    --------
    >>> "seizure_incidence" in tables()
    True
    """
    files = resources.files("gasphys.doses").iterdir()
    return tuple(sorted(f.name.removesuffix(".csv") for f in files if f.name.endswith(".csv")))


@functools.cache
def published(name: str) -> tuple[dict[str, Any], ...]:
    """Return one published table, row by row.

    Parameters
    ----------
    name : str
        A name of :func:`tables`.

    Returns
    -------
    tuple of dict
        Column to number, to text, or to None where the cell is empty; ``provenance`` and ``source``
        among the columns.

    Raises
    ------
    UnknownNameError
        If there is no such table.

    Examples
    --------
    >>> row = published("seizure_incidence")[1]
    >>> row["source"], row["treatments"], row["seizures"]
    ('heyboer_2014', 16430.0, 0.0)
    """
    if name not in tables():
        raise unknown_name("published table", name, tables())
    text = resources.files("gasphys.doses").joinpath(f"{name}.csv").read_text("utf-8")
    lines = [line for line in text.splitlines() if not line.startswith("#")]
    rows = csv.DictReader(lines, strict=True)
    return tuple({k: v if k in _WORDS else _cell(v) for k, v in row.items()} for row in rows)


#: Columns of words, even where a cell looks like a number: a year is no quantity.
_WORDS = ("edition",)


def _cell(text: str) -> float | str | None:
    if not text:
        return None
    try:
        return float(text)
    except ValueError:
        return text


def column(name: str, header: str) -> Array:
    """Return one column of numbers.

    Parameters
    ----------
    name : str
        A name of :func:`tables`.
    header : str
        Its column.

    Returns
    -------
    array
        One number a row.

    Examples
    --------
    >>> float(column("noaa_oxygen_limits", "single_min")[-1])
    45.0
    """
    return np.array([row[header] for row in published(name)], dtype=float)


#: A value at a node up to rounding belongs to that node.
ROUNDING = 1e-9


def next_row(x: Any, nodes: Array) -> NDArray[np.int64]:
    """Return the row of the next higher node; a value at a node belongs to it.

    Parameters
    ----------
    x : array
        Values up to the last node.
    nodes : array
        Rising nodes.

    Returns
    -------
    array of int
        Row numbers, the last one beyond the table.

    Examples
    --------
    >>> next_row([1.0, 1.1, 2.0], np.array([1.0, 2.0])).tolist()
    [0, 1, 1]
    """
    row = np.searchsorted(nodes * (1.0 + ROUNDING), np.asarray(x, dtype=float), side="left")
    return np.minimum(row, len(nodes) - 1)


def step(nodes: Array, values: Array) -> Callable[..., Any]:
    """Return the rule "read the next higher row" as a vectorized function.

    Parameters
    ----------
    nodes, values : array
        The table, nodes rising.

    Returns
    -------
    callable
        Of one array; NaN stays NaN.

    Examples
    --------
    >>> float(step(np.array([1.0, 2.0]), np.array([10.0, 5.0]))(1.5))
    5.0
    """

    def evaluate(x: Any) -> Any:
        x = np.asarray(x, dtype=float)
        found = values[next_row(x, nodes)]
        return np.where(np.isnan(x), np.nan, found)

    return evaluate


def no_slope(what: str, nodes: Array) -> Callable[[str], Callable[..., Any]]:
    """Return the derivative of a step rule: zero, and an error that names the node at a jump.

    Parameters
    ----------
    what : str
        Name of the table, for the message.
    nodes : array
        Where it jumps.

    Returns
    -------
    callable
        Takes the argument's name, returns the vectorized derivative.

    Examples
    --------
    >>> float(no_slope("example", np.array([1.0]))("x")(0.5))
    0.0
    """

    def of(name: str) -> Callable[..., Any]:
        def by(*inputs: Any) -> Any:
            x = np.asarray(inputs[0], dtype=float)
            hit = np.isclose(x[..., None], nodes, rtol=1e-12, atol=0.0).any(axis=tuple(range(x.ndim)))
            if hit.any():
                raise NotTraceable(f"{what}: no derivative at the node {nodes[hit][0]:g}, where it jumps")
            return 0.0 * x

        return by

    return of
