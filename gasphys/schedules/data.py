"""Read the data files beside this one."""

from __future__ import annotations

import csv
import functools
from importlib import resources

__all__ = ["read_rows"]


@functools.cache
def read_rows(name: str) -> tuple[dict[str, str], ...]:
    """Return the rows of a data file.

    Parameters
    ----------
    name : str
        File name.

    Returns
    -------
    tuple of dict
        Rows without comment lines.

    Examples
    --------
    >>> read_rows("stops.csv")[0]["table"]
    'usn_7'
    """
    text = resources.files("gasphys.schedules").joinpath(name).read_text("utf-8")
    return tuple(csv.DictReader(line for line in text.splitlines() if not line.startswith("#")))
