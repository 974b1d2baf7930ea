"""The loss table against ascents planned by hand: cut, switched, planned without the gas, added up.

No loss table is published that we know of: every cell is made a second time with the public functions.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys import Exposure, ascent
from gasphys.errors import ExposureError, RangeError
from gasphys.plots import loss_table_figure
from gasphys.supply import Cylinder, Demand, consumption, loss_table, loss_text, stock

GASES = [("trimix 17/48", 56), ("nitrox 48", 20), ("oxygen", 6)]
WHO = Demand(surface_rate=18.0)


def bottom(minutes: float = 19.0) -> Exposure:
    return Exposure.start("trimix 17/48").travel(depth=56, minutes=3).stay(minutes)


def tanks() -> list[Cylinder]:
    return [
        Cylinder("trimix 17/48", 12.0, "220 bar", count=2),
        Cylinder("nitrox 48", 11.0, "200 bar"),
        Cylinder("oxygen", 7.0, "200 bar"),
    ]


@pytest.fixture(scope="module")
def table() -> xr.Dataset:
    return loss_table(bottom(), GASES, tanks(), [10.0, 22.0, 30.0], WHO)


def left_at_the_end(exposure: Exposure, gas: str) -> float:
    """Free liters by the public functions: what the cylinders give, less what is used."""
    used = consumption(exposure, WHO)
    (tank,) = (t for t in tanks() if str(t.gas) == gas)
    if gas not in used.supply_gas.values:
        spare = stock(exposure, tanks(), None, WHO)
        return float(spare.amount_left.sel(cylinder=gas)[-1] * spare.free_liters_per_mole.sel(cylinder=gas))
    pieces = [k for k in range(len(exposure.part)) if exposure.gas_name(k) == gas]
    deepest = max(
        float(exposure.columns[end][k]) for k in pieces for end in ("start_pressure", "end_pressure")
    )
    liters = float((used.free_gas_used / used.amount_used).sel(supply_gas=gas)[-1])
    give = liters * (tank.amount - tank.content(deepest))
    return give - float(used.free_gas_used.sel(supply_gas=gas)[-1])


def cell(ds: xr.Dataset, lost: str, moment: float, gas: str) -> float:
    return float(ds.free_gas_left.sel(lost=lost, moment=moment, supply_gas=gas))


def test_nothing_lost_is_the_plan(table: xr.Dataset) -> None:
    whole = ascent.plan(bottom(), GASES)
    row = table.sel(lost="nothing")
    np.testing.assert_allclose(row.surface_time.values, whole.total_time, rtol=1e-12)
    for gas, _ in GASES:
        for moment in table.moment.values:
            assert cell(table, "nothing", moment, gas) == pytest.approx(
                left_at_the_end(whole.exposure, gas), rel=1e-9
            )
    assert table.lost.values.tolist() == ["nothing", "trimix 17/48", "nitrox 48", "oxygen"]
    assert not table.reason.sel(lost="nothing").values.any()


def test_a_decompression_gas_lost_on_the_bottom(table: xr.Dataset) -> None:
    """Leaving at once, planned without it from where one is."""
    for lost in ("nitrox 48", "oxygen"):
        for moment in (10.0, 22.0):
            again = ascent.plan(bottom(moment - 3.0), GASES, without=lost)
            assert float(table.surface_time.sel(lost=lost, moment=moment)) == pytest.approx(
                again.total_time, rel=1e-9
            )
            for gas, _ in GASES:
                if gas == lost:
                    assert np.isnan(cell(table, lost, moment, gas))
                else:
                    assert cell(table, lost, moment, gas) == pytest.approx(
                        left_at_the_end(again.exposure, gas), rel=1e-8
                    )


def test_the_gas_being_breathed_is_replaced_by_one_that_may_be(table: xr.Dataset) -> None:
    """At 30 min one breathes nitrox 48 at 10 to 12 msw; without it, trimix, which was good to 56 msw."""
    whole = ascent.plan(bottom(), GASES).exposure
    assert whole.gas_name(int(np.searchsorted(whole.pieces().times, 30.0)) - 1) == "nitrox 48"
    pressure = float(np.interp(30.0, whole.pieces().times, _edges(whole)))
    # The same past, piece by piece, then the plan from there on trimix.
    past = Exposure.start("trimix 17/48")
    times = whole.pieces().times
    for k in range(len(whole.part)):
        if times[k] >= 30.0 - 1e-9:
            break
        minutes = min(times[k + 1], 30.0) - times[k]
        if minutes <= 0.0:
            continue
        end = float(np.interp(times[k] + minutes, times, _edges(whole)))
        past = past.switch(whole.gas_name(k)).travel(pressure=end, minutes=minutes)
    assert past.pressure == pytest.approx(pressure, rel=1e-9)
    again = ascent.plan(past.switch("trimix 17/48"), [GASES[0], GASES[2]])
    assert float(table.surface_time.sel(lost="nitrox 48", moment=30.0)) == pytest.approx(
        again.total_time, rel=1e-9
    )
    for gas in ("trimix 17/48", "oxygen"):
        assert cell(table, "nitrox 48", 30.0, gas) == pytest.approx(
            left_at_the_end(again.exposure, gas), rel=1e-8
        )
    assert float(table.moment_depth.sel(moment=30.0)) == pytest.approx((pressure - 101.325) / 10.0, abs=1e-6)


def _edges(exposure: Exposure) -> Any:
    p = exposure.pieces()
    return np.append(p.start_pressure, p.end_pressure[-1])


def test_where_nothing_else_may_be_breathed_there_is_no_answer(table: xr.Dataset) -> None:
    for moment in (10.0, 22.0):
        row = table.sel(lost="trimix 17/48", moment=moment)
        assert str(row.reason.values) == "nothing else may be breathed at 56 msw"
        assert np.isnan(float(row.least_left))
        assert np.isnan(float(row.surface_time))
        assert np.isnan(row.free_gas_left.values).all()
    assert not str(table.reason.sel(lost="trimix 17/48", moment=30.0).values)
    # With a gas listed for that depth there is one.
    more = loss_table(
        bottom(),
        [("trimix 17/47", 56), *GASES[1:]],
        [*tanks(), Cylinder("trimix 17/47", 12.0, "200 bar")],
        [22.0],
        WHO,
    )
    row = more.sel(lost="trimix 17/48", moment=22.0)
    assert not str(row.reason.values)
    assert float(row.free_gas_left.sel(supply_gas="trimix 17/47")) > 0.0


def test_the_bottom_gas_need_not_be_listed() -> None:
    listed = loss_table(bottom(), GASES, tanks(), [22.0, 30.0], WHO)
    not_listed = loss_table(bottom(), GASES[1:], tanks(), [22.0, 30.0], WHO)
    for name in ("least_left", "surface_time"):
        for lost in listed.lost.values:
            np.testing.assert_allclose(
                not_listed[name].sel(lost=lost).values, listed[name].sel(lost=lost).values, rtol=1e-9
            )


def test_a_spare_gas_is_for_what_would_have_been_breathed(table: xr.Dataset) -> None:
    spare = loss_table(
        bottom(),
        GASES,
        [*tanks(), Cylinder("nitrox 47", 5.0, "200 bar")],
        [22.0, 30.0],
        WHO,
        spare=[("nitrox 47", 18)],
    )
    # The bottom gas is not breathed any more at 30 min; nitrox 48 is.
    for lost, moment, used in (
        ("trimix 17/48", 30.0, False),
        ("nitrox 48", 30.0, True),
        ("nothing", 22.0, False),
    ):
        row = spare.sel(lost=lost, moment=moment)
        full = spare.free_gas_left.sel(lost="nothing", moment=22.0, supply_gas="nitrox 47")
        assert (float(row.free_gas_left.sel(supply_gas="nitrox 47")) < float(full) - 10.0) is used
        if not used:
            assert float(row.surface_time) == float(table.surface_time.sel(lost="nothing", moment=22.0))


def test_the_cell_is_the_gas_that_is_shortest(table: xr.Dataset) -> None:
    for lost in table.lost.values:
        for moment in table.moment.values:
            one = table.sel(lost=lost, moment=moment)
            if str(one.reason.values):
                continue
            assert float(one.least_left) == np.nanmin(one.free_gas_left.values)
            assert float(one.free_gas_left.sel(supply_gas=str(one.least_gas.values))) == float(one.least_left)
            assert str(one.least_gas.values) != lost


def test_what_is_missing_is_negative_and_said() -> None:
    small = [*tanks()[:2], Cylinder("oxygen", 1.0, "40 bar")]
    ds = loss_table(bottom(), GASES, small, [22.0], WHO)
    short = float(ds.least_left.sel(lost="nothing")[0])
    assert short < 0.0
    assert f"missing {-short:.0f} L oxygen" in loss_text(ds)
    words = [t.get_text() for t in loss_table_figure(ds).axes[0].texts]
    assert f"missing {-short:.0f} L" in words


def test_default_moments_are_leaving_and_switching() -> None:
    ds = loss_table(bottom(), GASES, tanks(), demand=WHO)
    whole = ascent.plan(bottom(), GASES).exposure
    assert ds.moment.values[0] == 22.0
    for when, gas in zip(ds.moment.values[1:], ("nitrox 48", "oxygen"), strict=True):
        piece = int(np.argmin(np.abs(whole.pieces().times - when)))
        assert whole.gas_name(piece) == gas
        assert whole.gas_name(piece - 1) != gas


def test_a_loop_is_lost_like_a_gas() -> None:
    """D-2 of the invented scenario: a loop at 130 kPa, open circuit carried for the way up."""
    loop = (
        Exposure.start("trimix 17/48", o2_uptake_stpd=1.5)
        .loop(130.0, "trimix 17/48")
        .travel(depth=56, minutes=3)
        .stay(19)
    )
    carried = [*tanks(), Cylinder("trimix 17/47", 12.0, "220 bar")]
    spare = [("trimix 17/47", 56), *GASES[1:]]
    who = Demand(surface_rate=18.0, o2_uptake_stpd=1.5)
    ds = loss_table(loop, [], carried, [22.0], who, spare=spare)
    name = "loop at 130 kPa, diluent trimix 17/48"
    assert name in ds.lost.values
    lost, kept = ds.sel(lost=name, moment=22.0), ds.sel(lost="nothing", moment=22.0)
    assert not str(lost.reason.values)
    # On open circuit the bottom gas is breathed, on the loop it is not.
    for row, used in ((lost, True), (kept, False)):
        full = carried[3].amount * float(stock(loop, carried, None, WHO).free_liters_per_mole[3])
        assert (float(row.free_gas_left.sel(supply_gas="trimix 17/47")) < full - 100.0) is used
    # Without a spare gas that is not breathed, the loop goes on as planned.
    same = ds.sel(lost="nitrox 48", moment=22.0)
    assert float(same.surface_time) == float(kept.surface_time)
    assert np.isnan(float(same.free_gas_left.sel(supply_gas="nitrox 48")))


@pytest.mark.parametrize("model", ["workman_1965", "yount_hoffman_1986"])
def test_by_other_models(model: str) -> None:
    air = Exposure.start("air").travel(depth=40, minutes=2).stay(20)
    ds = loss_table(
        air,
        [("oxygen", 6)],
        [Cylinder("air", 15.0, "220 bar", count=2), Cylinder("oxygen", 5.0, "150 bar")],
        [22.0],
        WHO,
        model=model,
    )
    again = ascent.plan(air, [], model)
    assert float(ds.surface_time.sel(lost="oxygen")[0]) == pytest.approx(again.total_time, rel=1e-9)
    assert model in ds.attrs["source"]


@pytest.mark.parametrize(
    ("call", "error", "match"),
    [
        (lambda: loss_table(bottom(), GASES, tanks(), [], WHO), RangeError, "moments is empty"),
        (
            lambda: loss_table(bottom(), GASES, tanks(), [500.0], WHO),
            RangeError,
            "not between start and surface",
        ),
        (
            lambda: loss_table(bottom(), GASES, tanks()[:2], [22.0], WHO),
            ExposureError,
            "oxygen is used and no cyl",
        ),
        (lambda: loss_table(bottom(), GASES, tanks(), [22.0]), ExposureError, "has no demand"),
        (
            lambda: loss_table(
                Exposure.start("air").travel(depth=xr.DataArray([20.0, 30.0], dims="d"), minutes=2),
                [],
                tanks(),
                [1.0],
                WHO,
            ),
            ExposureError,
            "one scenario",
        ),
    ],
)
def test_what_cannot_be_says_why(call: Any, error: type[Exception], match: str) -> None:
    with pytest.raises(error, match=match):
        call()


def test_it_can_be_saved(table: xr.Dataset, tmp_path: Any) -> None:
    assert gp.quantities.CAUTION in table.attrs["comment"]
    for engine in ("scipy", "h5netcdf"):
        path = tmp_path / f"{engine}.nc"
        table.to_netcdf(path, engine=engine)
        with xr.open_dataset(path, engine=engine) as back:
            xr.testing.assert_identical(back.load(), table)
