"""Hazard, its integral and the probability of decompression sickness along an exposure."""

from __future__ import annotations

import dataclasses
import functools
import json
import os
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.errors import ExposureError, GasphysError, RangeError, unknown_name
from gasphys.exposure import Exposure
from gasphys.quantities import attributes, dataset_attributes, quantity
from gasphys.risk.equations import hazard, risk_probability
from gasphys.risk.kernel import Parameters, Profile, accumulate
from gasphys.toml_files import read_toml

__all__ = ["Compartment", "HazardModel", "probability", "sampled_hazard"]

Array = NDArray[Any]

#: Share of nitrogen in the air breathed before the exposure and after it.
_AIR = 0.79

#: What a compartment's numbers are.
_FIELDS = {
    "half_time": "half_time",
    "gain": "hazard_gain",
    "threshold": "hazard_threshold",
    "crossover": "hazard_threshold",
}

_CLAIMS = (
    "Probability of a population like the one the parameters were fitted to, by a model; no forecast for one "
    "person, and none outside the exposures fitted. Published models of this kind failed for deep no-stop "
    "dives and for oxygen decompression until they were fitted to those."
)


@dataclass(frozen=True)
class Compartment:
    """One tissue of a hazard model.

    Parameters
    ----------
    half_time : float
        Half-time, not time constant: reports tabulate either [min].
    gain : float
        Hazard for each relative supersaturation of one [1/min].
    threshold : float, default 0
        Supersaturation without hazard [kPa].
    crossover : float, optional
        Supersaturation above which washout is linear [kPa]; None: exponential throughout.

    Raises
    ------
    RangeError
        If a number is not possible.

    Examples
    --------
    >>> Compartment(half_time=240.0, gain=1e-3).threshold
    0.0
    """

    half_time: float
    gain: float
    threshold: float = 0.0
    crossover: float | None = None

    def __post_init__(self) -> None:
        for name, one in _FIELDS.items():
            value = getattr(self, name)
            if value is None and name == "crossover":
                continue
            low, high = quantity(one).possible
            if not low <= value <= high:
                raise quantity(one).range_error(float(value))


@dataclass(frozen=True)
class HazardModel:
    """Compartments whose hazards add up.

    Parameters
    ----------
    compartments : sequence of Compartment
        At least one.
    fixed_venous_pressure : float, default 0
        Venous O2, CO2 and vapor counted as gas that drives bubbles; sign and value differ between reports
        [kPa].
    water_vapor_pressure : float, default 0
        Vapor taken off the ambient pressure before the inert share, by the convention of the fit [kPa].
    name : str
        What it is called in results.

    Raises
    ------
    RangeError
        If there is no compartment or a number is not possible.

    Notes
    -----
    r = sum of A max(0, (p - P - Thr + pFVG)/P), with p all inert gases of a tissue together. Washout is
    exponential, or linear above a cross-over. Gas taken up is exponential. Nothing ships with numbers for
    people: they are the caller's, from a fit (:func:`gasphys.risk.fit`) or a file.

    Examples
    --------
    >>> model = HazardModel([Compartment(half_time=240.0, gain=1e-3)], name="one tissue")
    >>> model.parameters()["gain_1"]
    0.001
    """

    compartments: Sequence[Compartment]
    fixed_venous_pressure: float = 0.0
    water_vapor_pressure: float = 0.0
    name: str = "hazard model"

    def __post_init__(self) -> None:
        object.__setattr__(self, "compartments", tuple(self.compartments))
        if not self.compartments:
            raise RangeError("a hazard model needs at least one compartment")
        for name in ("fixed_venous_pressure", "water_vapor_pressure"):
            value, one = getattr(self, name), quantity(name)
            if not one.possible[0] <= value <= one.possible[1]:
                raise one.range_error(float(value))

    @classmethod
    def from_toml(cls, path: str | os.PathLike[str]) -> HazardModel:
        """Read a model from a file.

        Parameters
        ----------
        path : path
            ``name``, ``fixed_venous_pressure``, ``water_vapor_pressure`` and a ``[[compartment]]`` for each
            tissue with ``half_time`` [min], ``gain`` [1/min], ``threshold`` and ``crossover`` [kPa]; each a
            number or text with a unit.

        Returns
        -------
        HazardModel
            The model.

        Raises
        ------
        InputFileError
            With file, line and column.

        Examples
        --------
        >>> import pathlib, tempfile
        >>> file = pathlib.Path(tempfile.mkdtemp()) / "fit.toml"
        >>> _ = file.write_text("[[compartment]]\\nhalf_time = 240\\ngain = 1e-3\\nthreshold = '0.2 bar'\\n")
        >>> HazardModel.from_toml(file).compartments[0].threshold
        20.0
        """
        file = read_toml(path, "write [[compartment]] tables with half_time and gain")
        shared = {k: v for k, v in file.data.items() if k != "compartment"}
        rows = file.data.get("compartment")
        if not isinstance(rows, list) or not rows:
            raise file.error("no [[compartment]] table", "begin every tissue with a line [[compartment]]")
        known = ("name", "fixed_venous_pressure", "water_vapor_pressure")
        for key in shared:
            if key not in known:
                raise file.error(
                    str(unknown_name("entry of a hazard model", key, known)), "correct it", key=key, table=""
                )

        def read(key: str, value: Any, one: str, table: str, number: int = 0) -> float:
            try:
                found = quantity(one).from_text(value) if isinstance(value, str) else value
                if isinstance(found, bool) or not isinstance(found, (int, float)):
                    raise RangeError(f"{key} = {value!r} is not a number")
                low, high = quantity(one).possible
                if not low <= found <= high:
                    raise quantity(one).range_error(float(found))
            except GasphysError as error:
                raise file.error(str(error), f"correct {key}", key=key, table=table, number=number) from None
            return float(found)

        compartments = []
        for number, row in enumerate(rows):
            for key in row:
                if key not in _FIELDS:
                    text = str(unknown_name("entry of a compartment", key, _FIELDS))
                    raise file.error(text, "correct it", key=key, table="compartment", number=number)
            for key in ("half_time", "gain"):
                if key not in row:
                    text = f"the compartment has no {key}"
                    raise file.error(text, f"add {key} = ...", table="compartment", number=number)
            values = {k: read(k, v, _FIELDS[k], "compartment", number) for k, v in row.items()}
            compartments.append(Compartment(**values))
        numbers = {k: read(k, shared[k], k, "") for k in known[1:] if k in shared}
        return cls(compartments, name=str(shared.get("name", file.path)), **numbers)

    def parameters(self) -> dict[str, float]:
        """Return every number of the compartments by name: ``half_time_1``, ``gain_1``, ...

        Returns
        -------
        dict
            Name to value; a cross-over that there is not is left out.

        Examples
        --------
        >>> list(HazardModel([Compartment(60.0, 1e-3)]).parameters())
        ['half_time_1', 'gain_1', 'threshold_1']
        """
        return {
            f"{field}_{n}": float(getattr(one, field))
            for n, one in enumerate(self.compartments, 1)
            for field in _FIELDS
            if getattr(one, field) is not None
        }

    def with_parameters(self, values: Mapping[str, float]) -> HazardModel:
        """Return the model with some numbers changed.

        Parameters
        ----------
        values : mapping
            Names of :meth:`parameters` to values.

        Returns
        -------
        HazardModel
            A new one.

        Raises
        ------
        UnknownNameError
            If a name is none of :meth:`parameters`.

        Examples
        --------
        >>> HazardModel([Compartment(60.0, 1e-3)]).with_parameters({"gain_1": 2e-3}).compartments[0].gain
        0.002
        """
        known = self.parameters()
        for name in values:
            if name not in known:
                raise unknown_name("parameter", name, known)
        changed = list(self.compartments)
        for name, value in values.items():
            field, _, number = name.rpartition("_")
            place = int(number) - 1
            changed[place] = dataclasses.replace(changed[place], **{field: float(value)})
        return dataclasses.replace(self, compartments=changed)

    def arrays(self, values: Mapping[str, complex] | None = None) -> Parameters:
        """Return the numbers as the kernel takes them; some may be replaced, also by complex ones.

        Parameters
        ----------
        values : mapping, optional
            Names of :meth:`parameters` to values.

        Returns
        -------
        Parameters
            One number a compartment.

        Examples
        --------
        >>> HazardModel([Compartment(60.0, 1e-3)]).arrays().half_time
        array([60.])
        """
        given = values or {}

        def column(field: str) -> Array:
            row = []
            for n, one in enumerate(self.compartments, 1):
                value = given.get(f"{field}_{n}", getattr(one, field))
                row.append(np.nan if value is None else value)
            return np.array(row)

        venous = np.full(len(self.compartments), float(self.fixed_venous_pressure))
        half_time, gain, threshold, crossover = (column(f) for f in _FIELDS)
        return Parameters(half_time, gain, threshold, crossover, venous)


def probability(
    exposure: Exposure, model: HazardModel, follow_up: Any = 1440.0, at: Iterable[float] = ()
) -> xr.Dataset:
    """Hazard, its integral and the probability of decompression sickness along an exposure.

    Parameters
    ----------
    exposure : Exposure
        Starts from equilibrium with air at its first pressure; may have scenario dimensions.
    model : HazardModel
        Compartments with the caller's parameters.
    follow_up : float or str, default 1440
        Time on air after the end, at the last pressure: hazard goes on [min].
    at : iterable of float
        Further times to answer at [min].

    Returns
    -------
    Dataset
        ``hazard`` [1/min], ``tissue_pressure`` [kPa], ``cumulative_hazard`` by ``compartment``,
        ``total_hazard``, ``risk_probability`` on ``time`` [min]; ``final_probability`` at the end of the
        follow-up.

    Raises
    ------
    ExposureError
        If times differ between scenarios and `at` is given.

    Notes
    -----
    R is the integral of the hazard, exact on linear pieces, P = 1 - exp(-R). All inert gases count together;
    oxygen does not count.

    Examples
    --------
    >>> model = HazardModel([Compartment(half_time=240.0, gain=1e-3)])
    >>> dive = Exposure.start("air").travel(depth=18, rate=18).stay(60).travel(depth=0, rate=9)
    >>> ds = probability(dive, model)
    >>> bool(ds.final_probability > 0.0)
    True
    """
    one = quantity("duration")
    minutes = one.from_text(follow_up) if isinstance(follow_up, str) else float(follow_up)
    if not one.possible[0] <= minutes <= one.possible[1]:
        raise one.range_error(minutes)
    whole = exposure if minutes == 0.0 else exposure.switch("air").stay(minutes)
    if extra := sorted(set(at)):
        whole = whole._split(extra)
    lead = tuple(len(whole.coords[d]) for d in whole.dims)
    flat = _profile_of(whole, model.water_vapor_pressure)
    total, tension = accumulate(flat, model.arrays())
    ambient = np.concatenate([flat.start_pressure, flat.end_pressure[:, -1:]], axis=1)
    values = model.arrays()
    rate = hazard.raw(
        tension,
        ambient[:, None, :],
        values.gain[:, None],
        values.threshold[:, None],
        values.fixed_venous[:, None],
    )
    names = np.array([f"{c.half_time:g} min" for c in model.compartments], dtype=str)
    if len(set(names)) < len(names):
        names = np.array([f"{n}: {name}" for n, name in enumerate(names, 1)], dtype=str)
    summed = total.sum(axis=1)
    dims = whole.dims
    view = whole.to_dataset()
    axis = "time" if "time" in view.dims else "point"
    ds = xr.Dataset(coords={**{d: view[d] for d in dims}, "time": view["time"], "compartment": names})

    def put(name: str, values: Array, extra: tuple[str, ...], what: str = "", **attrs: Any) -> None:
        shape = (*lead, *values.shape[1:])
        ds[name] = ((*dims, *extra), values.reshape(shape), attributes(what or name) | attrs)

    put("tissue_pressure", tension, ("compartment", axis))
    for name, field in (
        ("hazard_gain", "gain"),
        ("hazard_threshold", "threshold"),
        ("fixed_venous_pressure", "fixed_venous"),
    ):
        ds[name] = ("compartment", np.asarray(getattr(values, field), dtype=float), attributes(name))
    ds["ambient_pressure"] = view["ambient_pressure"].assign_attrs(attributes("ambient_pressure"))
    for recipe in ("equation", "inputs"):  # given here; its chain is the exposure's
        ds["ambient_pressure"].attrs.pop(recipe, None)
    inputs = {a.name: f"@{a.name}" for a in hazard.arguments}
    put("hazard", rate, ("compartment", axis), equation=hazard.name, inputs=json.dumps(inputs))
    put("cumulative_hazard", total, ("compartment", axis))
    put("total_hazard", summed, (axis,), "cumulative_hazard", long_name="integral of the hazard, all tissues")
    put(
        "risk_probability",
        risk_probability.raw(summed),
        (axis,),
        equation=risk_probability.name,
        inputs=json.dumps({"cumulative_hazard": "@total_hazard"}),
    )
    ds["final_probability"] = ds["risk_probability"].isel({axis: -1}, drop=True)
    ds.attrs = dataset_attributes(
        "probability of decompression sickness along an exposure",
        f"risk, {model.name}",
        history=exposure.history,
        references=["weathersby_1984", "thalmann_1997"],
        comment=_CLAIMS,
        follow_up=minutes,
        parameters="; ".join(f"{k} = {v:.6g}" for k, v in model.parameters().items()),
        provenance="memory_high",
    )
    return ds


def _profile_of(exposure: Exposure, vapor: float) -> Profile:
    """Return the pieces of an exposure as rows of the kernel, an exposure for each scenario."""
    pieces = exposure.pieces()
    n = len(exposure.part)
    lead = tuple(len(exposure.coords[d]) for d in exposure.dims)

    def rows(values: Array) -> Array:
        return np.broadcast_to(values, (*lead, n)).reshape(-1, n)

    loop = ~np.isnan(pieces.setpoint)
    inert = []
    for pressure, po2 in (
        (pieces.start_pressure, pieces.start_po2),
        (pieces.end_pressure, pieces.end_po2),
    ):
        share = np.where(loop, 1.0, 1.0 - po2 / pressure)
        inert.append(rows(np.maximum(pressure - po2 - share * vapor, 0.0)))
    begin = rows(pieces.start_pressure)[:, 0]
    return Profile(
        rows(pieces.duration),
        rows(pieces.start_pressure),
        rows(pieces.end_pressure),
        inert[0],
        inert[1],
        _AIR * (begin - vapor),
    )


@functools.lru_cache(maxsize=4096)
def _row(exposure: Exposure, vapor: float, follow_up: float) -> tuple[Array, ...]:
    """Return times, pressures and inert pressures of one exposure with its follow-up, and the start."""
    if exposure.dims:
        raise ExposureError("outcomes take exposures without scenarios; give each its own row")
    whole = exposure if follow_up == 0.0 else exposure.switch("air").stay(follow_up)
    flat = _profile_of(whole, vapor)
    return (
        whole.pieces().times,
        flat.start_pressure[0],
        flat.end_pressure[0],
        flat.start_inert[0],
        flat.end_inert[0],
        flat.initial,
    )


def stacked(
    exposures: Sequence[Exposure], cuts: Sequence[Sequence[float]], vapor: float, follow_up: float
) -> tuple[Profile, NDArray[np.int64]]:
    """Return several exposures as one profile, cut at given times, and where the cuts are.

    Parameters
    ----------
    exposures : sequence of Exposure
        Without scenarios.
    cuts : sequence of sequence of float
        The same number of times for each [min since its start].
    vapor, follow_up : float
        Vapor pressure of the convention [kPa]; time on air after the end [min].

    Returns
    -------
    profile : Profile
        Padded with pieces of no length.
    places : array
        Index of the boundary of each cut, ``(exposure, cut)``.

    Raises
    ------
    ExposureError
        If a cut is not within the exposure and its follow-up.
    """
    rows = []
    places = np.zeros((len(exposures), len(cuts[0]) if len(cuts) else 0), dtype=np.int64)
    for e, (exposure, wanted) in enumerate(zip(exposures, cuts, strict=True)):
        times, *ends, initial = _row(exposure, vapor, follow_up)
        for when in wanted:
            if not times[0] <= when <= times[-1]:
                raise ExposureError(
                    f"{when:g} min is not within the exposure and its follow-up, 0 to {times[-1]:g} min"
                )
        edges = np.unique(np.concatenate([times, np.asarray(wanted, dtype=float)]))
        parent = np.clip(np.searchsorted(times, edges[:-1], side="right") - 1, 0, times.size - 2)
        length = times[parent + 1] - times[parent]
        low, high = (edges[:-1] - times[parent]) / length, (edges[1:] - times[parent]) / length
        columns = [np.diff(edges)]
        for start, end in (ends[:2], ends[2:]):
            step = end[parent] - start[parent]
            columns += [start[parent] + step * low, start[parent] + step * high]
        rows.append((*columns, initial))
        places[e] = np.searchsorted(edges, wanted)
    longest = max(row[0].size for row in rows)

    def column(k: int, fill_last: int | None) -> Array:
        out = np.zeros((len(rows), longest))
        for e, row in enumerate(rows):
            out[e, : row[k].size] = row[k]
            out[e, row[k].size :] = 0.0 if fill_last is None else row[fill_last][-1]
        return out

    profile = Profile(
        column(0, None),
        column(1, 2),
        column(2, 2),
        column(3, 4),
        column(4, 4),
        np.concatenate([row[5] for row in rows]),
    )
    return profile, places


def sampled_hazard(
    time: Any, excess: Any, gain: float = 1.0, threshold: float = 0.0, reference: Any = 1.0
) -> xr.Dataset:
    """Hazard and probability from any sampled measure of supersaturation or bubble volume.

    Parameters
    ----------
    time : array
        Times, rising [min].
    excess : array
        The measure at those times, such as a supersaturation or a bubble's volume, in any unit.
    gain : float, default 1
        Hazard for an excess of one over the threshold and reference [1/min].
    threshold : float, default 0
        Excess without hazard, in the measure's unit.
    reference : float or array, default 1
        What the excess is divided by: the ambient pressure for a relative supersaturation.

    Returns
    -------
    Dataset
        ``hazard`` [1/min], ``cumulative_hazard``, ``risk_probability`` on ``time``.

    Raises
    ------
    RangeError
        If times do not rise or lengths differ.

    Notes
    -----
    r = A max(0, (x - Thr)/reference), with (x - Thr)/reference linear between samples and its zeros found:
    exact for such a course, an approximation for any other. For tissues use :func:`probability`.

    Examples
    --------
    >>> ds = sampled_hazard([0.0, 10.0, 20.0], [-1.0, 1.0, 1.0], gain=0.01)
    >>> float(ds.cumulative_hazard[-1])
    0.125
    """
    t, x = np.asarray(time, dtype=float), np.asarray(excess, dtype=float)
    if t.ndim != 1 or t.shape != x.shape or not np.all(np.diff(t) > 0.0):
        raise RangeError("time must rise and have one excess each")
    if not np.all(np.isfinite(x)):
        raise RangeError("excess has values that are not numbers")
    relative = (x - threshold) / np.asarray(reference, dtype=float)
    a, b = relative[:-1], relative[1:]
    top, drop = np.maximum(a, b), np.abs(b - a)
    both = np.minimum(a, b) >= 0.0
    with np.errstate(invalid="ignore", divide="ignore"):
        triangle = np.where(drop > 0.0, np.maximum(top, 0.0) ** 2 / (2.0 * drop), 0.0)
    area = np.diff(t) * np.where(both, 0.5 * (a + b), triangle)
    total = gain * np.concatenate([[0.0], np.cumsum(area)])
    ds = xr.Dataset(coords={"time": ("time", t, attributes("time"))})
    ds["hazard"] = ("time", gain * np.maximum(relative, 0.0), attributes("hazard"))
    ds["cumulative_hazard"] = ("time", total, attributes("cumulative_hazard"))
    ds["risk_probability"] = ("time", risk_probability.raw(total), attributes("risk_probability"))
    ds.attrs = dataset_attributes(
        "probability of decompression sickness from a sampled measure",
        "risk, sampled measure",
        references=["weathersby_1984"],
        comment=_CLAIMS,
        provenance="memory_high",
    )
    return ds
