"""Grades and rates as published, and what must not be done with them."""

from __future__ import annotations

import csv
from importlib import resources

import pytest

import gasphys as gp
from gasphys import bubbles
from gasphys.errors import RangeError, UnknownNameError, ValidityError
from gasphys.policy import PROVENANCE
from gasphys.sources import sources


def rows(name: str) -> list[dict[str, str]]:
    """Return the rows of a data file."""
    text = resources.files("gasphys.bubbles").joinpath(name).read_text(encoding="utf-8")
    return list(csv.DictReader(text.splitlines(), strict=True))


@pytest.mark.parametrize(
    ("depth", "procedure", "column", "hours"),
    [
        (500.0, "usn", None, 99.167),
        (300.0, "usn", None, 65.833),
        (100.0, "usn", None, 29.167),
        (100.0, "accelerated_heliox", 130.0, 86.667),
        (60.0, "accelerated_heliox", 90.0, 54.167),
    ],
)
def test_travel_times(depth: float, procedure: str, column: float | None, hours: float) -> None:
    """Computed from the published bands, to their printed digits."""
    ds = bubbles.saturation_travel(depth, procedure, column=column)
    assert float(ds.total_travel_time) / 60.0 == pytest.approx(hours, abs=5e-4)
    assert float(ds.elapsed_time) == pytest.approx(
        float(ds.total_travel_time) * (1.5 if procedure == "usn" else 1.0), rel=1e-12
    )
    assert float(ds.travel_time.sum()) == pytest.approx(float(ds.total_travel_time), rel=1e-12)


def test_rates_are_of_pressure() -> None:
    """6, 5, 4, 3 fsw/h are 1.842, 1.535, 1.228, 0.921 msw/h."""
    rates = bubbles.saturation_travel(1600.0).rate.values
    found = [round(gp.convert(r, "fsw", "msw"), 3) for r in rates]
    assert found == [1.842, 1.535, 1.228, 0.921]


def test_the_column_is_the_shallowest_that_covers_the_depth() -> None:
    by_default = bubbles.saturation_travel(80.0, "accelerated_heliox")
    assert by_default.rate.values.tolist() == [1.6, 1.2, 0.6]
    with pytest.raises(ValidityError, match="last row is not available"):
        bubbles.saturation_travel(60.0, "accelerated_heliox")
    with pytest.raises(RangeError, match="columns go to"):
        bubbles.saturation_travel(140.0, "accelerated_heliox")
    with pytest.raises(RangeError, match="outside the bands"):
        bubbles.saturation_travel(2000.0)
    with pytest.raises(RangeError, match="outside the bands"):
        bubbles.saturation_travel(float("nan"))
    with pytest.raises(UnknownNameError, match="accelerated_heliox, usn"):
        bubbles.saturation_travel(100.0, "norsok")


def test_levels_are_twelve_and_ordered() -> None:
    levels = bubbles.KISMAN_MASUREL
    assert len(levels) == 12
    for row in rows("kisman_masurel_codes.csv"):
        assert levels[int(row["ordinal_0_to_11"])] == row["grade"]
        assert row["code"] == row["frequency"] + row["percent_or_duration"] + row["amplitude"]
        assert bubbles.kisman_masurel_grade(row["code"]) == row["grade"]
        assert row["provenance"] in PROVENANCE
    assert len(rows("kisman_masurel_codes.csv")) == 40


def test_codes_that_are_not_in_the_table_have_no_grade() -> None:
    for code in ("444 ", "131", "100", "", "555"):
        with pytest.raises(ValidityError, match="is not in the table"):
            bubbles.kisman_masurel_grade(code)


def test_grades_are_defined_in_order() -> None:
    assert [g.grade for g in bubbles.bubble_grades()] == ["0", "I", "II", "III", "IV"]
    assert len(bubbles.bubble_grades("Kisman-Masurel")) == 20
    assert {g.provenance for g in bubbles.bubble_grades()} == {"memory_high"}
    with pytest.raises(UnknownNameError, match="Spencer"):
        bubbles.bubble_grades("Spenser")


def test_medians_only() -> None:
    assert bubbles.median_grade(["III", "0", "I"]) == ("I", "I")
    assert bubbles.median_grade(["IV", "0"]) == ("0", "IV")
    assert bubbles.median_grade(["2", "5", "3"], "012345") == ("3", "3")
    with pytest.raises(UnknownNameError, match="grade"):
        bubbles.median_grade(["V"])
    with pytest.raises(UnknownNameError, match="at least"):
        bubbles.median_grade([])


def test_every_row_says_where_it_comes_from() -> None:
    for row in rows("saturation_rates.csv") + rows("bubble_grades.csv"):
        assert row["source"] in sources()
        assert row["provenance"] in PROVENANCE
    # 16 h in 24 and the four rates of the manual; no row of the 70-msw column beyond 15 msw.
    assert [r["rate"] for r in rows("saturation_rates.csv")[:4]] == ["6", "5", "4", "3"]
    assert min(float(r["to_depth"]) for r in rows("saturation_rates.csv") if r["column"] == "70") == 15.0


def test_half_times_as_remembered() -> None:
    """Fifteen of nitrogen, helium by the root of the ratio of molar masses."""
    one = bubbles.varying_permeability().tissues
    printed = [1, 2, 5, 10, 20, 40, 80, 120, 160, 240, 320, 400, 480, 560, 720]
    assert one.half_time[:, 0].tolist() == printed
    for nitrogen, helium in one.half_time:
        assert helium == pytest.approx(nitrogen / (28.013 / 4.0026) ** 0.5, abs=5.1e-3)
    assert one.provenance_of == {"N2": "memory_medium", "He": "memory_low"}


def test_constants_as_remembered() -> None:
    """The table of constants: 7500 fsw min are 23 028 kPa min, 227.3 atm min; 8.2 atm; 102 mmHg."""
    model = bubbles.varying_permeability()
    assert model.critical_volume == pytest.approx(23028.0, abs=0.5)
    assert model.critical_volume / 101.325 == pytest.approx(227.3, abs=0.05)
    assert model.onset == pytest.approx(830.865, abs=5e-4)
    assert model.other_gases == pytest.approx(13.599, abs=5e-4)
    assert (model.surface_tension, model.skin_compression) == (0.0179, 0.257)
    assert model.regeneration_time == 20160.0
    assert model.radii.tolist() == [0.8, 0.7]
