"""The Dataset of :func:`gasphys.tissues.tensions`: its shape, its limits, its refusals."""

from __future__ import annotations

import io
from typing import Any

import numpy as np
import pytest
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st

import gasphys as gp
from gasphys import Exposure, tissues
from gasphys.errors import ExposureError, RangeError, UnknownNameError, ValidityError, ValidityWarning
from gasphys.tissues.kinetics import equilibrium
from gasphys.tissues.tolerance import ceilings, m_values

FSW = 101.325 / 33.0


def dive(gas: Any = "air", depth: float = 30.0) -> Exposure:
    """Return a square dive with time at the surface after it."""
    return Exposure.start(gas).travel(depth=depth, rate=20).stay(25).travel(depth=0, rate=9).stay(30)


@pytest.mark.parametrize("model", tissues.models())
def test_what_a_result_holds(model: str) -> None:
    ds = tissues.tensions(dive(), model, at=[5.0])
    one = tissues.load(model)
    assert ds.tissue_pressure.dims == ("compartment", "inert_gas", "time")
    assert ds.ceiling_pressure.dims == ("time",)
    assert ds.limit_fraction.dims == ds.gradient_fraction.dims == ds.m_value.dims == ("compartment", "time")
    assert ds.half_time.dims == ds.final.dims == ds.initial.dims == ("compartment", "inert_gas")
    assert ds.compartment.dtype.kind == "U"
    assert ds.compartment.values.tolist() == list(one.compartments)
    assert 5.0 in ds.time.values
    for name, variable in ds.data_vars.items():
        assert "long_name" in variable.attrs, name
        if variable.dtype.kind == "f":
            assert variable.attrs["units"], name
    for attrs in (ds.attrs, *(v.attrs for v in ds.variables.values())):
        assert all(isinstance(v, (str, int, float)) and not isinstance(v, bool) for v in attrs.values())
    for key in (
        "title",
        "source",
        "references",
        "history",
        "comment",
        "Conventions",
        "provenance",
        "does_not_claim",
    ):
        assert ds.attrs[key]
    assert one.digest in ds.attrs["source"]
    assert ds.attrs["comment"] == gp.quantities.CAUTION
    np.testing.assert_array_equal(ds.tissue_pressure.isel(time=0).values, ds.initial.values)
    np.testing.assert_array_equal(ds.tissue_pressure.isel(time=-1).values, ds.final.values)
    assert one.kinetics == "serial" or (ds.half_time > 0.0).all()


@pytest.mark.parametrize("engine", ["scipy", "h5netcdf"])
def test_a_result_survives_a_file(engine: str, tmp_path: Any) -> None:
    ds = tissues.tensions(dive("trimix 17/48"), "buhlmann_1995_c")
    path = tmp_path / "tensions.nc"
    ds.to_netcdf(path, engine=engine)
    with xr.open_dataset(path, engine=engine) as back:
        xr.testing.assert_identical(back.load(), ds)
    again = tissues.tensions(dive(), "buhlmann_1995_c", initial=back)
    assert np.isfinite(again.final.values).all()


def test_results_of_one_exposure_merge_without_holes() -> None:
    one = dive()
    merged = xr.merge(
        [
            tissues.tensions(one, "buhlmann_1995_c")[["tissue_pressure", "ceiling_pressure"]],
            tissues.window(one)[["oxygen_window"]],
            one.to_dataset()[["ambient_pressure", "breathing_gas_po2"]],
        ],
        combine_attrs="drop",
    )
    assert not any(bool(merged[v].isnull().any()) for v in merged.data_vars)


@pytest.mark.parametrize("model", [m for m in tissues.models() if m not in ("rogers_powell_1994",)])
def test_ceiling_is_where_the_limit_is_just_met(model: str) -> None:
    ds = tissues.tensions(dive(), model)
    one = tissues.load(model)
    states = np.moveaxis(ds.tissue_pressure.values, -1, 0)
    ceiling = ds.ceiling_pressure.values
    total, limit = m_values(one, states, ceiling)
    share = np.nanmax(total / limit, axis=-1)
    np.testing.assert_allclose(share, 1.0, rtol=1e-9)
    names = list(ds.compartment.values)
    for k, control in enumerate(ds.controlling_compartment.values):
        assert np.nanargmax(ceilings(one, states[k])) == names.index(control)
    # Over the limit exactly where the ambient pressure is below the ceiling.
    beyond = (ds.limit_fraction > 1.0 + 1e-9).any("compartment").values
    assert beyond.tolist() == (ds.ambient_pressure.values < ceiling - 1e-6).tolist()
    over = (ds.gradient_fraction > 1.0 + 1e-9).any("compartment").values
    assert over.tolist() == beyond.tolist()


def test_the_limits_of_one_gas_written_out() -> None:
    """p/M and (p - P)/(M - P), a and b typed from the set: compartment 5 of set A, a 0.6667 bar, b 0.8126."""
    ds = tissues.tensions(dive(), "buhlmann_1995_a").sel(compartment="5")
    p, ambient = ds.tissue_pressure.sel(inert_gas="N2").values, ds.ambient_pressure.values
    m = 66.67 + ambient / 0.8126
    np.testing.assert_allclose(ds.m_value, m, rtol=1e-12)
    np.testing.assert_allclose(ds.limit_fraction, p / m, rtol=1e-12)
    np.testing.assert_allclose(ds.gradient_fraction, (p - ambient) / (m - ambient), rtol=1e-9)


def test_mixed_gas_by_tension_and_by_the_smaller_limit() -> None:
    """Compartment 4, N2 1.2 and He 0.8 bar: ceiling 0.855467 bar [computed]; one gas reduces to its own."""
    one = tissues.load("buhlmann_1995_a", compartments=["4"])
    for n2, he, expected in ((120.0, 80.0, 0.855467), (200.0, 0.0, 0.973274), (0.0, 200.0, 0.689219)):
        assert ceilings(one, np.array([[n2, he]]))[0] / 100.0 == pytest.approx(expected, abs=5e-7)
    workman = tissues.load("workman_1965", compartments=["40"])
    total, limit = m_values(
        workman, np.array([[100.0, 0.0], [0.0, 100.0], [60.0, 40.0]])[:, None, :], np.full(3, 101.325)
    )
    np.testing.assert_allclose(total[:, 0], 100.0)
    # 56 fsw on N2, 60 on He; the smaller one where both are there.
    np.testing.assert_allclose(limit[:, 0] / FSW, [56.0, 60.0, 56.0])
    # Ceiling with both: the higher of (100 kPa - a)/dM, dM 1.4 with a 9.8 fsw and 1.2 with a 20.4 fsw.
    both = max((100.0 / FSW - 9.8) / 1.4, (100.0 / FSW - 20.4) / 1.2)
    assert ceilings(workman, np.array([[60.0, 40.0]]))[0] / FSW == pytest.approx(both, rel=1e-12)
    alone = (100.0 / FSW - 20.4) / 1.2
    assert ceilings(workman, np.array([[0.0, 100.0]]))[0] / FSW == pytest.approx(alone, rel=1e-12)
    assert np.isfinite(ceilings(one, np.zeros((1, 2)))).all()
    assert np.isfinite(ceilings(workman, np.zeros((1, 2)))).all()


@pytest.mark.parametrize("model", ["buhlmann_1995_a", "buhlmann_1995_b", "buhlmann_1995_c"])
@settings(max_examples=40)
@given(n2=st.floats(0.0, 500.0), he=st.floats(0.0, 500.0), more=st.floats(0.1, 50.0), c=st.integers(0, 15))
def test_ceiling_rises_with_either_gas_above_small_sums(
    model: str, n2: float, he: float, more: float, c: int
) -> None:
    """Non-decreasing in each tension once the sum exceeds about 0.35 bar; below that it is not."""
    if n2 + he < 40.0:
        return
    one = tissues.load(model)
    base = ceilings(one, np.broadcast_to([n2, he], (16, 2)))[c]
    assert ceilings(one, np.broadcast_to([n2 + more, he], (16, 2)))[c] >= base - 1e-9
    assert ceilings(one, np.broadcast_to([n2, he + more], (16, 2)))[c] >= base - 1e-9


def test_gradient_one_is_the_model_and_zero_no_supersaturation() -> None:
    ds = [tissues.tensions(dive("trimix 17/48"), gradient=g) for g in (1.0, 0.6, 0.0)]
    assert (ds[0].ceiling_pressure <= ds[1].ceiling_pressure).all()
    assert (ds[1].ceiling_pressure <= ds[2].ceiling_pressure).all()
    highest = ds[2].tissue_pressure.sum("inert_gas").max("compartment")
    np.testing.assert_allclose(ds[2].ceiling_pressure, highest, rtol=1e-12)
    with pytest.raises(RangeError, match="gradient"):
        tissues.tensions(dive(), gradient=1.2)


def test_surfacing_values_give_no_ceiling() -> None:
    ds = tissues.tensions(dive(depth=30.0), "rogers_powell_1994")
    over = (ds.limit_fraction > 1.0).any("compartment").values
    assert over.any()
    assert not over.all()
    np.testing.assert_array_equal(np.isnan(ds.ceiling_pressure.values), over)
    np.testing.assert_allclose(ds.ceiling_pressure.values[~over], 101.325)
    at_depth = ds.ambient_pressure.values > 101.4
    assert np.isnan(ds.gradient_fraction.values[:, at_depth]).all()
    assert np.isfinite(ds.gradient_fraction.values[:, ~at_depth]).all()


def test_controlling_half_time() -> None:
    ds = tissues.tensions(dive(), "buhlmann_1995_a")
    for c, half in zip(ds.controlling_compartment.values, ds.controlling_half_time.values, strict=True):
        assert half == float(ds.half_time.sel(compartment=c, inert_gas="N2"))
    assert np.isnan(tissues.tensions(dive(), "kidd_stubbs_1983").controlling_half_time).all()


# -- Explained --------------------------------------------------------------------------------------


@pytest.mark.parametrize("model", ["buhlmann_1995_c", "us_navy_1957", "thalmann_vval18", "boycott_1908"])
def test_a_number_is_explained_by_its_equations(model: str) -> None:
    gas = "trimix 17/48" if model == "buhlmann_1995_c" else "air"
    ds = tissues.tensions(dive(gas), model, at=[3.0, 12.5])
    compartment = str(ds.compartment[1].values)
    for time in ds.time.values:
        found = gp.explain(ds, "ceiling_pressure", time=time)
        assert found.value == pytest.approx(found.stored, rel=1e-12)
        for name in ("limit_fraction", "gradient_fraction", "m_value"):
            found = gp.explain(ds, name, time=time, compartment=compartment)
            assert found.value == pytest.approx(found.stored, rel=1e-12)
            assert found.steps
        gas_name = str(ds.inert_gas[0].values)
        found = gp.explain(ds, "tissue_pressure", time=time, compartment=compartment, inert_gas=gas_name)
        assert found.value == pytest.approx(found.stored, rel=1e-12)
        assert "tissue_pressure" in str(found.steps[-1])


@pytest.mark.parametrize("model", ["thalmann_vval18", "thalmann_vval18m_reconstructed"])
def test_exponential_linear_numbers_are_explained_on_either_branch(model: str) -> None:
    """Each instant from where its branch begins, thresholds included; both branches occur."""
    down = Exposure.start("air", depth_unit="fsw").travel(depth=90, rate=75).stay(60)
    up = down.travel(depth=20, rate=30).stay(25).travel(depth=0, rate=2).stay(400)
    ds = tissues.tensions(up, model, at=np.linspace(1.0, 450.0, 40))
    assert set(np.unique(ds.branch.values)) == {"exponential", "linear"}
    seen = set()
    for time in ds.time.values:
        for compartment in ds.compartment.values:
            found = gp.explain(ds, "tissue_pressure", time=time, compartment=compartment, inert_gas="N2")
            assert found.value == pytest.approx(found.stored, rel=1e-11)
            branch = str(ds.branch.sel(time=time, compartment=compartment).values)
            assert (".linear_tissue_pressure" in str(found)) == (branch == "linear")
            assert ("tissues.washout_threshold" in str(found)) == (branch == "linear")
            p = float(ds.tissue_pressure.sel(time=time, compartment=compartment, inert_gas="N2"))
            # Linear above the threshold, exponential below it, whichever way it came there.
            rest = p - float(ds.end_threshold.sel(time=time))
            assert abs(rest) < 1e-6 or (rest > 0.0) == (branch == "linear")
            seen.add(branch)
    assert seen == {"exponential", "linear"}


def test_serial_numbers_are_explained_by_the_last_stretch() -> None:
    ds = tissues.tensions(dive(), "kidd_stubbs_1983", at=[3.0, 12.5])
    for time in ds.time.values:
        for compartment, flows in (("1", 2), ("2", 2), ("4", 1)):
            found = gp.explain(ds, "tissue_pressure", time=time, compartment=compartment, inert_gas="total")
            assert found.value == pytest.approx(found.stored, rel=1e-10)
            assert len(found.steps) == flows
            assert "tissues.slip_flow" in str(found)
        found = gp.explain(ds, "ceiling_pressure", time=time)
        assert found.value == pytest.approx(found.stored, rel=1e-12)
    # What flows in less what flows out is the rate of the stored pressures.
    fine = tissues.tensions(dive(), "kidd_stubbs_1983", at=[10.0, 10.001])
    found = gp.explain(fine, "tissue_pressure", time=10.0, compartment="2", inert_gas="total")
    inflow, outflow = (float(step.result) for step in found.steps)
    two = fine.tissue_pressure.sel(compartment="2", inert_gas="total")
    rate = (float(two.sel(time=10.001)) - float(two.sel(time=10.0))) / 0.001
    assert inflow - outflow == pytest.approx(rate, rel=1e-3)
    with pytest.raises(gp.errors.GasphysError, match="give compartment="):
        gp.explain(ds, "tissue_pressure", time=3.0, inert_gas="total")


# -- Start and altitude -----------------------------------------------------------------------------


def test_start_states() -> None:
    lake = Exposure.start("air", surface_pressure=85.0).stay(1.0)
    f = tissues.tensions
    # Acclimatized: (Palt - 0.0627 bar) 0.79; just arrived from sea level: sea level's tension.
    np.testing.assert_allclose(f(lake).initial.sel(inert_gas="N2"), (85.0 - 6.27) * 0.79, rtol=1e-12)
    arrived = f(lake, initial="1 atm")
    np.testing.assert_allclose(arrived.initial.sel(inert_gas="N2"), (101.325 - 6.27) * 0.79, rtol=1e-12)
    assert (arrived.final < arrived.initial).sel(inert_gas="N2").all()
    np.testing.assert_array_equal(f(lake, initial=101.325).initial, arrived.initial)
    assert f(lake).attrs["start"].startswith("saturated")
    assert arrived.attrs["start"] == "as given"
    for wrong in (True, [1.0], object(), xr.DataArray([1.0], dims="compartment")):
        with pytest.raises(ExposureError, match="initial"):
            f(lake, initial=wrong)
    with pytest.raises(ExposureError, match="no variable final"):
        f(lake, initial=xr.Dataset())
    with pytest.raises(ExposureError, match="does not hold"):
        f(lake, initial=f(lake, "us_navy_1957"))
    with pytest.raises(RangeError, match="did you mean"):
        f(lake, initial=1.0)
    negative = f(lake).final.copy(data=-f(lake).final.values)
    with pytest.raises(RangeError, match="initial"):
        f(lake, initial=negative)
    inputs = f(lake).final
    before = inputs.copy(deep=True)
    f(lake, initial=inputs)
    xr.testing.assert_identical(inputs, before)


def test_argon_counts_as_nitrogen() -> None:
    whole = tissues.tensions(dive(gp.Gas(oxygen=0.21)))
    apart = tissues.tensions(dive(gp.Gas(oxygen=0.21, argon=0.01)))
    np.testing.assert_allclose(apart.final, whole.final, rtol=1e-12)
    tissues.tensions(dive(gp.Gas.dry_air("cipm_2007")), "kidd_stubbs_1983")


# -- Refusals and flags -----------------------------------------------------------------------------


def test_wrong_input_is_said() -> None:
    with pytest.raises(ExposureError, match="no piece"):
        tissues.tensions(Exposure.start("air"))
    with pytest.raises(UnknownNameError, match="nearest: 'buhlmann_1995_c'"):
        tissues.tensions(dive(), "buhlmann_1995c")


def test_one_refused_scenario_of_a_batch_is_blank() -> None:
    gases = xr.DataArray(
        [[0.21, 0.79, 0.0], [0.21, 0.40, 0.39]],
        dims=("mix", "gas"),
        coords={"mix": ["air", "trimix"], "gas": ["O2", "N2", "He"]},
        attrs={"units": "1"},
    )
    batch = Exposure.start(gases).travel(depth=20.0, minutes=2.0).stay(20.0)
    with pytest.warns(ValidityWarning, match="1 of 2 scenarios are nan"):
        ds = tissues.tensions(batch, "us_navy_1957")
    assert np.isnan(ds.sel(mix="trimix").tissue_pressure).all()
    assert np.isnan(ds.sel(mix="trimix").ceiling_pressure).all()
    assert set(ds.sel(mix="trimix").controlling_compartment.values.ravel()) == {""}
    alone = tissues.tensions(Exposure.start("air").travel(depth=20.0, minutes=2.0).stay(20.0), "us_navy_1957")
    np.testing.assert_array_equal(ds.sel(mix="air").tissue_pressure, alone.tissue_pressure)


def _fsw(depth: float, minutes: float) -> Exposure:
    down = Exposure.start("air", depth_unit="fsw").travel(depth=depth, rate=75)
    return down.stay(minutes - depth / 75.0).travel(depth=0, rate=30)


def test_the_short_deep_range_has_no_limits() -> None:
    f = tissues.tensions
    with pytest.warns(ValidityWarning, match="refused"):
        ds = f(_fsw(120.0, 25.0), "thalmann_vval18m_reconstructed")
    assert np.isfinite(ds.tissue_pressure).all()
    for name in ("ceiling_pressure", "limit_fraction", "gradient_fraction", "m_value"):
        assert np.isnan(ds[name]).all()
    assert "refused" in ds.attrs["flags"]
    with pytest.warns(ValidityWarning, match="doubtful"):
        ds = f(_fsw(120.0, 25.0), "thalmann_vval18")
    assert np.isfinite(ds.ceiling_pressure).all()
    assert "doubtful" in ds.attrs["flags"]
    # Outside the range nothing is said: longer, shallower.
    for depth, minutes in ((120.0, 26.0), (100.0, 30.0), (90.0, 10.0)):
        ds = f(_fsw(depth, minutes), "thalmann_vval18m_reconstructed")
        assert np.isfinite(ds.ceiling_pressure).all()
        assert "flags" not in ds.attrs
    # A second short deep dive after a long shallow one is found.
    both = Exposure.join([_fsw(60.0, 50.0).then(60.0), _fsw(130.0, 20.0)])
    with pytest.warns(ValidityWarning, match="refused"):
        f(both, "thalmann_vval18m_reconstructed")


def test_pressures_beyond_what_a_set_was_made_for() -> None:
    with pytest.warns(ValidityWarning, match="made for up to 709"):
        ds = tissues.tensions(dive(depth=65.0), "boycott_1908")
    assert "made for up to" in ds.attrs["flags"]
    with pytest.warns(ValidityWarning) as caught:
        tissues.tensions(_fsw(200.0, 40.0), "thalmann_vval18")
    assert "583.4 kPa above" in str(caught[0].message)
    with gp.validity("raise"), pytest.raises(ValidityError):
        tissues.tensions(dive(depth=65.0), "boycott_1908")


# -- Logs and several times -------------------------------------------------------------------------


def test_a_recorded_log_is_read_as_it_is() -> None:
    minutes = np.arange(0.0, 40.0, 1.0 / 6.0)
    depth = np.interp(minutes, [0.0, 2.0, 25.0, 33.0, 40.0], [0.0, 24.0, 18.0, 0.0, 0.0])
    text = "time_min,depth_msw,gas\n" + "".join(
        f"{t:.6f},{d:.6f},air\n" for t, d in zip(minutes, depth, strict=True)
    )
    ds = tissues.tensions(Exposure.from_csv(io.StringIO(text)))
    corners = Exposure.start("air").travel(depth=24, minutes=2).travel(depth=18, minutes=23)
    corners = corners.travel(depth=0, minutes=8).stay(float(minutes[-1]) - 33.0)
    whole = tissues.tensions(corners)
    np.testing.assert_allclose(ds.final.values, whole.final.values, rtol=1e-5)


def test_times_that_differ_between_scenarios() -> None:
    stays = xr.DataArray([10.0, 30.0], dims="stay", coords={"stay": [10.0, 30.0]}, attrs={"units": "min"})
    ds = tissues.tensions(Exposure.start("air").travel(depth=30, minutes=2).stay(stays))
    assert "point" in ds.tissue_pressure.dims
    assert ds.time.dims == ("stay", "point")
    state = equilibrium(tissues.load("buhlmann_1995_c"), 101.325)
    np.testing.assert_array_equal(ds.initial.isel(stay=0), state)


# -- Many scenarios, a block at a time --------------------------------------------------------------


@pytest.mark.parametrize(
    "model", ["buhlmann_1995_c", "thalmann_vval18", "kidd_stubbs_1983", "rogers_powell_1994"]
)
def test_chunked_scenarios_stay_lazy(model: str) -> None:
    dask = pytest.importorskip("dask")
    depth = xr.DataArray(np.linspace(10.0, 40.0, 7), dims="depth", attrs={"units": "msw"})
    stay = xr.DataArray([5.0, 20.0, 45.0], dims="stay", attrs={"units": "min"})

    def along(depth: Any, stay: Any) -> Exposure:
        return (
            Exposure.start("air").travel(depth=depth, minutes=2.0).stay(stay).travel(depth=0.0, minutes=4.0)
        )

    def refuse(*_: object, **__: object) -> None:
        raise AssertionError("computed")

    with gp.validity("ignore"):
        expected = tissues.tensions(along(depth, stay), model)
        one = along(depth.chunk(depth=3), stay.chunk(stay=2))
        assert one.chunks == {"depth": (3, 3, 1), "stay": (2, 1)}
        with dask.config.set(scheduler=refuse):
            ds = tissues.tensions(one, model)
        assert ds.tissue_pressure.chunks is not None
        assert ds.tissue_pressure.chunks[:2] == ((3, 3, 1), (2, 1))
        xr.testing.assert_identical(ds.compute(), expected)
        again = tissues.tensions(Exposure.from_dataset(along(depth, stay).to_dataset().chunk(depth=2)), model)
        assert again.final.chunks is not None
        final = again.final.compute().transpose(*expected.final.dims)
        np.testing.assert_allclose(final.values, expected.final.values, rtol=1e-12)


def test_a_refused_scenario_of_a_lazy_batch_is_blank() -> None:
    pytest.importorskip("dask")
    gases = xr.DataArray(
        [[0.21, 0.79, 0.0], [0.21, 0.40, 0.39], [0.32, 0.68, 0.0]],
        dims=("mix", "gas"),
        coords={"mix": ["air", "trimix", "nitrox"], "gas": ["O2", "N2", "He"]},
        attrs={"units": "1"},
    ).chunk(mix=1)
    batch = Exposure.start(gases).travel(depth=20.0, minutes=2.0).stay(20.0)
    with pytest.warns(ValidityWarning, match="1 of 3 scenarios are nan"):
        ds = tissues.tensions(batch, "us_navy_1957")
    assert ds.final.chunks is not None
    assert np.isnan(ds.sel(mix="trimix").final.values).all()
    alone = tissues.tensions(Exposure.start("air").travel(depth=20.0, minutes=2.0).stay(20.0), "us_navy_1957")
    np.testing.assert_array_equal(ds.sel(mix="air").tissue_pressure.values, alone.tissue_pressure.values)
