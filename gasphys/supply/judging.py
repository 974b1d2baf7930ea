"""The stock against its reserve, in the form of a review."""

from __future__ import annotations

import os
from collections.abc import Iterable, Sequence
from typing import Any

import numpy as np
import xarray as xr

from gasphys.ascent import Plan
from gasphys.errors import unknown_name
from gasphys.exposure import Exposure
from gasphys.gas import Gas
from gasphys.limits import Limit, load
from gasphys.policy import require_provenance
from gasphys.quantities import quantity
from gasphys.supply.account import of_exposure, open_account
from gasphys.supply.bank import Cylinder, Demand, check_cylinders
from gasphys.supply.reserve_rules import Reserve
from gasphys.supply.stock_left import Book, crossing, stock

__all__ = ["stock_review"]

_ROLES = ("diver", "patient", "attendant")
_NUMBERS = ("worst", "limit_value", "margin", "time_of_worst", "first_crossing", "time_beyond")
_TEXTS = ("status", "reason", "quantity", "comparison", "authority", "edition", "for_whom", "conditions")
_MORE = ("provenance", "unit", "published", "title", "source")


def stock_review(
    exposure: Exposure | Plan,
    cylinders: Sequence[Cylinder],
    reserve: Reserve,
    demand: Demand | None = None,
    *,
    role: str = "diver",
    limits: str | os.PathLike[str] | Iterable[Any] = "default",
) -> xr.Dataset:
    """Compare the stock with its reserve, and oxygen cylinders with the published lowest pressure.

    Parameters
    ----------
    exposure : Exposure or Plan
        Pressure and breathing gas against time.
    cylinders : sequence of Cylinder
        What there is.
    reserve : Reserve
        What is kept back: the caller's own rule.
    demand : Demand, optional
        How much is breathed where the exposure does not say it.
    role : {"diver", "patient", "attendant"}
        For whom the gas is.
    limits : str, path or sequence
        As for :func:`gasphys.limits.load`; those of the quantity ``cylinder_pressure`` are used.

    Returns
    -------
    Dataset
        On dimension ``limit`` the columns of :func:`gasphys.review`: a row ``reserve of ...`` for each gas
        [L of free gas], its ``limit_value`` the reserve where the surplus is smallest, and a row for each
        limit of cylinder pressure [kPa].

    Raises
    ------
    ExposureError
        If a gas that is breathed is in no cylinder, or a piece has no demand.
    UnknownNameError
        If the role is unknown.

    Notes
    -----
    Crossings are roots. Within a reserve is not safe: the rule is the caller's, and people breathe harder
    when things go wrong.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=20, minutes=1).stay(30).travel(depth=0, minutes=3)
    >>> tanks = [Cylinder("air", 12.0, "200 bar")]
    >>> found = stock_review(dive, tanks, Reserve(pressure="50 bar"), Demand(surface_rate=20.0))
    >>> row = found.sel(limit="reserve of air")
    >>> str(row.status.values), round(float(row.first_crossing), 1)
    ('beyond', 29.0)
    """
    if role not in _ROLES:
        raise unknown_name("role", role, _ROLES)
    whole = of_exposure(exposure)
    left = stock(whole, cylinders, reserve, demand)
    rows = [_of_reserve(left.sel(supply_gas=gas), str(gas), reserve) for gas in left.supply_gas.values]
    for limit in load(limits):
        if limit.quantity == "cylinder_pressure":
            require_provenance(limit.provenance, f"limit {limit.id}")
            rows.append(_of_limit(whole, cylinders, demand or Demand(), limit, role))
    dims = whole.dims
    shape = tuple(len(whole.coords[d]) for d in dims)
    ds = xr.Dataset(coords={"limit": [row["id"] for row in rows], **whole.coords})
    for name in _NUMBERS:
        values = np.stack([np.broadcast_to(np.asarray(row[name], dtype=float), shape) for row in rows])
        minutes = name in ("time_of_worst", "first_crossing", "time_beyond")
        attrs = {"units": "min" if minutes else "1", "long_name": name.replace("_", " ")}
        ds[name] = (("limit", *dims), values, attrs if minutes else attrs | {"unit_variable": "unit"})
    status = [np.broadcast_to(np.asarray(row["status"], dtype=object), shape) for row in rows]
    words = "beyond, within or not applicable"
    ds["status"] = (("limit", *dims), np.stack(status).astype(str), {"long_name": words})
    for name in (*_TEXTS[1:], *_MORE):
        ds[name] = ("limit", [str(row[name]) for row in rows], {"long_name": name.replace("_", " ")})
    ds.attrs = {**left.attrs, "title": "review of the gas supply", "role": role}
    return ds


def _of_reserve(row: xr.Dataset, gas: str, reserve: Reserve) -> dict[str, Any]:
    first, margin = row.first_below_reserve.values, row.margin_to_reserve.values
    return {
        "id": f"reserve of {gas}",
        "worst": row.left_at_margin.values,
        "limit_value": row.left_at_margin.values - margin,
        "margin": margin,
        "time_of_worst": row.time_of_margin.values,
        "first_crossing": first,
        "time_beyond": row.time_below_reserve.values,
        "status": np.where(np.isnan(first), "within", "beyond"),
        "reason": "",
        "quantity": "free_gas_volume",
        "comparison": ">=",
        "authority": "the caller's own rule",
        "edition": "",
        "for_whom": ", ".join(_ROLES),
        "conditions": str(reserve),
        "provenance": "computed",
        "unit": quantity("free_gas_volume").unit,
        "published": "",
        "title": f"Stock of {gas} above its reserve",
        "source": "",
    }


def _of_limit(
    whole: Exposure, cylinders: Sequence[Cylinder], demand: Demand, limit: Limit, role: str
) -> dict[str, Any]:
    found: dict[str, Any] = dict.fromkeys(_NUMBERS, np.nan)
    found |= {name: getattr(limit, name) for name in _TEXTS[2:] if name != "for_whom"}
    found |= {name: getattr(limit, name) for name in ("id", "provenance", "title", "source")}
    found |= {
        "limit_value": limit.value,
        "for_whom": ", ".join(limit.roles),
        "unit": quantity(limit.quantity).unit,
        "published": f"{limit.published_value:g} {limit.unit}",
        "status": "not applicable",
        "reason": "",
    }
    oxygen = Gas(oxygen=1.0)
    mine = tuple(c for c in check_cylinders(cylinders) if c.gas == oxygen)
    account = open_account(whole, demand)
    if role not in limit.roles:
        return found | {"reason": f"made for {' and '.join(f'{r}s' for r in limit.roles)}"}
    if not mine or oxygen not in account.gases:
        return found | {"reason": "no oxygen cylinder is used"}
    k = account.gases.index(oxygen)
    book = Book.of(account, k, mine, None)
    # Used in order, so the first of them is the first to fall so far.
    kept = sum(book.amounts) - (book.amounts[0] - min(mine[0].content(limit.value), book.amounts[0]))
    at = crossing(account, k, sum(book.amounts), float(kept), 0.0, None)
    lowest = np.min(
        [c.pressure_of(n) for c, n in zip(mine, book.left(account.used[k][:, -1]), strict=True)], axis=0
    )
    shape = tuple(len(whole.coords[d]) for d in whole.dims)
    return found | {
        "worst": lowest.reshape(shape),
        "margin": (lowest - limit.value).reshape(shape),
        "time_of_worst": account.times[:, -1].reshape(shape),
        "first_crossing": at.first.reshape(shape),
        "time_beyond": at.minutes.reshape(shape),
        "status": np.where(np.isnan(at.first), "within", "beyond").reshape(shape),
    }
