"""Fills, stocks and losses in words."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import ExposureError
from gasphys.gas import FORMULAS, Gas
from gasphys.quantities import CAUTION
from gasphys.units import convert

__all__ = ["fill_text", "gas_from_fractions", "loss_text", "stock_text"]

_WIDTH = 100


def gas_from_fractions(fractions: xr.DataArray) -> str:
    """Return the name of a gas given by its fractions.

    Parameters
    ----------
    fractions : DataArray
        Along ``gas``, one scenario.

    Returns
    -------
    str
        A name :meth:`Gas.parse` reads.

    Raises
    ------
    ExposureError
        If it holds several scenarios.

    Examples
    --------
    >>> from gasphys.supply import partial_pressure_fill
    >>> fill = partial_pressure_fill("trimix 17/48", "220 bar")
    >>> gas_from_fractions(fill.gas_fraction)
    'trimix 17/48'
    """
    if fractions.dims != ("gas",):
        raise ExposureError("words and figures show one fill; pick one first")
    parts = {
        FORMULAS[str(f)]: round(float(v), 12)
        for f, v in zip(fractions["gas"].values, fractions.values, strict=True)
        if str(f) != "N2"
    }
    return str(Gas(**parts))


def fill_text(ds: xr.Dataset, pressure_unit: str = "bar", surface_pressure: float | None = None) -> str:
    """Return a fill as a mole account: one line a step, where to stop, what the ideal recipe would give.

    Parameters
    ----------
    ds : Dataset
        From :func:`gasphys.supply.partial_pressure_fill`, one fill.
    pressure_unit : str
        Unit of pressures.
    surface_pressure : float, optional
        Ambient pressure of the gauge [kPa absolute]: pressures to stop at are shown as the gauge reads them.

    Returns
    -------
    str
        A few lines and the caution.

    Raises
    ------
    ExposureError
        If it holds several fills.

    Examples
    --------
    >>> from gasphys.supply import partial_pressure_fill
    >>> fill = partial_pressure_fill("nitrox 32", "200 bar", 12.0, order=("oxygen", "air"))
    >>> print(fill_text(fill))  # doctest: +ELLIPSIS
    nitrox 32 to 200.0 bar absolute, 12 L at 20 degC, empty at the start
    <BLANKLINE>
                     moles added   moles then   stop settled   by the ideal law
      1  oxygen             13.5         13.5           26.9               27.8
      2  air                83.4         96.9          200.0              200.0
    <BLANKLINE>
    wanted:                  O2 32.0 %, N2 68.0 %
    the ideal recipe gives:  O2 32.4 %, N2 67.6 %
    <BLANKLINE>
    ...
    """
    wanted = gas_from_fractions(ds.gas_fraction)
    less = 0.0 if surface_pressure is None else surface_pressure

    def shown(value: Any) -> str:
        return f"{float(convert(float(value) - less, 'kPa', pressure_unit)):.1f}"

    kind = "absolute" if surface_pressure is None else f"on a gauge at {surface_pressure:.1f} kPa"
    start = "empty at the start"
    if float(ds.remainder_pressure) > 0.0:
        there = gas_from_fractions(ds.remainder_fraction)
        start = f"on {there} at {shown(ds.remainder_pressure)} {pressure_unit}"
    lines = [
        f"{wanted} to {shown(ds.target_pressure)} {pressure_unit} {kind}, {float(ds.water_capacity):g} L at "
        f"{float(ds.temperature):g} degC, {start}",
        "",
    ]
    hot = "pressure_after_hot" in ds
    heads = ["moles added", "moles then", *(["stop hot"] if hot else []), "stop settled", "by the ideal law"]
    width = max(9, *(len(str(s)) for s in ds.step.values))
    lines.append(f"     {'':<{width}}" + "".join(f"   {h:>{max(len(h), 10)}}" for h in heads))
    reached = float(ds.remainder_amount)
    if reached > 0.0:
        cells = ["", f"{reached:.1f}", *([""] if hot else []), shown(ds.remainder_pressure), ""]
        lines.append(_row("remainder", 0, cells, heads, width))
    for k, name in enumerate(ds.step.values):
        row = ds.isel(step=k)
        reached += float(row.amount)
        cells = [f"{float(row.amount):.1f}", f"{reached:.1f}"]
        cells += [shown(row.pressure_after_hot)] if hot else []
        cells += [shown(row.pressure_after), shown(row.ideal_pressure_after)]
        lines.append(_row(str(name), k + 1, cells, heads, width))
    if hot:
        lines += [
            "",
            f"Hot: the gas at {float(ds.filling_temperature):g} degC, as given; it is not computed.",
        ]
    given, wanted_mix = (
        mixture_words(v, ds.gas_fraction) for v in (ds.ideal_recipe_fraction, ds.gas_fraction)
    )
    lines += ["", f"wanted:                  {wanted_mix}", f"the ideal recipe gives:  {given}", ""]
    lines += textwrap.wrap(
        f"Content of the target known to {100.0 * float(ds.relative_uncertainty):.2g} %"
        + (f" ({ds.attrs['estimated_pairs']})" if "estimated_pairs" in ds.attrs else "")
        + ".",
        _WIDTH,
    )
    lines += textwrap.wrap(str(ds.attrs["comment"]).replace(CAUTION, "").strip(), _WIDTH)
    lines += textwrap.wrap(CAUTION, _WIDTH)
    return "\n".join(lines)


def mixture_words(fractions: xr.DataArray, beside: xr.DataArray) -> str:
    """Return a mixture in percent, every gas that it or another one has.

    Parameters
    ----------
    fractions : DataArray
        Along ``gas``.
    beside : DataArray
        The mixture it is compared with.

    Returns
    -------
    str
        Percent by gas; what stands instead for a recipe that cannot be followed.

    Examples
    --------
    >>> from gasphys.supply import partial_pressure_fill
    >>> fill = partial_pressure_fill("trimix 18/45", "200 bar")
    >>> mixture_words(fill.ideal_recipe_fraction, fill.gas_fraction)
    'O2 17.3 %, N2 35.0 %, He 47.7 %'
    """
    if bool(np.isnan(fractions).any()):
        return "a step of less than nothing: no recipe"
    there = [str(g) for g in fractions.gas.values if max(fractions.sel(gas=g), beside.sel(gas=g)) > 5e-4]
    return ", ".join(f"{g} {100.0 * float(fractions.sel(gas=g)):.1f} %" for g in there)


def _row(name: str, number: int, cells: Sequence[str], heads: Sequence[str], width: int) -> str:
    label = f"  {number}  {name}"
    return f"{label:<{width + 5}}" + "".join(
        f"   {c:>{max(len(h), 10)}}" for c, h in zip(cells, heads, strict=True)
    ).rstrip("\n")


def stock_text(ds: xr.Dataset, pressure_unit: str = "bar") -> str:
    """Return the stock along an exposure in words: each cylinder, each gas, and the reserve.

    Parameters
    ----------
    ds : Dataset
        From :func:`gasphys.supply.stock`, one scenario.
    pressure_unit : str
        Unit of pressures.

    Returns
    -------
    str
        Two tables, what is below the reserve and when, and the caution.

    Raises
    ------
    ExposureError
        If it holds several scenarios.

    Examples
    --------
    >>> from gasphys.exposure import Exposure
    >>> from gasphys.supply import Cylinder, Demand, Reserve, stock
    >>> dive = Exposure.start("air").travel(depth=20, minutes=1).stay(30).travel(depth=0, minutes=3)
    >>> left = stock(dive, [Cylinder("air", 12.0, "200 bar")], Reserve(pressure="50 bar"), Demand(20.0))
    >>> print(stock_text(left).splitlines()[7])
    air: below the reserve from 29.0 min on, for 5.0 min; shortest by 241 L at 34.0 min.
    """
    if ds.free_gas_left.dims != ("supply_gas", "time"):
        raise ExposureError("words show one scenario; pick one first")
    lines = textwrap.wrap(f"Breathed: {ds.attrs['demand']}", _WIDTH)
    lines += [*textwrap.wrap(f"Reserve: {ds.attrs['reserve']}", _WIDTH, subsequent_indent="  "), ""]
    head = [f"start, {pressure_unit}", f"end, {pressure_unit}", "used, L", "left, L"]
    names = [str(n) for n in ds.cylinder.values]
    width = max(8, *(len(n) for n in names)) + 2
    lines.append(f"{'cylinder':<{width}}{'gas':<16}" + "".join(f"{h:>14}" for h in head))
    for name in names:
        row = ds.sel(cylinder=name)
        first, last = row.isel(time=0), row.isel(time=-1)
        per_mole = float(row.free_liters_per_mole)
        used = float(first.amount_left - last.amount_left) * per_mole
        cells = [f"{float(convert(float(r.pressure_left), 'kPa', pressure_unit)):.1f}" for r in (first, last)]
        cells += [f"{used:.0f}", f"{float(last.amount_left) * per_mole:.0f}"]
        lines.append(
            f"{name:<{width}}{row.gas_of_cylinder.values!s:<16}" + "".join(f"{c:>14}" for c in cells)
        )
    lines += ["(pressures absolute; liters of free gas at 101.325 kPa and 20 degC)", ""]
    for gas in ds.supply_gas.values:
        lines += textwrap.wrap(_judged(ds.sel(supply_gas=gas), str(gas)), _WIDTH, subsequent_indent="  ")
    lines += ["", *textwrap.wrap(str(ds.attrs["comment"]), _WIDTH)]
    return "\n".join(lines)


def _judged(row: xr.Dataset, gas: str) -> str:
    margin, when = float(row.margin_to_reserve), float(row.time_of_margin)
    missing = float(row.free_gas_missing[-1])
    short = (
        f"; {missing:.0f} L are missing at the end, none from {float(row.time_empty):.1f} min"
        if missing
        else ""
    )
    if np.isnan(float(row.first_below_reserve)):
        return (
            f"{gas}: above the reserve all the time; closest at {when:.1f} min, {margin:.0f} L more{short}."
        )
    return (
        f"{gas}: below the reserve from {float(row.first_below_reserve):.1f} min on, for "
        f"{float(row.time_below_reserve):.1f} min; shortest by {-margin:.0f} L at {when:.1f} min{short}."
    )


def loss_text(ds: xr.Dataset) -> str:
    """Return a loss table in words.

    Parameters
    ----------
    ds : Dataset
        From :func:`gasphys.supply.loss_table`.

    Returns
    -------
    str
        A row a gas, a column a moment; in each cell the liters left at the surface of the gas that is
        shortest.

    Examples
    --------
    >>> from gasphys.exposure import Exposure
    >>> from gasphys.supply import Cylinder, Demand, loss_table
    >>> bottom = Exposure.start("air").travel(depth=40, minutes=2).stay(20)
    >>> tanks = [Cylinder("air", 12.0, "200 bar", count=2), Cylinder("oxygen", 7.0, "150 bar")]
    >>> ds = loss_table(bottom, [("air", 40), ("oxygen", 6)], tanks, demand=Demand(surface_rate=18.0))
    >>> print(loss_text(ds).splitlines()[3])
    nothing       953 L oxygen      953 L oxygen
    """
    unit = ds.attrs["depth_unit"]
    heads = [
        f"{float(m):.1f} min, {float(d):.3g} {unit}"
        for m, d in zip(ds.moment.values, ds.moment_depth.values, strict=True)
    ]
    cells = [[loss_cell(ds.sel(lost=g).isel(moment=k)) for k in range(len(heads))] for g in ds.lost.values]
    widths = [max(len(h), *(len(row[k]) for row in cells)) + 3 for k, h in enumerate(heads)]
    first = max(len("lost"), *(len(str(g)) for g in ds.lost.values))
    lines = [
        "Left at the surface when a gas is lost: liters of free gas of the one that is shortest",
        "",
        f"{'lost':<{first}}" + "".join(f"{h:>{w}}" for h, w in zip(heads, widths, strict=True)),
    ]
    lines += [
        f"{g!s:<{first}}" + "".join(f"{c:>{w}}" for c, w in zip(row, widths, strict=True))
        for g, row in zip(ds.lost.values, cells, strict=True)
    ]
    reasons = {str(r): None for r in ds.reason.values.ravel() if str(r)}
    lines += [f"no answer: {r}" for r in reasons]
    lines += ["", *textwrap.wrap(str(ds.attrs["comment"]), _WIDTH)]
    return "\n".join(lines)


def loss_cell(cell: xr.Dataset) -> str:
    """Return one cell of a loss table.

    Parameters
    ----------
    cell : Dataset
        One loss at one moment.

    Returns
    -------
    str
        Such as ``"955 L oxygen"``; ``"missing 80 L air"``; ``"no answer"``.

    Examples
    --------
    >>> loss_cell(xr.Dataset({"reason": ((), ""), "least_left": ((), -79.6), "least_gas": ((), "air")}))
    'missing 80 L air'
    """
    if str(cell.reason.values):
        return "no answer"
    left = float(cell.least_left)
    if np.isnan(left):
        return "nothing left to breathe"
    gas = str(cell.least_gas.values)
    return f"{left:.0f} L {gas}" if left >= 0.0 else f"missing {-left:.0f} L {gas}"
