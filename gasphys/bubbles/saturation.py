"""Time of travel out of saturation by published bands of rates."""

from __future__ import annotations

import csv
import functools
import io
from importlib import resources
from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import RangeError, ValidityError, unknown_name
from gasphys.policy import weakest
from gasphys.quantities import attributes, dataset_attributes

__all__ = ["saturation_travel"]


@functools.cache
def _bands() -> tuple[dict[str, str], ...]:
    text = resources.files("gasphys.bubbles").joinpath("saturation_rates.csv").read_text(encoding="utf-8")
    return tuple(csv.DictReader(io.StringIO(text), strict=True))


def saturation_travel(depth: float, procedure: str = "usn", *, column: Any = None) -> xr.Dataset:
    """Time a saturation ascent travels by the bands of a procedure.

    Parameters
    ----------
    depth : float
        Storage depth, in the procedure's own unit of pressure: fsw of ``"usn"``, msw of
        ``"accelerated_heliox"``.
    procedure : {"usn", "accelerated_heliox"}
        Name of the procedure.
    column : float, optional
        Of a procedure with several columns the one to enter; default: the shallowest that covers the depth.

    Returns
    -------
    Dataset
        On dimension ``band``, deepest first: ``from_depth``, ``to_depth``, ``rate`` [unit/h], ``travel_time``
        [min], ``gas_condition``; and ``total_travel_time`` [min] and ``elapsed_time`` [min], which counts the
        hours in 24 that the procedure travels.

    Raises
    ------
    UnknownNameError
        If there is no such procedure.
    RangeError
        If the depth is not covered.
    ValidityError
        If a row of the column is not available.

    Notes
    -----
    Arithmetic of published rates: no rest stops, excursions or holds; no excursion tables are at hand.
    Rates are of pressure, not of length: 6 fsw/h are 1.842 msw/h, not 1.83.

    Examples
    --------
    >>> found = saturation_travel(500.0)
    >>> round(float(found.total_travel_time) / 60.0, 3)
    99.167
    """
    names = tuple(dict.fromkeys(row["procedure"] for row in _bands()))
    if procedure not in names:
        raise unknown_name("saturation procedure", str(procedure), names)
    rows = [row for row in _bands() if row["procedure"] == procedure]
    unit = rows[0]["depth_unit"]
    columns = sorted({float(row["column"]) for row in rows if row["column"]})
    if columns:
        fits = [c for c in columns if c >= depth]
        chosen = float(column) if column is not None else (fits[0] if fits else np.nan)
        if chosen not in columns or not depth <= chosen:
            raise RangeError(
                f"depth = {depth:g} {unit}: columns go to {', '.join(f'{c:g}' for c in columns)} {unit}"
            )
        rows = [row for row in rows if float(row["column"]) == chosen]
    deepest = max(float(row["from_depth"]) for row in rows)
    if not 0.0 < depth <= deepest:
        raise RangeError(
            f"depth = {depth:g} {unit} is outside the bands of {procedure}, 0 to {deepest:g} {unit}"
        )
    if min(float(row["to_depth"]) for row in rows) > 0.0:
        raise ValidityError(
            f"{procedure}, column {chosen:g}: its last row is not available; enter another column"
        )
    used = [row for row in rows if float(row["to_depth"]) < depth]
    begin = np.array([min(float(row["from_depth"]), depth) for row in used])
    end = np.array([float(row["to_depth"]) for row in used])
    rate = np.array([float(row["rate"]) for row in used])
    minutes = 60.0 * (begin - end) / rate
    share = float(used[0]["hours_in_24"]) / 24.0
    name = f"depth_{unit}"
    duration = attributes("duration")
    ds = xr.Dataset(
        {
            "from_depth": ("band", begin, attributes(name) | {"long_name": "depth where the band begins"}),
            "to_depth": ("band", end, attributes(name) | {"long_name": "depth where it ends"}),
            "rate": (
                "band",
                rate,
                {"units": f"{attributes(name)['units']}/h", "long_name": "rate of travel"},
            ),
            "travel_time": ("band", minutes, duration | {"long_name": "time of travel in the band"}),
            "gas_condition": (
                "band",
                np.array([row["gas_condition"] for row in used], dtype=str),
                {"long_name": "gas condition that goes with the rate"},
            ),
            "total_travel_time": ((), float(minutes.sum()), duration | {"long_name": "time of travel"}),
            "elapsed_time": (
                (),
                float(minutes.sum() / share),
                duration | {"long_name": "time of travel over the share of the day that is travelled"},
            ),
        },
        coords={"band": np.arange(len(used))},
    )
    ds.attrs = dataset_attributes(
        f"travel out of saturation by the rates of {procedure}",
        "bubbles, saturation rates",
        references=[row["source"] for row in used],
        provenance=weakest([row["provenance"] for row in used]),
        depth_unit=unit,
        not_counted="rest stops, excursions, holds",
    )
    return ds
