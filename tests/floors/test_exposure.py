"""The exposure: both views, building, joining, scenarios, files."""

from __future__ import annotations

import io

import numpy as np
import pytest
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st

from gasphys import Exposure, Gas
from gasphys.errors import (
    ExposureError,
    GasphysError,
    RangeError,
    UnitError,
    UnknownNameError,
    ValidityWarning,
)
from tests.floors.exposures import exposures


def dive() -> Exposure:
    return (
        Exposure.start("trimix 17/48")
        .travel(depth=56, rate=20)
        .stay(19.2)
        .travel(depth=20, rate=9)
        .switch("nitrox 48")
        .stay(2)
        .travel(depth=0, rate=10)
    )


def test_pressures_and_times_by_hand() -> None:
    ds = dive().to_dataset()
    np.testing.assert_allclose(ds.time, [0, 2.8, 22.0, 26.0, 28.0, 30.0], rtol=1e-12)
    np.testing.assert_allclose(
        ds.ambient_pressure, [101.325, 661.325, 661.325, 301.325, 301.325, 101.325], rtol=1e-12
    )
    # A boundary belongs to the piece that begins there: nitrox 48 at 20 msw is 144.6 kPa.
    np.testing.assert_allclose(ds.breathing_gas_po2[3], 0.48 * 301.325, rtol=1e-12)
    np.testing.assert_allclose(
        ds.breathing_gas_inert_pressure.sel(inert_gas="He")[2], 0.48 * 661.325, rtol=1e-12
    )
    assert ds.gas_fraction.sel(gas="N2").values[0] == pytest.approx(0.35, abs=1e-12)


@pytest.mark.parametrize(
    ("unit", "depth", "expected"),
    [("msw", 18.0, 281.325), ("fsw", 33.0, 202.65), ("m", 10.0, 201.325)],
)
def test_depth_units(unit: str, depth: float, expected: float) -> None:
    exposure = Exposure.start("air", depth_unit=unit).travel(depth=depth, minutes=1)
    assert exposure.pressure == pytest.approx(expected, rel=1e-12)


def test_depth_of_a_named_water_and_altitude() -> None:
    lake = Exposure.start("air", surface_pressure=85.0, depth_unit="m", water="fresh").travel(
        depth=38, rate=10
    )
    assert lake.pressure == pytest.approx(85.0 + 38 * 9.80665, rel=1e-12)
    assert lake.duration == pytest.approx(3.8, rel=1e-9)


def test_rate_in_the_depth_unit_and_in_kpa() -> None:
    assert Exposure.start("air", depth_unit="fsw").travel(depth=60, rate=20).duration == pytest.approx(
        3.0, rel=1e-12
    )
    assert Exposure.start("air").travel(pressure=201.325, rate=50).duration == pytest.approx(2.0, rel=1e-12)
    assert Exposure.start("air").travel(pressure="2.4 atm", minutes=10).pressure == pytest.approx(243.18)


def test_loop_is_clamped_and_split() -> None:
    loop = Exposure.start("air").loop("1.3 bar", "trimix 17/48").travel(depth=20, minutes=2).stay(5)
    ds = loop.to_dataset()
    assert ds.sizes["segment"] == 3
    np.testing.assert_allclose(ds.breathing_gas_po2, [101.325, 130.0, 130.0, 130.0], rtol=1e-12)
    # What oxygen leaves is shared as in the diluent: He : N2 = 48 : 35.
    inert = ds.breathing_gas_inert_pressure
    np.testing.assert_allclose(inert.sel(inert_gas="He")[2], (301.325 - 130) * 48 / 83, rtol=1e-12)
    np.testing.assert_allclose(inert.sum("inert_gas") + ds.breathing_gas_po2, ds.ambient_pressure, rtol=1e-12)
    assert np.isnan(ds.setpoint).sum() == 0
    out = loop.open_circuit("air").stay(1).to_dataset()
    assert out.breathing_gas_po2[-1] == pytest.approx(0.21 * 301.325)


def test_diluent_above_setpoint_is_flagged() -> None:
    with pytest.warns(ValidityWarning, match="above the set-point"):
        exposure = Exposure.start("air").loop(70.0, "air").travel(depth=40, minutes=2)
    with pytest.warns(ValidityWarning, match="above the set-point"):
        exposure = exposure.stay(1)
    ds = exposure.to_dataset()
    assert ds.diluent_above_setpoint.values.tolist()[-1] == 1


def test_setpoint_in_bar_without_unit_is_refused() -> None:
    with pytest.raises(RangeError, match=r"setpoint = 1.3 kPa.*did you mean '1.3 bar'"):
        Exposure.start("air").loop(1.3, "air")


@pytest.mark.parametrize(
    ("build", "error", "words"),
    [
        (lambda e: e.travel(depth=10), ExposureError, "minutes= or rate="),
        (lambda e: e.travel(minutes=1), ExposureError, "depth= or pressure="),
        (lambda e: e.travel(depth=10, pressure=200, minutes=1), ExposureError, "depth= or pressure="),
        (lambda e: e.travel(depth=10, minutes=0), ExposureError, "needs time"),
        (lambda e: e.travel(depth=10, rate=-9), RangeError, "must be positive"),
        (lambda e: e.travel(depth=-3, minutes=1), RangeError, "must not be negative"),
        (lambda e: e.travel(depth=float("nan"), minutes=1), RangeError, "must not be negative"),
        (lambda e: e.travel(pressure=2.4, minutes=1), RangeError, "did you mean '2.4 bar' or '2.4 atm'"),
        (lambda e: e.travel(pressure="18 msw", minutes=1), UnitError, "is a depth"),
        (lambda e: e.travel(depth="18 kPa", minutes=1), UnitError, "use pressure="),
        (lambda e: e.stay(-1), RangeError, "duration = -1"),
        (lambda e: e.stay(float("nan")), RangeError, "not a number"),
        (lambda e: e.stay("10 kPa"), UnitError, "measures something else"),
        (lambda e: e.stay([1, 2]), TypeError, "DataArray"),
        (lambda e: e.switch("aire"), UnknownNameError, "nearest: 'air'"),
        (lambda e: e.stay(5).delay(1, at=6), ExposureError, "not within"),
        (lambda e: e.to_dataset(), ExposureError, "no piece"),
        (lambda e: e.stay(1).to_dataset(at=[2.0]), ExposureError, "within 0 to 1"),
        (lambda e: Exposure.join([]), ExposureError, "at least one"),
        (lambda e: Exposure.start("air", depth_unit="meters"), UnknownNameError, "depth unit"),
        (lambda e: Exposure.start("air", water="salt"), UnknownNameError, "water"),
        (lambda e: Exposure.start("air", surface_pressure=1.0), RangeError, "surface_pressure"),
    ],
)
def test_refusals(build, error: type[Exception], words: str) -> None:
    with pytest.raises(error, match=words):
        build(Exposure.start("air"))


def test_every_error_is_a_gasphys_error() -> None:
    assert issubclass(ExposureError, GasphysError)
    assert issubclass(RangeError, ValueError)


def test_depth_as_text_with_another_unit() -> None:
    exposure = Exposure.start("air").travel(depth="60 fsw", minutes=3)
    assert exposure.pressure == pytest.approx(101.325 * (1 + 60 / 33), rel=1e-12)


def test_join_then_delay() -> None:
    whole = Exposure.join([dive().then(60), dive()])
    assert whole.duration == pytest.approx(2 * dive().duration + 60, rel=1e-12)
    assert whole.session == (0,) * 6 + (1,) * 5
    assert whole.part[5] == "interval"
    later = dive().delay(5, at=10)
    assert later.duration == pytest.approx(dive().duration + 5, rel=1e-12)
    ds = later.to_dataset(at=[12.0])
    assert float(ds.ambient_pressure.sel(time=12.0)) == pytest.approx(661.325)
    end = dive().delay(5, at=dive().duration)
    assert end.to_dataset().ambient_pressure.values[-1] == pytest.approx(101.325)
    start = dive().delay(5, at=0)
    assert start.to_dataset().ambient_pressure.values[1] == pytest.approx(101.325)


def test_interval_at_another_pressure_is_named() -> None:
    up = dive().then(120, pressure=85.0)
    assert up.to_dataset().ambient_pressure.values[-1] == 85.0
    assert any("at once" in line for line in up.history)


@settings(max_examples=60, deadline=None)
@given(exposures())
def test_round_trip_through_the_segment_view(exposure: Exposure) -> None:
    ds = exposure.to_dataset()
    assert Exposure.from_dataset(ds).to_dataset().identical(ds)
    # The partial pressures add up, and the clock rises.
    total = ds.breathing_gas_inert_pressure.sum("inert_gas") + ds.breathing_gas_po2
    np.testing.assert_allclose(total, ds.ambient_pressure, rtol=1e-9)
    assert np.all(np.diff(ds.time.values) > 0.0)


@settings(max_examples=40, deadline=None)
@given(exposures(), st.floats(0.0, 1.0))
def test_a_stop_of_no_length_changes_nothing(exposure: Exposure, share: float) -> None:
    cut = exposure._split([share * exposure.duration])
    before = exposure.to_dataset(at=np.linspace(0, exposure.duration, 7))
    after = cut.to_dataset(at=np.linspace(0, exposure.duration, 7))
    for name in ("ambient_pressure", "breathing_gas_po2"):
        expected = before[name].values
        got = after[name].sel(time=before.time, method="nearest").values
        np.testing.assert_allclose(got, expected, rtol=1e-9)


@pytest.mark.parametrize("engine", ["scipy", "h5netcdf"])
def test_netcdf_round_trip(tmp_path, engine: str) -> None:
    loop = Exposure.start("air").loop(130.0, "trimix 17/48").travel(depth=30, minutes=2).stay(5)
    for number, exposure in enumerate((dive(), loop, scenarios())):
        ds = exposure.to_dataset()
        path = tmp_path / f"{engine}{number}.nc"
        ds.to_netcdf(path, engine=engine)
        with xr.open_dataset(path, engine=engine) as back:
            assert back.load().identical(ds)


def scenarios() -> Exposure:
    depth = xr.DataArray([10.0, 30.0], dims="depth", coords={"depth": [10, 30]}, attrs={"units": "msw"})
    stay = xr.DataArray([5.0, 10.0, 15.0], dims="bottom", attrs={"units": "min"})
    return Exposure.start("air").travel(depth=depth, minutes=2).stay(stay).travel(depth=0, rate=10)


def test_each_scenario_is_its_single_run() -> None:
    ds = scenarios().to_dataset()
    assert ds.ambient_pressure.dims == ("depth", "bottom", "point")
    for i, depth in enumerate((10.0, 30.0)):
        for j, stay in enumerate((5.0, 10.0, 15.0)):
            one = Exposure.start("air").travel(depth=depth, minutes=2).stay(stay).travel(depth=0, rate=10)
            single = one.to_dataset()
            np.testing.assert_allclose(ds.time.isel(depth=i, bottom=j), single.time, rtol=1e-12)
            np.testing.assert_allclose(
                ds.breathing_gas_po2.isel(depth=i, bottom=j), single.breathing_gas_po2, rtol=1e-12
            )


def test_scenarios_of_gas_and_setpoint() -> None:
    mix = xr.DataArray(
        [[0.21, 0.79, 0.0], [0.18, 0.37, 0.45]],
        dims=("mix", "gas"),
        coords={"gas": ["O2", "N2", "He"], "mix": ["air", "trimix 18/45"]},
    )
    ds = Exposure.start(mix).travel(depth=20, minutes=2).to_dataset()
    np.testing.assert_allclose(ds.breathing_gas_po2[:, -1], [0.21 * 301.325, 0.18 * 301.325], rtol=1e-12)
    setpoint = xr.DataArray([70.0, 120.0], dims="setpoint_used", attrs={"units": "kPa"})
    loop = (
        Exposure.start("heliox 16/84").loop(setpoint, "heliox 16/84").travel(depth=20, minutes=2).to_dataset()
    )
    np.testing.assert_allclose(loop.breathing_gas_po2.max("point"), [70.0, 120.0], rtol=1e-12)


def test_several_persons_in_one_run() -> None:
    mix = xr.DataArray(
        [[1.0, 0.0], [0.21, 0.79]],
        dims=("person", "gas"),
        coords={"gas": ["O2", "N2"], "person": ["P-01", "A-1"]},
    )
    session = Exposure.start("air").travel(pressure="2.4 atm", minutes=10).switch(mix).stay(30)
    ds = session.to_dataset()
    np.testing.assert_allclose(ds.breathing_gas_po2.sel(person="P-01")[-1], 243.18, rtol=1e-12)
    np.testing.assert_allclose(ds.breathing_gas_po2.sel(person="A-1")[-1], 0.21 * 243.18, rtol=1e-12)


def test_csv_becomes_pieces_and_stays_are_joined() -> None:
    text = "time_min,depth_msw,gas\n0,0,air\n2,18,air\n10,18,air\n30,18,air\n32,0,air\n"
    exposure = Exposure.from_csv(io.StringIO(text))
    assert len(exposure.part) == 3
    assert exposure.duration == 32.0
    assert exposure.to_dataset().ambient_pressure.values[1] == pytest.approx(281.325)
    assert any("surface pressure" in h for h in exposure.history)


def test_sentences() -> None:
    lines = dive().as_text().splitlines()
    assert lines[0] == "start on trimix 17/48 at 101.3 kPa"
    assert "breathe nitrox 48" in lines
    assert "7 more pieces" in Exposure.join([dive()] * 3).as_text(limit=8)


@settings(max_examples=100, deadline=None)
@given(st.floats(0.05, 1.0), st.floats(0.0, 1.0))
def test_gas_names_read_back(oxygen: float, share: float) -> None:
    gas = Gas(oxygen=round(oxygen, 4), helium=round((1 - oxygen) * share, 4) * 0.999)
    assert Gas.parse(str(gas)) == gas
    assert gas.nitrogen + gas.oxygen + gas.helium == pytest.approx(1.0, abs=1e-12)


@pytest.mark.parametrize(
    "text",
    [
        "nitrox ３２",
        "mix O2=0.2_1",
        "mix O2=0.2 O2=0.3",
        "mix N2=0.7",
        "nitrox 132",
        "heliox 20/70",
        "trimix 60/50",
        "",
        "nitrox",
        "mix O2",
    ],
)
def test_gas_names_that_are_refused(text: str) -> None:
    with pytest.raises(GasphysError):
        Gas.parse(text)


def test_dry_air_has_its_argon() -> None:
    """CIPM-2007: O2 0.20939, Ar 0.009332; M 28.96546 g/mol at 400 ppm CO2; traces counted as nitrogen."""
    air = Gas.dry_air("cipm_2007")
    assert air.fraction("Ar") == 0.009332
    assert air.molar_mass == pytest.approx(28.96546, rel=2e-5)
    assert Gas.parse(str(air)) == air
    assert sum(air.fractions.values()) == pytest.approx(1.0, abs=1e-12)
    # CRC Handbook, 83rd edition: M 28.965 g/mol.
    assert Gas.dry_air("crc_83").molar_mass == pytest.approx(28.965, abs=1e-3)
