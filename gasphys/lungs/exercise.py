"""O2 uptake and ventilation of work in and out of water, as published."""

from __future__ import annotations

import csv
from importlib import resources
from typing import TYPE_CHECKING

import numpy as np

from gasphys.quantities import attributes, dataset_attributes
from gasphys.sources import cite

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["exercise_o2_uptake"]

#: Column to the quantity whose unit and meaning it has; a range stands in its low and high column.
_COLUMNS = {
    "o2_uptake_stpd": "o2_uptake_stpd",
    "o2_uptake_stpd_sd": "o2_uptake_stpd",
    "o2_uptake_stpd_low": "o2_uptake_stpd",
    "o2_uptake_stpd_high": "o2_uptake_stpd",
    "ventilation_low": "ventilation_btps",
    "ventilation_high": "ventilation_btps",
}


def exercise_o2_uptake() -> xr.Dataset:
    """O2 uptake and ventilation of tasks, as published.

    Returns
    -------
    Dataset
        On dimension ``task``: ``o2_uptake_stpd`` [L/min] with ``_sd``, ``_low`` and ``_high`` where
        the source gives them, ``ventilation_low`` and ``ventilation_high`` [L/min], ``persons``,
        ``source``, ``provenance`` and ``note``. NaN: not given.

    Notes
    -----
    The sources disagree: Donald's fin swimmers took up far more than the naval manual's at a similar
    speed. Ventilation is about 22 to 25 times O2 uptake; R is 0.8 at rest and 0.85-0.95 in work.

    Examples
    --------
    >>> float(exercise_o2_uptake().o2_uptake_stpd.sel(task="swim 0.85 kn"))
    1.4
    """
    import xarray as xr

    text = resources.files("gasphys.lungs").joinpath("exercise_o2_uptake.csv").read_text(encoding="utf-8")
    rows = list(csv.DictReader(text.splitlines(), strict=True))

    def column(name: str) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
        return np.array([float(row[name] or "nan") for row in rows])

    keys = [row["source"] for row in rows]
    variables = {name: ("task", column(name), attributes(quantity)) for name, quantity in _COLUMNS.items()}
    return xr.Dataset(
        {
            **variables,
            "persons": ("task", column("persons"), {"units": "1", "long_name": "persons studied"}),
            "source": ("task", [cite(key) for key in keys]),
            "provenance": ("task", [row["provenance"] for row in rows]),
            "note": ("task", [row["note"] for row in rows]),
        },
        coords={"task": [row["task"] for row in rows]},
        attrs=dataset_attributes("O2 uptake of tasks in water and on land", "lungs", references=keys),
    )
