"""Cascade and booster: moles conserved, where the pressures meet, what is reached and what is not.

No worked example of a cascade in real gas is published that we know of. The rule (vessels equalize to the p
with rho(p)(V1 + V2) = n1 + n2, bank by bank from the lowest pressure up) is checked against the equation of
one step, the ideal law by hand, and CoolProp.
"""

from __future__ import annotations

import itertools
from typing import Any

import CoolProp
import numpy as np
import pytest
import xarray as xr
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import brentq

import gasphys as gp
from gasphys import real_gas
from gasphys.errors import NotReachableError, RangeError
from gasphys.gas import FORMULAS
from gasphys.supply import Cylinder, booster_fill, cascade_fill, equalized_pressure


def moles(pressure: float, gas: Any, volume: float, temperature: float = 20.0) -> float:
    return float(real_gas.cylinder_content(pressure, gas, volume, temperature))


def test_one_step_is_the_equation_of_two_joined_cylinders() -> None:
    for gas in ("air", "helium", "oxygen", "trimix 17/48"):
        fill = cascade_fill([Cylinder(gas, 50.0, "230 bar")], None, 12.0, remainder_pressure="35 bar")
        met = equalized_pressure("230 bar", "35 bar", gas, 50.0, 12.0)
        assert float(fill.pressure_after[0]) == pytest.approx(met, rel=1e-9)
        assert float(fill.bank_pressure_after[0]) == pytest.approx(met, rel=1e-9)
        ideal = equalized_pressure("230 bar", "35 bar", gas, 50.0, 12.0, model="ideal")
        assert float(fill.ideal_pressure_after[0]) == pytest.approx(ideal, rel=1e-9)


def test_oxygen_against_the_reference_equation_of_state() -> None:
    """Two steps of oxygen, solved with CoolProp in molar densities."""

    def density(pressure: float) -> float:
        return float(CoolProp.CoolProp.PropsSI("Dmolar", "P", 1e3 * pressure, "T", 293.15, "Oxygen"))

    left = density(2000.0)
    for bank in (9000.0, 16000.0):
        total = 50.0 * density(bank) + 10.0 * left
        met = brentq(lambda p, n=total: 60.0 * density(p) - n, 100.0, 20000.0)
        left = density(met)
    tanks = [Cylinder("oxygen", 50.0, p, name=f"{p:g}") for p in (16000.0, 9000.0)]
    fill = cascade_fill(tanks, None, 10.0, remainder_pressure=2000.0)
    # 0.15 % of density is the bound of the series to 200 bar.
    assert float(fill.pressure_after[-1]) == pytest.approx(met, rel=3e-3)


banks = st.lists(
    st.tuples(st.floats(5.0, 100.0), st.floats(2000.0, 30000.0), st.floats(0.0, 30.0)), min_size=1, max_size=4
)
gases = st.builds(
    lambda o2, helium: gp.Gas(oxygen=(1.0 - helium) * o2, helium=helium),
    st.floats(0.0, 1.0),
    st.floats(0.0, 1.0),
)


@given(
    bank=banks,
    gas=gases,
    there=gases,
    volume=st.floats(1.0, 30.0),
    start=st.floats(0.0, 5000.0),
    ratio=st.floats(1.0, 8.0),
    lowest=st.floats(0.0, 3000.0),
    boosted=st.booleans(),
)
def test_every_gas_is_conserved_and_each_step_ends_where_it_must(
    bank: list[tuple[float, float, float]],
    gas: gp.Gas,
    there: gp.Gas,
    volume: float,
    start: float,
    ratio: float,
    lowest: float,
    boosted: bool,
) -> None:
    tanks = [Cylinder(gas, v, p, name=str(k), temperature=t) for k, (v, p, t) in enumerate(bank)]
    options: dict[str, Any] = {"remainder": there, "remainder_pressure": start}
    if boosted:
        reachable = max(p for _, p, _ in bank) > lowest
        try:
            fill = booster_fill(
                tanks, 30000.0, volume, highest_ratio=ratio, lowest_inlet_pressure=lowest, **options
            )
        except NotReachableError as error:
            assert "does not reach 30000 kPa" in str(error)  # noqa: PT017 (the alternative of a property)
            return
        assert reachable or start >= 30000.0
    else:
        ratio, lowest = 1.0, 0.0
        fill = cascade_fill(tanks, None, volume, **options)
    pressures = [float(c.pressure) for c in sorted(tanks, key=lambda c: float(c.pressure))]
    order = sorted(tanks, key=lambda c: float(c.pressure))
    gained = sum(
        tank.amount - tank.content(float(left))
        for tank, left in zip(order, fill.bank_pressure_after.values, strict=True)
    )
    total = moles(start, there, volume) + float(fill.amount.sum())
    assert float(fill.amount.sum()) == pytest.approx(gained, rel=1e-6, abs=1e-6 * total)
    # Each species: what was there and what came.
    species = np.array([there.fraction(f) for f in FORMULAS]) * moles(start, there, volume)
    species = species + np.array([gas.fraction(f) for f in FORMULAS]) * float(fill.amount.sum())
    if total > 1e-6:
        np.testing.assert_allclose(fill.gas_fraction.values * total, species, rtol=1e-7, atol=1e-7 * total)
    before = start
    for k, (after, left) in enumerate(
        zip(fill.pressure_after.values, fill.bank_pressure_after.values, strict=True)
    ):
        assert after >= before * (1.0 - 1e-9)
        assert left <= pressures[k] * (1.0 + 1e-9)
        if float(fill.amount[k]) > 1e-6 * total:
            assert after <= ratio * left * (1.0 + 1e-6) or after <= left * (1.0 + 1e-6)
            assert left >= lowest * (1.0 - 1e-6) or after <= left * (1.0 + 1e-6)
        before = after


def test_the_order_matters_and_rising_gives_most() -> None:
    tanks = [Cylinder("air", 40.0, p, name=p) for p in ("250 bar", "90 bar", "170 bar")]
    reached = {}
    for order in itertools.permutations(tanks):
        fill = cascade_fill(list(order), None, 15.0, order="as given")
        reached[tuple(c.name for c in order)] = float(fill.pressure_after[-1])
    rising = cascade_fill(tanks, None, 15.0)
    assert rising.step.values.tolist() == ["90 bar", "170 bar", "250 bar"]
    assert float(rising.pressure_after[-1]) == pytest.approx(max(reached.values()), rel=1e-12)
    assert min(reached.values()) < 0.98 * max(reached.values())


def test_ideal_cascade_by_hand() -> None:
    """Equal cylinders of 10 L at 100 and 200 bar into an empty 10 L: 50, then 125 bar."""
    tanks = [Cylinder("air", 10.0, p, name=p) for p in ("100 bar", "200 bar")]
    fill = cascade_fill(tanks, None, 10.0)
    np.testing.assert_allclose(fill.ideal_pressure_after.values, [5000.0, 12500.0], rtol=1e-9)


def test_it_stops_at_the_target() -> None:
    tanks = [Cylinder("oxygen", 50.0, p, name=p) for p in ("60 bar", "150 bar", "180 bar")]
    fill = cascade_fill(tanks, "100 bar", 10.0)
    assert fill.pressure_after.values[1:] == pytest.approx([10000.0, 10000.0], rel=1e-9)
    assert float(fill.amount[2]) == 0.0
    assert float(fill.bank_pressure_after[2]) == pytest.approx(18000.0, rel=1e-12)


def test_a_warm_cylinder_takes_less() -> None:
    tanks = [Cylinder("air", 50.0, "220 bar")]
    cold = cascade_fill(tanks, None, 12.0)
    warm = cascade_fill(tanks, None, 12.0, filling_temperature=45.0)
    assert float(warm.pressure_after[0]) < float(cold.pressure_after[0])
    assert float(warm.pressure_after_hot[0]) == pytest.approx(float(warm.bank_pressure_after[0]), rel=1e-9)
    # The same moles, warmer.
    assert float(warm.pressure_after_hot[0]) == pytest.approx(
        real_gas.cylinder_pressure(float(warm.amount[0]), "air", 12.0, 45.0), rel=1e-9
    )
    assert "pressure_after_hot" not in cold


def test_a_booster_goes_on_where_the_pressures_meet() -> None:
    tanks = [Cylinder("oxygen", 50.0, "90 bar")]
    options: dict[str, Any] = {"highest_ratio": 8.0, "lowest_inlet_pressure": "20 bar"}
    fill = booster_fill(tanks, "200 bar", 7.0, **options)
    by_itself = cascade_fill(tanks, None, 7.0)
    assert float(fill.amount[0] - fill.amount_boosted[0]) == pytest.approx(
        float(by_itself.amount[0]), rel=1e-9
    )
    assert float(fill.amount[0]) == pytest.approx(moles(20000.0, "oxygen", 7.0), rel=1e-9)
    # Nothing more than what flows by itself at a ratio of one and no inlet to mind.
    same = booster_fill(tanks, 8000.0, 1.0, highest_ratio=1.0, lowest_inlet_pressure=0.0)
    assert float(same.amount_boosted[0]) == pytest.approx(0.0, abs=1e-9)


def test_a_booster_leaves_the_lowest_inlet_pressure() -> None:
    pair = [Cylinder("oxygen", 20.0, p, name=p) for p in ("45 bar", "180 bar")]
    more: dict[str, Any] = {"remainder": "oxygen", "remainder_pressure": "20 bar"}
    fill = booster_fill(pair, "150 bar", 15.0, highest_ratio=20.0, lowest_inlet_pressure="30 bar", **more)
    assert float(fill.bank_pressure_after[0]) == pytest.approx(3000.0, rel=1e-9)
    assert float(fill.amount_boosted[0]) > 0.0
    # And the highest ratio, where that ends a step first.
    fill = booster_fill(pair, "115 bar", 15.0, highest_ratio=1.2, lowest_inlet_pressure=0.0, **more)
    assert float(fill.pressure_after[0]) == pytest.approx(1.2 * float(fill.bank_pressure_after[0]), rel=1e-9)


def test_what_is_not_reached_says_how_far_it_goes() -> None:
    tanks = [Cylinder("air", 50.0, "230 bar")]
    reached = float(cascade_fill(tanks, None, 12.0, remainder_pressure=3000.0).pressure_after[0])
    with pytest.raises(NotReachableError, match=rf"does not reach 23000 kPa.*3000 to {reached:.6g} kPa"):
        cascade_fill(tanks, "230 bar", 12.0, remainder_pressure=3000.0)
    # And that far it goes.
    fill = cascade_fill(tanks, reached, 12.0, remainder_pressure=3000.0)
    assert float(fill.pressure_after[0]) == pytest.approx(reached, rel=1e-9)
    for options, match in (
        ({"highest_ratio": 2.0, "lowest_inlet_pressure": 0.0}, "reaches 0 to"),
        ({"highest_ratio": 9.0, "lowest_inlet_pressure": "100 bar"}, "reaches 0 to"),
    ):
        with pytest.raises(NotReachableError, match=match):
            booster_fill([Cylinder("air", 10.0, "120 bar")], "300 bar", 10.0, **options)  # type: ignore[arg-type]


def test_many_at_once_are_each_as_alone() -> None:
    tanks = [Cylinder("helium", 50.0, p, name=p) for p in ("120 bar", "200 bar")]
    target = xr.DataArray([100.0, 150.0, 199.0], dims="wanted", attrs={"units": "bar"})
    left = xr.DataArray([0.0, 40.0], dims="left", coords={"left": [0, 40]}, attrs={"units": "bar"})
    with pytest.warns(gp.ValidityWarning, match=r"2 of 6 fills.*does not reach 19900 kPa"):
        many = cascade_fill(tanks, target, 12.0, remainder_pressure=left)
    assert set(many.amount.dims) == {"step", "wanted", "left"}
    assert many.left.values.tolist() == [0, 40]
    assert np.isnan(many.amount.isel(wanted=2)).all()
    for i, p in enumerate((10000.0, 15000.0)):
        for j, r in enumerate((0.0, 4000.0)):
            alone = cascade_fill(tanks, p, 12.0, remainder_pressure=r)
            one = many.isel(wanted=i, left=j)
            for name in ("amount", "pressure_after", "bank_pressure_after", "gas_fraction"):
                np.testing.assert_allclose(one[name].values, alone[name].values, rtol=1e-9, atol=1e-9)


@pytest.mark.parametrize(
    ("call", "error", "match"),
    [
        (lambda: cascade_fill([], "200 bar"), RangeError, "bank is empty"),
        (
            lambda: cascade_fill([Cylinder("air", 10.0, 1e4)], 5e3, remainder_pressure=6e3),
            RangeError,
            "drain",
        ),
        (
            lambda: cascade_fill([Cylinder("air", 10.0, 1e4)], order="falling"),
            gp.GasphysError,
            "unknown order",
        ),
        (
            lambda: cascade_fill([Cylinder("air", 10.0, 1e4)] * 2),
            gp.GasphysError,
            "two cylinders are called 'air'",
        ),
        (
            lambda: cascade_fill(
                [Cylinder("air", 10.0, 1e4), Cylinder("oxygen", 10.0, 1e4)], remainder_pressure=100.0
            ),
            RangeError,
            "say which gas the remainder is",
        ),
        (
            lambda: booster_fill(
                [Cylinder("air", 1.0, 1e4)], 2e4, highest_ratio=0.5, lowest_inlet_pressure=0.0
            ),
            RangeError,
            "highest_ratio = 0.5 must be at least 1",
        ),
        (
            lambda: booster_fill(
                [Cylinder("air", 1.0, 1e4)], 2e4, highest_ratio=float("nan"), lowest_inlet_pressure=0.0
            ),
            RangeError,
            "highest_ratio = nan",
        ),
        (lambda: cascade_fill(["air"], 1e4), TypeError, "a Cylinder is needed"),
        (lambda: Cylinder("air", 10.0, "20 msw"), gp.GasphysError, "is an absolute pressure"),
        (lambda: Cylinder("air", 10.0, 200.0, count=0), RangeError, "whole number of at least 1"),
        (lambda: Cylinder("air", 0.0, 200.0), RangeError, "water_capacity"),
        (lambda: Cylinder("air", 10.0, float("nan")), RangeError, "not a number"),
        (lambda: Cylinder("air", 10.0, 200.0, temperature=-60.0), RangeError, r"-23\.15"),
    ],
)
def test_what_cannot_be_says_why(call: Any, error: type[Exception], match: str) -> None:
    with pytest.raises(error, match=match):
        call()
