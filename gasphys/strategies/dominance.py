"""Which candidates no other is better than, and why one is better than another."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.errors import GasphysError, unknown_name

__all__ = ["front", "why"]

Array = NDArray[np.float64]


def front(values: Any) -> NDArray[np.bool_]:
    """Return which rows are not dominated: no other is as good everywhere and better somewhere.

    Parameters
    ----------
    values : array
        ``(candidate, objective)``, smaller is better; a row with NaN takes no part.

    Returns
    -------
    array of bool
        True on the front; equal rows stand on it together.

    Examples
    --------
    >>> front([[1.0, 4.0], [2.0, 2.0], [3.0, 3.0]]).tolist()
    [True, True, False]
    """
    values = np.asarray(values, dtype=float)
    known = ~np.isnan(values).any(axis=1)
    found = np.zeros(len(values), dtype=bool)
    rows = np.flatnonzero(known)
    # In this order a row can only be dominated by one before it.
    order = rows[np.lexsort(values[rows].T[::-1])]
    left = values[order]
    place = 0
    while place < len(left):
        one = left[place]
        better_somewhere = (left < one).any(axis=1)
        same = (left == one).all(axis=1)
        keep = better_somewhere | same
        place = int(keep[:place].sum()) + 1
        left, order = left[keep], order[keep]
    found[order] = True
    return found


def why(found: xr.Dataset, a: int, b: int) -> str:
    """Say of two candidates which dominates the other, and why, or why neither does.

    Parameters
    ----------
    found : Dataset
        Of :func:`explore`.
    a, b : int
        Labels on ``candidate``.

    Returns
    -------
    str
        A sentence, then a line for each objective and each hard limit that tells them apart.

    Raises
    ------
    GasphysError
        If there is no such candidate.

    Examples
    --------
    >>> from gasphys.strategies import explore
    >>> squares = {"near": lambda c: c.x**2, "far": lambda c: (c.x - 2.0) ** 2}
    >>> print(why(explore({"x": [0.0, 1.0, 3.0]}, squares), 1, 2))
    1 dominates 2: better in near, worse in nothing
      near        1        9   1 is better by 8
      far         1        1   equal
    """
    for one in (a, b):
        if one not in found["candidate"].values:
            raise GasphysError(
                f"there is no candidate {one!r} among the {found.sizes['candidate']} evaluated"
            )
    first, second = found.sel(candidate=a), found.sel(candidate=b)
    lines, better = [], {a: [], b: []}  # type: ignore[var-annotated]
    unknown = []
    names = _objectives(found)
    for name in names:
        x, y = float(first[name]), float(second[name])
        unit = str(found[name].attrs.get("units", "1"))
        shown = "" if unit == "1" else f" {unit}"
        sign = -1.0 if found[name].attrs.get("better") == "larger" else 1.0
        if np.isnan(x) or np.isnan(y):
            unknown.append(name)
            says = "not known of " + " and ".join(str(k) for k, v in ((a, x), (b, y)) if np.isnan(v))
        elif x == y:
            says = "equal"
        else:
            winner = a if sign * x < sign * y else b
            better[winner].append(name)
            says = f"{winner} is better by {abs(x - y):.4g}{shown}"
        lines.append(f"  {name:<{max(map(len, names))}}  {x:>7.4g}{shown}  {y:>7.4g}{shown}   {says}")
    broken = {k: _broken(row) for k, row in ((a, first), (b, second))}
    for k in (a, b):
        lines += [f"  {k} does not keep: {text}" for text in broken[k]]
    return "\n".join([_verdict(a, b, better, broken, unknown), *lines])


def _verdict(
    a: int, b: int, better: dict[int, list[str]], broken: dict[int, list[str]], unknown: list[str]
) -> str:
    for one, other in ((a, b), (b, a)):
        if not broken[one] and broken[other]:
            return f"{one} keeps the hard limits, {other} does not"
    if broken[a] and broken[b]:
        return f"neither {a} nor {b} keeps the hard limits"
    if unknown:
        return f"{a} and {b} cannot be compared: {', '.join(unknown)} not known"
    for one, other in ((a, b), (b, a)):
        if better[one] and not better[other]:
            return f"{one} dominates {other}: better in {', '.join(better[one])}, worse in nothing"
    if not better[a]:
        return f"{a} and {b} are equal in every objective"
    return f"neither dominates: {a} is better in {', '.join(better[a])}, {b} in {', '.join(better[b])}"


def _objectives(found: xr.Dataset) -> list[str]:
    names = [str(n) for n, v in found.data_vars.items() if "better" in v.attrs]
    if not names:
        raise unknown_name("kind of dataset", str(found.attrs.get("title", "")), ["a result of explore"])
    return names


def _broken(row: xr.Dataset) -> list[str]:
    if "status" not in row:
        return []
    lines = []
    for name in row["limit"].values:
        one = row.sel(limit=name)
        if str(one["status"].values) != "within":
            beyond = f", {abs(float(one['margin'])):.4g} beyond" if float(one["margin"]) < 0.0 else ""
            lines.append(f"{name} ({one['status'].values!s}{beyond})")
    return lines
