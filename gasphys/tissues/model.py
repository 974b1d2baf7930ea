"""Inert gas in the tissues along an exposure, and what the chosen model tolerates."""

from __future__ import annotations

import json
import os
from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.errors import ExposureError, RangeError, ValidityError
from gasphys.exposure import Exposure, Pieces
from gasphys.policy import outside_validity, require_provenance, weakest
from gasphys.quantities import attributes, dataset_attributes, quantity
from gasphys.tissues.equations import gradient_fraction, limit_fraction, washout_threshold
from gasphys.tissues.kinetics import Stretches, along, breath_of, equilibrium, last_branch, stretches
from gasphys.tissues.sets import TissueSet, load
from gasphys.tissues.tolerance import Judged, coefficients, judge, short_deep

__all__ = ["tensions"]

Array = NDArray[np.float64]

#: Share of O2 that the trade's and the atmosphere's air have, rounding included.
_AIR = (0.205, 0.215)


def tensions(
    exposure: Exposure,
    model: str | os.PathLike[str] | TissueSet = "buhlmann_1995_c",
    initial: Any = None,
    *,
    at: Any = None,
    gradient: float = 1.0,
) -> xr.Dataset:
    """Inert gas pressures in the compartments of a model along an exposure, and the model's limits.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time.
    model : str, path or TissueSet
        A name of :func:`models`, the path of a file of the same format, or a set from :func:`load`.
    initial : Dataset, DataArray, float or str, optional
        What the tissues hold at the start: an earlier result (its ``final`` is taken), ``final`` itself, or
        the pressure someone has long breathed air at [kPa absolute]. Default: air at the exposure's surface
        pressure.
    at : array_like, optional
        Times to add to the exposure's own [min].
    gradient : float
        Share of the tolerated supersaturation that ``ceiling_pressure`` uses [1]; 1 is the model as
        published.

    Returns
    -------
    Dataset
        On the exposure's ``time``: ``tissue_pressure(compartment, inert_gas, time)``,
        ``ceiling_pressure(time)``, ``limit_fraction(compartment, time)``, ``gradient_fraction``,
        ``m_value``, ``controlling_compartment(time)``, ``controlling_half_time(time)``; and
        ``half_time(compartment, inert_gas)``, ``initial``, ``final`` and ``residual_pressure``
        (``final`` less equilibrium on air at the surface). Scenario dimensions stand first.

    Raises
    ------
    UnknownNameError
        If there is no such model.
    ValidityError
        If the model refuses a gas of the exposure.
    ExposureError
        If the exposure has no piece, or ``initial`` does not fit the model.

    Warns
    -----
    ValidityWarning
        Beyond the pressures the model was made for; where its limits are refused or flagged.

    Notes
    -----
    Exact along straight pieces whatever their length; exposures joined give what they give one after the
    other. In a batch, scenarios with a gas the model refuses are NaN; along dimensions that came into the
    exposure chunked the result is lazy, a block of scenarios at a time. Limits of different models are not
    comparable in risk, and keeping one is no promise of anything.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=30, rate=20).stay(20)
    >>> ds = tensions(dive)
    >>> float(ds.ceiling_pressure[-1].round(2))
    112.57
    >>> str(ds.controlling_compartment[-1].values)
    '2'
    """
    chosen = load(model)
    if not exposure.part:
        raise ExposureError("the exposure has no piece yet")
    if not 0.0 <= float(gradient) <= 1.0:
        raise quantity("gradient").range_error(float(gradient))
    pieces = exposure.pieces()
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    refused = check_gases(chosen, pieces, shape)
    flags = _check_pressures(chosen, pieces, exposure.surface_pressure)
    view = exposure.to_dataset(at=at)
    timed = "time" in view.dims
    cells = (*shape, *chosen.half_time.shape)
    begin = np.broadcast_to(initial_state(chosen, initial, exposure), cells)
    surface = np.asarray(exposure.surface_pressure, dtype=float)
    pressure = _ambient(exposure, view, shape)
    blank = np.broadcast_to(short_deep(chosen, pieces, surface), shape)
    rule = chosen.short_deep
    if rule is not None and blank.any():
        verb = "refused" if rule.action == "refuse" else "doubtful"
        message = (
            f"{chosen.name}: limits are {verb} from {rule.depth:.1f} kPa above the surface for "
            f"{rule.bottom_time:g} min or less: {rule.reason}"
        )
        outside_validity(message)
        flags.append(message)
    without = refused | blank if rule is not None and rule.action == "refuse" else refused
    block = _Block(
        model=chosen,
        pieces=pieces,
        sample=exposure.sample(at)[1:] if timed else None,
        begin=begin,
        pressure=pressure,
        surface=np.broadcast_to(surface, shape),
        gradient=float(gradient),
        refused=np.broadcast_to(refused, shape),
        without=np.broadcast_to(without, shape),
    )
    dim = "time" if timed else "point"
    if exposure.chunks:
        ds = _dataset(exposure, chosen, view, dim, float(gradient), in_blocks(exposure, _columns_of, block))
    else:
        run = block.run()
        ds = _dataset(exposure, chosen, view, dim, float(gradient), run.columns())
        if not exposure.dims:
            _record(ds, run)
    ds.attrs["start"] = chosen.start if initial is None else "as given"
    if flags:
        ds.attrs["flags"] = "; ".join(flags)
    return ds


@dataclass(frozen=True)
class _Block:
    """What one model is asked about scenarios: arrays begin with the scenario dimensions.

    ``refused`` marks scenarios whose gas the set does not take, ``without`` those that have no limits;
    ``sample`` are the instants wanted besides the boundaries, as :meth:`Exposure.sample` gives them.
    """

    model: TissueSet
    pieces: Pieces
    sample: tuple[NDArray[np.int64], Array] | None
    begin: Array
    pressure: Array
    surface: Array
    gradient: float
    refused: NDArray[np.bool_]
    without: NDArray[np.bool_]

    def run(self) -> _Run:
        """Run the model."""
        row, before = stretches(self.model, self.pieces, *(self.sample or ()))
        cells = (*self.begin.shape, row.duration.shape[-1] + 1)
        states = np.broadcast_to(along(self.model, self.begin, row), cells)
        sampled = states[..., before]
        judged = judge(self.model, sampled, self.pressure, self.surface, self.gradient)
        return _Run(self, row, before, states, sampled, judged)

    def part(self, slices: tuple[slice, ...]) -> _Block:
        """Return some of the scenarios."""

        def cut(values: Any) -> Any:
            return values[
                tuple(s if n > 1 else slice(None) for s, n in zip(slices, values.shape, strict=False))
            ]

        p = self.pieces
        numeric = {k: cut(v) for k, v in vars(p).items() if k != "fractions"}
        pieces = Pieces(**numeric, fractions={k: cut(v) for k, v in p.fractions.items()})
        arrays = ("begin", "pressure", "surface", "refused", "without")
        return replace(self, pieces=pieces, **{k: cut(getattr(self, k)) for k in arrays})


@dataclass(frozen=True)
class _Run:
    """One model over scenarios, before it becomes a Dataset."""

    block: _Block
    row: Stretches
    before: NDArray[np.int64]
    states: Array
    sampled: Array
    judged: Judged

    @property
    def model(self) -> TissueSet:
        return self.block.model

    def columns(self) -> dict[str, NDArray[Any]]:
        """Return the variables of the result that differ between scenarios."""
        model, block, judged = self.model, self.block, self.judged
        refused, without = block.refused, block.without
        with np.errstate(invalid="ignore", divide="ignore"):
            share = limit_fraction.raw(judged.total, judged.limit)
            over = gradient_fraction.raw(judged.total, block.pressure[..., None, :], judged.limit)
        if model.surfacing_only:
            surface = block.surface[..., None, None]
            over = np.where(block.pressure[..., None, :] <= surface * (1.0 + 1e-9), over, np.nan)
        names = np.array([*model.compartments, ""], dtype=str)
        times = np.append(model.half_time[:, 0], np.nan)
        control = np.where(without[..., None], -1, judged.controlling)
        first, last = self.states[..., 0], self.states[..., -1]
        return {
            "tissue_pressure": _covered(self.sampled, refused),
            "ceiling_pressure": _covered(judged.ceiling, without),
            "m_value": _covered(judged.limit, without),
            "limit_fraction": _covered(share, without),
            "gradient_fraction": _covered(over, without),
            "controlling_compartment": names[control],
            "controlling_half_time": times[control],
            "initial": _covered(first, refused),
            "final": _covered(last, refused),
            "residual_pressure": _covered(last - equilibrium(model, block.surface), refused),
        }


def _columns_of(block: _Block) -> dict[str, NDArray[Any]]:
    return block.run().columns()


def in_blocks(exposure: Exposure, f: Callable[[Any], dict[str, Any]], block: Any) -> dict[str, Any]:
    """Return lazy arrays, computed a block of scenarios at a time when they are asked for.

    Parameters
    ----------
    exposure : Exposure
        Its chunks say how the scenario dimensions are divided.
    f : callable
        Block to arrays by name that begin with the scenario dimensions.
    block : object
        All scenarios; its method ``part`` returns some of them.

    Returns
    -------
    dict
        Name to dask array.

    Examples
    --------
    >>> import xarray as xr
    >>> depth = xr.DataArray([18.0, 30.0, 40.0], dims="d", attrs={"units": "msw"}).chunk(d=2)
    >>> tensions(Exposure.start("air").travel(depth=depth, minutes=2)).ceiling_pressure.chunks
    ((2, 1), (2,))
    """
    import dask.array
    from dask.delayed import delayed

    da: Any = dask.array
    sizes = [exposure.chunks.get(d, (len(exposure.coords[d]),)) for d in exposure.dims]
    edges = [np.append(0, np.cumsum(s)) for s in sizes]
    # One scenario tells names, kinds and the dimensions behind.
    like = f(block.part((slice(0, 1),) * len(sizes)))
    counts = tuple(len(s) for s in sizes)
    found: dict[str, Any] = {k: np.empty(counts, dtype=object) for k in like}
    for place in np.ndindex(counts):
        slices = tuple(slice(int(e[i]), int(e[i + 1])) for e, i in zip(edges, place, strict=True))
        later = delayed(f, pure=False)(block.part(slices))
        for name, one in like.items():
            shape = (*(s.stop - s.start for s in slices), *one.shape[len(counts) :])
            found[name][place] = da.from_delayed(later[name], shape, dtype=one.dtype)
    return {k: _joined(v, 0) for k, v in found.items()}


def _joined(blocks: Any, axis: int) -> Any:
    """Join a nested array of dask arrays, the outermost along the first dimension."""
    import dask.array

    da: Any = dask.array
    if not isinstance(blocks, np.ndarray):
        return blocks
    return da.concatenate([_joined(b, axis + 1) for b in blocks], axis=axis)


def _ambient(exposure: Exposure, view: xr.Dataset, shape: tuple[int, ...]) -> Array:
    """Return the ambient pressure of the view, scenario dimensions in the exposure's order."""
    given = view["ambient_pressure"]
    sizes = [given.sizes.get(d, 1) for d in exposure.dims]
    values = given.transpose(*(d for d in exposure.dims if d in given.dims), ...).values
    return np.broadcast_to(values.reshape(*sizes, -1), (*shape, values.shape[-1]))


# -- Checks ---------------------------------------------------------------------------------------


def check_gases(model: TissueSet, pieces: Pieces, shape: tuple[int, ...]) -> NDArray[np.bool_]:
    """Refuse gases the set does not take: an error for one exposure, a mark for scenarios of a batch.

    Parameters
    ----------
    model : TissueSet
        The set.
    pieces : Pieces
        The exposure's pieces.
    shape : tuple of int
        Shape of the scenario dimensions.

    Returns
    -------
    array of bool
        True where a scenario is refused.

    Raises
    ------
    ValidityError
        If all scenarios are.

    Examples
    --------
    >>> bool(check_gases(load("boycott_1908"), Exposure.start("air").stay(1).pieces(), ()))
    False
    """
    real = pieces.duration > 0.0
    bad = np.zeros(shape, dtype=bool)
    reason = ""
    accepted = model.accepted()
    for formula, fraction in pieces.fractions.items():
        if formula in accepted:
            continue
        found = np.broadcast_to(((fraction > 0.0) & real).any(axis=-1), shape)
        if found.any():
            reason = reason or f"it is breathed with {formula}, and the set takes {', '.join(accepted)}"
            bad = np.asarray(bad | found)
    if model.air_only:
        oxygen, on_loop = pieces.fractions["O2"], ~np.isnan(pieces.setpoint)
        other = ((oxygen < _AIR[0]) | (oxygen > _AIR[1]) | on_loop) & real
        if other.any():
            reason = reason or "the set takes air only"
            bad = np.asarray(bad | np.broadcast_to(other.any(axis=-1), shape))
    if bad.any():
        message = f"{model.name} refuses this exposure: {reason}. It refuses: {model.refuses}"
        if bad.all():
            raise ValidityError(message)
        outside_validity(f"{message}; {int(bad.sum())} of {bad.size} scenarios are nan")
    words = [model.provenance_of[g] for g in present(model, pieces)]
    require_provenance(weakest(words), f"tissue model {model.name}")
    return bad


def present(model: TissueSet, pieces: Pieces) -> list[str]:
    """Return the tracked gases an exposure contains; the first always.

    Parameters
    ----------
    model : TissueSet
        The set.
    pieces : Pieces
        The exposure's pieces.

    Returns
    -------
    list of str
        Names of :attr:`TissueSet.inert_gases`.

    Examples
    --------
    >>> present(load("buhlmann_1995_c"), Exposure.start("air").stay(1).pieces())
    ['N2']
    """
    inert = breath_of(model, pieces).inert
    return [g for k, g in enumerate(model.inert_gases) if k == 0 or (inert[..., k] > 0.0).any()]


def _check_pressures(model: TissueSet, pieces: Pieces, surface: Any) -> list[str]:
    """Report pressures beyond what the set was made for."""
    highest = np.maximum(pieces.start_pressure, pieces.end_pressure)
    flags = []
    over = highest.max(initial=0.0)
    if not over <= model.highest_pressure * (1.0 + 1e-9):
        flags.append(
            f"{model.name}: ambient pressure reaches {over:.1f} kPa; "
            f"made for up to {model.highest_pressure:.1f} kPa"
        )
    gauge = float((highest - np.asarray(surface, dtype=float)[..., None]).max(initial=0.0))
    if not gauge <= model.deepest * (1.0 + 1e-9):
        flags.append(
            f"{model.name}: {gauge:.1f} kPa above the surface; "
            f"made for up to {model.deepest:.1f} kPa above it"
        )
    for flag in flags:
        outside_validity(flag)
    return flags


def initial_state(model: TissueSet, initial: Any, exposure: Exposure) -> Array:
    """Return the tissues at the start, ``(..., compartment, inert_gas)``.

    Parameters
    ----------
    model : TissueSet
        The set.
    initial : Dataset, DataArray, float, str or None
        As for :func:`tensions`.
    exposure : Exposure
        Its surface pressure is the default, its dimensions order the result.

    Returns
    -------
    array
        Pressures [kPa].

    Raises
    ------
    ExposureError
        If compartments or gases are missing.
    RangeError
        If a pressure is not possible.

    Examples
    --------
    >>> start = Exposure.start("air", surface_pressure=85.0)
    >>> initial_state(load("us_navy_1957"), "1 atm", start)[0].round(3)
    array([80.047])
    """
    if initial is None:
        return equilibrium(model, exposure.surface_pressure)
    if isinstance(initial, xr.Dataset):
        if "final" not in initial:
            raise ExposureError("initial: the Dataset has no variable final")
        initial = initial["final"]
    if isinstance(initial, xr.DataArray) and {"compartment", "inert_gas"} <= set(initial.dims):
        units = str(initial.attrs.get("units", "kPa"))
        try:
            chosen = initial.sel(compartment=list(model.compartments), inert_gas=list(model.inert_gases))
        except KeyError:
            raise ExposureError(
                f"initial does not hold the compartments {', '.join(model.compartments)} with "
                f"{', '.join(model.inert_gases)} of {model.name}"
            ) from None
        extra = [d for d in chosen.dims if d not in (*exposure.dims, "compartment", "inert_gas")]
        if extra:
            raise ExposureError(f"initial has the dimension {extra[0]!r}, the exposure has not; select one")
        order = [d for d in exposure.dims if d in chosen.dims]
        values = chosen.transpose(*order, "compartment", "inert_gas").values.astype(float)
        values = quantity("tissue_pressure").from_unit(values, units) if units != "kPa" else values
        low, high = quantity("tissue_pressure").possible
        if not np.all((values >= low) & (values <= high) | np.isnan(values)):
            raise RangeError(f"initial: tissue pressures must lie within {low:g} to {high:g} kPa")
        lead = tuple(chosen.sizes.get(d, 1) for d in exposure.dims)
        return np.asarray(values.reshape(*lead, *model.half_time.shape))
    one = quantity("ambient_pressure")
    if isinstance(initial, str):
        pressure = one.from_text(initial)
    elif isinstance(initial, (int, float, np.floating, np.integer)) and not isinstance(initial, bool):
        pressure = float(initial)
    else:
        raise ExposureError(
            "initial must be an earlier result, its final, or a pressure in kPa at which air was breathed"
        )
    if not one.possible[0] <= pressure <= one.possible[1]:
        raise one.range_error(pressure)
    return equilibrium(model, pressure)


# -- The Dataset ----------------------------------------------------------------------------------


def _covered(values: Array, mask: NDArray[np.bool_]) -> Array:
    """Return values with the marked scenarios blank."""
    if not mask.any():
        return np.ascontiguousarray(values)
    return np.where(mask.reshape(mask.shape + (1,) * (values.ndim - mask.ndim)), np.nan, values)


def _dataset(
    exposure: Exposure, model: TissueSet, view: xr.Dataset, dim: str, gradient: float, columns: dict[str, Any]
) -> xr.Dataset:
    lead = exposure.dims
    provenance = weakest([model.provenance_of[g] for g in present(model, exposure.pieces())])
    more = {"provenance": provenance, "references": model.source}
    ds = xr.Dataset(
        coords={
            "compartment": np.array(model.compartments, dtype=str),
            "inert_gas": np.array(model.inert_gases, dtype=str),
            **exposure.coords,
        }
    )
    if dim == "time":
        ds = ds.assign_coords(time=view["time"])
    else:
        ds["time"] = view["time"]
    given = view["ambient_pressure"]
    ds["ambient_pressure"] = (given.dims, given.values, attributes("ambient_pressure"))
    gases, rows, cells = ("compartment", "inert_gas", dim), ("compartment", dim), ("compartment", "inert_gas")
    held = attributes("tissue_pressure")
    for name, dims, attrs in (
        ("tissue_pressure", gases, attributes("tissue_pressure", **more)),
        ("ceiling_pressure", (dim,), attributes("ceiling_pressure", **more) | {"gradient": gradient}),
        ("m_value", rows, attributes("m_value", **more)),
        ("limit_fraction", rows, attributes("limit_fraction", **more)),
        ("gradient_fraction", rows, attributes("gradient_fraction", **more)),
        ("half_time", cells, attributes("half_time", **more)),
        (
            "controlling_compartment",
            (dim,),
            {"long_name": "compartment that sets the ceiling; empty: none does"},
        ),
        (
            "controlling_half_time",
            (dim,),
            attributes("half_time") | {"long_name": f"half-time in control, for {model.inert_gases[0]}"},
        ),
        ("initial", cells, held | {"long_name": "tissue pressure at the start, absolute"}),
        ("final", cells, held | {"long_name": "tissue pressure at the end, absolute"}),
        (
            "residual_pressure",
            cells,
            {"units": "kPa", "long_name": "final less equilibrium on air at the surface"},
        ),
    ):
        if name == "half_time":
            ds[name] = (dims, model.half_time.copy(), attrs)
        else:
            ds[name] = ((*lead, *dims), columns[name], attrs)
    refs = model.references
    if model.kinetics == "exponential":
        refs = (*refs, "schreiner_kelley_1971")
    kept = {k: v for k, v in view.attrs.items() if k in ("depth_unit", "water", "surface_pressure")}
    variant = f" variant {model.variant}" if model.variant else ""
    ds.attrs = dataset_attributes(
        f"inert gas in the tissues of the model {model.name}",
        f"tissues, model {model.name}{variant}, parameters {model.digest}",
        history=[view.attrs["history"]],
        references=refs,
        **kept,
        provenance=provenance,
        model=model.name,
        edition=model.edition,
        refuses=model.refuses,
        does_not_claim=model.does_not_claim,
        **({"evidence": model.evidence} if model.evidence else {}),
        limit_tested=" and ".join(t.replace("_", " ") for t in model.tested),
    )
    return ds


def _record(ds: xr.Dataset, run: _Run) -> None:
    """Add what :func:`gasphys.explain` needs to evaluate one instant again with the plain equations."""
    model, row, judged = run.model, run.row, run.judged
    equations: dict[str, tuple[str, dict[str, Any]]] = {
        "limit_fraction": (
            "limit_fraction",
            {"tissue_pressure": "@total_tissue_pressure", "m_value": "@m_value"},
        ),
        "gradient_fraction": (
            "gradient_fraction",
            {
                "tissue_pressure": "@total_tissue_pressure",
                "ambient_pressure": "@ambient_pressure",
                "m_value": "@m_value",
            },
        ),
    }
    total = attributes("tissue_pressure") | {"long_name": "inert gas pressure in a compartment, all gases"}
    ds["total_tissue_pressure"] = (("compartment", "time"), np.ascontiguousarray(judged.total), total)
    if model.kinetics == "exponential":
        last, length = _last_stretch(run)
        text = {"long_name": "length of the straight stretch that ends here"}
        ds["stretch_duration"] = ("time", length, attributes("duration") | text)
        ds["start_tissue_pressure"] = (
            ("compartment", "inert_gas", "time"),
            np.ascontiguousarray(run.states[..., last]),
            attributes("initial_tissue_pressure"),
        )
        for name, values in (
            ("start_inert_pressure", row.start_inert),
            ("end_inert_pressure", row.end_inert),
        ):
            ds[name] = (("inert_gas", "time"), np.ascontiguousarray(values[last].T), attributes(name))
        equations["tissue_pressure"] = (
            "tissue_pressure",
            {
                "initial_tissue_pressure": "@start_tissue_pressure",
                "start_inert_pressure": "@start_inert_pressure",
                "end_inert_pressure": "@end_inert_pressure",
                "duration": "@stretch_duration",
                "half_time": "@half_time",
            },
        )
    if model.kinetics == "exponential_linear":
        equations |= _record_branch(ds, run)
    if model.kinetics == "serial":
        _record_serial(ds, run)
    if not (model.surfacing_only or (model.mixed_gas == "smallest" and len(model.inert_gases) > 1)):
        _, a, b = coefficients(model, run.sampled, time=True)
        for name, values in (("m_value_a", a), ("m_value_b", b)):
            ds[name] = (("compartment", "time"), np.array(values), attributes(name))
        at = (np.maximum(judged.controlling, 0), np.arange(len(run.before)))
        for name, base, values in (
            ("controlling_tissue_pressure", "tissue_pressure", judged.total),
            ("controlling_a", "m_value_a", a),
            ("controlling_b", "m_value_b", b),
        ):
            text = {"long_name": f"{quantity(base).long_name}, of the compartment in control"}
            ds[name] = ("time", np.where(judged.controlling < 0, np.nan, values[at]), attributes(base) | text)
        equations["m_value"] = (
            "m_value",
            {"ambient_pressure": "@ambient_pressure", "m_value_a": "@m_value_a", "m_value_b": "@m_value_b"},
        )
        equations["ceiling_pressure"] = (
            "ceiling_pressure",
            {
                "tissue_pressure": "@controlling_tissue_pressure",
                "m_value_a": "@controlling_a",
                "m_value_b": "@controlling_b",
                "gradient": run.block.gradient,
            },
        )
    for name, (equation, inputs) in equations.items():
        ds[name].attrs |= {"equation": f"tissues.{equation}", "inputs": json.dumps(inputs)}


def _last_stretch(run: _Run) -> tuple[NDArray[np.int64], Array]:
    """Return the stretch that ends at each instant and its length; before the first there is none."""
    last = np.maximum(run.before - 1, 0)
    return last, np.where(run.before > 0, run.row.duration[last], 0.0)


def _record_branch(ds: xr.Dataset, run: _Run) -> dict[str, tuple[str, dict[str, Any]]]:
    """Add where the branch begins on which each compartment stands, and name its equation."""
    model, row = run.model, run.row
    last, length = _last_stretch(run)
    begins = row.start_pressure[last], row.start_inert[last, 0]
    ends = row.end_pressure[last], row.end_inert[last, 0]
    state = run.states[:, 0, last]
    found = last_branch(model, state, length, begins[0], ends[0], begins[1], ends[1])
    cells = ("compartment", "time")
    words = np.array(["exponential", "linear"])[found.linear.astype(int)]
    ds["branch"] = (cells, words, {"long_name": "branch of the model at this instant"})
    text = "at the start of the present branch, within the last straight stretch"
    for name, known, values, meaning in (
        (
            "stretch_duration",
            "duration",
            found.duration,
            "time on the branch within the last stretch",
        ),
        ("start_tissue_pressure", "initial_tissue_pressure", found.state, f"tissue pressure {text}"),
        ("start_inert_pressure", "start_inert_pressure", found.start_inert, f"arterial inert gas {text}"),
        ("branch_start_pressure", "ambient_pressure", found.start_pressure, f"ambient pressure {text}"),
    ):
        ds[name] = (cells, np.ascontiguousarray(values), attributes(known) | {"long_name": meaning})
    for name, known, at_end in (
        ("end_inert_pressure", "end_inert_pressure", ends[1]),
        ("branch_end_pressure", "ambient_pressure", ends[0]),
    ):
        ds[name] = ("time", at_end, attributes(known))
    own = ("venous_po2", "venous_pco2", "gas_phase_overpressure", "water_vapor_pressure")
    constants = {k: model.convention[k] for k in own}
    for end, pressure in (("start", found.start_pressure), ("end", ends[0])):
        inputs = {"ambient_pressure": f"@branch_{end}_pressure", **constants}
        ds[f"{end}_threshold"] = (
            cells if end == "start" else "time",
            np.asarray(washout_threshold.raw(pressure, *constants.values())),
            attributes(f"{end}_threshold", equation=washout_threshold.name, inputs=json.dumps(inputs)),
        )
    same = ("start_inert_pressure", "end_inert_pressure", "start_threshold", "end_threshold", "half_time")
    inputs = {
        "initial_tissue_pressure": "@start_tissue_pressure",
        "duration": "@stretch_duration",
        **{k: f"@{k}" for k in same},
    }
    return {"tissue_pressure": ("tissue_pressure | tissues.linear_tissue_pressure", inputs)}


def _record_serial(ds: xr.Dataset, run: _Run) -> None:
    """Add the last straight stretch, from which one instant can be integrated again."""
    last, length = _last_stretch(run)
    text = "of the straight stretch that ends here"
    ds["stretch_duration"] = ("time", length, attributes("duration") | {"long_name": f"length {text}"})
    for name, values in (("start", run.row.start_pressure), ("end", run.row.end_pressure)):
        words = {"long_name": f"ambient pressure at the {name} {text}"}
        ds[f"stretch_{name}_pressure"] = ("time", values[last], attributes("ambient_pressure") | words)
    ds["start_tissue_pressure"] = (
        ("compartment", "time"),
        np.ascontiguousarray(run.states[:, 0, last]),
        attributes("initial_tissue_pressure"),
    )
    numbers = {k: run.model.convention[k] for k in ("flow_coefficient", "flow_offset")}
    ds["tissue_pressure"].attrs["serial_flow"] = json.dumps(numbers)
