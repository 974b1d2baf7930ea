"""One number explained: the chain of equations behind it, evaluated again from recorded inputs."""

from __future__ import annotations

import json
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.constants import MSW
from gasphys.doses import MEASURES
from gasphys.equation import EquationFunction, Working
from gasphys.errors import GasphysError, unknown_name
from gasphys.exposure import Exposure, Pieces
from gasphys.gas import FORMULAS
from gasphys.policy import validity
from gasphys.real_gas import ideal_density
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
    if name in ("dose", "total") and "measure" in ds.dims:
        return _explain_dose(ds, name, labels)
    if name in _OF_A_REVIEW and "limit" in ds.dims:
        return _explain_review(ds, name, labels)
    row = _select(ds, name, time, labels)
    steps: list[Working] = []
    given: dict[str, float] = {}
    value = _evaluate(row, name, steps, given, labels)
    return Explanation(name, value, float(row[name].values), steps, given)


def _labelled(ds: xr.Dataset, name: str, dim: str, labels: dict[str, Any]) -> tuple[xr.Dataset, str]:
    """Select one measure or limit and one scenario."""
    if dim not in labels:
        raise GasphysError(f"{name} has the dimension {dim}; give {dim}=")
    row = _select(ds, name, None, labels)
    return row, str(labels[dim])


# -- doses: the ramp equation of every piece that counts, added up -------------------------------


def _explain_dose(ds: xr.Dataset, name: str, labels: dict[str, Any]) -> Explanation:
    row, measure = _labelled(ds, name, "measure", labels)
    one = MEASURES[measure]
    stored = float(row[name].values)
    if one.whole is not None or ds.attrs["recovery"] != "none" or ds.attrs["carried_on"] == "yes":
        why = {f"{name}, not a sum over the pieces of this exposure alone": stored}
        return Explanation(name, stored, stored, [], why)
    pieces = Exposure.from_dataset(row).pieces()
    counts = row["counted"].values.astype(bool)
    each, steps = _dose_of_pieces(measure, pieces, counts, len(counts))
    total = float(each.sum())
    value = total if name == "total" else float(np.asarray(one.dose(np.asarray(total))))
    if np.isnan(stored):
        return Explanation(name, stored, stored, [], {str(row["reason"].values): stored})
    return Explanation(name, value, stored, steps, {"sum over the pieces": total})


def _dose_of_pieces(
    measure: str, pieces: Pieces, counts: NDArray[np.bool_], until: int, share: float = 1.0
) -> tuple[NDArray[np.float64], list[Working]]:
    """Return what each piece adds up to an instant, and the workings of those that add something."""
    one = MEASURES[measure]
    f = equations()[one.equation]
    each, steps = np.zeros(len(counts)), []
    for k in range(until):
        part = share if k == until - 1 else 1.0
        minutes = float(pieces.duration[k]) * part
        start = float(pieces.start_po2[k])
        end = start + (float(pieces.end_po2[k]) - start) * part
        if not counts[k] or minutes == 0.0:
            continue
        each[k] = float(np.asarray(one.kernel(np.asarray(start), np.asarray(end), np.asarray(minutes))))
        if each[k] == 0.0 or np.isnan(each[k]):
            continue
        ends = {"start_po2": start, "end_po2": end}
        if "po2" in {a.name for a in f.arguments}:
            ends = {"po2": max(start, end)}
        with validity("ignore"):
            steps.append(f.working(duration=minutes, **ends, **one.options))
    return each, steps


# -- reviews: the reviewed quantity evaluated again at the instant named --------------------------

_OF_A_REVIEW = ("worst", "limit_value", "margin", "time_of_worst", "first_crossing", "time_beyond")


def _explain_review(ds: xr.Dataset, name: str, labels: dict[str, Any]) -> Explanation:
    row, identifier = _labelled(ds, name, "limit", labels)
    stored = float(row[name].values)
    limit, what = float(row["limit_value"].values), str(row["quantity"].values)
    given = {f"limit {identifier}, {row['published'].values} ({row['authority'].values})": limit}
    if name == "limit_value" or np.isnan(stored):
        reason = str(row["reason"].values)
        return Explanation(name, stored, stored, [], given if not reason else {reason: stored})
    exposure = Exposure.from_dataset(row)
    sign = 1.0 if str(row["comparison"].values) == "<=" else -1.0
    if name == "first_crossing":
        at = [stored]
        value, steps = _reviewed(exposure, what, stored, sign, after=True)
        given[f"{what} at {stored:.7g} min"] = value
        return Explanation(name, at[0], stored, steps, given)
    if name == "time_beyond":
        first = float(row["first_crossing"].values)
        given["first crossing"] = first
        return Explanation(name, stored, stored, [], given)
    when = float(row["time_of_worst"].values)
    worst, steps = _reviewed(exposure, what, when, sign, after=False)
    if name == "time_of_worst":
        given[f"{what} there"] = worst
        return Explanation(name, when, stored, steps, given)
    value = worst if name == "worst" else sign * (limit - worst)
    return Explanation(name, value, stored, steps, given)


def _reviewed(
    exposure: Exposure, what: str, when: float, sign: float, after: bool
) -> tuple[float, list[Working]]:
    """Evaluate a reviewed quantity at an instant: of the pieces that meet there, the farther one."""
    pieces = exposure.pieces()
    measure = next((m for m, q in _DOSE_QUANTITIES.items() if q == what), "")
    times = pieces.times
    if measure:
        last = int(np.clip(np.searchsorted(times, when, side="left"), 1, len(pieces.duration)))
        length = float(pieces.duration[last - 1])
        share = min(1.0, (when - float(times[last - 1])) / length) if length else 1.0
        every = np.ones(len(pieces.duration), dtype=bool)
        each, steps = _dose_of_pieces(measure, pieces, every, last, share)
        return float(np.asarray(MEASURES[measure].dose(np.asarray(each.sum())))), steps
    found: list[tuple[float, list[Working]]] = []
    for k in range(len(pieces.duration)):
        if pieces.duration[k] > 0.0 and times[k] - 1e-9 <= when <= times[k + 1] + 1e-9:
            share = float(np.clip((when - times[k]) / pieces.duration[k], 0.0, 1.0))
            if after and share > 1.0 - 1e-12 and k + 1 < len(pieces.duration):
                continue
            found.append(_at_piece(exposure, what, k, share))
    return max(found, key=lambda pair: sign * pair[0])


_DOSE_QUANTITIES = {
    "noaa_cns": "noaa_cns_single_fraction",
    "noaa_cns_day": "noaa_cns_day_fraction",
    "uptd": "uptd",
    "arieli_pulmonary_index": "arieli_pulmonary_index",
}


def _at_piece(exposure: Exposure, what: str, k: int, share: float) -> tuple[float, list[Working]]:
    registry = equations()
    c = exposure.columns
    start, end = float(c["start_pressure"][k]), float(c["end_pressure"][k])
    if what == "compression_rate":
        return max(end - start, 0.0) / float(c["segment_duration"][k]), []
    steps = [
        registry["breathing_gas.linear_in_piece"].working(
            start_pressure=start, end_pressure=end, share_of_piece=share
        )
    ]
    pressure = float(steps[0].result)
    if what == "depth_on_helium":
        return max(pressure - float(exposure.surface_pressure), 0.0) / float(MSW), steps
    fractions = {g: float(v[k]) for g, v in exposure.fractions.items()}
    if what == "breathing_gas_co2_surface_equivalent":
        f = registry["doses.surface_equivalent"]
        steps.append(f.working(fraction=fractions.get("CO2", 0.0), ambient_pressure=pressure))
        return float(steps[-1].result), steps
    setpoint = float(c["setpoint"][k])
    if np.isnan(setpoint):
        f = registry["breathing_gas.open_circuit_po2"]
        steps.append(f.working(o2_fraction=fractions["O2"], ambient_pressure=pressure))
    else:
        f = registry["breathing_gas.loop_po2"]
        steps.append(f.working(setpoint=setpoint, ambient_pressure=pressure))
    po2 = float(steps[-1].result)
    if what == "breathing_gas_po2":
        return po2, steps
    rest = 1.0 - fractions["O2"]
    share_of_rest = (1.0 - po2 / pressure) / rest if rest > 0.0 else 0.0
    loop = not np.isnan(setpoint)
    mix = {
        FORMULAS[g]: (po2 / pressure if g == "O2" else x * share_of_rest) if loop else x
        for g, x in {**dict.fromkeys(FORMULAS, 0.0), **fractions}.items()
    }
    with validity("ignore"):
        steps.append(ideal_density.working(ambient_pressure=pressure, temperature=0.0, **mix))
    return float(steps[-1].result), steps


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
    """Return the equation; where models, or open circuit and loop, differ, the one that holds here."""
    names = [part.strip() for part in text.split("|")]
    registry = equations()
    if len(names) == 1:
        return registry[names[0]]
    if "model" in row.coords:
        of_model = [n for n in names if n.endswith(f"_from_{row['model'].values}")]
        if of_model:
            return registry[of_model[0]]
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
