"""Printed numbers outside the range their equation is valid for: reproduced, and flagged."""

from __future__ import annotations

from pathlib import Path

import pytest

import gasphys as gp
from tests.published import table

ROWS = list(table._read(Path(__file__).parent / "outside_validity.csv"))


@pytest.mark.parametrize("row", ROWS, ids=[r.id for r in ROWS])
def test_row_is_reproduced_and_flagged(row: table.Row) -> None:
    f, inputs = table.function(row), table.arguments(row.inputs)
    with gp.validity("ignore"):
        value = f(**inputs)
    value = gp.convert(value, table.picked(f, inputs).result.unit, row.unit)
    assert value == pytest.approx(float(row.expected), abs=row.allowed * (1.0 + 1e-9), rel=0.0)
    with gp.validity("raise"), pytest.raises(gp.errors.ValidityError):
        f(**inputs)
