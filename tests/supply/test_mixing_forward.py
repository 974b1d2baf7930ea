"""Mixes from the pressures of their filling: published, against the recipe, topped, refused.

C3: oxygen to 1000 psia, helium to 2000 psia gives more than half oxygen (U.S. Navy Diving Manual rev. 6
ch. 16, secondary); the number, 0.547, is computed, +-0.006 by the helium-oxygen pair.
"""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from hypothesis import given
from hypothesis import strategies as st

import gasphys as gp
from gasphys import real_gas
from gasphys.errors import RangeError
from gasphys.gas import FORMULAS
from gasphys.supply import mix_from_pressures, partial_pressure_fill

SHORT = {"He": "helium", "O2": "oxygen", "air": "air"}


def cases() -> list[dict[str, str]]:
    path = Path(__file__).parent / "reference" / "blending_cases_20C.csv"
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def test_c3_more_than_half_is_oxygen() -> None:
    mix = mix_from_pressures([("oxygen", 6894.757), ("helium", 13789.5)])
    assert float(mix.gas_fraction.sel(gas="O2")) == pytest.approx(0.547, abs=0.0005)
    assert float(mix.ideal_gas_fraction.sel(gas="O2")) == pytest.approx(0.500, abs=0.0005)


@pytest.mark.parametrize("row", cases(), ids=lambda r: f"{r['target']}-{r['final_bar_abs']}-{r['order']}")
def test_published_ideal_recipes_give_what_is_printed(row: dict[str, str]) -> None:
    """The pressures of the ideal recipe, followed: the printed fractions to their last digit."""
    names = [SHORT[word] for word in row["order"].split()]
    # Exact pressures of the ideal recipe, of which the table prints two decimals.
    target, final = gp.Gas.parse(row["target"]), 100.0 * float(row["final_bar_abs"])
    exact = partial_pressure_fill(target, final, order=names).ideal_pressure_after.values
    printed = [100.0 * float(p) for p in row["ideal_gas_pressure_after_each_step_bar"].split()]
    np.testing.assert_allclose(exact, printed, atol=0.51, rtol=0.0)
    mix = mix_from_pressures(list(zip(names, exact, strict=True)))
    for gas, column in (
        ("O2", "O2_fraction_if_ideal_recipe_used"),
        ("He", "He_fraction_if_ideal_recipe_used"),
    ):
        assert float(mix.gas_fraction.sel(gas=gas)) == pytest.approx(float(row[column]), abs=5.1e-5)
    np.testing.assert_allclose(
        mix.ideal_gas_fraction.sel(gas=["O2", "He"]).values,
        [target.oxygen, target.helium],
        rtol=1e-9,
        atol=1e-12,
    )


@pytest.mark.parametrize("row", cases(), ids=lambda r: f"{r['target']}-{r['final_bar_abs']}-{r['order']}")
def test_published_real_recipes_give_the_target(row: dict[str, str]) -> None:
    """The printed pressures, two decimals of a bar, mixed forward: the wanted mix to 0.05 % of the whole."""
    names = [SHORT[word] for word in row["order"].split()]
    stops = [100.0 * float(p) for p in row["real_gas_pressure_after_each_step_bar"].split()]
    mix = mix_from_pressures(list(zip(names, stops, strict=True)))
    wanted = [gp.Gas.parse(row["target"]).fraction(f) for f in FORMULAS]
    np.testing.assert_allclose(mix.gas_fraction.values, wanted, atol=5e-4, rtol=0.0)


shares = st.floats(0.0, 1.0)


@given(
    o2=st.floats(0.22, 1.0),
    helium=shares,
    pressure=st.floats(5000.0, 30000.0),
    temperature=st.floats(-10.0, 45.0),
    warmer=st.floats(0.0, 5.0),
    left=st.floats(0.0, 0.5),
)
def test_the_recipe_read_backwards_is_the_target(
    o2: float, helium: float, pressure: float, temperature: float, warmer: float, left: float
) -> None:
    """Stops read hot or settled give the same mix, each species conserved."""
    target = gp.Gas(oxygen=(1.0 - helium) * o2, helium=helium)
    hot = temperature + warmer
    given_ = {"remainder": target, "remainder_pressure": left * pressure}
    fill = partial_pressure_fill(target, pressure, 7.0, temperature, filling_temperature=hot, **given_)
    wanted = np.array([target.fraction(f) for f in FORMULAS])
    for stops, t in ((fill.pressure_after, None), (fill.pressure_after_hot, hot)):
        steps = [(str(n), float(p)) for n, p in zip(fill.step.values, stops.values, strict=True)]
        mix = mix_from_pressures(steps, 7.0, temperature, filling_temperature=t, **given_)
        np.testing.assert_allclose(mix.gas_fraction.values, wanted, rtol=5e-4, atol=1e-8)
        total = float(mix.remainder_amount) + float(mix.amount.sum())
        assert total == pytest.approx(float(fill.total_amount), rel=1e-8)
        np.testing.assert_allclose(mix.amount.values, fill.amount.values, rtol=1e-6, atol=1e-6 * total)
        assert float(mix.pressure_after[-1]) == pytest.approx(pressure, rel=1e-8)


@given(o2=st.floats(0.25, 0.9), start=st.floats(0.0, 0.9), pressure=st.floats(1000.0, 30000.0))
def test_topping_with_air_lies_between_the_two(o2: float, start: float, pressure: float) -> None:
    there = gp.Gas(oxygen=o2)
    mix = mix_from_pressures(
        [("air", pressure)], remainder=there, remainder_pressure=start * pressure, temperature=15.0
    )
    got = float(mix.gas_fraction.sel(gas="O2"))
    assert 0.21 - 1e-9 <= got <= o2 + 1e-9
    # Conservation of oxygen, with the content of the finished mix by the public equation.
    held = real_gas.cylinder_content(start * pressure, there, 1.0, 15.0)
    total = real_gas.cylinder_content(pressure, gp.Gas(oxygen=got), 1.0, 15.0)
    assert total * got == pytest.approx(held * o2 + (total - held) * 0.21, rel=1e-7)


def test_thin_gas_is_ideal() -> None:
    mix = mix_from_pressures([("helium", 10.0), ("oxygen", 15.0), ("air", 20.0)])
    np.testing.assert_allclose(mix.gas_fraction.values, mix.ideal_gas_fraction.values, rtol=2e-4, atol=1e-9)
    np.testing.assert_allclose(
        mix.ideal_gas_fraction.sel(gas=["O2", "N2", "He"]).values,
        [(5.0 + 5.0 * 0.21) / 20.0, 5.0 * 0.79 / 20.0, 0.5],
        rtol=1e-12,
    )


def test_pressures_read_warm_hold_fewer_moles() -> None:
    mix = mix_from_pressures([("air", 20000.0)], 12.0, 20.0, filling_temperature=40.0)
    assert float(mix.amount[0]) == pytest.approx(
        real_gas.cylinder_content(20000.0, "air", 12.0, 40.0), rel=1e-9
    )
    settled = real_gas.cylinder_pressure(float(mix.amount[0]), "air", 12.0, 20.0)
    assert float(mix.pressure_after[0]) == pytest.approx(settled, rel=1e-9)


def test_many_at_once_are_each_as_alone() -> None:
    last = xr.DataArray([180.0, 200.0, 232.0], dims="bank", attrs={"units": "bar"})
    warm = xr.DataArray([20.0, 35.0], dims="day", coords={"day": ["cold", "warm"]}, attrs={"units": "degC"})
    many = mix_from_pressures([("oxygen", "30 bar"), ("air", last)], 12.0, 20.0, filling_temperature=warm)
    assert set(many.amount.dims) == {"step", "bank", "day"}
    for i, p in enumerate((18000.0, 20000.0, 23200.0)):
        for j, t in enumerate((20.0, 35.0)):
            alone = mix_from_pressures([("oxygen", 3000.0), ("air", p)], 12.0, 20.0, filling_temperature=t)
            one = many.isel(bank=i, day=j)
            for name in ("amount", "pressure_after", "gas_fraction", "ideal_gas_fraction"):
                np.testing.assert_allclose(one[name].values, alone[name].values, rtol=1e-12, err_msg=name)


@pytest.mark.parametrize(
    ("steps", "more", "match"),
    [
        ([], {}, "steps is empty"),
        ([("oxygen", 3000.0), ("air", 2000.0)], {}, r"step 2: air to 2000 kPa lies below the 3000 kPa"),
        (
            [("air", 2000.0)],
            {"remainder": "nitrox 48", "remainder_pressure": 4000.0},
            r"step 1: air to 2000 kPa lies below the 4000 kPa",
        ),
        ([("air", 2000.0)], {"remainder_pressure": 100.0}, "say which gas"),
        ([("air", -1.0)], {}, "cylinder_pressure"),
        ([("air", 2000.0)], {"temperature": -40.0}, r"-23\.15"),
    ],
)
def test_what_cannot_be_says_why(steps: list[tuple[str, float]], more: dict[str, object], match: str) -> None:
    with pytest.raises(RangeError, match=match):
        mix_from_pressures(steps, **more)  # type: ignore[arg-type]


def test_the_amount_explains_itself() -> None:
    fill = partial_pressure_fill(
        "trimix 17/48", 22000.0, 24.0, remainder="trimix 17/48", remainder_pressure=4600.0
    )
    found = gp.explain(fill, "total_amount")
    assert found.value == found.stored
    assert "real_gas.cylinder_content" in str(found)
