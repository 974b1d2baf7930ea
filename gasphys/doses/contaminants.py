"""Purity of a breathing gas under pressure."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import xarray as xr

from gasphys.constants import ATMOSPHERE
from gasphys.doses.carbon_dioxide import surface_equivalent
from gasphys.doses.published_tables import published
from gasphys.errors import unknown_name
from gasphys.quantities import dataset_attributes

__all__ = ["purity"]

#: Contaminant to the column of the purity table, and what its unit is.
_CONTAMINANTS = {"carbon_monoxide": "co_ppm", "carbon_dioxide": "co2_ppm", "oil": "oil_mg_m3"}


def purity(
    measured: Mapping[str, float],
    *,
    ambient_pressure: float = float(ATMOSPHERE),
    standards: Sequence[str] = (),
) -> xr.Dataset:
    """Compare a gas analysis with published purity limits, under pressure by surface equivalent.

    Parameters
    ----------
    measured : mapping
        Contaminant to what was found in the gas at 1 atm: ``carbon_monoxide`` and
        ``carbon_dioxide`` [ppm], ``oil`` [mg/m3].
    ambient_pressure : float
        Pressure at which the gas is breathed [kPa absolute].
    standards : sequence of str
        Names of the table "gas_purity"; by default those for air.

    Returns
    -------
    Dataset
        On ``standard`` and ``contaminant``: ``surface_equivalent``, ``limit_value``, ``margin``
        (positive inside) and ``status`` ("beyond", "within", "not judged"); ``edition``,
        ``provenance`` and ``source`` on ``standard``. Gases in ppm, oil in mg/m3, at 1 atm.

    Raises
    ------
    UnknownNameError
        If a contaminant or standard is unknown.

    Notes
    -----
    Transcriptions: compare with the standard itself. The surface equivalent is the conservative
    screen, see :func:`surface_equivalent`.

    Examples
    --------
    Carbon monoxide of 3 ppm, breathed at 4 atm:

    >>> found = purity({"carbon_monoxide": 3.0}, ambient_pressure=405.3)
    >>> str(found.status.sel(standard="EN 12021 air", contaminant="carbon_monoxide").values)
    'beyond'
    """
    rows = {str(r["standard"]): r for r in published("gas_purity")}
    chosen = list(standards) or [name for name, r in rows.items() if r["gas"] == "air"]
    for name in chosen:
        if name not in rows:
            raise unknown_name("purity standard", name, rows)
    for name in measured:
        if name not in _CONTAMINANTS:
            raise unknown_name("contaminant", name, _CONTAMINANTS)
    scale = float(surface_equivalent(1.0, ambient_pressure))
    found = np.array([float(v) * scale for v in measured.values()])
    limits = np.array(
        [[np.nan if (x := rows[s][_CONTAMINANTS[c]]) is None else float(x) for c in measured] for s in chosen]
    )
    shown = np.broadcast_to(found, limits.shape).copy()
    beyond = shown > limits * (1.0 + 1e-9)
    status = np.where(np.isnan(limits) | np.isnan(shown), "not judged", np.where(beyond, "beyond", "within"))
    dims = ("standard", "contaminant")
    return xr.Dataset(
        {
            "surface_equivalent": (
                dims,
                shown,
                {"long_name": "surface equivalent, ppm or mg/m3", "units": "1"},
            ),
            "limit_value": (dims, limits, {"long_name": "limit at 1 atm, ppm or mg/m3", "units": "1"}),
            "margin": (
                dims,
                limits - shown,
                {"long_name": "distance to the limit, positive inside", "units": "1"},
            ),
            "status": (dims, status.astype(str), {"long_name": "beyond, within or not judged"}),
            **{
                word: ("standard", [str(rows[s][word]) for s in chosen], {"long_name": word})
                for word in ("edition", "provenance", "source")
            },
            "unit": (
                "contaminant",
                ["mg/m3" if c == "oil" else "ppm" for c in measured],
                {"long_name": "unit"},
            ),
        },
        coords={"standard": chosen, "contaminant": list(measured)},
        attrs=dataset_attributes(
            "purity of a breathing gas against published limits",
            "contaminants",
            references=(str(rows[s]["source"]) for s in chosen),
            ambient_pressure=float(ambient_pressure),
        ),
    )
