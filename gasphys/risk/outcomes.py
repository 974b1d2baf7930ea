"""Outcomes of exposures: who was well until when, who was not, and a file of them."""

from __future__ import annotations

import csv
import io
import os
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

from gasphys.errors import GasphysError, InputFileError, RangeError, unknown_name
from gasphys.exposure import Exposure
from gasphys.schedules import treatment
from gasphys.toml_files import read_text

__all__ = ["Outcome", "read_outcomes"]

#: What may have happened; "event" where severity is not told apart.
OUTCOMES = ("none", "marginal", "mild", "serious", "event")

_COLUMNS = ("exposure", "outcome", "last_well_min", "first_symptom_min", "weight", "count")


@dataclass(frozen=True)
class Outcome:
    """What came of one exposure, or of several alike.

    Parameters
    ----------
    exposure : Exposure
        Without scenarios.
    outcome : str
        "none", "marginal", "mild", "serious" or "event".
    last_well, first_symptom : float, optional
        When the person was last known well and first surely ill, since the start of the exposure [min].
        Without them the time of onset is not used.
    weight : float, optional
        Share of an event it counts as; by default 0 for none, 1 for an event, and the fit's own for marginal.
    count : float, default 1
        How many alike [1].
    name : str
        What it is called.

    Raises
    ------
    RangeError
        If the times are not in order, or a weight or count is not possible.
    UnknownNameError
        If the outcome is none of the five.

    Examples
    --------
    >>> Outcome(Exposure.start("air").stay(5), "mild", 60.0, 120.0).first_symptom
    120.0
    """

    exposure: Exposure
    outcome: str
    last_well: float | None = None
    first_symptom: float | None = None
    weight: float | None = None
    count: float = 1.0
    name: str = ""

    def __post_init__(self) -> None:
        if self.outcome not in OUTCOMES:
            raise unknown_name("outcome", self.outcome, OUTCOMES)
        low, high = self.last_well, self.first_symptom
        if (low is None) != (high is None):
            raise RangeError("last_well and first_symptom go together; leave both out if one is not known")
        if low is not None and high is not None:
            if not 0.0 <= low < high:
                raise RangeError(
                    f"last_well {low:g} min must be before first_symptom {high:g} min, both from 0"
                )
            if self.outcome == "none":
                raise RangeError("there is no time of onset where nothing happened")
        if self.weight is not None and not 0.0 <= self.weight <= 1.0:
            raise RangeError(f"weight = {self.weight:g} is not between 0 and 1")
        if not 0.0 < self.count < 1e9:
            raise RangeError(f"count = {self.count:g} is not a number of exposures")

    def share(self, marginal_weight: float) -> float:
        """Return the share of an event it counts as.

        Parameters
        ----------
        marginal_weight : float
            What a marginal event counts as [1].

        Returns
        -------
        float
            Between 0 and 1.

        Examples
        --------
        >>> Outcome(Exposure.start("air").stay(5), "marginal").share(0.1)
        0.1
        """
        if self.weight is not None:
            return self.weight
        return {"none": 0.0, "marginal": marginal_weight}.get(self.outcome, 1.0)


def read_outcomes(path: str | os.PathLike[str]) -> tuple[Outcome, ...]:
    """Read a file of outcomes.

    Parameters
    ----------
    path : path
        CSV with the columns ``exposure`` (a recorder's CSV beside this file, or a name that
        :func:`gasphys.schedules.treatment` knows) and ``outcome`` (none, marginal, mild, serious or event);
        optional ``last_well_min``, ``first_symptom_min`` (since the start), ``weight`` and ``count``. Lines
        that begin with # are notes.

    Returns
    -------
    tuple of Outcome
        In the file's order.

    Raises
    ------
    InputFileError
        With file, line, column and remedy.

    Examples
    --------
    >>> import tempfile
    >>> file = Path(tempfile.mkdtemp()) / "outcomes.csv"
    >>> _ = file.write_text("exposure,outcome,count\\nusn_9,none,12\\n")
    >>> read_outcomes(file)[0].count
    12.0
    """
    text, name = read_text(path), os.fspath(path)
    lines = text.splitlines()
    numbers = [n for n, line in enumerate(lines, 1) if line.strip() and not line.lstrip().startswith("#")]
    if not numbers:
        raise InputFileError("the file is empty", path=name, remedy="begin with exposure,outcome")
    header = [cell for cell, _ in _cells(lines[numbers[0] - 1])]
    for cell, column in _cells(lines[numbers[0] - 1]):
        if cell not in _COLUMNS:
            raise InputFileError(
                str(unknown_name("column", cell, _COLUMNS)),
                path=name,
                line=numbers[0],
                column=column,
                remedy="correct the header",
            )
    for needed in ("exposure", "outcome"):
        if header.count(needed) != 1:
            raise InputFileError(
                f"column {needed} stands {header.count(needed)} times",
                path=name,
                line=numbers[0],
                remedy=f"keep one column {needed}",
            )
    read = _exposures(Path(path).parent)
    found = [_outcome(lines[n - 1], n, header, name, read) for n in numbers[1:]]
    if not found:
        raise InputFileError(
            "no outcome follows the header", path=name, line=numbers[0], remedy="add a line an exposure"
        )
    return tuple(found)


def _cells(line: str) -> Iterator[tuple[str, int]]:
    """Yield each cell of a CSV line and the column where it starts."""
    begin = 1
    for cell in next(csv.reader(io.StringIO(line))):
        yield cell.strip(), begin
        begin += len(cell) + 1


def _exposures(folder: Path) -> Callable[[str], Exposure]:
    known: dict[str, Exposure] = {}

    def read(name: str) -> Exposure:
        if name not in known:
            is_file = name.lower().endswith(".csv")
            known[name] = Exposure.from_csv(folder / name) if is_file else treatment(name)
        return known[name]

    return read


def _outcome(
    line: str, number: int, header: Sequence[str], path: str, read: Callable[[str], Exposure]
) -> Outcome:
    cells = list(_cells(line))

    def refuse(message: str, remedy: str, name: str = "") -> InputFileError:
        column = cells[header.index(name)][1] if name in header and len(cells) == len(header) else None
        return InputFileError(message, path=path, line=number, column=column, remedy=remedy)

    if len(cells) != len(header):
        raise refuse(f"{len(cells)} cells, the header has {len(header)}", "fill or remove cells")
    row = {name: cell for name, (cell, _) in zip(header, cells, strict=True)}
    values: dict[str, float] = {}
    for name in _COLUMNS[2:]:
        if row.get(name, "") != "":
            try:
                values[name] = float(row[name])
            except ValueError:
                raise refuse(f"{name} {row[name]!r} is not a number", "write a number", name) from None
    try:
        exposure = read(row["exposure"])
    except InputFileError:
        raise  # it tells the log's own line
    except GasphysError as error:
        raise refuse(str(error), "name a CSV file or a schedule", "exposure") from None
    try:
        return Outcome(
            exposure,
            row["outcome"],
            values.get("last_well_min"),
            values.get("first_symptom_min"),
            values.get("weight"),
            values.get("count", 1.0),
            row["exposure"],
        )
    except GasphysError as error:
        text = str(error)
        named = next((c for c in _COLUMNS[1:] if c.removesuffix("_min") in text.split(" ")[:3]), "outcome")
        raise refuse(text, "correct the line", named) from None
