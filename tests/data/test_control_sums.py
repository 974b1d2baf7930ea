"""Every number of every shipped table counted and added up: a changed digit is noticed.

The sums were taken when the tables were compared with their sources (``control_sums.csv``). They guard the
copy and prove nothing about truth: that is for the published rows. After a change on purpose:
``python -m tests.data.test_control_sums``.
"""

from __future__ import annotations

import csv
import math
import re
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

ROOT = Path(__file__).parents[2]
PACKAGE = ROOT / "gasphys"
SUMS = Path(__file__).parent / "control_sums.csv"

#: Words and starting values, not numbers of a source; and what is transcribed a second time elsewhere.
OTHERS = {
    "gasphys/quantities.toml",
    "gasphys/sources.toml",
    "gasphys/widgets/start_values.toml",
    "gasphys/limits/default.toml",
}

FILES = sorted(
    path
    for path in [*PACKAGE.rglob("*.csv"), *PACKAGE.rglob("*.toml")]
    if str(path.relative_to(ROOT)) not in OTHERS
)


def _number(cell: Any) -> float | None:
    if isinstance(cell, bool):
        return None
    try:
        value = float(cell)
    except (TypeError, ValueError):
        return None
    return value if math.isfinite(value) else None


def _leaves(value: Any) -> Iterator[float]:
    if isinstance(value, dict):
        for one in value.values():
            yield from _leaves(one)
    elif isinstance(value, list):
        for one in value:
            yield from _leaves(one)
    elif isinstance(value, str):  # "30 fsw": a number with its unit
        match = re.fullmatch(r"(-?[\d.]+(?:e-?\d+)?)(?: [\w/%]+)?", value)
        if match and (number := _number(match[1])) is not None:
            yield number
    elif (number := _number(value)) is not None:
        yield number


def sums(path: Path) -> dict[str, tuple[int, float, float]]:
    """Return count, sum, and sum of each number times its place, a column or table each."""
    text = path.read_text(encoding="utf-8")
    found: dict[str, list[float]] = {}
    if path.suffix == ".csv":
        rows = csv.DictReader(line for line in text.splitlines() if line and not line.startswith("#"))
        for row in rows:
            for column, cell in row.items():
                if (number := _number(cell)) is not None:
                    found.setdefault(column, []).append(number)
    else:
        for key, value in tomllib.loads(text).items():
            if numbers := list(_leaves(value)):
                found[key] = numbers
    return {
        key: (len(n), math.fsum(n), math.fsum(k * x for k, x in enumerate(n, 1))) for key, n in found.items()
    }


def _written() -> dict[str, dict[str, tuple[int, float, float]]]:
    out: dict[str, dict[str, tuple[int, float, float]]] = {}
    with SUMS.open(encoding="utf-8", newline="") as file:
        for row in csv.DictReader(file):
            numbers = (int(row["count"]), float(row["sum"]), float(row["weighted"]))
            out.setdefault(row["file"], {})[row["part"]] = numbers
    return out


def test_no_table_is_forgotten() -> None:
    assert set(_written()) == {str(p.relative_to(ROOT)) for p in FILES if sums(p)}


@pytest.mark.parametrize("path", FILES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_sums(path: Path) -> None:
    written = _written().get(str(path.relative_to(ROOT)), {})
    ours = sums(path)
    assert set(ours) == set(written)
    for part, (count, *totals) in ours.items():
        assert count == written[part][0], part
        assert totals == pytest.approx(written[part][1:], rel=1e-12, abs=1e-12), part


def write() -> None:
    """Write the sums of the tables as they are."""
    with SUMS.open("w", encoding="utf-8", newline="") as file:
        out = csv.writer(file, lineterminator="\n")
        out.writerow(("file", "part", "count", "sum", "weighted"))
        for path in FILES:
            for part, (count, total, weighted) in sums(path).items():
                out.writerow((str(path.relative_to(ROOT)), part, count, repr(total), repr(weighted)))


if __name__ == "__main__":
    write()
