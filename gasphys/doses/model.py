"""Oxygen doses along an exposure: every published measure side by side, each with its own limit."""

from __future__ import annotations

import functools
import json
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.constants import ATMOSPHERE
from gasphys.doses.cns import CNS_FIT, clinic_seizure_rates, near_clinics
from gasphys.doses.measures import MEASURES, Mask, Measure, outside_fit, piece_doses
from gasphys.doses.oxygen_times import noaa_cns_after_interval
from gasphys.equation import EQUATIONS
from gasphys.errors import ExposureError, ProvenanceError, unknown_name
from gasphys.exposure import Exposure, Pieces
from gasphys.limits import Limit, load
from gasphys.policy import require_provenance
from gasphys.quantities import CAUTION, dataset_attributes, quantity

__all__ = ["MEASURES", "Measure", "counted", "dose_text", "oxygen", "piece_doses"]

Array = NDArray[np.float64]

_ROUNDING = 1e-9
_DAY = 24.0 * 60.0


def _fit_reason(measure: str, outside: Array) -> str:
    """Say how much of a dose lies outside the fit; nothing up to a hundredth."""
    worst = float(np.max(outside, initial=0.0))
    low, high = (x / ATMOSPHERE for x in MEASURES[measure].fit)
    span = f"{low:.2g} to {high:.2g} atm, where it was fitted"
    if worst >= 1.0 - _ROUNDING:
        return f"the breathing gas PO2 is never within {span}"
    if worst > 0.01:
        return f"{100.0 * worst:.0f} % of it comes from a PO2 outside {span}"
    return ""


def counted(exposure: Exposure, count: str) -> Mask:
    """Return which pieces count: all, those of the table's clock, or its oxygen periods.

    Parameters
    ----------
    exposure : Exposure
        The exposure.
    count : {"all", "table", "oxygen"}
        What is counted.

    Returns
    -------
    array of bool
        ``(segment,)`` or with scenario dimensions before it.

    Raises
    ------
    UnknownNameError
        For another word.
    ExposureError
        If "table" or "oxygen" is asked of an exposure that is no schedule.

    Examples
    --------
    >>> counted(Exposure.start("air").stay(1), "all")
    array([ True])
    """
    if count not in ("all", "table", "oxygen"):
        raise unknown_name("count", count, ("all", "table", "oxygen"))
    if count == "all":
        return np.ones(len(exposure.part), dtype=bool)
    if "table_minutes" not in exposure.attrs and not any(exposure.part):
        raise ExposureError(
            f"count={count!r} needs an exposure with named parts, such as schedules.treatment() builds"
        )
    table = np.array([p not in ("descent", "interval") for p in exposure.part])
    if count == "table":
        return table
    pure = (exposure.fractions["O2"] >= 1.0 - 1e-6) & np.isnan(exposure.columns["setpoint"])
    result: Mask = table & pure
    return result


def with_recovery(
    each: Array, exposure: Exposure, pieces: Pieces, rule: str
) -> tuple[Array, list[tuple[Array, Array]]]:
    """Sum the pieces, an interval taking off what a named convention says.

    Parameters
    ----------
    each : array
        What each piece adds, ``(..., segment)``.
    exposure : Exposure
        Whose pieces.
    pieces : Pieces
        From :meth:`Exposure.pieces`.
    rule : str
        A rule of :func:`noaa_cns_after_interval`.

    Returns
    -------
    tuple
        The sum, and for each interval the sum before it and its length [min].

    Examples
    --------
    >>> dive = Exposure.start("oxygen").stay(30).then(90)
    >>> total, seen = with_recovery(np.array([1.0, 0.0]), dive, dive.pieces(), "half_time_90_min")
    >>> float(total), len(seen)
    (0.5, 1)
    """
    total = np.zeros(each.shape[:-1])
    rest = np.zeros(each.shape[:-1])
    seen = []
    for k, part in enumerate(exposure.part):
        if part == "interval":
            rest = rest + pieces.duration[..., k]
            if k + 1 < len(exposure.part) and exposure.part[k + 1] == "interval":
                continue  # one interval, however it is cut
            seen.append((total, rest))
            total = np.asarray(noaa_cns_after_interval.raw(total, rest, rule=rule))
            rest = np.zeros(each.shape[:-1])
        total = total + each[..., k]
    return total, seen


def recovers(measure: str, recovery: str) -> bool:
    """Return whether a convention on intervals holds for a measure.

    Parameters
    ----------
    measure : str
        A name of :data:`MEASURES`.
    recovery : str
        "none" or a rule of :func:`noaa_cns_after_interval`.

    Returns
    -------
    bool
        True for the NOAA fraction of one exposure.

    Examples
    --------
    >>> recovers("uptd", "half_time_90_min"), recovers("noaa_cns", "half_time_90_min")
    (False, True)
    """
    return recovery != "none" and MEASURES[measure].limit == "noaa_cns_single"


# -- The Dataset -----------------------------------------------------------------------------------


@functools.cache
def _limits() -> dict[str, Limit]:
    return {limit.id: limit for limit in load("default")}


@dataclass(frozen=True)
class _Row:
    """One measure of one exposure."""

    total: Array
    dose: Array
    limit: float
    status: NDArray[np.object_]
    reason: str
    carried: Array


def _row(
    name: str,
    exposure: Exposure,
    pieces: Pieces,
    mask: Mask,
    role: str,
    initial: xr.Dataset | None,
    recovery: str,
) -> _Row:
    one = MEASURES[name]
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    nothing = np.full(shape, np.nan)
    try:
        require_provenance(one.provenance, f"measure {name}")
    except ProvenanceError as error:
        refused = np.full(shape, "not applicable", dtype=object)
        return _Row(nothing, nothing, np.nan, refused, str(error), nothing)
    reasons: list[str] = []
    carried = nothing
    with np.errstate(all="ignore"):
        if one.whole is not None:
            total = one.whole(pieces, mask) if initial is None else nothing
            dose = total
        else:
            each = np.where(mask, piece_doses(name, pieces), 0.0)
            if recovers(name, recovery):
                total = with_recovery(each, exposure, pieces, recovery)[0]
            else:
                total = each.sum(axis=-1)
            if initial is not None:
                carried = _earlier(initial, name, exposure)
                total = total + carried
            outside = outside_fit(name, pieces, mask)
            total = np.where(outside >= 1.0 - _ROUNDING, np.nan, total)
            dose = one.dose(total)
            reasons += [_fit_reason(name, outside), one.caveat(total)]
    total, dose, carried = (
        np.broadcast_to(np.asarray(v, dtype=float), shape).copy() for v in (total, dose, carried)
    )
    undefined = np.isnan(dose)
    if undefined.any():
        if one.whole is not None and initial is not None:
            reasons = ["it needs the earlier exposure itself: join the two"]
        elif not any(r.startswith("the breathing gas PO2 is never") for r in reasons):
            reasons = [one.why(pieces)]
    several = max(exposure.session) > min(exposure.session) or "interval" in exposure.part
    if several and one.of_one_exposure and not undefined.all():
        reasons.append("several sessions, no recovery counted between them: see course_doses")
    with np.errstate(invalid="ignore"):
        impossible = dose > quantity(one.quantity).possible[1]
    if impossible.any():
        reasons.append(
            f"the formula gives {np.nanmax(dose):.3g}, which is not possible: far outside its data"
        )
        dose = np.where(impossible, np.nan, dose)
        undefined = np.isnan(dose)
    status = np.full(shape, "not judged", dtype=object)
    limit_value = np.nan
    if not one.limit:
        if not undefined.all():
            reasons.append("no limit is published for this measure")
    else:
        limit = _limits()[one.limit]
        limit_value = one.limit_as(limit.value)
        # A measure that looks for the worst day itself is judged by it, however long it all lasts.
        a_day = limit.per_day and one.whole is None
        longer = a_day and bool(np.any(pieces.times[..., -1] > _DAY * (1.0 + _ROUNDING)))
        if role not in limit.roles:
            status[...] = "not applicable"
            made_for = " and ".join(f"{r}s" for r in limit.roles)
            article = "an" if role[0] in "aeiou" else "a"
            reasons.append(
                f"the limit ({limit_value:.4g}, {limit.authority}) was made for {made_for}, not for "
                f"{article} {role}: not applicable, shown as context"
            )
        elif longer:
            reasons.append("the limit is for a day and the exposure is longer")
        else:
            with np.errstate(invalid="ignore"):
                beyond = dose > limit_value * (1.0 + _ROUNDING)
            status = np.where(beyond, "beyond", "within").astype(object)
    status = np.where(undefined, "not applicable", status).astype(object)
    return _Row(total, dose, limit_value, status, "; ".join(r for r in reasons if r), carried)


def _earlier(initial: xr.Dataset, name: str, exposure: Exposure) -> Array:
    if name not in initial["measure"].values:
        raise ExposureError(f"initial= holds no measure {name}; compute it there too")
    before = initial["total"].sel(measure=name, drop=True)
    extra = [str(d) for d in before.dims if d not in exposure.dims]
    if extra:
        raise ExposureError(f"initial= has the dimension {extra[0]} that the exposure has not")
    names = [d for d in exposure.dims if d in before.dims]
    values = before.transpose(*names).values
    return np.asarray(values, dtype=float).reshape([before.sizes.get(d, 1) for d in exposure.dims])


def oxygen(
    exposure: Exposure,
    measures: Sequence[str] | str = ("uptd", "noaa_cns"),
    count: str = "all",
    *,
    role: str = "diver",
    initial: xr.Dataset | None = None,
    recovery: str = "none",
) -> xr.Dataset:
    """Oxygen doses of an exposure in several measures, each with its limit.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time.
    measures : sequence of str
        Names of :data:`MEASURES`, or "all".
    count : {"all", "table", "oxygen"}
        The whole exposure; the table's clock (without the descent); its oxygen periods only.
    role : {"diver", "patient", "attendant"}
        Whose exposure it is: limits made for others are "not applicable", shown as context.
    initial : Dataset, optional
        Result of the exposure before: its sums are carried on.
    recovery : str
        Convention on what an interval takes off the NOAA fraction of one exposure, a rule of
        :func:`noaa_cns_after_interval`; by default nothing.

    Returns
    -------
    Dataset
        On dimension ``measure``: ``dose``, ``total`` (the sum it follows from), ``limit_value``,
        ``margin`` (positive inside), ``status`` ("beyond", "within", "not applicable", "not judged"),
        ``reason``, ``limit``, ``authority``, ``for_whom``, ``endpoint``, ``population``,
        ``provenance``, ``unit``, ``context``; beside a risk of any sign ``seizure_rate_low`` and
        ``seizure_rate_high`` of clinics, per treatment. Scenario dimensions follow ``measure``.

    Raises
    ------
    UnknownNameError
        If a measure, count, role or recovery is unknown.
    ExposureError
        If the exposure has no piece.

    Notes
    -----
    Integrals over the linear pieces are exact. A measure that is not defined for the exposure is NaN
    with a reason; the others go on. Within a limit is not thereby without danger: limits for divers
    are not for patients, and treatments of the seriously ill go beyond them.

    Examples
    --------
    >>> from gasphys.schedules import treatment
    >>> ds = oxygen(treatment("usn_6"), ["uptd", "esot", "noaa_cns"], count="oxygen", role="patient")
    >>> ds.dose.values.round(2).tolist()
    [640.79, 1458.12, nan]
    """
    names = list(MEASURES) if isinstance(measures, str) and measures == "all" else measures
    names = [names] if isinstance(names, str) else list(names)
    for name in names:
        if name not in MEASURES:
            raise unknown_name("dose measure", name, MEASURES)
    if role not in ("diver", "patient", "attendant"):
        raise unknown_name("role", role, ("diver", "patient", "attendant"))
    rules = noaa_cns_after_interval.registry  # type: ignore[attr-defined]
    if recovery != "none" and recovery not in rules:
        raise unknown_name("recovery", recovery, ["none", *rules])
    if not exposure.part:
        raise ExposureError("the exposure has no piece yet")
    pieces = exposure.pieces()
    mask = counted(exposure, count)
    rows = {name: _row(name, exposure, pieces, mask, role, initial, recovery) for name in names}
    options = {"count": count, "role": role, "recovery": recovery}
    options["carried_on"] = "no" if initial is None else "yes"
    return _dataset(exposure, rows, _beside(exposure, pieces, mask), mask, options)


@dataclass(frozen=True)
class _Beside:
    """What stands beside the risks: clinics' seizure rates, oxygen periods and air breaks."""

    low: Array
    high: Array
    near: bool
    longest: Array
    breaks: Array


def _beside(exposure: Exposure, pieces: Pieces, mask: Mask) -> _Beside:
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    full = (*shape, len(exposure.part))
    real = np.broadcast_to(pieces.duration > 0.0, full)
    highest = np.where(real, np.maximum(pieces.start_po2, pieces.end_po2), 0.0)
    top = np.where(mask, highest, 0.0).max(axis=-1)
    low, high = clinic_seizure_rates(top)
    on = highest >= CNS_FIT[0]
    longest, run, breaks = (np.zeros(shape) for _ in range(3))
    off, before = np.zeros(shape, dtype=bool), np.zeros(shape, dtype=bool)
    for k, part in enumerate(exposure.part):
        here, there = on[..., k], real[..., k]
        breaks = breaks + (here & off & before)
        run = np.where(here, run + pieces.duration[..., k], np.where(there, 0.0, run))
        longest = np.maximum(longest, run)
        before = before | here
        # An interval, or another session, ends what a break could interrupt.
        new = part == "interval" or (k > 0 and exposure.session[k] != exposure.session[k - 1])
        before = here if new else before
        off = np.where(there, ~here, off)
    return _Beside(np.asarray(low), np.asarray(high), bool(np.all(near_clinics(top))), longest, breaks)


def _dataset(
    exposure: Exposure, rows: dict[str, _Row], beside: _Beside, mask: Mask, options: dict[str, str]
) -> xr.Dataset:

    dims = ("measure", *exposure.dims)
    ones = {name: MEASURES[name] for name in rows}
    limits = {name: _limits().get(one.limit) for name, one in ones.items()}
    dose = np.stack([r.dose for r in rows.values()])
    limit_value = np.array([r.limit for r in rows.values()])
    edge = limit_value.reshape((-1, *(1,) * len(exposure.dims)))
    units = {n: quantity(one.quantity).dose_unit or quantity(one.quantity).unit for n, one in ones.items()}

    def words(values: Sequence[str], meaning: str) -> tuple[Any, ...]:
        return ("measure", np.array(list(values), dtype=str), {"long_name": meaning})

    ds = xr.Dataset(
        {
            "dose": (
                dims,
                dose,
                {
                    "units": "1",
                    "long_name": "oxygen dose, in the unit of the variable unit",
                    "dose_unit": "; ".join(f"{n}: {u}" for n, u in units.items()),
                },
            ),
            "total": (
                dims,
                np.stack([r.total for r in rows.values()]),
                {"units": "1", "long_name": "sum over the pieces that the dose follows from"},
            ),
            "limit_value": (
                "measure",
                limit_value,
                {"units": "1", "long_name": "the measure's limit, in the unit of the variable unit"},
            ),
            "margin": (
                dims,
                edge - dose,
                {"units": "1", "long_name": "distance to the limit, positive inside"},
            ),
            "status": (
                dims,
                np.stack([r.status for r in rows.values()]).astype(str),
                {"long_name": "beyond, within, not applicable or not judged"},
            ),
            "reason": words([r.reason for r in rows.values()], "why it is not applicable, or a flag"),
            "limit": words([one.limit for one in ones.values()], "id of the limit"),
            "authority": words([x.authority if x else "" for x in limits.values()], "whose limit it is"),
            "for_whom": words(
                [", ".join(x.roles) if x else "" for x in limits.values()], "whom the limit was made for"
            ),
            "endpoint": words([one.endpoint for one in ones.values()], "what it stands for"),
            "population": words([one.population for one in ones.values()], "made for"),
            "provenance": words([one.provenance for one in ones.values()], "how the numbers are known"),
            "unit": words(["" if u == "1" else u for u in units.values()], "unit of dose"),
            "context": words(
                [_context(ones[n], r, beside) for n, r in rows.items()],
                "what must be read beside the number",
            ),
        },
        coords={"measure": list(rows), **exposure.coords},
    )
    ds["longest_oxygen_period"] = (
        exposure.dims,
        beside.longest,
        {"units": "min", "long_name": "longest time at a PO2 of 100 kPa and more without a break"},
    )
    ds["air_breaks"] = (
        exposure.dims,
        beside.breaks.astype(np.int32),
        {"units": "1", "long_name": "breaks between times at a PO2 of 100 kPa and more"},
    )
    if options["carried_on"] == "yes":
        ds["carried_total"] = (
            dims,
            np.stack([r.carried for r in rows.values()]),
            {"units": "1", "long_name": "sum of the exposure before, part of total"},
        )
    if any(one.is_symptom_risk for one in ones.values()):
        nothing = np.full(beside.low.shape, np.nan)
        for word, rate in (("low", beside.low), ("high", beside.high)):
            ds[f"seizure_rate_{word}"] = (
                dims,
                np.stack([rate if one.is_symptom_risk else nothing for one in ones.values()]),
                {
                    "units": "1",
                    "long_name": f"{word}est seizure rate of clinics near this PO2, per treatment",
                },
            )
    keys = [k for one in ones.values() for k in EQUATIONS[one.equation].sources]
    if any(one.is_symptom_risk for one in ones.values()):
        keys += ["heyboer_2014", "costa_2019", "yildiz_2004", "hadanny_2016"]
    view = exposure.segment_view()
    view["counted"] = (
        "segment",
        np.broadcast_to(mask, (*mask.shape[:-1], len(exposure.part)))
        .reshape(-1, len(exposure.part))[0]
        .astype(np.int8),
        {"long_name": "1 where the piece counts"},
    )
    ds = ds.merge(view, combine_attrs="override")
    ds.attrs = view.attrs | dataset_attributes(
        "oxygen dose of an exposure",
        f"oxygen dose, count {options['count']}",
        history=exposure.history,
        references=keys,
        **options,
        equations=json.dumps({n: [one.equation, dict(one.options)] for n, one in ones.items()}),
    )
    return ds


def _context(one: Measure, row: _Row, beside: _Beside) -> str:
    """Return what must stand beside a risk of any sign: seizure rates, and breaks the fit does not know."""
    if not one.is_symptom_risk:
        return ""
    low, high = float(np.min(beside.low)), float(np.max(beside.high))
    where = "near this PO2" if beside.near else "at all treatment pressures together, none near this PO2"
    text = f"seizures in {_percent(low)} to {_percent(high)} of clinics' treatments {where}"
    risk = row.dose[~np.isnan(row.dose)]
    if beside.near and high > 0.0 and risk.size:
        top = float(risk.max())
        text += f"; the risk of any sign is {_times(top / high)}"
        text += f" to {_times(top / low)}" if low > 0.0 and low != high else ""
        text += " times that"
    breaks = int(np.max(beside.breaks, initial=0))
    if breaks:
        text += (
            f"; {breaks} air break{'s' if breaks > 1 else ''} in the exposure, which the fit does not know"
        )
    return text


def _percent(rate: float) -> str:
    return f"{100.0 * rate:.2g} %"


def _times(ratio: float) -> str:
    return f"{ratio:.2g}" if 0.001 < ratio < 100.0 else f"{float(f'{ratio:.2g}'):.6g}"


def dose_text(ds: xr.Dataset) -> str:
    """Return doses in words: each with its limit, what it stands for and what stands beside it.

    Parameters
    ----------
    ds : Dataset
        From :func:`oxygen`, of one scenario.

    Returns
    -------
    str
        A few lines a measure, then the caution.

    Raises
    ------
    ExposureError
        If it holds several scenarios.

    Examples
    --------
    >>> print(dose_text(oxygen(Exposure.start("oxygen").stay(60), ["uptd"])).splitlines()[0])
    uptd 60 UPTD, limit 850: within by 790
    """
    if ds["dose"].dims != ("measure",):
        raise ExposureError("doses of several scenarios have no one text; pick one first")
    lines = []
    for name in ds["measure"].values:
        row = ds.sel(measure=name)
        value, margin, limit = (float(row[v].values) for v in ("dose", "margin", "limit_value"))
        status, unit = str(row["status"].values), str(row["unit"].values)
        share = not unit
        shown = "-" if np.isnan(value) else f"{100.0 * value:.4g} %" if share else f"{value:.4g} {unit}"
        line = f"{name} {shown}"
        if not np.isnan(limit):
            line += f", limit {100.0 * limit:.4g} %" if share else f", limit {limit:.4g}"
        line += f": {status}"
        if status in ("beyond", "within"):
            line += f" by {100.0 * abs(margin):.4g} %" if share else f" by {abs(margin):.4g}"
        lines.append(line)
        lines.append(f"    {row['endpoint'].values}; made for {row['population'].values}")
        lines += [f"    {row[v].values}" for v in ("reason", "context") if str(row[v].values)]
    return "\n".join([*lines, CAUTION])
