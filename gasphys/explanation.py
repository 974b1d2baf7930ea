"""One number explained: the chain of equations behind it, evaluated again from recorded inputs."""

from __future__ import annotations

import json
from typing import Any

import numpy as np
import xarray as xr

from gasphys.equation import EquationFunction, Working
from gasphys.errors import GasphysError, unknown_name
from gasphys.policy import validity
from gasphys.registry import equations

__all__ = ["Explanation", "explain"]


class Explanation:
    """The chain of workings behind one stored number.

    Parameters
    ----------
    name : str
        Variable explained.
    value : float
        Value evaluated again.
    stored : float
        Value in the Dataset.
    steps : list of Working
        Equations in the order they are needed; the last gives the value.
    given : dict
        Values taken from the Dataset as given.
    """

    def __init__(
        self, name: str, value: float, stored: float, steps: list[Working], given: dict[str, float]
    ) -> None:
        self.name, self.value, self.stored = name, value, stored
        self.steps, self.given = steps, given

    def __str__(self) -> str:
        lines = [f"{self.name} = {self.value:.7g} (stored {self.stored:.7g})"]
        if self.given:
            lines.append("as given: " + ", ".join(f"{k} = {v:.7g}" for k, v in self.given.items()))
        lines.extend(str(step) for step in self.steps)
        return "\n".join(lines)

    __repr__ = __str__


def explain(ds: xr.Dataset, name: str, time: float | None = None, **labels: Any) -> Explanation:
    """Evaluate one number of a result again, with the plain equations, and show the chain.

    Parameters
    ----------
    ds : Dataset
        A result of gasphys.
    name : str
        A variable of it.
    time : float, optional
        Instant [min], one of the Dataset's own times.
    **labels
        Labels along further dimensions, such as ``inert_gas="N2"`` or ``segment=3``.

    Returns
    -------
    Explanation
        ``str()`` prints the chain; ``value`` equals ``stored``.

    Raises
    ------
    UnknownNameError
        If there is no such variable.
    GasphysError
        If the time or a label is not in the Dataset, or a dimension is left open.

    Examples
    --------
    >>> import gasphys as gp
    >>> session = gp.Exposure.start("oxygen").travel(pressure="2.4 atm", minutes=10)
    >>> ds = gp.gas_exchange.oxygenation(session)
    >>> found = explain(ds, "alveolar_po2", time=10.0)
    >>> round(found.value, 2), found.value == found.stored
    (231.58, True)
    """
    if name not in ds.variables:
        raise unknown_name("variable", name, [str(v) for v in ds.data_vars])
    row = _select(ds, name, time, labels)
    steps: list[Working] = []
    given: dict[str, float] = {}
    value = _evaluate(row, name, steps, given, labels)
    return Explanation(name, value, float(row[name].values), steps, given)


def _select(ds: xr.Dataset, name: str, time: float | None, labels: dict[str, Any]) -> xr.Dataset:
    row = ds
    if "time" in ds[name].dims:
        if time is None:
            raise GasphysError(f"{name} changes with time; give time=, one of the Dataset's own times")
        times = ds["time"].values
        index = int(np.argmin(np.abs(times - time)))
        if abs(times[index] - time) > 1e-9 * max(1.0, abs(time)):
            near = ", ".join(f"{t:g}" for t in times[max(0, index - 1) : index + 2])
            raise GasphysError(
                f"time = {time:g} min is not a time of the Dataset (nearest: {near}); compute it with "
                f"at=[{time:g}]"
            )
        row = row.isel(time=index)
        if "segment" in row.dims and "segment_of_time" in row:
            row = row.isel(segment=int(row["segment_of_time"].values))
    for dim, label in labels.items():
        if dim not in row.dims:
            raise unknown_name("dimension", dim, [str(d) for d in row.dims])
        try:
            row = row.sel({dim: label})
        except KeyError:
            raise GasphysError(f"{dim} = {label!r} is not in the Dataset") from None
    open_dims = [str(d) for d in row[name].dims]
    if open_dims:
        raise GasphysError(f"{name} has the dimension {open_dims[0]}; give {open_dims[0]}=")
    return row


def _evaluate(
    row: xr.Dataset, name: str, steps: list[Working], given: dict[str, float], labels: dict[str, Any]
) -> float:
    attrs = row[name].attrs
    if "equation" not in attrs:
        given[name] = float(row[name].values)
        return given[name]
    done = [step for step in steps if step.variable == name]
    if done:
        return float(done[0].result)
    f = _equation(row, str(attrs["equation"]))
    values: dict[str, Any] = {}
    for key, source in json.loads(str(attrs["inputs"])).items():
        if key not in _accepted(f):
            continue
        values[key] = _input(row, source, steps, given, labels)
    with validity("ignore"):
        step = f.working(**values)
    step.variable = name
    steps.append(step)
    return float(step.result)


def _equation(row: xr.Dataset, text: str) -> EquationFunction:
    """Return the equation; where open circuit and loop differ, the one that holds here."""
    names = [part.strip() for part in text.split("|")]
    registry = equations()
    if len(names) == 1:
        return registry[names[0]]
    loop = not np.isnan(float(row["setpoint"].values))
    return registry[next(n for n in names if (".loop_" in n) == loop)]


def _accepted(f: EquationFunction) -> set[str]:
    names = {a.name for a in f.arguments}
    return names | set(getattr(f, "options", ()))


def _input(
    row: xr.Dataset, source: Any, steps: list[Working], given: dict[str, float], labels: dict[str, Any]
) -> Any:
    if not isinstance(source, str) or not source.startswith("@"):
        return source
    if " / " in source:
        top, bottom = (_input(row, part, steps, given, labels) for part in source.split(" / "))
        return top / bottom
    name, _, label = source[1:].partition(":")
    if label:
        gas = labels.get(label, label)
        value = float(row[name].sel(gas=gas).values)
        given[f"{name} of {gas}"] = value
        return value
    return _evaluate(row, name, steps, given, labels)
