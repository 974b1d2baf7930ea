"""What is left at the surface when a gas is lost: one row a gas, one column a moment."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np
import xarray as xr

from gasphys.ascent import Loop, Rules, plan
from gasphys.ascent.rules import Source, read_gases
from gasphys.errors import ExposureError, NotReachableError, RangeError, ValidityError
from gasphys.exposure import Exposure
from gasphys.gas import FORMULAS, Gas
from gasphys.quantities import attributes, dataset_attributes
from gasphys.supply.account import free_liters_per_mole, of_exposure, open_account
from gasphys.supply.bank import Cylinder, Demand, check_cylinders
from gasphys.supply.stock_left import _NOT_COUNTED, _SOURCES, Book, demand_words, free_gas_words

__all__ = ["NOTHING_LOST", "loss_table"]

#: Row of the table in which nothing is lost.
NOTHING_LOST = "nothing"


def loss_table(
    exposure: Exposure,
    gases: Sequence[tuple[Any, Any]],
    cylinders: Sequence[Cylinder],
    moments: Sequence[Any] | None = None,
    demand: Demand | None = None,
    *,
    spare: Sequence[tuple[Any, Any]] = (),
    model: Any = "buhlmann_1995_c",
    rules: Rules | None = None,
    initial: Any = None,
) -> xr.Dataset:
    """Gas left at the surface after each gas is lost at each of several moments.

    Parameters
    ----------
    exposure : Exposure
        Ends at the bottom; one scenario.
    gases : sequence of (gas, deepest)
        What may be breathed on the way, as for :func:`gasphys.ascent.plan`. The gas or loop of the bottom
        counts as listed, with the depth of the bottom. Only a listed gas can take the place of one that is
        lost.
    cylinders : sequence of Cylinder
        What there is.
    moments : sequence of float or str, optional
        Times since the start at which the loss is noticed [min]; leaving the bottom, and each later switch of
        the ascent with nothing lost, where not given.
    demand : Demand, optional
        How much is breathed where the exposure does not say it.
    spare : sequence of (gas, deepest)
        What is carried for a loss only: open circuit for the way up of a loop. It is used when what is lost
        would have been breathed after the moment, and not before.
    model : str, path or TissueSet
        Model of the ascent.
    rules : Rules, optional
        Rules of the ascent.
    initial : Dataset, DataArray, float or str, optional
        Tissues at the start.

    Returns
    -------
    Dataset
        Along ``lost`` (first ``"nothing"``) and ``moment``: ``least_left`` [L at 101.325 kPa and 20 degC],
        what is left at the surface of the gas that is shortest, negative where it runs out, ``least_gas``,
        ``surface_time`` [min since the start] and ``reason`` where there is no answer. With ``supply_gas``:
        ``free_gas_left``, NaN for the gas lost.

    Raises
    ------
    ExposureError
        If the exposure holds several scenarios, a piece has no demand, or a gas is in no cylinder.
    RangeError
        If a moment is not within bottom and ascent.

    Notes
    -----
    Until the moment all goes as planned with nothing lost. Then the lost gas is not breathed any more, its
    cylinder is out of reach, and the ascent is planned anew from where one is, without it: at once, also from
    the bottom before its end. If it was being breathed, the listed gas with the shallowest permitted depth
    takes its place; where there is none, there is no answer. The same persons share what is left.

    One model's ascent is no promise, and a loss takes minutes that are not in here.

    Examples
    --------
    >>> bottom = Exposure.start("trimix 17/48").travel(depth=56, minutes=3).stay(19)
    >>> tanks = [
    ...     Cylinder("trimix 17/48", 12.0, "220 bar", count=2),
    ...     Cylinder("nitrox 48", 11.0, "200 bar"),
    ...     Cylinder("oxygen", 7.0, "200 bar"),
    ... ]
    >>> gases = [("trimix 17/48", 56), ("nitrox 48", 20), ("oxygen", 6)]
    >>> table = loss_table(bottom, gases, tanks, demand=Demand(surface_rate=18.0))
    >>> table.least_left.sel(lost="nothing").round(-1).values.tolist()
    [1090.0, 1090.0, 1090.0]
    """
    whole = of_exposure(exposure)
    if whole.dims:
        raise ExposureError("a loss table needs one scenario; pick one first")
    bank = check_cylinders(cylinders)
    who = demand or Demand()
    options = {"model": model, "rules": rules, "initial": initial}
    gases = _with_bottom(whole, gases)
    planned = plan(whole, gases, **options)
    sources = read_gases([*gases, *spare], None, whole.depth_unit)
    full = planned.exposure
    when = _moments(full, float(whole.duration), moments)
    lost = _carried(full, sources)
    gas_names = list(dict.fromkeys([*(str(c.gas) for c in bank)]))
    shape = (len(lost) + 1, len(when))
    left = np.full((*shape, len(gas_names)), np.nan)
    surface, reasons = np.full(shape, np.nan), np.full(shape, "", dtype=object)
    for row, name in enumerate((NOTHING_LOST, *lost)):
        for column, moment in enumerate(when):
            try:
                after = (
                    full
                    if name == NOTHING_LOST
                    else _without(full, moment, name, gases, spare, sources, options)
                )
                left[row, column] = _left(after, bank, who, gas_names)
                surface[row, column] = float(after.duration)
            except (NotReachableError, ValidityError) as error:
                reasons[row, column] = str(error)
            if name in gas_names:
                left[row, column, gas_names.index(name)] = np.nan
    return _table(
        left, surface, reasons, (NOTHING_LOST, *lost), when, gas_names, full, who, bank, planned.model
    )


def _with_bottom(exposure: Exposure, gases: Sequence[tuple[Any, Any]]) -> list[tuple[Any, Any]]:
    """Return the gases with the one breathed last among them: good to where it is breathed last."""
    setpoint = float(exposure.setpoint_now)
    mix = Gas(**{FORMULAS[f]: float(v) for f, v in exposure.gas.items() if f != "N2"})
    breathed = mix if np.isnan(setpoint) else Loop(setpoint, mix)
    if str(breathed) in [_name(gas) for gas, _ in gases]:
        return list(gases)
    return [*gases, (breathed, float(np.asarray(exposure._pressure_to_depth(exposure.pressure))))]


def _moments(full: Exposure, bottom: float, moments: Sequence[Any] | None) -> list[float]:
    from gasphys.supply.bank import read

    if moments is None:
        times, found = full.pieces().times, [bottom]
        for k in range(1, len(full.part)):
            if times[k] > bottom and full.gas_name(k) != full.gas_name(k - 1):
                found.append(float(times[k]))
        return found
    given = [read(m, "time") for m in moments]
    if not given:
        raise RangeError("moments is empty: give times since the start in minutes")
    for one in given:
        if not 0.0 < one < float(full.duration):
            raise RangeError(
                f"moment {one:g} min is not between start and surface, 0 to {float(full.duration):.1f} min"
            )
    return given


def _carried(full: Exposure, sources: Sequence[Source]) -> tuple[str, ...]:
    """Return the names of all that is breathed or listed, in order of first use."""
    used = [full.gas_name(k) for k in range(len(full.part)) if full.columns["segment_duration"][k] > 0.0]
    return tuple(dict.fromkeys([*used, *(s.name for s in sources)]))


def _without(
    full: Exposure,
    moment: float,
    lost: str,
    gases: Sequence[tuple[Any, Any]],
    spare: Sequence[tuple[Any, Any]],
    sources: Sequence[Source],
    options: dict[str, Any],
) -> Exposure:
    """Return the exposure that follows when a gas is lost at a moment."""
    times = full.pieces().times
    if lost not in [full.gas_name(k) for k in range(len(full.part)) if times[k + 1] > moment + 1e-9]:
        return full  # nobody would have breathed it any more
    before = _until(full, moment)
    others = [s for s in sources if s.name != lost]
    depth = float(np.asarray(before._pressure_to_depth(before.pressure)))
    if _breathed_last(before) == lost:
        able = [s for s in others if _deepest(s, before) >= depth - 1e-9]
        if not able:
            raise NotReachableError(f"nothing else may be breathed at {depth:.4g} {before.depth_unit}")
        best = able[0]  # the plan itself takes the one with the shallowest permitted depth, at once
        before = before.switch(best.gas) if np.isnan(best.setpoint) else before.loop(best.setpoint, best.gas)
    if depth <= 1e-9:
        return before
    kept = [pair for pair in (*gases, *spare) if _name(pair[0]) != lost]
    return plan(before, kept, **options).exposure


def _name(gas: Any) -> str:
    return str(gas) if isinstance(gas, Loop) else str(Gas.parse(gas))


def _deepest(source: Source, exposure: Exposure) -> float:
    """Deepest depth at which a listed gas may be breathed."""
    if np.isnan(source.po2_limit):
        return source.deepest
    pressure = source.po2_limit / max(source.gas.oxygen, 1e-12)
    return float(np.asarray(exposure._pressure_to_depth(pressure)))


def _breathed_last(exposure: Exposure) -> str:
    return exposure.gas_name(len(exposure.part) - 1)


def _until(exposure: Exposure, moment: float) -> Exposure:
    """Return the exposure up to a time; the last piece ends there."""
    cut = exposure._split([moment])
    times = cut.pieces().times
    n = int(np.searchsorted(times, moment - 1e-9))
    n = max(n, 1)
    columns = {k: v[..., :n] for k, v in cut.columns.items()}
    fractions = {k: v[..., :n] for k, v in cut.fractions.items()}
    return replace(
        cut,
        columns=columns,
        fractions=fractions,
        part=cut.part[:n],
        session=cut.session[:n],
        gas={k: float(v[-1]) for k, v in fractions.items()},
        pressure=float(columns["end_pressure"][-1]),
        setpoint_now=float(columns["setpoint"][-1]),
        workload=(float(columns["o2_uptake_stpd"][-1]), float(columns["ventilation_btps"][-1])),
        part_now=cut.part[n - 1],
    )


def _left(exposure: Exposure, bank: Sequence[Cylinder], who: Demand, names: Sequence[str]) -> Any:
    """Free liters of each gas at the surface; negative for what is missing."""
    account = open_account(exposure, who)
    used = account.used[:, 0, -1]
    found = []
    for name in names:
        gas = Gas.parse(name)
        mine = tuple(c for c in bank if c.gas == gas)
        if gas in account.gases:
            k = account.gases.index(gas)
            book = Book.of(account, k, mine, None)
            amount = sum(book.usable) - used[k]
        else:
            amount = sum(c.amount for c in mine)
        found.append(free_liters_per_mole(gas) * amount)
    for gas in account.gases:
        if str(gas) not in names:
            raise ExposureError(
                f"{gas} is used and no cylinder holds it; the cylinders hold {', '.join(names)}"
            )
    return np.array(found)


def _table(
    left: Any,
    surface: Any,
    reasons: Any,
    lost: Sequence[str],
    when: Sequence[float],
    names: Sequence[str],
    full: Exposure,
    who: Demand,
    bank: Sequence[Cylinder],
    model: Any,
) -> xr.Dataset:
    known = np.where(np.isnan(left), np.inf, left)
    index = np.argmin(known, axis=-1)
    least = np.take_along_axis(known, index[..., None], axis=-1)[..., 0]
    none = np.isinf(least)
    ds = xr.Dataset(
        coords={
            "lost": ("lost", list(lost), {"long_name": "gas that is lost"}),
            "moment": ("moment", np.array(when), attributes("time", long_name="time the loss is noticed")),
            "supply_gas": ("supply_gas", list(names), {"long_name": "gas of a supply"}),
        }
    )
    free = attributes(
        "free_gas_volume", long_name=free_gas_words("gas left at the surface; negative: missing")
    )
    ds["free_gas_left"] = (("lost", "moment", "supply_gas"), left, free)
    both = ("lost", "moment")
    words = free_gas_words("least gas left at the surface; negative: missing")
    ds["least_left"] = (both, np.where(none, np.nan, least), free | {"long_name": words})
    shortest = np.where(none, "", np.array(names, dtype=object)[index]).astype(str)
    ds["least_gas"] = (both, shortest, {"long_name": "gas of which least is left"})
    ds["surface_time"] = (both, surface, attributes("time", long_name="time of reaching the surface"))
    ds["reason"] = (both, reasons.astype(str), {"long_name": "why there is no answer"})
    places = [float(np.asarray(full._pressure_to_depth(_until(full, m).pressure))) for m in when]
    unit = {"m": "depth", "msw": "depth_msw", "fsw": "depth_fsw"}[full.depth_unit]
    ds["moment_depth"] = ("moment", np.round(places, 9), attributes(unit, long_name="depth at the moment"))
    ds.attrs = dataset_attributes(
        "gas left at the surface after the loss of a gas",
        f"supply, ascent by {model.name}, parameters {model.digest}",
        history=full.history,
        references=(*_SOURCES, *([model.source] if model.source else [])),
        comment=f"{_NOT_COUNTED} Model of the ascent: {model.does_not_claim}.",
        demand=demand_words(who, bool((~np.isnan(full.columns["setpoint"])).any())),
        cylinders="; ".join(str(c) for c in bank),
        depth_unit=full.depth_unit,
    )
    return ds
