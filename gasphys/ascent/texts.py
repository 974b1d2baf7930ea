"""Ascents in words and numbers to take along: the list of when to leave, the comparison, CSV."""

from __future__ import annotations

import math
import os
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from gasphys.ascent.following import allowed_from
from gasphys.ascent.planner import Plan
from gasphys.errors import ExposureError, GasphysError
from gasphys.quantities import CAUTION

if TYPE_CHECKING:
    from gasphys.ascent.comparing import Comparison

__all__ = [
    "Stop",
    "assumptions",
    "comparison_text",
    "inputs",
    "leave_at_list",
    "plan_csv",
    "save_plan",
    "stops_of",
]

#: Said where gradients are used.
_GRADIENTS = (
    "No trial supports gradients, or any pair of them. A low first one asks for deeper stops: in water, at "
    "equal stop time, a bubble model's deeper stops had 11 cases in 198 dives (10 after review), shallower "
    "ones of another model 3 in 192 (abstract read).",
)

#: Width of text.
_WIDTH = 100


@dataclass(frozen=True)
class Stop:
    """One line of the list of when to leave.

    Parameters
    ----------
    depth, minutes, leave, allowed : float
        Depth [depth unit], time there, elapsed time of leaving and from which one step up is allowed [min].
    gas, control : str
        Gas, and what held the stop.
    breaks : tuple of str
        Breaks in it, in words.
    """

    depth: float
    minutes: float
    leave: float
    allowed: float
    gas: str
    control: str
    breaks: tuple[str, ...]


def stops_of(plan: Plan) -> list[Stop]:
    """Return the stops of a plan, with the instant from which each may be left.

    Parameters
    ----------
    plan : Plan
        One scenario.

    Returns
    -------
    list of Stop
        Deepest first.

    Raises
    ------
    ExposureError
        If the plan holds several scenarios.

    Examples
    --------
    >>> from gasphys import Exposure, ascent
    >>> found = ascent.plan(Exposure.start("air").travel(depth=40, rate=20).stay(20))
    >>> [(s.depth, s.control) for s in stops_of(found)]
    [(6.0, '12.5-min half-time in control'), (3.0, '27-min half-time in control')]
    """
    if plan.exposure.dims:
        raise ExposureError("a list of stops shows one scenario; pick one first")
    allowed = allowed_from(plan)
    out = []
    for k in range(plan.stops.sizes["stop"]):
        row = plan.stops.isel(stop=k)
        half, name = float(row.controlling_half_time), str(row.controlling_compartment.values)
        control = (
            f"{half:g}-min half-time in control" if math.isfinite(half) else f"compartment {name} in control"
        )
        leave, minutes, gas = float(row.leave_time), float(row.duration), str(row.gas.values)
        out.append(
            Stop(
                float(row.depth),
                minutes,
                leave,
                float(allowed[k]),
                gas,
                control if name else "for the switch",
                _breaks(plan, leave - minutes, leave, gas),
            )
        )
    return out


def _breaks(plan: Plan, begin: float, end: float, gas: str) -> tuple[str, ...]:
    """Return the breaks between two times, in words."""
    rule = plan.rules.breaks
    if rule is None or str(rule.gas) == gas:
        return ()
    times = plan.exposure.pieces().times
    return tuple(
        f"{rule.gas} from {times[k]:.1f} to {times[k + 1]:.1f}"
        for k in range(len(plan.exposure.part))
        if times[k] >= begin - 1e-6
        and times[k + 1] <= end + 1e-6
        and times[k + 1] > times[k]
        and plan.exposure.gas_name(k) == str(rule.gas)
    )


def _elapsed(minutes: float) -> str:
    return f"{minutes:.1f}".removesuffix(".0")


def leave_at_list(plan: Plan) -> str:
    """Return an ascent as a list of when to leave each stop.

    Parameters
    ----------
    plan : Plan
        One scenario.

    Returns
    -------
    str
        A line a stop, then the surface and the caution.

    Raises
    ------
    ExposureError
        If the plan holds several scenarios.

    Examples
    --------
    >>> from gasphys import Exposure, ascent
    >>> found = ascent.plan(Exposure.start("air").travel(depth=40, rate=20).stay(20))
    >>> print(leave_at_list(found).splitlines()[2].partition("; air; ")[2])
    one step up is allowed from 35.9
    """
    unit = plan.exposure.depth_unit
    lines = [f"ascent by {plan.model.name}, {plan.model.edition}"]
    for stop in stops_of(plan):
        parts = [
            f"wait at {stop.depth:g} {unit}, leave at {_elapsed(_up(stop.leave))} min elapsed",
            stop.control,
            stop.gas,
            *(f"break: {text}" for text in stop.breaks),
            f"one step up is allowed from {_elapsed(_up(stop.allowed))}",
        ]
        lines.append("; ".join(parts))
    lines.append(
        f"surface at {_elapsed(_up(plan.total_time))} min elapsed; ascent {_elapsed(plan.ascent_time)} min"
    )
    if "allowed_gradient" in plan.stops:  # a bubble model
        lines.append(f"Evidence: {plan.model.evidence}.")
    lines.append(CAUTION)
    return "\n".join(lines)


def _up(minutes: float) -> float:
    """Round up to a tenth: never earlier than it is allowed."""
    return math.ceil(minutes * 10.0 - 1e-6) / 10.0


def inputs(plan: Plan) -> dict[str, str]:
    """Return what a plan was made from, in words.

    Parameters
    ----------
    plan : Plan
        One scenario.

    Returns
    -------
    dict
        Name to text.

    Examples
    --------
    >>> from gasphys import Exposure, ascent
    >>> found = ascent.plan(Exposure.start("air").travel(depth=40, rate=20).stay(20))
    >>> inputs(found)["bottom"]
    '40 msw on air, left at 22 min'
    """
    exposure, rules, unit = plan.exposure, plan.rules, plan.exposure.depth_unit
    left = plan.total_time - plan.ascent_time
    last = int(np.searchsorted(exposure.pieces().times, left - 1e-9)) - 1
    depth = float(exposure._pressure_to_depth(exposure.columns["end_pressure"][last]))
    rates = ", ".join(
        f"{rate:g} {unit}/min" + (f" above {edge:g} {unit}" if len(rules.bands()) > 1 else "")
        for edge, rate in rules.bands()
    )
    out = {
        "bottom": f"{depth:.4g} {unit} on {exposure.gas_name(last)}, left at {_elapsed(left)} min",
        "surface pressure": f"{float(exposure.surface_pressure):.5g} kPa absolute",
        "gases on the way": ", ".join(
            dict.fromkeys(exposure.gas_name(k) for k in range(last + 1, len(exposure.part)))
        )
        or "the bottom's own",
        "ascent rate": rates,
        "stops": f"every {rules.stop_spacing:g} {unit}, the last at {rules.last_stop:g} {unit}, "
        + ("whole minutes" if rules.whole_minutes else "not rounded")
        + (f", at least {rules.shortest_stop:g} min" if rules.shortest_stop else ""),
        "gradients": f"{rules.gradient_low:g} at the first stop, {rules.gradient_high:g} at the surface"
        + (" (the model as published)" if rules.gradient_low == rules.gradient_high == 1.0 else ""),
    }
    if rules.switch_minutes:
        out["time for a switch"] = f"{rules.switch_minutes:g} min"
    if rules.breaks is not None:
        out["breaks"] = str(rules.breaks)
    return out


def assumptions(plan: Plan) -> list[str]:
    """Return what a plan assumes and how its numbers are known.

    Parameters
    ----------
    plan : Plan
        The plan.

    Returns
    -------
    list of str
        One sentence each.

    Examples
    --------
    >>> from gasphys import Exposure, ascent
    >>> found = ascent.plan(Exposure.start("air").travel(depth=40, rate=20).stay(20))
    >>> assumptions(found)[0]
    'Tissues at the start: saturated with air at the surface pressure.'
    """
    model = plan.model
    known = str(plan.stops.attrs["provenance"]).replace("_", ", ")
    start = model.start if plan.initial is None else "as given"
    tested = " and ".join(word.replace("_", " ") for word in model.tested)
    unknown = "" if "allowed_gradient" in plan.stops else "bubbles, "
    return [
        f"Tissues at the start: {start}.",
        f"Limit tested {tested}; depth: {model.depth}.",
        f"Not considered: {unknown}work, cold, dehydration, the person.",
        f"Weakest provenance of the model's numbers: {known}.",
        *(
            [f"Evidence: {model.evidence}."]
            if model.evidence
            else ["Evidence: no trial of such plans is known here."]
        ),
        *(_GRADIENTS if plan.rules.gradient_low < 1.0 else ()),
        *([f"Not claimed: {model.does_not_claim}."] if model.does_not_claim else []),
    ]


def comparison_text(found: Comparison) -> str:
    """Return ascents compared, in words and tables.

    Parameters
    ----------
    found : Comparison
        From :func:`compare_ascents`.

    Returns
    -------
    str
        Each ascent's length, a table per pressure band, the cross-judgment, refusals, the caution.

    Examples
    --------
    >>> from gasphys import Exposure, ascent
    >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
    >>> found = ascent.compare_ascents(bottom, models=["buhlmann_1995_c", "us_navy_1957"])
    >>> print(comparison_text(found).splitlines()[1])
      buhlmann_1995_c    14.4 min, 2 stops, first at 6 msw
    """
    one = next(iter(found.plans.values()))
    unit = one.exposure.depth_unit
    wide = max(map(len, found.plans))
    lines = [f"Ascents from {inputs(one)['bottom']}"]
    for name, plan in found.plans.items():
        stops = plan.stops
        count = stops.sizes["stop"]
        text = (
            f"{count} stop{'s' if count > 1 else ''}, first at {float(stops.depth[0]):g} {unit}"
            if count
            else "no stop"
        )
        lines.append(f"  {name:<{wide}}  {_elapsed(plan.ascent_time):>5} min, {text}")
    for reason in found.refused.values():
        lines += _wrapped(f"no ascent: {reason}", "  ")
    if len(found.plans) > 1:
        lines += ["", *_bands_text(found, unit)]
    bubbles = [p.model for p in found.plans.values() if "allowed_gradient" in p.stops]
    evidence = [f"Evidence against deeper stops ({m.name}): {m.evidence}." for m in bubbles]
    lines += ["", *_judgment_text(found), ""]
    lines += [*(line for text in evidence for line in _wrapped(text, "")), CAUTION]
    return "\n".join(lines)


def _wrapped(text: str, indent: str) -> list[str]:
    import textwrap

    return textwrap.wrap(text, _WIDTH, initial_indent=indent, subsequent_indent=indent + "  ")


def _bands_text(found: Comparison, unit: str) -> list[str]:
    ds = found.bands
    rows: list[tuple[str, ...]] = [("to", "earliest", "latest", "asked by", "half-time", "costs by then")]
    for k in range(ds.sizes["band"]):
        row = ds.isel(band=k)
        more, half = float(row.more_minutes), float(row.latest_half_time)
        apart = more > 0.05
        cost = (
            f"{more:.1f} min, {float(row.more_uptd):.1f} UPTD, {float(row.more_gas):.0f} L per L/min"
            if apart
            else "nothing"
        )
        rows.append(
            (
                f"{float(row.to_depth):g} {unit}" if float(row.to_depth) else "surface",
                f"{float(row.earliest):.1f}",
                f"{float(row.latest):.1f}",
                str(row.latest_model.values) if apart else "all",
                f"{half:g} min" if math.isfinite(half) and apart else "-",
                cost,
            )
        )
    head = "Minutes since leaving the bottom by which each depth is left, and what the latest costs:"
    note = "Costs: of the latest ascent over the earliest; gas as surface liters for each L/min breathed."
    return [head, *_table(rows), *_wrapped(note, "  ")]


def _judgment_text(found: Comparison) -> list[str]:
    ds = found.judgment
    rows = [("ascent followed", *(f"by {m}" for m in ds.model.values))]
    for name in ds.ascent.values:
        cells = [str(name)]
        for judge in ds.model.values:
            cell = ds.sel(ascent=name, model=judge)
            if str(cell.status.values) == "not judged":
                cells.append("not judged")
            else:
                cells.append(f"{float(cell.minutes_beyond):.1f} min, {float(cell.worst_ratio):.3f}")
        rows.append(tuple(cells))
    head = "Judged by each model's own published limit: minutes beyond it, worst ratio to it:"
    notes = [
        r for r in dict.fromkeys(ds.reason.values.ravel().tolist()) if r and r not in found.refused.values()
    ]
    lines = [head, *_table(rows)]
    for text in notes:
        lines += _wrapped(f"not judged: {text}", "  ")
    lines += _wrapped(
        "Minutes include those at the surface on air until the limit is met again. Ratios of different "
        "models are not comparable in risk; within a limit is no promise.",
        "  ",
    )
    return lines


def _table(rows: list[tuple[str, ...]]) -> list[str]:
    widths = [max(len(row[k]) for row in rows) for k in range(len(rows[0]))]
    return [
        "  " + "  ".join(f"{cell:<{w}}" for cell, w in zip(row, widths, strict=True)).rstrip() for row in rows
    ]


# -- CSV ------------------------------------------------------------------------------------------


def plan_csv(plan: Plan, title: str = "") -> str:
    """Return a plan as CSV that ``Exposure.from_csv`` reads back.

    Parameters
    ----------
    plan : Plan
        One scenario.
    title : str
        Words for the first line.

    Returns
    -------
    str
        Comment lines with model, edition, version, inputs, assumptions and the caution; then a row at every
        change of pressure or gas: time, depth, gas (set-point on a loop), part and, where a stop ends, its
        reason.

    Raises
    ------
    ExposureError
        If the plan holds several scenarios.

    Examples
    --------
    >>> from gasphys import Exposure, ascent
    >>> found = ascent.plan(Exposure.start("air").travel(depth=40, rate=20).stay(20))
    >>> print(plan_csv(found).splitlines()[-1])
    36.4444,0,air,,ascent,
    """
    exposure = plan.exposure
    stops = {round(s.leave, 4): s for s in stops_of(plan)}
    head = [*filter(None, [" ".join(title.split())]), f"ascent by {plan.model.name}, {plan.model.edition}"]
    head += [f"{plan.stops.attrs['source']}; a plan to compare, made by a model"]
    head += [f"{k}: {v}" for k, v in inputs(plan).items()]
    head += [*assumptions(plan), *exposure.history, CAUTION]
    header, place = _depth_column(exposure)
    lines = [*(f"# {text}" for text in head), f"time_min,{header},gas,setpoint_kPa,part,reason"]
    pieces, n = exposure.pieces(), len(exposure.part)
    for k in range(n + 1):
        piece = min(k, n - 1)
        pressure = exposure.columns["start_pressure"][k] if k < n else exposure.columns["end_pressure"][-1]
        setpoint = float(exposure.columns["setpoint"][piece])
        time = float(pieces.times[k])
        stop = stops.get(round(time, 4))
        fields = [
            f"{time:.4f}".rstrip("0").rstrip("."),
            f"{float(place(pressure)):.4f}".rstrip("0").rstrip("."),
            exposure.gas_name(piece).rpartition("diluent ")[2],
            "" if math.isnan(setpoint) else f"{setpoint:g}",
            exposure.part[piece] or "bottom",
            f"leave: {stop.control}" if stop else "",
        ]
        lines.append(",".join(fields))
    return "\n".join(lines) + "\n"


def _depth_column(exposure: Any) -> tuple[str, Any]:
    """Return the header of depths that reads back as meant, and what makes them of pressures."""
    if exposure.depth_unit == "m" and exposure.water != "en13319":
        return "pressure_abs_kPa", lambda p: p
    return f"depth_{exposure.depth_unit}", exposure._pressure_to_depth


def save_plan(plan: Plan, path: str | os.PathLike[str], title: str = "") -> None:
    """Write a plan to a file: CSV, or a page to print.

    Parameters
    ----------
    plan : Plan
        One scenario.
    path : path
        Ending in ``.csv`` or ``.html``.
    title : str
        Words for the top.

    Raises
    ------
    GasphysError
        For another ending, or if the file cannot be written.

    Examples
    --------
    >>> import pathlib, tempfile
    >>> from gasphys import Exposure, ascent
    >>> found = ascent.plan(Exposure.start("air").travel(depth=40, rate=20).stay(20))
    >>> file = pathlib.Path(tempfile.mkdtemp()) / "ascent.html"
    >>> save_plan(found, file)
    >>> file.read_text()[:15]
    '<!doctype html>'
    """
    from gasphys.ascent.sheet import ascent_sheet

    ending = Path(path).suffix
    if ending not in (".csv", ".html"):
        raise GasphysError(f"{path}: a plan is written as .csv or .html, not {ending!r}")
    text = plan_csv(plan, title) if ending == ".csv" else ascent_sheet(plan, title)
    try:
        Path(path).write_text(text, encoding="utf-8")
    except OSError as error:
        raise GasphysError(f"{path}: {error.strerror}") from None
