"""Measured pressure-volume loops of breathing apparatus: read, turned into work, set against limits."""

from __future__ import annotations

import csv
import os
from importlib import resources
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.breathing.mechanics import external_work_limit
from gasphys.errors import InputFileError, RangeError, unknown_name
from gasphys.policy import validity
from gasphys.quantities import attributes, dataset_attributes, quantity
from gasphys.sources import cite
from gasphys.units import convert

__all__ = ["apparatus_limits", "compare_apparatus", "external_work", "read_pressure_volume"]

Array = NDArray[np.float64]

#: Header to the quantity it holds and the unit it is in.
_COLUMNS = {
    "volume_L": ("lung_volume_change", "L"),
    "volume_mL": ("lung_volume_change", "mL"),
    "pressure_kPa": ("mouth_pressure", "kPa"),
    "pressure_Pa": ("mouth_pressure", "Pa"),
    "pressure_mbar": ("mouth_pressure", "mbar"),
    "pressure_cmH2O": ("mouth_pressure", "cmH2O"),
    "time_s": ("time", "s"),
    "breath": ("", ""),
}

#: Fewest samples of a breath from which an area is taken.
_FEWEST = 8
#: Largest gap between the two ends of a breath [share of tidal volume].
_OPEN = 0.05

_EXAMPLE = "begin with a line such as volume_L,pressure_kPa"


def read_pressure_volume(path: str | os.PathLike[str] | Any) -> xr.Dataset:
    """Read pressure-volume loops measured on a breathing machine.

    Parameters
    ----------
    path : path or text file
        CSV with the columns ``volume_L`` or ``volume_mL`` (rising in inhalation), one of ``pressure_kPa``,
        ``pressure_Pa``, ``pressure_mbar``, ``pressure_cmH2O`` (at the mouth against the reference of the rig,
        negative in inhalation), and, if there is more than one breath, ``breath``, a number; ``time_s`` is
        kept. Lines that begin with ``#`` are comments.

    Returns
    -------
    Dataset
        On ``sample``: ``lung_volume_change`` [L], ``mouth_pressure`` [kPa], ``breath``, ``time`` where given.

    Raises
    ------
    InputFileError
        With file, line, column and remedy, for anything that cannot be read as meant.

    Examples
    --------
    >>> import io, math
    >>> turn = [2 * math.pi * k / 40 for k in range(40)]
    >>> rows = [f"{1.25 - 1.25 * math.cos(a):.4f},{-0.8 * math.sin(a):.4f}" for a in turn]
    >>> ds = read_pressure_volume(io.StringIO("volume_L,pressure_kPa\\n" + "\\n".join(rows)))
    >>> ds.sizes["sample"]
    40
    """
    name, lines = _lines(path)
    rows = csv.reader([text for _, text in lines], strict=True, skipinitialspace=True)
    numbers = [number for number, _ in lines]

    def wrong(
        message: str, remedy: str, line: int | None = None, column: int | None = None
    ) -> InputFileError:
        return InputFileError(message, path=name, line=line, column=column, remedy=remedy)

    if not lines:
        raise wrong("the file holds no data", _EXAMPLE)
    try:
        table = [[cell.strip() for cell in row] for row in rows]
    except csv.Error as error:
        raise wrong(
            str(error), "close the quotation mark", numbers[min(rows.line_num, len(numbers)) - 1]
        ) from None
    head = table[0]
    for k, cell in enumerate(head):
        if cell not in _COLUMNS:
            text = str(unknown_name("column", cell, _COLUMNS))
            raise wrong(text, "name the column, its unit in the name", numbers[0], k + 1)
        if cell in head[:k]:
            raise wrong(f"column {cell} is given twice", "keep one of them", numbers[0], k + 1)
    for kind in ("volume", "pressure"):
        found = [cell for cell in head if cell.startswith(f"{kind}_")]
        if len(found) != 1:
            text = f"{kind} is given in {len(found)} columns" if found else f"there is no {kind} column"
            raise wrong(text, f"give {kind} in one column; {_EXAMPLE}", numbers[0])
    values: dict[str, list[float]] = {cell: [] for cell in head}
    for line, row in zip(numbers[1:], table[1:], strict=True):
        if len(row) != len(head):
            raise wrong(
                f"{len(row)} cells where the header has {len(head)}",
                "give each row as many cells as the header",
                line,
                min(len(row), len(head)) + 1,
            )
        for k, (cell, text) in enumerate(zip(head, row, strict=True)):
            try:
                value = float(text)
            except ValueError:
                value = np.nan
            if not np.isfinite(value):
                raise wrong(f"{text!r} is not a number", f"write {cell} as a number", line, k + 1)
            kept, unit = _COLUMNS[cell]
            if kept in ("lung_volume_change", "mouth_pressure"):
                value = float(convert(value, unit, quantity(kept).unit))
                low, high = quantity(kept).possible
                if not low <= value <= high:
                    raise wrong(
                        str(quantity(kept).range_error(value)), "check the unit of the column", line, k + 1
                    )
            if cell == "breath" and value != int(value):
                raise wrong(f"breath {text} is not a whole number", "number the breaths 1, 2, 3", line, k + 1)
            values[cell].append(value)
    ds = xr.Dataset()
    for cell, column in values.items():
        kept, unit = _COLUMNS[cell]
        if cell == "time_s":
            ds["time"] = ("sample", np.array(column) / 60.0, attributes("time"))
        elif kept:
            ds[kept] = ("sample", np.array(column), attributes(kept))
    breath = np.array(values.get("breath", [1.0] * len(table[1:])), dtype=int)
    ds["breath"] = ("sample", breath, {"long_name": "number of the breath"})
    _check_breaths(ds, name, numbers[1:], wrong)
    ds.attrs = dataset_attributes(
        "pressure-volume loops of a breathing machine",
        "breathing, measured loops",
        history=(f"read from {os.path.basename(name)}",),
    )
    return ds


def _lines(path: Any) -> tuple[str, list[tuple[int, str]]]:
    if hasattr(path, "read"):
        name, text = str(getattr(path, "name", "text")), path.read()
    else:
        name = os.fspath(path)
        try:
            text = Path(path).read_text(encoding="utf-8-sig")
        except OSError as error:
            raise InputFileError(
                f"cannot be read: {error.strerror}", path=name, remedy="check name and permission"
            ) from None
        except UnicodeDecodeError:
            raise InputFileError("is not UTF-8 text", path=name, remedy="save it as CSV in UTF-8") from None
    lines = [(k, line) for k, line in enumerate(text.splitlines(), start=1)]
    return name, [(k, line) for k, line in lines if line.strip() and not line.lstrip().startswith("#")]


def _check_breaths(ds: xr.Dataset, name: str, numbers: list[int], wrong: Any) -> None:
    breath, volume = ds["breath"].values, ds["lung_volume_change"].values
    if not len(breath):
        raise wrong("the file holds no samples", _EXAMPLE)
    seen: list[int] = []
    for k, one in enumerate(breath):
        if seen and one == seen[-1]:
            continue
        if one in seen:
            raise wrong(
                f"breath {one} comes in two parts", "keep the samples of a breath together", numbers[k]
            )
        seen.append(int(one))
    for one in seen:
        places = np.flatnonzero(breath == one)
        last = numbers[int(places[-1])]
        if len(places) < _FEWEST:
            raise wrong(
                f"breath {one} has {len(places)} samples; its area needs {_FEWEST} at least",
                "record faster, or leave the breath out",
                last,
            )
        moved = float(np.ptp(volume[places]))
        if not moved > 0.0:
            raise wrong(f"breath {one} moves no volume", "check the volume column", last)
        # The step that closes the loop may be as long as the longest step inside it, or a small gap.
        inside = float(np.abs(np.diff(volume[places])).max())
        gap = float(abs(volume[places[-1]] - volume[places[0]]))
        if gap > max(_OPEN * moved, inside * (1.0 + 1e-9)):
            raise wrong(
                f"breath {one} does not close: it ends {gap:.3g} L from where it began",
                "cut the record into whole breaths with a column breath",
                last,
            )


def external_work(ds: xr.Dataset) -> xr.Dataset:
    """Work for a liter, pressures and elastance of measured pressure-volume loops.

    Parameters
    ----------
    ds : Dataset
        From :func:`read_pressure_volume`, or with ``lung_volume_change`` [L], ``mouth_pressure`` [kPa] and
        ``breath`` along ``sample``.

    Returns
    -------
    Dataset
        On ``breath``: ``external_work``, ``tidal_volume``, ``lowest_mouth_pressure``,
        ``highest_mouth_pressure``, ``positive_inhalation_work``, ``elastance``.

    Raises
    ------
    RangeError
        If a loop runs backward, so that the apparatus would do work on the diver.

    Notes
    -----
    W/VT = area of the loop over tidal volume, both phases; kPa L is J. Between samples pressure is linear in
    volume. Elastance is the difference of pressure between the two ends of volume, where nothing flows, over
    tidal volume. A breathing machine with a sinusoid of pressure and volume in quadrature gives an ellipse:
    the area is pi/4 of the box around it.

    Examples
    --------
    >>> turn = np.linspace(0.0, 2.0 * np.pi, 721)
    >>> ds = xr.Dataset({
    ...     "lung_volume_change": ("sample", 1.25 - 1.25 * np.cos(turn)),
    ...     "mouth_pressure": ("sample", -0.8 * np.sin(turn)),
    ...     "breath": ("sample", np.ones(721, dtype=int)),
    ... })
    >>> external_work(ds).external_work.values.round(3)
    array([1.257])
    """
    breaths = np.unique(ds["breath"].values)
    rows = [_one_breath(ds.isel(sample=np.flatnonzero(ds["breath"].values == b)), int(b)) for b in breaths]
    out = xr.Dataset(coords={"breath": breaths})
    for name in rows[0]:
        out[name] = ("breath", np.array([row[name] for row in rows]), attributes(name))
    out["elastance"].attrs["long_name"] = "elastance of the apparatus, from the ends of volume"
    out.attrs = dataset_attributes(
        "external work of breathing of an apparatus",
        "breathing, measured loops",
        history=str(ds.attrs.get("history", "as given")).split("\n"),
        comment="External work: of the apparatus, not of the lungs.",
    )
    return out


def _one_breath(ds: xr.Dataset, breath: int) -> dict[str, float]:
    volume, pressure = ds["lung_volume_change"].values, ds["mouth_pressure"].values
    # Closed by a last straight step.
    v, p = np.append(volume, volume[0]), np.append(pressure, pressure[0])
    step, mean = np.diff(v), (p[1:] + p[:-1]) / 2.0
    tidal = float(np.ptp(volume))
    work = -float((mean * step).sum())
    if not work >= 0.0:
        raise RangeError(
            f"breath {breath}: the loop runs backward (work {work / tidal:.3g} J/L): volume must rise in "
            "inhalation and mouth pressure must be negative then; turn the sign of one of them"
        )
    top, bottom = int(np.argmax(volume)), int(np.argmin(volume))
    blown = np.where(step > 0.0, _positive_mean(p[:-1], p[1:]) * step, 0.0)
    return {
        "external_work": work / tidal,
        "tidal_volume": tidal,
        "lowest_mouth_pressure": float(pressure.min()),
        "highest_mouth_pressure": float(pressure.max()),
        "positive_inhalation_work": float(blown.sum()) / tidal,
        "elastance": abs(float(pressure[top] - pressure[bottom])) / tidal,
    }


def _positive_mean(start: Array, end: Array) -> Array:
    """Mean of the positive part of a line from start to end."""
    low, high = np.minimum(start, end), np.maximum(start, end)
    span = np.where(high > low, high - low, 1.0)
    partly = np.maximum(high, 0.0) ** 2 / (2.0 * span)
    return np.asarray(np.where(low >= 0.0, (start + end) / 2.0, np.where(high > 0.0, partly, 0.0)))


def apparatus_limits() -> xr.Dataset:
    """Published limits of breathing apparatus, as data.

    Returns
    -------
    Dataset
        On ``limit``: ``quantity``, ``comparison``, ``limit_value`` in the quantity's unit (NaN where
        ``model`` names the equation of :func:`external_work_limit`), ``published``, conditions it was made
        for, ``authority``, ``edition``, ``for_whom``, ``provenance``, ``source``.

    Notes
    -----
    All of external work. The work equation of EN 14143 is not known to us and left out; its scope is oxygen
    to 6 m, oxygen and nitrogen to 40 m, helium mixtures to 100 m, water of 4 to 34 degC. EN 250 counts water
    below 10 degC as cold. Scrubbers were tested with a CO2 flow of 4 % of minute ventilation.

    Examples
    --------
    >>> limits = apparatus_limits()
    >>> round(float(limits.limit_value.sel(limit="nedu_goal_open_circuit")), 2)
    1.37
    """
    text = resources.files("gasphys.breathing").joinpath("apparatus_limits.csv").read_text(encoding="utf-8")
    rows = list(csv.DictReader(text.splitlines(), strict=True))
    value = [
        float(quantity(r["quantity"]).from_unit(float(r["value"]), r["unit"])) if r["value"] else np.nan
        for r in rows
    ]
    ds = xr.Dataset(coords={"limit": [r["id"] for r in rows]})
    ds["limit_value"] = (
        "limit",
        np.array(value),
        {"long_name": "the limit, in the unit of the variable unit", "units": "1", "unit_variable": "unit"},
    )
    for name in ("ventilation_low", "ventilation_high", "pressure_low", "pressure_high"):
        unit = "L/min" if name.startswith("vent") else "kPa"
        ends = np.array([float(r[name] or "nan") for r in rows])
        meaning = f"{name.replace('_', ', ')} end of what it was made for; missing: any"
        ds[name] = ("limit", ends, {"long_name": meaning, "units": unit})
    for name in ("quantity", "comparison", "model", "authority", "edition", "for_whom", "conditions"):
        ds[name] = ("limit", [r[name] for r in rows], {"long_name": name.replace("_", " ")})
    ds["provenance"] = ("limit", [r["provenance"] for r in rows], {"long_name": "how the number is known"})
    ds["unit"] = ("limit", [quantity(r["quantity"]).unit for r in rows], {"long_name": "unit of the values"})
    ds["published"] = (
        "limit",
        [f"{r['value']} {r['unit']}".strip() for r in rows],
        {"long_name": "as published"},
    )
    ds["source"] = ("limit", [cite(r["source"]) for r in rows], {"long_name": "reference"})
    ds.attrs = dataset_attributes(
        "published limits of breathing apparatus", "breathing", references=(r["source"] for r in rows)
    )
    return ds


def compare_apparatus(
    measured: xr.Dataset,
    *,
    depth_msw: float,
    ventilation_btps: float,
    surface_pressure: float = 101.325,
    static_lung_load: float | None = None,
    posture: str = "vertical",
) -> xr.Dataset:
    """Set measured work, pressures and elastance of an apparatus against published limits.

    Parameters
    ----------
    measured : Dataset
        From :func:`external_work`; the mean over its breaths is compared, of pressures the extreme.
    depth_msw : float
        Depth the machine stood at [msw].
    ventilation_btps : float
        Ventilation of the machine [L/min].
    surface_pressure : float
        Pressure at the surface [kPa absolute].
    static_lung_load : float, optional
        Measured, relative to the suprasternal notch [kPa].
    posture : {"vertical", "horizontal"}
        Of the static lung load.

    Returns
    -------
    Dataset
        :func:`apparatus_limits` with ``value``, ``limit_value`` filled in, ``margin`` (positive inside),
        ``status`` ("beyond", "within", "not applicable", "not judged") and ``reason``.

    Raises
    ------
    UnknownNameError
        If the posture is unknown.

    Notes
    -----
    Within a limit does not mean that an apparatus can be used without harm. A limit made for one condition is
    "not applicable" to another.

    Examples
    --------
    >>> measured = xr.Dataset({"external_work": ("breath", [2.1])}, coords={"breath": [1]})
    >>> found = compare_apparatus(measured, depth_msw=30.0, ventilation_btps=62.5)
    >>> str(found.status.sel(limit="warkander_2007_work").values)
    'beyond'
    """
    if posture not in ("vertical", "horizontal"):
        raise unknown_name("posture", posture, ("vertical", "horizontal"))
    for name, number in (("depth_msw", depth_msw), ("ventilation_btps", ventilation_btps)):
        low, high = quantity(name).possible
        if not low <= number <= high:
            raise quantity(name).range_error(float(number))
    ds = apparatus_limits()
    pressure = surface_pressure + float(convert(depth_msw, "msw", "kPa"))
    columns: dict[str, list[Any]] = {n: [] for n in ("value", "limit_value", "margin", "status", "reason")}
    for name in ds["limit"].values:
        row = ds.sel(limit=name)
        what = str(row["quantity"].values)
        value = _measured(measured, what, static_lung_load)
        limit, reason = float(row["limit_value"]), ""
        outside = _outside(row, pressure, ventilation_btps)
        if what == "static_lung_load" and posture not in str(row["conditions"].values):
            outside = f"made for another posture than {posture}"
        if str(row["model"].values):
            limit, outside = _limit(str(row["model"].values), depth_msw, ventilation_btps)
        sign = 1.0 if str(row["comparison"].values) == "<=" else -1.0
        margin = sign * (limit - value)
        if np.isnan(value):
            state, reason = "not judged", f"{what} was not measured"
        elif outside:
            state, reason, margin = "not applicable", outside, np.nan
        else:
            state = "within" if margin >= 0.0 else "beyond"
        for column, entry in zip(columns.values(), (value, limit, margin, state, reason), strict=True):
            column.append(entry)
    meanings = {
        "value": "measured, in the unit of the variable unit",
        "limit_value": "the limit, in the unit of the variable unit",
        "margin": "distance to the limit, positive inside, in the unit of the variable unit",
        "status": "beyond, within, not applicable or not judged",
        "reason": "why it is not applicable or not judged",
    }
    for name, column in columns.items():
        more = {} if name in ("status", "reason") else {"units": "1", "unit_variable": "unit"}
        ds[name] = ("limit", column, {"long_name": meanings[name], **more})
    ds.attrs["title"] = "breathing apparatus against published limits"
    ds.attrs |= {"depth_msw": depth_msw, "ventilation_btps": ventilation_btps}
    return ds


def _measured(measured: xr.Dataset, what: str, load: float | None) -> float:
    if what == "static_lung_load":
        return np.nan if load is None else float(load)
    if what not in measured:
        return np.nan
    column = measured[what]
    if what == "lowest_mouth_pressure":
        return float(column.min())
    return float(column.max() if what == "highest_mouth_pressure" else column.mean())


def _outside(row: xr.Dataset, pressure: float, ventilation: float) -> str:
    for name, value, unit in (("ventilation", ventilation, "L/min"), ("pressure", pressure, "kPa")):
        low, high = float(row[f"{name}_low"]), float(row[f"{name}_high"])
        if value < low or value > high:
            return f"made for {name} {low:g} to {high:g} {unit}, measured at {value:g}"
    return ""


def _limit(model: str, depth: float, ventilation: float) -> tuple[float, str]:
    f = external_work_limit.pick(model=model)  # type: ignore[attr-defined]
    (argument,) = f.arguments
    value = {"depth_msw": depth, "ventilation_btps": ventilation}[argument.name]
    low, high = argument.possible
    if not low <= value <= high:
        return np.nan, str(argument.range_error(value))
    with validity("ignore"):
        limit = float(f(value))
    if not argument.low <= value <= argument.high:
        return (
            limit,
            f"{argument.name} {value:g} is above {argument.high:g}: {argument.valid[2]}",
        )
    return limit, ""
