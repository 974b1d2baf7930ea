"""The supply file, the command line, texts and figures."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
import xarray as xr

from gasphys import Exposure
from gasphys.__main__ import main
from gasphys.errors import ExposureError, InputFileError
from gasphys.plots import fill_figure, loss_table_figure
from gasphys.plots.style import new_figure
from gasphys.plots.supply import FillAccount
from gasphys.quantities import CAUTION
from gasphys.supply import (
    Cylinder,
    Demand,
    cascade_fill,
    fill_text,
    partial_pressure_fill,
    read_supply,
    stock,
    stock_text,
)

DIVE = "time_min,depth_msw,gas\n0,0,trimix 17/48\n3,56,trimix 17/48\n22,56,trimix 17/48\n26,20,trimix 17/48\n"
BANK = """# Invented scenario.
exposure = "dive.csv"
surface_pressure = "101.0 kPa"
water_temperature = "9 degC"

[[cylinder]]
name = "back"
gas = "trimix 17/48"
water_capacity = "12 L"
count = 2
pressure_absolute = "220 bar"

[[cylinder]]
gas = "nitrox 48"
water_capacity = "7 L"
pressure_gauge = "200 bar"

[[cylinder]]
gas = "oxygen"
water_capacity = 5.7
pressure_gauge = "120 bar"

[demand]
surface_rate = { others = "20 L/min", ascent = "16 L/min" }

[reserve]
share = 0.2
persons = 2
minutes = 2
[reserve.demand]
surface_rate = "30 L/min"

[ascent]
gases = ["nitrox 48 from 20 msw", "oxygen from 6 msw"]
gradient_high = 0.9
gradient_low = 0.5
moments = [10, 22, "0.5 h"]
"""


@pytest.fixture
def bank(tmp_path: Path) -> Path:
    (tmp_path / "dive.csv").write_text(DIVE)
    path = tmp_path / "bank.toml"
    path.write_text(BANK)
    return path


def run(capsys: Any, *words: Any) -> tuple[int, str, str]:
    status = main([str(w) for w in words])
    captured = capsys.readouterr()
    return status, captured.out, captured.err


def flat(text: str) -> str:
    return " ".join(text.split())


# -- the file --------------------------------------------------------------------------------------


def test_a_supply_file_is_read_as_meant(bank: Path) -> None:
    found = read_supply(bank)
    assert [c.name for c in found.cylinders] == ["back", "nitrox 48", "oxygen"]
    assert [round(c.pressure, 6) for c in found.cylinders] == [22000.0, 20101.0, 12101.0]
    assert found.cylinders[0].capacity == 24.0
    assert found.exposure.duration == 22.0  # until the bottom is left
    assert found.demand.surface_rate == {"": 20.0, "ascent": 16.0}
    assert found.reserve.demand == Demand(surface_rate=30.0)
    assert (found.reserve.share, found.reserve.persons, found.reserve.minutes) == (0.2, 2, 2.0)
    assert [(str(g), d) for g, d in found.gases or ()] == [("nitrox 48", "20 msw"), ("oxygen", "6 msw")]
    assert (found.rules.gradient_low, found.rules.gradient_high) == (0.5, 0.9)
    assert found.moments == (10.0, 22.0, 30.0)
    assert (found.surface_pressure, found.water_temperature) == (101.0, 9.0)


@pytest.mark.parametrize(
    ("old", "new", "line", "match"),
    [
        ('pressure_absolute = "220 bar"', 'pressure = "220 bar"', 11, "does not say absolute or gauge"),
        ('pressure_absolute = "220 bar"', 'pressure_absolute = "220 barr"', 11, "unknown unit 'barr'"),
        ('pressure_absolute = "220 bar"', 'pressure_absolute = "22 msw"', 11, "is a depth"),
        ('pressure_absolute = "220 bar"', "pressure_absolute = true_", 11, "Expected newline"),
        ('pressure_absolute = "220 bar"', 'pressure_absolute = "-1 bar"', 11, "outside the possible range"),
        ('count = 2\npressure_absolute = "220 bar"', "count = 2", 6, "the cylinder has no pressure"),
        ("count = 2", "count = 2.5", 10, "whole number"),
        ("count = 2", "cuont = 2", 10, "nearest: 'count'"),
        ('gas = "nitrox 48"', 'gas = "nitrx 48"', 14, "unknown gas 'nitrx 48'"),
        ('gas = "nitrox 48"\n', "", 13, "the cylinder has no gas"),
        ('gas = "nitrox 48"', 'gas = "oxygen"', 6, "two cylinders are called 'oxygen'"),
        ('water_capacity = "7 L"', 'water_capacity = "7 kg"', 15, "water_capacity needs a unit like 'L'"),
        ('pressure_gauge = "200 bar"', 'pressure_gauge = "200 bar"\npressure_absolute = 2.0', 17, "both"),
        ("share = 0.2", "share = 1.2", 27, "share = 1.2"),
        ("share = 0.2", "part = 0.2", 27, "unknown field of reserve 'part'"),
        ('surface_rate = "30 L/min"', 'surface_rate = "30 L"', 31, "surface_rate needs a unit like 'L/min'"),
        ('others = "20 L/min"', 'others = "20 L"', 24, "surface_rate needs a unit like 'L/min'"),
        ('"oxygen from 6 msw"', '"oxygen"', 34, "write a gas and its deepest depth"),
        ("gradient_low = 0.5", "gradient_low = 1.5", 36, "gradient_low = 1.5"),
        ("moments = [10", "moments = ['ten'", 37, "'ten'"),
        ('exposure = "dive.csv"', "", None, "no exposure"),
        ('water_temperature = "9 degC"', 'water_temperature = "9 bar"', 4, "water_temperature"),
        ("[demand]", "[demands]", 23, "unknown field of a supply file 'demands'"),
    ],
)
def test_every_complaint_has_its_line(bank: Path, old: str, new: str, line: int | None, match: str) -> None:
    assert old in BANK
    bank.write_text(BANK.replace(old, new, 1))
    with pytest.raises(InputFileError) as caught:
        read_supply(bank)
    error = caught.value
    assert match in str(error)
    assert error.path == str(bank)
    assert error.line == line
    assert error.remedy


def test_the_log_tells_its_own_line(bank: Path) -> None:
    (bank.parent / "dive.csv").write_text(DIVE.replace("22,56,", "22,x,"))
    with pytest.raises(InputFileError) as caught:
        read_supply(bank)
    assert (Path(caught.value.path).name, caught.value.line) == ("dive.csv", 4)


# -- the command line ------------------------------------------------------------------------------


def test_supply_prints_stock_reserve_and_losses(capsys: Any, bank: Path, tmp_path: Path) -> None:
    status, out, _ = run(
        capsys, "supply", bank, "--save", tmp_path / "left.nc", "--figure", tmp_path / "losses.png"
    )
    assert status == 0
    for words in (
        "Breathed: 1 person, 20 L/min (ascent 16), gas at 20 degC",
        "keep 20 % of each gas, or enough for 2 persons at 30 L/min each, 2 min where they are",
        "trimix 17/48: below the reserve from",
        "Left at the surface when a gas is lost",
        "no answer: nothing else may be breathed at 56 msw",
        CAUTION,
    ):
        assert words in flat(out), words
    with xr.open_dataset(tmp_path / "left.nc") as left:
        assert set(left.cylinder.values) == {"back", "nitrox 48", "oxygen"}
    assert (tmp_path / "losses.png").read_bytes()[:4] == b"\x89PNG"


def test_supply_without_an_ascent(capsys: Any, bank: Path, tmp_path: Path) -> None:
    text = BANK[: BANK.index("[ascent]")].replace(
        '{ others = "20 L/min", ascent = "16 L/min" }', '"20 L/min"'
    )
    bank.write_text(text)
    status, out, _ = run(capsys, "supply", bank)
    assert status == 0
    assert "Left at the surface" not in out
    status, _, error = run(capsys, "supply", bank, "--figure", tmp_path / "losses.png")
    assert status == 2
    assert "give the file a table [ascent]" in error
    status, _, error = run(capsys, "supply", tmp_path / "none.toml")
    assert status == 2
    assert "check the file's name" in error


def test_the_fill_of_friday(capsys: Any, tmp_path: Path) -> None:
    """Trimix 17/48 to 220 bar on 46 bar; the recipe itself is checked against published ones elsewhere."""
    words = ("fill", "trimix 17/48", "220 bar", "--water-capacity", "24 L", "--remainder-pressure", "46 bar")
    status, out, _ = run(
        capsys,
        *words,
        "--remainder",
        "trimix 17/48",
        "--hot",
        "38 degC",
        "--figure",
        tmp_path / "fill.png",
        "--save",
        tmp_path / "fill.nc",
    )
    assert status == 0
    fill = partial_pressure_fill(
        "trimix 17/48",
        "220 bar",
        24.0,
        remainder="trimix 17/48",
        remainder_pressure="46 bar",
        filling_temperature=38.0,
    )
    for k, name in enumerate(("helium", "oxygen", "air")):
        row = fill.isel(step=k)
        cells = [row.pressure_after_hot, row.pressure_after, row.ideal_pressure_after]
        numbers = " ".join(f"{float(c) / 100.0:.1f}" for c in cells)
        assert f"{k + 1} {name} {float(row.amount):.1f}" in flat(out)
        assert numbers in flat(out)
    assert "the ideal recipe gives: O2 16.7 %, N2 33.8 %, He 49.5 %" in flat(out)
    assert "analyze the gas, always" in flat(out)
    assert CAUTION in flat(out)
    assert (tmp_path / "fill.png").read_bytes()[:4] == b"\x89PNG"
    with xr.open_dataset(tmp_path / "fill.nc") as saved:
        assert float(saved.target_pressure) == 22000.0
    status, _, error = run(capsys, *words, "--remainder", "nitrox 48")
    assert status == 2
    assert "drain the cylinder to 4352 kPa (43.5 bar) absolute or less" in error


def test_gauge_readings_add_the_surface_pressure(capsys: Any) -> None:
    common = ("fill", "nitrox 48", "--remainder", "air", "--order", "oxygen,air")
    _, gauge, _ = run(
        capsys, *common, "199 bar", "--remainder-pressure", "49 bar", "--gauge", "--surface-pressure", "1 bar"
    )
    _, absolute, _ = run(capsys, *common, "200 bar", "--remainder-pressure", "50 bar")
    assert "nitrox 48 to 199.0 bar on a gauge at 100.0 kPa" in gauge
    assert "nitrox 48 to 200.0 bar absolute" in absolute
    for row in (4, 5):
        moles = [text.splitlines()[row].split()[:4] for text in (gauge, absolute)]
        assert moles[0] == moles[1]
        stops = [float(text.splitlines()[row].split()[-2]) for text in (gauge, absolute)]
        assert stops[1] - stops[0] == pytest.approx(1.0, abs=0.051)


# -- words and figures -----------------------------------------------------------------------------


def test_the_mole_account_is_drawn_to_the_numbers() -> None:
    fill = partial_pressure_fill(
        "trimix 17/48",
        "220 bar",
        24.0,
        remainder="nitrox 48",
        remainder_pressure="30 bar",
        filling_temperature=35.0,
    )
    picture = FillAccount(new_figure(), ("helium", "oxygen", "air"))
    picture.update(fill)
    start = float(fill.remainder_amount)
    for k, name in enumerate(("helium", "oxygen", "air")):
        amount = float(fill.amount[k])
        bars = [picture.bars[k + 1, g] for g in ("O2", "N2", "He")]
        assert min(b.get_x() for b in bars) == pytest.approx(start, rel=1e-9)
        assert sum(b.get_width() for b in bars) == pytest.approx(amount, rel=1e-9)
        assert picture.cells[k + 1, 0].get_text() == f"+ {amount:.1f}"
        assert picture.cells[k + 1, 1].get_text() == f"{float(fill.pressure_after_hot[k]) / 100.0:.1f}"
        assert picture.cells[k + 1, 2].get_text() == f"{float(fill.pressure_after[k]) / 100.0:.1f}", name
        start += amount
    assert start == pytest.approx(float(fill.total_amount), rel=1e-9)
    # The last line: what the ideal recipe gives.
    helium = picture.bars[5, "He"].get_width() / float(fill.total_amount)
    assert helium == pytest.approx(float(fill.ideal_recipe_fraction.sel(gas="He")), rel=1e-9)
    assert [label.get_text() for label in picture.axes.get_yticklabels()][-1] == "ideal recipe gives"


def test_an_ideal_recipe_that_cannot_be_followed_says_so() -> None:
    # The ideal law wants to take oxygen out, the real gas does not.
    fill = partial_pressure_fill("trimix 17/48", "220 bar", remainder="nitrox 48", remainder_pressure=4340.0)
    if bool(fill.ideal_recipe_fraction.isnull().any()):
        assert "no recipe" in fill_text(fill)
    picture = fill_figure(fill)
    assert len(picture.axes) == 2


@pytest.mark.parametrize(
    ("call", "match"),
    [
        (lambda: fill_figure(cascade_fill([Cylinder("air", 10.0, 1e4)])), "partial_pressure_fill"),
        (lambda: loss_table_figure(xr.Dataset()), "loss_table"),
        (
            lambda: fill_text(
                partial_pressure_fill(
                    "nitrox 48",
                    xr.DataArray([1e4, 2e4], dims="p", attrs={"units": "kPa"}),
                    order=("oxygen", "air"),
                )
            ),
            "pick one first",
        ),
        (
            lambda: stock_text(
                stock(
                    Exposure.start("air").stay(xr.DataArray([1.0, 2.0], dims="d")),
                    [Cylinder("air", 10.0, 1e4)],
                    None,
                    Demand(20.0),
                )
            ),
            "pick one first",
        ),
        (
            lambda: FillAccount(new_figure(), ("oxygen", "air")).update(
                partial_pressure_fill("trimix 17/48", 2e4)
            ),
            "one fill of 2 steps",
        ),
    ],
)
def test_faces_show_one_scenario(call: Any, match: str) -> None:
    with pytest.raises(ExposureError, match=match):
        call()


def test_stock_text_says_what_is_missing() -> None:
    dive = Exposure.start("air").travel(depth=30, minutes=2).stay(40)
    left = stock(dive, [Cylinder("air", 10.0, "150 bar")], None, Demand(surface_rate=25.0))
    empty = float(left.time_empty[0])
    missing = float(left.free_gas_missing[0, -1])
    assert f"{missing:.0f} L are missing at the end, none from {empty:.1f} min" in flat(stock_text(left))
