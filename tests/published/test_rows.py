"""Every printed number is reproduced to its printed digits, every known misprint is not."""

from __future__ import annotations

import pytest

import gasphys as gp

from . import table

ROWS = table.rows()

#: Equations without any published number, and why. Empty is what it should be.
WITHOUT_ROW: dict[str, str] = {}


@pytest.mark.parametrize("row", ROWS, ids=[f"{r.file.removesuffix('.csv')}:{r.id}" for r in ROWS])
def test_row(row: table.Row) -> None:
    value, printed = table.ours(row), float(row.expected)
    deviation = abs(value - printed)
    # The tolerance is a decimal; a value exactly half a unit away must not fail by a last bit.
    agrees = deviation <= row.allowed * (1.0 + 1e-9)
    message = f"{row.equation}({row.inputs}) = {value:.10g} {row.unit}, printed {row.expected}"
    assert agrees is not row.misprint, message


@pytest.mark.parametrize("row", ROWS, ids=[f"{r.file.removesuffix('.csv')}:{r.id}" for r in ROWS])
def test_row_says_where_it_comes_from(row: table.Row) -> None:
    assert row.provenance in table.WORDS
    assert row.source or row.provenance == "common_practice"
    assert row.id
    assert row.allowed >= 0.0


def test_ids_are_unique_within_a_file() -> None:
    keys = [(r.file, r.id) for r in ROWS]
    assert len(keys) == len(set(keys))


def test_every_equation_has_a_published_row() -> None:
    missing = set(gp.equations()) - table.covered() - set(WITHOUT_ROW)
    assert not missing, f"no published row for {sorted(missing)}; tests/published/README.md tells how"


def test_exceptions_are_still_exceptions() -> None:
    assert not set(WITHOUT_ROW) & table.covered()
    assert set(WITHOUT_ROW) <= set(gp.equations())


def test_the_table_for_the_documentation_holds_every_row() -> None:
    found = table.table()
    assert len(found) == len(ROWS)
    assert all(line["agrees"] is (line["kind"] == "value") for line in found)


def test_alveolar_pco2_does_not_depend_on_depth() -> None:
    """Common practice: alveolar PCO2 stays 40 mmHg whatever the depth."""
    f = gp.lungs.alveolar_pco2
    assert not [a.name for a in f.arguments if a.quantity.is_pressure or a.quantity.is_depth]
    assert f("200 mL/min", "4.315 L/min") == pytest.approx(gp.convert(40.0, "mmHg", "kPa"), rel=5e-4)
