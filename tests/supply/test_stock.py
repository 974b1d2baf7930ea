"""Gas used and left along an exposure: by hand, by quadrature, and what is kept back.

Amount per minute = volume breathed times molar density at ambient pressure, integrated again with scipy;
stays are arithmetic.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import xarray as xr
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.optimize import brentq

import gasphys as gp
from gasphys import Exposure, real_gas
from gasphys.errors import ExposureError, RangeError, UnitError
from gasphys.supply import (
    Cylinder,
    Demand,
    Reserve,
    consumption,
    cylinder_duration,
    loop_diluent,
    open_circuit_use,
    stock,
    stock_review,
)

#: 47 mmHg.
VAPOR = float(gp.constants.BODY_VAPOR_PRESSURE)
#: Moles in a liter STPD.
STPD = 101.325 / (8.314462618 * 273.15)


def dive() -> Exposure:
    return (
        Exposure.start("trimix 17/48")
        .travel(depth=56, minutes=2.8)
        .stay(19.2)
        .travel(depth=20, minutes=4)
        .switch("nitrox 48")
        .stay(5)
        .travel(depth=6, minutes=2)
        .switch("oxygen")
        .stay(12)
        .travel(depth=0, minutes=1)
    )


def tanks() -> list[Cylinder]:
    return [
        Cylinder("trimix 17/48", 12.0, "220 bar", count=2),
        Cylinder("nitrox 48", 7.0, "200 bar"),
        Cylinder("oxygen", 7.0, "150 bar"),
    ]


def by_quadrature(exposure: Exposure, gas: str, rate: float, temperature: float, vapor: float) -> float:
    """Moles of one gas on open circuit, integrated piece by piece."""
    total = 0.0
    c = exposure.columns
    for k in range(len(exposure.part)):
        if exposure.gas_name(k) != gas:
            continue
        start, end, minutes = (
            float(c[name][k]) for name in ("start_pressure", "end_pressure", "segment_duration")
        )
        total += quad(
            lambda t, a=start, b=end, m=minutes: open_circuit_use(
                rate, a + (b - a) * t / m, gas, temperature, vapor
            ),
            0.0,
            minutes,
            epsabs=0.0,
            epsrel=1e-10,
        )[0]
    return total


@pytest.mark.parametrize("kind", ["surface_rate", "ventilation_btps"])
def test_consumption_is_the_integral(kind: str) -> None:
    used = consumption(dive(), Demand(**{kind: 23.0}, gas_temperature=12.0))
    temperature, vapor = (12.0, 0.0) if kind == "surface_rate" else (37.0, VAPOR)
    assert used.supply_gas.values.tolist() == ["trimix 17/48", "nitrox 48", "oxygen"]
    for gas in used.supply_gas.values:
        expected = by_quadrature(dive(), str(gas), 23.0, temperature, vapor)
        assert float(used.amount_used.sel(supply_gas=gas)[-1]) == pytest.approx(expected, rel=1e-9)
    # Nothing of a gas before it is breathed.
    assert float(used.amount_used.sel(supply_gas="oxygen", time=33.0)) == 0.0


def test_what_the_exposure_says_goes_first() -> None:
    own = Exposure.start("air", ventilation_btps=30.0).stay(10).work().stay(10)
    used = consumption(own, Demand(surface_rate=20.0)).amount_used.sel(supply_gas="air")
    first = 10.0 * open_circuit_use(30.0, 101.325, "air", 37.0, VAPOR)
    second = 10.0 * open_circuit_use(20.0, 101.325, "air")
    np.testing.assert_allclose(used.values, [0.0, first, first + second], rtol=1e-12)


def test_rates_by_part() -> None:
    parts = Exposure.start("air").stay(10).name("work").stay(10)
    used = consumption(parts, Demand(surface_rate={"": 10.0, "work": 40.0})).amount_used.sel(supply_gas="air")
    one = 10.0 * open_circuit_use(10.0, 101.325, "air")
    np.testing.assert_allclose(used.values, [0.0, one, 5.0 * one], rtol=1e-12)
    with pytest.raises(gp.GasphysError, match=r"unknown part of the exposure 'wrok'.*nearest: 'work'"):
        consumption(parts, Demand(surface_rate={"": 10.0, "wrok": 40.0}))


def test_a_loop_uses_oxygen_for_the_body_and_diluent_on_the_way_down() -> None:
    loop = (
        Exposure.start("air", o2_uptake_stpd=1.5)
        .loop("1.3 bar", "trimix 17/48")
        .travel(depth=56, minutes=3)
        .stay(17)
        .travel(depth=20, minutes=4)
        .travel(depth=30, minutes=1)
    )
    used = consumption(loop, Demand(loop_volume=7.0, gas_temperature=25.0, persons=2)).amount_used.isel(
        time=-1
    )
    assert float(used.sel(supply_gas="oxygen")) == pytest.approx(2.0 * 25.0 * 1.5 * STPD, rel=1e-9)
    free = loop_diluent(7.0, 101.325, 661.325) + loop_diluent(7.0, 301.325, 401.325)
    expected = 2.0 * free * 101.325 / (8.314462618 * 298.15)
    assert float(used.sel(supply_gas="trimix 17/48")) == pytest.approx(expected, rel=1e-9)
    with pytest.raises(ExposureError, match="has no demand: give o2_uptake_stpd="):
        consumption(Exposure.start("air").loop("1.3 bar", "air").stay(1))


def test_a_plan_is_followed() -> None:
    bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
    found = gp.ascent.plan(bottom)
    used = consumption(found, Demand(surface_rate=20.0))
    assert float(used.time[-1]) == pytest.approx(found.total_time, rel=1e-12)
    assert float(used.amount_used[0, -1]) == pytest.approx(
        by_quadrature(found.exposure, "air", 20.0, 20.0, 0.0), rel=1e-9
    )


@given(
    depth=st.floats(5.0, 90.0),
    stay=st.floats(1.0, 60.0),
    at=st.lists(st.floats(0.05, 0.95), max_size=4),
    rate=st.floats(5.0, 60.0),
)
def test_cutting_the_exposure_changes_nothing(
    depth: float, stay: float, at: list[float], rate: float
) -> None:
    one = Exposure.start("air").travel(depth=depth, minutes=3).stay(stay).travel(depth=0, minutes=5)
    times = [x * one.duration for x in at]
    plain, cut = (
        stock(
            one,
            [Cylinder("air", 15.0, "230 bar")],
            Reserve(share=0.3),
            Demand(surface_rate=rate),
            at=t,
        )
        for t in (None, times or None)
    )
    here = cut.sel(time=plain.time.values, method="nearest")
    np.testing.assert_allclose(here.time.values, plain.time.values, rtol=1e-12)
    np.testing.assert_allclose(here.amount_left.values, plain.amount_left.values, rtol=1e-9, atol=1e-9)
    for name in ("first_below_reserve", "time_empty", "margin_to_reserve", "time_below_reserve"):
        np.testing.assert_allclose(cut[name].values, plain[name].values, rtol=1e-6, atol=1e-6, err_msg=name)


@given(
    pressure=st.floats(3000.0, 30000.0),
    rate=st.floats(5.0, 80.0),
    depth=st.floats(5.0, 60.0),
    kept=st.floats(2000.0, 6000.0),
)
def test_moles_are_conserved_and_the_duration_is_that_of_the_equation(
    pressure: float, rate: float, depth: float, kept: float
) -> None:
    one = Exposure.start("air", pressure=101.325 + 10.0 * depth).stay(200)
    tank = Cylinder("air", 12.0, pressure)
    left = stock(one, [tank], Reserve(pressure=kept), Demand(surface_rate=rate), at=[10.0, 50.0])
    used = consumption(one, Demand(surface_rate=rate), at=[10.0, 50.0])
    missing = left.free_gas_missing.sel(supply_gas="air") / float(left.free_liters_per_mole[0])
    np.testing.assert_allclose(
        left.amount_left.sel(cylinder="air").values + used.amount_used[0].values - missing.values,
        tank.amount,
        rtol=1e-9,
    )
    np.testing.assert_allclose(
        [tank.content(p) for p in left.pressure_left[0].values], left.amount_left[0].values, rtol=1e-9
    )
    ambient = 101.325 + 10.0 * depth
    for name, floor in (("first_below_reserve", max(kept, ambient)), ("time_empty", ambient)):
        expected = cylinder_duration(pressure, floor, rate, ambient, "air", 12.0) if pressure > floor else 0.0
        got = float(left[name].sel(supply_gas="air"))
        if 1e-6 < expected < 200.0 - 1e-6:
            assert got == pytest.approx(expected, rel=1e-5, abs=1e-5)
        elif expected >= 200.0:
            assert np.isnan(got)


def test_cylinders_of_one_gas_are_used_in_order() -> None:
    one = Exposure.start("air").travel(depth=30, minutes=2).stay(40)
    pair = [Cylinder("air", 10.0, "200 bar", name="first"), Cylinder("air", 10.0, "200 bar", name="second")]
    left = stock(one, pair, None, Demand(surface_rate=20.0), at=np.linspace(1.0, 42.0, 20))
    first, second = (left.pressure_left.sel(cylinder=n).values for n in ("first", "second"))
    # The second is full until the first is down to the highest ambient pressure at which it is breathed.
    untouched = np.isclose(second, 20000.0, rtol=1e-12)
    assert first[~untouched] == pytest.approx(401.325, rel=1e-9)
    assert untouched[0]
    used = consumption(one, Demand(surface_rate=20.0), at=np.linspace(1.0, 42.0, 20)).amount_used[0].values
    held = sum(t.amount for t in pair)
    np.testing.assert_allclose(left.amount_left.sum("cylinder").values, held - used, rtol=1e-9)
    assert not untouched[-1]
    spare = stock(one, [*pair, Cylinder("oxygen", 5.0, "100 bar")], None, Demand(surface_rate=20.0))
    assert float(spare.pressure_left.sel(cylinder="oxygen")[-1]) == pytest.approx(10000.0, rel=1e-12)
    assert "oxygen" not in spare.supply_gas.values


def test_pressures_left_in_cold_water() -> None:
    """C1: air at 232 bar and 20 degC reads 214.5 bar at 5 degC (computed; ideal gas 220.1)."""
    one = Exposure.start("air").stay(1)
    cold = stock(
        one, [Cylinder("air", 12.0, "232 bar")], None, Demand(surface_rate=20.0), water_temperature=5.0
    )
    assert float(cold.pressure_left[0, 0]) / 100.0 == pytest.approx(214.5, abs=0.2)
    assert "at 5 degC" in cold.pressure_left.attrs["long_name"]


# -- reserves --------------------------------------------------------------------------------------


def surface_moles(liters: float, pressure: float, gas: str = "air") -> float:
    return float(open_circuit_use(liters, pressure, gas))


def test_share_and_pressure_kept() -> None:
    one = Exposure.start("air", pressure=301.325).stay(60)
    tank = Cylinder("air", 12.0, "200 bar")
    for rule, kept in (
        (Reserve(share=0.25), 0.25 * tank.amount),
        (Reserve(pressure="50 bar"), tank.content(5000.0)),
        (Reserve(share=0.25, pressure="60 bar"), max(0.25 * tank.amount, tank.content(6000.0))),
    ):
        left = stock(one, [tank], rule, Demand(surface_rate=20.0))
        expected = (tank.amount - kept) / surface_moles(20.0, 301.325)
        assert float(left.first_below_reserve[0]) == pytest.approx(expected, rel=1e-8)
        assert float(left.time_below_reserve[0]) == pytest.approx(60.0 - expected, rel=1e-8)
        assert float(left.time_of_margin[0]) == 60.0


def test_the_way_out_for_two_by_hand() -> None:
    """20 min at 40 m, 4 min up to a switch at 20 m: two persons at 30 L/min, 2 min where they are."""
    one = (
        Exposure.start("air")
        .travel(depth=40, minutes=2)
        .stay(18)
        .travel(depth=20, minutes=4)
        .switch("nitrox 48")
        .stay(3)
        .travel(depth=0, minutes=4)
    )
    rule = Reserve(persons=2, minutes=2, demand=Demand(surface_rate=30.0))
    pair = [Cylinder("air", 15.0, "230 bar"), Cylinder("nitrox 48", 7.0, "200 bar")]
    left = stock(one, pair, rule, Demand(surface_rate=18.0))
    up = 2.0 * quad(lambda t: surface_moles(30.0, 501.325 - 50.0 * t), 0.0, 4.0, epsrel=1e-10)[0]
    wait = 2.0 * 2.0 * surface_moles(30.0, 501.325)
    floor = pair[0].content(501.325)  # what a cylinder does not give at 40 m
    liters = float(left.free_liters_per_mole.sel(cylinder="air"))
    reserve = left.free_gas_reserve.sel(supply_gas="air")
    assert float(reserve.sel(time=20.0)) == pytest.approx(liters * (floor + up + wait), rel=1e-9)
    assert float(reserve.sel(time=0.0)) == pytest.approx(liters * (floor + up + wait), rel=1e-9)
    # After the switch nothing more is kept of the bottom gas but what does not come out anyway.
    assert float(reserve.sel(time=24.0)) == pytest.approx(liters * floor, rel=1e-9)
    nitrox = 2.0 * (
        3.0 * surface_moles(30.0, 301.325, "nitrox 48")
        + quad(lambda t: surface_moles(30.0, 301.325 - 50.0 * t, "nitrox 48"), 0.0, 4.0, epsrel=1e-10)[0]
        + 2.0 * surface_moles(30.0, 301.325, "nitrox 48")
    )
    n_liters, n_floor = float(left.free_liters_per_mole.sel(cylinder="nitrox 48")), pair[1].content(301.325)
    assert float(left.free_gas_reserve.sel(supply_gas="nitrox 48", time=2.0)) == pytest.approx(
        n_liters * (n_floor + nitrox), rel=1e-9
    )


def test_a_way_out_to_a_pressure_or_the_surface() -> None:
    one = Exposure.start("air").travel(depth=40, minutes=2).stay(10).travel(depth=0, minutes=8)
    tank = Cylinder("air", 12.0, "200 bar")
    who = Demand(surface_rate=30.0)
    floor = tank.content(501.325)

    def kept(until: Any) -> float:
        rule = Reserve(persons=2, until=until, demand=who)
        left = stock(one, [tank], rule, Demand(surface_rate=18.0))
        return float(left.free_gas_reserve.sel(time=12.0)[0] / left.free_liters_per_mole[0]) - floor

    def by_hand(pressure: float) -> float:
        minutes = (501.325 - pressure) / 50.0
        return float(
            2.0 * quad(lambda t: surface_moles(30.0, 501.325 - 50.0 * t), 0.0, minutes, epsrel=1e-10)[0]
        )

    assert kept("switch") == pytest.approx(by_hand(101.325), rel=1e-8)
    assert kept("surface") == pytest.approx(by_hand(101.325), rel=1e-8)
    assert kept(301.325) == pytest.approx(by_hand(301.325), rel=1e-8)
    assert kept("2 bar") == pytest.approx(by_hand(200.0), rel=1e-8)
    assert kept(600.0) == pytest.approx(0.0, abs=1e-9)


def test_a_root_between_boundaries() -> None:
    """Where the stock crosses the way out on the bottom, against brentq."""
    one = Exposure.start("air").travel(depth=30, minutes=2).stay(30).travel(depth=0, minutes=6)
    tank, rule = (
        Cylinder("air", 18.0, "200 bar"),
        Reserve(persons=2, demand=Demand(surface_rate=42.0)),
    )
    left = stock(one, [tank], rule, Demand(surface_rate=22.0))
    first = float(left.first_below_reserve[0])
    assert 2.0 < first < 32.0

    def surplus(t: float) -> float:
        some = stock(one, [tank], rule, Demand(surface_rate=22.0), at=[t]).sel(time=t, supply_gas="air")
        return float(some.free_gas_left - some.free_gas_reserve)

    assert first == pytest.approx(brentq(surplus, 3.0, 31.0, xtol=1e-9), abs=1e-6)
    # It is above again on the way up, and the time below ends there.
    again = brentq(surplus, 32.5, 37.9, xtol=1e-9)
    assert float(left.time_below_reserve[0]) == pytest.approx(again - first, abs=1e-5)


def test_more_persons_and_longer_ways_never_need_less() -> None:
    kept = []
    for persons in (1, 2, 3):
        rule = Reserve(persons=persons, minutes=1.0, demand=Demand(surface_rate=25.0))
        kept.append(stock(dive(), tanks(), rule, Demand(surface_rate=18.0)).free_gas_reserve)
    assert (kept[1] >= kept[0] - 1e-9).all()
    assert (kept[2] >= kept[1] - 1e-9).all()


# -- many at once ----------------------------------------------------------------------------------


def test_scenarios_are_each_as_alone() -> None:
    depth = xr.DataArray([20.0, 35.0, 50.0], dims="depth")
    minutes = xr.DataArray([10.0, 30.0], dims="bottom", coords={"bottom": ["short", "long"]})
    rule = Reserve(share=0.2, persons=2, minutes=1, demand=Demand(surface_rate=30.0))
    who, bank = (
        Demand(surface_rate=20.0),
        [Cylinder("air", 12.0, "220 bar"), Cylinder("oxygen", 5.0, "150 bar")],
    )

    def build(d: Any, m: Any) -> Exposure:
        return (
            Exposure.start("air")
            .travel(depth=d, minutes=2)
            .stay(m)
            .travel(depth=6, minutes=4)
            .switch("oxygen")
            .stay(3)
            .travel(depth=0, minutes=1)
        )

    many = stock(build(depth, minutes), bank, rule, who)
    assert set(many.amount_left.dims) == {"cylinder", "depth", "bottom", "point"}
    review = stock_review(build(depth, minutes), bank, rule, who)
    for i, d in enumerate((20.0, 35.0, 50.0)):
        for j, m in enumerate((10.0, 30.0)):
            alone = stock(build(d, m), bank, rule, who)
            one = many.isel(depth=i, bottom=j)
            np.testing.assert_allclose(np.unique(one.time.values), alone.time.values, rtol=1e-12)
            for name in ("first_below_reserve", "time_empty", "margin_to_reserve", "time_below_reserve"):
                # The floor is that of the highest pressure of all scenarios.
                if name != "time_empty" and d == 50.0:
                    np.testing.assert_allclose(one[name].values, alone[name].values, rtol=1e-9, err_msg=name)
            assert str(review.status.sel(limit="reserve of air").isel(depth=i, bottom=j).values) == (
                "within" if np.isnan(float(one.first_below_reserve.sel(supply_gas="air"))) else "beyond"
            )
            used = consumption(build(depth, minutes), who).isel(depth=i, bottom=j)
            np.testing.assert_allclose(
                used.amount_used.values[:, -1],
                consumption(build(d, m), who).amount_used.values[:, -1],
                rtol=1e-9,
            )


# -- review and refusals ---------------------------------------------------------------------------


def test_the_review_tells_when_the_stock_is_below() -> None:
    rule = Reserve(persons=2, minutes=2, demand=Demand(surface_rate=30.0))
    left = stock(dive(), tanks(), rule, Demand(surface_rate=25.0))
    found = stock_review(dive(), tanks(), rule, Demand(surface_rate=25.0), role="attendant")
    for gas in left.supply_gas.values:
        row, same = found.sel(limit=f"reserve of {gas}"), left.sel(supply_gas=gas)
        np.testing.assert_array_equal(float(row.first_crossing), float(same.first_below_reserve))
        assert str(row.status.values) == ("within" if np.isnan(float(row.first_crossing)) else "beyond")
        assert float(row.worst - row.limit_value) == pytest.approx(float(row.margin), rel=1e-12)
        assert float(row.margin) == float(same.margin_to_reserve)
        assert (float(row.margin) >= 0.0) == np.isnan(float(row.first_crossing))
    assert "beyond" in found.status.values
    # US Navy: oxygen bottles not below 100 psig [read]; 150 bar lasts.
    row = found.sel(limit="oxygen_bottle_usn")
    assert str(row.status.values) == "within"
    assert float(row.worst) == pytest.approx(float(left.pressure_left.sel(cylinder="oxygen")[-1]), rel=1e-12)
    assert float(row.limit_value) == pytest.approx(114.7 * 6.894757, rel=1e-6)
    assert str(
        stock_review(dive(), tanks(), rule, Demand(25.0)).sel(limit="oxygen_bottle_usn").reason.values
    ) == ("made for patients and attendants")


def test_an_oxygen_bottle_below_its_lowest_pressure() -> None:
    session = Exposure.start("oxygen", pressure="2.8 atm").stay(60)
    tank = Cylinder("oxygen", 10.0, "150 bar")
    found = stock_review(session, [tank], Reserve(), Demand(surface_rate=12.0), role="patient")
    row = found.sel(limit="oxygen_bottle_usn")
    expected = cylinder_duration("150 bar", "114.7 psi", 12.0, 2.8 * 101.325, "oxygen", 10.0)
    assert str(row.status.values) == "beyond"
    assert float(row.first_crossing) == pytest.approx(expected, rel=1e-6)
    assert float(row.time_beyond) == pytest.approx(60.0 - expected, rel=1e-6)


@pytest.mark.parametrize(
    ("call", "error", "match"),
    [
        (lambda: consumption(Exposure.start("air")), ExposureError, "no piece"),
        (lambda: consumption("air"), TypeError, "an Exposure or a Plan"),
        (
            lambda: consumption(Exposure.start("air").name("work").stay(1)),
            ExposureError,
            r"piece 1 \(air, part 'work'\) has no demand: give surface_rate= or ventilation_btps=",
        ),
        (
            lambda: stock(dive(), tanks()[:2], None, Demand(20.0)),
            ExposureError,
            "oxygen is used and no cylinder holds it; the cylinders hold trimix 17/48, nitrox 48",
        ),
        (lambda: stock(dive(), [*tanks(), tanks()[0]], None, Demand(20.0)), gp.GasphysError, "two cylinders"),
        (lambda: stock(dive(), tanks(), None, Demand(20.0), at=[99.0]), ExposureError, "within 0 to 46 min"),
        (
            lambda: stock_review(dive(), tanks(), Reserve(), Demand(20.0), role="nurse"),
            gp.GasphysError,
            "role",
        ),
        (lambda: Demand(surface_rate=20.0, ventilation_btps=20.0), RangeError, "not both"),
        (lambda: Demand(surface_rate=-1.0), RangeError, "surface_rate"),
        (lambda: Demand(surface_rate={"": "20 kPa"}), UnitError, "surface_rate"),
        (lambda: Demand(persons=0), RangeError, "persons = 0"),
        (lambda: Demand(persons=float("nan")), RangeError, "persons = nan"),
        (lambda: Reserve(share=1.0), RangeError, "below 1"),
        (lambda: Reserve(share=float("nan")), RangeError, "share = nan"),
        (lambda: Reserve(persons=-1), RangeError, "must not be negative"),
        (lambda: Reserve(minutes=2), RangeError, "needs persons="),
        (
            lambda: Reserve(persons=2, until="20 msw"),
            UnitError,
            "write 'switch', 'surface' or an ambient pressure",
        ),
        (lambda: Reserve(persons=2, until=1e9), RangeError, "ambient_pressure"),
    ],
)
def test_what_cannot_be_says_why(call: Any, error: type[Exception], match: str) -> None:
    with pytest.raises(error, match=match):
        call()


def test_too_many_mixtures_are_refused() -> None:
    shares = np.linspace(0.21, 0.5, 70)
    gas = xr.DataArray(
        [shares, 1.0 - shares], dims=("gas", "mix"), coords={"gas": ["O2", "N2"]}, attrs={"units": "1"}
    )
    with pytest.raises(ExposureError, match="70 different mixtures"):
        consumption(Exposure.start(gas).stay(1), Demand(surface_rate=20.0))
    few = consumption(Exposure.start(gas.isel(mix=slice(0, 3))).stay(1), Demand(surface_rate=20.0))
    # Each scenario uses its own mixture and nothing of the others.
    assert (np.count_nonzero(few.amount_used.values[..., -1], axis=0) == 1).all()


def test_words_of_a_reserve() -> None:
    assert str(Reserve()) == "keep nothing back"
    assert str(Reserve(share=1.0 / 3.0)) == "keep 33.33 % of each gas"
    assert str(Reserve(persons=1, until="surface")) == "keep enough for 1 person, the way to the end"
    assert str(Reserve(persons=3, until="2 bar", demand=Demand(ventilation_btps=40.0))) == (
        "keep enough for 3 persons at 40 L/min BTPS each, the way to 200 kPa"
    )


def test_datasets_can_be_saved(tmp_path: Any) -> None:
    rule = Reserve(persons=2, minutes=2, demand=Demand(surface_rate=30.0))
    for name, ds in (
        ("used", consumption(dive(), Demand(20.0))),
        ("left", stock(dive(), tanks(), rule, Demand(20.0))),
        ("review", stock_review(dive(), tanks(), rule, Demand(20.0))),
    ):
        assert gp.quantities.CAUTION in ds.attrs["comment"]
        for engine in ("scipy", "h5netcdf"):
            path = tmp_path / f"{name}_{engine}.nc"
            ds.to_netcdf(path, engine=engine)
            with xr.open_dataset(path, engine=engine) as back:
                xr.testing.assert_identical(back.load(), ds)


def test_free_gas_is_counted_as_real_gas() -> None:
    used = consumption(Exposure.start("helium").stay(10), Demand(surface_rate=20.0))
    assert float(used.free_gas_used[0, -1]) == pytest.approx(200.0, rel=1e-9)
    held = stock(Exposure.start("helium").stay(1), [Cylinder("helium", 10.0, "200 bar")], None, Demand(20.0))
    assert float(held.free_gas_left[0, 0]) == pytest.approx(
        real_gas.free_gas_volume("200 bar", "helium", 10.0), rel=1e-9
    )
