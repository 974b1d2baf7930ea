"""Effort and heat along exposures; the review's density and ventilatory reserve."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys import breathing, real_gas
from gasphys.errors import ExposureError, RangeError
from gasphys.limits import load

SURFACE = 160.0


def dive(**work):
    start = gp.Exposure.start("trimix 17/48", **work)
    return start.travel(depth=55, minutes=3).stay(10).travel(depth=20, minutes=4).switch("nitrox 48").stay(8)


def diver():
    return gp.Person(surface_maximum_ventilation_btps=SURFACE)


def test_effort_is_the_chain_of_equations_by_hand():
    ds = breathing.effort(dive(ventilation_btps=45.0), diver(), tidal_volume=2.0)
    row = ds.sel(time=8.0, method="nearest")
    pressure = float(row.ambient_pressure)
    density = real_gas.humid_density(pressure, "trimix 17/48", 37.0, "47 mmHg")
    air = real_gas.humid_density("1 atm", "air", 37.0, "47 mmHg")
    viscosity = real_gas.viscosity("trimix 17/48", 37.0, density) / real_gas.viscosity("air", 37.0, air)
    resistive = breathing.resistive_work(45.0, density / air, viscosity)
    assert float(row.resistive_work) == pytest.approx(resistive, rel=1e-9)
    assert float(row.work_of_breathing) == pytest.approx(resistive + 0.834, rel=1e-9)
    most = SURFACE * (density / air) ** -0.45
    assert float(row.maximum_ventilation_btps) == pytest.approx(most, rel=1e-9)
    assert float(row.sustainable_o2_uptake) == pytest.approx(0.7 * most / 25.0, rel=1e-9)
    assert float(row.ventilatory_reserve) == pytest.approx(1.0 - 45.0 / most, rel=1e-9)
    assert float(row.gas_density) == pytest.approx(
        real_gas.reference_density(pressure, "trimix 17/48"), rel=1e-12
    )


def test_air_at_the_surface_is_the_reference():
    ds = breathing.effort(gp.Exposure.start("air", ventilation_btps=62.5).stay(1), diver())
    assert float(ds.breathing_density_ratio[0]) == pytest.approx(1.0, rel=1e-12)
    assert float(ds.breathing_viscosity_ratio[0]) == pytest.approx(1.0, rel=1e-12)
    assert float(ds.resistive_work[0]) == pytest.approx(1.662, abs=5e-4)


def test_bands_hold_the_line_and_widen_with_density():
    ds = breathing.effort(dive(ventilation_btps=45.0), diver())
    for name in ("maximum_ventilation_btps", "sustainable_o2_uptake"):
        assert bool((ds[f"{name}_low"] <= ds[name]).all())
        assert bool((ds[name] <= ds[f"{name}_high"]).all())
    spread = ds.maximum_ventilation_btps_high / ds.maximum_ventilation_btps_low
    log = np.abs(np.log(ds.breathing_density_ratio.values))
    assert spread.values == pytest.approx(np.exp(0.1 * log), rel=1e-9)
    # Trimix at the surface is thinner than air: the ends of the band change places.
    assert float(ds.breathing_density_ratio.min()) < 1.0
    assert bool((ds.resistive_work_high > ds.resistive_work).all())


def test_ventilation_follows_from_uptake_where_it_is_not_given():
    ds = breathing.effort(dive(o2_uptake_stpd=1.6), diver())
    assert ds.ventilation_btps.values == pytest.approx(40.0, rel=1e-12)
    given = breathing.effort(dive(o2_uptake_stpd=1.6), diver(), ventilation_btps="30 L/min")
    assert float(given.ventilatory_reserve[2]) > float(ds.ventilatory_reserve[2])
    other = breathing.effort(dive(ventilation_btps=45.0), diver(), o2_uptake_stpd=1.0)
    assert float(other.ventilation_btps.max()) == 25.0
    with pytest.raises(ExposureError, match="o2_uptake_stpd"):
        breathing.effort(dive(), diver())
    with pytest.raises(RangeError, match="ventilation_btps"):
        breathing.effort(dive(), diver(), ventilation_btps=-4.0)
    with pytest.raises(RangeError, match="tidal_volume"):
        breathing.effort(dive(ventilation_btps=45.0), diver(), tidal_volume=100.0)


def test_what_is_assumed_is_named():
    assert (
        breathing.effort(dive(ventilation_btps=45.0)).attrs["assumed"]
        == "surface_maximum_ventilation_btps = 150"
    )
    assert breathing.effort(dive(ventilation_btps=45.0), diver()).attrs["assumed"] == ""
    assert breathing.effort(dive(ventilation_btps=45.0)).attrs["provenance"] == "memory_medium"


def test_a_loop_is_breathed_as_its_set_point_makes_it():
    on_loop = gp.Exposure.start("air", ventilation_btps=30.0).loop("1.3 bar", "trimix 17/48")
    ds = breathing.effort(on_loop.travel(pressure=650.0, minutes=4).stay(5), diver())
    row = ds.isel(time=-1)
    share = 130.0 / 650.0
    assert float(row.breathed_fraction.sel(gas="O2")) == pytest.approx(share, rel=1e-12)
    assert float(row.breathed_fraction.sel(gas="He")) == pytest.approx((1 - share) * 0.48 / 0.83, rel=1e-12)
    assert float(row.breathed_fraction.sum()) == pytest.approx(1.0, abs=1e-12)


@pytest.mark.parametrize(
    "name",
    [
        "resistive_work",
        "resistive_work_high",
        "work_of_breathing",
        "breathing_power",
        "o2_cost_of_breathing",
        "sustainable_o2_uptake_low",
        "ventilatory_reserve",
        "gas_density",
        "viscosity",
    ],
)
@pytest.mark.parametrize("time", [0.0, 8.0, 17.0])
def test_every_number_of_effort_is_explained(name, time):
    ds = breathing.effort(dive(o2_uptake_stpd=1.6), diver(), tidal_volume=1.8, at=[8.0])
    found = gp.explain(ds, name, time=time)
    assert found.value == pytest.approx(found.stored, rel=1e-12)


@pytest.mark.parametrize(
    "name", ["convective_heat_loss", "evaporative_heat_loss", "minimum_inspired_temperature"]
)
def test_every_number_of_heat_is_explained(name):
    deep = gp.Exposure.start("heliox 4/96", pressure=3101.325, ventilation_btps=30.0).stay(10)
    ds = breathing.heat_loss(deep, inspired_temperature="20 degC")
    found = gp.explain(ds, name, time=10.0)
    assert found.value == pytest.approx(found.stored, rel=1e-12)


def test_heat_grows_with_pressure_and_evaporation_does_not():
    start = gp.Exposure.start("heliox 10/90", ventilation_btps=30.0).stay(1)
    ds = breathing.heat_loss(start.travel(pressure=1013.25, minutes=5), inspired_temperature=20.0)
    assert float(ds.convective_heat_loss[-1] / ds.convective_heat_loss[0]) == pytest.approx(10.0, rel=1e-9)
    assert float(ds.evaporative_heat_loss[-1]) == pytest.approx(float(ds.evaporative_heat_loss[0]), rel=1e-12)
    # The remembered table speaks of 350 fsw and more, and of helium.
    assert np.isnan(ds.minimum_inspired_temperature.values[0])
    assert "expired_temperature = 30.4" in ds.attrs["assumed"]
    air = gp.Exposure.start("air", ventilation_btps=30.0).stay(1)
    assert "minimum_inspired_temperature" not in breathing.heat_loss(air, inspired_temperature=20.0)
    with pytest.raises(RangeError, match="inspired_temperature"):
        breathing.heat_loss(air, inspired_temperature=200.0)


def test_scenarios_and_pressures_agree_with_single_runs():
    pressures = [101.325, 405.3, 810.6]
    ds = breathing.gas_effort("trimix 17/48", pressures, person=diver(), o2_uptake_stpd=1.5)
    for p in pressures:
        one = gp.Exposure.start("trimix 17/48", pressure=p, o2_uptake_stpd=1.5).stay(1)
        single = breathing.effort(one, diver()).isel(time=0)
        for name in ("resistive_work", "sustainable_o2_uptake_high", "gas_density"):
            assert float(ds[name].sel(ambient_pressure=p)) == pytest.approx(float(single[name]), rel=1e-12)


@pytest.mark.parametrize("engine", ["scipy", "h5netcdf"])
def test_effort_survives_a_file(tmp_path, engine):
    ds = breathing.effort(dive(ventilation_btps=45.0), diver())
    ds.to_netcdf(tmp_path / "effort.nc", engine=engine)
    with xr.open_dataset(tmp_path / "effort.nc", engine=engine) as back:
        xr.testing.assert_identical(back.load(), ds)


# -- review ----------------------------------------------------------------------------------------


def test_the_density_reviewed_is_the_one_the_limits_were_made_with():
    """Quoted as air at 31 and 39 m: 30.6 and 38.4 msw with true air, argon in it."""
    air = gp.Gas(oxygen=0.2096, argon=0.0092)
    for name, depth in (("density_recommended", 30.6), ("density_maximum", 38.4)):
        found = gp.review(gp.Exposure.start(air).travel(depth=60, minutes=60))
        crossing = float(found.first_crossing.sel(limit=name))
        assert crossing == pytest.approx(depth, abs=0.05)
        pressure = 101.325 + 10.0 * crossing
        limit = next(x for x in load() if x.id == name)
        assert real_gas.reference_density(pressure, air) == pytest.approx(limit.value, rel=1e-9)


def test_reserve_is_judged_where_person_and_work_are_known():
    ds = gp.review(dive(o2_uptake_stpd=1.6), diver())
    row = ds.sel(limit="ventilation_sustained_60")
    effort = breathing.effort(dive(o2_uptake_stpd=1.6), diver())
    assert float(row.worst) == pytest.approx(float(effort.ventilatory_reserve.min()), rel=1e-9)
    assert str(row.status.values) == "within"
    hard = gp.review(dive(o2_uptake_stpd=2.6), diver())
    assert str(hard.status.sel(limit="ventilation_sustained_60").values) == "beyond"
    assert str(hard.status.sel(limit="ventilation_sustained_80").values) == "within"
    crossing = float(hard.first_crossing.sel(limit="ventilation_sustained_60"))
    there = breathing.effort(dive(o2_uptake_stpd=2.6), diver(), at=[crossing])
    assert float(there.ventilatory_reserve.sel(time=crossing)) == pytest.approx(0.4, rel=1e-7)


@pytest.mark.parametrize(
    ("work", "person", "reason"),
    [
        ({"o2_uptake_stpd": 1.5}, None, "not measured"),
        ({"o2_uptake_stpd": 1.5}, gp.Person(), "not measured"),
        ({}, gp.Person(surface_maximum_ventilation_btps=150.0), "not given"),
    ],
)
def test_reserve_is_not_judged_on_assumptions(work, person, reason):
    row = gp.review(dive(**work), person).sel(limit="ventilation_sustained_60")
    assert str(row.status.values) == "not judged"
    assert reason in str(row.reason.values)


def test_the_work_of_an_apparatus_is_measured_not_computed():
    row = gp.review(dive(o2_uptake_stpd=1.5), diver()).sel(limit="external_work_warkander_2007")
    assert str(row.status.values) == "not judged"
    assert "compare_apparatus" in str(row.reason.values)


@pytest.mark.parametrize("name", ["worst", "margin", "first_crossing", "time_of_worst"])
@pytest.mark.parametrize("limit", ["ventilation_sustained_60", "density_recommended"])
def test_reviewed_numbers_are_explained(name, limit):
    ds = gp.review(dive(o2_uptake_stpd=2.6).stay(1).travel(depth=70, minutes=5), diver())
    found = gp.explain(ds, name, limit=limit)
    assert found.value == pytest.approx(found.stored, rel=1e-9)
    assert found.steps
