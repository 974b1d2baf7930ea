"""Oxygen doses along an exposure."""

from __future__ import annotations

import json
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.doses.equations import noaa_cns_ramp, ramp_fraction, uptd_ramp
from gasphys.errors import ExposureError, unknown_name
from gasphys.exposure import Exposure, Pieces
from gasphys.quantities import CAUTION, quantity

__all__ = ["MEASURES", "Measure", "oxygen", "piece_doses"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Measure:
    """One dose measure: its quantity, the equation of a ramp, and its kernel.

    Parameters
    ----------
    quantity : str
        Name in ``quantities.toml``.
    equation : str
        Dotted name of the equation of a ramp.
    kernel : callable
        ``(start_po2, end_po2, duration) -> dose`` on arrays [kPa, kPa, min].
    options : dict
        Keyword arguments of the equation.
    endpoint : str
        What the number stands for.
    population : str
        Whom it was made for.
    provenance : str
        How the numbers are known.
    """

    quantity: str
    equation: str
    kernel: Callable[[Array, Array, Array], Array]
    options: dict[str, Any]
    endpoint: str
    population: str
    provenance: str


def _noaa(total: str) -> Callable[[Array, Array, Array], Array]:
    def kernel(start: Array, end: Array, duration: Array) -> Array:
        return ramp_fraction(start, end, duration, "step", total)

    return kernel


#: Every measure by name.
MEASURES: dict[str, Measure] = {
    "uptd": Measure(
        quantity="uptd",
        equation="doses.uptd_ramp",
        kernel=lambda a, b, t: np.asarray(uptd_ramp.raw(a, b, t, 5.0 / 6.0)),
        options={"exponent": 5.0 / 6.0},
        endpoint="pulmonary oxygen dose; no recovery counted",
        population="people at rest, dry and immersed",
        provenance=uptd_ramp.provenance,
    ),
    "noaa_cns": Measure(
        quantity="noaa_cns_fraction",
        equation="doses.noaa_cns_ramp",
        kernel=_noaa("single"),
        options={"rule": "step", "total": "single"},
        endpoint="share of a permitted time, not a seizure probability",
        population="working divers, one exposure",
        provenance=noaa_cns_ramp.registry["step", "single"].provenance,  # type: ignore[attr-defined]
    ),
    "noaa_cns_day": Measure(
        quantity="noaa_cns_fraction",
        equation="doses.noaa_cns_ramp",
        kernel=_noaa("day"),
        options={"rule": "step", "total": "day"},
        endpoint="share of a permitted time in 24 h, not a seizure probability",
        population="working divers, 24 h",
        provenance=noaa_cns_ramp.registry["step", "day"].provenance,  # type: ignore[attr-defined]
    ),
}


def piece_doses(measure: str, pieces: Pieces) -> Array:
    """Return the dose of each piece.

    Parameters
    ----------
    measure : str
        A name of :data:`MEASURES`.
    pieces : Pieces
        From :meth:`Exposure.pieces`.

    Returns
    -------
    array
        ``(..., segment)``; NaN where the measure is not defined.

    Raises
    ------
    UnknownNameError
        If there is no such measure.

    Examples
    --------
    >>> exposure = Exposure.start("oxygen").stay(60)
    >>> piece_doses("uptd", exposure.pieces())
    array([60.])
    """
    if measure not in MEASURES:
        raise unknown_name("dose measure", measure, MEASURES)
    with np.errstate(all="ignore"):
        dose = MEASURES[measure].kernel(pieces.start_po2, pieces.end_po2, pieces.duration)
    return np.where(pieces.duration > 0.0, dose, 0.0)


def counted(exposure: Exposure, count: str) -> NDArray[np.bool_]:
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
    result: NDArray[np.bool_] = table & pure
    return result


def oxygen(
    exposure: Exposure,
    measures: Sequence[str] = ("uptd", "noaa_cns"),
    count: str = "all",
) -> xr.Dataset:
    """Oxygen doses of an exposure in several measures.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time.
    measures : sequence of str
        Names of :data:`MEASURES`.
    count : {"all", "table", "oxygen"}
        The whole exposure; the table's clock (without the descent); its oxygen periods only.

    Returns
    -------
    Dataset
        ``dose(measure)``, ``status(measure)`` ("computed" or "not applicable") and
        ``reason(measure)``.

    Raises
    ------
    UnknownNameError
        If a measure or count is unknown.
    ExposureError
        If the exposure has no piece.

    Notes
    -----
    Integrals over the linear pieces are exact. A measure that is not defined for the exposure is NaN
    with a reason; the others go on.

    Examples
    --------
    >>> from gasphys.schedules import treatment
    >>> float(oxygen(treatment("usn_6"), ["uptd"], count="oxygen").dose[0].round(2))
    640.79
    """
    if isinstance(measures, str):
        measures = [measures]
    if not exposure.part:
        raise ExposureError("the exposure has no piece yet")
    pieces = exposure.pieces()
    mask = counted(exposure, count)
    doses, states, reasons = [], [], []
    for name in measures:
        each = np.where(mask, piece_doses(name, pieces), 0.0)
        total = each.sum(axis=-1)
        doses.append(np.broadcast_to(total, tuple(len(exposure.coords[d]) for d in exposure.dims)))
        undefined = bool(np.isnan(total).any())
        states.append("not applicable" if undefined else "computed")
        reasons.append(_undefined_reason(name, pieces) if undefined else "")
    from gasphys import __version__

    ds = xr.Dataset(
        {
            "dose": (
                ("measure", *exposure.dims),
                np.array(doses, dtype=float),
                {
                    "units": "1",
                    "long_name": "oxygen dose",
                    "dose_unit": "; ".join(f"{m}: {quantity(MEASURES[m].quantity).dose_unit}" for m in measures),
                },
            ),
            "status": ("measure", states, {"long_name": "whether the measure is defined for this exposure"}),
            "reason": ("measure", reasons, {"long_name": "why it is not"}),
            "endpoint": ("measure", [MEASURES[m].endpoint for m in measures], {"long_name": "what it stands for"}),
            "population": ("measure", [MEASURES[m].population for m in measures], {"long_name": "made for"}),
            "provenance": ("measure", [MEASURES[m].provenance for m in measures], {"long_name": "provenance"}),
        },
        coords={"measure": list(measures), **exposure.coords},
        attrs={
            "Conventions": "CF-1.11",
            "title": "oxygen dose of an exposure",
            "source": f"gasphys {__version__}, oxygen dose, count {count}",
            "history": "; ".join(exposure.history) or "as given",
            "references": "clark_lambertsen_1971; noaa_manual",
            "comment": CAUTION,
            "count": count,
            "equations": json.dumps({m: [MEASURES[m].equation, MEASURES[m].options] for m in measures}),
        },
    )
    return ds


def _undefined_reason(name: str, pieces: Pieces) -> str:
    highest = float(np.nanmax(np.maximum(pieces.start_po2, pieces.end_po2)))
    if name.startswith("noaa"):
        return (
            f"breathing gas PO2 reaches {highest:.1f} kPa ({highest / 101.325:.2f} atm); the NOAA table ends at "
            "162.1 kPa (1.60 atm) and is not extrapolated"
        )
    return "not defined for this exposure"
