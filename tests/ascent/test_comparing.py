"""Ascents side by side: when each depth is left, what the difference costs, each judged by the others."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys import Exposure, ascent, doses, tissues
from gasphys.ascent.comparing import beyond
from gasphys.ascent.following import follow
from gasphys.errors import ExposureError, UnknownNameError, ValidityError
from gasphys.quantities import CAUTION

AIR = Exposure.start("air").travel(depth=40.0, rate=20.0).stay(25.0)
MODELS = ("buhlmann_1995_c", "us_navy_1957", "thalmann_vval18", "boycott_1908")
TRIMIX = Exposure.start("trimix 17/48").travel(depth=56.0, rate=20.0).stay(19.2)
GASES = [("nitrox 48", 20.0), ("oxygen", 6.0)]


@pytest.fixture(scope="module")
def found() -> ascent.Comparison:
    return ascent.compare_ascents(AIR, models=[*MODELS, "rogers_powell_1994"])


def test_plans_are_those_of_each_model_alone(found: ascent.Comparison) -> None:
    assert list(found.plans) == list(MODELS)
    for name, one in found.plans.items():
        alone = ascent.plan(AIR, model=name)
        xr.testing.assert_identical(one.stops, alone.stops)
    assert list(found.refused) == ["rogers_powell_1994"]
    assert "gives no stops" in found.refused["rogers_powell_1994"]


def test_depths_are_left_when_the_stops_say(found: ascent.Comparison) -> None:
    ds = found.passing
    assert ds.depth_edge.values.tolist() == [40.0, 15.0, 12.0, 9.0, 6.0, 3.0, 0.0]
    for name, one in found.plans.items():
        mine = ds.sel(model=name)
        assert float(mine.leave_after[0]) == 0.0
        assert float(mine.leave_after[-1]) == pytest.approx(one.ascent_time, rel=1e-12)
        assert (np.diff(mine.leave_after) > 0.0).all()
        for k in range(one.stops.sizes["stop"]):
            at = mine.sel(depth_edge=one.stops.depth.values[k])
            assert float(at.leave_after) == pytest.approx(float(one.stops.leave_time[k]) - 27.0, abs=1e-9)
            assert float(at.stop_half_time) == float(one.stops.controlling_half_time[k])
    # Without a stop a depth is left when it is passed: 9 msw/min from 40 to 15 msw.
    assert float(ds.leave_after.sel(model="us_navy_1957", depth_edge=15.0)) == pytest.approx(
        25.0 / 9.0, abs=1e-9
    )
    assert np.isnan(ds.stop_half_time.sel(model="us_navy_1957", depth_edge=15.0))


def test_costs_are_the_oxygen_dose_and_the_gas_of_the_way(found: ascent.Comparison) -> None:
    """Dose by the dose module over the ascent alone; gas as the integral of pressure, by quadrature."""
    ds = ascent.compare_ascents(TRIMIX, GASES, ["buhlmann_1995_c", "workman_1965"]).passing
    for name in ds.model.values:
        one = ascent.plan(TRIMIX, GASES, str(name))
        whole, before = (
            float(doses.oxygen(e, ["uptd"], count="all").dose[0]) for e in (one.exposure, TRIMIX)
        )
        end = ds.sel(model=name).isel(depth_edge=-1)
        assert float(end.uptd) == pytest.approx(whole - before, rel=1e-9)
        times = np.linspace(TRIMIX.duration, one.total_time, 40001)
        view = one.exposure.to_dataset(at=times).sel(time=slice(TRIMIX.duration - 1e-9, None))
        spent = np.trapezoid(view.ambient_pressure.values, view.time.values) / 101.325
        assert float(end.gas) == pytest.approx(spent, rel=1e-6)


def test_bands_name_the_latest_and_what_it_costs(found: ascent.Comparison) -> None:
    ds, after = found.bands, found.passing.leave_after
    assert ds.from_depth.values.tolist() == [40.0, 15.0, 12.0, 9.0, 6.0, 3.0]
    for k in range(ds.sizes["band"]):
        row = ds.isel(band=k)
        column = after.sel(depth_edge=float(row.to_depth))
        assert float(row.earliest) == float(column.min())
        assert float(row.latest) == float(column.max())
        assert float(column.sel(model=str(row.latest_model.values))) == float(row.latest)
        assert float(column.sel(model=str(row.earliest_model.values))) == float(row.earliest)
        assert float(row.more_minutes) == pytest.approx(float(row.latest) - float(row.earliest), abs=1e-12)
    assert ds.latest_model.values.tolist() == ["boycott_1908"] * 4 + ["thalmann_vval18"] * 2
    assert ds.latest_half_time.values[:-1].tolist() == [5.0, 10.0, 10.0, 20.0, 40.0]


def test_every_model_keeps_its_own_limit(found: ascent.Comparison) -> None:
    ds = found.judgment
    assert ds.ascent.values.tolist() == list(MODELS)
    assert ds.model.values.tolist() == [*MODELS, "rogers_powell_1994"]
    for name in MODELS:
        own = ds.sel(ascent=name, model=name)
        assert float(own.minutes_beyond) == 0.0
        assert 0.9 < float(own.worst_ratio) <= 1.0 + 1e-9
        assert str(own.status.values) == "within"
    assert (ds.minutes_beyond >= ds.beyond_at_surface).all()
    assert ((ds.minutes_beyond > 0.0) == (ds.status == "beyond")).all()
    assert ((ds.worst_ratio > 1.0 + 1e-9) == (ds.status == "beyond")).all()
    # The longest ascent of the shallowest stops passes another model's limit on the way, not at the surface.
    cell = ds.sel(ascent="thalmann_vval18", model="buhlmann_1995_c")
    assert float(cell.minutes_beyond) > 3.0
    assert float(cell.beyond_at_surface) == 0.0


@pytest.mark.parametrize(
    "judge", ["buhlmann_1995_c", "us_navy_1957", "thalmann_vval18", "rogers_powell_1994"]
)
def test_minutes_beyond_by_counting_instants(judge: str) -> None:
    """The cell again from the sampled Dataset of `tensions`, at 40 instants a minute."""
    dive = AIR.travel(depth=3.0, rate=9.0).stay(8.0).travel(depth=0.0, rate=9.0)
    minutes, surface, ratio, when = beyond(dive, tissues.load(judge), AIR.duration)
    whole = dive.then(120.0)
    times = np.arange(0.0, whole.duration, 1.0 / 40.0)
    ds = tissues.tensions(whole, judge, at=times)
    share = ds.limit_fraction.fillna(0.0).max("compartment")
    if tissues.load(judge).surfacing_only:
        share = share.where(ds.ambient_pressure <= 101.325 * (1.0 + 1e-9), 0.0)
    over = (share > 1.0 + 1e-9).values
    middle = 0.5 * np.diff(ds.time.values) * (over[:-1].astype(float) + over[1:])
    assert minutes == pytest.approx(middle.sum(), abs=0.06)
    assert surface == pytest.approx(middle[ds.time.values[:-1] >= dive.duration - 1e-9].sum(), abs=0.06)
    assert ratio == pytest.approx(float(share.max()), rel=2e-3)
    assert when == pytest.approx(float(ds.time[int(np.argmax(share.values))]), abs=0.3)
    assert minutes > 1.0


def test_who_refuses_does_not_judge() -> None:
    found = ascent.compare_ascents(TRIMIX, GASES, ["buhlmann_1995_c", "us_navy_1957"])
    cell = found.judgment.sel(ascent="buhlmann_1995_c", model="us_navy_1957")
    assert str(cell.status.values) == "not judged"
    assert "helium" in str(cell.reason.values)
    assert np.isnan(cell.minutes_beyond)


def test_a_bubble_model_judges_with_the_gradients_of_its_last_pass() -> None:
    found = ascent.compare_ascents(TRIMIX, GASES, ["buhlmann_1995_c", "yount_hoffman_1986"])
    ds = found.judgment
    own = ds.sel(ascent="yount_hoffman_1986", model="yount_hoffman_1986")
    assert float(own.minutes_beyond) == 0.0
    assert 0.9 < float(own.worst_ratio) <= 1.0
    # Its first stop is deeper, so that the other's ascent passes its limit on the way.
    other = ds.sel(ascent="buhlmann_1995_c", model="yount_hoffman_1986")
    assert float(other.worst_ratio) > 1.0
    stops = {name: float(one.stops.depth[0]) for name, one in found.plans.items()}
    assert stops["yount_hoffman_1986"] > stops["buhlmann_1995_c"]


def test_the_start_counts() -> None:
    """Tissues of someone who lives high take longer to fill: no ascent is longer."""
    high = ascent.compare_ascents(AIR, models=MODELS[:2], initial=80.0)
    for name in MODELS[:2]:
        assert high.plans[name].ascent_time <= ascent.plan(AIR, model=name).ascent_time
    mixed = ascent.compare_ascents(AIR, models=MODELS[:2], initial={"us_navy_1957": 80.0})
    assert mixed.plans["us_navy_1957"].ascent_time == high.plans["us_navy_1957"].ascent_time
    assert mixed.judgment.minutes_beyond.sel(ascent="us_navy_1957", model="us_navy_1957") == 0.0


def test_datasets_say_who_and_come_back(found: ascent.Comparison, tmp_path: Any) -> None:
    ds = found.to_dataset()
    ds.to_netcdf(tmp_path / "ascents.nc")
    with xr.open_dataset(tmp_path / "ascents.nc") as back:
        xr.testing.assert_identical(back.load(), ds)
    for one in (ds, found.passing, found.bands, found.judgment, found.control()):
        assert one.attrs["comment"].startswith(CAUTION)
        for name in MODELS:
            assert name in one.attrs["models"]
        assert all(v.attrs.get("units") for v in one.data_vars.values() if v.dtype.kind == "f")
        assert all(v.attrs.get("long_name") for v in one.data_vars.values())


def test_what_cannot_be_compared() -> None:
    with pytest.raises(ExposureError, match="named twice"):
        ascent.compare_ascents(AIR, models=["us_navy_1957", "us_navy_1957"])
    with pytest.raises(ExposureError, match="no model"):
        ascent.compare_ascents(AIR, models=[])
    with pytest.raises(ValidityError, match=r"no model plans this ascent: .*rogers_powell_1994"):
        ascent.compare_ascents(AIR, models=["rogers_powell_1994"])
    depth = xr.DataArray([30.0, 40.0], dims="d", attrs={"units": "msw"})
    many = Exposure.start("air").travel(depth=depth, rate=20.0)
    with pytest.raises(ExposureError, match="one scenario"):
        ascent.compare_ascents(many)
    with pytest.raises(UnknownNameError, match="unknown ascent 'x'"):
        ascent.compare_ascents(AIR, models=["us_navy_1957"]).control("x")
    with pytest.raises(UnknownNameError, match="tissue model"):
        ascent.compare_ascents(AIR, models=["nobody"])


# -- One ascent followed ----------------------------------------------------------------------------


def test_followed_tissues_are_those_of_the_model(found: ascent.Comparison) -> None:
    dive = found.plans["us_navy_1957"].exposure
    at = np.linspace(0.0, dive.duration, 57)
    for name in ("us_navy_1957", "thalmann_vval18", "buhlmann_1995_c"):
        seen, ds = follow(dive, tissues.load(name), at=at), tissues.tensions(dive, name, at=at)
        np.testing.assert_allclose(seen.time, ds.time.values, rtol=1e-12, atol=1e-12)
        np.testing.assert_allclose(seen.pressure, ds.ambient_pressure.values, rtol=1e-12)
        np.testing.assert_allclose(seen.state, ds.tissue_pressure.values, rtol=1e-12)


_DISSOLVED = ("buhlmann_1995_c", "us_navy_1957", "workman_1965")


@pytest.mark.parametrize(
    ("model", "gradients"),
    [(m, g) for m in _DISSOLVED for g in ((1.0, 1.0), (0.5, 0.9))] + [("yount_hoffman_1986", (1.0, 1.0))],
)
def test_a_stop_may_be_left_when_it_says(model: str, gradients: tuple[float, float]) -> None:
    """The instant again from a plan that does not round: with the first stop the same, so is its instant."""
    rules = {"gradient_low": gradients[0], "gradient_high": gradients[1]}
    whole = ascent.plan(AIR, model=model, rules=ascent.Rules(**rules))
    when = ascent.allowed_from(whole)
    leave, length = whole.stops.leave_time.values, whole.stops.duration.values
    assert (when <= leave + 1e-9).all()
    assert (when > leave - 1.0 - 1e-3).all()
    assert (when >= leave - length - 1e-9).all()
    if model != "yount_hoffman_1986":  # its passes hang on the length of the ascent
        exact = ascent.plan(AIR, model=model, rules=ascent.Rules(**rules, whole_minutes=False))
        assert when[0] == pytest.approx(float(exact.stops.leave_time[0]), abs=0.02)


def test_a_stop_for_a_switch_may_be_left_at_once() -> None:
    found = ascent.plan(TRIMIX, GASES, rules=ascent.Rules(switch_minutes=2.0))
    when = ascent.allowed_from(found)
    assert when[0] == pytest.approx(float(found.stops.leave_time[0]) - 2.0)


def test_control_path_says_who_is_in_control_and_how_long_to_wait(found: ascent.Comparison) -> None:
    ds = found.control("us_navy_1957")
    assert ds.attrs["followed"] == "us_navy_1957"
    dive = found.plans["us_navy_1957"].exposure
    for name in ds.model.values:
        twin = tissues.tensions(dive, str(name), at=np.linspace(27.0, dive.duration, 41))
        share = twin.gradient_fraction.where(np.isfinite(twin.gradient_fraction), -np.inf)
        mine = ds.sel(model=name)
        for t in twin.time.values[twin.time.values >= 27.0][1::7]:
            row = mine.interp(time=t) if t not in mine.time else mine.sel(time=t)
            column = share.sel(time=t)
            if t in mine.time and float(column.max()) > 0.0:
                assert float(row.gradient_fraction) == pytest.approx(float(column.max()), rel=1e-9)
                best = str(column.compartment[int(column.argmax("compartment"))].values)
                assert float(row.controlling_half_time) == float(twin.half_time.sel(compartment=best)[0])
        finite = np.isfinite(mine.near_low)
        assert (mine.near_low <= mine.controlling_half_time)[finite].all()
        assert (mine.near_high >= mine.controlling_half_time)[finite].all()
    # At its own stop the wait of the model followed shrinks by a minute a minute and ends before it leaves.
    stop = found.plans["us_navy_1957"].stops
    begin = float(stop.leave_time[0] - stop.duration[0])
    own = ds.sel(model="us_navy_1957").wait
    held = own.where((own.time >= begin + 0.5) & (own.time <= begin + 5.0), drop=True)
    np.testing.assert_allclose(np.diff(held), -np.diff(held.time), rtol=1e-6)
    assert float(own.sel(time=float(stop.leave_time[0]), method="nearest")) == 0.0
    later = ds.wait.sel(model="thalmann_vval18").sel(time=float(stop.leave_time[0]), method="nearest")
    assert float(later) > 40.0


def test_what_a_control_path_cannot_show() -> None:
    dive = ascent.plan(AIR, model="us_navy_1957").exposure
    ds = ascent.control_path(dive, ["us_navy_1957", "kidd_stubbs_1983", "rogers_powell_1994"], since=27.0)
    assert ds.model.values.tolist() == ["us_navy_1957"]
    assert "kidd_stubbs_1983: compartments in series" in ds.attrs["not_shown"]
    assert "rogers_powell_1994" in ds.attrs["not_shown"]


def test_a_wait_that_never_ends() -> None:
    """Air at 9 msw from saturation at 40 msw: the step to the surface is never allowed."""
    rules = ascent.Rules(last_stop=9.0, stop_spacing=9.0)
    dive = (
        Exposure.start("air").travel(depth=40.0, rate=20.0).stay(900.0).travel(depth=9.0, rate=9.0).stay(3.0)
    )
    ds = ascent.control_path(dive, ["buhlmann_1995_c"], rules, since=903.0)
    assert np.isinf(ds.wait[0, -1])


def test_surfacing_can_be_worked_out(found: ascent.Comparison) -> None:
    for name in ("buhlmann_1995_c", "us_navy_1957", "thalmann_vval18"):
        ds = found.surfacing(name)
        told = gp.explain(ds, "limit_fraction")
        assert told.value == pytest.approx(told.stored, rel=1e-12)
        twin = tissues.tensions(found.plans[name].exposure, name).limit_fraction.isel(time=-1)
        assert told.stored == pytest.approx(float(twin.max()), rel=1e-12)
        assert told.steps
