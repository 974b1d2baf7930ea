"""Inert gas in the tissues along an exposure, and what the chosen model tolerates."""

from __future__ import annotations

import json
import os
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.errors import ExposureError, RangeError, ValidityError
from gasphys.exposure import Exposure, Pieces
from gasphys.policy import outside_validity, require_provenance, weakest
from gasphys.quantities import CAUTION, attributes, quantity
from gasphys.tissues.equations import gradient_fraction, limit_fraction
from gasphys.tissues.kinetics import Stretches, along, breath_of, equilibrium, stretches
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
    other. In a batch, scenarios with a gas the model refuses are NaN. Limits of different models are not
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
    row, before = stretches(chosen, pieces, *(exposure.sample(at)[1:] if timed else ()))
    cells = (*shape, *chosen.half_time.shape)
    begin = np.broadcast_to(initial_state(chosen, initial, exposure), cells)
    states = np.broadcast_to(along(chosen, begin, row), (*cells, row.duration.shape[-1] + 1))
    sampled = states[..., before]
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
    run = _Run(
        model=chosen,
        exposure=exposure,
        view=view,
        dim="time" if timed else "point",
        row=row,
        before=before,
        states=states,
        sampled=sampled,
        pressure=pressure,
        judged=judge(chosen, sampled, pressure, surface, gradient),
        gradient=float(gradient),
        refused=refused,
        without=without,
    )
    ds = _dataset(run)
    ds.attrs["start"] = chosen.start if initial is None else "as given"
    if flags:
        ds.attrs["flags"] = "; ".join(flags)
    return ds


@dataclass(frozen=True)
class _Run:
    """One model over one exposure, before it becomes a Dataset.

    ``refused`` marks scenarios whose gas the set does not take, ``without`` those that have no limits.
    """

    model: TissueSet
    exposure: Exposure
    view: xr.Dataset
    dim: str
    row: Stretches
    before: NDArray[np.int64]
    states: Array
    sampled: Array
    pressure: Array
    judged: Judged
    gradient: float
    refused: NDArray[np.bool_]
    without: NDArray[np.bool_]


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


def _dataset(run: _Run) -> xr.Dataset:
    from gasphys import __version__

    model, exposure, view, dim, judged = run.model, run.exposure, run.view, run.dim, run.judged
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
    with np.errstate(invalid="ignore", divide="ignore"):
        share = limit_fraction.raw(judged.total, judged.limit)
        over = gradient_fraction.raw(judged.total, run.pressure[..., None, :], judged.limit)
    if model.surfacing_only:
        surface = np.asarray(exposure.surface_pressure, dtype=float)[..., None, None]
        over = np.where(run.pressure[..., None, :] <= surface * (1.0 + 1e-9), over, np.nan)
    gases, rows, cells = ("compartment", "inert_gas", dim), ("compartment", dim), ("compartment", "inert_gas")
    for name, dims, values, blank in (
        ("tissue_pressure", gases, run.sampled, run.refused),
        ("ceiling_pressure", (dim,), judged.ceiling, run.without),
        ("m_value", rows, judged.limit, run.without),
        ("limit_fraction", rows, share, run.without),
        ("gradient_fraction", rows, over, run.without),
    ):
        ds[name] = ((*lead, *dims), _covered(values, blank), attributes(name, **more))
    ds["ceiling_pressure"].attrs["gradient"] = run.gradient
    ds["half_time"] = (cells, model.half_time.copy(), attributes("half_time", **more))
    names = np.array([*model.compartments, ""], dtype=str)
    times = np.append(model.half_time[:, 0], np.nan)
    control = np.where(run.without[..., None], -1, judged.controlling)
    text = {"long_name": "compartment that sets the ceiling; empty: none does"}
    ds["controlling_compartment"] = ((*lead, dim), names[control], text)
    text = {"long_name": f"half-time in control, for {model.inert_gases[0]}"}
    ds["controlling_half_time"] = ((*lead, dim), times[control], attributes("half_time") | text)
    rest = equilibrium(model, exposure.surface_pressure)
    for name, values, meaning in (
        ("initial", run.states[..., 0], "tissue pressure at the start"),
        ("final", run.states[..., -1], "tissue pressure at the end"),
        ("residual_pressure", run.states[..., -1] - rest, "final less equilibrium on air at the surface"),
    ):
        kept = attributes("tissue_pressure") | {"long_name": f"{meaning}, absolute"}
        if name == "residual_pressure":
            kept = {"units": "kPa", "long_name": meaning}
        ds[name] = ((*lead, *cells), _covered(values, run.refused), kept)
    if not lead:
        _record(ds, run)
    refs = model.references
    if model.kinetics == "exponential":
        refs = (*refs, "schreiner_kelley_1971")
    ds.attrs = {
        **{
            k: v
            for k, v in view.attrs.items()
            if k in ("Conventions", "depth_unit", "water", "surface_pressure")
        },
        "title": f"inert gas in the tissues of the model {model.name}",
        "source": f"gasphys {__version__}, tissues, model {model.name}"
        + (f" variant {model.variant}" if model.variant else "")
        + f", parameters {model.digest}",
        "history": view.attrs["history"],
        "references": "; ".join(dict.fromkeys(refs)),
        "provenance": provenance,
        "model": model.name,
        "edition": model.edition,
        "refuses": model.refuses,
        "does_not_claim": model.does_not_claim,
        **({"evidence": model.evidence} if model.evidence else {}),
        "limit_tested": " and ".join(t.replace("_", " ") for t in model.tested),
        "comment": CAUTION,
    }
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
        # The straight stretch that ends at each instant; before the first there is none.
        last = np.maximum(run.before - 1, 0)
        length = np.where(run.before > 0, row.duration[last], 0.0)
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
                "gradient": run.gradient,
            },
        )
    for name, (equation, inputs) in equations.items():
        ds[name].attrs |= {"equation": f"tissues.{equation}", "inputs": json.dumps(inputs)}
