"""Plans: gases, loops, rules, what cannot be reached, lockstep."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys import Exposure, ascent, tissues
from gasphys.errors import (
    ExposureError,
    NotReachableError,
    RangeError,
    UnknownNameError,
    ValidityError,
    ValidityWarning,
)

from ..tissues.sets import THREE_GASES

MODELS = (
    "buhlmann_1995_c",
    "workman_1965",
    "us_navy_1957",
    "thalmann_vval18",
    "kidd_stubbs_1983",
    "boycott_1908",
    "buhlmann_1983",
)


def bottom(gas: Any = "air", depth: Any = 40.0, minutes: Any = 20.0) -> Exposure:
    """Return an exposure that ends at depth."""
    return Exposure.start(gas).travel(depth=depth, minutes=2.0).stay(minutes)


@pytest.mark.parametrize("model", MODELS)
def test_a_plan_keeps_its_models_limit(model: str) -> None:
    found = ascent.plan(bottom(depth=36.0, minutes=30.0), model=model)
    ds = tissues.tensions(found.exposure, model)
    one = tissues.load(model)
    surfaced = ds.limit_fraction.isel(time=-1).max("compartment")
    if one.tested == ("on_arrival",):
        assert surfaced <= 1.0 + 1e-8
    else:  # tested before leaving: then the tensions on leaving are within the limit at the surface
        before = ds.isel(time=-2)
        total = before.tissue_pressure.sum("inert_gas").values
        m = tissues.tolerance.m_values(one, before.tissue_pressure.values, np.array(101.325))[1]
        assert np.nanmax(total / m) <= 1.0 + 1e-8
    assert found.exposure.pressure == pytest.approx(101.325)
    assert found.total_time == pytest.approx(32.0 + found.ascent_time, rel=1e-12)
    stops = found.stops
    assert (np.diff(stops.depth) < 0.0).all()
    assert (stops.duration > 0.0).all()
    assert (stops.duration == np.round(stops.duration)).all()
    assert (stops.margin >= 0.0).all()
    travel = 36.0 / 9.0
    assert float(stops.duration.sum()) + travel == pytest.approx(found.ascent_time, rel=1e-9)
    assert set(stops.controlling_compartment.values) <= set(one.compartments)


@pytest.mark.parametrize("model", MODELS)
def test_a_minute_less_at_a_stop_is_too_little(model: str) -> None:
    """The last stop is the shortest that serves: one minute less leaves the surface over its limit."""
    found = ascent.plan(bottom(depth=36.0, minutes=30.0), model=model)
    stops, one = found.stops, tissues.load(model)
    assert stops.sizes["stop"] > 0
    exposure = Exposure.start("air").travel(depth=36.0, minutes=2.0).stay(30.0)
    for k in range(stops.sizes["stop"]):
        cut = 1.0 if k == stops.sizes["stop"] - 1 else 0.0
        exposure = exposure.travel(depth=float(stops.depth[k]), rate=9.0).stay(float(stops.duration[k]) - cut)
    leaving = tissues.tensions(exposure, model).final.values
    arrived = tissues.tensions(exposure.travel(depth=0.0, rate=9.0), model).final.values
    tests = {"before_leaving": leaving, "on_arrival": arrived}
    worst = max(
        float(np.nanmax(np.subtract(*tissues.tolerance.m_values(one, tests[t], np.array(101.325)))))
        for t in one.tested
    )
    assert worst > 0.0


def test_no_stop_dives_get_none() -> None:
    """Where the no-stop time says so, for the same rates; a few minutes longer asks for a stop."""
    for model in ("buhlmann_1995_c", "us_navy_1957", "thalmann_vval18", "rogers_powell_1994"):
        limit = tissues.no_stop_time(24.0, "air", model, descent_rate=12.0, ascent_rate=9.0)
        dive = bottom(depth=24.0, minutes=limit - 2.0 - 0.01)
        assert ascent.plan(dive, model=model).stops.sizes["stop"] == 0
        longer = bottom(depth=24.0, minutes=limit - 2.0 + 4.0)
        if model == "rogers_powell_1994":
            with pytest.raises(NotReachableError, match="only surfacing values"):
                ascent.plan(longer, model=model)
        else:
            assert ascent.plan(longer, model=model).stops.sizes["stop"] > 0


# -- Gases ------------------------------------------------------------------------------------------

GASES = [("nitrox 48", 20.0), ("oxygen", 6.0)]


def test_gases_are_switched_to_on_passing_their_depth() -> None:
    found = ascent.plan(bottom("trimix 17/48", 56.0), GASES)
    ds = found.exposure.to_dataset()
    pressure, gas = ds.start_pressure.values, ds.gas_fraction.sel(gas="O2").values
    after = ds.part.values == "ascent"
    for p, f in zip(pressure[after], gas[after], strict=True):
        expected = 0.17 if p > 301.4 else 0.48 if p > 161.4 else 1.0
        assert f == pytest.approx(expected)
    # 20 msw is not a stop and is still the place of the switch.
    assert np.isclose(pressure, 301.325).any()
    assert found.stops.gas.sel(stop=found.stops.sizes["stop"] - 1).item() == "oxygen"


def test_a_lost_gas_costs_time() -> None:
    whole = ascent.plan(bottom("trimix 17/48", 56.0), GASES)
    for lost in ("nitrox 48", gp.Gas(oxygen=1.0)):
        assert ascent.plan(bottom("trimix 17/48", 56.0), GASES, without=lost).total_time > whole.total_time
    with pytest.raises(UnknownNameError, match="nitrox 48, oxygen"):
        ascent.plan(bottom("trimix 17/48", 56.0), GASES, without="nitrox 50")


def test_depth_of_use_by_po2() -> None:
    one = ascent.plan(bottom("trimix 17/48", 56.0), [("nitrox 50", "1.6 bar"), ("oxygen", "1.6 bar")])
    two = ascent.plan(bottom("trimix 17/48", 56.0), [("nitrox 50", 21.8675), ("oxygen", 5.8675)])
    assert one.total_time == pytest.approx(two.total_time, rel=1e-9)


def test_loop_and_bailout() -> None:
    with gp.validity("ignore"):
        loop = (
            Exposure.start("air").loop("1.3 bar", "trimix 10/60").travel(depth=56.0, minutes=3.0).stay(19.0)
        )
        kept = ascent.plan(loop)
        bailed = ascent.plan(loop, [("trimix 17/48", 60.0), *GASES])
        raised = ascent.plan(loop, [(ascent.Loop("1.5 bar", "trimix 10/60"), 15.0)])
    assert set(kept.stops.gas.values) == {"loop at 130 kPa, diluent trimix 10/60"}
    assert np.isfinite(kept.exposure.columns["setpoint"][3:]).all()
    on_the_way = np.array(bailed.exposure.part) == "ascent"
    assert np.isnan(bailed.exposure.columns["setpoint"][on_the_way]).all()
    assert raised.total_time < kept.total_time
    assert "loop at 150 kPa, diluent trimix 10/60" in raised.stops.gas.values


def test_time_for_a_switch_is_taken_where_it_happens() -> None:
    found = ascent.plan(bottom("trimix 17/48", 56.0), GASES, rules=ascent.Rules(switch_minutes=2.0))
    row = found.stops.isel(stop=0)
    assert float(row.depth) == 20.0
    assert float(row.duration) == 2.0
    assert str(row.controlling_compartment.values) == ""
    assert "for the switch" in str(found)
    six = found.stops.where(found.stops.depth == 6.0, drop=True)
    assert six.sizes["stop"] == 1
    assert float(six.duration[0]) >= 2.0


# -- Rules ------------------------------------------------------------------------------------------


def test_defaults_by_depth_unit() -> None:
    assert ascent.Rules().filled("m") == ascent.Rules(ascent_rate=9.0, stop_spacing=3.0, last_stop=3.0)
    assert ascent.Rules().filled("fsw") == ascent.Rules(ascent_rate=30.0, stop_spacing=10.0, last_stop=10.0)


def test_rates_by_band() -> None:
    slow = ascent.plan(bottom(depth=30.0, minutes=5.0), rules=ascent.Rules(ascent_rate={0.0: 1.0, 6.0: 9.0}))
    assert slow.stops.sizes["stop"] == 0
    assert slow.ascent_time == pytest.approx(24.0 / 9.0 + 6.0)


def test_grid_and_last_stop() -> None:
    found = ascent.plan(bottom(minutes=30.0), rules=ascent.Rules(stop_spacing=2.0, last_stop=5.0))
    assert set(found.stops.depth.values) <= {5.0, 7.0, 9.0, 11.0, 13.0, 15.0, 17.0, 19.0}
    assert found.stops.depth[-1] == 5.0


def test_exact_stops_are_the_ones_rounded_up() -> None:
    exact = ascent.plan(bottom(minutes=30.0), rules=ascent.Rules(whole_minutes=False))
    whole = ascent.plan(bottom(minutes=30.0))
    first = 0.0 < float(whole.stops.duration[0]) - float(exact.stops.duration[0]) <= 1.0
    assert first
    assert (np.abs(exact.stops.margin) < 1e-6).all()
    assert exact.total_time < whole.total_time
    longer = ascent.plan(bottom(minutes=30.0), rules=ascent.Rules(shortest_stop=3.0))
    assert (longer.stops.duration >= 3.0).all()


def test_gradients() -> None:
    full = ascent.plan(bottom(minutes=30.0))
    strict = ascent.plan(bottom(minutes=30.0), rules=ascent.Rules(gradient_low=0.5, gradient_high=0.8))
    assert strict.total_time > full.total_time
    assert strict.stops.depth[0] > full.stops.depth[0]
    # A dive that needs no stop by the high gradient gets none, whatever the low one.
    limit = tissues.no_stop_time(20.0, "air", descent_rate=10.0, ascent_rate=9.0)
    short = bottom(depth=20.0, minutes=0.6 * limit)
    assert (
        ascent.plan(short, rules=ascent.Rules(gradient_low=0.3, gradient_high=1.0)).stops.sizes["stop"] == 0
    )


@pytest.mark.parametrize(
    "wrong",
    [
        {"stop_spacing": 0.0},
        {"last_stop": -3.0},
        {"ascent_rate": 0.0},
        {"ascent_rate": {6.0: 9.0}},
        {"gradient_low": 0.0},
        {"gradient_high": 1.2},
        {"gradient_low": 0.9, "gradient_high": 0.8},
        {"shortest_stop": -1.0},
        {"switch_minutes": float("nan")},
    ],
)
def test_impossible_rules(wrong: dict[str, Any]) -> None:
    with pytest.raises(RangeError, match=next(iter(wrong))):
        ascent.Rules(**wrong)


# -- What cannot be planned -------------------------------------------------------------------------


def test_unreachable_is_explained() -> None:
    with pytest.raises(NotReachableError, match="the step to 0 msw is never allowed: compartment 16"):
        ascent.plan(bottom(depth=30.0, minutes=3000.0), rules=ascent.Rules(last_stop=21.0))
    with pytest.raises(ExposureError, match="at or above the surface"):
        ascent.plan(Exposure.start("air").stay(1.0))
    with pytest.raises(ExposureError, match="no piece"):
        ascent.plan(Exposure.start("air"))
    with pytest.raises(ValidityError, match="refuses"):
        ascent.plan(bottom(), [("trimix 21/35", 30.0)], "us_navy_1957")
    with pytest.raises(RangeError, match="negative"):
        ascent.plan(bottom(), [("oxygen", -1.0)])


# -- Lockstep ---------------------------------------------------------------------------------------


@pytest.mark.parametrize("model", ["buhlmann_1995_c", "thalmann_vval18", "us_navy_1957"])
def test_every_scenario_of_a_batch_is_its_single_plan(model: str) -> None:
    depths = xr.DataArray(
        [11.0, 24.0, 33.5, 42.0], dims="d", coords={"d": [11.0, 24.0, 33.5, 42.0]}, attrs={"units": "msw"}
    )
    times = xr.DataArray(
        [10.0, 30.0, 55.0], dims="t", coords={"t": [10.0, 30.0, 55.0]}, attrs={"units": "min"}
    )
    gases = [("nitrox 50", 21.0)]
    rules = ascent.Rules(gradient_low=0.6, gradient_high=0.9)
    with gp.validity("ignore"):
        batch = ascent.plan(bottom("nitrox 28", depths, times), gases, model, rules)
        assert batch.stops.duration.dims == ("d", "t", "stop")
        for d in depths.values:
            for t in times.values:
                alone = ascent.plan(bottom("nitrox 28", float(d), float(t)), gases, model, rules)
                here = batch.stops.sel(d=d, t=t)
                real = here.where(here.duration > 0.0, drop=True)
                assert real.depth.values.tolist() == alone.stops.depth.values.tolist()
                assert real.duration.values.tolist() == alone.stops.duration.values.tolist()
                assert real.gas.values.tolist() == alone.stops.gas.values.tolist()
                assert (
                    real.controlling_compartment.values.tolist()
                    == alone.stops.controlling_compartment.values.tolist()
                )
                np.testing.assert_allclose(
                    real.margin.values.astype(float), alone.stops.margin.values, rtol=1e-6, atol=1e-9
                )
                assert float(batch.ascent_time.sel(d=d, t=t)) == pytest.approx(alone.ascent_time, rel=1e-12)
                assert float(batch.total_time.sel(d=d, t=t)) == pytest.approx(alone.total_time, rel=1e-12)


def test_a_scenario_that_cannot_be_planned_is_blank() -> None:
    times = xr.DataArray([8.0, 3000.0], dims="t", coords={"t": [8.0, 3000.0]}, attrs={"units": "min"})
    with pytest.warns(ValidityWarning, match="1 of 2 ascents cannot be planned"):
        batch = ascent.plan(bottom(depth=30.0, minutes=times), rules=ascent.Rules(last_stop=21.0))
    assert np.isfinite(batch.ascent_time[0])
    assert np.isnan(batch.ascent_time[1])
    assert np.isnan(batch.stops.duration.sel(t=3000.0)).all()


def test_a_plan_prints_when_to_leave() -> None:
    text = str(ascent.plan(bottom("trimix 17/48", 56.0), GASES))
    assert "wait at 6 msw, leave at" in text
    assert "half-time in control; oxygen" in text
    assert text.endswith(gp.quantities.CAUTION)


# -- Sets of other kinds, very long stops ------------------------------------------------------------


def test_a_users_set_of_three_gases_is_planned_with(tmp_path: Path) -> None:
    """Tested before leaving only: at every stop the limit of the next depth is met, a minute earlier not."""
    path = tmp_path / "own.toml"
    path.write_text(THREE_GASES, encoding="utf-8")
    one = tissues.load(path)
    mix = gp.Gas(oxygen=0.18, helium=0.3, argon=0.05)
    found = ascent.plan(bottom(mix, 50.0, 25.0), [("nitrox 50", 21.0)], path)
    assert found.stops.sizes["stop"] > 2
    grid = [*found.stops.depth.values[1:], 0.0]
    for k, target in enumerate(grid):
        if found.stops.depth[k] - target > 3.5:
            continue  # the next stop is further up: several steps were allowed at once
        leave = float(found.stops.leave_time[k])
        ds = tissues.tensions(found.exposure, path, at=[leave - 1.0, leave])
        for time, allowed in ((leave, True), (leave - 1.0, False)):
            state = ds.tissue_pressure.sel(time=time).values
            total, limit = tissues.tolerance.m_values(one, state, np.array(101.325 + 10.0 * target))
            assert bool((total <= limit * (1.0 + 1e-9)).all()) is allowed


def test_a_stop_of_days_is_the_closed_form() -> None:
    """Saturation on air: t = t_half log2((p - PA)/(M - PA)) of the slowest tissue, in whole minutes."""
    one = tissues.load("buhlmann_1995_a", compartments=["16"])
    saturated = Exposure.start("air").travel(depth=20.0, minutes=2.0).stay(20000.0)
    rules = ascent.Rules(stop_spacing=6.0, last_stop=6.0)
    found = ascent.plan(saturated, model=one, rules=rules)
    last = found.stops.isel(stop=-1)
    assert float(last.depth) == 6.0
    assert float(last.duration) > 2000.0
    arrive = float(last.leave_time) - float(last.duration)
    held = tissues.tensions(found.exposure, one, at=[arrive]).tissue_pressure
    p = held.sel(time=arrive, inert_gas="N2", compartment="16").item()
    inert, limit = 0.79 * (161.325 - 6.27), 23.27 + 101.325 / 0.9653
    exact = 635.0 * np.log2((p - inert) / (limit - inert))
    assert float(last.duration) == np.ceil(exact)


def test_what_holds_a_stop_for_ever_is_said_with_the_gas_breathed() -> None:
    deep = bottom(depth=60.0, minutes=3000.0)
    with pytest.raises(NotReachableError, match="on nitrox 30 the step to 0 msw is never allowed"):
        ascent.plan(deep, [("nitrox 30", 30.0)], rules=ascent.Rules(last_stop=21.0, stop_spacing=9.0))
    with pytest.raises(NotReachableError, match=r"kidd_stubbs_1983: .* is never allowed"):
        ascent.plan(
            bottom(depth=60.0, minutes=2000.0),
            model="kidd_stubbs_1983",
            rules=ascent.Rules(last_stop=30.0, stop_spacing=9.0),
        )


def test_a_batch_of_which_nothing_can_be_planned_is_all_blank() -> None:
    times = xr.DataArray([2500.0, 3000.0], dims="t", attrs={"units": "min"})
    with pytest.warns(ValidityWarning, match="2 of 2 ascents cannot be planned"):
        batch = ascent.plan(bottom(depth=30.0, minutes=times), rules=ascent.Rules(last_stop=21.0))
    assert np.isnan(batch.ascent_time).all()


def test_plans_do_not_depend_on_who_is_planned_beside_them() -> None:
    """More scenarios than are looked at together, each as its single plan."""
    rng = np.random.default_rng(5)
    depths = xr.DataArray(rng.uniform(12.0, 60.0, 700), dims="n", attrs={"units": "msw"})
    with gp.validity("ignore"):
        batch = ascent.plan(bottom("trimix 18/40", depths, 20.0), GASES)
        for n in (0, 1, 311, 511, 512, 513, 699):
            alone = ascent.plan(bottom("trimix 18/40", float(depths[n]), 20.0), GASES)
            here = batch.stops.isel(n=n)
            real = here.where(here.duration > 0.0, drop=True)
            assert real.depth.values.tolist() == alone.stops.depth.values.tolist()
            assert real.duration.values.tolist() == alone.stops.duration.values.tolist()
            assert float(batch.ascent_time[n]) == pytest.approx(alone.ascent_time, rel=1e-12)
